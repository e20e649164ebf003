"""The tables of the report as data: heads, rows of text, and which columns hold numbers."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from decimal import Decimal
from typing import Any

from discrim.report import read
from discrim.report.numbers import (
    MISSING,
    as_number,
    as_read,
    factor,
    interval,
    number,
    percent,
    probability,
    rounded,
    tiny_is_zero,
)

#: The four kinds of interval, in the order in which they are shown, with what each is.
KINDS = {
    "linearised": "from the curvature at the best fit, as most programs print it",
    "profile": "every other constant refitted",
    "reconciled": "errors of the conditions taken into account; verdicts rest on it",
    "guaranteed": "every value that hard bounds on all measurements allow",
}


@dataclass(frozen=True, slots=True)
class Table:
    """A table as data.

    ``numeric`` marks the columns that are set flush right; ``marks`` one word a row (an outcome)
    for its look, or "".
    """

    title: str
    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numeric: tuple[bool, ...]
    note: str = ""
    marks: tuple[str, ...] = ()

    def trimmed(self) -> Table:
        """Without the columns in which no row has anything."""
        keep = [
            i
            for i in range(len(self.heads))
            if i == 0 or any(row[i] not in ("", MISSING) for row in self.rows)
        ]
        return replace(
            self,
            heads=tuple(self.heads[i] for i in keep),
            rows=tuple(tuple(row[i] for i in keep) for row in self.rows),
            numeric=tuple(self.numeric[i] for i in keep),
        )


def make(
    title: str,
    heads: Sequence[tuple[str, bool]],
    rows: Sequence[Sequence[str]],
    *,
    note: str = "",
    marks: Sequence[str] = (),
) -> Table | None:
    """A trimmed table, or None when it has no rows."""
    if not rows:
        return None
    return Table(
        title=title,
        heads=tuple(h for h, _ in heads),
        rows=tuple(tuple(row) for row in rows),
        numeric=tuple(flag for _, flag in heads),
        note=note,
        marks=tuple(marks),
    ).trimmed()


def outcome(candidate: Any) -> str:
    """``stands``, ``rejected``, or why there is neither."""
    found = read.text(candidate, "outcome")
    if found:
        return found
    status = read.text(candidate, "status")
    return "not fitted" if status and status != "converged" else MISSING


def equation(law: str) -> str:
    """A law with its left side, which the document leaves out."""
    return f"r = {law}" if law and "=" not in law else law


def candidates(ordered: Sequence[Any]) -> Table | None:
    """What became of each candidate, and its law."""
    rows = []
    for c in ordered:
        near = read.texts(c, "inseparable_from")
        special = read.text(c, "no_better_than")
        remark = f"inseparable from {'; '.join(near)}" if near else ""
        if special:
            remark += f"{'; ' if remark else ''}no better than {special}"
        rows.append([read.text(c, "name"), outcome(c), remark, equation(read.text(c, "law"))])
    heads = [("Candidate", False), ("Outcome", False), ("Remark", False), ("Law", False)]
    return make("Candidates", heads, rows, marks=[outcome(c) for c in ordered])


def criteria(ordered: Sequence[Any]) -> Table | None:
    """How well each candidate fits, and the criteria that rank them."""
    rows = [
        [
            read.text(c, "name"),
            outcome(c),
            read.text(c, "n_constants"),
            number(tiny_is_zero(read.value(c, "objective"))),
            number(_rss(c)),
            read.text(c, "degrees_of_freedom"),
            probability(read.value(c, "fit_p")),
            probability(read.value(read.part(c, "lack_of_fit"), "p")),
            _fixed(read.value(c, "aic")),
            _fixed(read.value(c, "aicc")),
            _fixed(read.value(c, "bic")),
            _weight(read.value(c, "weight")) + (", shared" if shared(c) else ""),
        ]
        for c in ordered
    ]
    heads = [
        ("Candidate", False),
        ("Outcome", False),
        ("Constants", True),
        ("Q", True),
        ("RSS", True),
        ("Degrees of freedom", True),
        ("p of Q", True),
        ("p of lack of fit", True),
        ("AIC", True),
        ("AICc", True),
        ("BIC", True),
        ("Weight", True),
    ]
    return make(
        "Fit and criteria",
        heads,
        rows,
        note="Q is the weighted sum of squares with the errors of the conditions in it. AIC, AICc, "
        "BIC and weights rank candidates on the same runs; they never reject one."
        + (
            " Candidates with one and the same law are weighed once: the weight is that of the law, and "
            "“shared” between them."
            if any(shared(c) for c in ordered)
            else ""
        ),
        marks=[outcome(c) for c in ordered],
    )


def shared(c: Any) -> bool:
    """Whether the weight of a candidate is that of a law that others have too."""
    return bool(read.texts(c, "weight_shared_with"))


def _rss(c: Any) -> float | None:
    """The residual sum of squares; it has units, so Q tells when only noise is left of it."""
    q = read.value(c, "objective")
    return 0.0 if q is not None and tiny_is_zero(q) == 0 else read.value(c, "rss")


def columns(runs: Mapping[str, Any]) -> Table | None:
    rows = []
    for c in read.records(runs, "columns"):
        values = [v for v in read.numbers(c, "values") if v is not None]
        spread = f"{as_read(min(values))} to {as_read(max(values))}" if values else ""
        if values and min(values) == max(values):
            spread = f"{as_read(values[0])}, the same in all runs"
        if not values:
            spread = ", ".join(sorted(set(read.texts(c, "labels")))[:6])
        declared = c.get("declared", True) is not False
        rows.append(
            [
                read.text(c, "name"),
                read.text(c, "is") if declared else "not declared",
                spread,
                read.text(c, "units"),
                read.text(c, "error"),
                read.text(c, "origin"),
                read.text(c, "basis") if declared else "",
            ]
        )
    heads = [
        ("Column", False),
        ("Is", False),
        ("Range", False),
        ("Units", False),
        ("Error", False),
        ("Origin", False),
        ("Basis", False),
    ]
    return make(
        "Columns",
        heads,
        rows,
        note="Errors are standard deviations. Origin: set (weighed, pipetted) or measured. Basis: "
        "where the size of the error comes from.",
    )


def runs(record: Mapping[str, Any]) -> Table | None:
    labels = [read.clean(x) for x in read.items(record, "labels")]
    kept = read.items(record, "kept")
    shown = [c for c in read.records(record, "columns") if read.text(c, "is") != "run"]
    rows = []
    for i, label in enumerate(labels):
        row = [label]
        for c in shown:
            values, words = read.items(c, "values"), read.items(c, "labels")
            # as the table has it where that is known: trailing zeros say how well it was read
            cells = read.items(c, "cells")
            cell = read.clean(cells[i]) if i < len(cells) else ""
            if not cell:
                cell = as_read(as_number(values[i])) if i < len(values) else MISSING
            if cell == MISSING and i < len(words):
                cell = read.clean(words[i])
            row.append(cell)
        row.append("excluded" if i < len(kept) and kept[i] is False else "")
        rows.append(row)
    heads = [("Run", False)]
    for c in shown:
        units = read.text(c, "units")
        name = read.text(c, "name") + (f" [{units}]" if units not in ("", "1") else "")
        heads.append((name, any(v is not None for v in read.numbers(c, "values"))))
    heads.append(("Status", False))
    return make(
        "Runs", heads, rows, marks=[r[-1] for r in rows] if any(r[-1] for r in rows) else ()
    )


def conditioning(ordered: Sequence[Any]) -> tuple[Table, ...]:
    """Condition numbers of all candidates, then the variance proportions of the weak ones."""
    rows = [
        [
            read.text(c, "name"),
            factor(read.value(c, "condition_number"))
            if read.value(c, "condition_number") is not None
            else "infinite",
            number(read.value(c, "digits_lost"), 2)
            if read.value(c, "digits_lost") is not None
            else "all",
        ]
        for c in ordered
        if read.value(c, "condition_number") is not None or read.numbers(c, "condition_indices")
    ]
    heads = [
        ("Candidate", False),
        ("Condition number", True),
        ("Digits lost", True),
    ]
    first = make(
        "Conditioning of the runs",
        heads,
        rows,
        note="Sensitivities weighted by the stated errors, columns of unit length. Digits lost is "
        "how many of the digits of the data never reach the constants.",
    )
    out = [first] if first else []
    for c in ordered:
        table = _proportions(c)
        if table:
            out.append(table)
    return tuple(out)


def _proportions(c: Any) -> Table | None:
    indices = read.numbers(c, "condition_indices")
    shares = [row for row in read.items(c, "variance_proportions") if isinstance(row, list | tuple)]
    names = [read.text(k, "name") for k in read.records(c, "constants")] or read.texts(c, "columns")
    # Belsley, Kuh & Welsch (1980): an index above 30 with two proportions above 0.5 is a
    # dependence that harms; smaller indices need no table.
    if len(shares) != len(indices) or max((i or 0 for i in indices), default=0) < 30:
        return None
    if any(len(row) != len(names) for row in shares):
        return None
    rows = [
        [factor(index), *(_fixed(as_number(x), 2) for x in row)]
        for index, row in zip(indices, shares, strict=True)
    ]
    return make(
        f"Variance proportions, {read.text(c, 'name')}",
        [("Condition index", True), *((n, True) for n in names)],
        rows,
        note="Share of the variance of each constant that comes from each direction; two large "
        "shares in a row with a large index trade off against each other.",
    )


def comparisons(found: Sequence[Any]) -> Table | None:
    rows = []
    for c in found:
        df = [read.clean(x) for x in read.items(c, "df")]
        if c.get("nested") is True:
            how = "nested, on the edge" if c.get("edge") is True else "nested, inside"
        else:
            how = "not nested" if c.get("nested") is False else ""
        test = number(read.value(c, "F"), 3) + (f" ({', '.join(df)})" if df else "")
        rows.append(
            [
                read.text(c, "smaller"),
                read.text(c, "larger"),
                read.text(c, "restriction"),
                how,
                test,
                probability(read.value(c, "p_one_sided") or read.value(c, "p")),
                probability(read.value(c, "p_reconciled")),
                _bootstrap(c),
                _brief(read.text(c, "p_note")),
            ]
        )
    heads = [
        ("Smaller law", False),
        ("Larger law", False),
        ("What is set", False),
        ("Relation", False),
        ("F (degrees of freedom)", True),
        ("p of F", True),
        ("p reconciled", True),
        ("p bootstrap", True),
        ("Remark", False),
    ]
    return make(
        "Comparisons of laws",
        heads,
        rows,
        note="F is the extra sum of squares and takes the conditions as exact; on the edge with one "
        "constant its p is one-sided. Verdicts rest on the reconciled test.",
    )


def _bootstrap(c: Any) -> str:
    """The p-value from drawn tables with its standard error."""
    made = read.part(c, "bootstrap")
    p, error = read.value(c, "p_bootstrap"), read.value(made, "error")
    return probability(p) + (f" ± {number(error, 1)}" if p is not None and error else "")


def _brief(remark: str) -> str:
    """Remarks that the note below the table makes for all rows are not repeated in each."""
    return "" if remark.startswith("on the edge") else remark


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
    """``k_1 / k_2 2.59 (2.40 to 2.80)``."""
    ends = [read.value(m, "value"), *read.numbers(m, "interval")]
    shown, units = interval(ends[1], ends[2], read.items(m, "ends")), read.text(m, "units")
    return f"{read.text(m, 'name')} {number(ends[0], 4)} ({shown})" + (f" {units}" if units else "")


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


def _fixed(x: float | None, places: int = 1) -> str:
    if x is None:
        return MISSING
    return number(x) if abs(x) >= 1e6 else f"{x:.{places}f}"


def _weight(x: float | None) -> str:
    if x is None:
        return MISSING
    return "< 0.001" if x < 0.001 else "> 0.999" if 0.999 < x < 1 else f"{x:.3f}"
