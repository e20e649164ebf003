"""From the candidates of a study to rate laws and the expressions that its columns observe."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

from discrim.errors import DiscrimError
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.derive import derive
from discrim.ratelaw.model import RateLaw, quantity, total_amount
from discrim.runs.model import Role
from discrim.study.lookup import measured_species
from discrim.study.model import Candidate, Study
from discrim.weigh.bench import observed_expression, put_in

MAX_CONSTANTS = 30  # of one law, known ones too; laws in use have up to a dozen


@dataclass(frozen=True, slots=True, eq=False)
class CandidateLaw:
    """A candidate with its law.

    ``observed`` : one expression for each observed column, in symbols of species and constants;
    ``bound`` : the same with derived quantities put in.
    """

    candidate: Candidate
    law: RateLaw
    observed: tuple[Any, ...]
    bound: tuple[Any, ...]


def measured_names(study: Study) -> frozenset[str]:
    """Species that are no intermediates: measured, derived, or known by their total."""
    totals = {c.about for c in study.runs.columns if c.role is Role.TOTAL}
    return measured_species(study) | totals


def law_of(candidate: Candidate, study: Study) -> CandidateLaw:
    """Derive (or read) the law of one candidate and what each observed column is in it."""
    if candidate.mechanism is not None:
        law = derive(candidate.mechanism, measured=measured_names(study))
        law = replace(law, name=candidate.name, place=law.place or candidate.place)
        law = per_amount_of_catalyst(law, candidate, study)
    else:
        law = law_from_expression(
            candidate.name,
            candidate.law,
            overall=candidate.overall,
            place=candidate.place,
            text=candidate.law_text,
        )
        law = replace(law, source=candidate.source)
    if len(law.constants) > MAX_CONSTANTS:
        raise DiscrimError(
            f'the law of "{candidate.name}" has {len(law.constants)} constants, at most '
            f"{MAX_CONSTANTS} are read",
            place=candidate.place,
            do="Rates do not pin down so many. Assume steps at equilibrium, name a limiting step, "
            "or fix what is known.",
        )
    return observed(candidate, law, study)


def observed(candidate: Candidate, law: RateLaw, study: Study) -> CandidateLaw:
    """The expressions of the observed columns for a law."""
    seen = tuple(observed_expression(c, law, study) for c in study.runs.observations())
    if all(e == 0 for e in seen):
        raise DiscrimError(
            f'candidate "{candidate.name}" predicts a rate of zero in every run',
            place=candidate.place,
            do="Nothing in it makes or consumes what the rate column measures.",
        )
    return CandidateLaw(candidate, law, seen, tuple(put_in(e, study) for e in seen))


def per_amount_of_catalyst(law: RateLaw, candidate: Candidate, study: Study) -> RateLaw:
    """A law per total catalyst, times the catalyst where a column gives it."""
    assert candidate.mechanism is not None
    catalysts = candidate.mechanism.catalyst
    if not catalysts:
        return law
    totals = {total_amount(name): name for name in catalysts}
    if law.rate.free_symbols & totals.keys():
        return _with_totals(law, totals, study)
    for column in study.runs.columns:
        if column.role is Role.CATALYST or (
            column.role is Role.TOTAL and column.about in catalysts
        ):
            times = quantity(column.name)
            break
    else:
        return law
    words = f"The law per total {catalysts[0]} is multiplied by the column “{column.name}”."
    return replace(
        law,
        rate=law.rate * times,
        production={k: e * times for k, e in law.production.items()},
        pathways=tuple(replace(p, rate=p.rate * times) for p in law.pathways),
        conventions=(*law.conventions, words),
    )


def _with_totals(law: RateLaw, totals: Mapping[Any, str], study: Study) -> RateLaw:
    """A law that holds the totals of its catalysts, the columns that give them put in."""
    swap = {}
    for symbol, name in totals.items():
        for column in study.runs.columns:
            alone = column.role is Role.CATALYST and len(totals) == 1
            if alone or (column.role is Role.TOTAL and column.about == name):
                swap[symbol] = quantity(column.name)
                break
    given = {symbol.name[1:-1] for symbol in swap}
    return replace(
        law,
        rate=law.rate.xreplace(swap),
        production={k: e.xreplace(swap) for k, e in law.production.items()},
        pathways=tuple(replace(p, rate=p.rate.xreplace(swap)) for p in law.pathways),
        species=tuple(s for s in law.species if s not in given),
    )


def laws_of(study: Study) -> list[CandidateLaw]:
    """All candidates, in the order of the study."""
    return [law_of(c, study) for c in study.candidates]
