"""Guaranteed ranges against brute force: constants tried one by one on a grid.

A pair of constants is consistent when for each run some conditions within their bounds give a rate
within its bound (Oettli & Prager, Numer. Math. 6 (1964) 405, from memory, say when for linear
equations). Cases are invented and worked out here.
"""

from __future__ import annotations

from itertools import product
from typing import Any

import numpy as np
import pytest
from sympy import Expr, sqrt

from discrim.evidence.guaranteed import guaranteed
from discrim.evidence.intervals import Interval
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.weigh.cleared_law import cleared_law
from tests.reference.outside import predictor, symbols

k1, k2, A, B = symbols("k1 k2 A B")


def hard(
    y: np.ndarray, dy: float, c: np.ndarray, dc: tuple[float, ...], groups: Any = None
) -> Measurements:
    n = len(y)
    sources = [source(OBSERVATION, n, absolute=dy / sqrt_3, bound=np.full(n, dy))]
    sources += [
        source(j, n, absolute=d / sqrt_3, bound=np.full(n, d), groups=groups)
        for j, d in enumerate(dc)
        if d
    ]
    return Measurements(y, c, tuple(sources), Scale.STATED, ("A", "B"))


sqrt_3 = float(np.sqrt(3.0))


def ranges(law: Expr, data: Measurements) -> list[Interval]:
    bound = predictor(law, (k1, k2), (A, B), data.n, lower=0.0)
    form = None if bound.linear.all() else cleared_law(bound.laws[0])
    return guaranteed(bound, data, 0.05, 1.0, form)


def consistent(
    law: Any,
    data: Measurements,
    dy: float,
    dc: tuple[float, ...],
    tries: np.ndarray,
    steps: int = 9,
) -> np.ndarray:
    """The tried constants that some conditions (on a grid in the box, corners included) allow in every
    run, shape (k, 2)."""
    ways = np.linspace(-1.0, 1.0, steps)
    inside = np.ones(len(tries), bool)
    for y, c in zip(data.y, data.conditions, strict=True):
        low, high = np.full(len(tries), np.inf), np.full(len(tries), -np.inf)
        for a, b in product(ways if dc[0] else [0.0], ways if dc[1] else [0.0]):
            f = law(tries[:, 0], tries[:, 1], c[0] + a * dc[0], c[1] + b * dc[1])
            low, high = np.minimum(low, f), np.maximum(high, f)
        inside &= (low <= y + dy) & (high >= y - dy)
    return np.asarray(tries[inside])


def grid(first: tuple[float, float], second: tuple[float, float], count: int = 400) -> np.ndarray:
    return np.array(list(product(np.linspace(*first, count), np.linspace(*second, count))))


@pytest.mark.parametrize("seed", range(4))
def test_linear_laws_are_exact(seed: int) -> None:
    """One condition in two terms, k1 A + k2 A B: both rise with it, so the range is exact: nothing
    consistent is outside, and its ends are reached to the width of the grid."""
    rng = np.random.default_rng(seed)
    c = rng.uniform(0.5, 3.0, (4, 2))
    dy, dc = 0.1, (0.03, 0.02)
    y = 2.0 * c[:, 0] + 0.7 * c[:, 0] * c[:, 1] + rng.uniform(-0.05, 0.05, 4)
    data = hard(y, dy, c, dc)
    found = ranges(k1 * A + k2 * A * B, data)
    assert [i.note for i in found] == ["", ""]
    spans = [(i.low.value, i.high.value) for i in found]
    wide = [(max(lo - 0.1 * (hi - lo), 0.0), hi + 0.1 * (hi - lo)) for lo, hi in spans]
    tries = grid(wide[0], wide[1])
    inside = consistent(lambda k, m, a, b: k * a + m * a * b, data, dy, dc, tries)
    for j, (lo, hi) in enumerate(spans):
        width = (wide[j][1] - wide[j][0]) / 399
        assert inside[:, j].min() >= lo - 1e-9
        assert inside[:, j].max() <= hi + 1e-9
        # the corner of a thin polygon falls between the points of the grid
        assert inside[:, j].min() <= lo + 6 * width
        assert inside[:, j].max() >= hi - 6 * width


def test_a_condition_that_moves_two_terms_in_opposite_directions() -> None:
    """k1 A + k2 B/A: no one value of A gives the ends of both; the range is an outer bound and says so."""
    c = np.array([[1.0, 2.0], [2.0, 1.0], [1.5, 3.0]])
    dy, dc = 0.02, (0.2, 0.0)
    y = 2.0 * c[:, 0] + 1.0 * c[:, 1] / c[:, 0]
    data = hard(y, dy, c, dc)
    found = ranges(k1 * A + k2 * B / A, data)
    assert {i.note for i in found} == {
        "outer bound, a condition moves two terms in opposite directions"
    }
    inside = consistent(
        lambda k, m, a, b: k * a + m * b / a, data, dy, dc, grid((0.5, 3.5), (0.0, 3.0)), 41
    )
    for j, one in enumerate(found):
        assert one.low.value <= inside[:, j].min()
        assert one.high.value >= inside[:, j].max()


def test_an_error_shared_by_runs_is_said_to_give_an_outer_bound() -> None:
    """y = k1 A, A off by the same amount in both runs: worked by hand, y1 = 1 and y2 = 2 at A = 1 and 2,
    both +- 0: k1 (1 + d) = 1 and k1 (2 + d) = 2 only for d = 0, k1 = 1; apart, 1/1.1 to 2/1.9."""
    c = np.array([[1.0, 1.0], [2.0, 1.0]])
    y = np.array([1.0, 2.0])
    alone = hard(y, 0.0, c, (0.1, 0.0))
    both = hard(y, 0.0, c, (0.1, 0.0), groups=np.zeros(2, int))
    bound = predictor(k1 * A, (k1,), (A, B), 2, lower=0.0)
    (exact,) = guaranteed(bound, alone, 0.05, 1.0)
    (outer,) = guaranteed(bound, both, 0.05, 1.0)
    assert exact.note == ""
    assert outer.note == "outer bound, errors shared by several runs are taken as separate ones"
    for one in (exact, outer):
        assert (one.low.value, one.high.value) == pytest.approx((2 / 2.1, 2 / 1.9))


def test_a_part_without_a_constant() -> None:
    """y = k1 A + 3 B with 3 known. Worked by hand: A = 1, B = 1 +- 0.1, y = 5 +- 0.2: k1 is
    5 - 0.2 - 3.3 to 5 + 0.2 - 2.7."""
    data = hard(np.array([5.0]), 0.2, np.array([[1.0, 1.0]]), (0.0, 0.1))
    (found,) = guaranteed(predictor(k1 * A + 3 * B, (k1,), (A, B), 1, lower=0.0), data, 0.05, 1.0)
    assert (found.low.value, found.high.value) == pytest.approx((1.5, 2.5))


def test_no_range_where_a_term_has_an_extreme_within_the_errors() -> None:
    """A (1 - A) is largest at 1/2, between the ends of 0.5 +- 0.1."""
    data = hard(np.array([0.25]), 0.01, np.array([[0.5, 1.0]]), (0.1, 0.0))
    (found,) = guaranteed(predictor(k1 * A * (1 - A), (k1,), (A, B), 1, lower=0.0), data, 0.05, 1.0)
    assert found.note == "not computed: a term has an extreme within the errors of a condition"
    assert not found.empty


def test_errors_of_conditions_that_are_not_in_the_law_do_not_count() -> None:
    c = np.array([[1.0, 1.0], [2.0, 5.0]])
    y = np.array([1.0, 2.0])
    law = predictor(k1 * A, (k1,), (A, B), 2, lower=0.0)
    n = 2
    own = [source(OBSERVATION, n, absolute=0.1), source(0, n, absolute=0.05)]
    few = Measurements(y, c, tuple(own), Scale.STATED, ("A", "B"))
    more = Measurements(y, c, (*own, source(1, n, absolute=0.3)), Scale.STATED, ("A", "B"))
    assert guaranteed(law, few, 0.05, 1.0) == guaranteed(law, more, 0.05, 1.0)


@pytest.mark.parametrize("seed", range(3))
def test_cleared_laws_hold_all_that_is_consistent(seed: int) -> None:
    """A on one kind of site and A with B on two: an outer bound."""
    rng = np.random.default_rng(seed)
    c = rng.uniform(0.4, 3.0, (5, 2))
    dy, dc = 0.02, (0.01, 0.01)
    cases: list[tuple[Expr, Any]] = [
        (k1 * A * B / (1 + k2 * A), lambda k, m, a, b: k * a * b / (1 + m * a)),
        (k1 * A / (1 + k2 * B) ** 2, lambda k, m, a, b: k * a / (1 + m * b) ** 2),
        (k1 * A / (1 + sqrt(k2) * sqrt(B)), lambda k, m, a, b: k * a / (1 + np.sqrt(m * b))),
    ]
    for law, plain in cases:
        y = plain(3.0, 0.8, c[:, 0], c[:, 1]) + rng.uniform(-0.01, 0.01, 5)
        data = hard(y, dy, c, dc)
        found = ranges(law, data)
        assert {i.note for i in found} == {"outer bound, by clearing the denominator"}
        inside = consistent(plain, data, dy, dc, grid((2.5, 3.6), (0.5, 1.2), 250), 5)
        assert len(inside) > 20
        for j, one in enumerate(found):
            assert one.low.value <= inside[:, j].min()
            assert one.high.value >= inside[:, j].max()
            # and it is no wider than it must be by much
            reach = float(np.ptp(inside[:, j]))
            assert one.high.value - one.low.value < 3.0 * reach
