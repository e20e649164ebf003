"""One law fitted to one table: from many starts to one honest record."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np

from discrim.fit.engine import Options, solve
from discrim.fit.freedom import adjusted
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import CONVERGED, NOT_FINITE, Problem, Solution
from discrim.fit.scout import scout, starting_values
from discrim.reactor.model import Predictor


class FitStatus(Enum):
    CONVERGED = "converged"
    STEP_LIMIT = "evaluation limit reached before the fit settled; its numbers are not final"
    NOT_FINITE = "the law is not finite at any start; check the bounds on the constants"


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """One law fitted to N observations with p free constants.

    Attributes
    ----------
    theta : shape (p,)
    objective : Q = e' V^-1 e; with an estimated scale and exact conditions the plain sum of squares
    rss : weighted residual sum of squares with the conditions taken as exact
    scale2 : variance of the observations when it is estimated, else 1
    degrees_of_freedom : N - p (all constants counted, also those at a bound)
    residual : shape (N,) whitened; jacobian : shape (N, p) whitened by constants
    at_bound : shape (p,) True for constants on a bound
    solution : the engine's record with batch axis 1
    """

    problem: Problem
    status: FitStatus
    theta: np.ndarray
    objective: float
    rss: float
    scale2: float
    degrees_of_freedom: int
    residual: np.ndarray
    jacobian: np.ndarray
    values: np.ndarray
    conditions: np.ndarray
    covariance: np.ndarray
    at_bound: np.ndarray
    solution: Solution

    @property
    def data(self) -> Measurements:
        return self.problem.data

    @property
    def predictor(self) -> Predictor:
        return self.problem.predictor

    @property
    def n(self) -> int:
        return self.data.n

    @property
    def p(self) -> int:
        return len(self.theta)

    @property
    def ok(self) -> bool:
        return self.status is not FitStatus.NOT_FINITE

    @property
    def badness(self) -> float:
        """To compare fits of different laws to one table: Q, or s^2 (N - p) in units of the mean square
        of the observations where s^2 is estimated together with condition errors."""
        if not self.problem.joint_scale:
            return self.objective
        size = max(float(np.mean(self.data.y**2)), 1e-300)
        return self.scale2 * max(self.degrees_of_freedom, 1) / size

    @property
    def objective_df(self) -> int:
        """Degrees of freedom of Q as chi-squared: N less the constants that are not on a bound (see
        `freedom`)."""
        return self.n - int(adjusted(self.jacobian[None], self.at_bound[None])[0])

    @property
    def variances(self) -> np.ndarray:
        """Diagonal of V, shape (N,)."""
        v = self.covariance
        return v if v.ndim == 1 else np.diagonal(v)


def fit(
    predictor: Predictor,
    data: Measurements,
    *,
    starts: int = 16,
    seed: int = 1,
    near: np.ndarray | None = None,
    options: Options | None = None,
) -> Fit:
    """Weighted least squares from ``starts`` starting points.

    ``near``, shape (k, p), adds starting points (for instance the optimum of a law that this one
    contains). Never raises for numerical reasons: the status says what happened.
    """
    problem = Problem(predictor, data)
    rows = _basins(predictor, data, starts, seed, near)
    solution = solve(problem, rows, options=options)
    return of_solution(problem, solution)


def _basins(
    predictor: Predictor,
    data: Measurements,
    starts: int,
    seed: int,
    near: np.ndarray | None,
) -> np.ndarray:
    p = len(predictor.names)
    if p == 0:
        return np.zeros((1, 0))
    weight = _rough_weight(data)
    if bool(predictor.linear.all()):
        first = np.clip(
            np.where(np.isfinite(predictor.scale), predictor.scale, 1.0)[None], *_box(predictor)
        )
        return first if near is None else np.vstack([near, first])
    begin = starting_values(predictor, starts, seed)
    if near is not None:
        begin = np.vstack([near, begin])
    return scout(predictor, data, weight, begin)


def _box(predictor: Predictor) -> tuple[np.ndarray, np.ndarray]:
    return predictor.lower, predictor.upper


def _rough_weight(data: Measurements) -> np.ndarray:
    """One over the standard deviation of each observation, from the observed values."""
    y = data.y
    size = np.maximum(np.abs(y), 1e-4 * (np.max(np.abs(y)) if y.size else 1.0))
    var = np.zeros(y.shape)
    for s in data.of_observations:
        var = var + s.sd(size) ** 2
    if data.scale is Scale.ESTIMATED or not np.any(var > 0):
        return np.ones(y.shape)
    return 1.0 / np.sqrt(np.where(var > 0, var, np.max(var)))


# a constant whose whole effect on the predictions is under this many standard errors is on its
# bound
ON_BOUND = 1e-6


def _settled_on_bounds(problem: Problem, one: Solution) -> Solution:
    """Constants that ended within rounding of a bound, put on it."""
    theta = one.theta[0]
    predictor = problem.predictor
    norms = np.sqrt((one.jacobian[0] ** 2).sum(axis=0))
    limit = ON_BOUND
    if problem.estimated and not problem.with_conditions:
        limit *= max(float(np.sqrt(one.objective[0] / max(problem.data.n, 1))), 1e-300)
    new = theta.copy()
    for bound in (predictor.lower, predictor.upper):
        near = np.isfinite(bound) & (theta != bound)
        gap = np.abs(theta - np.where(np.isfinite(bound), bound, 0.0)) * norms
        new = np.where(near & (gap < limit) & np.isfinite(gap), bound, new)
    if (new == theta).all() or not np.isfinite(one.objective[0]):
        return one
    moved = problem.evaluate(new[None], one.conditions, None, one.scale2, np.array([0]))
    # far from a bound the slope says nothing of the way there: a law may be flat at both ends
    most = one.objective[0] * (1 + ON_BOUND) + (0.0 if problem.estimated else ON_BOUND)
    if not moved.objective[0] <= most:
        return one
    moved.state, moved.iterations = one.state, one.iterations
    return moved


def of_solution(problem: Problem, solution: Solution) -> Fit:
    """The record of the best of the solved problems in a batch."""
    data, predictor = problem.data, problem.predictor
    merit = problem.merit(solution)
    k = int(np.argmin(np.where(np.isfinite(merit), merit, np.inf)))
    one = _settled_on_bounds(problem, solution.take(np.array([k])))
    state = int(one.state[0])
    status = FitStatus.CONVERGED if state == CONVERGED else FitStatus.STEP_LIMIT
    if state == NOT_FINITE or not np.isfinite(one.objective[0]):
        status = FitStatus.NOT_FINITE
    theta = one.theta[0]
    at_bound = (theta <= predictor.lower) | (theta >= predictor.upper)
    df = data.n - len(theta)
    q = float(one.objective[0])
    if problem.with_conditions:
        exact = Problem(predictor, data.without_condition_errors())
        rss = float(solve(exact, theta[None], options=Options(max_iterations=40)).objective[0])
    else:
        rss = q
    scale2 = 1.0
    if data.scale is Scale.ESTIMATED:
        if problem.with_conditions:
            scale2 = float(one.scale2[0])
        else:
            scale2 = q / df if df > 0 else float("nan")
    return Fit(
        problem=problem,
        status=status,
        theta=theta,
        objective=q,
        rss=rss,
        scale2=scale2,
        degrees_of_freedom=df,
        residual=one.residual[0],
        jacobian=one.jacobian[0],
        values=one.values[0],
        conditions=one.conditions[0],
        covariance=one.covariance[0],
        at_bound=at_bound,
        solution=one,
    )
