"""Guaranteed ranges: every value of a constant that is consistent with hard bounds on all errors.

For a law linear in constants theta >= 0 whose coefficients C are known to lie within [C_lo, C_hi]
and observations within [y_lo, y_hi], the consistent theta are the polytope

    C_lo theta <= y_hi,   C_hi theta >= y_lo

(Oettli & Prager, Numer. Math. 6 (1964) 405), and each end of a range is a linear program. Digits
and limits are hard bounds; a standard deviation becomes one at +- Phi^-1(1 - alpha/(2 M)) for M
measurements together, and the range is then called worst-case.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
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


def _shared(data: Measurements, held: np.ndarray) -> bool:
    """Whether one error moves several observations: each is then given more room than there is."""
    return any(
        len(np.unique(s.groups)) < data.n
        for s in data.sources
        if s.target == OBSERVATION or held[s.target]
    )


@dataclass(frozen=True, slots=True, eq=False)
class Cleared:
    """A law with its denominator cleared, as arrays (see `ratelaw.cleared`).

    Attributes
    ----------
    shapes : conditions (S, N, m) -> functions of the conditions in numerator (S, N, a) and
        denominator (S, N, b), and the known numerator (S, N, 1) or (S, N, 0)
    power : of the denominator
    exponents : shape (a + b, p) of the constants in each coefficient; factor : shape (a + b,)
    """

    shapes: Callable[[np.ndarray], tuple[np.ndarray, np.ndarray, np.ndarray]]
    power: int
    exponents: np.ndarray
    factor: np.ndarray


EXTREME = "not computed: a term has an extreme within the errors of a condition"
WORST_CASE = "worst-case: errors given as standard deviations, all bounded together"


def guaranteed(
    predictor: Predictor,
    data: Measurements,
    alpha: float,
    scale2: float,
    cleared: Cleared | None = None,
) -> list[Interval]:
    """The range of each constant; with a note (and no range) where it cannot be had.

    A law that is not linear in its constants needs ``cleared``; its range is then an outer bound,
    since the rate enters with several coefficients.
    """
    p = len(predictor.names)
    linear = bool(predictor.linear.all())
    held = in_law(predictor, data)
    moving = {s.target for s in data.of_conditions if held[s.target]}
    reason = ""
    if not linear and cleared is None:
        reason = "not computed: the law is not linear in its constants"
    elif (predictor.lower < 0).any():
        reason = "not computed: a constant may be negative"
    elif data.scale is Scale.ESTIMATED and not scale2 > 0:
        reason = "not computed: no error of the observations is stated or can be estimated"
    elif len(moving) > 10:
        reason = "not computed: too many conditions with errors"
    if reason:
        return [nothing("guaranteed", reason) for _ in range(p)]
    half = bounds_of(data, alpha, scale2, held)
    y_low, y_high, twice = _observed_range(predictor, data, half)
    outer = []
    if not linear:
        outer.append("by clearing the denominator")
    if _shared(data, held):
        outer.append("errors shared by several runs are taken as separate ones")
    if twice:
        outer.append("the rate was worked out from conditions that the law holds too")
    if linear:
        c = coefficient_range(predictor, data, half.conditions)
        if not c.monotone:
            return [nothing("guaranteed", EXTREME) for _ in range(p)]
        if not c.one_way and not twice:
            outer.append("a condition moves two terms in opposite directions")
    words = "; ".join(
        part
        for part in (
            f"outer bound, {', '.join(outer)}" if outer else "",
            "" if half.hard else WORST_CASE,
        )
        if part
    )
    if linear:
        # a formula of the conditions in place of a reading is in the rest already
        most, least = data.y + half.y - c.rest_low, data.y - half.y - c.rest_high
        ends = _ends(c.low, most, c.high, least, predictor.lower, predictor.upper)
        return [_interval(e, words) for e in ends]
    assert cleared is not None
    half = replace(half, y=np.maximum(y_high - data.y, data.y - y_low))
    return _from_cleared(cleared, predictor, data, half, words)


def _observed_range(
    predictor: Predictor, data: Measurements, half: Bounds
) -> tuple[np.ndarray, np.ndarray, bool]:
    """Least and largest true value of each observation, and whether any was worked out from
    conditions: then over the corners of the box of those (exact for formulas monotone in each)."""
    formula = getattr(predictor, "formula", None)
    here = None if formula is None else formula(data.conditions)
    if here is None:
        return data.y - half.y, data.y + half.y, False
    assert formula is not None
    with np.errstate(all="ignore"):
        there = np.concatenate([here, formula(corners(data, half.conditions))])
    low, high = np.fmin.reduce(there), np.fmax.reduce(there)
    low, high = np.where(np.isnan(low), data.y, low), np.where(np.isnan(high), data.y, high)
    return low - half.y, high + half.y, True


End = tuple[Side, Side]


def _ends(
    low: np.ndarray,
    at_most: np.ndarray,
    high: np.ndarray,
    at_least: np.ndarray,
    lower: np.ndarray,
    upper: np.ndarray,
) -> list[End]:
    """Ends of each x >= 0 with low x <= at_most and high x >= at_least, by linear programs."""
    from scipy.optimize import linprog

    a = np.vstack([low, -high])
    b = np.concatenate([at_most, -at_least])
    # rows and columns scaled: the program sees numbers near one
    col = np.max(np.abs(a), axis=0)
    col = np.where(col > 0, col, 1.0)
    a = a / col
    row = np.maximum(np.max(np.abs(a), axis=1), np.abs(b))
    row = np.where(row > 0, row, 1.0)
    a, b = a / row[:, None], b / row
    box = [
        (lo * c, None if np.isinf(hi) else hi * c)
        for lo, hi, c in zip(lower, upper, col, strict=True)
    ]
    out = []
    for j in range(a.shape[1]):
        ends = []
        for sign in (1.0, -1.0):
            cost = np.zeros(a.shape[1])
            cost[j] = sign
            res = linprog(cost, A_ub=a, b_ub=b, bounds=box, method="highs")
            if res.status == 0:
                value = float(res.x[j] / col[j])
                at = value <= lower[j] if sign > 0 else value >= upper[j]
                ends.append(Side(value, BOUND if at else CROSSED))
            elif res.status == 3:
                ends.append(Side(np.inf if sign < 0 else -np.inf, OPEN))
            else:  # no value at all, or (never seen) a program that could not be solved
                ends.append(Side(float("nan"), FAILED if res.status == 2 else UNSOLVED))
        out.append((ends[0], ends[1]))
    return out


# ends of what has no number: the linear program failed, or nothing bounds this constant by itself
UNSOLVED, UNBOUNDED = "unsolved", "unbounded"
_WHY = {
    UNSOLVED: "not computed: the linear program could not be solved",
    UNBOUNDED: "not computed: no product of the coefficients of the cleared law gives this constant",
}


def _interval(ends: End, words: str) -> Interval:
    for e in ends:
        if e.end in _WHY:
            return nothing("guaranteed", _WHY[e.end])
    empty = any(e.end == FAILED for e in ends)
    note = words
    if empty:
        note = "empty: no value fits every run within its bounds" + (f" ({words})" if words else "")
    return Interval("guaranteed", ends[0], ends[1], (), empty, note)


def _from_cleared(
    cleared: Cleared, predictor: Predictor, data: Measurements, half: Bounds, words: str
) -> list[Interval]:
    """(N/y)^(1/n) = D over the box of all errors; constants from the coefficients."""
    n = cleared.power
    if _extreme_inside(cleared, data, half.conditions):
        return [nothing("guaranteed", EXTREME) for _ in predictor.names]
    y_low, y_high = np.maximum(data.y - half.y, 0.0), data.y + half.y
    low_n, high_n, low_d, high_d, low_k, high_k = _shape_range(cleared, data, half.conditions)
    with np.errstate(divide="ignore", invalid="ignore"):
        if low_k.shape[1]:
            # sum_j b_j w_j (y/N)^(1/n) = 1
            low = low_d * (y_low[:, None] / high_k) ** (1.0 / n)
            high = high_d * (y_high[:, None] / low_k) ** (1.0 / n)
        else:
            # coefficients of a^(1/n) are (m/y)^(1/n), of b are -w; their sum is 1
            low = np.hstack([(low_n / y_high[:, None]) ** (1.0 / n), -high_d])
            high = np.hstack([(high_n / y_low[:, None]) ** (1.0 / n), -low_d])
    # A run whose rate or driving force may be zero within its errors cannot be divided by: what it
    # would demand is left out, which can only make the range wider.
    sound = (y_high > 0) & (low_n >= 0).all(axis=1) & (low_d >= 0).all(axis=1)
    sound &= (low_k > 0).all(axis=1)
    use_low = sound & np.isfinite(low).all(axis=1)
    use_high = sound & np.isfinite(high).all(axis=1)
    if not use_low.any() and not use_high.any():
        why = "not computed: no run has a rate that is above zero within its errors"
        return [nothing("guaranteed", why) for _ in predictor.names]
    low = np.where(use_low[:, None], low, 0.0)
    high = np.where(use_high[:, None], high, 0.0)
    q = low.shape[1]
    at_least = np.where(use_high, 1.0, -1.0)
    ends = _ends(low, np.ones(data.n), high, at_least, np.zeros(q), np.full(q, np.inf))
    a = low_n.shape[1]
    # ends of the coefficients themselves, numeric factors taken off
    power = np.where(np.arange(q) < a, n, 1)
    coefficients = [
        (
            e[0].value ** power[k] / cleared.factor[k] if e[0].end != FAILED else np.nan,
            e[1].value ** power[k] / cleared.factor[k] if e[1].end != FAILED else np.nan,
        )
        for k, e in enumerate(ends)
    ]
    return [
        _interval(_constant_ends(j, cleared.exponents, coefficients), words)
        for j in range(len(predictor.names))
    ]


def _shape_range(cleared: Cleared, data: Measurements, half: np.ndarray) -> tuple[np.ndarray, ...]:
    """Smallest and largest functions of the conditions over the corners of the box of errors:
    numerator, denominator, known numerator, each low then high."""
    out = []
    for part in cleared.shapes(corners(data, half)):
        out += [part.min(axis=0), part.max(axis=0)]
    return tuple(out)


def _extreme_inside(cleared: Cleared, data: Measurements, half: np.ndarray) -> bool:
    """Whether a function of the conditions has an extreme inside the box, which no corner shows."""
    here = cleared.shapes(data.conditions[None])
    for j in range(data.m):
        if not half[:, j].any():
            continue
        one = np.zeros_like(half)
        one[:, j] = half[:, j]
        for middle, ends in zip(here, cleared.shapes(corners(data, one)), strict=True):
            room = 1e-12 * np.abs(middle[0])
            if (middle[0] > ends.max(axis=0) + room).any():
                return True
            if (middle[0] < ends.min(axis=0) - room).any():
                return True
    return False


def _constant_ends(j: int, exponents: np.ndarray, coefficients: list[tuple[float, float]]) -> End:
    """Ends of constant j as a product of powers of coefficients (interval arithmetic)."""
    p = exponents.shape[1]
    target = np.zeros(p)
    target[j] = 1.0
    # the fewest coefficients that give the constant: exact where it is one alone
    w = _powers(exponents, target)
    if w is None:
        return Side(float("nan"), UNBOUNDED), Side(float("nan"), UNBOUNDED)
    low, high = 1.0, 1.0
    for k, power in enumerate(w):
        if abs(power) < 1e-12:
            continue
        lo, hi = coefficients[k]
        if np.isnan(lo) or np.isnan(hi):
            return Side(float("nan"), FAILED), Side(float("nan"), FAILED)
        with np.errstate(divide="ignore", over="ignore"):
            ends = np.array([lo, hi]) ** power
        low, high = low * float(ends.min()), high * float(ends.max())
    if np.isnan(high):  # zero times infinity
        high = float("inf")
    if np.isnan(low):
        low = 0.0
    left = Side(low, BOUND if low <= 0 else CROSSED)
    right = Side(high, OPEN if np.isinf(high) else CROSSED)
    return left, right


def _powers(exponents: np.ndarray, target: np.ndarray) -> np.ndarray | None:
    """w with w @ exponents = target, a single row if one does, else by least squares."""
    q = len(exponents)
    for k in range(q):
        row = exponents[k]
        hit = np.flatnonzero(row)
        if len(hit) == 1 and target[hit[0]] != 0:
            w = np.zeros(q)
            w[k] = 1.0 / row[hit[0]]
            return w
    w, *_ = np.linalg.lstsq(exponents.T, target, rcond=None)
    if np.abs(w @ exponents - target).max() > 1e-9:
        return None
    return np.where(np.abs(w) < 1e-9, 0.0, w)
