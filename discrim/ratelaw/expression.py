"""Text of a rate law -> sympy expression, by a small grammar of our own.

Nothing is ever evaluated as code: sympy's own string parsing runs Python, and study files travel.

Grammar, loosest to tightest::

    sum      = product { ("+" | "-") product }
    product  = signed { ("*" | "/") signed }
    signed   = [ "-" | "+" ] signed | power
    power    = atom [ "^" signed ]              right associative: a^b^c = a^(b^c), -a^2 = -(a^2)
    atom     = number | name | "[" species "]" | function "(" sum ")" | "(" sum ")"
    function = "exp" | "log" | "sqrt"           log is the natural logarithm

Every token knows its span, so every complaint points at characters.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import NoReturn

import sympy

from discrim.errors import DiscrimError, Place, nearest
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol
from discrim.ratelaw.tokens import (
    MAX_BITS,
    MAX_DECADES,
    MAX_EXPONENT,
    MAX_LAYERS,
    MAX_LENGTH,
    MAX_NESTING,
    Source,
    Token,
    beyond,
    tokens,
)

FUNCTIONS = {"exp": sympy.exp, "log": sympy.log, "sqrt": sympy.sqrt}


@dataclass(frozen=True, slots=True)
class _Node:
    """A piece of the parsed text: ``op`` with its parts, and the characters it came from."""

    op: str  # number, name, species, sum, product, negative, inverse, power, or a function
    parts: tuple[_Node, ...]
    start: int
    end: int
    text: str = ""


def parse_expression(
    text: str,
    place: Place,
    quantities: Mapping[str, sympy.Basic] | None = None,
    *,
    grouped: Collection[str] = (),
) -> sympy.Expr:
    """The sympy expression that ``text`` stands for.

    Parameters
    ----------
    text : for example ``k*K_A*[A]/(1 + K_A*[A])``; a species stands in square brackets
    place : where the text stands; if ``place.text`` holds ``text``, errors underline there
    quantities : what a name stands for that is no constant (``"pH"``), and, under a key in
        brackets (``"[A-]"``), an expression that takes the place of a species
    grouped : constants with one value a group; ``k[lot 1]`` is then the constant of that name

    Returns
    -------
    Numbers are exact rationals of their decimal text. A name that is not in ``quantities`` is a
    constant: an order (real) if it stands in an exponent anywhere in ``text``, else nonnegative.

    Raises
    ------
    DiscrimError
        With the span, for anything outside the grammar in the module's head, for division by
        zero, for the root or logarithm of a negative number, and beyond the limits above.
    """
    known = quantities or {}
    if len(text) > MAX_LENGTH:
        raise DiscrimError(
            f"the expression has {len(text):,} characters",
            place=replace(place, text=text[:200], column=1, length=1),
            do=f"An expression may have at most {MAX_LENGTH:,} characters.",
        )
    source = Source(text, place)
    tree = _Parser(source, grouped).parse()
    _check_layers(tree, 0, source)
    orders: set[str] = set()
    _names_in_exponents(tree, False, orders)
    try:
        return _Builder(source, known, orders).build(tree)
    except RecursionError:  # sympy recurses on its own terms inside the nesting that we allow
        raise DiscrimError(
            "the expression is nested too deeply",
            place=source.place(0, len(text)),
            do="Write it with fewer functions inside one another.",
        ) from None


class _Parser:
    """Precedence climbing over the tokens; makes flat sums and products."""

    def __init__(self, source: Source, grouped: Collection[str] = ()) -> None:
        self.source = source
        self.grouped = grouped
        self.tokens = tokens(source)
        self.at = 0
        self.depth = 0

    @property
    def now(self) -> Token:
        return self.tokens[self.at]

    def take(self) -> Token:
        token = self.tokens[self.at]
        self.at += 1
        return token

    def parse(self) -> _Node:
        if self.now.kind == "end":
            self.source.fail(
                "the expression is empty", 0, 1, "Write a law such as k*[A]/(1 + K_A*[A])."
            )
        node = self.sum()
        if self.now.kind != "end":
            # sum() stops only at what cannot go on; of the signs that is a bracket alone
            token = self.now
            self.source.fail(
                'a ")" without its "("',
                token.start,
                token.end,
                "Remove it, or open the bracket where the group begins.",
            )
        return node

    def deeper(self, token: Token) -> None:
        self.depth += 1
        if self.depth > MAX_NESTING:
            self.source.fail(
                "the expression is nested too deeply",
                token.start,
                token.end,
                f"At most {MAX_NESTING} brackets may stand inside one another.",
            )

    def sum(self) -> _Node:
        parts = [self.product()]
        while self.now.kind == "sign" and self.now.text in "+-":
            sign = self.take()
            part = self.product()
            parts.append(
                part if sign.text == "+" else _Node("negative", (part,), sign.start, part.end)
            )
        if len(parts) == 1:
            return parts[0]
        return _Node("sum", tuple(parts), parts[0].start, parts[-1].end)

    def product(self) -> _Node:
        parts = [self.signed()]
        while True:
            token = self.now
            if token.kind == "sign" and token.text in "*/":
                self.take()
                part = self.signed()
                parts.append(
                    part if token.text == "*" else _Node("inverse", (part,), part.start, part.end)
                )
            elif token.kind in ("number", "name", "species") or token.text == "(":
                self.missing_operator(token)
            else:
                break
        if len(parts) == 1:
            return parts[0]
        return _Node("product", tuple(parts), parts[0].start, parts[-1].end)

    def signed(self) -> _Node:
        token = self.now
        if token.kind == "sign" and token.text in "+-":
            self.take()
            self.deeper(token)
            part = self.signed()
            self.depth -= 1
            if token.text == "+":
                return part
            return _Node("negative", (part,), token.start, part.end)
        return self.power()

    def power(self) -> _Node:
        base = self.atom()
        if self.now.text != "^":
            return base
        sign = self.take()
        self.deeper(sign)
        exponent = self.signed()
        self.depth -= 1
        return _Node("power", (base, exponent), base.start, exponent.end)

    def atom(self) -> _Node:
        token = self.take()
        if token.kind in ("number", "species"):
            return _Node(token.kind, (), token.start, token.end, token.text)
        if token.kind == "name":
            return self.name(token)
        if token.text == "(":
            return self.group(token)
        self.expected_value(token)

    def name(self, token: Token) -> _Node:
        opens = self.now.text == "("
        if token.text in FUNCTIONS:
            if not opens:
                self.source.fail(
                    f'the function "{token.text}" without brackets',
                    token.start,
                    token.end,
                    f"Write {token.text}(...).",
                )
            inner = self.group(self.take())
            return _Node(token.text, (inner,), token.start, self.tokens[self.at - 1].end)
        if opens:
            self.not_a_function(token)
        if token.text in self.grouped and self.now.kind == "species":
            group = self.take()
            text = f"{token.text}[{group.text[1:-1].strip()}]"
            return _Node("name", (), token.start, group.end, text)
        return _Node("name", (), token.start, token.end, token.text)

    def group(self, opening: Token) -> _Node:
        self.deeper(opening)
        node = self.sum()
        self.depth -= 1
        if self.now.text != ")":
            self.source.fail(
                'a "(" without its ")"',
                opening.start,
                opening.end,
                "Close the bracket where the group ends.",
            )
        return replace(node, start=opening.start, end=self.take().end)

    def not_a_function(self, token: Token) -> NoReturn:
        word = token.text
        do = {
            "ln": "Write log(...), which is the natural logarithm.",
            "log10": "Write log(...)/log(10); log is the natural logarithm.",
            "log2": "Write log(...)/log(2); log is the natural logarithm.",
        }.get(word.lower())
        if do is None:
            hint = nearest(word.lower(), FUNCTIONS)
            do = f"{hint} " if hint else ""
            do += f"The functions are exp, log and sqrt; to multiply, write {word}*(...)."
        self.source.fail(f'"{word}" is not a function', token.start, token.end, do)

    def missing_operator(self, token: Token) -> NoReturn:
        before = self.tokens[self.at - 1]
        self.source.fail(
            f'nothing stands between "{before.text}" and "{token.text}"',
            before.start,
            token.end,
            f"To multiply, write {before.text}*{token.text}",
        )

    def expected_value(self, token: Token) -> NoReturn:
        before = self.tokens[self.at - 2] if self.at >= 2 else None
        if before is not None and before.text == "*" and token.text == "*":
            self.source.fail(
                '"**" is not an operator here',
                before.start,
                token.end,
                "Write a power with ^, as in [A]^2.",
            )
        if token.kind == "end":
            last = before or token
            self.source.fail(
                f'the expression ends after "{last.text}"',
                last.start,
                last.end,
                "A number, a name, a [species] or a bracket must follow.",
            )
        self.source.fail(
            f'"{token.text}" stands where a value belongs',
            token.start,
            token.end,
            "A number, a name, a [species] or an opening bracket must stand here.",
        )


def size_of(expr: sympy.Basic) -> tuple[int, int]:
    """(number of nodes when written out, depth); each shared part is visited once."""
    sizes: dict[sympy.Basic, tuple[int, int]] = {}
    stack: list[tuple[sympy.Basic, bool]] = [(expr, False)]
    while stack:
        e, seen = stack.pop()
        if e in sizes:
            continue
        if seen:
            parts = [sizes[a] for a in e.args]
            sizes[e] = 1 + sum(n for n, _ in parts), 1 + max((d for _, d in parts), default=0)
        else:
            stack.append((e, True))
            stack += [(a, False) for a in e.args if a not in sizes]
    return sizes[expr]


_ATOMS = ("number", "name", "species")
_LAYERS = (*FUNCTIONS, "power")


def _check_layers(node: _Node, above: int, source: Source) -> None:
    """Refuse functions, fractions and powers of sums too deep in one another: their derivatives
    grow beyond any use, and so does the time to find them."""
    if node.op == "inverse":
        layer = node.parts[0].op == "sum"
    else:
        layer = node.op in _LAYERS and any(part.op not in _ATOMS for part in node.parts)
    depth = above + layer
    if depth > MAX_LAYERS:
        source.fail(
            "too many functions, fractions or powers inside one another",
            node.start,
            node.end,
            f"At most {MAX_LAYERS} are read.",
        )
    for part in node.parts:
        _check_layers(part, depth, source)


def _names_in_exponents(node: _Node, inside: bool, out: set[str]) -> None:
    if node.op == "name" and inside:
        out.add(node.text)
    for i, part in enumerate(node.parts):
        _names_in_exponents(part, inside or (node.op == "power" and i == 1), out)


class _Builder:
    """Tree -> sympy, with the guards that keep exact numbers small."""

    def __init__(
        self, source: Source, quantities: Mapping[str, sympy.Basic], orders: set[str]
    ) -> None:
        self.source = source
        self.quantities = quantities
        self.orders = orders

    def build(self, node: _Node) -> sympy.Expr:
        op = node.op
        if op == "number":
            return sympy.Rational(*Fraction(node.text).as_integer_ratio())
        if op == "name":
            if node.text in self.quantities:
                return self.quantities[node.text]
            kind = ConstantKind.ORDER if node.text in self.orders else ConstantKind.RATE
            return constant_symbol(node.text, kind)
        if op == "species":
            name = node.text[1:-1].strip()
            return self.quantities.get(f"[{name}]", amount(name))
        parts = [self.build(part) for part in node.parts]
        return self.checked(self.join(node, parts), node)

    def join(self, node: _Node, parts: list[sympy.Expr]) -> sympy.Expr:
        op = node.op
        if op == "sum":
            return sympy.Add(*parts)
        if op == "product":
            if sum(_bits(p) for p in parts) > MAX_BITS:
                self.too_big(node)
            return sympy.Mul(*parts)
        if op == "negative":
            return -parts[0]
        if op == "inverse":
            if parts[0].is_zero:
                self.source.fail("division by zero", node.start, node.end)
            return 1 / parts[0]
        if op == "power":
            return self.power(node, *parts)
        return self.function(node, parts[0])

    def function(self, node: _Node, argument: sympy.Expr) -> sympy.Expr:
        bad = argument.is_negative or (node.op == "log" and argument.is_zero)
        if node.op != "exp" and bad:
            what = "square root" if node.op == "sqrt" else "logarithm"
            found = "zero" if argument.is_zero else "a negative number"
            self.source.fail(f"the {what} of {found}", node.start, node.end)
        if node.op == "exp" and argument.is_Rational and abs(argument) > 690:
            self.too_big(node)  # exp(690) is about 1e300
        return FUNCTIONS[node.op](argument)

    def power(self, node: _Node, base: sympy.Expr, exponent: sympy.Expr) -> sympy.Expr:
        if exponent.is_Rational and abs(exponent) > MAX_EXPONENT:
            where = node.parts[1]
            self.source.fail(
                f"the exponent {self.source.text[where.start : where.end].strip()} is too large",
                where.start,
                where.end,
                f"Exponents lie between -{MAX_EXPONENT} and {MAX_EXPONENT}.",
            )
        if base.is_zero and exponent.is_negative:
            self.source.fail("division by zero", node.start, node.end)
        if base.is_negative and exponent.is_Rational and not exponent.is_Integer:
            self.source.fail("a root of a negative number", node.start, node.end)
        if _bits(base) * max(1, abs(exponent) if exponent.is_Rational else 1) > MAX_BITS:
            self.too_big(node)
        return base**exponent

    def checked(self, value: sympy.Expr, node: _Node) -> sympy.Expr:
        if _bits(value) > MAX_BITS:
            self.too_big(node)
        if value.is_Rational and value != 0:
            decades = sympy.Integer(10) ** MAX_DECADES
            if not 1 / decades <= abs(value) <= decades:
                self.too_big(node)
        if value.is_Pow and value.exp.is_Rational and abs(value.exp) > MAX_EXPONENT:
            self.source.fail(
                f"a power of {value.exp} is too high",
                node.start,
                node.end,
                f"Exponents lie between -{MAX_EXPONENT} and {MAX_EXPONENT}.",
            )
        if value in (sympy.zoo, sympy.nan, sympy.oo, -sympy.oo) or value.has(sympy.I):
            self.source.fail("this has no real, finite value", node.start, node.end)
        return value

    def too_big(self, node: _Node) -> NoReturn:
        beyond(self.source, "that comes out here", node.start, node.end)


def _bits(value: sympy.Expr) -> int:
    """Size of the exact number in front of an expression."""
    number = value if value.is_Rational else value.as_coeff_Mul()[0]
    if not number.is_Rational:
        return 1
    return max(number.p.bit_length(), number.q.bit_length())
