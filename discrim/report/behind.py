"""The tables behind one verdict: its tests, its candidates, its stand-ins."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from discrim.report import read
from discrim.report.constants import by_power, power_of, power_words
from discrim.report.numbers import MISSING, interval, number, percent, probability, tiny_is_zero
from discrim.report.table import Table, make


def behind(question: Mapping[str, Any]) -> tuple[Table, ...]:
    """The tables behind one verdict: tests, candidates, stand-ins."""
    found = [_tests(question), _by_candidate(question), _stand_ins(question)]
    return tuple(t for t in found if t)


def _tests(question: Mapping[str, Any]) -> Table | None:
    names = {"nested_F": "extra sum of squares (F)", "reconciled": "reconciled test"}
    rows = []
    tests = read.part(question, "tests")
    origins = read.part(question, "by_origin")
    listed = [(names.get(str(k), read.clean(k)), read.part(tests, k)) for k in tests]
    if len(origins) > 1:  # else the reconciled test is that of the one reading
        listed += [
            (f"reconciled test, conditions taken as {read.clean(k)}", read.part(origins, k))
            for k in origins
        ]
    for name, t in listed:
        statistic = tiny_is_zero(read.value(t, "statistic"))
        df = [read.clean(x) for x in read.items(t, "df")] or read.texts(t, "df")
        rows.append(
            [
                name,
                number(statistic, 3),
                ", ".join(df),
                number(tiny_is_zero(read.value(t, "z")), 3),
                probability(read.value(t, "p")),
                read.text(t, "words"),
            ]
        )
    heads = [
        ("Test", False),
        ("Statistic", True),
        ("Degrees of freedom", True),
        ("z", True),
        ("p", True),
        ("Remark", False),
    ]
    return make("Tests", heads, rows)


def _by_candidate(question: Mapping[str, Any]) -> Table | None:
    rows = []
    for c in read.records(question, "by_candidate"):
        effect = read.numbers(c, "effect")
        shown = MISSING
        if len(effect) == 2:
            shown = f"{percent(effect[0])} to {percent(effect[1])}"
        measures = read.records(c, "measures")
        if measures:
            shown = "; ".join(_measure(m) for m in measures)
        rows.append(
            [
                read.text(c, "candidate"),
                _yes(c.get("stands"), "stands", "rejected"),
                _yes(c.get("contains"), "yes", "no"),
                probability(read.value(c, "p")),
                shown,
                read.text(c, "votes"),
            ]
        )
    heads = [
        ("Candidate", False),
        ("Outcome", False),
        ("Contains it", False),
        ("p", True),
        ("Effect" if read.part(question, "effect") else "Estimate", True),
        ("Speaks for", False),
    ]
    return make("Candidate by candidate", heads, rows)


def _measure(m: Mapping[str, Any]) -> str:
    """``k_1 / k_2 2.59 (2.40 to 2.80)``; no interval is made for candidates that are rejected."""
    value, ends = read.value(m, "value"), read.numbers(m, "interval")
    power = power_of([value, *ends])
    shown = f"{read.text(m, 'name')} {number(by_power(power, value), 4)}"
    if any(end is not None for end in ends):
        low, high = (by_power(power, end) for end in ends)
        shown += f" ({interval(low, high, read.items(m, 'ends'))})"
    units = power_words(power, read.text(m, "units"))
    return f"{shown} {'× ' if power else ''}{units}".rstrip()


def _stand_ins(question: Mapping[str, Any]) -> Table | None:
    rows = [
        [
            read.text(s, "name"),
            read.text(s, "words"),
            _yes(s.get("stands"), "stands", "rejected"),
            probability(read.value(s, "p")),
        ]
        for s in read.records(question, "stand_ins")
    ]
    heads = [("Stand-in", False), ("In words", False), ("Outcome", False), ("p", True)]
    return make("Stand-ins: what moved with it and could be the real cause", heads, rows)


def _yes(flag: Any, yes: str, no: str) -> str:
    return yes if flag is True else no if flag is False else MISSING
