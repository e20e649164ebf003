"""Answers to the questions of a study: terms knocked out, stand-ins tried, verdicts judged."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import partial
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, nearest
from discrim.evidence.participation import participation
from discrim.evidence.term import Kind, Participation, Term
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION
from discrim.ratelaw.knockout import KnockOut, KnockOutKind, contains, knock_out
from discrim.ratelaw.lump import lump
from discrim.ratelaw.model import RateLaw, amount
from discrim.runs.model import ErrorBasis
from discrim.study.model import Question, Study
from discrim.verdict import (
    CandidateFacts,
    Reading,
    StandIn,
    Verdict,
    judge_participation,
    judge_reverse,
    vote,
)
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.effects import knocked_out, named_conditions
from discrim.weigh.laws import CandidateLaw
from discrim.weigh.reversed import check_reversible, known_effect, reverse_in, reverse_words
from discrim.weigh.stand_ins import Tried, bind_law, stand_ins, symbol_of

# questions about a part of the law, answered by taking it out
TAKEN_OUT = ("participates", "reversible")

_KIND = {
    KnockOutKind.ZERO: Kind.ZERO,
    KnockOutKind.VANISH: Kind.VANISH,
    KnockOutKind.SEVERAL: Kind.SEVERAL,
    KnockOutKind.ORDER: Kind.ORDER,
    KnockOutKind.FACTOR: Kind.FACTOR,
}


@dataclass(frozen=True, slots=True, eq=False)
class InCandidate:
    """One candidate in a participation question; ``by_origin`` empty when it does not contain it.

    ``term``: what was tested; ``with_it`` and ``without``: the fits of the law with and without it, by
    origin.
    """

    index: int
    contains: bool
    knock_out: KnockOut | None
    by_origin: Mapping[str, Participation]
    reduced: Bound | None
    note: str = ""
    term: Term | None = None
    with_it: Mapping[str, Fit] = field(default_factory=dict)
    without: Mapping[str, Fit] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, eq=False)
class Answer:
    """A participation question with everything behind its verdict.

    ``judge`` says what the verdict would be were the ``facts`` (and ``stand_ins=``) others; ``tried``: the
    stand-ins with their fits.
    """

    question: Question
    what: str
    verdict: Verdict
    per_candidate: tuple[InCandidate, ...]
    stand_ins: tuple[tuple[StandIn, float], ...]
    facts: tuple[CandidateFacts, ...] = ()
    judge: Callable[..., Verdict] | None = None
    tried: tuple[Tried, ...] = ()


def check_questions(study: Study, laws: Sequence[CandidateLaw]) -> None:
    """Raise for a question about something that no candidate contains."""
    check_reversible(study, laws)
    for q in study.questions:
        if q.asks != "participates":
            continue
        if any(contains(c.law, q.about) for c in laws):
            continue
        known = sorted(
            {s for c in laws for s in c.law.species}
            | {p.name for c in laws for p in c.law.pathways}
            | {s for c in laws for s in c.law.steps}
        )
        raise DiscrimError(
            f'the question is about "{q.about}", which no rate law of a candidate contains',
            place=q.place,
            do=f"{nearest(q.about, known)} The laws contain: {', '.join(known)}. A species that "
            "stands in the steps but not in the law cannot be asked about with rates.".strip(),
        )


def answer(
    question: Question,
    study: Study,
    bench: Bench,
    laws: Sequence[CandidateLaw],
    bounds: Sequence[Bound],
    fits: Sequence[Mapping[str, Fit]],
    stands: Sequence[bool],
    *,
    seed: int,
    flips: bool = True,
) -> Answer:
    """One participation question; without ``flips`` no flip distances, which no verdict needs."""
    level = study.level
    about = reverse_words(question) if question.asks == "reversible" else question.about
    is_pathway = any(about == p.name for c in laws for p in c.law.pathways) or any(
        about in c.law.steps for c in laws
    )
    what = "pathway" if is_pathway and amount(about) not in _all_symbols(laws) else "species"
    if question.asks == "reversible":
        what = "reverse"
    per: list[InCandidate] = []
    for i, c in enumerate(laws):
        per.append(
            _in_candidate(
                question,
                study,
                bench,
                c,
                bounds[i],
                fits[i],
                i,
                seed,
                brief=not stands[i],
                flips=flips,
            )
        )
    facts = [_facts(study, bench, laws[k.index], k, stands[k.index]) for k in per]
    tried: list[Tried] = []
    if what == "species":
        votes = {vote(c, 1.0 - level, question.matters_above)[0] for c in facts if c.stands}
        every = votes == {"participates"}
        tried = stand_ins(about, study, bench, laws, fits, per, stands, seed, every=every)
    detect = [
        p.detectable
        for k in per
        if stands[k.index]
        for p in k.by_origin.values()
        if p.detectable == p.detectable
    ]
    judge = partial(
        _judged,
        about,
        what=what,
        stand_ins=[t.stand_in for t in tried],
        level=level,
        matters_above=question.matters_above,
        n_runs=bench.measurements.n,
        n_constants=max(
            (len(b.names) for b, ok in zip(bounds, stands, strict=True) if ok), default=0
        ),
        detectable=max(detect, default=float("nan")),
        is_reactant=_is_reactant(about, laws),
    )
    shown = tuple((t.stand_in, t.chance) for t in tried)
    return Answer(
        question, what, judge(facts), tuple(per), shown, tuple(facts), judge, tuple(tried)
    )


def _judged(about: str, facts: Sequence[CandidateFacts], **rest: Any) -> Verdict:
    if rest["what"] == "reverse":
        return judge_reverse(about, facts, **{**rest, "what": "species"})
    return judge_participation(about, candidates=facts, **rest)


def _all_symbols(laws: Sequence[CandidateLaw]) -> set[Any]:
    return set().union(*(c.law.rate.free_symbols for c in laws))


def _is_reactant(about: str, laws: Sequence[CandidateLaw]) -> bool:
    return any(
        c.law.stoichiometry is not None and c.law.stoichiometry.get(about, 0) < 0 for c in laws
    )


def _in_candidate(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    fits: Mapping[str, Fit],
    index: int,
    seed: int,
    *,
    brief: bool,
    flips: bool,
) -> InCandidate:
    if question.asks == "reversible":
        c, bound, fits, ko, inside, note = reverse_in(question, study, bench, c, bound, fits, seed)
    else:
        ko = knock_out(c.law, question.about, bench.typical(question.about))
        inside = contains(c.law, question.about)
        note = f"“{c.law.name}”: the step {question.about} cannot be taken out of its law"
    if ko is None:
        return InCandidate(index, inside, None, {}, None, note if inside else "")
    if not all(f.ok for f in fits.values()):
        return InCandidate(
            index, True, ko, {}, None, f"“{c.law.name}”: the fit failed, so it cannot be tested"
        )
    reduced_law = ko.reduced(c.law)
    if ko.kind is KnockOutKind.FACTOR:
        reduced_law = _lumped(reduced_law)
    reduced = bind_law(reduced_law, study, bench)
    first = next(iter(fits.values()))
    term = _term(question, study, bench, c, bound, ko, reduced, first.theta)
    if term.kind is not Kind.FACTOR and not term.psi:
        return InCandidate(
            index,
            True,
            ko,
            {},
            None,
            f"“{c.law.name}”: {', '.join(sorted(ko.psi))} is given in the study, so these runs are "
            "not asked about it",
        )
    by_origin, without = {}, {}
    for origin, full in fits.items():
        data = full.data
        small = fit(
            reduced.predictor, data, seed=seed, starts=8, near=_inherited(reduced, bound, full)
        )
        by_origin[origin] = participation(
            term,
            data,
            full,
            small,
            origin=origin,
            level=study.level,
            seed=seed,
            matters_above=question.matters_above,
            brief=brief,
            flips=flips,
        )
        if question.asks == "reversible" and term.kind is Kind.FACTOR:
            effect = known_effect(question, study, bench, c, bound, ko, full.theta)
            if effect is not None:
                by_origin[origin] = replace(by_origin[origin], effect=effect)
        without[origin] = small
    return InCandidate(index, True, ko, by_origin, reduced, "", term, dict(fits), without)


def _lumped(law: RateLaw) -> RateLaw:
    """Identifiable form of a law with an amount absorbed, where the algebra can give it."""
    try:
        return lump(law)
    except (DiscrimError, ValueError, NotImplementedError, ArithmeticError):
        return law


def _inherited(reduced: Bound, bound: Bound, full: Fit) -> np.ndarray | None:
    """The full law's constants as a start for the reduced one."""
    at = {n: k for k, n in enumerate(bound.names)}
    if not reduced.names or not all(n in at for n in reduced.names):
        return None
    return np.array([[full.theta[at[n]] for n in reduced.names]])


def _term(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    ko: KnockOut,
    reduced: Bound,
    theta: np.ndarray,
) -> Term:
    kind = _KIND[ko.kind]
    psi = tuple(j for j in range(len(bound.names)) if bound.base_constant(j).name in ko.psi)
    vanish = tuple(j for j in range(len(bound.names)) if bound.base_constant(j).name in ko.vanish)
    if len(psi) > 1 and kind in (Kind.ZERO, Kind.ORDER, Kind.VANISH):
        kind = Kind.SEVERAL
    if kind is Kind.FACTOR:
        knocked, (points, labels) = None, named_conditions(question, study, bench)
    else:
        knocked, points, labels = knocked_out(question, study, bench, c, bound, ko, theta, psi)
    return Term(kind, bound.predictor, reduced.predictor, psi, vanish, knocked, points, labels)


def _facts(
    study: Study, bench: Bench, c: CandidateLaw, k: InCandidate, stands: bool
) -> CandidateFacts:
    readings = []
    for origin, p in k.by_origin.items():
        bound = p.effect.bound if p.effect is not None else 1.0
        readings.append(Reading(origin, p.p, bound, p.information, p.error_margin, p.weak))
    untestable = k.note
    if any(r.p != r.p for r in readings):
        untestable = (
            f"with “{c.law.name}” a rate without it cannot be tested: as many constants as runs, and "
            "no error of the rate is stated"
        )
        readings = []
    exact = all(s.target == OBSERVATION for s in bench.measurements.sources)
    return CandidateFacts(
        c.law.name,
        stands,
        k.contains,
        tuple(readings),
        exact,
        tuple(_assumed(study, c, k)),
        # of a factor no bound is known, but for a reverse reaction whose equilibrium is given
        k.knock_out is not None
        and k.knock_out.kind is KnockOutKind.FACTOR
        and not all(r.bound < 1.0 for r in readings),
        untestable,
    )


def _assumed(study: Study, c: CandidateLaw, k: InCandidate) -> list[str]:
    """Columns in the law whose error was only assumed."""
    used = set().union(*(e.free_symbols for e in c.bound))
    return [
        f"“{col.name}”"
        for col in study.runs.columns
        if col.basis is ErrorBasis.ASSUMED and symbol_of(col) in used
    ]


# ---- stand-ins -------------------------------------------------------------------------------
