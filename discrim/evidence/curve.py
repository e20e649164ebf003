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
        self._known: list[np.ndarray] = []

    @classmethod
    def of(cls, fit: Fit, psi: int) -> Curve:
        return cls(fit.problem, fit.theta, psi, fit.jacobian)

    def at(self, values: np.ndarray, *, careful: bool = True) -> Points:
        """Restricted optima at each of ``values``, shape (S,)."""
        values = np.atleast_1d(np.asarray(values, float))
        problem, psi = self.problem, self.psi
        s, p = len(values), len(self.theta)
        fixed = np.zeros(p, bool)
        fixed[psi] = True
        start_a = np.tile(self.theta, (s, 1))
        start_a[:, psi] = values
        if p == 1:
            sol = solve(problem, start_a, fixed=fixed, options=_OPTIONS)
            return self._points(values, sol)
        start_b = self.theta + self.slope * (values - self.theta[psi])[:, None]
        start_b[:, psi] = values
        sol = solve(problem, np.vstack([start_a, start_b]), fixed=fixed, options=_OPTIONS)
        sol = _better(sol.take(np.arange(s)), sol.take(np.arange(s, 2 * s)))
        if careful and s > 2 and not bool(problem.predictor.linear.all()):
            # continue from both neighbours: catches a restricted fit caught in a side valley
            order = np.argsort(values, kind="stable")
            for shift in (1, -1):
                source = order[np.clip(np.arange(s) + shift, 0, s - 1)]
                start = sol.theta[source].copy()
                back = np.empty(s, int)
                back[order] = np.arange(s)
                start = start[back]
                start[:, psi] = values
                again = solve(problem, start, fixed=fixed, options=_OPTIONS)
                sol = _better(sol, again)
        return self._points(values, sol)

    def _points(self, values: np.ndarray, sol: Solution) -> Points:
        sc = score(self.problem, sol, self.psi)
        return Points(values, sol.objective, sc.z, sc, sol)


_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-9, step_tolerance=1e-10)


def _better(a: Solution, b: Solution) -> Solution:
    rows = np.flatnonzero(b.objective < a.objective)
    if len(rows):
        for name in a.__slots__:
            setattr(a, name, np.array(getattr(a, name)))
        a.put(rows, b.take(rows))
    return a
