"""Guaranteed ranges of a law with its denominator cleared: linear in products of its constants.

With n the power of the denominator, (N/y)^(1/n) = D is linear in the coefficients of N^(1/n) and D;
the constants follow from these by interval arithmetic. An outer bound, since the rate enters with
several coefficients.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from discrim.evidence.error_box import Bounds, corners
from discrim.evidence.intervals import BOUND, CROSSED, FAILED, OPEN, Interval, Side, nothing
from discrim.evidence.programs import UNBOUNDED, End, as_interval, program_ends
from discrim.fit.measurements import Measurements
from discrim.reactor.model import Predictor

EXTREME = "not computed: a term has an extreme within the errors of a condition"


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


def from_cleared(
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
    ends = program_ends(low, np.ones(data.n), high, at_least, np.zeros(q), np.full(q, np.inf))
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
        as_interval(_constant_ends(j, cleared.exponents, coefficients), words)
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
