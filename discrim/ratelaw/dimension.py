"""Units of the constants of a law, from the units of what is measured.

The terms of a sum have one unit, an observed expression has the unit of its column, arguments of
functions and exponents have none. With each unit a vector of powers of kinds (amount, volume,
time, ...), these are linear equations for the constants' units, solved exactly over fractions. A
unit that depends on an order is kept in parts: k in k*[B]^n has the unit of the rate times
(unit of [B])^-n. Unknowns of balances without a closed form are found along with the constants.

People write numbers for constants (``1 + 0.5*[A]``). What follows only from a number having no
unit is therefore given up, with a finding, where it contradicts the rest.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import sympy

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.printing import plain
from discrim.units import Unit

_ONE = sympy.Integer(1)

# The unit of a constant has parts: one plain, others raised to orders (or products of them).
# A part is known by (constant, 1 or the order).
_Part = tuple[sympy.Symbol, sympy.Expr]


@dataclass(frozen=True, slots=True, eq=False)
class ConstantUnits:
    """Units of constants, by name.

    Attributes
    ----------
    units : None where the law and the data's units do not settle it, or it depends on an order
    words : the unit as text, with orders as exponents where it depends on them; "" if not settled
    findings : full sentences on numbers that must carry a unit, and the like
    """

    units: Mapping[str, Unit | None]
    words: Mapping[str, str]
    findings: tuple[str, ...]


def constant_units(
    expressions: Sequence[tuple[sympy.Expr, Unit | None]],
    symbol_units: Mapping[sympy.Symbol, Unit],
    *,
    place: Place | None = None,
) -> dict[str, Unit | None]:
    """The unit of each constant, None where it is not determined. See `find_units`."""
    return dict(find_units(expressions, symbol_units, place=place).units)


def find_units(
    expressions: Sequence[tuple[sympy.Expr, Unit | None]],
    symbol_units: Mapping[sympy.Symbol, Unit],
    *,
    place: Place | None = None,
) -> ConstantUnits:
    """Units, words and findings for every constant of the expressions.

    Parameters
    ----------
    expressions : each with the unit that it must have, None if that is not known
    symbol_units : units of species and quantities, and of constants where the user gave them.
        What is not listed is found; orders (symbols that may be negative, no quantities) have none.
    place : for an error

    Raises
    ------
    DiscrimError
        If the units contradict one another, whatever the constants' units are.
    """
    walk = _Walk(symbol_units)
    for expr, unit in expressions:
        form = walk.form(expr)
        if unit is not None:
            numbered = _has_number(expr)
            says = f"{plain(expr)} cannot have the unit {_shown(unit)}"
            if numbered:
                says = f"a number in {plain(expr)} must carry a unit"
            walk.equal(form, _Form(unit), says, soft=numbered)
    system = _System()
    # Certain equations first, so that what is doubtful gives way to them.
    findings: list[str] = []
    for equation in sorted(walk.equations, key=lambda e: e.doubt):
        left_over = system.add(equation.parts, equation.unit)
        if left_over is None:
            continue
        if equation.doubt == 0:
            raise DiscrimError(
                f"{equation.says} (a factor of {_shown(left_over)} apart)",
                place=place,
                do="Check the law and the units of the columns; a constant can carry a unit.",
            )
        if equation.says and equation.says not in findings:
            findings.append(equation.says)
    symbols = sorted(
        {s for e, _ in expressions for s in e.free_symbols if s.name[0] not in "[{"},
        key=lambda s: s.name,
    )
    units: dict[str, Unit | None] = {}
    words: dict[str, str] = {}
    for symbol in symbols:
        units[symbol.name], words[symbol.name] = _read(symbol, symbol_units, walk, system)
    sentences = tuple(f[0].upper() + f[1:] + "." for f in findings)
    return ConstantUnits(units, words, sentences)


def _read(
    symbol: sympy.Symbol,
    symbol_units: Mapping[sympy.Symbol, Unit],
    walk: _Walk,
    system: _System,
) -> tuple[Unit | None, str]:
    if symbol in symbol_units or walk.is_order(symbol):
        unit = symbol_units.get(symbol, Unit())
        return unit, unit.text()
    main = system.value((symbol, _ONE))
    if main is None:
        return None, ""
    pieces, depends = [main.text()] if not main.is_dimensionless else [], False
    for power in walk.powers:
        part = system.value((symbol, power)) if (symbol, power) in system.parts else Unit()
        if part is None:
            return None, ""
        if not part.is_dimensionless:
            depends = True
            pieces.append(_raised(part, power))
    return (None if depends else main), " ".join(pieces)


def _raised(unit: Unit, power: sympy.Expr) -> str:
    """``(mmol L⁻¹)^(-n)``: the sign is put where the unit reads without it."""
    if all(p < 0 for _, p in unit.powers) or (unit.powers and _first_power(unit) < 0):
        return f"({(unit ** Fraction(-1)).text()})^({plain(-power)})"
    shown = plain(power)
    return f"({unit.text()})^{shown if power.is_Symbol else f'({shown})'}"


def _first_power(unit: Unit) -> Fraction:
    kinds = dict(unit.powers)
    for kind in ("amount", "pressure", "mass"):
        if kind in kinds:
            return kinds[kind]
    return next(iter(kinds.values()))


def _shown(unit: Unit) -> str:
    return unit.text() if not unit.is_dimensionless else "1 (no unit)"


def _has_number(term: sympy.Expr) -> bool:
    """Whether a number other than 1 and -1 multiplies the term, and so could carry a unit."""
    return term.as_coeff_Mul()[0] not in (_ONE, -_ONE)


@dataclass(slots=True)
class _Form:
    """A unit that is partly unknown.

    ``unit`` is its known plain part, ``raised`` what is known to symbolic powers. ``parts`` holds
    powers of plain parts of constants, by (constant, the symbolic power they are raised to or 1).
    """

    unit: Unit = field(default_factory=Unit)
    raised: dict[sympy.Expr, Unit] = field(default_factory=dict)
    parts: dict[tuple[sympy.Symbol, sympy.Expr], Fraction] = field(default_factory=dict)

    def times(self, other: _Form, power: Fraction = Fraction(1)) -> _Form:
        out = _Form(self.unit * other.unit**power, dict(self.raised), dict(self.parts))
        for part, p in other.parts.items():
            out.parts[part] = out.parts.get(part, Fraction(0)) + power * p
        for key, unit in other.raised.items():
            out.raised[key] = out.raised.get(key, Unit()) * unit**power
        return out

    def to(self, power: sympy.Expr) -> _Form:
        """Raised to a symbolic power."""
        out = _Form()
        for (symbol, old), p in self.parts.items():
            out.parts[symbol, old * power] = p
        for old, unit in {_ONE: self.unit, **self.raised}.items():
            if not unit.is_dimensionless:
                out.raised[old * power] = unit
        return out


@dataclass(slots=True)
class _Equation:
    """Parts (with powers) whose product has the unit ``unit``; ``doubt`` 0 is certain."""

    parts: dict[_Part, Fraction]
    unit: Unit
    says: str
    doubt: int


class _Walk:
    """Goes through expressions and collects the equations that their units obey."""

    def __init__(self, known: Mapping[sympy.Symbol, Unit]) -> None:
        self.known = known
        self.equations: list[_Equation] = []
        self.powers: list[sympy.Expr] = []  # what units were raised to, beside numbers
        self.systems: list[Any] = []  # of balances, already gone through

    @staticmethod
    def is_order(symbol: sympy.Symbol) -> bool:
        return symbol.name[0] not in "[{" and not symbol.is_nonnegative

    def equal(self, a: _Form, b: _Form, says: str, *, soft: bool = False, doubt: int = 1) -> None:
        apart = a.times(b, Fraction(-1))
        powers = {key for _, key in apart.parts if key != 1} | set(apart.raised)
        level = doubt if soft or powers else 0
        for power in [_ONE, *sorted(powers, key=str)]:
            if power != 1 and power not in self.powers:
                self.powers.append(power)
            parts: dict[_Part, Fraction] = {}
            for (symbol, to), p in apart.parts.items():
                if to == power and p:
                    parts[symbol, _ONE] = p
                elif to == 1 and p:  # the constant's own unit may have a part raised to this
                    parts[symbol, power] = p
            unit = apart.unit if power == 1 else apart.raised.get(power, Unit())
            self.equations.append(_Equation(parts, unit ** Fraction(-1), says, level))

    def no_unit(self, form: _Form, says: str, doubt: int) -> None:
        self.equal(form, _Form(), says, soft=doubt > 0, doubt=doubt)

    def form(self, expr: sympy.Expr) -> _Form:
        if isinstance(expr, ImplicitValue):
            if expr.system not in self.systems:
                self.systems.append(expr.system)
                for equation in expr.equations:
                    self.form(equation)
            return self.form(expr.unknown)
        if expr.is_number:
            return _Form()
        if expr.is_Symbol:
            if expr in self.known:
                return _Form(self.known[expr])
            return _Form() if self.is_order(expr) else _Form(parts={(expr, _ONE): Fraction(1)})
        if expr.is_Add:
            return self.sum(expr)
        if expr.is_Mul:
            out = _Form()
            for factor in expr.args:
                out = out.times(self.form(factor))
            return out
        if isinstance(expr, sympy.exp):
            return self.raised(sympy.E, expr.args[0])
        if expr.is_Pow:
            return self.raised(expr.base, expr.exp)
        for argument in expr.args:
            says = f"the argument of {plain(expr)} has a unit"
            self.no_unit(self.form(argument), says, doubt=2)
        return _Form()

    def sum(self, expr: sympy.Expr) -> _Form:
        terms = sorted(expr.args, key=lambda t: (t.is_number, _has_number(t), plain(t)))
        first, *others = terms
        form = self.form(first)
        for term in others:
            says = f"terms of a sum have different units: {plain(first)} and {plain(term)}"
            numbered = term.is_number or _has_number(term) or _has_number(first)
            if numbered:
                says = f"a number in {plain(first + term)} must carry a unit"
            doubt = 1 if term.is_number else 2
            self.equal(form, self.form(term), says, soft=numbered, doubt=doubt)
        return form

    def raised(self, base: sympy.Expr, exponent: sympy.Expr) -> _Form:
        inner = self.form(base)
        if exponent.is_Rational:
            return _Form().times(inner, Fraction(int(exponent.p), int(exponent.q)))
        shown = "exp" if base is sympy.E else "an exponent"
        says = f"the argument of {shown}, {plain(exponent)}, has a unit"
        self.no_unit(self.form(exponent), says, doubt=0)
        if base.is_number:
            return _Form()
        if inner.parts:  # a constant in the base: best if it makes the base a pure number
            self.no_unit(inner, "", doubt=3)
        out = _Form()
        for term in sympy.Add.make_args(sympy.expand(exponent)):
            number, symbolic = term.as_coeff_Mul(rational=True)
            power = Fraction(int(number.p), int(number.q))
            out = out.times(inner if symbolic == 1 else inner.to(symbolic), power)
        return out


class _System:
    """Linear equations over fractions with units on the right, kept in reduced form."""

    def __init__(self) -> None:
        self.rows: dict[_Part, tuple[dict[_Part, Fraction], Unit]] = {}
        self.parts: set[_Part] = set()

    def add(self, parts: Mapping[_Part, Fraction], unit: Unit) -> Unit | None:
        """None if it can hold; else the unit by which the equation fails, and it is left out."""
        row, right = dict(parts), unit
        for pivot in [p for p in row if p in self.rows]:
            c = row[pivot]
            other, other_right = self.rows[pivot]
            row = _less(row, other, c)
            right = right / other_right**c
        if not row:
            return None if right.is_dimensionless else right
        pivot = min(row, key=str)
        c = row[pivot]
        row = {part: p / c for part, p in row.items()}
        right = right ** (1 / c)
        for key, (other, other_right) in list(self.rows.items()):
            if pivot in other:
                c = other[pivot]
                self.rows[key] = (_less(other, row, c), other_right / right**c)
        self.rows[pivot] = (row, right)
        self.parts |= set(row)
        return None

    def value(self, part: _Part) -> Unit | None:
        """The unit of a part, None if the equations leave it open."""
        row = self.rows.get(part)
        return row[1] if row is not None and len(row[0]) == 1 else None


def _less(
    row: Mapping[_Part, Fraction], other: Mapping[_Part, Fraction], c: Fraction
) -> dict[_Part, Fraction]:
    out = dict(row)
    for part, p in other.items():
        out[part] = out.get(part, Fraction(0)) - c * p
    return {part: p for part, p in out.items() if p}
