"""Where each key and value of a TOML text stands, so that every complaint can point at it.

The text has been accepted by tomllib before; this walk only finds positions and reads no values.
A path is a tuple of keys and, for lists and ``[[tables]]``, indices from 0.
"""

from __future__ import annotations

import bisect
from dataclasses import dataclass, field

from discrim.errors import Place

Path = tuple[str | int, ...]
Span = tuple[int, int]


@dataclass(slots=True)
class Locator:
    """Positions of a text; :meth:`place` turns a path into a :class:`Place`."""

    file: str
    text: str
    keys: dict[Path, Span] = field(default_factory=dict)
    values: dict[Path, Span] = field(default_factory=dict)
    _starts: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        self._starts = [0]
        at = self.text.find("\n")
        while at >= 0:
            self._starts.append(at + 1)
            at = self.text.find("\n", at + 1)
        _Walk(self.text, self.keys, self.values).run()

    def place(self, path: Path, *, key: bool = False, what: str = "") -> Place:
        """Of the value at ``path`` (the inside of a string), or of its key.

        Where the path itself is not in the text (a default, a missing key) the nearest table that
        holds it is pointed at.
        """
        spans = [self.keys, self.values] if key else [self.values, self.keys]
        while path:
            for known in spans:
                if path in known:
                    return self._place(*known[path], what)
            path = path[:-1]
        return Place(self.file, what=what)

    def _line_text(self, start: int) -> str:
        end = self.text.find("\n", start)
        return self.text[start : end if end >= 0 else len(self.text)].rstrip("\r")

    def _place(self, start: int, end: int, what: str) -> Place:
        number = bisect.bisect_right(self._starts, start)
        line_start = self._starts[number - 1]
        line = self._line_text(line_start)
        length = max(1, min(end, line_start + len(line)) - start)
        return Place(self.file, number, start - line_start + 1, length, line, what)


class _Walk:
    """One pass over a valid TOML text."""

    def __init__(self, text: str, keys: dict[Path, Span], values: dict[Path, Span]) -> None:
        self.text = text
        self.keys = keys
        self.values = values
        self.at = 0
        self.counts: dict[Path, int] = {}

    def run(self) -> None:
        table: Path = ()
        while self.skip_blank():
            if self.text.startswith("[[", self.at):
                self.at += 2
                path, span = self.key_path(())
                path = self.resolved(path[:-1]) + path[-1:]
                index = self.counts.get(path, -1) + 1
                self.counts[path] = index
                table = (*path, index)
                self.keys.setdefault(path, span)
                self.keys[table] = span
                self.at = self.text.find("]]", self.at) + 2
            elif self.text[self.at] == "[":
                self.at += 1
                path, span = self.key_path(())
                table = self.resolved(path)
                self.keys.setdefault(table, span)
                self.at = self.text.find("]", self.at) + 1
            else:
                self.pair(table)

    def resolved(self, path: Path) -> Path:
        """With the index of the current element put behind each list of tables."""
        out: Path = ()
        for part in path:
            out = (*out, part)
            if out in self.counts:
                out = (*out, self.counts[out])
        return out

    def skip_blank(self, commas: bool = False) -> bool:
        """To the next character that means something; False at the end."""
        text, n = self.text, len(self.text)
        while self.at < n:
            ch = text[self.at]
            if ch in " \t\r\n" or (commas and ch == ","):
                self.at += 1
            elif ch == "#":
                end = text.find("\n", self.at)
                self.at = end if end >= 0 else n
            else:
                return True
        return False

    def spaces(self) -> None:
        while self.at < len(self.text) and self.text[self.at] in " \t":
            self.at += 1

    def key_path(self, table: Path) -> tuple[Path, Span]:
        """A key, perhaps dotted, and the span of its last part."""
        parts: list[str] = []
        while True:
            self.spaces()
            start = self.at
            if self.text[self.at] in "\"'":
                inner = self.string()
                parts.append(self.unescaped(*inner))
            else:
                while self.text[self.at] not in " \t.=]":
                    self.at += 1
                parts.append(self.text[start : self.at])
            span = (start, self.at)
            self.spaces()
            if self.text[self.at] != ".":
                return (*table, *parts), span
            self.at += 1

    def unescaped(self, start: int, end: int) -> str:
        raw = self.text[start:end]
        if "\\" not in raw or self.text[start - 1] == "'":
            return raw
        import tomllib

        return next(iter(tomllib.loads(f'"{raw}" = 0')))

    def pair(self, table: Path) -> None:
        path, span = self.key_path(table)
        for length in range(len(table) + 1, len(path)):
            self.keys.setdefault(path[:length], span)
        self.keys[path] = span
        self.at = self.text.find("=", self.at) + 1
        self.value(path)

    def value(self, path: Path) -> None:
        self.spaces()
        start, first = self.at, self.text[self.at]
        if first in "\"'":
            self.values[path] = self.string()
        elif first == "[":
            self.at += 1
            index = 0
            while self.skip_blank(commas=True) and self.text[self.at] != "]":
                self.value((*path, index))
                index += 1
            self.at += 1
            self.values[path] = (start, self.at)
        elif first == "{":
            self.at += 1
            while self.skip_blank(commas=True) and self.text[self.at] != "}":
                self.pair(path)
            self.at += 1
            self.values[path] = (start, self.at)
        else:
            while self.at < len(self.text) and self.text[self.at] not in ",]}#\r\n":
                self.at += 1
            self.values[path] = (start, start + len(self.text[start : self.at].rstrip()))

    def string(self) -> Span:
        """Past a string; the span of what is inside its quotes."""
        text = self.text
        quote = text[self.at]
        mark = quote * 3 if text.startswith(quote * 3, self.at) else quote
        self.at += len(mark)
        start = self.at
        while True:
            if quote == '"' and text[self.at] == "\\":
                self.at += 2
            elif text.startswith(mark, self.at):
                # Up to two quotes may stand right before the closing three.
                while len(mark) == 3 and text.startswith(mark, self.at + 1):
                    self.at += 1
                end = self.at
                self.at += len(mark)
                return start, end
            else:
                self.at += 1
