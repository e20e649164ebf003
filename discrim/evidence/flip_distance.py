"""Flip distance: by how many stated errors all measurements must move before a law fits exactly.

Each measurement moves by at most m stated errors; the smallest such m is found by a sequence of
linear programs, as the guaranteed ranges are (`guaranteed`).
"""

from __future__ import annotations

import numpy as np

from discrim.fit.measurements import OBSERVATION, Measurements, Scale
from discrim.reactor.model import Predictor


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
    with a shrinking trust region. ``fixed``, shape (p,), holds constants (at their value in
    ``theta``). Errors are the stated ones: an sd counts as one, a hard bound as one. Returns nan
    when nothing is stated.
    """
    from scipy.optimize import linprog

    n, _p = data.n, len(theta)
    dy = np.zeros(n)
    dc = np.zeros((n, data.m))
    variance = np.zeros(n)  # the independent parts of one observation are one error of it
    for s in data.sources:
        if s.target == OBSERVATION:
            if s.bound is None:
                variance += s.sd(data.y) ** 2
            else:
                dy += s.bound
        else:
            j = s.target
            dc[:, j] += s.bound if s.bound is not None else s.sd(data.conditions[:, j])
    dy += np.sqrt(variance)
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
    size = np.maximum(
        np.abs(theta[free]), 1e-3 * np.where(predictor.scale[free] > 0, predictor.scale[free], 1.0)
    )
    for _ in range(rounds):
        ok = width > 0
        gw = g[ok][:, free] / width[ok, None] * size
        ew = e[ok] / width[ok]
        k = len(free)
        a = np.vstack(
            [np.hstack([-gw, -np.ones((len(ew), 1))]), np.hstack([gw, -np.ones((len(ew), 1))])]
        )
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
