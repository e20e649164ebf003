"""The leading term c*x^n of an expression as an amount x goes to zero or to infinity.

Exact, by one walk: a product multiplies leading terms, a power raises one, a sum keeps the terms
of extreme exponent. Where these cancel identically, the sum is put over one denominator and the
next terms are taken. Coefficients and exponents are sympy expressions; exponents are rational, or
hold the symbol of an order. An unknown that one balance fixes gets its exponent from the Newton
polygon of that balance (V. A. Puiseux, Journal de mathematiques pures et appliquees 15 (1850);
from memory): the terms on one edge of the convex hull of (power of the unknown, exponent of x)
balance one another.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import sympy

from discrim.ratelaw.implicit import ImplicitValue

_ZERO, _ONE = sympy.Integer(0), sympy.Integer(1)
_LONGEST = 400  # terms of a sum that is put over one denominator


@dataclass(frozen=True, slots=True)
class Leading:
    """``coefficient * x**order``; the coefficient does not hold x and is not zero.

    ``exact``: the expression is this power of x, nothing was left out. ``positive``: symbols of
    orders that were taken as positive to tell which term dominates.
    """

    order: Any
    coefficient: Any
    exact: bool = False
    positive: tuple[Any, ...] = ()


class NoLeadingTerm(Exception):
    """The expression has no leading power of x that can be given; the text says why."""


def leading(expr: Any, x: sympy.Symbol, *, high: bool) -> Leading:
    """The term that dominates ``expr`` as the amount ``x`` goes to 0 (or, ``high``, to infinity).

    Symbols are taken as positive, so that a sum of terms of one sign never vanishes; orders only
    where it matters, and then it is said (``Leading.positive``).

    Raises
    ------
    NoLeadingTerm
        where the expression vanishes, holds x in an exponent or a function, compares orders of
        unknown difference, or holds unknowns of several balances.
    """
    walk = _Walk(x, high)
    found = walk.of(expr)
    positive = tuple(sorted(walk.positive, key=str))
    return Leading(found.order, found.coefficient, walk.exact, positive)


def tidy(expr: Any) -> Any:
    """``expr`` with the common factors of its sums cancelled between above and below."""
    number, rest = expr.as_coeff_Mul()
    out = [number]
    for factor in sympy.Mul.make_args(rest):
        base, power = (factor.base, factor.exp) if factor.is_Pow else (factor, _ONE)
        if base.is_Add:
            common, bare = _common(base)
            out += [_power(common, power), _power(bare, power)]
        else:
            out.append(factor)
    return sympy.Mul(*out)


def _common(total: Any) -> tuple[Any, Any]:
    """A sum as (greatest common monomial) * (sum)."""
    number, total = total.primitive()
    if not total.is_Add:
        return number, total
    powers = [t.as_powers_dict() for t in total.args]
    shared = {}
    for base, p in powers[0].items():
        if base.is_Number or not p.is_Rational:
            continue
        here = [d.get(base) for d in powers[1:]]
        if all(q is not None and q.is_Rational and (q > 0) == (p > 0) for q in here):
            shared[base] = min([p, *here], key=abs)
    if not shared:
        return number, total
    factor = sympy.Mul(*(sympy.Pow(b, p) for b, p in shared.items()))
    return number * factor, sympy.Add(*(t / factor for t in total.args))


class _Walk:
    def __init__(self, x: sympy.Symbol, high: bool) -> None:
        self.x = x
        self.high = high
        self.free: dict[Any, bool] = {}
        self.exact = True
        self.positive: set[Any] = set()

    def is_free(self, e: Any) -> bool:
        """Whether ``e`` does not hold x."""
        found = self.free.get(e)
        if found is None:
            if isinstance(e, ImplicitValue):
                found = self.x not in e.free_symbols
            else:
                found = e != self.x and all(self.is_free(a) for a in e.args)
            self.free[e] = found
        return found

    def of(self, e: Any) -> Leading:
        if e == 0:
            raise NoLeadingTerm("the law vanishes")
        if e == self.x:
            return Leading(_ONE, _ONE)
        if self.is_free(e):
            return Leading(_ZERO, e)
        if e.is_Mul:
            parts = [self.of(a) for a in e.args]
            return Leading(
                sympy.Add(*(p.order for p in parts)), sympy.Mul(*(p.coefficient for p in parts))
            )
        if e.is_Add:
            return self.of_sum(e)
        if isinstance(e, ImplicitValue):
            return self.of_implicit(e)
        if e.is_Pow and self.is_free(e.exp):
            return self.of_power(e)
        raise NoLeadingTerm("its amount stands in an exponent or a function")

    def of_power(self, e: Any) -> Leading:
        inner = self.of(e.base)
        if e.exp.is_Integer:
            return Leading(inner.order * e.exp, _power(inner.coefficient, e.exp))
        if not _positive(inner.coefficient):
            raise NoLeadingTerm("the sign under a root is not known")
        return Leading(inner.order * e.exp, _power(inner.coefficient, e.exp))

    def of_sum(self, e: Any) -> Leading:
        parts = [self.of(a) for a in e.args]
        extreme = parts[0].order
        for p in parts[1:]:
            if self.beyond(p.order, extreme):
                extreme = p.order
        kept = [p.coefficient for p in parts if p.order == extreme]
        self.exact = self.exact and len(kept) == len(parts)
        total = kept[0] if len(kept) == 1 else sympy.Add(*kept)
        if _vanishes(total):
            return self.over_one_denominator(e)
        return Leading(extreme, total)

    def beyond(self, order: Any, other: Any) -> bool:
        """Whether x**order outweighs x**other."""
        if order == other:
            return False
        gap = order - other
        if not gap.is_number:
            gap = sympy.expand(gap)
            if gap == 0:
                return False
            if not gap.is_number:
                sign = sign_of(gap)
                if not sign:
                    raise NoLeadingTerm("which term dominates depends on the orders")
                self.positive |= gap.free_symbols
                return (sign > 0) == self.high
        return bool(gap > 0) == self.high

    def over_one_denominator(self, e: Any) -> Leading:
        """The leading terms of a sum cancel: the next ones, from numerator and denominator."""
        self.exact = False
        numer, denom = sympy.fraction(sympy.together(e))
        top, bottom = (self.leading_of_polynomial(part) for part in (numer, denom))
        return Leading(top.order - bottom.order, top.coefficient / bottom.coefficient)

    def leading_of_polynomial(self, part: Any) -> Leading:
        total = sympy.expand(part)
        by_order: dict[Any, list[Any]] = {}
        terms = sympy.Add.make_args(total)
        if len(terms) > _LONGEST:
            raise NoLeadingTerm("terms cancel in a law too long to order them")
        for term in terms:
            order, rest = _ZERO, []
            for factor in sympy.Mul.make_args(term):
                base, power = factor.as_base_exp()
                if base == self.x:
                    order += power
                elif self.is_free(factor):
                    rest.append(factor)
                else:
                    raise NoLeadingTerm("its leading terms cancel under a root")
            by_order.setdefault(order, []).append(sympy.Mul(*rest))
        summed = {o: sympy.Add(*c) for o, c in by_order.items()}
        left = {o: c for o, c in summed.items() if not _vanishes(c)}
        if not left:
            raise NoLeadingTerm("the law vanishes")
        extreme = next(iter(left))
        for order in left:
            if self.beyond(order, extreme):
                extreme = order
        return Leading(extreme, left[extreme])

    def of_implicit(self, e: ImplicitValue) -> Leading:
        """Newton polygon of the one balance that fixes the unknown, by its smallest positive root."""
        self.exact = False
        if len(e.unknowns) != 1:
            raise NoLeadingTerm("no closed form")
        (z,), (equation,) = e.unknowns, e.equations
        numer = sympy.fraction(sympy.together(equation))[0]
        poly = sympy.Poly(numer, z)
        points = []
        for (power,), c in sorted(poly.terms()):
            lead = self.of(c)
            points.append((power, lead.order, lead.coefficient, sign_of(lead.coefficient)))
        if not all(p[1].is_Rational for p in points):
            raise NoLeadingTerm("no closed form")
        side = -1 if self.high else 1
        hull: list[tuple[Any, ...]] = []
        for p in points:  # lower hull in the exponents (upper for high), by monotone chain
            while len(hull) > 1 and side * _turn(hull[-2], hull[-1], p) < 0:
                hull.pop()
            hull.append(p)
        # Points on an edge are kept, so that neighbours in line belong to one edge. From left to
        # right the edges give larger and larger roots, and the value is the smallest positive one.
        edges = list(_edges(hull))
        for edge in edges:
            known = all(p[3] for p in edge)
            turns = sum(a[3] != b[3] for a, b in pairwise(edge)) if known else None
            if turns == 0:
                continue  # no positive root
            if turns != 1 and len(edges) > 1:
                break  # two or none (rule of signs of Descartes)
            slope = (edge[-1][1] - edge[0][1]) / (edge[-1][0] - edge[0][0])
            terms = [(p - edge[0][0], c) for p, _, c, _ in edge]
            return Leading(-slope, _edge_root(terms, z, once=turns == 1))
        raise NoLeadingTerm("no closed form")


def _turn(a: tuple[Any, ...], b: tuple[Any, ...], c: tuple[Any, ...]) -> Any:
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])


def _edges(hull: list[tuple[Any, ...]]) -> Iterable[list[tuple[Any, ...]]]:
    edge = hull[:2]
    for p in hull[2:]:
        if _turn(edge[-2], edge[-1], p) == 0:
            edge.append(p)
        else:
            yield edge
            edge = [edge[-1], p]
    yield edge


def _edge_root(terms: list[tuple[int, Any]], z: sympy.Symbol, *, once: bool) -> Any:
    """The positive root of sum c_p z^p; in closed form where the signs change ``once``."""
    constant = terms[0][1]
    if once and len(terms) == 2:
        power, c = terms[1]
        return _power(tidy(-constant / c), sympy.Rational(1, power))
    if once and [p for p, _ in terms] == [0, 1, 2]:
        b, a = terms[1][1], terms[2][1]
        if sign_of(a) < 0:
            a, b, constant = -a, -b, -constant
        if sign_of(b) > 0:  # a z^2 + b z = c in the form that does not cancel
            return -2 * constant / (b + sympy.sqrt(b**2 - 4 * a * constant))
        return (-b + sympy.sqrt(b**2 - 4 * a * constant)) / (2 * a)
    return ImplicitValue(0, (z,), (sympy.Add(*(c * z**p for p, c in terms)),))


def sign_of(e: Any) -> int:
    """1 or -1 if all terms have that sign (symbols are positive), else 0."""
    if e.is_Number:
        return int(sympy.sign(e))
    if e.is_Symbol or isinstance(e, ImplicitValue):
        return 1
    if e.is_Add:
        first = sign_of(e.args[0])
        return first if first and all(sign_of(a) == first for a in e.args[1:]) else 0
    if e.is_Mul:
        out = 1
        for a in e.args:
            out *= sign_of(a)
        return out
    if e.is_Pow:
        inner = sign_of(e.base)
        if inner == 1 or (inner and e.exp.is_Integer and e.exp % 2 == 0):
            return 1
        return inner if inner and e.exp.is_Integer else 0
    if isinstance(e, sympy.exp):
        return 1
    return 0


def _positive(e: Any) -> bool:
    return sign_of(e) == 1


def _power(base: Any, exponent: Any) -> Any:
    """A power of something positive, with powers of its factors multiplied out."""
    if exponent == 1:
        return base
    if base.is_Pow and not isinstance(base, sympy.exp) and _positive(base.base):
        return sympy.Pow(base.base, base.exp * exponent)
    if base.is_Mul and not exponent.is_Integer:
        return sympy.Mul(*(_power(f, exponent) for f in base.args))
    return sympy.Pow(base, exponent)


def _vanishes(total: Any) -> bool:
    """Whether a sum is identically zero.

    Sums of one sign are not, nor sums of different monomials. Others are by exact values at two
    points with primes for symbols: a value that is not zero proves that the sum is not; zero twice
    is settled by expanding.
    """
    if not total.is_Add:
        return bool(total == 0)
    if sign_of(total) or not any(a.has(sympy.Add) for a in total.args):
        return False
    values = total.atoms(ImplicitValue)
    unknown = {v: sympy.Dummy(positive=True) for v in values}
    if values and _may_vanish_by_balance(total, values):
        raise NoLeadingTerm("its leading terms may cancel by the balance of its unknown")
    total = total.xreplace(unknown)
    for first in (1009, 7919):
        if _value(total, first) != 0:
            return False
    numer = sympy.fraction(sympy.together(total))[0]
    return bool(sympy.expand(numer) == 0) or _value(numer, 104729) == 0


def _may_vanish_by_balance(total: Any, values: set[Any]) -> bool:
    """Whether a sum that holds an implicit value may be zero because of what that value solves.

    No, where sum and balance share no root at some rational values of the symbols, as polynomials
    in the unknown; yes, where that cannot be told. Which of several roots is meant may depend on
    the constants, so that one shared root is enough for a yes.
    """
    value = next(iter(values))
    if len(values) > 1 or len(value.unknowns) > 1:
        return True
    (z,), (equation,) = value.unknowns, value.equations
    at, point = 1009, {}
    for s in sorted(total.free_symbols, key=str):
        at = int(sympy.nextprime(at + 50))
        point[s] = sympy.Rational(at, 1000) ** 12  # so that its usual roots are rational too
    sums = [e.xreplace(point) for e in (total.xreplace({value: z}), equation)]
    try:
        one, other = (sympy.Poly(sympy.fraction(sympy.together(e))[0], z) for e in sums)
    except sympy.PolynomialError:
        return True
    if not (one.domain.is_QQ or one.domain.is_ZZ) or not (other.domain.is_QQ or other.domain.is_ZZ):
        return True
    return bool(sympy.gcd(one, other).degree() > 0)


def _value(total: Any, first: int) -> Any:
    """Exact for rational expressions; with roots zero below 1e-40 of the size of its terms."""
    primes: Callable[[int], int] = sympy.nextprime
    at, values = first, {}
    for s in sorted(total.free_symbols, key=str):
        at = primes(at + 50)
        values[s] = sympy.Rational(at, 1000)
    out = total.xreplace(values)
    if out.is_Rational:
        return out
    size = sympy.Add(*(abs(a.xreplace(values)) for a in sympy.Add.make_args(total)))
    return 0 if abs(sympy.N(out, 60)) < sympy.N(size, 60) * sympy.Float("1e-40") else 1
