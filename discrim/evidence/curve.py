"""What is known of one constant along its values: restricted fits, scores and objectives.

One curve serves the test (at zero), the profile interval (objective) and the reconciled interval
(score), so all of them rest on the same restricted fits. All values of a grid are one batch.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.score import Score, score
from discrim.fit.engine import Options, Problem, Solution, solve
from discrim.fit.fit import Fit


@dataclass(frozen=True, slots=True, eq=False)
class Points:
    """Restricted optima at ``values`` of one constant.

    Attributes
    ----------
    values : shape (S,); objective : shape (S,); z : shape (S,) equivalent normal score
    solution : the restricted fits
    """

    values: np.ndarray
    objective: np.ndarray
    z: np.ndarray
    score: Score
    solution: Solution


class Curve:
    """Restricted fits along constant ``psi`` of a fitted law.

    Parameters
    ----------
    problem, theta : the problem and its unrestricted optimum, shape (p,)
    psi : index of the constant
    """

    def __init__(self, problem: Problem, theta: np.ndarray, psi: int, jacobian: np.ndarray) -> None:
        self.problem = problem
        self.theta = theta
        self.psi = psi
        p = len(theta)
        self.others = np.delete(np.arange(p), psi)
        # how the others follow psi near the optimum (least squares on whitened columns)
        self.slope = np.zeros(p)
        if len(self.others):
            cols = jacobian[:, self.others]
            norms = np.sqrt((cols**2).sum(axis=0))
            norms = np.where(norms > 0, norms, 1.0)
            follow, *_ = np.linalg.lstsq(cols / norms, -jacobian[:, psi], rcond=1e-10)
            self.slope[self.others] = np.nan_to_num(follow / norms)
        # what is solved already, by rising value: later points start between their neighbours
        self._values = np.empty(0)
        self._theta = np.empty((0, p))
        self._conditions: np.ndarray | None = None

    @classmethod
    def of(cls, fit: Fit, psi: int) -> Curve:
        return cls(fit.problem, fit.theta, psi, fit.jacobian)

    def at(self, values: np.ndarray, *, careful: bool = True) -> Points:
        """Restricted optima at each of ``values``, shape (S,).

        ``careful`` searches each from several starts; without it each starts between its solved
        neighbours, which is enough where a first pass was careful.
        """
        values = np.atleast_1d(np.asarray(values, float))
        problem, psi = self.problem, self.psi
        s, p = len(values), len(self.theta)
        fixed = np.zeros(p, bool)
        fixed[psi] = True
        if not careful and len(self._values) > 1:
            start, conditions = self._between(values)
            sol = solve(problem, start, fixed=fixed, options=_OPTIONS, conditions=conditions)
            return self._points(values, sol)
        start_a = np.tile(self.theta, (s, 1))
        start_a[:, psi] = values
        if p == 1:
            return self._points(values, solve(problem, start_a, fixed=fixed, options=_OPTIONS))
        start_b = self.theta + self.slope * (values - self.theta[psi])[:, None]
        start_b[:, psi] = values
        both = solve(problem, np.vstack([start_a, start_b]), fixed=fixed, options=_OPTIONS)
        sol = _better(problem, both.take(np.arange(s)), both.take(np.arange(s, 2 * s)))
        if s > 2 and not self._linear():
            # continue from the better neighbour: catches a restricted fit caught in a side valley
            order = np.argsort(values, kind="stable")
            merit = problem.merit(sol)
            q = np.where(np.isfinite(merit), merit, np.inf)[order]
            before, after = np.r_[np.inf, q[:-1]], np.r_[q[1:], np.inf]
            source = np.empty(s, int)
            source[order] = order[
                np.clip(np.where(before <= after, -1, 1) + np.arange(s), 0, s - 1)
            ]
            start = sol.theta[source].copy()
            start[:, psi] = values
            again = solve(
                problem, start, fixed=fixed, options=_OPTIONS, conditions=sol.conditions[source]
            )
            sol = _better(problem, sol, again)
        return self._points(values, sol)

    def _linear(self) -> bool:
        """Whether the restricted problem is linear, so that it has one optimum only."""
        predictor = self.problem.predictor
        return bool(predictor.linear.all()) or bool(getattr(predictor, "linear_when_held", False))

    def _between(self, values: np.ndarray) -> tuple[np.ndarray, np.ndarray | None]:
        """Starts interpolated between the solved neighbours of each value."""
        known = self._values
        right = np.clip(np.searchsorted(known, values), 1, len(known) - 1)
        left = right - 1
        gap = known[right] - known[left]
        share = np.clip((values - known[left]) / np.where(gap > 0, gap, 1.0), 0.0, 1.0)
        theta = self._theta[left] + share[:, None] * (self._theta[right] - self._theta[left])
        theta[:, self.psi] = values
        nearest = np.where(share > 0.5, right, left)
        return theta, None if self._conditions is None else self._conditions[nearest]

    def _points(self, values: np.ndarray, sol: Solution) -> Points:
        sc = score(self.problem, sol, self.psi)
        good = np.isfinite(sol.objective)
        every = np.concatenate([self._values, values[good]])
        order = np.argsort(every, kind="stable")
        self._values = every[order]
        self._theta = np.concatenate([self._theta, sol.theta[good]])[order]
        if self.problem.measured:
            old = self._conditions
            new = np.asarray(sol.conditions[good])
            self._conditions = (new if old is None else np.concatenate([old, new]))[order]
        return Points(values, sol.objective, sc.z, sc, sol)


# the score takes out what is left of the gradient of the others, so 1e-6 is plenty
_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)


def _better(problem: Problem, a: Solution, b: Solution) -> Solution:
    rows = np.flatnonzero(problem.merit(b) < problem.merit(a))
    if len(rows):
        for name in a.__slots__:
            setattr(a, name, np.array(getattr(a, name)))
        a.put(rows, b.take(rows))
    return a
