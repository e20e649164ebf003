"""A law written in terms of a quantity of its constants, and restricted fits along that quantity.

As with the effect of a term (`effect`), one constant is replaced by the quantity itself, so that
every test and interval of a constant is one of the quantity, with the other constants as nuisances:
no ends of intervals are plugged into a formula.

The replaced constant has bounds of its own, and with the quantity held they bound the *others* (the
rate k_a A + k_b B = q leaves k_b <= q/B). Where the others ask for a value beyond, the constant is put
on its bound and the next one follows the quantity in its place; a restricted fit that ends there is
made again with that one replaced, so that the active set of the engine decides and the score sees
every nuisance constant.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from discrim.evidence.curve import Curve, Points
from discrim.evidence.restricted import Trail
from discrim.evidence.score import Score, score
from discrim.fit.covariance import Whitener
from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit
from discrim.fit.fit import fit as refit
from discrim.fit.problem import CONVERGED, Problem, Solution
from discrim.reactor.model import Prediction, Predictor
from discrim.reactor.quantity import Inverse, Quantity

_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)
# a constant this close to its bound, relative to its typical size, is on it
ON_BOUND = 1e-9
# the quantity of the constants found must be the one asked for, relative
SAME = 1e-6
# stands for "no constants give this value", in standard normal units
BEYOND = 1e3


class InQuantity:
    """The same predictor with one constant replaced by a quantity.

    Parameters
    ----------
    inner : the predictor in constants
    which : index into ``quantity.inverses``: the constant that is replaced
    reference : shape (p,) constants that take the place of one that cannot be found
    """

    def __init__(
        self, inner: Predictor, quantity: Quantity, which: int, reference: np.ndarray
    ) -> None:
        self.inner, self.quantity = inner, quantity
        # one on its bound could leave the quantity without a value (0/0)
        self.reference = np.where(reference <= inner.lower, inner.scale, reference)
        self.which = which
        every = quantity.inverses
        self.chain = (every[which], *(i for k, i in enumerate(every) if k != which))
        self.psi = psi = self.chain[0].psi
        self.names = tuple("quantity" if j == psi else n for j, n in enumerate(inner.names))
        self.lower, self.upper = inner.lower.copy(), inner.upper.copy()
        self.lower[psi] = 0.0 if quantity.nonnegative else -np.inf
        self.upper[psi] = np.inf
        self.linear = np.zeros(len(inner.names), bool)
        self.linear_when_held = bool(inner.linear.all()) and self.chain[0].affine
        self.scale = inner.scale.copy()
        now = abs(float(quantity.value(reference[None])[0]))
        typical = abs(float(quantity.value(inner.scale[None])[0]))
        self.scale[psi] = now if now > 0 else typical if typical > 0 else 1.0
        self.starts = np.zeros((0, len(inner.names)))

    def __getattr__(self, name: str) -> Any:
        # what a reactor offers beyond a Predictor does not depend on the constants
        if name == "inner":
            raise AttributeError(name)
        return getattr(self.inner, name)

    def to_inner(self, theta: np.ndarray) -> np.ndarray:
        """Constants of the inner predictor, shape (S, p); nan in rows that no constants can give."""
        out, _, found = self._solved(theta)
        return np.where(found[:, None], out, np.nan)

    def from_inner(self, theta: np.ndarray) -> np.ndarray:
        """The other way, shape (S, p)."""
        out = theta.copy()
        out[:, self.psi] = self.quantity.value(theta)
        return out

    def follows(self, theta: np.ndarray) -> np.ndarray:
        """Which constant follows the quantity, shape (S,): index into the chain, 0 away from bounds."""
        return self._solved(theta)[1]

    def _solved(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Inner constants (S, p), the link of the chain that follows (S,), and whether one does (S,)."""
        q = theta[:, self.psi]
        out = theta.copy()
        out[:, self.psi] = self.reference[self.psi]
        link = np.zeros(len(theta), int)
        found = np.zeros(len(theta), bool)
        for k, inverse in enumerate(self.chain):
            todo = np.flatnonzero(~found)
            if not len(todo):
                break
            j = inverse.psi
            trial = out[todo]
            trial[:, j] = q[todo]
            x = self.quantity.solve(inverse, trial)
            lower, upper = self.inner.lower[j], self.inner.upper[j]
            near = 1e-13 * self.inner.scale[j]
            with np.errstate(invalid="ignore"):
                fits = np.isfinite(x) & (x >= lower - near) & (x <= upper * (1 + 1e-13))
            out[todo, j] = np.where(np.isfinite(x), np.clip(x, lower, upper), self.reference[j])
            link[todo] = k
            found[todo] = fits
        # a limit that is approached (both parts of a quotient zero) is not a value
        with np.errstate(invalid="ignore"):
            gap = np.abs(self.quantity.value(out) - q)
            found &= gap <= SAME * np.maximum(np.abs(q), self.scale[self.psi])
        return out, link, found

    def _turn(self, out: np.ndarray, link: np.ndarray) -> np.ndarray:
        """Derivatives of the inner constants by (quantity, others), shape (S, p, p)."""
        s, p = out.shape
        _, g = self.quantity.with_gradient(out)
        turn = np.tile(np.eye(p), (s, 1, 1))
        for k, inverse in enumerate(self.chain):
            rows = np.flatnonzero(link == k)
            if not len(rows):
                continue
            j = inverse.psi
            held = np.array([i.psi for i in self.chain[:k]], int)
            turn[rows[:, None], held] = 0.0
            with np.errstate(divide="ignore", invalid="ignore"):
                row = -g[rows] / g[rows, j][:, None]
                row[:, held] = 0.0
                row[:, j] = 0.0
                row[:, self.psi] = 1.0 / g[rows, j]
            turn[rows, j] = np.where(np.isfinite(row), row, 0.0)
        return turn

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        out, link, found = self._solved(theta)
        pred = self.inner.predict(
            out, conditions, constants=constants, conditions_too=conditions_too, both=both
        )
        values = pred.values
        if not found.all():
            values = np.where(found[:, None], values, np.nan)
        by_constants, by_both = pred.by_constants, pred.by_both
        if by_constants is not None or by_both is not None:
            turn = self._turn(out, link)
            if by_constants is not None:
                by_constants = by_constants @ turn
            if by_both is not None:
                by_both = by_both @ turn[:, None]
        return Prediction(values, by_constants, pred.by_conditions, by_both)


class _Trail(Trail):
    """Starts at values far away move the constant with which the predictions stay nearest to the fit.

    A ratio goes to zero with its numerator: with the numerator held its denominator would start at
    infinity. A start far off can stay there: with errors of conditions the objective is flat where
    the predictions are many times the observations.
    """

    def __init__(self, found: Fit, fit: Fit) -> None:
        wrapped = found.predictor
        assert isinstance(wrapped, InQuantity)
        super().__init__(found.problem, found.theta, wrapped.psi, found.jacobian)
        self.fit, self.wrapped = fit, wrapped

    def starts(self, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        plain, line = super().starts(values)
        least = np.full(len(values), np.inf)
        for base in (self.fit.theta, self.wrapped.reference):
            for inverse in self.wrapped.chain:
                trial, fits = self._trial(base, inverse, values)
                moved = np.where(fits, self._moved(trial), np.inf)
                trial[:, self.psi] = values
                better = moved < least
                least = np.where(better, moved, least)
                plain = np.where(better[:, None], trial, plain)
        return plain, line

    def _trial(
        self, base: np.ndarray, inverse: Inverse, values: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """``base`` with one constant moved so that the quantity has each of ``values``, (S, p), and
        where that can be."""
        j = inverse.psi
        trial = np.tile(base, (len(values), 1))
        trial[:, j] = values
        trial[:, j] = x = self.wrapped.quantity.solve(inverse, trial)
        lower, upper = self.fit.predictor.lower[j], self.fit.predictor.upper[j]
        with np.errstate(invalid="ignore"):
            gap = np.abs(self.wrapped.quantity.value(trial) - values)
            fits = (x >= lower) & (x <= upper)
            fits &= gap <= SAME * np.maximum(np.abs(values), self.wrapped.scale[self.psi])
        return trial, fits

    def _moved(self, trial: np.ndarray) -> np.ndarray:
        """How far the predictions are from those of the fit, shape (S,), in its standard errors."""
        some = np.where(np.isfinite(trial), trial, self.fit.theta)
        with np.errstate(all="ignore"):
            made = self.fit.predictor.predict(some, self.fit.conditions, constants=False).values
            gap = Whitener(self.fit.covariance[None]).vector(made - self.fit.values)
            moved = np.einsum("sn,sn->s", gap, gap)
        return np.where(np.isfinite(moved), moved, np.inf)


class AlongQuantity(Curve):
    """Restricted fits along a quantity of the constants of ``fit``.

    ``fit_in_it`` is the same optimum in its coordinates; ``possible`` is False where the quantity does
    not move with any constant there.
    """

    def __init__(self, fit: Fit, quantity: Quantity) -> None:
        self.fit, self.quantity = fit, quantity
        found = turned(fit, quantity)
        self.possible = found is not None
        if found is None:
            return
        wrapped = found.predictor
        assert isinstance(wrapped, InQuantity)
        self.wrapped, self.fit_in_it, self.which = wrapped, found, wrapped.which
        super().__init__(found.problem, found.theta, wrapped.psi, found.jacobian)
        self.trail = _Trail(found, fit)

    def on(self, again: Fit) -> tuple[Fit, Curve]:
        inner = self.wrapped.to_inner(again.theta[None])
        curve = AlongQuantity(
            refit(self.fit.predictor, again.data, starts=1, near=inner), self.quantity
        )
        return (curve.fit_in_it, curve) if curve.possible else super().on(again)

    def points(self, values: np.ndarray, sol: Solution) -> Points:
        pts = self._scored(values, sol)
        objective, z = pts.objective.copy(), pts.z.copy()
        for _, rows, found, _ in self._again(pts):
            objective[rows], z[rows] = found.objective, found.z
        # no constants give the value: far on one side of all that they can give
        beyond = ~np.isfinite(objective)
        side = np.sign(self.theta[self.psi] - values)
        z = np.where(beyond, BEYOND * np.where(side == 0, 1.0, side), z)
        return replace(pts, objective=objective, z=z, score=replace(pts.score, z=z))

    def _scored(self, values: np.ndarray, sol: Solution) -> Points:
        """Scores of the rows that have a restricted fit; nan in the others."""
        good = np.isfinite(sol.objective)
        if good.all() or not good.any():
            some = score(self.problem, sol, self.psi) if good.any() else None
        else:
            some = score(self.problem, sol.take(np.flatnonzero(good)), self.psi)

        def spread(x: np.ndarray | None, missing: float) -> np.ndarray:
            out = np.full(len(values), missing)
            if x is not None:
                out[good] = x
            return out

        if some is None:
            nan = np.full(len(values), np.nan)
            sc = Score(nan, nan, np.zeros(len(values)), np.inf)
        else:
            sc = replace(
                some,
                z=spread(some.z, np.nan),
                raw=spread(some.raw, np.nan),
                information=spread(some.information, 0.0),
                strength=None if some.strength is None else spread(some.strength, 0.0),
            )
        return Points(values, sol.objective, sc.z, sc, sol)

    def at_one(self, value: float) -> tuple[Problem, Points, int]:
        """The restricted optimum at one value: the problem, the point (batch 1), and the index of the
        quantity there."""
        pts = self.at(np.array([value]))
        for problem, _, found, psi in self._again(pts):
            return problem, found, psi
        return self.problem, pts, self.psi

    def _again(self, pts: Points) -> list[tuple[Problem, np.ndarray, Points, int]]:
        """Rows that ended with the replaced constant on its bound, with another one replaced: problem,
        rows, points there, index of the quantity; the best for each row."""
        if len(self.wrapped.chain) < 2:
            return []
        inner = self.wrapped.to_inner(pts.solution.theta)
        e, base = self.wrapped.psi, self.fit.predictor
        near = ON_BOUND * base.scale[e]
        with np.errstate(invalid="ignore"):
            on = (inner[:, e] <= base.lower[e] + near) | (inner[:, e] >= base.upper[e] - near)
        # where the replaced constant cannot follow at all, it was only held somewhere
        on |= self.wrapped.follows(pts.solution.theta) != 0
        ends = np.flatnonzero(on & np.isfinite(inner).all(axis=1))
        if not len(ends):
            return []
        tried = [
            self._replacing(pts, ends, which, inner[ends])
            for which in range(len(self.quantity.inverses))
            if which != self.which
        ]
        merit = np.array([q for _, _, q, _ in tried])
        best = merit.argmin(axis=0)
        out = []
        for t, (problem, found, _, psi) in enumerate(tried):
            mine = np.flatnonzero((best == t) & np.isfinite(merit[t]))
            if len(mine):
                sc = score(problem, found.take(mine), psi)
                points = Points(
                    pts.values[ends[mine]], found.objective[mine], sc.z, sc, found.take(mine)
                )
                out.append((problem, ends[mine], points, psi))
        return out

    def _replacing(
        self, pts: Points, rows: np.ndarray, which: int, inner: np.ndarray
    ) -> tuple[Problem, Solution, np.ndarray, int]:
        wrapped = InQuantity(self.fit.predictor, self.quantity, which, self.fit.theta)
        problem = Problem(wrapped, self.fit.data)
        start = inner.copy()
        start[:, wrapped.psi] = pts.values[rows]
        fixed = np.zeros(start.shape[1], bool)
        fixed[wrapped.psi] = True
        conditions = np.asarray(pts.solution.conditions[rows])
        found = solve(problem, start, fixed=fixed, options=_OPTIONS, conditions=conditions)
        sound = np.isfinite(found.objective) & (wrapped.follows(found.theta) == 0)
        return problem, found, np.where(sound, problem.merit(found), np.inf), wrapped.psi


def turned(fit: Fit, quantity: Quantity, *, only: int | None = None) -> Fit | None:
    """The same optimum in terms of the quantity, the first constant replaced that it moves with there
    (or constant ``only``); None where there is none."""
    for k, inverse in enumerate(quantity.inverses):
        if only not in (None, inverse.psi):
            continue
        found = _turned(fit, quantity, k)
        if found is not None:
            return found
    return None


def _turned(fit: Fit, quantity: Quantity, which: int) -> Fit | None:
    """With one constant replaced; None where the quantity does not move with it."""
    wrapped = InQuantity(fit.predictor, quantity, which, fit.theta)
    _, g = quantity.with_gradient(fit.theta[None])
    slope = g[0, wrapped.psi]
    if not np.isfinite(slope) or slope == 0:
        return None
    problem = Problem(wrapped, fit.data)
    theta = wrapped.from_inner(fit.theta[None])
    turn = wrapped._turn(fit.theta[None], np.zeros(1, int))
    solution = replace_jacobian(fit.solution, theta, fit.jacobian[None] @ turn)
    return replace(
        fit,
        problem=problem,
        theta=theta[0],
        jacobian=solution.jacobian[0],
        solution=solution,
        at_bound=(theta[0] <= wrapped.lower) | (theta[0] >= wrapped.upper),
    )


def replace_jacobian(solution: Solution, theta: np.ndarray, jacobian: np.ndarray) -> Solution:
    """A solved problem in other constants."""
    one = solution.take(np.array([0]))
    one.theta, one.jacobian = theta, jacobian
    one.state = np.array([CONVERGED])
    return one
