"""Reading the saved document without trusting it: a missing or odd entry is an empty one.

The document comes from ``evidence.json``, which people may edit, shorten or write with an older
version, so every reader below gives a value of the right kind and none raises.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from discrim.report.numbers import as_number

Document = Mapping[str, Any]


def text(record: Any, key: str, default: str = "") -> str:
    """The entry as one printable line; numbers and truth values as they would be written."""
    value = record.get(key) if isinstance(record, Mapping) else None
    return clean(value) or default


def clean(value: Any) -> str:
    """Any scalar as printable text; control characters (a terminal would obey) become spaces."""
    if value is None or isinstance(value, Mapping | list | tuple):
        return ""
    words = value if isinstance(value, str) else str(value)
    return "".join(ch if ch.isprintable() else " " for ch in words).strip()


def block(record: Any, key: str) -> str:
    """The entry as printable lines, line breaks kept."""
    value = record.get(key) if isinstance(record, Mapping) else None
    return "\n".join(clean(line) for line in value.split("\n")) if isinstance(value, str) else ""


def texts(record: Any, key: str) -> list[str]:
    """The entry as a list of non-empty lines; a single line counts as a list of one."""
    value = record.get(key) if isinstance(record, Mapping) else None
    items = value if isinstance(value, list | tuple) else [value]
    return [line for line in (clean(item) for item in items) if line]


def records(record: Any, key: str) -> list[Mapping[str, Any]]:
    """The entry as a list of records; what is not a record is left out."""
    value = record.get(key) if isinstance(record, Mapping) else None
    items = value if isinstance(value, list | tuple) else []
    return [item for item in items if isinstance(item, Mapping)]


def part(record: Any, key: str) -> Mapping[str, Any]:
    """The entry as a record, empty if it is none."""
    value = record.get(key) if isinstance(record, Mapping) else None
    return value if isinstance(value, Mapping) else {}


def items(record: Any, key: str) -> list[Any]:
    """The entry as a list, empty if it is none."""
    value = record.get(key) if isinstance(record, Mapping) else None
    return list(value) if isinstance(value, list | tuple) else []


def value(record: Any, key: str) -> float | None:
    """The entry as a finite number, else None."""
    return as_number(record.get(key)) if isinstance(record, Mapping) else None


def numbers(record: Any, key: str) -> list[float | None]:
    """The entry as a list of numbers; None where an item is no finite number."""
    return [as_number(item) for item in items(record, key)]


def is_standing(candidate: Any) -> bool:
    return text(candidate, "outcome") == "stands"


def candidates_first_standing(document: Any) -> list[Mapping[str, Any]]:
    """Candidates in the order in which a reader wants them: standing first, then by weight."""
    found = records(document, "candidates")
    rank = {"stands": 0, "": 1, "rejected": 2}
    return sorted(
        found,
        key=lambda c: (rank.get(text(c, "outcome"), 1), -(value(c, "weight") or 0.0)),
    )
