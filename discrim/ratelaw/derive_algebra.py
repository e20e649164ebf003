"""Exact rational functions for the derivation: monomials, quotients with factored denominators.

Polynomials are sympy ring elements over the whole numbers whose generators stand for
``symbol**(1/q)``, so that the square roots of dissociative adsorption stay polynomial.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cmp_to_key
from typing import Any

import sympy
from sympy import ZZ, Rational
from sympy.polys.rings import PolyElement, PolyRing, ring

from discrim.ratelaw.derive_factors import common_factor, exact_quotient, square_free

MAX_TERMS = 6_000  # of all trees of a network; a law that needs more is kept implicit


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
    written: dict[PolyElement, Any] = field(default_factory=dict, repr=False, compare=False)

    @classmethod
    def over(cls, roots: Mapping[sympy.Symbol, int]) -> Algebra:
        symbols = tuple(roots)
        made = ring([f"g{i}" for i in range(len(symbols))], ZZ)[0]
        return cls(symbols, tuple(roots.values()), made, {s: i for i, s in enumerate(symbols)})

    def exponents(self, powers: Exponents) -> list[int]:
        """Whole exponents of the generators, from powers of the symbols."""
        out = [0] * len(self.symbols)
        for symbol, e in powers.items():
            i = self.index[symbol]
            whole = e * self.roots[i]
            assert whole.denominator == 1
            out[i] = int(whole)
        return out

    def monomial(self, powers: Exponents) -> tuple[PolyElement, PolyElement]:
        """Numerator and denominator of a product of powers of the symbols."""
        whole = self.exponents(powers)
        up = [max(e, 0) for e in whole]
        down = [max(-e, 0) for e in whole]
        return (
            self.ring.from_dict({tuple(up): ZZ(1)}),
            self.ring.from_dict({tuple(down): ZZ(1)}),
        )

    def expr(self, poly: PolyElement) -> Any:
        """The polynomial as a sympy expression in the symbols."""
        if poly not in self.written:
            self.written[poly] = self._expr(poly)
        return self.written[poly]

    def _expr(self, poly: PolyElement) -> Any:
        """Products put together in the order that sympy keeps them in, which costs it most."""
        powers = {(i, e) for m in poly.monoms() for i, e in enumerate(m) if e}
        factors = {(i, e): self.symbols[i] ** Rational(e, self.roots[i]) for i, e in powers}
        if len(poly) < 20 or any(f.is_Mul for f in factors.values()):
            return sympy.Add(
                *(
                    sympy.Mul(int(c), *(factors[i, e] for i, e in enumerate(m) if e))
                    for m, c in poly.terms()
                )
            )

        def compare(a: tuple[int, Any], b: tuple[int, Any]) -> int:
            return int(factors[a].compare(factors[b]))

        order = sorted(powers, key=cmp_to_key(compare))
        rank = {key: n for n, key in enumerate(order)}
        terms = []
        for m, c in poly.terms():
            held = sorted(((i, e) for i, e in enumerate(m) if e), key=lambda at: rank[at])
            args = [factors[key] for key in held]
            if c != 1:
                args.insert(0, sympy.Integer(int(c)))
            terms.append(sympy.Mul._from_args(args))
        return sympy.Add(*terms)


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
        content, factors = square_free(poly)
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
                for piece, e in (
                    (g, ea + eb),
                    (exact_quotient(a, g), ea),
                    (exact_quotient(b, g), eb),
                ):
                    if not piece.is_ground:
                        parts[piece] = parts.get(piece, 0) + e
                changed = True
                break
            if changed:
                break
    kept: dict[PolyElement, int] = {}
    waiting = list(parts.items())
    while waiting:
        factor, left = waiting.pop()
        while left:
            g = common_factor(top, factor)
            if g.is_ground:
                kept[factor] = left
                break
            if len(g) != len(factor):  # a part of it
                waiting += [(g, left), (exact_quotient(factor, g), left)]
                break
            top = exact_quotient(top, factor)
            left -= 1
    if scale != 1:
        common = ZZ.gcd(scale, top.content())
        top = top.quo_ground(common)
        scale = scale // common
        if scale != 1:
            kept[r(scale)] = 1
    ordered = list(kept.items())
    if len(ordered) > 1:
        ordered.sort(key=lambda item: (len(item[0]), item[0].terms()))
    return Quotient(top, tuple(ordered))


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


Factors = list[tuple[PolyElement, int]]


def total(
    terms: Sequence[tuple[Factors, Factors]], r: PolyRing, *, cancel: bool = True
) -> Quotient:
    """Sum of quotients of products, over one common denominator made in one go.

    Without ``cancel`` numerator and denominator may share factors: they cancel for certain against
    the same polynomials elsewhere, where a shortened form would not.
    """
    over: list[tuple[PolyElement, dict[PolyElement, int]]] = []
    common: dict[PolyElement, int] = {}
    for above, below in terms:
        powers: dict[PolyElement, int] = {}
        for sign, parts in ((1, above), (-1, below)):
            for poly, e in parts:
                powers[poly] = powers.get(poly, 0) + sign * e
        top = r.one
        under: dict[PolyElement, int] = {}
        for poly, e in powers.items():
            if e > 0:
                top = top * poly**e
            elif e < 0 and poly != 1:
                under[poly] = -e
        for poly, e in under.items():
            common[poly] = max(common.get(poly, 0), e)
        over.append((top, under))
    out = r.zero
    for top, under in over:
        for poly, e in common.items():
            if e > under.get(poly, 0):
                top = top * poly ** (e - under.get(poly, 0))
        out = out + top
    if not cancel:
        return Quotient(out, tuple((poly, e) for poly, e in common.items() if e))
    return quotient(out, common.items()) if out else Quotient(r.zero)


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
                exact_quotient(pivot * x - f * y, previous) if (x or y) else x
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
    if exact_quotient(determinant, common).LC < 0:
        common = -common
    return [exact_quotient(x, common) for x in numerators], exact_quotient(determinant, common)
