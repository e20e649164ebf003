"""What a verdict owes to a single run."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from discrim.verdict.participation import Verdict
from discrim.verdict.thresholds import ONE_RUN_STOPS


def with_one_run(verdict: Verdict, about: str, sentences: Sequence[str]) -> Verdict:
    """The verdict with what leaving out single runs would make of it said beside it.

    ``sentences``: one for each other verdict that it could become; none when it stays.
    """
    if not sentences:
        return verdict
    why = (*verdict.why, *sentences)
    if ONE_RUN_STOPS and verdict.outcome == "participates":
        return replace(
            verdict,
            outcome="undecided",
            sentence=f"Undecided whether the rate depends on {about}: that hangs on one run.",
            why=why,
            because=(*verdict.because, "one run"),
            settle=(*verdict.settle, "replicates of the run that it hangs on"),
            below_what_matters=False,
        )
    return replace(verdict, why=why)
