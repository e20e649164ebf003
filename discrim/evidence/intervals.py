"""Intervals for one constant, side by side, each end saying how it was found.

linearised : Wald, estimate -+ t s.e. (what most programs print)
profile : values whose restricted objective is not too far above the minimum (Bates & Watts 1988,
ch. 6)
reconciled : values that the reconciled score test accepts; a two-sided set with a guard, because
the
    score alone also vanishes far from the optimum (evidence: `score`)
guaranteed : see :mod:`discrim.evidence.guaranteed`
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.curve import Curve, Points
from discrim.evidence.distributions import (
    chi2_quantile_upper,
    f_quantile_upper,
    normal_quantile,
    t_quantile,
)
from discrim.fit.fit import Fit
from discrim.fit.fit import fit as refit
from discrim.fit.measurements import Scale

CROSSED, BOUND, OPEN, FAILED = "crossed", "bound", "open", "failed"
# the guard of the reconciled set: the overall fit may be rejected at this level only, and at no more
# than this share of 1 - confidence
GUARD = 0.01
GUARD_SHARE = 0.2


def guard_level(alpha: float) -> float:
    """Level at which the objective alone may exclude, of the ``alpha`` that there is to spend."""
    return min(GUARD, GUARD_SHARE * alpha)


@dataclass(frozen=True, slots=True)
class Side:
    """One end: its value (infinite when open) and how it was found."""

    value: float
    end: str


@dataclass(frozen=True, slots=True)
class Interval:
    """A set of values: its hull, its pieces, and words when something is to be said.

    ``empty`` is True when no value is accepted; ``low`` and ``high`` are then nan.
    """

    kind: str
    low: Side
    high: Side
    pieces: tuple[tuple[float, float], ...] = ()
    empty: bool = False
    note: str = ""


def nothing(kind: str, note: str) -> Interval:
    """No interval of this kind, with the reason."""
    nan = Side(float("nan"), FAILED)
    return Interval(kind, nan, nan, note=note)


def standard_errors(fit: Fit) -> np.ndarray:
    """Standard errors of the constants from the SVD of the scaled Jacobian, shape (p,).

    A constant at a bound is held there; its own standard error is that of the free fit's column.
    Infinite for constants that these runs do not determine.
    """
    jac = fit.jacobian
    n, p = jac.shape
    norms = np.sqrt((jac**2).sum(axis=0))
    out = np.full(p, np.inf)
    use = norms > 0
    if not use.any() or not np.isfinite(jac).all():
        return out
    _u, s, vt = np.linalg.svd(jac[:, use] / norms[use], full_matrices=False)
    if n < use.sum():
        return out
    tiny = s <= 1e-14 * s[0]
    # a null direction leaves the constants that carry it undetermined, and no other
    share = vt / np.where(tiny, 1.0, s)[:, None]
    share = np.where(tiny[:, None], np.where(np.abs(vt) > 1e-8, np.inf, 0.0), share)
    var = (share**2).sum(axis=0)
    scale2 = fit.scale2 if _scale_from_fit(fit) else 1.0
    fixed = np.isfinite(var)  # an exact fit (scale 0) does not determine what the runs leave open
    out[use] = np.where(fixed, np.sqrt(np.where(fixed, var, 0.0) * scale2), np.inf) / norms[use]
    return out


def _scale_from_fit(fit: Fit) -> bool:
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


def linearised(fit: Fit, psi: int, se: float, level: float) -> Interval:
    """Estimate -+ quantile times standard error; not cut at the bounds, so that its failure shows."""
    half = quantile(fit, level) * se
    if not np.isfinite(half):
        return Interval(
            "linearised",
            Side(-np.inf, OPEN),
            Side(np.inf, OPEN),
            note="not determined by these runs",
        )
    x = float(fit.theta[psi])
    return Interval("linearised", Side(x - half, CROSSED), Side(x + half, CROSSED))


@dataclass(frozen=True, slots=True, eq=False)
class Along:
    """Both curve-based intervals of one constant, its one-sided bounds, and the raw points.

    ``upper_one_sided`` and ``lower_one_sided``: ends of the hull of values not rejected by the
    one-sided reconciled test at 1 - level, used by verdicts.
    """

    profile: Interval
    reconciled: Interval
    lower_one_sided: Side
    upper_one_sided: Side
    points: Points
    lower_objective: float


def along(
    fit: Fit,
    curve: Curve,
    level: float,
    *,
    se: float,
    estimate: float | None = None,
    lower: float | None = None,
    upper: float | None = None,
    with_profile: bool = True,
    closeness: float = 1e-6,
) -> Along:
    """Profile and reconciled intervals of the constant of ``curve``.

    ``estimate``, ``lower``, ``upper`` default to those of the constant in the fit; ``with_profile``
    False leaves the profile out; ends are found to a relative ``closeness``.
    """
    psi = curve.psi
    x = float(fit.theta[psi]) if estimate is None else estimate
    lo = float(fit.predictor.lower[psi]) if lower is None else lower
    hi = float(fit.predictor.upper[psi]) if upper is None else upper
    typical = float(fit.predictor.scale[psi])
    grid = _grid(x, se, lo, hi, typical, coarse=closeness > 1e-5)
    pts = curve.at(grid)
    free = fit.objective
    lowest = float(np.nanmin(pts.objective)) if np.isfinite(pts.objective).any() else free
    base = min(free, lowest)
    tests = _Acceptance(fit, base, level, lo)

    accepts: list[Accept] = [tests.reconciled, tests.not_too_high, tests.not_too_low]
    held = with_profile and fit.problem.joint_scale
    if with_profile and not held:
        accepts.append(tests.profile)
    (recon, *_), (_, _, high1), (_, low1, _), *rest = _sets(curve, pts, accepts, lo, hi, closeness)
    if held:
        profile = _profile_at_variance(fit, psi, level, se)
    else:
        profile = rest[0][0] if rest else nothing("profile", "not asked for")
    return Along(
        _around(profile, x),
        _named(recon, "reconciled", tests, pts),
        low1,
        high1,
        pts,
        lowest,
    )


def _profile_at_variance(fit: Fit, psi: int, level: float, se: float) -> Interval:
    """Profile where s^2 is estimated beside known errors of the conditions: s^2 held at its estimate.

    With s^2 estimated anew at each value the objective is N - p everywhere and says nothing.
    """
    if fit.degrees_of_freedom < 1:
        return nothing("profile", "not computed: as many constants as runs, scale unknown")
    data = fit.data.with_variance(fit.scale2, fit.degrees_of_freedom)
    again = refit(fit.predictor, data, starts=1, near=fit.theta[None])
    if not again.ok:
        return nothing("profile", "not computed: the fit with the variance held failed")
    return along(again, Curve.of(again, psi), level, se=se).profile


def _around(profile: Interval, x: float) -> Interval:
    """The piece of a profile that holds the estimate, as a trace from the estimate gives it; others
    (two terms of one form changing places, say) are named in the note and kept as pieces."""
    pieces = profile.pieces
    if len(pieces) < 2:
        return replace(profile, kind="profile")
    k = min(range(len(pieces)), key=lambda i: max(pieces[i][0] - x, x - pieces[i][1], 0.0))
    low = profile.low if k == 0 else Side(pieces[k][0], CROSSED)
    high = profile.high if k == len(pieces) - 1 else Side(pieces[k][1], CROSSED)
    elsewhere = "; ".join(f"{a:.4g} to {b:.4g}" for i, (a, b) in enumerate(pieces) if i != k)
    return Interval("profile", low, high, pieces, False, f"also consistent: {elsewhere}")


def _named(
    interval: Interval, kind: str, tests: _Acceptance | None = None, pts: Points | None = None
) -> Interval:
    note = interval.note
    if interval.empty and tests is not None and pts is not None:
        if not tests.fits_somewhere(pts):
            note = "empty: the law is rejected by these runs at every value (lack of fit)"
        else:
            note = "empty: accepted nowhere on the values tried; the estimate is on the edge"
    elif len(interval.pieces) > 1:
        note = f"{len(interval.pieces)} separate pieces; the hull is given"
    return Interval(kind, interval.low, interval.high, interval.pieces, interval.empty, note)


class _Acceptance:
    """Margins (positive = accepted) of the sets of values, as functions of the points."""

    def __init__(self, fit: Fit, base: float, level: float, lower: float) -> None:
        self.base = base
        self.lower = lower
        self.known = fit.data.scale is not Scale.ESTIMATED
        alpha = 1.0 - level
        df = reference_df(fit)
        self.limit = quantile(fit, level) ** 2
        self.s2 = fit.scale2 if _scale_from_fit(fit) else 1.0
        if _scale_from_fit(fit) and fit.degrees_of_freedom > 0:
            self.s2 = base / fit.degrees_of_freedom
        self.df = df
        n, p = fit.n, fit.p
        # A limit on the objective of a restricted fit. Stated scale: chi-squared. Unknown scale and
        # exact conditions: the joint region of all constants (Beale, J. R. Stat. Soc. B 22 (1960)
        # 41), which never binds for a linear law, so nothing is spent on it. Else void.
        self.guard, self.unit, spend = np.inf, 1.0, 0.0
        if fit.data.scale is Scale.STATED:
            spend = guard_level(alpha)
            self.guard = chi2_quantile_upper(spend, max(n - (p - 1), 1))
            self.unit = max(self.guard, 1.0)
        elif _scale_from_fit(fit) and fit.degrees_of_freedom > 0 and base > 0:
            dof = fit.degrees_of_freedom
            f = f_quantile_upper(guard_level(alpha), p, dof)
            self.guard = self.unit = base * (1.0 + p * f / dof)
        self.two = normal_quantile(1.0 - (alpha - spend) / 2)
        self.one = normal_quantile(1.0 - (alpha - spend))

    def _q_ok(self, pts: Points) -> np.ndarray:
        with np.errstate(invalid="ignore"):
            margin = self.guard - pts.objective
        return np.where(np.isfinite(pts.objective), margin, -np.inf)

    def profile(self, pts: Points) -> np.ndarray:
        rise = (pts.objective - self.base) / self.s2 if self.s2 > 0 else pts.objective
        return np.where(np.isfinite(rise), self.limit - rise, -np.inf)

    def reconciled(self, pts: Points) -> np.ndarray:
        # on a lower bound only evidence for a larger value can exclude the bound itself
        z = np.where(pts.values <= self.lower, np.maximum(pts.z, 0.0), pts.z)
        m = self.two - np.abs(z)
        m = np.where(np.isfinite(m), m, np.inf if not self.known else -np.inf)
        # nan z with an unknown scale: no degrees of freedom, nothing is excluded
        return self._with_guard(m, pts)

    def not_too_high(self, pts: Points) -> np.ndarray:
        m = self.one + pts.z
        m = np.where(np.isfinite(m), m, np.inf if not self.known else -np.inf)
        return self._with_guard(m, pts)

    def not_too_low(self, pts: Points) -> np.ndarray:
        m = self.one - pts.z
        m = np.where(np.isfinite(m), m, np.inf if not self.known else -np.inf)
        return self._with_guard(m, pts)

    def _with_guard(self, m: np.ndarray, pts: Points) -> np.ndarray:
        if not np.isfinite(self.guard):
            return m
        scaled = self._q_ok(pts) / self.unit
        return np.minimum(m, np.where(np.isfinite(scaled), 10.0 * scaled, -np.inf))

    def fits_somewhere(self, pts: Points) -> bool:
        return bool((self._q_ok(pts) > 0).any())


def _grid(
    x: float, se: float, lo: float, hi: float, typical: float, *, coarse: bool = False
) -> np.ndarray:
    """Values to try: near the estimate in standard errors, far from it in decades."""
    parts = [np.array([x])]
    if np.isfinite(se) and se > 0:
        k = np.array([0.25, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 6.0, 10.0, 20.0])
        if coarse:
            k = k[[1, 2, 4, 6, 7, 9]]
        parts += [x + se * k, x - se * k]
    size = max(abs(x), typical if np.isfinite(typical) else 0.0, 1e-300)
    if lo >= 0:
        parts.append(size * np.logspace(-5, 5, 11 if coarse else 21))
        if x > 0:
            parts.append(x * np.array([0.5, 0.8, 0.9, 0.95, 1.05, 1.1, 1.25, 2.0]))
    else:
        far = size * np.logspace(-1, 2, 7)
        parts += [x + far, x - far]
    if np.isfinite(lo):
        parts.append(np.array([lo]))
    if np.isfinite(hi):
        parts.append(np.array([hi]))
        if np.isfinite(lo):
            parts.append(lo + (hi - lo) * np.linspace(0.05, 0.95, 10))
    grid = np.unique(np.clip(np.concatenate(parts), lo, hi))
    # values closer than rounding to one another add nothing
    keep = np.concatenate([[True], np.diff(grid) > 1e-9 * np.maximum(np.abs(grid[1:]), 1e-300)])
    return grid[keep]


Accept = Callable[[Points], np.ndarray]


def _sets(
    curve: Curve,
    pts: Points,
    accepts: Sequence[Accept],
    lo: float,
    hi: float,
    closeness: float,
) -> list[tuple[Interval, Side, Side]]:
    """The accepted set of each criterion: pieces on the grid, the ends of all of them refined
    together as one batch."""
    v = pts.values
    margins = [accept(pts) for accept in accepts]
    changes = [np.flatnonzero((m[1:] > 0) != (m[:-1] > 0)) for m in margins]
    which = np.concatenate([np.full(len(c), k) for k, c in enumerate(changes)]).astype(int)
    at = np.concatenate(changes).astype(int)
    fa = np.array([margins[k][j] for k, j in zip(which, at, strict=True)])
    fb = np.array([margins[k][j + 1] for k, j in zip(which, at, strict=True)])
    ends = _refine(curve, accepts, which, v[at], v[at + 1], fa, fb, closeness)
    return [_pieces(margins[k] > 0, ends[which == k], lo, hi) for k in range(len(accepts))]


def _pieces(yes: np.ndarray, ends: np.ndarray, lo: float, hi: float) -> tuple[Interval, Side, Side]:
    """Pieces and hull from what is accepted on the grid and where that changes."""
    if not yes.any():
        nan = Side(float("nan"), FAILED)
        return Interval("", nan, nan, empty=True), nan, nan
    first = [-np.inf] if yes[0] else []
    last = [np.inf] if yes[-1] else []
    marks = [*first, *ends.tolist(), *last]
    pieces = tuple((marks[k], marks[k + 1]) for k in range(0, len(marks) - 1, 2))

    def side(value: float, edge: float) -> Side:
        if np.isinf(value):
            return Side(edge, BOUND) if np.isfinite(edge) else Side(value, OPEN)
        return Side(value, CROSSED)

    low, high = side(pieces[0][0], lo), side(pieces[-1][1], hi)
    shown = tuple(
        (max(a, lo) if np.isfinite(lo) else a, min(b, hi) if np.isfinite(hi) else b)
        for a, b in pieces
    )
    return Interval("", low, high, shown), low, high


def _refine(
    curve: Curve,
    accepts: Sequence[Accept],
    which: np.ndarray,
    a: np.ndarray,
    b: np.ndarray,
    fa: np.ndarray,
    fb: np.ndarray,
    closeness: float,
) -> np.ndarray:
    """Where the margin of criterion ``which`` changes sign between a and b (Illinois method)."""
    if not len(a):
        return a
    a, b = a.astype(float).copy(), b.astype(float).copy()
    fa, fb = _tame(fa), _tame(fb)
    out = 0.5 * (a + b)
    live = np.arange(len(a))
    for k in range(40):
        la, lb, lfa, lfb = a[live], b[live], fa[live], fb[live]
        with np.errstate(divide="ignore", invalid="ignore"):
            x = (la * lfb - lb * lfa) / (lfb - lfa)
        # bisection at first where the bracket spans decades, and whenever the secant leaves it
        wide = (k < 3) & (np.abs(lb - la) > 0.5 * (np.abs(la) + np.abs(lb)))
        positive = (la > 0) & (lb > 0)
        mid = np.where(positive, np.sqrt(np.abs(la * lb)), 0.5 * (la + lb))
        inside = (x > np.minimum(la, lb)) & (x < np.maximum(la, lb))
        x = np.where(wide | ~inside | (k % 8 == 7), mid, x)
        pts = curve.at(x, careful=False)
        every = [_tame(accept(pts)) for accept in accepts]
        fx = np.array([every[w][i] for i, w in enumerate(which[live])])
        same = (fx > 0) == (lfa > 0)
        half = 0.5 if k > 2 else 1.0
        fb[live] = np.where(same, lfb * half, fx)
        fa[live] = np.where(same, fx, lfa * half)
        b[live] = np.where(same, lb, x)
        a[live] = np.where(same, x, la)
        moved = np.abs(x - out[live])
        out[live] = x
        narrow = np.abs(b[live] - a[live]) <= closeness * np.maximum(np.abs(x), 1e-300)
        settled = (k > 3) & (moved <= 0.1 * closeness * np.abs(x)) & ~wide
        live = live[~(narrow | (np.abs(fx) <= 1e-7) | settled)]
        if not len(live):
            break
    return out


def _tame(m: np.ndarray) -> np.ndarray:
    """Margins without infinities, so that a secant can be drawn."""
    return np.clip(np.nan_to_num(m, nan=-1e3, posinf=1e3, neginf=-1e3), -1e3, 1e3)
