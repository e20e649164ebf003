"""The conditional likelihood ratio: its law, its limits, its size and its power.

Reference probabilities from scipy.stats; tables are simulated with a seed, so the truth is known.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence import conditional
from discrim.evidence.score import score
from discrim.fit.engine import solve
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution
from tests.evidence.test_size_and_coverage import Cell, draw, law, no_more_than
from tests.reference.outside import predictor, symbols

k_A, k_B, A, B = symbols("k_A k_B A B")
STUDIES = 1500
Q95 = float(stats.norm.ppf(0.95))


@pytest.mark.parametrize("df", [1, 2, 5, 30, 1000])
@pytest.mark.parametrize("m", [0.1, 1.0, 3.84, 10.0, 40.0])
def test_tail_at_both_ends_of_strength(df: int, m: float) -> None:
    """A sensitivity that is sure: chi-squared with one degree of freedom. One that is noise: with all."""
    sure = conditional.tail(np.array([m]), np.array([1e8 * (m + df)]), df)[0]
    assert sure == pytest.approx(float(stats.chi2.sf(m, 1)), rel=1e-5)
    noise = conditional.tail(np.array([m]), np.array([0.0]), df)[0]
    assert noise == pytest.approx(float(stats.chi2.sf(m, df)), rel=3e-3)


@pytest.mark.parametrize("df", [2, 7, 40])
@pytest.mark.parametrize("strength", [0.3, 5.0, 60.0])
def test_tail_between_them(df: int, strength: float) -> None:
    """Against drawn chi-squared values of K and J."""
    draws = 400_000
    rng = np.random.default_rng(df)
    k, j = rng.chisquare(1, draws), rng.chisquare(df - 1, draws)
    lr = conditional.ratio(k, j, np.full(draws, strength))
    for m in (0.5, 1.0, 4.0, 9.0):
        got = float(conditional.tail(np.array([m]), np.array([strength]), df)[0])
        assert abs((lr > m).mean() - got) < 4.5 * np.sqrt(got * (1 - got) / draws) + 1e-9


def test_ratio_has_the_limits_of_its_formula() -> None:
    k, j = np.array([4.0, 0.3]), np.array([6.0, 11.0])
    none, much = np.zeros(2), np.full(2, 1e8)
    np.testing.assert_allclose(conditional.ratio(k, j, none), k + j)
    np.testing.assert_allclose(conditional.ratio(k, j, much), k, rtol=1e-6)
    for r in (0.5, 3.0, 50.0):
        plain = 0.5 * (k + j - r + np.sqrt((k + j + r) ** 2 - 4 * r * j))
        np.testing.assert_allclose(conditional.ratio(k, j, np.full(2, r)), plain, rtol=1e-10)


def restricted(data: Measurements, k_b: float) -> tuple[Problem, Solution]:
    problem = Problem(law(), data)
    start = np.tile([3.0, k_b], (len(data.y), 1))
    return problem, solve(problem, start, fixed=np.array([False, True]))


def test_it_is_the_fall_of_the_objective() -> None:
    """LR from K, J and r is what freeing k_B takes off the objective (Moreira 2003 derives it so)."""
    cell = Cell(0.02, 0.01, ("measured", "measured"), False)
    data = draw(cell, 300, 0.6, 41)
    problem = Problem(law(-np.inf), data)
    held = solve(problem, np.tile([3.0, 0.0], (300, 1)), fixed=np.array([False, True]))
    free = solve(problem, np.tile([3.0, 0.6], (300, 1)))
    got = score(problem, held, 1)
    assert got.strength is not None
    k = got.raw**2
    lr = conditional.ratio(k, held.objective - k, got.strength)
    fall = held.objective - free.objective
    # relative errors that follow the fit make the two differ by a few percent
    assert np.median(np.abs(lr - fall) / (1.0 + fall)) < 0.03
    assert np.corrcoef(lr, fall)[0, 1] > 0.99


@pytest.mark.parametrize(
    "cell",
    [
        Cell(0.5, 0.01, ("measured", "measured"), False),
        Cell(0.02, 0.01, ("measured", "measured"), False),
        Cell(0.01, 0.02, ("measured", "measured"), False),
        Cell(0.003, 0.02, ("measured", "measured"), False),
        Cell(0.01, 0.02, ("measured", "set"), False),
        Cell(0.01, 0.01, ("measured", "measured"), True),
        Cell(0.003, 0.02, ("measured", "measured"), True),
    ],
)
@pytest.mark.parametrize("k_b", [0.0, 1.0])
def test_size_on_both_sides(cell: Cell, k_b: float) -> None:
    """One-sided at 5 % on either side, and not timid, from lockstep to well-spread runs."""
    problem, held = restricted(draw(cell, STUDIES, k_b, 42), k_b)
    z = score(problem, held, 1).z
    for side in (z, -z):
        false = int((side > Q95).sum())
        assert no_more_than(false, STUDIES, 0.055)
        assert false > 0.03 * STUDIES


def test_power_where_k_loses_it() -> None:
    """All of the rate by B, spread 1 %, conditions 1 %: K finds B in 0.26 of the studies (12 runs), the
    conditional likelihood ratio in 0.35; well spread both find it always."""
    near = draw(Cell(0.01, 0.01, ("measured", "measured"), False), STUDIES, 0.0, 43)
    near = replace(near, y=near.y * 0.0 + 3.0 * near.conditions[..., 1] / 2.5)
    rng = np.random.default_rng(44)
    n = near.n
    a = rng.uniform(0.5, 2.0, (STUDIES, n))
    b = 2.5 * a * (1 + 0.01 * rng.standard_normal((STUDIES, n)))
    shown = np.stack([a, b], axis=2) * (1 + 0.01 * rng.standard_normal((STUDIES, n, 2)))
    y = 1.2 * b * (1 + 0.01 * rng.standard_normal((STUDIES, n)))
    problem, held = restricted(replace(near, y=y, conditions=shown), 0.0)
    with_all = float((score(problem, held, 1).z > Q95).mean())
    k_alone = float((score(problem, held, 1, conditional=False).z > Q95).mean())
    assert with_all > k_alone + 0.05
    assert with_all > 0.3


def test_exact_conditions_leave_the_ordinary_test() -> None:
    """Set or exact conditions: the score itself, whatever is asked for."""
    cell = Cell(0.02, 0.01, ("set", "set"), True)
    problem, held = restricted(draw(cell, 50, 0.0, 45), 0.0)
    got = score(problem, held, 1)
    assert got.strength is None
    np.testing.assert_array_equal(got.z, score(problem, held, 1, conditional=False).z)


def test_errors_that_vanish_leave_the_ordinary_test() -> None:
    """Measured, with errors of 1e-7: r is beyond counting and LR is K."""
    n = 10
    rng = np.random.default_rng(46)
    a, b = rng.uniform(0.5, 2.0, (2, 40, n))
    y = 3.0 * a + 0.1 * rng.standard_normal((40, n))
    errors = (
        source(OBSERVATION, n, absolute=0.1),
        source(0, n, relative=1e-7, origin="measured"),
        source(1, n, relative=1e-7, origin="measured"),
    )
    data = Measurements(y, np.stack([a, b], axis=2), errors, Scale.STATED, ("A", "B"))
    problem = Problem(predictor(k_A * A + k_B * B, (k_A, k_B), (A, B), n), data)
    held = solve(problem, np.tile([3.0, 0.0], (40, 1)), fixed=np.array([False, True]))
    np.testing.assert_allclose(
        score(problem, held, 1).z, score(problem, held, 1, conditional=False).z, rtol=1e-6
    )


def test_shared_errors_as_a_matrix_and_one_by_one_agree() -> None:
    """Groups of one each, said to be shared: the strength of the full matrix is that of the diagonal."""
    cell = Cell(0.02, 0.01, ("measured", "measured"), False)
    problem, held = restricted(draw(cell, 20, 0.3, 47), 0.0)
    sources = tuple(replace(s, individual=s.target == OBSERVATION) for s in problem.data.sources)
    again, same = restricted(replace(problem.data, sources=sources), 0.0)
    one, other = score(problem, held, 1).strength, score(again, same, 1).strength
    assert one is not None
    assert other is not None
    np.testing.assert_allclose(other, one, rtol=0.02)
