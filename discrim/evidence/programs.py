"""Ends of ranges as linear programs, and the interval that two of them make."""

from __future__ import annotations

import numpy as np

from discrim.evidence.intervals import BOUND, CROSSED, FAILED, OPEN, Interval, Side, nothing

End = tuple[Side, Side]


def program_ends(
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


def as_interval(ends: End, words: str) -> Interval:
    for e in ends:
        if e.end in _WHY:
            return nothing("guaranteed", _WHY[e.end])
    empty = any(e.end == FAILED for e in ends)
    note = words
    if empty:
        note = "empty: no value fits every run within its bounds" + (f" ({words})" if words else "")
    return Interval("guaranteed", ends[0], ends[1], (), empty, note)
