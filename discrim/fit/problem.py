"""A predictor with measurements as a least-squares problem: Q, its whitened parts, and what reconciles.

Errors of *measured* conditions are reconciled inside each evaluation (Britt & Luecke,
Technometrics 15 (1973) 233): with e = y - f(c^) - F (c - c^) and V = W + F S_c F', the conditions
move to c^ = c + S_c F' V^-1 e. At the fixed point G' V^-1 e is exactly minus half the gradient of
the profiled objective, so the step of a solver needs no derivative of V. Errors of *set* conditions
and relative errors of the observations are part of W, which follows the fit and is never
differentiated: differentiating it would reward laws for being uncertain.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from discrim.fit.covariance import Whitener, add_source, not_counting
from discrim.fit.measurements import Measurements, Scale
from discrim.reactor.model import Prediction, Predictor

RUNNING, CONVERGED, STEP_LIMIT, NOT_FINITE = 0, 1, 2, 3


@dataclass(slots=True, eq=False)
class Solution:
    """S solved problems (mutable only while the solver works on it).

    Attributes
    ----------
    theta : shape (S, p)
    objective : shape (S,) Q = e' V^-1 e
    residual, jacobian : whitened, shapes (S, N) and (S, N, p); jacobian is d f / d theta
    error : shape (S, N), e, in the units of the observations
    values : shape (S, N) predicted at the reconciled conditions
    conditions : shape (S, N, m) reconciled
    covariance : V, shape (S, N) or (S, N, N); own : W, the part of it that is held during a step
    scale2 : shape (S,) s^2 when it is estimated together with condition errors, else 1
    state : shape (S,) RUNNING, CONVERGED, STEP_LIMIT or NOT_FINITE
    iterations : shape (S,)
    """

    theta: np.ndarray
    objective: np.ndarray
    residual: np.ndarray
    jacobian: np.ndarray
    error: np.ndarray
    values: np.ndarray
    conditions: np.ndarray
    covariance: np.ndarray
    own: np.ndarray
    scale2: np.ndarray
    state: np.ndarray
    iterations: np.ndarray

    def take(self, rows: np.ndarray) -> Solution:
        return Solution(*(getattr(self, f)[rows] for f in _FIELDS))

    def put(self, rows: np.ndarray, other: Solution) -> None:
        for f in _FIELDS:
            getattr(self, f)[rows] = getattr(other, f)


def joined(parts: Sequence[Solution]) -> Solution:
    """Several solved batches of one problem as one, with arrays of its own."""
    return Solution(*(np.concatenate([getattr(s, f) for s in parts]) for f in _FIELDS))


_FIELDS = (
    "theta objective residual jacobian error values conditions covariance own scale2 state iterations"
).split()


class Problem:
    """A predictor with measurements: evaluates residuals, covariances and reconciled conditions."""

    def __init__(self, predictor: Predictor, data: Measurements) -> None:
        self.predictor = predictor
        self.data = data
        obs = data.of_observations
        self.obs_relative = any(s.proportional for s in obs)
        self.set_sources = [s for s in data.of_conditions if s.origin == "set"]
        self.measured = [s for s in data.of_conditions if s.origin != "set"]
        self.diagonal = data.diagonal
        self.with_conditions = bool(self.set_sources or self.measured)
        self.estimated = data.scale is Scale.ESTIMATED
        self.joint_scale = self.estimated and self.with_conditions
        # relative errors of measured conditions follow the reconciled conditions
        self.following = any(s.proportional for s in self.measured)
        # do the covariances change with the fit?
        self.moving = (
            self.obs_relative or bool(self.set_sources) or self.joint_scale or self.following
        )
        largest = np.max(np.abs(data.y), axis=-1, keepdims=True) if data.n else np.zeros((1,))
        self.floor = 1e-4 * np.where(largest > 0, largest, 1.0)

    # ---- pieces ---------------------------------------------------------------------------

    def table(self, rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """y and conditions for the batch rows (broadcast views where shared)."""
        d = self.data
        y = d.y[rows] if d.y.ndim == 2 else d.y[None]
        c = d.conditions[rows] if d.conditions.ndim == 3 else d.conditions[None]
        return y, c

    def base(self, shape: tuple[int, int]) -> np.ndarray:
        s, n = shape
        return np.zeros((s, n)) if self.diagonal else np.zeros((s, n, n))

    def own_covariance(
        self,
        values: np.ndarray,
        conditions: np.ndarray,
        by_conditions: np.ndarray | None,
        scale2: np.ndarray,
    ) -> np.ndarray:
        """W: observations (errors at the fitted values) and set conditions."""
        w = self.base(values.shape)
        if self.estimated:
            if w.ndim == 2:
                w += scale2[:, None]
            else:
                idx = np.arange(values.shape[1])
                w[:, idx, idx] += scale2[:, None]
        for s in self.data.of_observations:
            floor = self.floor if self.floor.shape[0] in (1, len(values)) else self.floor[:1]
            add_source(w, s, s.sd(np.maximum(np.abs(values), floor)), None)
        if by_conditions is not None:
            for s in self.set_sources:
                add_source(w, s, s.sd(conditions[..., s.target]), by_conditions[..., s.target])
        return w

    def errors_of(self, conditions: np.ndarray) -> list[np.ndarray]:
        """Standard deviations of the measured conditions, one array for each source."""
        return [s.sd(conditions[..., s.target]) for s in self.measured]

    def with_measured(
        self,
        w: np.ndarray,
        conditions: np.ndarray,
        by_conditions: np.ndarray | None,
        sds: list[np.ndarray] | None = None,
    ) -> np.ndarray:
        """V = W + F S_measured F', the errors taken at ``conditions`` (``sds``, where known)."""
        if by_conditions is None or not self.measured:
            return w
        v = w.copy()
        sds = sds or self.errors_of(conditions)
        for s, sd in zip(self.measured, sds, strict=True):
            add_source(v, s, sd, by_conditions[..., s.target])
        return v

    def moved(
        self,
        nominal: np.ndarray,
        conditions: np.ndarray,
        by_conditions: np.ndarray,
        weighted: np.ndarray,
        sds: list[np.ndarray] | None = None,
    ) -> np.ndarray:
        """Reconciled conditions: nominal + S_c F' V^-1 e, the errors S_c taken at ``conditions``
        (``sds``, where known); ``weighted`` = V^-1 e, shape (S, N)."""
        out = np.array(np.broadcast_to(nominal, conditions.shape))
        sds = sds or self.errors_of(conditions)
        for s, sd in zip(self.measured, sds, strict=True):
            pull = sd * by_conditions[..., s.target] * weighted
            if not s.individual:
                same = (s.groups[:, None] == s.groups[None, :]).astype(float)
                pull = pull @ same
            out[..., s.target] += sd * pull
        return out

    def _predicted(
        self, theta: np.ndarray, conditions: np.ndarray
    ) -> tuple[Prediction, np.ndarray]:
        """Predictions with sensitivities to conditions, and the conditions they are made at.

        Where the law has no finite slope (the root of an amount read as zero, or reconciled to below
        it), a measured condition under one stated error is taken at one stated error instead.
        """
        pred = self.predictor.predict(theta, conditions, conditions_too=True)
        assert pred.by_conditions is not None
        bad = ~(np.isfinite(pred.values) & np.isfinite(pred.by_conditions).all(axis=2))
        if not self.measured or not bad.any():
            return pred, conditions
        raised = np.array(np.broadcast_to(conditions, (len(theta), *conditions.shape[-2:])))
        for s in self.measured:
            here = raised[..., s.target]
            sd = np.broadcast_to(s.sd(here), here.shape)
            raised[..., s.target] = np.where(bad & (here < sd), sd, here)
        return self.predictor.predict(theta, raised, conditions_too=True), raised

    def evaluate(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        w: np.ndarray | None,
        scale2: np.ndarray,
        rows: np.ndarray,
        passes: int = 2,
        errors_at: np.ndarray | None = None,
    ) -> Solution:
        """Everything at ``theta``, with W given (or made here when None).

        ``errors_at``: conditions at which relative errors of measured conditions are taken; those
        of each pass when None. Like W they are held while two points are compared: Q with errors
        that follow the reconciled conditions is not what the step descends on.
        """
        y, nominal = self.table(rows)
        s = len(theta)
        absent = None if self.data.absent is None else self.data.absent[rows]
        if not self.with_conditions:
            pred = _silenced(self.predictor.predict(theta, conditions), absent)
            values = pred.values
            error = _zeroed(y - values, absent)
            if w is None:
                w = self.own_covariance(values, conditions, None, scale2)
            cov = w if absent is None else not_counting(w, absent)
            white = Whitener(cov)
            assert pred.by_constants is not None
            r = white.vector(error)
            g = white.matrix(pred.by_constants)
        else:
            sds = [] if errors_at is None else self.errors_of(errors_at)
            for k in range(passes):
                pred, conditions = self._predicted(theta, conditions)
                pred = _silenced(pred, absent)
                values, f_c = pred.values, pred.by_conditions
                assert f_c is not None
                assert pred.by_constants is not None
                if w is None:
                    w = self.own_covariance(values, conditions, f_c, scale2)
                error = y - values
                if self.measured:
                    error = error - np.einsum("snm,snm->sn", f_c, nominal - conditions)
                error = _zeroed(error, absent)
                there = conditions if errors_at is None else errors_at
                if errors_at is None:
                    sds = self.errors_of(conditions)
                cov = self.with_measured(w, there, f_c, sds)
                if absent is not None:
                    cov = not_counting(cov, absent)
                white = Whitener(cov)
                r = white.vector(error)
                if not self.measured or k == passes - 1:
                    break
                conditions = self.moved(nominal, there, f_c, white.transposed(r), sds)
            by_constants = pred.by_constants
            assert by_constants is not None
            g = white.matrix(by_constants)
        assert w is not None
        q = np.einsum("sn,sn->s", r, r)
        bad = ~(np.isfinite(q) & np.isfinite(g).all(axis=(1, 2)) & white.ok)
        if bad.any():
            q = np.where(bad, np.inf, q)
        n = self.data.n
        return Solution(
            theta,
            q,
            r,
            g,
            np.broadcast_to(error, (s, n)),
            values,
            np.broadcast_to(conditions, (s, *nominal.shape[1:])),
            np.broadcast_to(cov, (s, *cov.shape[1:])),
            np.broadcast_to(w, (s, *w.shape[1:])),
            np.broadcast_to(scale2, (s,)),
            np.zeros(s, int),
            np.zeros(s, int),
        )

    def merit(self, sol: Solution) -> np.ndarray:
        """What optima are chosen by, the least first, shape (S,): Q, or, where s^2 is estimated
        together with condition errors and Q is therefore N - p at every optimum, s^2 (after those that
        need none)."""
        if not self.joint_scale:
            return sol.objective
        size = max(float(np.mean(self.data.y**2)), 1e-300)
        worse = self.data.n * (1.0 + sol.scale2 / size)
        return np.where(np.isfinite(sol.objective) & (sol.scale2 > 0), worse, sol.objective)

    def updated_scale(self, sol: Solution, free: np.ndarray) -> np.ndarray:
        """s^2 >= 0 with Q(s^2) = N - p, the condition errors held (moment estimate).

        With errors shared by runs Q is taken in the eigenvectors of the rest of V: its diagonal alone
        counts an error that all runs share as if it scattered them, and s^2 came out as zero.
        """
        df = np.maximum(self.data.count - free, 1)
        if sol.covariance.ndim == 3:
            idx = np.arange(self.data.n)
            rest = np.array(sol.covariance)
            rest[:, idx, idx] -= sol.scale2[:, None]
            rest[:, idx, idx] = np.where(np.isposinf(rest[:, idx, idx]), 1.0, rest[:, idx, idx])
            usable = np.isfinite(rest).all(axis=(1, 2))
            rest[~usable] = np.eye(self.data.n)
            v, vectors = np.linalg.eigh(rest)
            v = np.maximum(v, 0.0)
            e2 = np.einsum("snk,sn->sk", vectors, sol.error) ** 2
        else:
            v = np.maximum(sol.covariance - sol.scale2[:, None], 0.0)
            e2 = sol.error**2
        lo = np.zeros(len(df))
        hi = e2.sum(axis=1) / df
        with np.errstate(divide="ignore", invalid="ignore"):
            at_zero = np.where(e2 > 0, e2 / np.maximum(v, 1e-300), 0.0).sum(axis=1)
        for _ in range(60):
            mid = 0.5 * (lo + hi)
            with np.errstate(divide="ignore", invalid="ignore"):
                q = (e2 / np.maximum(v + mid[:, None], 1e-300)).sum(axis=1)
            over = q > df
            lo, hi = np.where(over, mid, lo), np.where(over, hi, mid)
        return np.where(at_zero <= df, 0.0, 0.5 * (lo + hi))


def _zeroed(x: np.ndarray, absent: np.ndarray | None) -> np.ndarray:
    return x if absent is None else np.where(absent, 0.0, x)


def _silenced(pred: Prediction, absent: np.ndarray | None) -> Prediction:
    """The prediction without a word on the observations that do not count, whatever the law gives
    there."""
    if absent is None:
        return pred
    gone = absent[..., None]
    return Prediction(
        np.where(absent, 0.0, pred.values),
        None if pred.by_constants is None else np.where(gone, 0.0, pred.by_constants),
        None if pred.by_conditions is None else np.where(gone, 0.0, pred.by_conditions),
    )
