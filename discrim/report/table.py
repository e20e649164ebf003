"""A table as data: heads, rows of text, and which columns hold numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from discrim.report.numbers import MISSING


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
