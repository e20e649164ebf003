"""Guaranteed ranges: every value of a constant that is consistent with hard bounds on all errors.

For a law linear in constants theta >= 0 whose coefficients C are known to lie within [C_lo, C_hi] and
observations within [y_lo, y_hi], the consistent theta are the polytope

    C_lo theta <= y_hi,   C_hi theta >= y_lo

(Oettli & Prager, Numer. Math. 6 (1964) 405), and each end of a range is a linear program. Digits and
limits are hard bounds; a standard deviation becomes one at +- Phi^-1(1 - alpha/(2 M)) for M
measurements together, and the range is then called worst-case.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
from discrim.evidence.distributions import normal_quantile
from discrim.evidence.intervals import BOUND, CROSSED, FAILED, OPEN, Interval, Side, nothing
from discrim.fit.measurements import OBSERVATION, Measurements, Scale
from discrim.reactor.model import Predictor


@dataclass(frozen=True, slots=True, eq=False)
class Bounds:
    """Half-widths of all measurements: y (N,), conditions (N, m); hard when none came from an sd."""

    y: np.ndarray
    conditions: np.ndarray
    hard: bool


def bounds_of(data: Measurements, alpha: float, scale2: float) -> Bounds:
    """Half-widths of the errors, sds widened so that all M of them hold together at 1 - alpha."""
    n, m = data.n, data.m
    sds = 0
    for s in data.sources:
        if s.bound is None:
            sds += len(np.unique(s.groups))
    if data.scale is Scale.ESTIMATED:
        sds += n
    k = normal_quantile(1.0 - alpha / (2 * max(sds, 1)))
    y = np.zeros(n)
    cond = np.zeros((n, m))
    for s in data.sources:
        if s.target == OBSERVATION:
            y += s.bound if s.bound is not None else k * s.sd(data.y)
        else:
            half = s.bound if s.bound is not None else k * s.sd(data.conditions[:, s.target])
            cond[:, s.target] += half
    if data.scale is Scale.ESTIMATED:
        y += k * np.sqrt(max(scale2, 0.0))
    return Bounds(y, cond, sds == 0)


def coefficient_range(
    predictor: Predictor, data: Measurements, half: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Smallest and largest coefficient of each constant within the condition bounds, (N, p) each.

    Taken over the corners of the box of conditions: exact for coefficients monotone in each
    condition, which products of powers of amounts are.
    """
    p = len(predictor.names)
    theta = np.ones((1, p))
    m = data.m
    moving = [j for j in range(m) if half[:, j].any()]
    low = np.full((data.n, p), np.inf)
    high = np.full((data.n, p), -np.inf)
    for signs in product((-1.0, 1.0), repeat=len(moving)):
        c = data.conditions.copy()
        for sign, j in zip(signs, moving, strict=True):
            c[:, j] = np.maximum(c[:, j] + sign * half[:, j], 0.0)
        g = predictor.predict(theta, c).by_constants
        assert g is not None
        low = np.minimum(low, g[0])
        high = np.maximum(high, g[0])
    return low, high


def guaranteed(predictor: Predictor, data: Measurements, alpha: float, scale2: float) -> list[Interval]:
    """The range of each constant; with a note (and no range) where it cannot be had."""
    p = len(predictor.names)
    reason = ""
    if not bool(predictor.linear.all()):
        reason = "not computed: the law is not linear in its constants"
    elif (predictor.lower < 0).any():
        reason = "not computed: a constant may be negative"
    elif data.scale is Scale.ESTIMATED and not scale2 > 0:
        reason = "not computed: no error of the observations is stated or can be estimated"
    elif sum(1 for j in range(data.m) if any(s.target == j for s in data.of_conditions)) > 10:
        reason = "not computed: too many conditions with errors"
    if reason:
        return [nothing("guaranteed", reason) for _ in range(p)]
    half = bounds_of(data, alpha, scale2)
    low, high = coefficient_range(predictor, data, half.conditions)
    return _ranges(predictor, data, half, low, high)


def _ranges(
    predictor: Predictor, data: Measurements, half: Bounds, low: np.ndarray, high: np.ndarray
) -> list[Interval]:
    from scipy.optimize import linprog

    p = len(predictor.names)
    a = np.vstack([low, -high])
    b = np.concatenate([data.y + half.y, -(data.y - half.y)])
    # rows and columns scaled: the program sees numbers near one
    col = np.max(np.abs(a), axis=0)
    col = np.where(col > 0, col, 1.0)
    a = a / col
    row = np.maximum(np.max(np.abs(a), axis=1), np.abs(b))
    row = np.where(row > 0, row, 1.0)
    a, b = a / row[:, None], b / row
    box = [
        (lo * c, None if np.isinf(hi) else hi * c)
        for lo, hi, c in zip(predictor.lower, predictor.upper, col, strict=True)
    ]
    words = "" if half.hard else "worst-case: errors given as standard deviations, all bounded together"
    out = []
    for j in range(p):
        ends = []
        for sign in (1.0, -1.0):
            cost = np.zeros(p)
            cost[j] = sign
            res = linprog(cost, A_ub=a, b_ub=b, bounds=box, method="highs")
            if res.status == 0:
                value = float(res.x[j] / col[j])
                at = value <= predictor.lower[j] if sign > 0 else value >= predictor.upper[j]
                ends.append(Side(value, BOUND if at else CROSSED))
            elif res.status == 3:
                ends.append(Side(np.inf if sign < 0 else -np.inf, OPEN))
            else:
                ends.append(Side(float("nan"), FAILED))
        note = words
        empty = any(e.end == FAILED for e in ends)
        if empty:
            note = "empty: no value fits every run within its bounds" + (
                f" ({words})" if words else ""
            )
        out.append(Interval("guaranteed", ends[0], ends[1], (), empty, note))
    return out


def _usable(sensitivities: np.ndarray, width: np.ndarray) -> bool:
    """False at a point with an infinite slope, as that of a square root at zero."""
    return bool(np.isfinite(sensitivities).all() and np.isfinite(width).all())


def flip_distance(
    predictor: Predictor,
    data: Measurements,
    scale2: float,
    theta: np.ndarray,
    *,
    fixed: np.ndarray,
    rounds: int = 30,
) -> float:
    """Smallest m such that, each measurement moved by at most m stated errors, the law fits exactly.

    min over theta of max_i |e_i| / (dy_i + sum_j |F_ij| dc_ij), by a sequence of linear programs
    with a shrinking trust region. ``fixed``, shape (p,), holds constants (at their value in ``theta``).
    Errors are the stated ones: an sd counts as one, a hard bound as one. Returns nan when nothing is
    stated.
    """
    from scipy.optimize import linprog

    n, p = data.n, len(theta)
    dy = np.zeros(n)
    dc = np.zeros((n, data.m))
    for s in data.sources:
        if s.target == OBSERVATION:
            dy += s.bound if s.bound is not None else s.sd(data.y)
        else:
            j = s.target
            dc[:, j] += s.bound if s.bound is not None else s.sd(data.conditions[:, j])
    if data.scale is Scale.ESTIMATED:
        if not scale2 > 0:
            return float("nan")
        dy += np.sqrt(scale2)
    free = np.flatnonzero(~fixed)
    use_conditions = bool(dc.any())

    def look(t: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        pred = predictor.predict(t[None], data.conditions, conditions_too=use_conditions)
        width = dy.copy()
        if use_conditions:
            assert pred.by_conditions is not None
            width = width + (np.abs(pred.by_conditions[0]) * dc).sum(axis=1)
        assert pred.by_constants is not None
        return data.y - pred.values[0], pred.by_constants[0], width

    def worst(e: np.ndarray, width: np.ndarray) -> float:
        with np.errstate(divide="ignore", invalid="ignore"):
            r = np.where(e == 0, 0.0, np.abs(e) / width)
        return float(np.max(r)) if np.isfinite(r).all() else float("inf")

    theta = theta.astype(float).copy()
    e, g, width = look(theta)
    best = worst(e, width)
    if not np.isfinite(best) or not len(free) or not _usable(g, width):
        return best
    trust = 1.0
    size = np.maximum(np.abs(theta[free]), 1e-3 * np.where(predictor.scale[free] > 0, predictor.scale[free], 1.0))
    for _ in range(rounds):
        ok = width > 0
        gw = g[ok][:, free] / width[ok, None] * size
        ew = e[ok] / width[ok]
        k = len(free)
        a = np.vstack([np.hstack([-gw, -np.ones((len(ew), 1))]), np.hstack([gw, -np.ones((len(ew), 1))])])
        b = np.concatenate([-ew, ew])
        lo = np.maximum((predictor.lower[free] - theta[free]) / size, -trust)
        hi = np.minimum((predictor.upper[free] - theta[free]) / size, trust)
        box = [*zip(lo, np.maximum(hi, lo), strict=True), (0.0, None)]
        res = linprog(np.r_[np.zeros(k), 1.0], A_ub=a, b_ub=b, bounds=box, method="highs")
        if res.status != 0:
            break
        trial = theta.copy()
        trial[free] = np.clip(
            theta[free] + res.x[:k] * size, predictor.lower[free], predictor.upper[free]
        )
        e_t, g_t, w_t = look(trial)
        new = worst(e_t, w_t)
        if new < best and _usable(g_t, w_t):
            gain = best - new
            theta, e, g, width, best = trial, e_t, g_t, w_t, new
            size = np.maximum(np.abs(theta[free]), 1e-3 * size)
            trust = min(trust * 2.0, 1e3)
            if gain <= 1e-6 * best + 1e-12:
                break
        else:
            trust *= 0.25
            if trust < 1e-6:
                break
    return best
