"""Guaranteed ranges: every value of a constant that is consistent with hard bounds on all errors.

For a law linear in constants theta >= 0 whose coefficients C are known to lie within [C_lo, C_hi]
and observations within [y_lo, y_hi], the consistent theta are the polytope

    C_lo theta <= y_hi,   C_hi theta >= y_lo

(Oettli & Prager, Numer. Math. 6 (1964) 405), and each end of a range is a linear program. Digits
and limits are hard bounds; a standard deviation becomes one at +- Phi^-1(1 - alpha/(2 M)) for M
measurements together, and the range is then called worst-case.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from discrim.evidence.error_box import Bounds, bounds_of, coefficient_range, corners, in_law
from discrim.evidence.guaranteed_cleared import EXTREME, Cleared, from_cleared
from discrim.evidence.intervals import Interval, nothing
from discrim.evidence.programs import as_interval, program_ends
from discrim.fit.measurements import OBSERVATION, Measurements, Scale
from discrim.reactor.model import Predictor


def _shared(data: Measurements, held: np.ndarray) -> bool:
    """Whether one error moves several observations: each is then given more room than there is."""
    return any(
        len(np.unique(s.groups)) < data.n
        for s in data.sources
        if s.target == OBSERVATION or held[s.target]
    )


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
        ends = program_ends(c.low, most, c.high, least, predictor.lower, predictor.upper)
        return [as_interval(e, words) for e in ends]
    assert cleared is not None
    half = replace(half, y=np.maximum(y_high - data.y, data.y - y_low))
    return from_cleared(cleared, predictor, data, half, words)


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
