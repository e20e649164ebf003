"""One table of the study file with its place: typed access, and complaints that point."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from discrim.errors import DiscrimError, Place, nearest
from discrim.study.locate import Locator
from discrim.study.locate import Path as KeyPath

MAX_TEXT = 5_000  # of any text but a law, which has its own limit
_LAWS = ("law", "formula")
_HOW = {
    str: 'Write {} = "...".',
    bool: "Write {} = true.",
    dict: "Write [{1}] on a line of its own, or {0} = {{ ... }}.",
    list: "Write {} = [...].",
}
_WORDS = {str: "a text in quotes", bool: "true or false", dict: "a table", list: "a list"}


@dataclass(frozen=True, slots=True)
class Node:
    """A TOML table: ``data`` at ``path`` of the document, called ``what`` in messages."""

    data: Mapping[str, Any]
    path: KeyPath
    doc: Locator
    what: str

    def place(self, *rest: str | int, key: bool = False) -> Place:
        return self.doc.place((*self.path, *rest), key=key, what=self.what)

    def error(self, says: str, do: str = "", *rest: str | int, key: bool = False) -> DiscrimError:
        return DiscrimError(says, place=self.place(*rest, key=key), do=do)

    def check_keys(self, known: Iterable[str], not_yet: Iterable[str] = ()) -> None:
        """Unknown keys are errors that name the nearest known key."""
        names, later = list(known), list(not_yet)
        for key in self.data:
            if key in later:
                raise self.error(
                    f'"{key}" is not yet supported', "Take it out of the study.", key, key=True
                )
            if key not in names:
                hint = nearest(key, names + later)
                raise self.error(
                    f'unknown key "{key}"',
                    f"{hint} Known here: {', '.join(names)}.".lstrip(),
                    key,
                    key=True,
                )

    def _typed(self, key: str, wanted: type) -> Any:
        value = self.data[key]
        if not isinstance(value, wanted):
            parts = [part for part in (*self.path, key) if isinstance(part, str)]
            do = _HOW[wanted].format(key, ".".join(parts))
            raise self.error(f'"{key}" must be {_WORDS[wanted]}', do, key)
        if isinstance(value, str) and len(value) > MAX_TEXT and key not in _LAWS:
            raise self.error(
                f'"{key}" has {len(value):,} characters', f"At most {MAX_TEXT:,} are read.", key
            )
        return value

    def text(self, key: str, default: str = "") -> str:
        """A text; ``default`` where the key is missing."""
        return self._typed(key, str) if key in self.data else default

    def needed(self, key: str, do: str = "") -> str:
        """A text that must be there and not be empty."""
        if key not in self.data or not self._typed(key, str).strip():
            state = "is empty" if key in self.data else "is missing"
            raise self.error(
                f'"{key}" {state}', do or f'Write a text in quotes: {key} = "...".', key
            )
        return self._typed(key, str)

    def flag(self, key: str) -> bool:
        return bool(self._typed(key, bool)) if key in self.data else False

    def number(self, key: str, do: str = "Write it without quotes and without a unit.") -> float:
        value = self.data[key]
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.error(f'"{key}" must be a number', do, key)
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            raise self.error(f'"{key}" must be a finite number', do, key)
        return number

    def quantity_text(self, key: str) -> str:
        """A quantity as text; a TOML number counts as one without a unit."""
        if isinstance(self.data[key], str):
            return self.data[key]
        return repr(self.number(key)) if isinstance(self.data[key], float) else self._whole(key)

    def _whole(self, key: str) -> str:
        number = self.number(key)
        return str(int(number)) if number == int(number) else repr(number)

    def texts(self, key: str) -> tuple[str, ...]:
        """A list of texts; a single text counts as a list of one."""
        value = self.data.get(key, [])
        if isinstance(value, str):
            return (value,)
        if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
            raise self.error(
                f'"{key}" must be a text or a list of texts', f'Write {key} = ["...", "..."].', key
            )
        return tuple(value)

    def table(self, key: str, what: str = "") -> Node:
        """A table; an empty one where the key is missing."""
        data = self._typed(key, dict) if key in self.data else {}
        return Node(data, (*self.path, key), self.doc, what or self.what)

    def tables(self, key: str, what: str) -> list[Node]:
        """The elements of ``[[key]]``."""
        value = self.data.get(key, [])
        if not isinstance(value, list) or not all(isinstance(v, dict) for v in value):
            raise self.error(
                f'"{key}" must be written [[{key}]]',
                f"Head each {what} with a line [[{key}]].",
                key,
                key=True,
            )
        return [
            Node(part, (*self.path, key, i), self.doc, f"{what} {i + 1}")
            for i, part in enumerate(value)
        ]
