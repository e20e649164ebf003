"""Makes the calibration figures that the repository keeps: ``python -m tests.calibration.run``.

Writes ``figures.md``, ``figures.csv`` and ``size_by_spread.svg`` beside this file, each part as it is
finished, so that an interruption loses one part at most; ``--only PART`` makes one part anew and leaves
the others. How long each part took is said below it.
"""

from __future__ import annotations

import argparse
import datetime
import multiprocessing
import os
import platform
import sys
import time
from collections.abc import Callable, Sequence
from concurrent.futures import Executor, ProcessPoolExecutor
from typing import TypeVar

import numpy as np

from tests.calibration.cells import COVERAGE_CELLS, NEGLIGIBLE_CELLS, POWER_CELLS, SIZE_GROUPS
from tests.calibration.coverage import run_coverage, run_negligible
from tests.calibration.figure import size_by_spread
from tests.calibration.power import run_power
from tests.calibration.record import HERE, keep
from tests.calibration.rivals import RIVAL_CELLS, run_rivals
from tests.calibration.sections import (
    Row,
    cells_section,
    csv_rows,
    power_section,
    rivals_section,
    trial_section,
    verdicts_section,
)
from tests.calibration.size import run_size
from tests.calibration.trial import tried
from tests.calibration.verdicts import VERDICT_CELLS, run_verdicts

R = TypeVar("R")
AIC = ("AIC by 2", "AIC by 4")
WHOLE = 10  # studies of a cell whose interval or bound is computed besides


class Work:
    """Cells given to the workers, in order, with a word on how far it is."""

    def __init__(self, pool: Executor, seed: int, scale: float, write: bool) -> None:
        self.pool, self.seed, self.scale, self.write = pool, seed, scale, write

    def studies(self, usual: float) -> int:
        return max(round(usual * self.scale), 4)

    def each(self, do: Callable[..., R], what: str, *lists: Sequence[object]) -> list[R]:
        out = []
        for k, result in enumerate(self.pool.map(do, *lists)):
            out.append(result)
            print(f"\r{what}: {k + 1} of {len(lists[0])}", end="", file=sys.stderr, flush=True)
        print(file=sys.stderr)
        return out


Made = tuple[list[str], list[Row]]


def size(work: Work) -> Made:
    cells = [c for group in SIZE_GROUPS.values() for c in group]
    n = work.studies(2000)
    results = work.each(run_size, "size", cells, [n] * len(cells), [work.seed] * len(cells))
    at = iter(results)
    groups = {name: [next(at) for _ in group] for name, group in SIZE_GROUPS.items()}
    if work.write:
        size_by_spread(results, HERE / "size_by_spread.svg")
    intro = [
        "## False claims of a term that is absent",
        "",
        f"{n} studies a cell, α = 5 % one-sided (an order: two-sided). `discrim`: its own test as verdicts "
        "use it. Beside it, on the same studies: K (the score alone) and the conditional likelihood ratio "
        "without the form for constants in lockstep; the textbook F test with exact conditions (two-sided "
        "5 % and a positive estimate); the likelihood ratio of the errors-in-variables fit (one-sided "
        "5 %); a lower AIC by 2 and by 4. One binomial standard error at 5 % is "
        f"{100 * (0.05 * 0.95 / n) ** 0.5:.1f} %. Laws and designs: `laws.py`.",
    ]
    methods = ("discrim", "K", "conditional", "textbook F", "likelihood ratio", *AIC)
    return cells_section(intro, groups, methods, "false claims"), csv_rows("size", results)


def coverage(work: Work) -> Made:
    n, m = work.studies(2000), len(COVERAGE_CELLS)
    whole = min(WHOLE, n)
    results = work.each(
        run_coverage, "coverage", COVERAGE_CELLS, [n] * m, [work.seed] * m, [whole] * m
    )
    intro = [
        "## Intervals that miss the true value",
        "",
        f"{n} studies a cell, 95 % intervals of a constant whose term carries a share of the rate. "
        "`discrim`: the reconciled interval; the textbook and the likelihood ratio intervals beside it.",
    ]
    methods = ("discrim", "K", "conditional", "textbook F", "likelihood ratio")
    lines = cells_section(intro, {"all": results}, methods, "misses", with_share=True)
    return lines, csv_rows("coverage", results)


def negligible(work: Work) -> Made:
    n, m = work.studies(2000), len(NEGLIGIBLE_CELLS)
    whole = min(WHOLE, n)
    results = work.each(
        run_negligible, "negligible", NEGLIGIBLE_CELLS, [n] * m, [work.seed] * m, [whole] * m
    )
    intro = [
        "## False `negligible`",
        "",
        f"{n} studies a cell; the true effect at named conditions is just over what matters. How often its "
        "one-sided 95 % bound is below.",
    ]
    lines = cells_section(
        intro, {"all": results}, ("discrim", "conditional"), "false claims", with_share=True
    )
    return lines, csv_rows("negligible", results)


def power(work: Work) -> Made:
    n, m = work.studies(1000), len(POWER_CELLS)
    results = work.each(run_power, "power", POWER_CELLS, [n] * m, [work.seed] * m)
    intro = [
        "## Effects that are found",
        "",
        f"{n} studies a cell. The oracle knows the true sensitivities, the law and all errors, and sees "
        "the same tables; unless a share is given, the effect is one that it finds in four studies of "
        "five.",
    ]
    return power_section(intro, results), csv_rows("power", results, bar=None)


def rivals(work: Work) -> Made:
    n = [work.studies(400 * c.studies) for c in RIVAL_CELLS]
    results = work.each(run_rivals, "rivals", RIVAL_CELLS, n, [work.seed] * len(n))
    intro = [
        "## The true law among its rivals",
        "",
        "3 to 100 laws of a surface reaction, 20 runs, rate error 4 %, 95 % asked: how often the true law "
        "stands, and how often its AIC is behind the best by 4 or more.",
    ]
    return rivals_section(intro, results)


def verdicts(work: Work) -> Made:
    n, m = work.studies(80), len(VERDICT_CELLS)
    results = work.each(run_verdicts, "verdicts", VERDICT_CELLS, [n] * m, [work.seed] * m)
    intro = [
        "## Verdicts of whole studies",
        "",
        f"{n} studies a cell through the study file and everything behind it: two pathways, 12 runs, rate "
        "error 1 %, B matters above 5 %. Wrong is `participates` where B carries nothing, `negligible` "
        "where it carries more than 5 %.",
    ]
    return verdicts_section(intro, results), []


def trial(work: Work) -> Made:
    n = work.studies(300)
    results = work.each(tried, "trial", [work.seed] * n, range(n))
    intro = [
        "## Randomised trial",
        "",
        "Studies of mixed design through the study file and everything behind it: lockstep to orthogonal, "
        "conditions set, measured, mixed or of unsaid origin, errors shared by runs, 2 to 40 runs, one to "
        "three candidates (parallel pathways, Langmuir laws), variance of the rates stated, unknown or "
        "from replicates; half of them without an effect of B. Design: `trial_design.py`. Listed are all "
        "wrong verdicts, and what the oracle decides in well-spread studies (spread of B/A over 10 % and "
        "ten times the condition error) and discrim does not.",
    ]
    return trial_section(intro, work.seed, results), []


PARTS: dict[str, Callable[[Work], Made]] = {
    "size": size,
    "coverage": coverage,
    "negligible": negligible,
    "power": power,
    "rivals": rivals,
    "verdicts": verdicts,
    "trial": trial,
}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--only", choices=list(PARTS), action="append", help="repeat for several")
    parser.add_argument("--studies", type=float, default=1.0, help="part of the usual numbers")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=os.cpu_count() or 1)
    parser.add_argument("--print", action="store_true", help="print, write nothing")
    args = parser.parse_args()
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ[name] = "1"  # the workers use all cores as they are
    spawn = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(args.workers, mp_context=spawn, initializer=_quiet) as pool:
        work = Work(pool, args.seed, args.studies, not args.print)
        for part in args.only or PARTS:
            begin = time.monotonic()
            lines, rows = PARTS[part](work)
            made = (
                f"Seed {args.seed}, {datetime.date.today().isoformat()}, {platform.machine()}, "
                f"{args.workers} processes, {(time.monotonic() - begin) / 60:.1f} minutes, Python "
                f"{platform.python_version()}, numpy {np.__version__}."
            )
            lines = [*lines, "", made]
            if args.print:
                print("\n".join(lines) + "\n")
            else:
                keep(part, lines, rows, list(PARTS))


def _quiet() -> None:
    """Trial steps may run to where a law overflows, as in `weigh`."""
    np.seterr(over="ignore", invalid="ignore", divide="ignore")


if __name__ == "__main__":
    main()
