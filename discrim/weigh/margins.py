"""The error margin of a verdict: the factor on all errors of conditions at which it changes.

Larger errors can change it in three ways: a law that stands no longer rejects a rate without the term
(`Participation.error_margin`), an effect as large as what matters is no longer ruled out, or a law that
is rejected and speaks otherwise, or a stand-in, comes to stand.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from discrim.evidence.margin import bound_margin, standing_margin
from discrim.evidence.rivals import Standing
from discrim.fit.fit import Fit
from discrim.verdict import StandIn
from discrim.weigh.asked import Answer
from discrim.weigh.stand_ins import Tried


def with_margins(
    answers: Sequence[Answer],
    common_fits: Sequence[Sequence[Fit]],
    readings: Sequence[Sequence[Standing]],
    *,
    alpha: float,
) -> list[Answer]:
    """The decided answers judged again with what larger errors of conditions would change."""
    comes: dict[int, float] = {}
    out = []
    for a in answers:
        outcome = a.verdict.outcome
        if outcome == "undecided" or a.judge is None or all(c.exact_conditions for c in a.facts):
            out.append(a)
            continue
        votes = dict(a.verdict.votes)
        facts = list(a.facts)
        for i, c in enumerate(facts):
            k = a.per_candidate[i]
            if c.stands and outcome == "negligible" and a.question.matters_above is not None:
                facts[i] = replace(
                    c,
                    readings=tuple(
                        replace(
                            r,
                            margin_of_bound=bound_margin(
                                k.term,
                                k.with_it[r.origin],
                                k.by_origin[r.origin],
                                alpha=alpha,
                                matters_above=a.question.matters_above,
                            ),
                        )
                        if k.term is not None
                        else r
                        for r in c.readings
                    ),
                )
            elif not c.stands and votes.get(c.name) != outcome:
                if k.index not in comes:
                    comes[k.index] = _comes_to_stand(k.index, common_fits, readings, alpha)
                facts[i] = replace(c, stands_at=comes[k.index])
        again = {}
        if outcome == "participates" and a.tried:
            again = {"stand_ins": [_with_margin(t, alpha) for t in a.tried]}
        out.append(replace(a, verdict=a.judge(facts, **again), facts=tuple(facts)))
    return out


def _with_margin(t: Tried, alpha: float) -> StandIn:
    found = [standing_margin(fit, whole, alpha) for fit, whole in t.judged]
    return replace(t.stand_in, stands_at=min((f for f in found if f == f), default=float("inf")))


def _comes_to_stand(
    i: int,
    common_fits: Sequence[Sequence[Fit]],
    readings: Sequence[Sequence[Standing]],
    alpha: float,
) -> float:
    """A law stands if it does under any reading of the errors."""
    found = [
        standing_margin(fit, readings[r][i], alpha)
        for r, fit in enumerate(common_fits[i])
        if fit.ok
    ]
    return min((f for f in found if f == f), default=float("inf"))
