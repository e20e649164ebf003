"""Observations marked as absent change nothing: the same solution as a table without those rows.

What it is compared with is the same engine on the shorter table, whose results the other tests of
this folder compare with published ones; the tables are simulated.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import sympy

from discrim.evidence.score import score
from discrim.fit.engine import Options, solve
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

N = 9
_A, _B, _K1, _K2 = sympy.symbols("a b k1 k2", nonnegative=True)


def _predictor(n: int, langmuir: bool) -> RatePredictor:
    law = _K1 * _A / (1 + _K2 * _B) if langmuir else _K1 * _A + _K2 * _B
    return RatePredictor(
        (CompiledLaw(law, [_K1, _K2], [_A, _B]),),
        np.zeros(n, int),
        names=("k1", "k2"),
        lower=np.zeros(2),
        upper=np.full(2, np.inf),
        linear=np.array([True, not langmuir]),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )


def _table(kind: str) -> Measurements:
    rng = np.random.default_rng(11)
    a, b = rng.uniform(1, 5, N), rng.uniform(1, 5, N)
    y = (2.0 * a + 0.7 * b) * (1 + 0.03 * rng.standard_normal(N))
    groups = np.array([0, 0, 0, 1, 1, 1, 2, 2, 2])
    rate: tuple[ErrorSource, ...] = (source(OBSERVATION, N, relative=0.02, absolute=0.05),)
    scale = Scale.STATED
    of_conditions: tuple[ErrorSource, ...] = ()
    if "estimated" in kind:
        rate, scale = (), Scale.ESTIMATED
    if "measured" in kind:
        of_conditions = (source(0, N, relative=0.03), source(1, N, relative=0.03))
    if "set" in kind:
        of_conditions = (*of_conditions, source(0, N, relative=0.02, origin="set"))
    if "shared" in kind:
        of_conditions = (*of_conditions, source(1, N, relative=0.02, groups=groups))
    return Measurements(y, np.column_stack([a, b]), (*of_conditions, *rate), scale, ("a", "b"))


@pytest.mark.parametrize("langmuir", [False, True])
@pytest.mark.parametrize(
    "kind",
    [
        "exact",
        "exact, estimated",
        "measured",
        "measured and set",
        "measured, shared",
        "measured, estimated",
        "measured, shared, estimated",
    ],
)
def test_absent_rows_are_as_good_as_gone(kind: str, langmuir: bool) -> None:
    data = _table(kind)
    # three members of a batch, two observations left out in each
    absent = np.zeros((3, N), bool)
    for member, rows in enumerate([(0, 5), (3, 4), (1, 8)]):
        absent[member, list(rows)] = True
    options = Options(max_iterations=200)
    start = np.tile([1.0, 0.5], (3, 1))
    fixed = np.array([False, True])
    all_at_once = Problem(_predictor(N, langmuir), replace(data, absent=absent))
    assert all_at_once.data.count == N - 2
    free = solve(all_at_once, start, options=options)
    held = solve(all_at_once, np.where(fixed, 0.3, start), fixed=fixed, options=options)
    z = score(all_at_once, held, 1)
    for member in range(3):
        kept = np.flatnonzero(~absent[member])
        short = Problem(_predictor(N - 2, langmuir), data.take(kept))
        # what small values of the rates are floored at is a property of the whole table
        short.floor = all_at_once.floor
        one = solve(short, start[:1], options=options)
        np.testing.assert_allclose(free.theta[member], one.theta[0], rtol=1e-6)
        np.testing.assert_allclose(free.objective[member], one.objective[0], rtol=1e-8)
        np.testing.assert_allclose(free.scale2[member], one.scale2[0], rtol=1e-6)
        restricted = solve(short, np.where(fixed, 0.3, start[:1]), fixed=fixed, options=options)
        np.testing.assert_allclose(z.z[member], score(short, restricted, 1).z[0], rtol=1e-5)
        np.testing.assert_array_equal(free.residual[member, absent[member]], 0.0)


def test_what_a_law_gives_in_an_absent_row_does_not_matter() -> None:
    """Not even where it is no number there."""
    data = _table("measured, shared")
    conditions = data.conditions.copy()
    conditions[4, 0] = np.nan
    absent = np.zeros((1, N), bool)
    absent[0, 4] = True
    problem = Problem(_predictor(N, False), replace(data, conditions=conditions, absent=absent))
    found = solve(problem, np.ones((1, 2)))
    short = Problem(_predictor(N - 1, False), data.take(np.delete(np.arange(N), 4)))
    short.floor = problem.floor
    one = solve(short, np.ones((1, 2)))
    np.testing.assert_allclose(found.theta, one.theta, rtol=1e-9)
    np.testing.assert_allclose(found.objective, one.objective, rtol=1e-9)
