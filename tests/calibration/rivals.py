"""How often the true law stands among its rivals: Langmuir-type laws of a bimolecular surface reaction.

The true law is one of the candidates; the rest are rivals, some of which contain it. What is
counted is how often the true law is rejected, for stated errors and for a variance estimated from
the fit.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import sympy

from discrim.evidence.rivals import standing
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

RUNS = 20


@dataclass(frozen=True)
class RivalCell:
    """``true``: index of the true law; ``stated``: whether the rate error is stated."""

    true: int
    stated: bool
    rate_error: float = 0.04


@dataclass(frozen=True)
class RivalResult:
    cell: RivalCell
    studies: int
    true_stands: float
    mean_standing: float


def laws() -> tuple[list[RatePredictor], list[np.ndarray], list[set[int]]]:
    """Predictors, true constants, and for each law the laws that it contains."""
    k, k_a, k_b, k_c, a, b, c = sympy.symbols("k K_A K_B K_C a b c")
    forms = [
        (k * a * b, [k], [0.8]),
        (k * a * b / (1 + k_a * a), [k, k_a], [2.0, 1.0]),
        (k * a * b / (1 + k_a * a + k_b * b), [k, k_a, k_b], [2.0, 1.0, 0.6]),
        (k * a * b / (1 + k_a * a + k_b * b) ** 2, [k, k_a, k_b], [4.0, 0.7, 0.5]),
        (k * a * b / (1 + k_a * a + k_c * c), [k, k_a, k_c], [2.0, 1.0, 0.8]),
    ]
    contained = [set(), {0}, {0, 1}, {0}, {0, 1}]
    predictors, truth = [], []
    for expression, constants, values in forms:
        p = len(constants)
        predictors.append(
            RatePredictor(
                [CompiledLaw(expression, constants, [a, b, c])],
                np.zeros(RUNS, int),
                names=tuple(map(str, constants)),
                lower=np.zeros(p),
                upper=np.full(p, np.inf),
                linear=np.array([True] + [False] * (p - 1)),
                scale=np.ones(p),
                starts=np.zeros((0, p)),
            )
        )
        truth.append(np.array(values))
    return predictors, truth, contained


def run_rivals(cell: RivalCell, studies: int, seed: int, alpha: float = 0.05) -> RivalResult:
    predictors, truth, contained = laws()
    contains = {(j, i): True for j, those in enumerate(contained) for i in those}
    rng = np.random.default_rng([seed, cell.true, int(cell.stated)])
    stands = 0
    count = 0
    for _ in range(studies):
        conditions = 10 ** rng.uniform(-1, 0.7, (RUNS, 3))
        f = predictors[cell.true].predict(truth[cell.true][None], conditions, constants=False)
        y = f.values[0] * (1 + cell.rate_error * rng.standard_normal(RUNS))
        sources = (source(OBSERVATION, RUNS, relative=cell.rate_error),) if cell.stated else ()
        if not cell.stated:  # a constant variance, as an unweighted fit supposes
            sd = cell.rate_error * float(np.mean(f.values[0]))
            y = f.values[0] + sd * rng.standard_normal(RUNS)
        scale = Scale.STATED if cell.stated else Scale.ESTIMATED
        data = Measurements(y, conditions, sources, scale, ("a", "b", "c"))
        fits = [fit(p, data, starts=8, seed=1) for p in predictors]
        result = standing(fits, contains, {}, alpha=alpha, seed=1)
        stands += result[cell.true].stands
        count += sum(r.stands for r in result)
    return RivalResult(cell, studies, stands / studies, count / studies)


RIVAL_CELLS = tuple(RivalCell(t, stated) for stated in (True, False) for t in (1, 2, 3))
