"""Ends of intervals where other constants are in lockstep with one another.

The set of values that the plain test accepts is then too short (two-sided at 95 % it held the truth in
80 to 90 %): each end is moved on to the next value that the projected test (`projected`) rejects too.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.curve import Curve, Points
from discrim.evidence.distributions import normal_quantile
from discrim.evidence.projected import Effort, Weak, outside_level, reach, weak_nuisance
from discrim.evidence.score import score
from discrim.fit.problem import Problem, Solution

# distances from the estimate at which an end is tried, in units of that of the plain end
WIDER = (1.0, 1.07, 1.2, 1.4, 1.8, 3.0, 10.0, 100.0)
# so many of them first, most often enough
_FIRST = 3
# a score that moves less than this over the weak constants is as good as the plain one
STEADY = 0.05


@dataclass(frozen=True, slots=True)
class Ends:
    """Ends of the two-sided set and of both one-sided ones; infinite where open."""

    low: float
    high: float
    low_one_sided: float
    high_one_sided: float


def weak_about(problem: Problem, pts: Points, psi: int, ends: Ends) -> Weak:
    """The weak nuisance directions at the points nearest to the ends, those of the worst of them."""
    if not problem.measured:
        return Weak(0, (), float("inf"))
    usable = np.flatnonzero(np.isfinite(pts.objective))
    rows = {
        int(usable[np.argmin(np.abs(pts.values[usable] - v))])
        for v in (ends.low, ends.high)
        if np.isfinite(v) and len(usable)
    }
    found = [weak_nuisance(problem, pts.solution.take(np.array([r])), psi) for r in sorted(rows)]
    return max(found, key=lambda w: w.count, default=Weak(0, (), float("inf")))


def widened(
    curve: Curve, weak: Weak, level: float, ends: Ends, estimate: float, lower: float, upper: float
) -> Ends:
    """The ends moved on to where the projected test rejects; at the bound, or infinite, where it
    does not."""
    alpha = 1.0 - level
    outside = outside_level(alpha)
    two = normal_quantile(1.0 - (alpha - outside) / 2)
    one = normal_quantile(1.0 - (alpha - outside))
    if _steady(curve, weak, ends, outside):
        return ends
    out = {}
    todo = [n for n in Ends.__slots__ if np.isfinite(getattr(ends, n))]
    todo = [n for n in todo if lower < getattr(ends, n) < upper]
    size = max(abs(estimate), float(curve.problem.predictor.scale[curve.psi]), 1e-300)
    ladders = {}
    for name in todo:
        side = -1.0 if name.startswith("low") else 1.0
        far = max(side * (getattr(ends, name) - estimate), 1e-3 * size)
        ladder = np.clip(estimate + side * far * np.array(WIDER), lower, upper)
        ladders[name] = ladder
    for part in (slice(0, _FIRST), slice(_FIRST, None)):
        if not todo:
            break
        values = np.concatenate([ladders[n][part] for n in todo])
        accepted = _accepted(curve, weak, values, outside)
        n = len(values) // len(todo)
        left = []
        for k, name in enumerate(todo):
            low, high = (x[k * n : (k + 1) * n] for x in accepted)
            if name == "low_one_sided":
                kept = low <= one
            elif name == "high_one_sided":
                kept = high >= -one
            else:
                kept = (low <= two) & (high >= -two)
            ladder = ladders[name][part]
            if kept[-1]:
                left.append(name)
                bound = lower if name.startswith("low") else upper
                out[name] = bound
            elif kept.any():
                out[name] = float(ladder[int(np.flatnonzero(kept)[-1]) + 1])
            elif part.start == 0:
                out[name] = getattr(ends, name)
            else:
                out[name] = float(ladder[0])
        todo = left
    new = replace(ends, **out)
    # the steps of the two ladders differ; a two-sided set holds both one-sided ones
    return replace(new, low=min(new.low, new.low_one_sided), high=max(new.high, new.high_one_sided))


def _steady(curve: Curve, weak: Weak, ends: Ends, outside: float) -> bool:
    """Whether the score at both ends hardly moves with the weak constants."""
    values = np.unique([v for v in (ends.low, ends.high) if np.isfinite(v)])
    if not len(values):
        return True
    pts = curve.at(values, careful=False)
    psi = curve.psi

    def scores(there: Problem, sol: Solution) -> np.ndarray:
        return score(there, sol, psi).z

    found = reach(
        curve.problem, pts.solution, (psi,), weak, scores, outside=outside, effort=Effort.LITTLE
    )
    return bool(found.allowed.all() and (found.high - found.low < STEADY).all())


def _accepted(
    curve: Curve, weak: Weak, values: np.ndarray, outside: float
) -> tuple[np.ndarray, np.ndarray]:
    """Least and greatest z at each value; where the objective allows none, such that both reject."""
    order = np.unique(values)
    pts = curve.at(order, careful=False)
    psi = curve.psi

    def scores(there: Problem, sol: Solution) -> np.ndarray:
        return score(there, sol, psi).z

    found = reach(
        curve.problem, pts.solution, (psi,), weak, scores, outside=outside, effort=Effort.SOME
    )
    low = np.where(found.allowed, np.minimum(found.low, pts.z), np.inf)
    high = np.where(found.allowed, np.maximum(found.high, pts.z), -np.inf)
    back = np.searchsorted(order, values)
    return low[back], high[back]
