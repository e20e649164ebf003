"""The smallest positive root of a polynomial in one unknown, for many points at once.

Everything but the last digits is done with w = log z, in which the sums of the terms of one sign
are nearly straight lines, so that any number of powers of ten is no distance.
"""

from __future__ import annotations

import numpy as np

_CLOSE = 1e-6  # step of w below which the last exact steps are left
_PLAIN = 1e-10  # sum of the terms, relative to that of their sizes, that a root must leave
_ROUNDS = 60  # of Newton's method; five are usual
_CAREFUL = 400  # steps of the search for the smallest of several roots


def smallest_root(c: np.ndarray, e: np.ndarray) -> np.ndarray:
    """The smallest positive root of sum_t c_t z^e_t at each point.

    ``c`` shape (T, P), finite; ``e`` shape (T,), rising, not negative. Returns shape (P,): zero where
    the sum holds at zero and nowhere above, NaN where it holds nowhere.
    """
    sign = np.sign(c)
    first = np.zeros(c.shape[1])
    last = np.zeros(c.shape[1])
    changes = np.zeros(c.shape[1], int)
    for s in sign:
        first = np.where(first == 0, s, first)
        changes += (s != 0) & (last != 0) & (s != last)
        last = np.where(s != 0, s, last)
    z = np.full(c.shape[1], np.nan)
    # without a term free of the unknown, and all of one sign: only "none of it" is left
    z[(changes == 0) & (e[0] > 0)] = 0.0
    single = changes == 1
    if single.all():
        z = _unique(c * first, e)
    elif single.any():
        z[single] = _unique(c[:, single] * first[single], e)
    more = changes > 1
    if more.any():
        z[more] = _smallest(c[:, more] * first[more], e)
    return _polished(c, e, z)


def _unique(c: np.ndarray, e: np.ndarray) -> np.ndarray:
    """The root of sum_t c_t z^e_t with coefficients first >= 0, then <= 0: one sign change.

    ``c`` shape (T, P), ``e`` rising. Let z* be where the largest terms of both signs are equal;
    the root is within a factor (number of terms)^(1/least gap of exponents) of it.
    """
    size = np.log(np.abs(c))
    up = c > 0
    later, earlier = np.tril_indices(len(e), -1)  # pairs, sorted by the later term
    crossing = (size[earlier] - size[later]) / (e[later] - e[earlier])[:, None]
    starts = np.searchsorted(later, np.arange(1, len(e)))
    reach = np.maximum.reduceat(np.where(up[earlier], crossing, -np.inf), starts, axis=0)
    w = np.where(c[1:] < 0, reach, np.inf).min(axis=0)
    # terms over the largest one there; u = z/z*
    x = size + e[:, None] * w
    d = np.exp(x - x.max(axis=0))
    positive = np.where(up, d, 0.0)
    negative = d - positive
    width = np.log(len(e)) / max(float(np.diff(e).min()), 1e-3) + 1e-9
    low, high = np.full(len(w), -width), np.full(len(w), width)
    v = np.zeros(len(w))
    going = np.ones(len(w), bool)
    for _ in range(_ROUNDS):
        powers = np.exp(e[:, None] * v)
        p, q = positive * powers, negative * powers
        p_sum, q_sum = p.sum(axis=0), q.sum(axis=0)
        f = np.log(q_sum / p_sum)  # rises with v
        slope = (e @ q) / q_sum - (e @ p) / p_sum
        high = np.where(f >= 0, v, high)
        low = np.where(f <= 0, v, low)
        new = v - f / slope
        outside = ~((new >= low) & (new <= high))
        if outside.any():
            new = np.where(outside, 0.5 * (low + high), new)
        moving = ~(np.abs(new - v) <= _CLOSE) & going
        v = np.where(going, new, v)
        going = moving
        if not going.any():
            break
    return np.asarray(np.exp(w + v))


def _polished(c: np.ndarray, e: np.ndarray, z: np.ndarray) -> np.ndarray:
    """The root to its last digits by Newton's method on the polynomial itself, which loses nothing
    to logarithms; NaN where it does not hold in the end."""
    for k in range(3):
        terms = c * z ** e[:, None]
        left, scale = terms.sum(axis=0), np.abs(terms).sum(axis=0)
        if k == 2:
            break
        step = -left / (e @ terms)
        z = np.where(np.abs(step) < 0.1, z * (1.0 + step), z)  # False where it is not a number
    # too large or small for plain products: what the logarithms gave must do
    return np.where(~(np.abs(left) > _PLAIN * scale), z, np.nan)


def _smallest(c: np.ndarray, e: np.ndarray) -> np.ndarray:
    """The smallest positive root where signs change more than once; NaN where there is none.

    ``c`` shape (T, P), its first coefficients that are not zero positive; ``e`` rising. Let P and N
    be the sums of the terms of both signs and w = log z. From below all roots, where P > N, steps are
    taken that cannot pass one: log P is convex in w and lies above its tangent; the slope of log N is
    a mean of its powers, so that log N rises by no more than the highest of them, and its curvature,
    their variance, is no more than a quarter of their range squared.
    """
    size = np.log(np.abs(c))
    up, down = c > 0, c < 0
    most = np.where(down, e[:, None], -np.inf).max(axis=0)
    curve = 0.25 * (most - np.where(down, e[:, None], np.inf).min(axis=0)) ** 2
    w, high = np.full(c.shape[1], np.inf), np.full(c.shape[1], -np.inf)
    spare = np.log(2.0 * len(e))
    for i in range(len(e)):
        for j in range(i + 1, len(e)):
            against = (up[i] & down[j]) | (down[i] & up[j])
            crossing = np.where(against, (size[i] - size[j]) / (e[j] - e[i]), np.nan)
            w = np.fmin(w, crossing - spare / (e[j] - e[i]))
            high = np.fmax(high, crossing + spare / (e[j] - e[i]))
    root = np.full(c.shape[1], np.nan)
    go = np.arange(c.shape[1])
    for _ in range(_CAREFUL):
        x = size + e[:, None] * w
        t = np.exp(x - x.max(axis=0))
        p, q = np.where(up, t, 0.0), np.where(down, t, 0.0)
        p_sum, q_sum = p.sum(axis=0), q.sum(axis=0)
        f = np.maximum(np.log(p_sum / q_sum), 0.0)
        p_slope, q_slope = (e @ p) / p_sum, (e @ q) / q_sum
        closing = q_slope - p_slope
        root_of = np.sqrt(closing**2 + 2.0 * curve * f)
        # of two forms of the root of f - closing*d - curve*d^2/2 the one that does not cancel
        bent = np.where(closing > 0, 2.0 * f / (closing + root_of), (root_of - closing) / curve)
        straight = np.where(most > p_slope, f / (most - p_slope), np.inf)
        step = np.fmax(bent, straight)
        done = step <= _CLOSE
        root[go[done]] = (w + step)[done]
        keep = ~done & (w + step <= high)
        if not keep.any():
            break
        w = (w + step)[keep]
        if not keep.all():
            go, high, most, curve = go[keep], high[keep], most[keep], curve[keep]
            size, up, down = size[:, keep], up[:, keep], down[:, keep]
    return np.asarray(np.exp(root))
