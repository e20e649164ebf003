"""The tables of candidates, criteria, columns, runs, conditioning and comparisons."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from discrim.report import read
from discrim.report.numbers import (
    MISSING,
    as_number,
    as_read,
    factor,
    listed,
    number,
    probability,
    tiny_is_zero,
)
from discrim.report.table import Table, make

#: columns that only name or order runs, and have no error
LABELS = ("run", "run order", "group")


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
                _error(c),
                read.text(c, "origin"),
                read.text(c, "basis") if declared and read.text(c, "is") not in LABELS else "",
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


def _error(c: Any) -> str:
    """The stated error; of a column that was worked out from others, that it carries theirs."""
    own, formula = read.text(c, "error"), read.text(c, "computed_from")
    if not formula:
        return own
    others = listed(read.texts(c, "carries_errors_of"))
    carried = f"that of {others} in {formula}" if others else f"none, from {formula}"
    return f"{carried}; and {own}" if own and own != "exact" else carried


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
    rows, remarks = [], []
    for c in found:
        df = [read.clean(x) for x in read.items(c, "df")]
        if c.get("nested") is True:
            how = read.text(c, "restriction") + (" (edge)" if c.get("edge") is True else "")
        else:
            how = "not nested" if c.get("nested") is False else read.text(c, "restriction")
        test = number(tiny_is_zero(read.value(c, "F")), 3) + (f" ({', '.join(df)})" if df else "")
        smaller, larger = read.text(c, "smaller"), read.text(c, "larger")
        p_of_f = read.value(c, "p_one_sided")
        rows.append(
            [
                smaller,
                larger,
                how.strip(),
                test,
                probability(read.value(c, "p") if p_of_f is None else p_of_f),
                probability(read.value(c, "p_reconciled")),
                _bootstrap(c),
            ]
        )
        remark = _brief(read.text(c, "p_note"))
        remarks += [f"“{smaller}” in “{larger}”: {remark}."] if remark else []
    heads = [
        ("Smaller law", False),
        ("Larger law", False),
        ("What is set", False),
        ("F (degrees of freedom)", True),
        ("p of F", True),
        ("p reconciled", True),
        ("p bootstrap", True),
    ]
    note = (
        "F is the extra sum of squares and takes the conditions as exact. Edge: the value set is the "
        "least that the constant can have; with one constant there the p of F is one-sided. Verdicts "
        "rest on the reconciled test."
    )
    return make("Comparisons of laws", heads, rows, note=" ".join([note, *remarks]))


def _bootstrap(c: Any) -> str:
    """The p-value from drawn tables with its standard error."""
    made = read.part(c, "bootstrap")
    p, error = read.value(c, "p_bootstrap"), read.value(made, "error")
    return probability(p) + (f" ± {number(error, 1)}" if p is not None and error else "")


def _brief(remark: str) -> str:
    """Remarks that the note below the table makes for all rows are not repeated in each."""
    return "" if remark.startswith("on the edge") else remark


def _fixed(x: float | None, places: int = 1) -> str:
    if x is None:
        return MISSING
    return number(x) if abs(x) >= 1e6 else f"{x:.{places}f}"


def _weight(x: float | None) -> str:
    if x is None:
        return MISSING
    return "< 0.001" if x < 0.001 else "> 0.999" if 0.999 < x < 1 else f"{x:.3f}"
