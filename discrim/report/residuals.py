"""What the residuals of each candidate show, as a table."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from discrim.report import read
from discrim.report.numbers import MISSING, number, probability
from discrim.report.table import Table, make
from discrim.report.tables import outcome

NOTE = (
    "p is that of so much by chance. Follows: the column that the residuals follow most, p for all "
    "columns together (Holm). Order, prediction: whether residuals of one sign come in long rows, in "
    "the order of the runs and of the predicted rates. Scatter: whether it is even. Shape: whether "
    "errors look normal. Leverage: how much of a run's reading the fit takes up, 1 if nothing else "
    "checks it. Cook's distance: how far the constants move without the run, 1 is far. The references "
    "allow for the constants that were fitted."
)


def table(ordered: Sequence[Any]) -> Table | None:
    """One row a candidate; None where no candidate left residuals to look at."""
    rows, marks = [], []
    for c in ordered:
        found = read.part(c, "adequacy")
        if not found:
            continue
        signs = read.part(found, "runs_of_signs")
        rows.append(
            [
                read.text(c, "name"),
                *_follows(found),
                _p(signs, "in_order"),
                _p(signs, "by_prediction"),
                _p(found, "equal_variance"),
                _p(found, "normality"),
                *_farthest(found),
                _worst(found, "leverage"),
                _worst(found, "cooks_distance"),
            ]
        )
        marks.append(outcome(c))
    heads = [
        ("Candidate", False),
        ("Follows", False),
        ("p, columns", True),
        ("p, order", True),
        ("p, prediction", True),
        ("p, scatter", True),
        ("p, shape", True),
        ("Farthest run", False),
        ("p, farthest", True),
        ("Highest leverage", False),
        ("Largest Cook's distance", False),
    ]
    return make("Residuals", heads, rows, note=NOTE, marks=marks)


def _follows(found: Any) -> tuple[str, str]:
    trends = [t for t in read.records(found, "trends") if read.value(t, "p") is not None]
    if not trends:
        return MISSING, MISSING
    first = min(trends, key=lambda t: read.value(t, "p") or 0.0)
    together = read.value(first, "p_all")
    slope = read.text(first, "slope") if together is not None and together < 0.05 else ""
    names = ", ".join(read.texts(first, "columns"))
    return (
        f"{names} ({slope})" if slope else names,
        probability(together),
    )


def _p(record: Any, key: str) -> str:
    return probability(read.value(read.part(record, key), "p"))


def _farthest(found: Any) -> tuple[str, str]:
    return read.text(found, "farthest_run", MISSING), probability(read.value(found, "p_farthest"))


def _worst(found: Any, key: str) -> str:
    runs, values = read.items(found, "runs"), read.numbers(found, key)
    have = [(v, i) for i, v in enumerate(values) if v is not None and i < len(runs)]
    if not have:
        return MISSING
    value, i = max(have)
    return f"{number(value, 2)} (run {read.clean(runs[i])})"
