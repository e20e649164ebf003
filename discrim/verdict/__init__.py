"""From evidence to verdicts.

Nothing here computes statistics: it reads facts from `evidence` and says what follows, with the
numbers and thresholds in the reasons. Every threshold that is an opinion stands in `thresholds`.
"""

from __future__ import annotations

from discrim.verdict.constants import (
    ConstantVerdict,
    ValueFacts,
    ValueReading,
    judge_value,
    vote_on_value,
)
from discrim.verdict.one_run import with_one_run
from discrim.verdict.participation import (
    CandidateFacts,
    Outcome,
    Reading,
    StandIn,
    Verdict,
    judge_participation,
    vote,
)
from discrim.verdict.reverse import judge_reverse
from discrim.verdict.rivals import sentence_standing
from discrim.verdict.thresholds import (
    ASSUMED_SPREAD,
    CONDITIONING_FRACTION,
    ERROR_MARGIN,
    FEW_RUNS,
    MOST_WEAK,
    NOTHING_APART,
    ONE_RUN_STOPS,
)

__all__ = [
    "ASSUMED_SPREAD",
    "CONDITIONING_FRACTION",
    "ERROR_MARGIN",
    "FEW_RUNS",
    "MOST_WEAK",
    "NOTHING_APART",
    "ONE_RUN_STOPS",
    "CandidateFacts",
    "ConstantVerdict",
    "Outcome",
    "Reading",
    "StandIn",
    "ValueFacts",
    "ValueReading",
    "Verdict",
    "judge_participation",
    "judge_reverse",
    "judge_value",
    "sentence_standing",
    "vote",
    "vote_on_value",
    "with_one_run",
]
