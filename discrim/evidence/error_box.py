"""The box of all errors that are thought possible, and what a law linear in its constants is in it."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np

from discrim.evidence.distributions import normal_quantile
from discrim.fit.measurements import OBSERVATION, Measurements, Scale
from discrim.reactor.model import Predictor


@dataclass(frozen=True, slots=True, eq=False)
class Bounds:
    """Half-widths of all measurements: y (N,), conditions (N, m); hard when none came from an sd."""

    y: np.ndarray
    conditions: np.ndarray
    hard: bool


def bounds_of(
    data: Measurements, alpha: float, scale2: float, in_law: np.ndarray | None = None
) -> Bounds:
    """Half-widths of the errors, sds widened so that all M of them hold together at 1 - alpha.

    ``in_law``: shape (m,) False for conditions that the law does not hold (`in_law`); their errors are
    no part of it. All count when None.
    """
    n, m = data.n, data.m
    sds = 0
    every = [
        s for s in data.sources if s.target == OBSERVATION or in_law is None or in_law[s.target]
    ]
    parts = [s for s in data.of_observations if s.bound is None]
    live = [(s.absolute != 0) | (s.relative != 0) for s in parts]
    # several parts of one observation are bounded as the one error that they make, whatever they share
    joined = bool(live) and int(np.sum(live, axis=0).max()) > 1
    if joined:
        sds += int(np.any(live, axis=0).sum())
    for s in every:
        if s.bound is None and not (joined and s.target == OBSERVATION):
            sds += len(np.unique(s.groups[(s.absolute != 0) | (s.relative != 0)]))
    if data.scale is Scale.ESTIMATED:
        sds += n
    k = normal_quantile(1.0 - alpha / (2 * max(sds, 1)))
    y = np.zeros(n)
    cond = np.zeros((n, m))
    if joined:
        y += k * np.sqrt(np.sum([s.sd(data.y) ** 2 for s in parts], axis=0))
    for s in every:
        if s.target == OBSERVATION:
            if s.bound is not None:
                y += s.bound
            elif not joined:
                y += k * s.sd(data.y)
        else:
            half = s.bound if s.bound is not None else k * s.sd(data.conditions[:, s.target])
            cond[:, s.target] += half
    if data.scale is Scale.ESTIMATED:
        y += k * np.sqrt(max(scale2, 0.0))
    return Bounds(y, cond, sds == 0)


@dataclass(frozen=True, slots=True, eq=False)
class Coefficients:
    """What a law linear in its constants can be within the errors of the conditions.

    Attributes
    ----------
    low, high : shape (N, p) smallest and largest coefficient of each constant
    rest_low, rest_high : shape (N,) of the part without a constant
    monotone : False when a coefficient has an extreme inside the box of errors, which no corner shows
    one_way : False when a condition moves two parts of one observation in opposite directions: no
        single value of it then gives the ends of both
    """

    low: np.ndarray
    high: np.ndarray
    rest_low: np.ndarray
    rest_high: np.ndarray
    monotone: bool
    one_way: bool


# of a slope, relative to the largest of its kind: below it its sign is rounding
NO_SLOPE = 1e-9


def corners(data: Measurements, half: np.ndarray) -> np.ndarray:
    """The corners of the box of conditions, shape (2^k, N, m); amounts stay at or above zero."""
    moving = [j for j in range(data.m) if half[:, j].any()]
    signs = np.array(list(product((-1.0, 1.0), repeat=len(moving)))).reshape(2 ** len(moving), -1)
    out = np.tile(data.conditions, (len(signs), 1, 1))
    out[:, :, moving] += signs[:, None, :] * half[:, moving]
    return np.where(data.conditions >= 0, np.maximum(out, 0.0), out)


def coefficient_range(predictor: Predictor, data: Measurements, half: np.ndarray) -> Coefficients:
    """Over the corners of the box of conditions: exact for coefficients monotone in each condition,
    which products of powers of amounts are."""
    p = len(predictor.names)
    at = corners(data, half)
    zero = np.zeros((len(at), p))
    pred = predictor.predict(zero, at, conditions_too=True, both=True)
    assert pred.by_constants is not None
    assert pred.by_conditions is not None
    assert pred.by_both is not None
    g, rest = pred.by_constants, pred.values
    moving = [j for j in range(data.m) if half[:, j].any()]
    # slopes of all parts by the conditions that move, shape (S, N, k, p + 1)
    slopes = np.concatenate([pred.by_both, pred.by_conditions[..., None]], axis=3)[:, :, moving]
    sizes = np.abs(slopes).max(axis=(0, 1, 2), initial=0.0) if slopes.size else np.zeros(p + 1)
    rises = np.asarray(slopes > NO_SLOPE * sizes).any(axis=0)
    falls = np.asarray(slopes < -NO_SLOPE * sizes).any(axis=0)
    return Coefficients(
        g.min(axis=0),
        g.max(axis=0),
        rest.min(axis=0),
        rest.max(axis=0),
        bool(np.isfinite(g).all() and np.isfinite(slopes).all() and not (rises & falls).any()),
        not bool((np.any(rises, axis=2) & np.any(falls, axis=2)).any()),
    )


def in_law(predictor: Predictor, data: Measurements) -> np.ndarray:
    """Which conditions the observations depend on, shape (m,)."""
    at = np.stack([data.conditions, 1.01 * data.conditions + 0.01])
    theta = np.tile(np.where(predictor.scale > 0, predictor.scale, 1.0), (2, 1))
    with np.errstate(all="ignore"):
        slopes = predictor.predict(theta, at, conditions_too=True).by_conditions
    assert slopes is not None
    return np.asarray(np.any(slopes != 0, axis=(0, 1)))
