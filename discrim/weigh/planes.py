"""The plane of two constants: the line (band, with its errors) that each run allows, and the region.

Two runs whose bands are nearly parallel cross nowhere in particular: that picture is conditioning.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from discrim.fit.measurements import Scale

if TYPE_CHECKING:
    from discrim.weigh.weighed import Weighed

ACROSS = 33  # points along the horizontal constant
DOWN = 241  # points tried for the vertical one
GRID = 41
MOST_RUNS = 40
MOST_PLANES = 2


def planes(w: Weighed) -> list[dict[str, Any]]:
    """A plane for each of the few candidates that stand and have two constants or more.

    Those with terms in lockstep come first: they show what the runs cannot tell apart.
    """
    out = []
    order = sorted(range(len(w.laws)), key=lambda i: (not w.assessments[i].lockstep, w.rank[i]))
    for i in order:
        if w.stands[i] and w.assessments[i].fit.ok and len(w.bounds[i].names) >= 2:
            out.append(_plane(w, i))
        if len(out) == MOST_PLANES:
            break
    return out


def _pair(w: Weighed, i: int) -> tuple[int, int]:
    """The two constants that trade off most, else those asked about, else the first two."""
    a = w.assessments[i]
    if a.lockstep:
        return a.lockstep[0].first, a.lockstep[0].second
    c = a.conditioning
    if len(c.indices) and np.isfinite(c.directions).all():
        d = np.abs(c.directions[-1])
        top = np.sort(np.argsort(-d, kind="stable")[:2])
        return int(top[0]), int(top[1])
    return 0, 1


def _range(
    w: Weighed, i: int, j: int, kinds: Sequence[str] = ("reconciled", "profile", "guaranteed")
) -> tuple[float, float]:
    a = w.assessments[i]
    x = float(a.fit.theta[j])
    lo_b, hi_b = float(a.bound.predictor.lower[j]), float(a.bound.predictor.upper[j])
    ends = [x]
    for kind in kinds:
        it = a.intervals[j].get(kind)
        if it is not None and not it.empty:
            ends += [e for e in (it.low.value, it.high.value) if np.isfinite(e)]
    size = float(a.bound.predictor.scale[j])
    near = [e for e in ends if abs(e - x) <= 50 * max(abs(x), size)]
    lo, hi = min(near), max(near)
    pad = 0.25 * (hi - lo) if hi > lo else 0.5 * max(abs(x), size, 1e-300)
    return max(lo - pad, lo_b), min(hi + pad, hi_b)


def _plane(w: Weighed, i: int) -> dict[str, Any]:
    a, bound, bench = w.assessments[i], w.bounds[i], w.bench
    fit = a.fit
    jx, jy = _pair(w, i)
    (x0, x1), (y0, y1) = _range(w, i, jx), _range(w, i, jy)
    data = bench.measurements
    xs = np.linspace(x0, x1, ACROSS)
    ys = np.linspace(y0 - 0.5 * (y1 - y0), y1 + 0.5 * (y1 - y0), DOWN)
    if bound.predictor.lower[jy] >= 0:
        ys = np.linspace(0.0 if y0 < 0.5 * y1 else y0, y1 + 0.5 * (y1 - y0), DOWN)
    n = data.n
    shown = np.unique(np.linspace(0, n - 1, min(n, MOST_RUNS)).round().astype(int))
    f = np.empty((ACROSS, DOWN, len(shown)))
    theta = np.tile(fit.theta, (DOWN, 1))
    theta[:, jy] = ys
    for k, x in enumerate(xs):  # one column at a time: a table of 500 runs stays small
        theta[:, jx] = x
        all_runs = bound.predictor.predict(theta, data.conditions, constants=False).values
        f[k] = all_runs[:, shown]
    scale = 1.0
    if fit.data.scale is Scale.ESTIMATED and not fit.problem.with_conditions:
        scale = float(np.sqrt(fit.scale2)) if fit.scale2 > 0 else 0.0
    sd = np.sqrt(fit.variances) * scale
    bands = []
    for k, row in enumerate(shown):
        target = data.y[row]
        bands.append(
            {
                "run": w.study.runs.labels[bench.runs[row]],
                "line": _crossings(xs, ys, f[:, :, k], target),
                "low": _crossings(xs, ys, f[:, :, k], target - 2 * sd[row]),
                "high": _crossings(xs, ys, f[:, :, k], target + 2 * sd[row]),
            }
        )
    # a region that is thin beside a wide guaranteed range would fall between the points
    gx, gy = (np.linspace(*_range(w, i, j, ("reconciled", "profile")), GRID) for j in (jx, jy))
    theta = np.tile(fit.theta, (GRID * GRID, 1))
    theta[:, jx] = np.tile(gx, GRID)
    theta[:, jy] = np.repeat(gy, GRID)
    e = data.y - bound.predictor.predict(theta, data.conditions, constants=False).values
    with np.errstate(divide="ignore", invalid="ignore"):
        q = ((e / np.where(sd > 0, sd, np.nan)) ** 2).sum(axis=1).reshape(GRID, GRID)
    q = q - np.nanmin(q) if np.isfinite(q).any() else q
    level = w.study.level
    names, units = bound.names, bound.units
    others = len(names) - 2
    words = f"{names[jx]} against {names[jy]}"
    if others:
        words += "; the other constants held at their best values"
    return {
        "candidate": w.laws[i].law.name,
        "x": {"name": names[jx], "units": units[jx]},
        "y": {"name": names[jy], "units": units[jy]},
        "x_range": [_n(x0), _n(x1)],
        "y_range": [_n(y0), _n(y1)],
        "bands": bands,
        "grid": {
            "x": [_n(v) for v in gx],
            "y": [_n(v) for v in gy],
            "distance": [[_n(v, 4) for v in row] for row in q],
        },
        "levels": [-2.0 * float(np.log1p(-level))],
        "best": [_n(fit.theta[jx]), _n(fit.theta[jy])],
        "trade_off": _direction(w, i, jx, jy, (x0, x1, y0, y1)),
        "corner": None,
        "words": words,
    }


def _n(v: float, digits: int = 8) -> float | None:
    return float(f"{float(v):.{digits}g}") if np.isfinite(v) else None


def _crossings(
    xs: np.ndarray, ys: np.ndarray, f: np.ndarray, target: float
) -> list[list[float | None]]:
    """Points (x, y) where the prediction equals the target, one y for each x."""
    d = f - target
    sign = (d[:, :-1] <= 0) != (d[:, 1:] <= 0)
    out: list[list[float | None]] = []
    for k in range(len(xs)):
        at = np.flatnonzero(sign[k])
        if not len(at):
            continue
        j = int(at[0])
        a, b = d[k, j], d[k, j + 1]
        if not (np.isfinite(a) and np.isfinite(b)):
            continue
        share = a / (a - b) if a != b else 0.5
        out.append([_n(xs[k]), _n(ys[j] + share * (ys[j + 1] - ys[j]))])
    return out


def _direction(
    w: Weighed, i: int, jx: int, jy: int, box: tuple[float, float, float, float]
) -> list[list[float | None]] | None:
    """The trade-off through the best point, as a segment in the plane."""
    a = w.assessments[i]
    jac = a.fit.jacobian[:, [jx, jy]]
    norms = np.sqrt((jac**2).sum(axis=0))
    if not np.isfinite(jac).all() or (norms == 0).any():
        return None
    _, s, vt = np.linalg.svd(jac / norms, full_matrices=False)
    if len(s) < 2 or s[0] < 10 * s[1]:
        return None
    step = vt[1] / norms
    x, y = float(a.fit.theta[jx]), float(a.fit.theta[jy])
    x0, x1, y0, y1 = box
    ends = []
    for sign in (1.0, -1.0):
        t = np.inf
        for v, d, lo, hi in ((x, step[0], x0, x1), (y, step[1], y0, y1)):
            d = d * sign
            if d > 0:
                t = min(t, (hi - v) / d)
            elif d < 0:
                t = min(t, (lo - v) / d)
        if not np.isfinite(t):
            return None
        ends.append([_n(x + sign * t * step[0]), _n(y + sign * t * step[1])])
    return ends
