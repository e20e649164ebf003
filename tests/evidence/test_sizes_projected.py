"""Size of the test of a third pathway where the other two are in lockstep with one another.

r = k_A A + k_C C + k_B B with k_B = k_C = 0, C = 2 A (1 + 2 % d), B = 2.5 A (1 - 30 % d) with the same
normal d: B moves along the one direction in which A and C are not told apart. Concentrations measured
within 3 %, invented tables drawn with a seed.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy import stats

from discrim.evidence.projected import TOLD_APART, reach, weak_nuisance
from discrim.evidence.score import score
from discrim.fit.engine import solve
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution
from tests.reference.outside import predictor, symbols

k_A, k_B, k_C, A, B, C = symbols("k_A k_B k_C A B C")
N = 30


def drawn(studies: int, spread: float, error: float, seed: int) -> tuple[Problem, Solution]:
    """A batch and its restricted fits at k_B = 0."""
    rng = np.random.default_rng(seed)
    a = rng.uniform(0.5, 2.0, (studies, N))
    d = rng.standard_normal((studies, N))
    true = np.stack(
        [a, 2.5 * a * np.maximum(1 - 0.3 * d, 0.02), 2 * a * np.maximum(1 + spread * d, 0.02)], 2
    )
    y = 3.0 * a * (1 + 0.01 * rng.standard_normal((studies, N)))
    shown = true * (1 + error * rng.standard_normal(true.shape))
    sources = (
        source(OBSERVATION, N, relative=0.01),
        *(source(j, N, relative=error, origin="measured") for j in range(3)),
    )
    law = predictor(k_A * A + k_B * B + k_C * C, (k_A, k_B, k_C), (A, B, C), N)
    problem = Problem(law, Measurements(y, shown, sources, Scale.STATED, ("A", "B", "C")))
    starts = np.tile([3.0, 0.0, 0.0], (studies, 1))
    return problem, solve(problem, starts, fixed=np.array([False, True, False]))


def test_the_projected_form_holds_its_level() -> None:
    """The plain form claims B in over 12 % of the studies, the projected one in 5 % at most."""
    studies = 400
    problem, held = drawn(studies, 0.02, 0.03, 3)
    z = score(problem, held, 1).z
    assert (z > stats.norm.ppf(0.95)).mean() > 0.12
    false = 0
    for i in np.flatnonzero(z > stats.norm.ppf(0.96)):
        table = replace(problem.data, y=problem.data.y[i], conditions=problem.data.conditions[i])
        one, at = Problem(problem.predictor, table), held.take(np.array([i]))
        weak = weak_nuisance(one, at, 1)
        assert weak.count == 1
        found = reach(one, at, (1,), weak, lambda p, s: score(p, s, 1).z, outside=0.01)
        false += not (found.low[0] <= stats.norm.ppf(0.96))
    assert stats.binomtest(false, studies, 0.06, alternative="greater").pvalue > 0.001


def test_constants_that_are_told_apart_are_left_alone() -> None:
    """With A and C 50 % apart and 1 % errors nothing is projected, so nothing is lost."""
    problem, held = drawn(20, 0.5, 0.01, 4)
    for i in range(20):
        table = replace(problem.data, y=problem.data.y[i], conditions=problem.data.conditions[i])
        weak = weak_nuisance(Problem(problem.predictor, table), held.take(np.array([i])), 1)
        assert weak.count == 0
        assert weak.ratio > TOLD_APART
