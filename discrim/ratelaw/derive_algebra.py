"""Exact rational functions for the derivation: monomials, quotients with factored denominators.

Polynomials are sympy ring elements over the whole numbers whose generators stand for
``symbol**(1/q)``, so that the square roots of dissociative adsorption stay polynomial.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import sympy
from sympy import ZZ, Rational
from sympy.polys.rings import PolyElement, PolyRing, ring

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
    for factor, e in parts.items():
        left = e
        while left:
            g = common_factor(top, factor)
            if g.is_ground:
                break
            if g != factor and g != -factor:
                rest = exact_quotient(factor, g)
                inner = quotient(top, [(g, left), (rest, left)])
                others = [(p, n) for p, n in parts.items() if p != factor]
                return quotient(inner.top, [*inner.bottom, *others, (r(scale), 1)])
            top = exact_quotient(top, factor)
            left -= 1
        if left:
            kept[factor] = left
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


# A common or repeated factor survives when all generators run along one line, modulo a prime, so a
# trivial image proves that there is none. A false alarm (chance about 1e-7) costs only time.
_PRIME = 2**31 - 1


def _image(poly: PolyElement) -> list[int]:
    """Coefficients modulo the prime, highest first, of ``poly`` along the line."""
    exponents = np.array(poly.monoms(), dtype=np.int64)
    degree = int(exponents.sum(axis=1).max())
    at = np.arange(1, degree + 2, dtype=np.int64)
    values = np.array([int(c) % _PRIME for c in poly.coeffs()], dtype=np.int64)[:, None]
    for i in np.flatnonzero(exponents.any(axis=0)):
        along = (at * (104_729 + 7_919 * i) + 15_485_863 + 611_953 * i * i) % _PRIME
        powers = [np.ones_like(along)]
        for _ in range(int(exponents[:, i].max())):
            powers.append(powers[-1] * along % _PRIME)
        values = values * np.array(powers)[exponents[:, i]] % _PRIME
    return _through([int(v) for v in values.sum(axis=0) % _PRIME])


def _through(values: list[int]) -> list[int]:
    """The polynomial with these values at 1, 2, 3, ..., modulo the prime (Newton's form)."""
    n = len(values)
    table = list(values)
    for k in range(1, n):
        inverse = pow(k, _PRIME - 2, _PRIME)
        for i in range(n - 1, k - 1, -1):
            table[i] = (table[i] - table[i - 1]) * inverse % _PRIME
    out = [table[-1]]
    for k in range(n - 2, -1, -1):
        # out * (t - (k + 1)) + table[k], highest coefficient first
        shifted = [*out, 0]
        for i, c in enumerate(out):
            shifted[i + 1] = (shifted[i + 1] - (k + 1) * c) % _PRIME
        shifted[-1] = (shifted[-1] + table[k]) % _PRIME
        out = shifted
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
    """Greatest common divisor; fast when there is none but a monomial."""
    r = a.ring
    if a.is_ground or b.is_ground or not a or not b:
        return a.gcd(b)
    low_a, low_b = lowest(a), lowest(b)
    shared = tuple(map(min, low_a, low_b))
    if any(low_a) or any(low_b):
        a, b = lowered(a, low_a), lowered(b, low_b)
    monomial = r.from_dict({shared: ZZ.gcd(a.content(), b.content())})
    if len(a) == 1 or len(b) == 1:
        return monomial
    if a == b or a == -b:
        return a * r.from_dict({shared: ZZ(1)})
    u, v = _image(a), _image(b)
    if u[0] and v[0] and _degree_of_gcd(u, v) == 0:
        return monomial
    return a.gcd(b) * r.from_dict({shared: ZZ(1)})


def exact_quotient(a: PolyElement, b: PolyElement) -> PolyElement:
    """a/b where b divides a; raises ``ValueError`` where it does not.

    Monomials are whole numbers in order of size, the largest left taken from a heap: sympy's own
    division looks through all terms for each step.
    """
    r = a.ring
    if not a or b == 1:
        return a
    if len(b) == 1:
        ((low, c),) = b.items()
        if c != 1:
            a = a.quo_ground(c)
        return lowered(a, low)
    width = r.ngens
    shifts = [_EXPONENT_BITS * (width - 1 - i) for i in range(width)]
    mask = (1 << _EXPONENT_BITS) - 1

    def number(m: Sequence[int]) -> int:
        key = 0
        for e in m:
            key = (key << _EXPONENT_BITS) | e
        return key

    left = {number(m): c for m, c in a.items()}
    divisor = sorted(((number(m), c) for m, c in b.items()), reverse=True)
    (lead, lead_c), rest = divisor[0], divisor[1:]
    heap = [-k for k in left]
    heapq.heapify(heap)
    out = {}
    while heap:
        key = -heapq.heappop(heap)
        c = left.pop(key, 0)
        if not c:
            continue
        q, over = divmod(c, lead_c)
        step = key - lead
        if over or step < 0:
            raise ValueError("not divisible")
        out[step] = q
        for k, d in rest:
            at = step + k
            before = left.get(at)
            if before is None:
                left[at] = -q * d
                heapq.heappush(heap, -at)
            else:
                left[at] = before - q * d
    return r.from_dict({tuple((k >> s) & mask for s in shifts): ZZ(c) for k, c in out.items()})


_EXPONENT_BITS = 20


def lowered(poly: PolyElement, low: Sequence[int]) -> PolyElement:
    """Divided by a monomial that divides every term."""
    return poly.ring.from_dict({tuple(map(int.__sub__, m, low)): c for m, c in poly.items()})


def lowest(poly: PolyElement) -> tuple[int, ...]:
    """The lowest power of each generator in any term."""
    monoms = poly.monoms()
    return tuple(map(min, *monoms)) if len(monoms) > 1 else tuple(monoms[0])


def _repeats(poly: PolyElement) -> bool:
    """False when it is proven that no factor of ``poly`` is repeated."""
    u = _image(poly)
    degree = len(u) - 1
    slope = [c * (degree - i) % _PRIME for i, c in enumerate(u[:-1])]
    return not u[0] or _degree_of_gcd(u, slope) > 0


def factors_of(poly: PolyElement) -> tuple[int, list[tuple[PolyElement, int]]]:
    """Content and irreducible factors.

    A polynomial a x + b is irreducible if a and b have no common factor; steady states give
    polynomials of degree one in each constant, so that this settles nearly all of them.
    """
    r = poly.ring
    content, rest = poly.primitive()
    if rest.LC < 0:
        content, rest = -content, -rest
    low = lowest(rest)
    out = [(r.gens[i], e) for i, e in enumerate(low) if e]
    if out:
        rest = lowered(rest, low)
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
        return int(content) * number, [*out, *inner, *factors_of(exact_quotient(rest, common))[1]]
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
    low = lowest(primitive)
    gens = []
    if any(low):
        common = r.from_dict({low: ZZ(1)})
        primitive = lowered(primitive, low)
        gens = _square_free(common)[1]
    if not _repeats(primitive):
        return content, [*gens, (primitive, 1)]
    c, factors = primitive.sqf_list()
    return content * c, [*gens, *factors]


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
