"""Tables of rivals two at a time, and of who would rank first if the runs were made again."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from discrim.report import read
from discrim.report.numbers import MISSING, number, percent, probability
from discrim.report.table import Table, make


def pairs(found: Sequence[Any]) -> Table | None:
    """Each law of a pair taken for true in turn."""
    rows = []
    for pair in found:
        a, b = read.text(pair, "a"), read.text(pair, "b")
        for test in read.records(pair, "cox_williams"):
            null = read.text(test, "null")
            rows.append([null, b if null == a else a, _simulated(test), _closer(pair)])
    heads = [("Taken for true", False), ("Rival", False), ("p", True), ("Closer (Vuong)", False)]
    return make(
        "Rivals two at a time",
        heads,
        rows,
        note="p: chance that the rival would gain as much as it does on these runs if the first law were "
        "true, from tables drawn from that law (Cox, Williams), with its standard error. Small for one "
        "and not for the other speaks for the other; both can hold, and neither. Vuong's test of which "
        "is closer to the truth takes conditions as exact and runs as many: a guide. No verdict rests "
        "on this table.",
    )


def _simulated(test: Mapping[str, Any]) -> str:
    p, error = read.value(test, "p"), read.value(test, "error")
    if p is None:
        return MISSING
    if not read.value(test, "draws"):
        return "1, alike on these runs"
    return f"{probability(p)} ± {number(error, 1)}"


def _closer(pair: Any) -> str:
    test = read.part(pair, "vuong")
    if not test:
        return ""
    p = read.value(test, "p")
    return f"{read.text(test, 'prefers') or 'neither'} (p = {probability(p)})"


def first_places(ordered: Sequence[Any]) -> Table | None:
    """How often each candidate would rank first."""
    rows = [
        [
            read.text(c, "name"),
            _share(read.value(c, "first_share_if_true")),
            _share(read.value(c, "first_share")),
        ]
        for c in ordered
        if read.value(c, "first_share") is not None
    ]
    return make(
        "If the runs were made again: how often each ranks first",
        [("Candidate", False), ("when it is true", True), ("in all", True)],
        rows,
        note="Tables drawn from each law that stands, all of them fitted to each; ranked by AICc (AIC where "
        "that does not exist). In all: each of the laws true equally often. A law that seldom ranks "
        "first when it is true is not refuted by ranking lower; ties are shared.",
    )


def _share(x: float | None) -> str:
    return MISSING if x is None else percent(x)
