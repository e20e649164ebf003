"""All facts about one candidate on the runs: fit, conditioning, intervals, criteria."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from discrim.evidence.adequacy import LackOfFit, lack_of_fit, objective_p
from discrim.evidence.conditioning import (
    Conditioning,
    Lockstep,
    TradeOff,
    conditioning,
    lockstep,
    trade_offs,
)
from discrim.evidence.criteria import Criteria, criteria
from discrim.evidence.curve import Curve
from discrim.evidence.guaranteed import guaranteed
from discrim.evidence.guaranteed_cleared import Cleared
from discrim.evidence.intervals import (
    Interval,
    along_all,
    linearised,
    nothing,
    standard_errors,
    united,
)
from discrim.evidence.rivals import table_key
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale
from discrim.verdict.thresholds import LOCKSTEP_ERRORS, LOCKSTEP_MOST, LOCKSTEP_RELATIVE
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.cleared_law import cleared_law


@dataclass(frozen=True, slots=True, eq=False)
class Assessment:
    """One candidate on the runs.

    Attributes
    ----------
    fits : by reading of the condition errors ("stated", or "measured" and "set")
    primary : the reading whose numbers are printed
    intervals : for each constant, by kind
    below : constants, shape (p,), of a point on a profile that fits better than the fit, or None; the
        fit has to be made again from there
    """

    bound: Bound
    fits: Mapping[str, Fit]
    primary: str
    standard_errors: np.ndarray
    intervals: tuple[Mapping[str, Interval], ...]
    conditioning: Conditioning
    lockstep: tuple[Lockstep, ...]
    trade_offs: tuple[TradeOff, ...]
    criteria: Criteria
    fit_p: float | None
    lack_of_fit: LackOfFit | None
    below: np.ndarray | None = None

    @property
    def fit(self) -> Fit:
        return self.fits[self.primary]


# a point on a profile this much below the fit, relative, says that the fit was not the optimum
BETTER = 1e-5


def assess(
    bound: Bound,
    bench: Bench,
    fits: Mapping[str, Fit],
    *,
    level: float,
    common: Measurements,
    common_fit: Fit,
    stands: bool = True,
) -> Assessment:
    """Facts about one candidate.

    ``common`` and ``common_fit``: the measurements (and the fit to them) with one and the same
    scale for all candidates, on which the criteria are computed. Of a law that does not stand only
    the linearised intervals are computed: the others would describe constants of a rejected law.
    """
    primary = next(iter(fits))
    one = fits[primary]
    data = one.data
    names = bound.names
    se = standard_errors(one)
    cond = conditioning(one.jacobian, names)
    weight = 1.0 / np.sqrt(one.variances)
    locks: list[Lockstep] = []
    if one.ok:
        locks = lockstep(
            bound.predictor,
            data,
            one.theta,
            weight,
            errors=LOCKSTEP_ERRORS,
            least=LOCKSTEP_RELATIVE,
            most=LOCKSTEP_MOST,
        )
    below = None
    if not one.ok:
        intervals: tuple[dict[str, Interval], ...] = tuple({} for _ in names)
    elif stands:
        intervals, below = _intervals(bound, fits, se, level)
    else:
        intervals = _linearised_only(one, se, level)
    known = common.scale is not Scale.ESTIMATED
    crit = criteria(
        data=table_key(common),
        n=data.n,
        p=len(names),
        objective=common_fit.objective,
        scale_known=known,
    )
    return Assessment(
        bound,
        fits,
        primary,
        se,
        intervals,
        cond,
        tuple(locks),
        tuple(trade_offs(cond)),
        crit,
        objective_p(one) if one.ok else None,
        lack_of_fit(one) if one.ok else None,
        below,
    )


def _linearised_only(one: Fit, se: np.ndarray, level: float) -> tuple[dict[str, Interval], ...]:
    why = "not computed: the law is rejected by these runs"
    return tuple(
        {
            "linearised": linearised(one, j, float(se[j]), level),
            **{kind: nothing(kind, why) for kind in ("profile", "reconciled", "guaranteed")},
        }
        for j in range(one.p)
    )


def _intervals(
    bound: Bound, fits: Mapping[str, Fit], se: np.ndarray, level: float
) -> tuple[tuple[dict[str, Interval], ...], np.ndarray | None]:
    one = next(iter(fits.values()))
    below: np.ndarray | None = None
    lowest = 1.0 - BETTER
    sure = guaranteed(
        bound.predictor,
        one.data,
        1.0 - level,
        one.scale2 if one.data.scale is Scale.ESTIMATED else 1.0,
        cleared_of(bound),
    )
    every = range(len(bound.names))
    searched = [
        along_all(f, [Curve.of(f, j) for j in every], level, se=standard_errors(f))
        for f in fits.values()
    ]
    out = []
    for j in every:
        by_origin = [found[j] for found in searched]
        for found, f in zip(by_origin, fits.values(), strict=True):
            # where s^2 is estimated beside condition errors the objective is N - p at every optimum
            gain = 1.0
            if f.objective > 0 and not f.problem.joint_scale:
                gain = found.lower_objective / f.objective
            if gain < lowest:  # the lowest of all constants and readings
                lowest = gain
                points = found.points
                below = points.solution.theta[int(np.nanargmin(points.objective))]
        recon = by_origin[0].reconciled
        for other in by_origin[1:]:
            recon = united(recon, other.reconciled)
        if one.data.scale is Scale.ESTIMATED and one.degrees_of_freedom < 1:
            profile = nothing("profile", "not computed: as many constants as runs, scale unknown")
            recon = nothing("reconciled", "not computed: as many constants as runs, scale unknown")
        else:
            profile = by_origin[0].profile
        out.append(
            {
                "linearised": linearised(one, j, float(se[j]), level),
                "profile": profile,
                "reconciled": recon,
                "guaranteed": sure[j],
            }
        )
    return tuple(out), below


def cleared_of(bound: Bound) -> Cleared | None:
    """The law with its denominator cleared, where it is one law for all observations."""
    if bool(bound.predictor.linear.all()) or len(bound.compiled) != 1:
        return None
    if bound.predictor.index is not None:
        return None
    return cleared_law(bound.compiled[0], bound.expressions[0])
