"""Candidates against one another: special cases, pairs of rivals, who ranks first, who cannot be told
from whom."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from discrim.evidence.bootstrap import RISK, Simulated, nested_p
from discrim.evidence.criteria import Criteria
from discrim.evidence.distributions import t_upper
from discrim.evidence.pairs import Pairs, pairs
from discrim.evidence.rivals import Standing, apart
from discrim.evidence.term import NestedF
from discrim.evidence.term_tests import nested_f
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.ratelaw.nesting import Nesting
from discrim.verdict.thresholds import INSEPARABLE
from discrim.weigh.bind import Bound
from discrim.weigh.embedded import embedded
from discrim.weigh.sameness import Relations

# where constants that vanish with the special case begin, in units of their typical size
VANISHING = (0.1, 1.0, 10.0)


@dataclass(frozen=True, slots=True, eq=False)
class Comparison:
    """A proven special case against the larger law.

    Attributes
    ----------
    test : extra sum of squares, conditions taken as exact; None where it cannot be made
    reconciled : two-sided p-value of the score of the smaller law towards the larger one, errors of
        conditions in it
    bootstrap : where no reference distribution holds; None elsewhere, where the larger law does not
        stand, and where the score alone makes it clear
    decides, source : the p-value that holds here, and which of the three it is; None where there is none
    """

    smaller: int
    larger: int
    words: str
    edge: bool
    q: int
    test: NestedF | None
    note: str
    reconciled: float | None = None
    bootstrap: Simulated | None = None
    decides: float | None = None
    source: str = ""


def comparisons(
    bounds: Sequence[Bound],
    fits: Sequence[Mapping[str, Fit]],
    common_fits: Sequence[Sequence[Fit]],
    related: Relations,
    standings: Sequence[Standing],
    stands: Sequence[bool],
    known: Mapping[str, float],
    *,
    alpha: float,
    seed: int,
    simulate: bool = True,
) -> list[Comparison]:
    """Every candidate that contains another, against it.

    ``common_fits[i]``: fits of candidate i with one scale for all, one for each reading of the errors of
    conditions; ``known``: constants that the study gives; ``simulate``: whether to draw tables.
    """
    out = []
    for (larger, smaller), nesting in sorted(related.contains.items()):
        big = next(iter(fits[larger].values()))
        small = next(iter(fits[smaller].values()))
        q = big.p - small.p
        test = nested_f(big, small, edge=nesting.edge) if q >= 1 else None
        no_reference = bool(nesting.vanish) or (nesting.edge and q > 1)
        null = common_fits[smaller][0]
        reconciled = _reconciled(standings[smaller], larger, null, one_sided=False)
        simulated = None
        settled = reconciled is not None and reconciled < RISK  # clear without a draw
        if simulate and q >= 1 and no_reference and stands[larger] and not settled:
            simulated = _simulated(
                bounds, common_fits, larger, smaller, nesting, known, alpha, seed
            )
        one_sided = nesting.edge and q == 1 and not nesting.vanish
        score = _reconciled(standings[smaller], larger, null, one_sided=one_sided)
        decides, source = _decides(big, test, simulated, score, no_reference)
        out.append(
            Comparison(
                smaller,
                larger,
                nesting.words(),
                nesting.edge,
                q,
                test,
                _note(nesting, q, test, simulated),
                reconciled,
                simulated,
                decides,
                source,
            )
        )
    return out


def _note(nesting: Nesting, q: int, test: NestedF | None, simulated: Simulated | None) -> str:
    if q < 1:
        return "not testable: the special case has as many constants"
    if test is None and simulated is None:
        return "not testable: no degrees of freedom left"
    if nesting.vanish:
        note = f"{', '.join(nesting.vanish)} vanish with it: the F reference does not hold here, "
        return note + ("the bootstrap does" if simulated else "the p-value is only a guide")
    if nesting.edge and q > 1:
        note = "several constants on the edge: the p-value of F is conservative"
        return note + (", that of the bootstrap is not" if simulated else "")
    if nesting.edge:
        return "on the edge: one-sided p is half the two-sided"
    return ""


def _simulated(
    bounds: Sequence[Bound],
    common_fits: Sequence[Sequence[Fit]],
    larger: int,
    smaller: int,
    nesting: Nesting,
    known: Mapping[str, float],
    alpha: float,
    seed: int,
) -> Simulated | None:
    """The bootstrap's p-value: of several readings of the errors the largest."""
    found: list[Simulated] = []
    names = list(bounds[larger].names)
    vanish = [names.index(n) for n in nesting.vanish if n in names]
    for small, big in zip(common_fits[smaller], common_fits[larger], strict=True):
        if not (small.ok and big.ok) or small.problem.joint_scale or small.degrees_of_freedom < 1:
            return None
        starts = [big.theta[None]]
        near = embedded(
            bounds[smaller], bounds[larger], small.theta, nesting, small.data.conditions, known
        )
        if near is not None:
            starts.append(near)
            for factor in VANISHING if vanish else ():
                row = near.copy()
                row[0, vanish] = big.predictor.scale[vanish] * factor
                starts.append(row)
        found.append(nested_p(small, big, np.vstack(starts), alpha=alpha, seed=seed))
    return max(found, key=lambda s: s.p)


def _reconciled(standing: Standing, larger: int, null: Fit, *, one_sided: bool) -> float | None:
    """From the scores of a law in the directions of a larger one; ``one_sided``: only a rise counts, if
    there is but one direction."""
    zs = [a.z for a in standing.against if a.rival == larger]
    if not zs:
        return None
    df = float(null.data.scale_df) if null.data.scale is Scale.REPLICATES else 0.0
    if null.data.scale is Scale.ESTIMATED:
        df = null.degrees_of_freedom - 1.0
    reference = df if df > 0 else np.inf
    if one_sided and len(zs) == 1:
        return float(t_upper(zs[0], reference))
    single = 2 * float(t_upper(max(abs(z) for z in zs), reference))
    return float(min(1.0, single * len(zs)))


def _decides(
    big: Fit,
    test: NestedF | None,
    simulated: Simulated | None,
    reconciled: float | None,
    no_reference: bool,
) -> tuple[float | None, str]:
    """F takes the conditions as exact: with errors of conditions the score decides in its place."""
    if simulated is not None:
        return simulated.p, "bootstrap"
    if big.data.exact_conditions and test is not None and not no_reference:
        return test.p_one_sided, "F"
    if reconciled is not None:
        return reconciled, "reconciled score"
    if test is not None:
        return test.p_one_sided, "F, as a guide"
    return None, ""


def no_better(
    found: Sequence[Comparison], stands: Sequence[bool], alpha: float
) -> tuple[int | None, ...]:
    """For each law that stands: a special case of it that stands and loses nothing."""
    out: list[int | None] = [None] * len(stands)
    for c in found:
        if c.q < 1 or not (stands[c.larger] and stands[c.smaller]):
            continue
        if (c.decides is None or c.decides > alpha) and out[c.larger] is None:
            out[c.larger] = c.smaller
    return tuple(out)


def inseparable(
    common_fits: Sequence[Sequence[Fit]], related: Relations, stands: Sequence[bool]
) -> tuple[tuple[int, ...], ...]:
    """The same law, or laws that both stand and differ by less than the errors in every run."""
    n = len(common_fits)
    out: list[list[int]] = [[] for _ in range(n)]
    for i in range(n):
        for j in range(i + 1, n):
            same = (i, j) in related.same
            close = False
            if stands[i] and stands[j] and not same:
                a, b = common_fits[i][0], common_fits[j][0]
                close = a.ok and b.ok and apart(a, b) < INSEPARABLE
            if same or close:
                out[i].append(j)
                out[j].append(i)
    return tuple(tuple(x) for x in out)


def pairs_of(
    common_fits: Sequence[Sequence[Fit]],
    criteria: Sequence[Criteria],
    related: Relations,
    stands: Sequence[bool],
    *,
    alpha: float,
    seed: int,
) -> Pairs:
    """Different laws that stand, two at a time (errors of conditions in the first reading of them)."""
    members = [
        i
        for i, stand in enumerate(stands)
        if stand
        and common_fits[i][0].ok
        and common_fits[i][0].degrees_of_freedom > 0
        and not any((j, i) in related.same for j in range(i))
    ]
    if len(members) < 2 or common_fits[members[0]][0].problem.joint_scale:
        return Pairs()
    corrected = all(np.isfinite(criteria[i].aicc) for i in members)
    penalties = [
        (c.aicc if corrected else c.aic) + 2 * c.log_likelihood
        if np.isfinite(c.log_likelihood)
        else 0.0
        for c in criteria
    ]
    first = [f[0] for f in common_fits]
    return pairs(first, members, related.contains, penalties, alpha=alpha, seed=seed)
