"""Tests of a batch in which one member lies where the law is not finite: the others are as if alone.

Each is compared with the same test without that member. Tables are simulated.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from discrim.evidence.projected import _solved
from discrim.evidence.score import score
from discrim.evidence.unknown_scale import scale_weights
from discrim.evidence.unknown_variances import added_variance
from discrim.fit.engine import solve
from discrim.fit.problem import Problem, Solution
from tests.evidence.test_unknown_variances import BENT, problem

FIXED = np.array([False, False, True])


def two() -> tuple[Problem, Solution, Solution]:
    """An ordinary solution; the same beside one with nothing finite."""
    p = problem(BENT, 6, together=False, relative=0.05, absolute=0.0)
    sol = solve(p, np.array([[1.0, 0.4, 0.7]]), fixed=FIXED[None])
    both = sol.take(np.array([0, 0]))
    both.jacobian[1] = np.nan
    both.objective[1] = np.inf
    return p, sol, both


def of_variances(p: Problem, s: Solution) -> np.ndarray:
    return added_variance(p, s, [2])[:, 0, 0]


def of_one_variance(p: Problem, s: Solution) -> np.ndarray:
    return scale_weights(p, s, [2])[:, 0]


def of_score(p: Problem, s: Solution) -> np.ndarray:
    return np.asarray(score(p, s, 2).z)


def of_points(p: Problem, s: Solution) -> np.ndarray:
    points = np.broadcast_to(np.array([[[0.6], [0.8]]]), (len(s.theta), 2, 1))
    return _solved(p, s, (2,), FIXED, points, lambda _, found: found.objective)[0][:, 0]


@pytest.mark.parametrize("test", [of_variances, of_one_variance, of_score, of_points])
def test_one_member_that_is_not_finite(test: Callable[[Problem, Solution], np.ndarray]) -> None:
    p, sol, both = two()
    with np.errstate(invalid="ignore"):  # as `weigh` runs
        alone, beside = test(p, sol), test(p, both)
    assert np.isfinite(alone).all()
    np.testing.assert_allclose(beside[0], alone[0], rtol=1e-12)
