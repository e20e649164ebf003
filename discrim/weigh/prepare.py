"""Laws derived, checked against the study, and bound to its runs, before anything is fitted."""

from __future__ import annotations

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.model import amount
from discrim.runs.model import Role
from discrim.study.lookup import check_measured
from discrim.study.model import Study
from discrim.weigh.asked import check_questions
from discrim.weigh.asked_constants import check_constant_questions
from discrim.weigh.bench import Bench, build
from discrim.weigh.bind import Bound, bind
from discrim.weigh.laws import CandidateLaw, laws_of
from discrim.weigh.reported import check_reported


def prepare(
    study: Study, *, planned: bool = False
) -> tuple[list[CandidateLaw], Bench, list[Bound]]:
    """Laws derived and checked, and bound to the runs."""
    if not study.candidates:
        raise DiscrimError(
            "the study has no candidates",
            place=Place(file=str(study.path)),
            do="Write each mechanism or law that could explain the runs under [[candidates]].",
        )
    laws = laws_of(study)
    for c in laws:
        # k_obs of S is the rate divided by [S], which a law of first order in S then lacks
        cancelled = [
            column.about
            for column in study.runs.observations()
            if column.role is Role.K_OBS_OF
            and not any(amount(column.about) in e.free_symbols for e in c.bound)
        ]
        check_measured(c.law, study, place=c.candidate.place, cancelled=cancelled)
    check_questions(study, laws)
    bench = build(study, [e for c in laws for e in c.bound], planned=planned)
    bounds = [bind(c.law, bench, c.bound) for c in laws]
    for c, b in zip(laws, bounds, strict=True):
        if not b.names:
            raise DiscrimError(
                f'nothing in the law of "{c.law.name}" is left to estimate',
                place=c.candidate.place,
                do="Leave at least one constant of each candidate open: start = in place of "
                "value =, or a constant in front of the law.",
            )
    check_reported(study, bench, laws, bounds)
    check_constant_questions(study, bench, laws, bounds)
    return laws, bench, bounds
