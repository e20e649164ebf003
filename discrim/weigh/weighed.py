"""What one weighing of a study found out, as one record."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from discrim.evidence.pairs import Pairs
from discrim.evidence.rivals import Standing
from discrim.fit.measurements import Measurements
from discrim.study.model import Study
from discrim.weigh.adequacy import Adequacy
from discrim.weigh.asked import Answer
from discrim.weigh.asked_constants import ConstantAnswer
from discrim.weigh.assess import Assessment
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.compared import Comparison
from discrim.weigh.knock_outs import KnockOuts
from discrim.weigh.laws import CandidateLaw
from discrim.weigh.left_out import LeftOut
from discrim.weigh.magnitudes import Magnitude
from discrim.weigh.reported import ReportedValue
from discrim.weigh.sameness import Relations


@dataclass(frozen=True, slots=True, eq=False)
class Weighed:
    """Everything that one run of `weigh` found out."""

    study: Study
    bench: Bench
    laws: tuple[CandidateLaw, ...]
    bounds: tuple[Bound, ...]
    assessments: tuple[Assessment, ...]
    relations: Relations
    standings: tuple[Standing, ...]
    stands: tuple[bool, ...]
    weights: tuple[float, ...]
    rank: tuple[int, ...]
    inseparable: tuple[tuple[int, ...], ...]
    no_better: tuple[int | None, ...]
    comparisons: tuple[Comparison, ...]
    answers: tuple[Answer, ...]
    common: Measurements
    findings: tuple[tuple[str, str, str], ...]
    seed: int
    knock_outs: tuple[KnockOuts | None, ...] = ()
    adequacy: tuple[Adequacy | None, ...] = ()
    magnitudes: tuple[tuple[Magnitude, ...], ...] = ()
    left_out: LeftOut | None = None
    pairs: Pairs = field(default_factory=Pairs)
    reported: tuple[tuple[ReportedValue, ...], ...] = ()
    # answers about constants, by the number of the question
    of_constants: Mapping[int, ConstantAnswer] = field(default_factory=dict)
