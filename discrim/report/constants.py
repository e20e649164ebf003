"""The tables of constants, and of quantities of them, with their intervals side by side."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from decimal import Decimal
from typing import Any

from discrim.report import read
from discrim.report.numbers import MISSING, as_number, interval, rounded
from discrim.report.table import Table, make

#: The four kinds of interval, in the order in which they are shown, with what each is.
KINDS = {
    "linearised": "from the curvature at the best fit, as most programs print it",
    "profile": "every other constant refitted",
    "reconciled": "errors of the conditions taken into account; verdicts rest on it",
    "guaranteed": "every value that hard bounds on all measurements allow",
}


def constants(
    ordered: Sequence[Any], level: str = "95 %", *, key: str = "constants"
) -> tuple[Table, ...]:
    """The constants of each candidate with their intervals, or its ``reported`` quantities."""
    out = []
    for c in ordered:
        rows = []
        for k in read.records(c, key):
            found, ends = read.part(k, "intervals"), read.part(k, "interval_ends")
            notes = read.part(k, "interval_notes")
            value, error = read.value(k, "value"), read.value(k, "standard_error")
            power = _power([value, *(v for kind in KINDS for v in read.numbers(found, kind))])
            v, u = rounded(_by(power, value), _by(power, error))
            row = [
                read.text(k, "name"),
                v + (" (bound)" if k.get("at_bound") is True else ""),
                u,
                _power_words(power, read.text(k, "units")),
            ]
            row += [
                _interval(kind, found.get(kind), ends.get(kind), power, read.text(notes, kind))
                for kind in KINDS
            ]
            remarks = [f"{kind}: {read.text(notes, kind)}" for kind in KINDS if kind in notes]
            row.append("; ".join([w for w in [_meaning(k), *remarks] if w]))
            rows.append(row)
        heads = [
            ("Constant" if key == "constants" else "Quantity", False),
            ("Value", True),
            ("Standard error", True),
            ("Units", False),
            *((kind.capitalize(), True) for kind in KINDS),
            ("Remark", False),
        ]
        table = make(read.text(c, "name"), heads, rows, note=f"Intervals at {level}.", marks=[])
        if table:
            out.append(table)
    return tuple(out)


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
        for word in ("not computed", "empty"):
            if note.startswith(word):
                return word
    low, high = (_by(power, as_number(end)) for end in ends)
    # hard bounds on all errors are exact and shown as such; those made from standard deviations not
    return interval(low, high, how, outward=kind == "guaranteed", digits=None if note else 6)


def _power(values: Sequence[float | None]) -> int:
    """The power of ten that is taken out of one constant and its intervals, 0 for none.

    That of its value; of the largest end where the value is next to nothing beside it.
    """
    known = [abs(v) for v in values if v]
    if not known:
        return 0
    first = abs(values[0] or 0.0)
    power = math.floor(math.log10(first if first > 1e-6 * max(known) else max(known)))
    return 0 if -3 <= power < 5 or abs(power) > 290 else power


def _by(power: int, x: float | None) -> float | None:
    """``x`` in units of that power; through decimal digits, so that 3e-6 becomes 3 exactly."""
    return x if x is None or not power else float(Decimal(repr(x)).scaleb(-power))


def _power_words(power: int, units: str) -> str:
    if not power:
        return units
    raised = str(power).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))
    return f"10{raised} {'' if units == '1' else units}".strip()
