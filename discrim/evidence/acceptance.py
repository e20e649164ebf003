"""Which values of a constant each kind of interval accepts, as margins: positive means accepted."""

from __future__ import annotations

import numpy as np

from discrim.evidence.curve import Points
from discrim.evidence.distributions import (
    chi2_quantile_upper,
    f_quantile_upper,
    normal_quantile,
    t_quantile,
)
from discrim.evidence.score import NO_INFORMATION
from discrim.fit.covariance import Whitener
from discrim.fit.fit import Fit
from discrim.fit.freedom import on_bounds
from discrim.fit.measurements import Scale
from discrim.fit.problem import Solution

# The guard of the reconciled set: this share of 1 - confidence is left to the objective alone. It is there
# for values so far off that the conditions are reconciled to where the score says nothing; the objective
# is then rejected at any level, so little need be spent. Of 200 studies of two pathways (spread 1 %,
# conditions 2 %, 12 runs): a fifth of alpha with K alone, 8 to 11 % of the sets in pieces; 2 % of alpha with
# the conditional likelihood ratio, 2 %, and shorter; none at all, 86 % reach beyond the whole rate.
GUARD_SHARE = 0.02
# where nothing is spent on it (unknown scale and exact conditions)
FAR = 0.01
# One-sided ends are at least this many standard errors off the edge (the power constraint of Cowan, Cranmer,
# Gross & Vitells, arXiv:1105.3166 (2011), from memory): wider than asked, never shorter.
LEAST = 1.0


def guard_level(alpha: float) -> float:
    """Level at which the objective alone may exclude, of the ``alpha`` that there is to spend."""
    return GUARD_SHARE * alpha


def scale_from_fit(fit: Fit) -> bool:
    """True when the whitened residuals still carry an unknown scale."""
    return fit.data.scale is Scale.ESTIMATED and not fit.problem.with_conditions


def reference_df(fit: Fit) -> float:
    """Degrees of freedom of the t reference: residual, of the replicates, or infinite."""
    if fit.data.scale is Scale.ESTIMATED:
        return float(fit.degrees_of_freedom)
    if fit.data.scale is Scale.REPLICATES:
        return float(fit.data.scale_df)
    return float("inf")


def quantile(fit: Fit, level: float) -> float:
    """Two-sided t or normal quantile."""
    df = reference_df(fit)
    if df <= 0:
        return float("inf")
    return t_quantile(0.5 + level / 2.0, df)


class Acceptance:
    """Margins of the sets of values of one constant, as functions of the points.

    Parameters
    ----------
    base : the lowest objective known; lower, upper : bounds of the constant; psi : its index
    """

    def __init__(
        self,
        fit: Fit,
        base: float,
        level: float,
        lower: float,
        psi: int,
        upper: float = float("inf"),
    ) -> None:
        self.fit, self.level, self.psi = fit, level, psi
        self.lower, self.upper = lower, upper
        self.above = self.below = 0.0
        self.known = fit.data.scale is not Scale.ESTIMATED
        self.limit = quantile(fit, level) ** 2
        self.held = self._held_variance() if fit.problem.joint_scale else 0.0
        guarded = self.known or fit.problem.joint_scale
        self.spend = guard_level(1.0 - level) if guarded else 0.0
        alpha = 1.0 - level
        self.two = normal_quantile(1.0 - (alpha - self.spend) / 2)
        self.one = normal_quantile(1.0 - (alpha - self.spend))
        self.rebase(base)

    def rebase(self, base: float) -> None:
        """Take ``base`` as the lowest objective."""
        fit, free = self.fit, scale_from_fit(self.fit)
        n, p, dof = fit.n, fit.p, fit.degrees_of_freedom
        self.base = base
        self.s2 = fit.scale2 if free else 1.0
        if free and dof > 0:
            self.s2 = base / dof
        # A limit on the objective of a restricted fit. Stated scale: chi-squared. Unknown scale and
        # exact conditions: the joint region of all constants (Beale, J. R. Stat. Soc. B 22 (1960)
        # 41), which never binds for a linear law, so nothing is spent on it. A variance from replicates:
        # F. A variance estimated beside errors of conditions: the objective with that of the fit, held,
        # by F as if the two were independent; they are nearly the same where the value is true, so next
        # to nothing is spent, and what fits many times worse is still excluded.
        self.guard, self.unit = np.inf, 1.0
        self.guards = self.alone = np.full(p, np.inf)
        if fit.data.scale is Scale.STATED:
            # one more degree of freedom for each of the others that is on a bound (`fit.freedom`)
            df = np.maximum(n - (p - 1) + np.arange(p), 1)
            self.guards = np.array([chi2_quantile_upper(self.spend, d) for d in df])
            # where the constant is in exact lockstep with others no score can be had, at any value:
            # the objective has all of alpha to itself
            alone = np.array([chi2_quantile_upper(1.0 - self.level, d) for d in df])
            self.alone = np.minimum(alone, self.guards)
            self.guard = float(self.guards[-1])
            self.unit = max(float(self.guards[0]), 1.0)
        elif self.known or (fit.problem.joint_scale and dof > 0):
            df = np.maximum(n - (p - 1) + np.arange(p), 1)
            joint = fit.problem.joint_scale
            below = float(dof) if joint else float(fit.data.scale_df)
            unit = max(float(self._scatter(fit.solution)[0]) / dof, 1.0) if joint else 1.0
            each = np.array([d * f_quantile_upper(self.spend, d, below) for d in df])
            self.guards = self.alone = unit * each
            if not joint:
                alone = np.array([d * f_quantile_upper(1.0 - self.level, d, below) for d in df])
                self.alone = np.minimum(alone, self.guards)
            self.guard = float(self.guards[-1])
            self.unit = max(float(self.guards[0]), 1.0)
        elif free and dof > 0 and base > 0:
            f = f_quantile_upper(min(FAR, 0.2 * (1.0 - self.level)), p, dof)
            self.guard = self.unit = base * (1.0 + p * f / dof)
            self.guards = self.alone = np.full(p, self.guard)

    @property
    def hopeless(self) -> float:
        """An objective from which no way leads to a value that any of the sets accepts."""
        if not np.isfinite(self.guard) or self.fit.problem.joint_scale:
            return float("inf")
        return float(4.0 * max(self.guard, self.base + self.limit * self.s2))

    def guarded(self, pts: Points) -> np.ndarray:
        """Margins of the guard alone, shape (S,): negative where the objective excludes a value."""
        with np.errstate(invalid="ignore"):
            untestable = pts.score.information <= NO_INFORMATION
            k = self._on_bounds(pts)
            q = self._scatter(pts.solution) if self.fit.problem.joint_scale else pts.objective
            margin = np.where(untestable, self.alone[k], self.guards[k]) - q
        return np.where(np.isfinite(pts.objective), margin, -np.inf)

    def _held_variance(self) -> float:
        """The variance of the fit, kept off zero: conditions may carry no error in some run."""
        return max(self.fit.scale2, 1e-9 * float(np.var(self.fit.data.y)), 1e-300)

    def _scatter(self, sol: Solution) -> np.ndarray:
        """The objective with the variance of the fit in place of each point's own, shape (S,)."""
        v = np.array(sol.covariance)
        shift = self.held - sol.scale2
        if v.ndim == 2:
            v += shift[:, None]
        else:
            k = np.arange(v.shape[1])
            v[:, k, k] += shift[:, None]
        white = Whitener(v)
        r = white.vector(sol.error)
        return np.where(white.ok, np.einsum("sn,sn->s", r, r), np.inf)

    def _on_bounds(self, pts: Points) -> np.ndarray:
        """How many of the other constants are on a bound at each point, shape (S,)."""
        predictor = self.fit.predictor
        on = on_bounds(pts.solution.theta, predictor.lower, predictor.upper)
        return np.asarray(on.sum(axis=1) - on[:, self.psi])

    def profile(self, pts: Points) -> np.ndarray:
        rise = pts.objective - self.base
        # an exact fit has no scale to compare with: whatever is worse at all is excluded
        rise = rise / self.s2 if self.s2 > 0 else np.where(rise > 0, np.inf, 0.0)
        return np.where(np.isfinite(rise), self.limit - rise, -np.inf)

    def reconciled(self, pts: Points) -> np.ndarray:
        return self._guarded(self.two - np.abs(self._within(pts)), pts)

    def not_too_high(self, pts: Points) -> np.ndarray:
        self.above = self._kept_off(pts.values <= self.lower, -pts.z, self.above)
        return self._guarded(self.one + pts.z + self.above, pts)

    def not_too_low(self, pts: Points) -> np.ndarray:
        self.below = self._kept_off(pts.values >= self.upper, pts.z, self.below)
        return self._guarded(self.one - pts.z + self.below, pts)

    def _kept_off(self, edge: np.ndarray, outward: np.ndarray, known: float) -> float:
        """One-sided ends stay ``LEAST`` standard errors off the edge, however far outside it the runs
        point: else a twentieth of the sets of an absent term would be empty, and others be closed
        sooner than the runs can tell. What is added to the margin: ``known`` where the edge is not
        among the points; ``outward``: scores pointing beyond it."""
        z = outward[edge]
        if not len(z) or not np.isfinite(z).all():
            return known
        return float(max(0.0, z.max() - self.one + LEAST))

    def _within(self, pts: Points) -> np.ndarray:
        """Scores as evidence within the bounds: only evidence for a larger value can exclude a lower
        bound."""
        z = np.where(pts.values <= self.lower, np.maximum(pts.z, 0.0), pts.z)
        return np.where(pts.values >= self.upper, np.minimum(z, 0.0), z)

    def _guarded(self, m: np.ndarray, pts: Points) -> np.ndarray:
        # nan z with an unknown scale: no degrees of freedom, nothing is excluded
        m = np.where(np.isfinite(m), m, np.inf if not self.known else -np.inf)
        if not np.isfinite(self.guard):
            return m
        scaled = self.guarded(pts) / self.unit
        return np.minimum(m, np.where(np.isfinite(scaled), 10.0 * scaled, -np.inf))

    def fits_somewhere(self, pts: Points) -> bool:
        return bool((self.guarded(pts) > 0).any())
