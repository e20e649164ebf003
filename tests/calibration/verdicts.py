"""Verdicts of whole studies, through the study file and everything behind it.

Two pathways, r = k_A A + k_B B, 12 runs, concentrations measured, rate error 1 %. B matters above
5 % of the rate. A verdict is wrong when it is `participates` though k_B = 0, or `negligible`
though B carries more than 5 % in some run.
"""

from __future__ import annotations

import tempfile
from collections import Counter
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from discrim.study import load
from discrim.weigh.run import run

RUNS = 12
STUDY = """\
title = "Two pathways"
table = "runs.csv"
[columns.a]
is = "A"
units = "mmol/L"
error = {{ sd = "{error}", origin = "{origin}" }}
[columns.b]
is = "B"
units = "mmol/L"
error = {{ sd = "{error}", origin = "{origin}" }}
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
error = "1 %"
[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"
[[questions]]
participates = "B"
matters_above = "5 %"
"""


@dataclass(frozen=True)
class VerdictCell:
    """``share``: what B carries of the rate in an average run."""

    spread: float
    condition_error: float
    share: float
    origin: str = "measured"


@dataclass(frozen=True)
class VerdictResult:
    cell: VerdictCell
    studies: int
    counts: Counter[str]

    @property
    def wrong_count(self) -> int:
        return self.counts["participates" if self.cell.share == 0 else "negligible"]

    @property
    def wrong(self) -> float:
        return self.wrong_count / self.studies


def run_verdicts(cell: VerdictCell, studies: int, seed: int) -> VerdictResult:
    rng = np.random.default_rng([seed, round(1e4 * cell.spread), round(100 * cell.share)])
    counts: Counter[str] = Counter()
    e = cell.condition_error
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "study.toml"
        path.write_text(STUDY.format(error=f"{100 * e:g} %", origin=cell.origin), encoding="utf-8")
        for _ in range(studies):
            a = rng.uniform(5.0, 20.0, RUNS)
            b = 2.5 * a * (1 + cell.spread * rng.standard_normal(RUNS))
            b = np.maximum(b, 0.05 * a)
            k_b = 3.0 * cell.share / (1 - cell.share) / 2.5
            shaken_a = a * (1 + e * rng.standard_normal(RUNS))
            shaken_b = b * (1 + e * rng.standard_normal(RUNS))
            true, shown = ((a, b), (shaken_a, shaken_b))
            if cell.origin == "set":
                true, shown = shown, true
            rate = (3.0 * true[0] + k_b * true[1]) * (1 + 0.01 * rng.standard_normal(RUNS))
            rows = "".join(
                f"{x:.5g},{y:.5g},{r:.6g}\n" for x, y, r in zip(*shown, rate, strict=True)
            )
            (path.parent / "runs.csv").write_text("a,b,rate\n" + rows, encoding="utf-8")
            counts[
                run(load(path), seed=1, lattices=False, one_by_one=False).answers[0].verdict.outcome
            ] += 1
    return VerdictResult(cell, studies, counts)


VERDICT_CELLS = (
    VerdictCell(0.003, 0.02, 0.0),
    VerdictCell(0.01, 0.02, 0.0),
    VerdictCell(0.05, 0.02, 0.0),
    VerdictCell(0.5, 0.01, 0.0),
    VerdictCell(0.003, 0.02, 0.2),
    VerdictCell(0.05, 0.02, 0.2),
    VerdictCell(0.5, 0.01, 0.2),
    VerdictCell(0.5, 0.01, 0.06),
    VerdictCell(0.01, 0.02, 0.0, "set"),
    VerdictCell(0.1, 0.02, 0.06, "set"),
)
