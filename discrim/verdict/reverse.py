"""Does the reverse reaction show? The verdict on a part of the law, in words of its own."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from discrim.verdict.participation import CandidateFacts, Verdict, judge_participation
from discrim.verdict.words import percent


def judge_reverse(about: str, facts: Sequence[CandidateFacts], **rest: Any) -> Verdict:
    """``about``: "the reverse reaction" or "the reverse of step 2"; others as in participation."""
    found = judge_participation(about, candidates=facts, **rest)
    head = about[0].upper() + about[1:]
    matters = rest.get("matters_above")
    limit = "" if matters is None else percent(matters)
    if found.outcome == "participates":
        sentence = f"{head} shows in these runs."
        if found.below_what_matters:
            sentence = (
                f"{head} shows in these runs, but takes off less than the {limit} that matters."
            )
    elif found.outcome == "negligible":
        sentence = f"{head} takes less than {limit} off the rate within these runs."
    elif found.because == ("no candidate stands",):
        sentence = f"Undecided whether {about} shows: no candidate stands."
    else:
        sentence = f"Undecided whether {about} shows in these runs."
    return replace(found, sentence=sentence)
