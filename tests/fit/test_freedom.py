"""Degrees of freedom of the objective with constants on their bounds.

Source: for a linear law and a truth at the corner of the allowed constants, Q given which constants
are on their bounds is chi-squared with N less the number of the others (Raubertas, Lee & Nordheim
1986, from memory). Shown here by counting on tables simulated here, and for orthonormal columns by
the mixture of chi-squared variables that follows from it (scipy).
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.adequacy import objective_p
from discrim.fit.engine import solve
from discrim.fit.fit import Fit, of_solution
from discrim.fit.freedom import adjusted, on_bounds
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.reactor.model import Prediction

N, P, STUDIES = 5, 3, 4000


class Linear:
    """y = X k with k >= 0; the columns of X are the conditions."""

    names: tuple[str, ...] = ("k_1", "k_2", "k_3")
    lower, upper = np.zeros(P), np.full(P, np.inf)
    linear, scale, starts = np.ones(P, bool), np.ones(P), np.zeros((0, P))

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        x = np.broadcast_to(conditions, (len(theta), *conditions.shape[-2:]))
        return Prediction(np.einsum("snp,sp->sn", x, theta), x if constants else None, None, None)


def simulated(x: np.ndarray, truth: np.ndarray, studies: int) -> tuple[Problem, np.ndarray]:
    y = x @ truth + np.random.default_rng(3).standard_normal((studies, N))
    own = source(OBSERVATION, N, absolute=1.0)
    data = Measurements(y, x, (own,), Scale.STATED, ("1", "2", "3"))
    problem = Problem(Linear(), data)
    return problem, np.ones((studies, P))


def test_the_objective_keeps_its_level_at_a_corner() -> None:
    x = np.random.default_rng(1).uniform(0.2, 2.0, (N, P))
    problem, start = simulated(x, np.array([2.0, 0.0, 0.0]), STUDIES)
    sol = solve(problem, start)
    on = on_bounds(sol.theta, Linear.lower, Linear.upper)
    p = stats.chi2.sf(sol.objective, N - adjusted(sol.jacobian, on))
    for level in (0.01, 0.05):
        assert stats.binomtest(int((p < level).sum()), STUDIES, level).pvalue > 0.001
    # with all constants counted as adjusted it does not
    p = stats.chi2.sf(sol.objective, N - P)
    assert (
        stats.binomtest(int((p < 0.01).sum()), STUDIES, 0.01, alternative="greater").pvalue < 1e-6
    )


def test_orthonormal_columns_give_the_known_mixture() -> None:
    x = np.eye(N)[:, :P]
    problem, start = simulated(x, np.zeros(P), STUDIES)
    sol = solve(problem, start)
    on = on_bounds(sol.theta, Linear.lower, Linear.upper).sum(axis=1)
    expected = stats.binom.pmf(np.arange(P + 1), P, 0.5)
    assert stats.chisquare(np.bincount(on, minlength=P + 1), expected * STUDIES).pvalue > 0.001
    tail = (expected * stats.chi2.sf(9.0, N - P + np.arange(P + 1))).sum()
    assert stats.binomtest(int((sol.objective > 9.0).sum()), STUDIES, tail).pvalue > 0.001


def test_a_fit_says_which_constants_it_adjusted() -> None:
    x = np.random.default_rng(1).uniform(0.2, 2.0, (N, P))
    problem, start = simulated(x, np.array([2.0, 0.0, 0.0]), 40)
    sol = solve(problem, start)
    seen = set()
    for k in range(40):
        data = Measurements(
            problem.data.y[k], x, problem.data.sources, Scale.STATED, problem.data.condition_names
        )
        fit: Fit = of_solution(Problem(Linear(), data), sol.take(np.array([k])))
        assert fit.degrees_of_freedom == N - P
        assert fit.objective_df == N - P + int((fit.theta == 0).sum())
        expected = float(stats.chi2.sf(fit.objective, fit.objective_df))
        assert objective_p(fit) == pytest.approx(expected, rel=1e-9)
        seen.add(fit.objective_df)
    assert len(seen) > 1


def test_columns_that_are_one_count_once() -> None:
    x = np.random.default_rng(1).uniform(0.2, 2.0, (1, N, P))
    x[..., 2] = 2.5 * x[..., 1]
    assert adjusted(x, np.zeros((1, P), bool)).tolist() == [2]
    assert adjusted(x, np.array([[False, True, True]])).tolist() == [1]
    assert adjusted(x[..., :0], np.zeros((1, 0), bool)).tolist() == [0]
