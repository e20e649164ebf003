"""Positive solutions of balances: a closed form where there is one, else an implicit value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import gcd
from typing import Any

import sympy
from sympy import Rational

from discrim.ratelaw.implicit import ImplicitValue

_SHORT = 60  # operations of coefficients that are factored


@dataclass(frozen=True, slots=True)
class Group:
    """Equations that together fix some unknowns; they may hold unknowns of earlier groups.

    Attributes
    ----------
    unknowns : positive symbols
    equations : as many sums of products, each zero
    """

    unknowns: tuple[sympy.Symbol, ...]
    equations: tuple[Any, ...]


@dataclass(frozen=True, slots=True)
class Solved:
    """``values`` of the unknowns of a group.

    ``closed``: none is implicit. ``several``: more than one positive solution cannot be ruled out.
    """

    values: tuple[Any, ...]
    closed: bool
    several: bool


def solve_group(group: Group) -> Solved:
    """The positive solution of one group.

    One unknown in an equation of first or second degree, or in two powers only, has a closed form.
    """
    if len(group.unknowns) == 1:
        (z,), (equation,) = group.unknowns, group.equations
        by_power = powers_of(equation, z)
        closed = _closed(by_power)
        if closed is not None:
            return Solved((closed,), closed=True, several=False)
        one = one_root(by_power)
    else:
        one = False
    unknowns = [sympy.Dummy(z.name, positive=True) for z in group.unknowns]
    swap = dict(zip(group.unknowns, unknowns, strict=True))
    written = [e.xreplace(swap) for e in group.equations]
    values = tuple(ImplicitValue(k, unknowns, written) for k in range(len(unknowns)))
    return Solved(values, closed=False, several=not one)


def solve_groups(groups: Sequence[Group]) -> tuple[dict[sympy.Symbol, Any], list[Solved]]:
    """What each unknown is, without any other unknown in it."""
    values: dict[sympy.Symbol, Any] = {}
    found = []
    for group in groups:
        solved = solve_group(
            Group(group.unknowns, tuple(e.xreplace(values) for e in group.equations))
            if values
            else group
        )
        values |= dict(zip(group.unknowns, solved.values, strict=True))
        found.append(solved)
    return values, found


def powers_of(equation: Any, z: sympy.Symbol) -> dict[int, Any]:
    """Coefficients of a sum of products by the power of ``z``."""
    parts: dict[int, list[Any]] = {}
    for term in sympy.Add.make_args(equation):
        coefficient, rest = term.as_independent(z, as_Add=False)
        power = 0 if rest == 1 else int(rest.as_base_exp()[1])
        parts.setdefault(power, []).append(coefficient)
    return {e: sympy.Add(*terms) for e, terms in parts.items()}


def sign_of(e: Any) -> int | None:
    """The sign of an expression in positive symbols, where its terms agree on it; else None."""
    if e.is_number:
        return None if e == 0 else 1 if e > 0 else -1
    if e.is_Symbol or isinstance(e, ImplicitValue):
        return 1
    if e.is_Pow:
        base = sign_of(e.base)
        if base == 1:
            return 1
        return None if base is None or not e.exp.is_Integer else base ** abs(int(e.exp))
    if e.is_Mul or e.is_Add:
        signs = [sign_of(a) for a in e.args]
        if any(s is None for s in signs):
            return None
        if e.is_Add:
            return signs[0] if len(set(signs)) == 1 else None
        out = 1
        for s in signs:
            out *= s or 1
        return out
    return None


def one_root(by_power: Mapping[int, Any]) -> bool:
    """One positive root for all values of the symbols: one change of sign (Descartes)."""
    signs = [sign_of(by_power[e]) for e in sorted(by_power)]
    unclear = [k for k, s in enumerate(signs) if s is None]
    if len(unclear) > 1:
        return False
    known = [s for s in signs if s is not None]
    changes = sum(a != b for a, b in pairwise(known))
    if not unclear:
        return changes == 1
    (k,) = unclear  # either sign gives one change only between two of opposite sign
    return 0 < k < len(signs) - 1 and changes == 1 and signs[k - 1] != signs[k + 1]


def _closed(by_power: Mapping[int, Any]) -> Any | None:
    exponents = sorted(by_power)
    if exponents[0] != 0 or len(exponents) > 3:
        return None
    step = gcd(*exponents)
    high = exponents[-1]
    low_sign, high_sign = sign_of(by_power[0]), sign_of(by_power[high])
    if low_sign is None or high_sign is None or low_sign == high_sign:
        return None
    a, c = by_power[high] * high_sign, by_power[0] * low_sign
    power = Rational(1, step)
    if len(exponents) == 2:
        return c**power / a**power
    if high != 2 * step or exponents[1] != step:
        return None
    b = by_power[step] * high_sign
    if sympy.count_ops(a) + sympy.count_ops(c) <= _SHORT:
        a, c = sympy.factor(a), sympy.factor(c)  # what they share with the law around cancels
    # 2c/(b + sqrt(b^2 + 4ac)) does not cancel where b > 0, and holds for a = 0
    return (2 * c / (b + sympy.sqrt(b**2 + 4 * a * c))) ** power
