"""The optimum of a special case as a point of the law that contains it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from discrim.ratelaw.nesting import Nesting
from discrim.weigh.bind import Bound

# how far along a limit the larger law is placed: as far as the laws still come closer
_STEPS = 10.0 ** np.arange(0.0, 25.0, 1.0)
_BESIDE = 1e-9  # of its typical size
_CLOSE = 1e-12  # relative difference of the predictions that no step farther can improve


def embedded(
    smaller: Bound,
    larger: Bound,
    theta: np.ndarray,
    nesting: Nesting,
    conditions: np.ndarray,
    known: Mapping[str, float],
) -> np.ndarray | None:
    """The smaller law's constants as constants of the larger one, shape (1, p) or None.

    Constants at infinity are large numbers along the way to the limit, those that keep a product
    with them small ones: as far out as the predictions at ``conditions`` come closer together.
    ``known`` : constants that the study gives, which may stand in the values.
    """
    # a constant at zero may be one at infinity in the other law: it is put just beside it
    beside = np.where(theta == 0, _BESIDE * smaller.predictor.scale, theta)
    at = {**known, **dict(zip(smaller.names, theta, strict=True))}
    near = {**known, **dict(zip(smaller.names, beside, strict=True))}
    base, power = np.array(larger.predictor.scale, float), np.zeros(len(larger.names))
    for j, name in enumerate(larger.names):
        if name in nesting.along:
            expr, rate = nesting.along[name]
            base[j], power[j] = _number(expr, at, near), float(rate)
        elif name in nesting.values:
            base[j] = _number(nesting.values[name], at, near)
    base = np.where(np.isnan(base), larger.predictor.scale, base)
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        rows = base * _STEPS[:, None] ** power if power.any() else base[None]
        rows = np.clip(rows, larger.predictor.lower, larger.predictor.upper)
        rows = rows[np.isfinite(rows).all(axis=1)]
        if len(rows) < 2:
            return rows if len(rows) else None
        want = smaller.predictor.predict(theta[None], conditions, constants=False).values
        have = larger.predictor.predict(rows, conditions, constants=False).values
        off = np.abs(have - want).max(axis=1) / max(float(np.abs(want).max()), 1e-300)
    off = np.where(np.isfinite(off), off, np.inf)
    best = int(np.argmax(off <= _CLOSE)) if (off <= _CLOSE).any() else int(np.argmin(off))
    return rows[best][None]


def _number(expr: Any, at: Mapping[str, float], near: Mapping[str, float]) -> float:
    """The expression at the constants of the smaller law; nan where it is no number."""
    for constants in (at, near):
        numbers = {s: constants[s.name] for s in expr.free_symbols if s.name in constants}
        try:
            value = float(expr.subs(numbers))
        except (TypeError, ValueError):
            continue
        if np.isfinite(value):
            return value
    return float("nan")
