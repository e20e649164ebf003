"""The words of an expression, each with the characters that it stands on."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import NoReturn

from discrim.errors import DiscrimError, Place

# Limits on hostile or mistaken input; far above what a rate law needs.
MAX_LENGTH = 20_000  # characters of one expression
MAX_NESTING = 40  # brackets, signs and exponents inside one another
MAX_LAYERS = 6  # functions and powers of sums inside one another; laws in use have one or two
MAX_EXPONENT = 50  # largest numeral as an exponent
MAX_DECADES = 300  # numbers lie between 1e-300 and 1e300, as in double precision
MAX_NUMERAL = 60  # characters of one number
MAX_NAME = 100  # characters of one name
MAX_BITS = 4000  # of the numerator or denominator of an exact number inside the law

_TOKEN = re.compile(
    r"(?P<space>\s+)"
    r"|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[^\W\d²³¹⁰⁴-⁹][^\W²³¹⁰⁴-⁹]*)"  # k² is no name
    r"|(?P<species>\[[^\[\]]*\])"
    r"|(?P<sign>[-+*/^()])",
)

_INSTEAD = {
    "−": "-",
    "–": "-",
    "×": "*",
    "·": "*",
    "⋅": "*",
    "∙": "*",
    "÷": "/",
    "²": "^2",
    "³": "^3",
}


@dataclass(frozen=True, slots=True)
class Token:
    kind: str  # number, name, species, sign, end
    text: str
    start: int
    end: int


class Source:
    """The text and where it stands, to make places of spans."""

    def __init__(self, text: str, place: Place) -> None:
        self.text = text
        self._place = place

    def place(self, start: int, end: int) -> Place:
        given, text = self._place, self.text
        row_start = text.rfind("\n", 0, start) + 1
        row_end = text.find("\n", start)
        row = text[row_start : row_end if row_end >= 0 else len(text)]
        column, length = start - row_start + 1, max(1, min(end, row_start + len(row)) - start)
        line = given.line + text.count("\n", 0, start) if given.line else 0
        if "\n" not in text and given.text and text in given.text:
            at = given.column - 1
            if not given.text.startswith(text, max(at, 0)):
                at = given.text.find(text)
            return replace(given, column=max(at, 0) + column, length=length)
        return replace(given, line=line, text=row, column=column, length=length)

    def fail(self, says: str, start: int, end: int, do: str = "") -> NoReturn:
        raise DiscrimError(says, place=self.place(start, end), do=do)


def tokens(source: Source) -> list[Token]:
    text, out, at = source.text, [], 0
    while at < len(text):
        found = _TOKEN.match(text, at)
        if found is None:
            _bad_character(source, at)
        kind = found.lastgroup or ""
        if kind != "space":
            token = Token(kind, found.group(), at, found.end())
            _check_token(source, token)
            out.append(token)
        at = found.end()
    out.append(Token("end", "", len(text), len(text)))
    return out


def _check_token(source: Source, token: Token) -> None:
    start, end = token.start, token.end
    if token.kind == "number":
        if end - start > MAX_NUMERAL:
            source.fail(
                f"a number of {end - start} characters",
                start,
                end,
                f"Write it with at most {MAX_NUMERAL} characters.",
            )
        comma = re.match(r",[0-9]+", source.text[end : end + MAX_NUMERAL])
        if comma:
            source.fail(
                f'"{token.text}{comma.group()}" has a comma inside a number',
                start,
                end + comma.end(),
                f"Write a decimal point: {token.text}.{comma.group()[1:]}",
            )
        mantissa, _, exponent = token.text.lower().partition("e")
        if exponent and (len(exponent.lstrip("+-0")) > 3 or abs(int(exponent)) > MAX_DECADES):
            beyond(source, token.text, start, end)
        number = Fraction(mantissa) * Fraction(10) ** int(exponent or 0)
        if number and not Fraction(10) ** -MAX_DECADES <= number <= Fraction(10) ** MAX_DECADES:
            beyond(source, token.text, start, end)
    elif token.kind == "name" and end - start > MAX_NAME:
        source.fail(
            f"a name of {end - start} characters",
            start,
            end,
            f"Use at most {MAX_NAME} characters for a name.",
        )
    elif token.kind == "species":
        if end - start > MAX_NAME:
            source.fail(
                f"the name of a species of {end - start} characters",
                start,
                end,
                f"Use at most {MAX_NAME} characters for a name.",
            )
        if not token.text[1:-1].strip():
            source.fail(
                "empty square brackets",
                start,
                end,
                "Square brackets hold the name of a species: [A], [H+].",
            )


def beyond(source: Source, shown: str, start: int, end: int) -> NoReturn:
    source.fail(
        f"the number {shown} is beyond what can be computed with",
        start,
        end,
        f"Numbers must lie between 1e-{MAX_DECADES} and 1e{MAX_DECADES}; use other units.",
    )


def _bad_character(source: Source, at: int) -> NoReturn:
    text = source.text
    ch = text[at]
    if ch == "[":
        inner = re.match(r"\[[^\[\]]*", text[at:])
        end = at + (inner.end() if inner else 1)
        source.fail(
            'a "[" without its "]"',
            at,
            min(end, at + 40),
            "The name of a species stands between square brackets: [A], [SO4^2-].",
        )
    if ch == "]":
        source.fail('a "]" without its "["', at, at + 1, "Write a species as [A].")
    if ch == ".":
        source.fail(
            '"." does not belong here',
            at,
            at + 1,
            "A dot stands only inside a number, as in 0.5. Names have letters, digits and _.",
        )
    if ch in "'\"`":
        source.fail(
            "quotes do not belong in an expression",
            at,
            at + 1,
            "Write names without quotes and species in square brackets: k*[A].",
        )
    if ch in "{}":
        source.fail(f'"{ch}" does not belong here', at, at + 1, "Use round brackets: ( ).")
    if ch == ",":
        source.fail(
            '"," does not belong here',
            at,
            at + 1,
            "Functions take one argument, and numbers have a decimal point.",
        )
    if ch in _INSTEAD:
        source.fail(f'"{ch}" does not belong here', at, at + 1, f"Write {_INSTEAD[ch]} instead.")
    if ch in "=<>!":
        source.fail(
            f'"{ch}" does not belong here',
            at,
            at + 1,
            "Give the expression alone, without a left-hand side or a comparison.",
        )
    shown = ch if ch.isprintable() else f"U+{ord(ch):04X}"
    source.fail(
        f'"{shown}" does not belong in an expression',
        at,
        at + 1,
        "Allowed are + - * / ^ ( ), numbers, names, [species], exp, log and sqrt.",
    )
