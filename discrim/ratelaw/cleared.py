"""A law with its denominator cleared: linear in products of powers of its constants.

Many rate laws are N/D^n with N a sum of terms (one term if n > 1) and D = 1 + sum of terms, each a
product of powers of constants times a function of the conditions. Then (N/y)^(1/n) = D is linear
in the coefficients, which is what guaranteed ranges need. Where D holds no 1 but N holds no
constant, the 1 is on the other side: sum_j b_j w_j (y/N)^(1/n) = 1.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.implicit import ImplicitValue

MAX_TERMS = 200  # of a numerator or denominator when expanded; laws in use have a dozen


@dataclass(frozen=True, slots=True, eq=False)
class ClearedLaw:
    """f = N/D^power, N = sum_i a_i m_i(c), D = 1 + sum_j b_j w_j(c).

    Attributes
    ----------
    numerator, denominator : functions of the conditions m_i and w_j, sympy expressions
    known : the numerator when it holds no constant (then ``numerator`` is empty and D has no 1),
    else
        None
    power : n, a positive integer; 1 if the numerator has several terms
    exponents : shape (q, p): the logarithm of each coefficient (a first, then b) in the logarithms
        of the p constants; factor : shape (q,) its numeric factor
    """

    numerator: tuple[Any, ...]
    denominator: tuple[Any, ...]
    known: Any
    power: int
    exponents: np.ndarray
    factor: np.ndarray


def cleared(
    expression: Any, constants: Sequence[sympy.Symbol], conditions: Sequence[sympy.Symbol]
) -> ClearedLaw | None:
    """The cleared form of a law, or None when it does not have one."""
    if expression.has(ImplicitValue):
        return None
    top, bottom = sympy.together(expression).as_numer_denom()
    if max(_terms_when_expanded(top), _terms_when_expanded(bottom)) > MAX_TERMS:
        return None
    top, bottom = sympy.factor_terms(top), bottom
    base, power = _base(bottom, constants)
    if base is None:
        return None
    rest = sympy.expand(top / (bottom / base**power))
    numerator = _terms(rest, constants, conditions)
    denominator = _terms(sympy.expand(base), constants, conditions)
    if numerator is None or denominator is None:
        return None
    if power > 1 and len(numerator) > 1:
        return None
    unit = [k for k, (coef, _) in enumerate(denominator) if not coef.free_symbols]
    known = None
    scale: Any = sympy.Integer(1)
    others = denominator
    if len(unit) == 1:
        number, shape = denominator[unit[0]]
        scale = number * shape
        others = [t for k, t in enumerate(denominator) if k != unit[0]]
    elif not unit and len(numerator) == 1 and not numerator[0][0].free_symbols:
        known = numerator[0][0] * numerator[0][1]
        numerator = []
    else:
        return None
    exponents, factor = [], []
    num_shapes, den_shapes = [], []
    for coef, m in numerator:
        row = _exponents(coef, constants)
        if row is None:
            return None
        exponents.append(row[0])
        factor.append(row[1])
        num_shapes.append(m / scale**power)
    for coef, m in others:
        row = _exponents(coef, constants)
        if row is None:
            return None
        exponents.append(row[0])
        factor.append(row[1])
        den_shapes.append(m / scale)
    return ClearedLaw(
        tuple(num_shapes),
        tuple(den_shapes),
        known,
        power,
        np.array(exponents, float),
        np.array(factor, float),
    )


def _terms_when_expanded(e: Any) -> int:
    """At most how many terms the expanded expression has; no more than MAX_TERMS are counted."""
    if e.is_Add:
        return min(sum(map(_terms_when_expanded, e.args)), MAX_TERMS + 1)
    if e.is_Mul:
        count = 1
        for factor in e.args:
            count = min(count * _terms_when_expanded(factor), MAX_TERMS + 1)
        return count
    if e.is_Pow and e.exp.is_Integer and e.exp > 0:
        n = _terms_when_expanded(e.base)
        return min(math.comb(n + int(e.exp) - 1, int(e.exp)), MAX_TERMS + 1)
    return 1


def _base(bottom: Any, constants: Sequence[Any]) -> tuple[Any, int]:
    """The one factor of a denominator that holds constants in a sum, and its power."""
    sums = []
    for factor in sympy.Mul.make_args(bottom):
        b, e = factor.as_base_exp()
        if b.is_Add and b.free_symbols & set(constants):
            if not (e.is_Integer and e > 0):
                return None, 1
            sums.append((b, int(e)))
    if len(sums) > 1:
        return None, 1
    return sums[0] if sums else (sympy.Integer(1), 1)


def _terms(
    e: Any, constants: Sequence[Any], conditions: Sequence[Any]
) -> list[tuple[Any, Any]] | None:
    """(coefficient in the constants, function of the conditions), collected by coefficient; None if
    two coefficients go with one function, since their sum alone is linear then."""
    found: dict[Any, Any] = {}
    for term in sympy.Add.make_args(e):
        shape, coef = term.as_independent(*constants, as_Add=False)
        number, shape = shape.as_coeff_Mul()
        if coef.free_symbols & set(conditions) or shape.free_symbols - set(conditions):
            return None
        found[coef] = found.get(coef, sympy.Integer(0)) + number * shape
    out = []
    for coef, shape in found.items():
        number, shape = shape.as_coeff_Mul()
        if number < 0:
            number, shape = -number, -shape
        out.append((number * coef, shape))
    shapes = [s for _, s in out]
    return out if len(set(shapes)) == len(shapes) else None


def _exponents(coef: Any, constants: Sequence[Any]) -> tuple[list[float], float] | None:
    """Powers of the constants in a coefficient, and its numeric factor; None if it is not a product."""
    number, rest = coef.as_coeff_Mul()
    powers = dict.fromkeys(constants, sympy.Integer(0))
    for factor in sympy.Mul.make_args(rest):
        b, e = factor.as_base_exp()
        if b in powers and e.is_Rational:
            powers[b] += e
        elif factor != 1:
            return None
    return [float(powers[c]) for c in constants], float(number)
