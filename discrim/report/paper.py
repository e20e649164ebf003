"""Plain lines for a terminal: wrapping, tables, emphasis, and what the stream can show."""

from __future__ import annotations

import os
import re
import textwrap
import unicodedata
from collections.abc import Mapping, Sequence
from typing import Any, TextIO

from discrim.report.table import Table
from discrim.report.wrapping import wrap

WIDTH = 80
NARROWEST = 14  # characters of the first column of a table, where names take several lines

_ASCII = {
    "–": "-", "—": "-", "−": "-", "“": '"', "”": '"', "‘": "'", "’": "'", "·": "*", "×": "x",
    "≥": ">=", "≤": "<=", "±": "+/-", "→": "->", "µ": "u", "μ": "u", "√": "sqrt", "…": "...",
    "⇌": "<=>", "∞": "inf", "≈": "~", "≠": "!=", "°": "deg ", "•": "*", "′": "'",
    "α": "alpha", "β": "beta", "γ": "gamma", "δ": "delta", "Δ": "Delta", "ε": "epsilon",
    "θ": "theta", "κ": "kappa", "λ": "lambda", "ν": "nu", "ρ": "rho", "σ": "sigma", "τ": "tau",
    "φ": "phi", "χ": "chi", "ψ": "psi", "ω": "omega", "Ω": "Omega",
}  # fmt: skip


# spaces at which no line ends: in p < 0.05, 5 %, 1.9 × 10⁻⁵
_TOGETHER = re.compile(
    r"(?<=\bp) (?=[<=>] )|(?<=[<=>]) (?=[\d.])|(?<=\d) (?=%)|(?<=[\d)]) (?=×)|(?<=×) (?=10)"
)
_RAISED = re.compile("[⁻⁺⁰¹²³⁴⁵⁶⁷⁸⁹]+")
_LOWERED = str.maketrans("⁻⁺⁰¹²³⁴⁵⁶⁷⁸⁹", "-+0123456789")


def to_ascii(text: str) -> str:
    """The text in plain characters: signs by their usual stand-ins, accents dropped, else ``?``."""
    out = _RAISED.sub(lambda m: "^" + m[0].translate(_LOWERED), text)
    out = "".join(_ASCII.get(ch, ch) for ch in out)
    out = unicodedata.normalize("NFKD", out)
    kept = "".join(ch for ch in out if not unicodedata.combining(ch))
    return kept.encode("ascii", "replace").decode("ascii")


class Paper:
    """Collects lines of at most ``width`` characters.

    Parameters
    ----------
    width : characters a line
    colour : whether emphasis is written as terminal codes; the words never depend on it
    """

    def __init__(self, *, width: int = WIDTH, colour: bool = False) -> None:
        self.width = max(40, width)
        self.colour = colour
        self.lines: list[str] = []

    def blank(self) -> None:
        if self.lines and self.lines[-1]:
            self.lines.append("")

    def say(self, text: str, *, indent: int = 0, hang: int | None = None) -> None:
        """A paragraph; its second and further lines are indented by ``hang``."""
        lines = textwrap.wrap(
            _TOGETHER.sub("\N{NO-BREAK SPACE}", text),
            self.width,
            initial_indent=" " * indent,
            subsequent_indent=" " * (indent if hang is None else hang),
            break_on_hyphens=False,
        )
        self.lines += [line.replace("\N{NO-BREAK SPACE}", " ") for line in lines]

    def formula(
        self, text: str, *, indent: int = 0, head: str = "", most: int = 0, rest: str = ""
    ) -> None:
        """A formula broken at its operators, on the line of ``head`` if it fits there.

        With ``most``, only that many lines, and how many follow with the words ``rest``.
        """
        room = self.width - indent
        if head and len(head) + len(text) > room:
            self.say(head.rstrip(), indent=indent)
            indent += 4
            room -= 4
        elif head:
            self.lines.append((" " * indent + head + text).rstrip())
            return
        lines = wrap(text, room).splitlines()
        if most and len(lines) > most + 1:
            left = len(lines) - most
            lines = [*lines[:most], f"    ... {left} more lines{rest}"]
        for line in lines:
            if len(line) <= room:
                self.lines.append(" " * indent + line)
            else:  # one long name
                self.say(line.strip(), indent=indent + len(line) - len(line.lstrip()))

    def bullets(self, lines: Sequence[str], *, indent: int = 2) -> None:
        for line in lines:
            self.say("- " + line, indent=indent, hang=indent + 2)

    def pairs(self, pairs: Sequence[tuple[str, str]], *, indent: int = 2) -> None:
        """``what   how much``, the second parts under one another."""
        if not pairs:
            return
        lead = min(max(len(a) for a, _ in pairs), self.width // 3) + 2
        for a, b in pairs:
            gap = " " * max(2, lead - len(a))
            self.say(a + gap + b, indent=indent, hang=indent + lead)

    def heading(self, text: str) -> None:
        self.blank()
        for line in textwrap.wrap(text, self.width):
            self.lines.append(self.strong(line))

    def ends(self, left: str, right: str) -> None:
        """Two texts at both ends of a line (on two lines when they do not fit)."""
        if len(left) + len(right) + 2 > self.width:
            self.say(left)
            self.lines.append(self.strong(right.rjust(self.width)))
        else:
            gap = " " * (self.width - len(left) - len(right))
            self.lines.append(self.strong(left) + gap + self.strong(right))

    def strong(self, text: str) -> str:
        return f"\x1b[1m{text}\x1b[0m" if self.colour else text

    def table(self, table: Table | None, *, indent: int = 2, drop: Sequence[str] = ()) -> None:
        """The table if it fits the width, else one block of pairs a row."""
        if table is None or not table.rows:
            return
        keep = [i for i, head in enumerate(table.heads) if head not in drop]
        heads = [table.heads[i] for i in keep]
        rows = [[row[i] for i in keep] for row in table.rows]
        numeric = [table.numeric[i] for i in keep]
        split = [_two_lines(head) for head in heads]
        widths = [
            max(*(len(part) for part in split[i]), *(len(row[i]) for row in rows))
            for i in range(len(keep))
        ]
        over = indent + sum(widths) + 2 * (len(widths) - 1) - self.width
        if over > 0 and widths[0] - over < NARROWEST:
            self._blocks(heads, rows, indent)
            return
        if over > 0:  # the names take more lines
            widths[0] -= over
        for line in (0, 1):
            cells = [split[i][line] for i in range(len(keep))]
            if any(cells):
                self._row(cells, widths, numeric, indent)
        for row in rows:
            first, *more = textwrap.wrap(row[0], widths[0]) or [""]
            self._row([first, *row[1:]], widths, numeric, indent)
            self.lines += [" " * (indent + 2) + line for line in more]

    def turned(self, table: Table, *, indent: int = 2, drop: Sequence[str] = ()) -> None:
        """The table with its rows as columns, as many side by side as fit the width."""
        keep = [i for i in range(1, len(table.heads)) if table.heads[i] not in drop]
        names = [_lower(table.heads[i]) for i in keep]
        lead = max((len(n) for n in names), default=0)
        rows = list(table.rows)
        while rows:
            taken: list[int] = []
            used = indent + lead
            for row in rows:
                need = max(len(row[0]), *(len(row[i]) for i in keep))
                if taken and used + 3 + need > self.width:
                    break
                taken.append(need)
                used += 3 + need
            block, rows = rows[: len(taken)], rows[len(taken) :]
            if block[0] is not table.rows[0]:
                self.blank()
            self._columns("", [row[0] for row in block], lead, taken, indent)
            for name, i in zip(names, keep, strict=True):
                if any(row[i] for row in block):
                    self._columns(name, [row[i] for row in block], lead, taken, indent)

    def _columns(
        self, name: str, cells: Sequence[str], lead: int, widths: Sequence[int], indent: int
    ) -> None:
        shown = [cell.ljust(width) for cell, width in zip(cells, widths, strict=True)]
        self.lines.append((" " * indent + "   ".join([name.ljust(lead), *shown])).rstrip())

    def _row(
        self, cells: Sequence[str], widths: Sequence[int], numeric: Sequence[bool], indent: int
    ) -> None:
        shown = [
            c.rjust(w) if flush else c.ljust(w)
            for c, w, flush in zip(cells, widths, numeric, strict=True)
        ]
        self.lines.append((" " * indent + "  ".join(shown)).rstrip())

    def _blocks(self, heads: Sequence[str], rows: Sequence[Sequence[str]], indent: int) -> None:
        for row in rows:
            self.say(row[0], indent=indent, hang=indent + 2)
            self.pairs(
                [(_lower(h), c) for h, c in zip(heads[1:], row[1:], strict=True) if c],
                indent=indent + 2,
            )

    def __str__(self) -> str:
        return "\n".join(self.lines).rstrip() + "\n"


def _lower(head: str) -> str:
    """A head inside a line: small first letter, unless it is a sign such as ``Q`` or ``AICc``."""
    return head[:1].lower() + head[1:] if head[1:2].islower() else head


def _two_lines(head: str) -> tuple[str, str]:
    """A head broken at the space nearest its middle when it is long."""
    if len(head) <= 10 or " " not in head:
        return "", head
    spaces = [i for i, ch in enumerate(head) if ch == " "]
    cut = min(spaces, key=lambda i: abs(i - len(head) / 2))
    return head[:cut], head[cut + 1 :]


def wants_colour(stream: Any, environ: Mapping[str, str] = os.environ) -> bool:
    """Whether to write terminal codes: a real terminal, not a dumb one, and NO_COLOR not set."""
    if environ.get("NO_COLOR") or environ.get("TERM") == "dumb":
        return False
    return is_terminal(stream)


def is_terminal(stream: Any) -> bool:
    try:
        return bool(stream.isatty())
    except (AttributeError, ValueError):
        return False


def write(text: str, stream: TextIO) -> None:
    """Write the text, in plain characters where the stream's encoding lacks some of it."""
    encoding = getattr(stream, "encoding", None) or "utf-8"
    try:
        text.encode(encoding)
    except (UnicodeEncodeError, LookupError):
        text = to_ascii(text)
    stream.write(text)
