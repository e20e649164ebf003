"""Wrong input: what it says, and where it points.

Three kinds of trouble are kept apart everywhere in the package. Wrong input raises
:class:`DiscrimError`, with the place, what was found, what is allowed and what to do. A numerical
misfortune is a status in a record. A property of the data is a finding in the results.
"""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable
from dataclasses import dataclass

MAX_SAYS, MAX_DO = 400, 2_000  # characters of a message; ours are shorter, names in them may not be


@dataclass(frozen=True, slots=True)
class Place:
    """Where in the user's files something stands.

    Attributes
    ----------
    file : name of the file as the user gave it ("" when the text did not come from a file)
    line : line number, from 1; 0 when not known
    column : first character of the span on that line, from 1; 0 when not known
    length : number of characters to underline
    text : the whole line (or the text that was parsed), for display
    what : the thing in words, for example ``mechanism "dual site", step ads_A``
    """

    file: str = ""
    line: int = 0
    column: int = 0
    length: int = 1
    text: str = ""
    what: str = ""

    def __str__(self) -> str:
        head = self.file
        if self.line:
            head += f", line {self.line}" if head else f"line {self.line}"
        if self.what:
            head += f", {self.what}" if head else self.what
        return head


class DiscrimError(Exception):
    """The user's input is wrong. The message is complete: place, found, allowed, what to do.

    Parameters
    ----------
    says : what is wrong, one short clause
    place : where; its text line is shown with the span underlined
    do : what to do about it, a full sentence or two
    """

    def __init__(self, says: str, *, place: Place | None = None, do: str = "") -> None:
        self.says = says
        self.place = place
        self.do = do
        super().__init__(self.message())

    def message(self) -> str:
        lines = []
        head = str(self.place) if self.place is not None else ""
        says = _short(self.says, MAX_SAYS)
        lines.append(_printable(f"{_short(head, MAX_SAYS)}: {says}" if head else says))
        if self.place is not None and self.place.text:
            text, column = _clip(self.place.text, self.place.column)
            lines.append("    " + text)
            if column:
                width = max(1, min(self.place.length, len(text) - column + 1))
                lines.append("    " + " " * (column - 1) + "^" * width)
        if self.do:
            lines.append(_printable(_short(self.do, MAX_DO)))
        return "\n".join(lines)

    def at(self, place: Place) -> DiscrimError:
        """The same complaint, at a place that the raiser could not know."""
        return type(self)(self.says, place=place, do=self.do)


def _short(text: str, most: int) -> str:
    """The text with its middle left out where it is too long, as it is when it quotes a file."""
    return text if len(text) <= most else f"{text[: most * 2 // 3]} … {text[-most // 4 :]}"


def _printable(text: str) -> str:
    """Names come from files: what a terminal would obey, or a line break, becomes a space."""
    return "".join(ch if ch.isprintable() else " " for ch in text)


def _clip(text: str, column: int, width: int = 90) -> tuple[str, int]:
    """At most ``width`` characters of a line around ``column``, printable, tabs made single."""
    clean = _printable(text)
    if len(clean) <= width:
        return clean, column
    start = max(0, min(column - 1 - width // 3, len(clean) - width)) if column else 0
    cut = clean[start : start + width]
    lead = "… " if start else ""
    tail = " …" if start + width < len(clean) else ""
    return lead + cut + tail, (column - start + len(lead)) if column else 0


def nearest(word: str, known: Iterable[str]) -> str:
    """A hint such as ``did you mean "units"?``, or an empty string when nothing is near.

    A word that only looks like a known one (a Cyrillic letter, an accent as a character of its own)
    is told apart by the names of its characters.
    """
    names = list(known)
    if not all(map(str.isascii, (word, *names))):
        for name in names:
            if name != word and _as_seen(name) == _as_seen(word):
                return _differs(word, name)
    found = difflib.get_close_matches(word, names, n=1, cutoff=0.6)
    return f'Did you mean "{found[0]}"?' if found else ""


# Letters that look like Latin ones. From the shapes of the characters, no source.
_SAME_SHAPE = str.maketrans(
    "АВЕЅІЈКМНОРСТУХасеіјорѕухΑΒΕΖΗΙΚΜΝΟΡΤΥΧον−–‐",
    "ABESIJKMHOPCTYXaceijopsyxABEZHIKMNOPTYXov---",
)


def _as_seen(text: str) -> str:
    return unicodedata.normalize("NFKC", text).translate(_SAME_SHAPE)


def _differs(word: str, name: str) -> str:
    """Which characters of ``word`` only look like those of ``name``."""
    strange = [ch for ch in word if ch not in name] or [ch for ch in name if ch not in word]
    what = ", ".join(f"U+{ord(ch):04X} {unicodedata.name(ch, '')}".strip() for ch in strange[:3])
    return f'"{name}" looks the same but is written with other characters ({what}): type it again.'
