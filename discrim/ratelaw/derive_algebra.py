"""Exact rational functions for the derivation: monomials, quotients with factored denominators.

Polynomials are sympy ring elements over the whole numbers whose generators stand for
``symbol**(1/q)``, so that the square roots of dissociative adsorption stay polynomial.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import sympy
from sympy import ZZ, Rational
from sympy.polys.rings import PolyElement, PolyRing, ring

MAX_TERMS = 250  # a law with more terms is of no use to anybody, and takes minutes

Exponents = Mapping[sympy.Symbol, Fraction]


class TooLarge(Exception):
    """A polynomial has more than ``MAX_TERMS`` terms."""


@dataclass(frozen=True, slots=True)
class Algebra:
    """A polynomial ring in roots of symbols; generator i is ``symbols[i]**(1/roots[i])``."""

    symbols: tuple[sympy.Symbol, ...]
    roots: tuple[int, ...]
    ring: PolyRing
    index: Mapping[sympy.Symbol, int]

    @classmethod
    def over(cls, roots: Mapping[sympy.Symbol, int]) -> Algebra:
        symbols = tuple(roots)
        made = ring([f"g{i}" for i in range(len(symbols))], ZZ)[0]
        return cls(symbols, tuple(roots.values()), made, {s: i for i, s in enumerate(symbols)})

    def monomial(self, exponents: Exponents) -> tuple[PolyElement, PolyElement]:
        """Numerator and denominator of a product of powers of the symbols."""
        up = [0] * len(self.symbols)
        down = [0] * len(self.symbols)
        for symbol, e in exponents.items():
            i = self.index[symbol]
            whole = e * self.roots[i]
            assert whole.denominator == 1
            (up if whole > 0 else down)[i] = abs(int(whole))
        return (
            self.ring.from_dict({tuple(up): ZZ(1)}),
            self.ring.from_dict({tuple(down): ZZ(1)}),
        )

    def expr(self, poly: PolyElement) -> Any:
        """The polynomial as a sympy expression in the symbols."""
        terms = [self.term(m, c) for m, c in poly.terms()]
        return sympy.Add(*terms)

    def term(self, monomial: Sequence[int], coefficient: Any = 1) -> Any:
        powers = [
            self.symbols[i] ** Rational(e, self.roots[i]) for i, e in enumerate(monomial) if e
        ]
        return sympy.Mul(sympy.Integer(int(coefficient)), *powers)


@dataclass(frozen=True, slots=True)
class Quotient:
    """``top`` over a product of powers of polynomials, without common factors."""

    top: PolyElement
    bottom: tuple[tuple[PolyElement, int], ...] = ()

    def expr(self, algebra: Algebra) -> Any:
        below = [algebra.expr(d) ** -e for d, e in self.bottom]
        content = self.top.content() if self.top else ZZ(1)
        if self.top and len(self.top) > 1 and content != 1:
            inner = algebra.expr(self.top.quo_ground(content))
            return sympy.Mul(sympy.Integer(int(content)), inner, *below)
        return sympy.Mul(algebra.expr(self.top), *below)


def quotient(top: PolyElement, bottom: Iterable[tuple[PolyElement, int]]) -> Quotient:
    """Collect equal denominators, split each into squarefree parts, cancel common factors."""
    r = top.ring
    if not top:
        return Quotient(r.zero)
    parts: dict[PolyElement, int] = {}
    scale = ZZ(1)
    for poly, power in bottom:
        if power <= 0:
            continue
        content, factors = _square_free(poly)
        scale *= content**power
        for factor, e in factors:
            parts[factor] = parts.get(factor, 0) + e * power
    changed = True
    while changed:  # denominators that share a factor are split, so that none is counted twice
        changed = False
        polys = [p for p in parts if parts[p]]
        for i, a in enumerate(polys):
            for b in polys[i + 1 :]:
                g = common_factor(a, b)
                if g.is_ground:
                    continue
                ea, eb = parts.pop(a), parts.pop(b)
                for piece, e in ((g, ea + eb), (a.exquo(g), ea), (b.exquo(g), eb)):
                    if not piece.is_ground:
                        parts[piece] = parts.get(piece, 0) + e
                changed = True
                break
            if changed:
                break
    kept: dict[PolyElement, int] = {}
    for factor, e in parts.items():
        left = e
        while left:
            g = common_factor(top, factor)
            if g.is_ground:
                break
            if g != factor and g != -factor:
                rest = factor.exquo(g)
                inner = quotient(top, [(g, left), (rest, left)])
                others = [(p, n) for p, n in parts.items() if p != factor]
                return quotient(inner.top, [*inner.bottom, *others, (r(scale), 1)])
            top = top.exquo(factor)
            left -= 1
        if left:
            kept[factor] = left
    if scale != 1:
        common = ZZ.gcd(scale, top.content())
        top = top.quo_ground(common)
        scale = scale // common
        if scale != 1:
            kept[r(scale)] = 1
    ordered = sorted(kept.items(), key=lambda item: (len(item[0]), str(item[0])))
    return Quotient(top, tuple(ordered))


# Points and modulus of the tests below: a common or repeated factor survives evaluation, so a
# trivial image proves that there is none; the chance of a false alarm is about 1e-17 a test, and a
# false alarm costs only time.
_PRIME = 2**61 - 1


def _image(poly: PolyElement, x: int) -> list[int]:
    """Coefficients modulo the prime, highest first, of ``poly`` in generator ``x`` at the point."""
    degree = poly.degree(x)
    out = [0] * (degree + 1)
    points = [pow(7, 1001 + 37 * i, _PRIME) for i in range(poly.ring.ngens)]
    for monomial, c in poly.terms():
        value = int(c) % _PRIME
        for i, e in enumerate(monomial):
            if e and i != x:
                value = value * pow(points[i], e, _PRIME) % _PRIME
        out[degree - monomial[x]] = (out[degree - monomial[x]] + value) % _PRIME
    return out


def _degree_of_gcd(a: list[int], b: list[int]) -> int:
    """Degree of the greatest common divisor of two images, Euclid modulo the prime."""
    while b:
        inverse = pow(b[0], _PRIME - 2, _PRIME)
        a = list(a)
        while len(a) >= len(b):
            f = a[0] * inverse % _PRIME
            for i, y in enumerate(b):
                a[i] = (a[i] - f * y) % _PRIME
            while a and not a[0]:
                a.pop(0)
        a, b = b, a
    return len(a) - 1


def common_factor(a: PolyElement, b: PolyElement) -> PolyElement:
    """Greatest common divisor; fast when there is none but a number."""
    for x in range(a.ring.ngens):
        if a.degree(x) > 0 and b.degree(x) > 0:
            u, v = _image(a, x), _image(b, x)
            if not u[0] or not v[0] or _degree_of_gcd(u, v) > 0:
                return a.gcd(b)
    return a.ring(ZZ.gcd(a.content(), b.content()))


def _repeats(poly: PolyElement) -> bool:
    """False when it is proven that no factor of ``poly`` is repeated."""
    for x in range(poly.ring.ngens):
        degree = poly.degree(x)
        if degree < 2:
            continue
        u = _image(poly, x)
        slope = [c * (degree - i) % _PRIME for i, c in enumerate(u[:-1])]
        if not u[0] or _degree_of_gcd(u, slope) > 0:
            return True
    return False


def factors_of(poly: PolyElement) -> tuple[int, list[tuple[PolyElement, int]]]:
    """Content and irreducible factors.

    A polynomial a x + b is irreducible if a and b have no common factor; steady states give
    polynomials of degree one in each constant, so that this settles nearly all of them.
    """
    r = poly.ring
    content, rest = poly.primitive()
    if rest.LC < 0:
        content, rest = -content, -rest
    lowest = tuple(min(m[i] for m in rest.monoms()) for i in range(r.ngens))
    out = [(r.gens[i], e) for i, e in enumerate(lowest) if e]
    rest = rest.exquo(r.from_dict({lowest: ZZ(1)}))
    if rest.is_ground:
        return int(content), out
    for x in range(r.ngens):
        if rest.degree(x) != 1:
            continue
        slope = r.from_dict({(*m[:x], 0, *m[x + 1 :]): c for m, c in rest.terms() if m[x] == 1})
        constant = r.from_dict({m: c for m, c in rest.terms() if m[x] == 0})
        common = common_factor(slope, constant)
        if common.is_ground:
            return int(content), [*out, (rest, 1)]
        number, inner = factors_of(common)
        return int(content) * number, [*out, *inner, *factors_of(rest.exquo(common))[1]]
    number, found = rest.factor_list()
    return int(content) * int(number), [*out, *found]


def _square_free(poly: PolyElement) -> tuple[Any, list[tuple[PolyElement, int]]]:
    r = poly.ring
    if poly.is_ground:
        return poly.LC, []
    if len(poly) == 1:
        monomial, c = next(iter(poly.terms()))
        gens = [
            (r.from_dict({tuple(int(j == i) for j in range(r.ngens)): ZZ(1)}), e)
            for i, e in enumerate(monomial)
            if e
        ]
        return c, gens
    content, primitive = poly.primitive()
    if primitive.LC < 0:
        content, primitive = -content, -primitive
    lowest = tuple(min(m[i] for m in primitive.monoms()) for i in range(r.ngens))
    gens = []
    if any(lowest):
        common = r.from_dict({lowest: ZZ(1)})
        primitive = primitive.exquo(common)
        gens = _square_free(common)[1]
    if not _repeats(primitive):
        return content, [*gens, (primitive, 1)]
    c, factors = primitive.sqf_list()
    return content * c, [*gens, *factors]


def ratio(
    above: Iterable[tuple[PolyElement, int]], below: Iterable[tuple[PolyElement, int]]
) -> Quotient:
    """Quotient of products of powers; equal factors cancel before anything is multiplied out."""
    powers: dict[PolyElement, int] = {}
    for sign, parts in ((1, above), (-1, below)):
        for poly, e in parts:
            powers[poly] = powers.get(poly, 0) + sign * e
    top = None
    for poly, e in powers.items():
        if e > 0:
            top = poly**e if top is None else top * poly**e
    if top is None:
        top = next(iter(powers)).ring.one
    return quotient(top, [(poly, -e) for poly, e in powers.items() if e < 0])


def add(a: Quotient, b: Quotient) -> Quotient:
    """Sum over the least common denominator."""
    if not a.top:
        return b
    if not b.top:
        return a
    da, db = dict(a.bottom), dict(b.bottom)
    r = a.top.ring
    ta, tb = a.top, b.top
    common: dict[PolyElement, int] = {}
    for p in {**da, **db}:
        e = max(da.get(p, 0), db.get(p, 0))
        common[p] = e
        ta = ta * p ** (e - da.get(p, 0))
        tb = tb * p ** (e - db.get(p, 0))
    return quotient(ta + tb, common.items()) if ta + tb else Quotient(r.zero)


def times(a: Quotient, factor: Fraction) -> Quotient:
    r = a.top.ring
    if not factor:
        return Quotient(r.zero)
    top = a.top * ZZ(factor.numerator)
    if factor.denominator == 1:
        return (
            Quotient(top, a.bottom)
            if not any(p.is_ground for p, _ in a.bottom)
            else quotient(top, a.bottom)
        )
    return quotient(top, [*a.bottom, (r(ZZ(factor.denominator)), 1)])


def solve_linear(
    matrix: list[list[PolyElement]], right: list[PolyElement], one: PolyElement
) -> tuple[list[PolyElement], PolyElement] | None:
    """Numerators and common denominator of the solution of a square system; None if singular.

    Fraction-free elimination (Bareiss 1968, Mathematics of Computation 22, 565-578), so that every
    division is exact and the denominator is the determinant, up to sign.
    """
    n = len(matrix)
    rows = [[*matrix[i], right[i]] for i in range(n)]
    previous = one
    for k in range(n):
        candidates = [r for r in range(k, n) if rows[r][k]]
        if not candidates:
            return None
        p = min(candidates, key=lambda r: len(rows[r][k]))
        rows[k], rows[p] = rows[p], rows[k]
        pivot = rows[k][k]
        for i in range(n):
            if i == k:
                continue
            f = rows[i][k]
            rows[i] = [
                (pivot * x - f * y).exquo(previous) if (x or y) else x
                for x, y in zip(rows[i], rows[k], strict=True)
            ]
        if max(len(x) for row in rows for x in row) > MAX_TERMS:
            raise TooLarge
        previous = pivot
    determinant = rows[n - 1][n - 1] if n else one
    numerators = [rows[i][n] for i in range(n)]
    common = determinant
    for x in numerators:
        if common.is_ground and abs(common.LC) == 1:
            break
        if x:
            common = common_factor(common, x)
    if determinant.exquo(common).LC < 0:
        common = -common
    return [x.exquo(common) for x in numerators], determinant.exquo(common)
