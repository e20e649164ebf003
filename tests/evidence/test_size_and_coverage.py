"""A short seeded calibration: size of the score test and coverage of its interval in lockstep.

r = k_A A + k_B B, B = 2.5 A (1 + spread N(0, 1)), 12 runs, 1 % error of the rate, invented. True
numbers are known because they are drawn; bounds are binomial. The long run is in
``tests/calibration``.
"""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.curve import Curve
from discrim.evidence.intervals import along, guard_level, standard_errors
from discrim.evidence.score import score
from discrim.fit.engine import solve
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution
from discrim.reactor.rates import RatePredictor
from tests.reference.outside import predictor, symbols

N = 12
K_A = 3.0
SPENT = guard_level(0.05)
k_A, k_B, A, B = symbols("k_A k_B A B")


class Cell(NamedTuple):
    """Origins of the errors of A and B; whether every three runs share the error of A."""

    spread: float
    error: float
    origins: tuple[str, str]
    shared: bool


CELLS = [
    Cell(0.01, 0.02, ("measured", "measured"), False),
    Cell(0.01, 0.02, ("set", "set"), False),
    Cell(0.01, 0.02, ("measured", "set"), False),
    Cell(0.02, 0.01, ("set", "set"), True),
]


def law(lower: float = 0.0) -> RatePredictor:
    return predictor(k_A * A + k_B * B, (k_A, k_B), (A, B), N, lower=lower)


def draw(cell: Cell, studies: int, k_b: float, seed: int) -> Measurements:
    """``studies`` tables as one batch: y (S, N), conditions (S, N, 2)."""
    rng = np.random.default_rng(seed)
    groups = np.arange(N) // 3 if cell.shared else np.arange(N)
    a = rng.uniform(0.5, 2.0, (studies, N))
    nominal = [a, 2.5 * a * (1 + cell.spread * rng.standard_normal((studies, N)))]
    truth, shown, sources = [], [], [source(OBSERVATION, N, relative=0.01)]
    for j, (origin, g) in enumerate(zip(cell.origins, (groups, np.arange(N)), strict=True)):
        noise = rng.standard_normal((studies, g.max() + 1))[:, g]
        shaken = nominal[j] * (1 + cell.error * noise)
        truth.append(shaken if origin == "set" else nominal[j])
        shown.append(nominal[j] if origin == "set" else shaken)
        sources.append(source(j, N, relative=cell.error, origin=origin, groups=g))
    rate = K_A * truth[0] + k_b * truth[1]
    y = rate * (1 + 0.01 * rng.standard_normal((studies, N)))
    return Measurements(y, np.stack(shown, axis=2), tuple(sources), Scale.STATED, ("A", "B"))


def at(data: Measurements, k_b: float) -> tuple[np.ndarray, Solution]:
    """Scores of k_B at ``k_b``, and the restricted fits, for the whole batch."""
    problem = Problem(law(), data)
    start = np.tile([K_A, k_b], (len(data.y), 1))
    held = solve(problem, start, fixed=np.array([False, True]))
    return score(problem, held, 1).z, held


def no_more_than(count: int, n: int, p: float) -> bool:
    """Whether a count is one that a rate of ``p`` at most gives (one-sided binomial, 0.1 %)."""
    return bool(stats.binomtest(count, n, p, alternative="greater").pvalue > 0.001)


@pytest.mark.parametrize("cell", CELLS)
def test_size_at_zero(cell: Cell) -> None:
    """False "the rate depends on B" in at most 5 % (and not far fewer: exact, not timid)."""
    studies = 1500
    z, _ = at(draw(cell, studies, 0.0, 21), 0.0)
    assert np.isfinite(z).all()
    false = int((z > stats.norm.ppf(0.95)).sum())
    assert no_more_than(false, studies, 0.05)
    assert false > 0.03 * studies


@pytest.mark.parametrize("cell", CELLS)
def test_coverage_away_from_zero(cell: Cell) -> None:
    """The two-sided set holds the true k_B = 1 in 95 %: score and guard together, as printed."""
    studies = 1500
    z, held = at(draw(cell, studies, 1.0, 22), 1.0)
    kept = np.abs(z) <= stats.norm.ppf(1 - (0.05 - SPENT) / 2)
    kept &= held.objective <= stats.chi2.isf(SPENT, N - 1)
    assert no_more_than(int((~kept).sum()), studies, 0.05)


def test_textbook_f_fails_where_the_score_does_not() -> None:
    """The reason for all this: conditions taken as exact, the F test claims B in more than a third
    of the studies without B (two-sided 5 % and k_B > 0 is 2.5 %)."""
    data = draw(CELLS[0], 1000, 0.0, 23)
    problem = Problem(law(-np.inf), data.without_condition_errors())
    start = np.tile([K_A, 0.0], (1000, 1))
    full = solve(problem, start)
    held = solve(problem, start, fixed=np.array([False, True]))
    f = (held.objective - full.objective) / (full.objective / (N - 2))
    false = (stats.f.sf(f, 1, N - 2) < 0.05) & (full.theta[:, 1] > 0)
    assert false.mean() > 0.33


def test_one_study_and_a_batch_agree() -> None:
    """The interval of one study, end by end, is where the batch's score crosses."""
    cell = CELLS[0]
    batch = draw(cell, 5, 1.0, 24)
    z, _ = at(batch, 0.4)
    for k in range(5):
        one = replace(batch, y=batch.y[k], conditions=batch.conditions[k])
        found = fit(law(), one)
        curve = Curve.of(found, 1)
        assert float(curve.at(np.array([0.4])).z[0]) == pytest.approx(float(z[k]), rel=1e-6)
        interval = along(found, curve, 0.95, se=float(standard_errors(found)[1])).reconciled
        for side in (interval.low, interval.high):
            if side.end == "crossed":
                edge = curve.at(np.array([side.value]))
                crossing = abs(float(edge.z[0])) - stats.norm.ppf(1 - (0.05 - SPENT) / 2)
                # k_A on its bound was not adjusted to the runs
                df = N - 1 + int(edge.solution.theta[0, 0] == 0)
                guard = float(edge.objective[0]) - stats.chi2.isf(SPENT, df)
                assert min(abs(crossing), abs(guard) / 10) < 1e-4


def test_restricted_fits_do_not_depend_on_the_start() -> None:
    """Relative errors follow fit and reconciled conditions, yet the fixed point is one."""
    for cell in CELLS[:3]:
        batch = draw(cell, 1, 1.0, 25)
        one = replace(batch, y=batch.y[0], conditions=batch.conditions[0])
        problem = Problem(law(), one)
        start = np.array([[2.0, 0.4], [4.0, 0.4], [4.5, 0.4], [9.0, 0.4]])
        held = solve(problem, start, fixed=np.array([False, True]))
        assert np.ptp(held.theta[:, 0]) <= 1e-8 * held.theta[0, 0]
        assert np.ptp(score(problem, held, 1).z) <= 1e-6
