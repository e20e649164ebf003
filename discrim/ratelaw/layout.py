"""How a law is laid out for reading, before any notation: which factor and which term comes first.

A chemist's order: numbers, rate constants, equilibrium constants, other constants, functions,
species, groups. In sums a lone number leads (``1 + K_A*[A]``) and what is subtracted follows.
The order depends on names alone, so that the same law always reads the same.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache

import sympy

from discrim.ratelaw.implicit import ImplicitValue

_HALF = sympy.Rational(1, 2)


@dataclass(frozen=True, slots=True)
class Number:
    text: str  # exact, positive: digits, a decimal, or digits/digits


@dataclass(frozen=True, slots=True)
class Name:
    text: str  # the symbol's name: k_A, [A] or {pH}


@dataclass(frozen=True, slots=True)
class Sum:
    terms: tuple[tuple[bool, Layout], ...]  # (subtracted, term)


@dataclass(frozen=True, slots=True)
class Product:
    above: tuple[Layout, ...]  # may be empty: 1
    below: tuple[Layout, ...]


@dataclass(frozen=True, slots=True)
class Power:
    base: Layout
    exponent: Layout


@dataclass(frozen=True, slots=True)
class Call:
    function: str  # exp, log, sqrt, or whatever sympy calls it
    parts: tuple[Layout, ...]


@dataclass(frozen=True, slots=True)
class Equation:
    left: Layout
    right: Layout


Layout = Number | Name | Sum | Product | Power | Call | Equation


@lru_cache(maxsize=4096)  # the same law is printed in three notations, and its parts recur
def lay_out(expr: sympy.Basic) -> Layout:
    """The pieces of ``expr`` in reading order; an implicit value is read as its unknown."""
    expr = sympy.Integer(expr) if isinstance(expr, int) else expr
    values = expr.atoms(ImplicitValue)
    return _lay_out(expr.xreplace({v: v.unknown for v in values}) if values else expr)


def _lay_out(expr: sympy.Basic) -> Layout:
    if isinstance(expr, sympy.Equality):
        return Equation(_lay_out(expr.lhs), _lay_out(expr.rhs))
    negative, size = _sign(expr)
    if negative:
        return Sum(((True, _lay_out(size)),))
    if expr.is_Symbol:
        return Name(expr.name)
    if expr.is_Number:
        return _number(expr)
    if expr is sympy.E:
        return Call("exp", (Number("1"),))
    if expr.is_Add:
        terms = sorted((_sign(t) for t in expr.args), key=_term_key)
        return Sum(tuple((minus, _lay_out(t)) for minus, t in terms))
    if isinstance(expr, sympy.exp):
        return Call("exp", (_lay_out(expr.args[0]),))
    if expr.is_Mul or expr.is_Pow:
        return _product(expr)
    if expr.is_Function:
        return Call(type(expr).__name__, tuple(_lay_out(a) for a in expr.args))
    return Name(str(expr))


def _sign(term: sympy.Expr) -> tuple[bool, sympy.Expr]:
    if term.is_Number:
        return (True, -term) if term.is_negative else (False, term)
    if term.is_Mul and term.args[0].is_Number and term.args[0].is_negative:
        return True, -term
    if term.is_Mul:
        for i, factor in enumerate(term.args):
            # sympy writes -(a + b)*c as (-a - b)*c
            if factor.is_Add and all(_sign(t)[0] for t in factor.args):
                return True, sympy.Mul(*term.args[:i], -factor, *term.args[i + 1 :])
    return False, term


def _number(value: sympy.Number) -> Layout:
    """An exact number in digits: a decimal where that is exact and short, else a fraction."""
    if not value.is_Rational:
        return Number(f"{float(value):.15g}")
    if value.q == 1 and len(str(value.p)) <= 6:
        return Number(str(value.p))
    decimal = decimal_text(value)
    if decimal is not None:
        return Number(decimal)
    if value.q == 1:
        return Number(str(value.p))
    return Product((Number(str(value.p)),), (Number(str(value.q)),))


def decimal_text(value: sympy.Rational) -> str | None:
    """Exact decimal text of a positive rational, or None where there is no short one."""
    twos = fives = 0
    rest = value.q
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    if rest != 1:
        return None
    shift = max(twos, fives)
    digits = str(value.p * 2 ** (shift - twos) * 5 ** (shift - fives))
    stripped = digits.rstrip("0")
    if len(stripped) > 17:
        return None
    lead = len(digits) - shift - 1  # power of ten of the first digit
    if -4 <= lead < 6:
        if shift == 0:
            return digits
        padded = digits.rjust(shift + 1, "0")
        return f"{padded[:-shift]}.{padded[-shift:]}"
    mantissa = stripped[0] + ("." + stripped[1:] if len(stripped) > 1 else "")
    return f"{mantissa}e{lead}"


def _product(expr: sympy.Expr) -> Layout:
    number, rest = expr.as_coeff_Mul()
    above: list[sympy.Expr] = []
    below: list[sympy.Expr] = []
    for factor in sympy.Mul.make_args(rest):
        base, power = factor.as_base_exp()
        if power.is_Rational and power.is_negative and not isinstance(factor, sympy.exp):
            below.append(sympy.Pow(base, -power))
        elif factor != 1:
            above.append(factor)
    top, bottom = _factors(above), _factors(below)
    if not number.is_Rational:
        top.insert(0, _number(number))
    elif number.q <= 10 or decimal_text(number) is None:
        if number.p != 1:
            top.insert(0, _number(sympy.Integer(number.p)))
        if number.q != 1:
            bottom.insert(0, _number(sympy.Integer(number.q)))
    else:
        top.insert(0, _number(number))
    if not bottom and len(top) == 1:
        return top[0]
    return Product(tuple(top), tuple(bottom))


def _factors(factors: list[sympy.Expr]) -> list[Layout]:
    roots = [f.base for f in factors if f.is_Pow and f.exp == _HALF and f.base.is_Symbol]
    plain = [f for f in factors if not (f.is_Pow and f.exp == _HALF and f.base.is_Symbol)]
    keyed = [(_factor_key(f), _factor(f)) for f in plain]
    if roots:
        under = sympy.Mul(*roots)  # sqrt(K*[A]) reads better than sqrt(K)*sqrt([A])
        last = max(_factor_key(r) for r in roots)
        keyed.append(((last[0], 1, *last[2:]), Call("sqrt", (_lay_out(under),))))
    return [layout for _, layout in sorted(keyed, key=lambda pair: pair[0])]


def _factor(factor: sympy.Expr) -> Layout:
    if factor.is_Pow and not isinstance(factor, sympy.exp):
        if factor.base is sympy.E:
            return Call("exp", (_lay_out(factor.exp),))
        if factor.exp == _HALF:
            return Call("sqrt", (_lay_out(factor.base),))
        return Power(_lay_out(factor.base), _lay_out(factor.exp))
    return _lay_out(factor)


def _natural(text: str) -> tuple[tuple[int, int, str], ...]:
    """Sorts k2 before k10, and without regard to capitals first."""
    parts = re.split(r"(\d+)", text)
    return tuple((0, int(p), "") if p.isdigit() else (1, 0, p.casefold()) for p in parts if p)


_Key = tuple[int, int, tuple[tuple[int, int, str], ...], str]


def _factor_key(factor: sympy.Expr) -> _Key:
    base = factor.as_base_exp()[0] if factor.is_Pow else factor
    text = str(factor)
    if base.is_Number:
        return 0, 0, _natural(text), text
    if base.is_Symbol:
        name = base.name
        group = {"k": 1, "K": 2, "[": 5, "{": 6}.get(name[0], 3)
        return group, 0, _natural(name), text
    if base.is_Function or base is sympy.E:
        return 4, 0, _natural(text), text
    return 7, 0, _natural(text), text


def _term_key(signed: tuple[bool, sympy.Expr]) -> tuple[bool, bool, list[_Key], str]:
    minus, term = signed
    factors = sympy.Mul.make_args(term)
    lone = bool(term.is_Number)
    keys = sorted(_factor_key(f) for f in factors if not f.is_Number)
    return minus, not lone, keys, str(term)
