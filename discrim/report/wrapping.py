"""Formulas in lines that fit: broken at operators, never inside a name."""

from __future__ import annotations

import re

# Where LaTeX may end a line: at blanks (but for that of a name, which is "\ "), after "\,", before a
# command and between the arguments of one.
_LATEX_GAP = re.compile(
    r"(?<!\\) +|\\,|(?<![\[{])(?=\\(?:left|right|frac|sqrt|log|exp|mathrm)\b)|(?<=\})(?=\{)"
)


def wrap(text: str, width: int = 80, indent: str = "    ") -> str:
    """Plain ``text`` of a formula in lines of at most ``width``, broken at operators.

    Lines after the first start with ``indent``. Of the operators that fit, one outside of the
    innermost brackets is taken. A piece without an operator stays whole, even if too long.
    """
    lines: list[str] = []
    rest, lead = text, ""
    while len(lead) + len(rest) > width:
        at = _break(rest, width - len(lead))
        if at is None:
            break
        lines.append(lead + rest[:at].rstrip())
        rest, lead = rest[at:].lstrip(), indent
    lines.append(lead + rest)
    return "\n".join(lines)


def _break(text: str, room: int) -> int | None:
    """Where to break, or None: in the last two thirds of the line at the shallowest operator, a sign
    rather than a slash and that rather than a product; else the last that fits."""
    places: list[tuple[int, int, int]] = []  # (depth, kind, first character of the next line)
    depth, inside = 0, False
    for i, ch in enumerate(text):
        if ch == "[":
            inside = True
        elif ch == "]":
            inside = False
        elif inside:
            continue
        elif ch == "(":
            depth += 1
        elif ch == ")":
            depth -= 1
        elif ch in "+-" and i > 0 and text[i - 1] == " ":
            places.append((depth, 0, i))
        elif ch == "/" and i > 0:
            places.append((depth, 1, i))
        elif ch == "*":
            places.append((depth, 2, i + 1))
    fits = [p for p in places if 0 < p[2] <= room]
    late = [p for p in fits if 3 * p[2] >= room]
    if late:
        return min(late, key=lambda p: (p[0], p[1], -p[2]))[2]
    if fits:
        return max(p[2] for p in fits)
    return min((p[2] for p in places if p[2] > room), default=None)


def wrap_latex(text: str, width: int = 80) -> str:
    r"""LaTeX in lines of at most ``width``, broken at blanks and after ``\,``, never inside a name.

    A piece longer than the width stays whole.
    """
    lines: list[str] = []
    rest = text
    while len(rest) > width:
        ends = [m.end() for m in _LATEX_GAP.finditer(rest)]
        at = max((e for e in ends if len(rest[:e].rstrip()) <= width), default=min(ends, default=0))
        if not 0 < at < len(rest):
            break
        lines.append(rest[:at].rstrip())
        rest = rest[at:]
    return "\n".join([*lines, rest])
