"""Errors of several observed columns, where they were estimated, as a table."""

from __future__ import annotations

from discrim.report import read
from discrim.report.numbers import number
from discrim.report.read import Document
from discrim.report.table import Table, make


def table(document: Document) -> Table | None:
    """One row for each column whose error was estimated; None where none was among several."""
    records = [r for r in read.records(document, "responses") if read.value(r, "sd") is not None]
    if not records:
        return None
    names = [read.text(r, "column") for r in records]
    rows = []
    for record in records:
        correlation = read.numbers(record, "correlation")
        rows.append(
            [
                read.text(record, "column"),
                number(read.value(record, "sd"), 3),
                read.text(record, "units"),
                number(read.value(record, "df"), 3),
                *(number(x, 2) if x is not None else "" for x in correlation),
            ]
        )
    together = any(read.numbers(r, "correlation") for r in records)
    heads = [("Column", False), ("Standard deviation", True), ("Units", False)]
    heads.append(("Degrees of freedom", True))
    if together:
        heads += [(f"Correlation with {name}", True) for name in names]
    note = f"Estimated with “{read.text(records[0], 'candidate')}” and held for all candidates."
    enlarged = read.value(records[0], "enlarged")
    if enlarged is not None:
        note += (
            f" Tests and intervals use {number(enlarged, 3)} times the covariance, since it was estimated "
            "from few runs."
        )
    return make("Errors of the observed columns", heads, rows, note=note)
