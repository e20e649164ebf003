"""The tables of constants, and of quantities of them, with their intervals side by side."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from decimal import Decimal
from typing import Any

from discrim.report import read
from discrim.report.numbers import MISSING, as_number, interval, listed, rounded
from discrim.report.table import Table, make

#: The four kinds of interval, in the order in which they are shown, with what each is.
KINDS = {
    "linearised": "from the curvature at the best fit, as most programs print it",
    "profile": "every other constant refitted",
    "reconciled": "errors of the conditions taken into account; verdicts rest on it",
    "guaranteed": "every value that hard bounds on all measurements allow",
}

#: the head of the last column: what a constant stands for, or the formula of a quantity
MEANING = "Meaning"
NOT_COMPUTED = "not computed"


def constants(
    ordered: Sequence[Any], level: str = "95 %", *, key: str = "constants"
) -> tuple[Table, ...]:
    """The constants of each candidate with their intervals, or its ``reported`` quantities."""
    out = []
    for c in ordered:
        rows: list[list[str]] = []
        said: list[tuple[str, dict[str, str]]] = []
        for k in read.records(c, key):
            found, ends = read.part(k, "intervals"), read.part(k, "interval_ends")
            notes = read.part(k, "interval_notes")
            value, error = read.value(k, "value"), read.value(k, "standard_error")
            power = power_of([value, *(v for kind in KINDS for v in read.numbers(found, kind))])
            v, u = rounded(by_power(power, value), by_power(power, error))
            row = [
                read.text(k, "name"),
                v + (" (bound)" if k.get("at_bound") is True else ""),
                u,
                power_words(power, read.text(k, "units")),
            ]
            row += [
                _interval(kind, found.get(kind), ends.get(kind), power, read.text(notes, kind))
                for kind in KINDS
            ]
            row.append(_meaning(k))
            rows.append(row)
            said.append((row[0], {kind: read.text(notes, kind) for kind in KINDS if kind in notes}))
        heads = [
            ("Constant" if key == "constants" else "Quantity", False),
            ("Value", True),
            ("Standard error", True),
            ("Units", False),
            *((kind.capitalize(), True) for kind in KINDS),
            (MEANING, False),
        ]
        note = " ".join([f"Intervals at {level}.", *_remarks(said)])
        gone = [i for i in range(len(heads)) if all(row[i] == NOT_COMPUTED for row in rows)]
        heads = [head for i, head in enumerate(heads) if i not in gone]
        rows = [[cell for i, cell in enumerate(row) if i not in gone] for row in rows]
        table = make(read.text(c, "name"), heads, rows, note=note, marks=[])
        if table:
            out.append(table)
    return tuple(out)


def _remarks(said: Sequence[tuple[str, dict[str, str]]]) -> list[str]:
    """What is to be said of intervals, each remark once with what it is about."""
    about: dict[tuple[str, str], list[str]] = {}  # remark and kind -> names
    for name, notes in said:
        for kind, words in notes.items():
            about.setdefault((words, kind), []).append(name)
    merged: dict[tuple[str, tuple[str, ...]], list[str]] = {}
    for (words, kind), names in about.items():
        merged.setdefault((words, tuple(names)), []).append(kind)
    out = []
    for (words, of), kinds in merged.items():
        which = "" if len(of) == len(said) else f" ({listed(list(of))})"
        out.append(f"{listed(kinds).capitalize()}{which}: {words}.")
    return out


def _meaning(k: Mapping[str, Any]) -> str:
    """What a constant stands for; of a quantity its formula, its conditions, and why it has no value."""
    at = read.part(k, "at")
    where = ", ".join(f"{read.clean(name)} = {read.text(at, name)}" for name in at)
    formula = read.text(k, "formula")
    words = [read.text(k, "meaning"), formula + (f" at {where}" if where else "")]
    return "; ".join(w for w in [*words, read.text(k, "note"), read.text(k, "reason")] if w)


def _interval(kind: str, ends: Any, how: Any, power: int, note: str = "") -> str:
    if not isinstance(ends, list | tuple) or len(ends) != 2:
        return MISSING
    if all(end is None for end in ends):
        for word in (NOT_COMPUTED, "empty"):
            if note.startswith(word):
                return word
    low, high = (by_power(power, as_number(end)) for end in ends)
    # hard bounds on all errors are exact and shown as such; those made from standard deviations not
    return interval(low, high, how, outward=kind == "guaranteed", digits=None if note else 6)


def power_of(values: Sequence[float | None]) -> int:
    """The power of ten that is taken out of one constant and its intervals, 0 for none.

    That of its value; of the largest end where the value is next to nothing beside it.
    """
    known = [abs(v) for v in values if v]
    if not known:
        return 0
    first = abs(values[0] or 0.0)
    power = math.floor(math.log10(first if first > 1e-6 * max(known) else max(known)))
    # ends below 0.001 would be written with a power of their own beside a value without one
    small = any(1e-4 * first < x < 1e-3 for x in known)
    return 0 if (-2 <= power < 5 and not small) or abs(power) > 290 else power


def by_power(power: int, x: float | None) -> float | None:
    """``x`` in units of that power; through decimal digits, so that 3e-6 becomes 3 exactly."""
    return x if x is None or not power else float(Decimal(repr(x)).scaleb(-power))


def power_words(power: int, units: str) -> str:
    if not power:
        return units
    raised = str(power).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))
    return f"10{raised} {'' if units == '1' else units}".strip()
