"""Makes the calibration figures that the repository keeps: ``python -m tests.calibration.run``.

Writes ``figures.csv`` (size and coverage in lockstep) and ``figures.md`` (all tables) beside this file,
in about six minutes on two cores; ``--only lockstep`` takes seconds and prints its table
without writing.
"""

from __future__ import annotations

import argparse
import csv
import datetime
import os
import platform
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np

from tests.calibration.lockstep import CELLS, Result, run_cell
from tests.calibration.rivals import RIVAL_CELLS, run_rivals
from tests.calibration.terms import SCALE_CELLS, WEAK_CELLS, run_scale, run_weak
from tests.calibration.verdicts import VERDICT_CELLS, run_verdicts

HERE = Path(__file__).parent


def head(seed: int) -> list[str]:
    return [
        "# Calibration",
        "",
        f"Seed {seed}, {datetime.date.today().isoformat()}, {platform.machine()}, {os.cpu_count()} "
        f"cores, Python {platform.python_version()}, numpy {np.__version__}. Made by "
        "`python -m tests.calibration.run`. The answer does not depend on the number of processes.",
        "",
    ]


def lockstep(studies: int, seed: int, pool: ProcessPoolExecutor) -> tuple[list[str], list[Result]]:
    n = len(CELLS)
    results = list(pool.map(run_cell, CELLS, [studies] * n, [seed] * n))
    lines = [
        "## Size and coverage in lockstep",
        "",
        f"{studies} studies a cell. r = k_A A + k_B B, k_B = 0, B = 2.5 A (1 + spread N(0,1)), 12 runs, "
        "rate error 1 %. Fraction of studies that falsely claim that the rate depends on B (textbook: "
        "F two-sided at 5 % and k_B > 0, nominal 2.5 %; reconciled score: one-sided at 5 %), and "
        "coverage of the true k_B: textbook 95 % interval, acceptance of the two-sided score at 95 %, "
        "and the interval as printed (guarded, one-sided at the edge). One binomial standard error at "
        f"5 % is {100 * (0.05 * 0.95 / studies) ** 0.5:.1f} %.",
        "",
        "| origin of condition errors | spread of B/A | condition error | textbook F false | cover | "
        "score false | score cover | interval cover |",
        "| --- | --- | --- | --- | --- | --- | --- | --- |",
    ]
    for r in results:
        c = r.cell
        origin = c.origin + (", A shared by 3 runs" if c.shared else "")
        lines.append(
            f"| {origin} | {100 * c.spread:g} % | {100 * c.condition_error:g} % | "
            f"{100 * r.textbook_false:.1f} % | {r.textbook_cover:.3f} | "
            f"{100 * r.score_false:.1f} % | {r.score_cover:.3f} | {r.interval_cover:.3f} |"
        )
    return [*lines, ""], results


def terms(studies: int, seed: int, pool: ProcessPoolExecutor) -> list[str]:
    scale = pool.map(
        run_scale, SCALE_CELLS, [studies] * len(SCALE_CELLS), [seed] * len(SCALE_CELLS)
    )
    weak = pool.map(run_weak, WEAK_CELLS, [studies] * len(WEAK_CELLS), [seed] * len(WEAK_CELLS))
    lines = [
        "## Variance of the rates unknown",
        "",
        f"{studies} studies a cell. Two pathways, k_B = 0, B = 2.5 A (1 + 2 % N(0,1)), concentration errors "
        "3 %, no stated error of the rate. Fraction of studies that falsely claim B, one-sided at 5 %, by "
        "the number of runs.",
        "",
        "| origin of condition errors | error of A shared by | rate error | 6 runs | 12 runs | 30 runs |",
        "| --- | --- | --- | --- | --- | --- |",
    ]
    rows: dict[tuple[str, int, float], list[float]] = {}
    for c, x in zip(SCALE_CELLS, scale, strict=True):
        rows.setdefault((c.origin, c.together, c.rate_error), []).append(x)
    words = {0: "all runs", 1: "no two runs", 3: "3 runs"}
    for (origin, together, rate_error), false in rows.items():
        shown = " | ".join(f"{100 * x:.1f} %" for x in false)
        lines.append(f"| {origin} | {words[together]} | {100 * rate_error:g} % | {shown} |")
    lines += [
        "",
        "## Two other pathways in lockstep with one another",
        "",
        f"{studies} studies a cell. r = k_A A + k_C C + k_B B, only k_A is not zero, C = 2 A (1 + spread d), "
        "B = 2.5 A (1 ± 30 % d) with the same d, concentrations measured, rate error 1 %. False claims of "
        "B, one-sided at 5 %, by the plain score and by the projected one, which is used where A and C are "
        "not told apart (the plain one elsewhere).",
        "",
        "| runs | spread of C/A | condition error | B moves | plain | projected |",
        "| --- | --- | --- | --- | --- | --- |",
    ]
    for w, (plain, used) in zip(WEAK_CELLS, weak, strict=True):
        lines.append(
            f"| {w.runs} | {100 * w.spread:g} % | {100 * w.condition_error:g} % | "
            f"{'with C' if w.sign > 0 else 'against C'} | {100 * plain:.1f} % | {100 * used:.1f} % |"
        )
    return [*lines, ""]


def rivals(studies: int, seed: int, pool: ProcessPoolExecutor) -> list[str]:
    n = len(RIVAL_CELLS)
    results = pool.map(run_rivals, RIVAL_CELLS, [studies] * n, [seed] * n)
    lines = [
        "## The true law among its rivals",
        "",
        f"{studies} studies a cell, five laws of a surface reaction, 20 runs, rate error 4 %, 95 % asked: "
        "how often the true law stands, and how many of the five stand.",
        "",
        "| true law | rate error | true law stands | laws that stand, mean |",
        "| --- | --- | --- | --- |",
    ]
    names = ["k A B", "A adsorbed", "A and B adsorbed, one site", "A and B adsorbed, two sites"]
    for r in results:
        lines.append(
            f"| {names[r.cell.true]} | {'stated' if r.cell.stated else 'estimated'} | "
            f"{r.true_stands:.3f} | {r.mean_standing:.1f} |"
        )
    return [*lines, ""]


def verdicts(studies: int, seed: int, pool: ProcessPoolExecutor) -> list[str]:
    n = len(VERDICT_CELLS)
    results = pool.map(run_verdicts, VERDICT_CELLS, [studies] * n, [seed] * n)
    lines = [
        "## Verdicts of whole studies",
        "",
        f"{studies} studies a cell through the study file and everything behind it: two pathways, 12 runs, "
        "rate error 1 %, B matters above 5 %. Wrong is `participates` where B carries nothing, "
        "`negligible` where it carries more than 5 %.",
        "",
        "| B carries | spread of B/A | condition error, origin | participates | negligible | "
        "undecided | wrong |",
        "| --- | --- | --- | --- | --- | --- | --- |",
    ]
    for r in results:
        c = r.cell
        shares = [
            f"{100 * r.counts[w] / studies:.0f} %"
            for w in ("participates", "negligible", "undecided")
        ]
        lines.append(
            f"| {100 * c.share:g} % | {100 * c.spread:g} % | {100 * c.condition_error:g} %, {c.origin} | "
            + " | ".join(shares)
            + f" | {100 * r.wrong:.1f} % |"
        )
    return [*lines, ""]


def write_csv(results: Sequence[Result]) -> None:
    with open(HERE / "figures.csv", "w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(
            (
                "origin shared spread condition_error studies textbook_false textbook_cover "
                "score_false score_cover interval_cover excluded"
            ).split()
        )
        for r in results:
            c = r.cell
            shown = (r.textbook_false, r.textbook_cover, r.score_false, r.score_cover)
            writer.writerow(
                [c.origin, "3 runs" if c.shared else "no", c.spread, c.condition_error, r.studies]
                + [f"{x:.3f}" for x in (*shown, r.interval_cover)]
                + [r.excluded]
            )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--only", choices=["lockstep", "terms", "rivals", "verdicts"])
    parser.add_argument("--studies", type=int, default=4000, help="a cell, of the lockstep table")
    parser.add_argument("--whole", type=int, default=150, help="a cell, of whole studies")
    parser.add_argument("--seed", type=int, default=1)
    args = parser.parse_args()
    lines = head(args.seed)
    results: list[Result] = []
    with ProcessPoolExecutor() as pool:
        if args.only in (None, "lockstep"):
            table, results = lockstep(args.studies, args.seed, pool)
            lines += table
        if args.only in (None, "terms"):
            lines += terms(args.studies, args.seed, pool)
        if args.only in (None, "rivals"):
            lines += rivals(args.whole, args.seed, pool)
        if args.only in (None, "verdicts"):
            lines += verdicts(args.whole, args.seed, pool)
    text = "\n".join(lines).rstrip() + "\n"
    if args.only is None:
        (HERE / "figures.md").write_text(text, encoding="utf-8")
        write_csv(results)
    print(text)


if __name__ == "__main__":
    main()
