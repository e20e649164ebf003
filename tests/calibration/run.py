"""Makes the calibration figures that the repository keeps: ``python -m tests.calibration.run``.

Writes ``figures.csv`` and ``figures.md`` beside this file (under a minute on two cores).
"""

from __future__ import annotations

import argparse
import csv
import datetime
import platform
from pathlib import Path

import numpy as np

from tests.calibration.lockstep import CELLS, run_cell

HERE = Path(__file__).parent


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--studies", type=int, default=4000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--out", type=Path, default=HERE)
    args = parser.parse_args()
    results = [run_cell(cell, args.studies, args.seed) for cell in CELLS]
    with open(args.out / "figures.csv", "w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(
            [
                "origin",
                "shared",
                "spread",
                "condition_error",
                "studies",
                "textbook_false",
                "textbook_cover",
                "score_false",
                "score_cover",
                "interval_cover",
                "excluded",
            ]
        )
        for r in results:
            c = r.cell
            writer.writerow(
                [c.origin, "3 runs" if c.shared else "no", c.spread, c.condition_error, r.studies]
                + [f"{x:.3f}" for x in (r.textbook_false, r.textbook_cover, r.score_false)]
                + [f"{x:.3f}" for x in (r.score_cover, r.interval_cover)]
                + [r.excluded]
            )
    lines = [
        "# Size and coverage in lockstep",
        "",
        f"{args.studies} studies a cell, seed {args.seed}, {datetime.date.today().isoformat()}, "
        f"{platform.machine()}, Python {platform.python_version()}, numpy {np.__version__}. Made by "
        "`python -m tests.calibration.run`.",
        "",
        "r = k_A A + k_B B, k_B = 0, B = 2.5 A (1 + spread N(0,1)), 12 runs, rate error 1 %. Fraction of "
        "studies that falsely claim that the rate depends on B (textbook: F two-sided at 5 % and "
        "k_B > 0, nominal 2.5 %; reconciled score: one-sided at 5 %), and coverage of the true k_B: "
        "textbook 95 % interval, acceptance of the two-sided score at 95 %, and the interval as "
        "printed (guarded, one-sided at the edge). One binomial standard error at 5 % is "
        f"{100 * (0.05 * 0.95 / args.studies) ** 0.5:.1f} %.",
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
            f"{100 * r.textbook_false:.1f} % | {r.textbook_cover:.3f} | {100 * r.score_false:.1f} % | "
            f"{r.score_cover:.3f} | {r.interval_cover:.3f} |"
        )
    (args.out / "figures.md").write_text("\n".join(lines) + "\n", encoding="utf-8")
    print("\n".join(lines))


if __name__ == "__main__":
    main()
