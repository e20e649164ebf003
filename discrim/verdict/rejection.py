"""When a test that rejects is enough to decide: the demands on the errors of the conditions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

from discrim.verdict.thresholds import ASSUMED_SPREAD, ERROR_MARGIN, MOST_WEAK
from discrim.verdict.words import listed, percent


class Tested(Protocol):
    """A test in one candidate, errors read one way (see `participation.Reading`)."""

    @property
    def p(self) -> float: ...
    @property
    def information(self) -> float: ...
    @property
    def margin(self) -> float: ...
    @property
    def weak(self) -> int: ...


def rejection(
    name: str,
    readings: Sequence[Tested],
    alpha: float,
    *,
    exact_conditions: bool,
    assumed_errors: Sequence[str],
    shows: str,
) -> tuple[bool, list[str]]:
    """Whether the tests of candidate ``name`` reject under every reading, and what stops that from
    deciding.

    ``assumed_errors``: columns whose error was only assumed; ``shows``: in what share of something what
    is tested shows on its own, with a place {} for that share.
    """
    rejects = [r.p < alpha for r in readings]
    if not all(rejects):
        if not any(rejects):
            return False, []
        return False, [
            f"with “{name}” the answer depends on whether the conditions were set or measured, "
            "which the study does not say"
        ]
    stops = []
    margin = next((r.margin for r in readings if r.margin < ERROR_MARGIN), None)
    if not exact_conditions and margin is not None:
        stops.append(
            f"with “{name}” the test would fail if the condition errors were "
            f"{margin:.2g} times as large as stated (at least {ERROR_MARGIN:g} is asked)"
        )
    most = max(r.weak for r in readings)
    if most > MOST_WEAK:
        stops.append(
            f"in “{name}” {most} combinations of the other constants are in lockstep with one "
            f"another within the errors of the conditions (the test allows for {MOST_WEAK})"
        )
    weakest = min(r.information for r in readings)
    if assumed_errors and weakest < ASSUMED_SPREAD:
        stops.append(
            f"the error of {listed(assumed_errors)} was only assumed, and over these runs "
            f"{shows.format(percent(weakest))} (at least {percent(ASSUMED_SPREAD)} is asked)"
        )
    return True, stops
