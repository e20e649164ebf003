"""Exact rational functions for the derivation: monomials, quotients with factored denominators.

Polynomials are sympy ring elements over the whole numbers whose generators stand for
``symbol**(1/q)``, so that the square roots of dissociative adsorption stay polynomial.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cmp_to_key, lru_cache
from math import gcd
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


# A common or repeated factor survives when all generators run along one line, modulo a prime, so a
# trivial image proves that there is none. A false alarm (chance about 1e-7) costs only time.
_PRIME = 2**31 - 1


@lru_cache(maxsize=128)  # one denominator is compared with many numerators
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
    if a.is_ground or b.is_ground or not a or not b:
        return a.gcd(b)
    return _common([a, b])


def _common(polys: Sequence[PolyElement]) -> PolyElement:
    """Greatest common divisor of polynomials most of which are linear in most of their symbols.

    A symbol that one of them lacks is in no common factor, so that the others are split into their
    coefficients. p = a x + b has one irreducible factor with x, p over the content of a and b: it
    divides the others or it does not; the rest of the factor is common to a, b and the coefficients
    of the others. General algorithms take minutes for the sums over trees of a network.
    """
    r = polys[0].ring
    polys = [p for p in polys if p]
    if len(polys) == 1:
        return polys[0]
    number = ZZ(gcd(*(int(p.content()) for p in polys)))
    if any(p.is_ground for p in polys):
        return r(number)
    lows = [lowest(p) for p in polys]
    shared = r.from_dict({tuple(map(min, *lows)): number})
    polys = [lowered(p, low) if any(low) else p for p, low in zip(polys, lows, strict=True)]
    if any(len(p) == 1 for p in polys):
        return shared
    polys = sorted({p.primitive()[1] if p.LC > 0 else (-p).primitive()[1] for p in polys}, key=len)
    if len(polys) == 1:
        return shared * polys[0]
    first = _image(polys[0])
    if first[0]:
        for p in polys[1:]:
            other = _image(p)
            if other[0] and _degree_of_gcd(first, other) == 0:
                return shared
    held = [_held(p) for p in polys]
    everywhere = set.intersection(*held)
    for p, symbols in zip(polys, held, strict=True):
        if symbols - everywhere:
            x = min(symbols - everywhere)
            rest = [q for q in polys if q is not p]
            return shared * _common([*rest, *coefficients(p, x).values()])
    for p in polys:
        linear = [x for x in sorted(everywhere) if p.degree(x) == 1]
        if not linear:
            continue
        x = linear[0]
        parts = coefficients(p, x)
        content = _common(list(parts.values()))
        core = exact_quotient(p, content)
        rest = [q for q in polys if q is not p]
        inner = r.one
        if not content.is_ground:
            inner = _common([content, *(c for q in rest for c in coefficients(q, x).values())])
        if all(_divides(core, q) for q in rest):
            inner = inner * core
        return shared * inner
    out = polys[0]
    for p in polys[1:]:
        out = out.gcd(p)
    return shared * out


def _held(poly: PolyElement) -> set[int]:
    """Indices of the generators in it."""
    return {i for m in poly.monoms() for i, e in enumerate(m) if e}


def _divides(a: PolyElement, b: PolyElement) -> bool:
    u, v = _image(a), _image(b)
    if u[0] and v[0] and _degree_of_gcd(u, v) < len(u) - 1:
        return False
    try:
        exact_quotient(b, a)
    except ValueError:
        return False
    return True


def coefficients(poly: PolyElement, x: int) -> dict[int, PolyElement]:
    """Coefficients by power of generator ``x``."""
    apart: dict[int, dict[tuple[int, ...], Any]] = {}
    for m, c in poly.items():
        apart.setdefault(m[x], {})[(*m[:x], 0, *m[x + 1 :])] = c
    return {e: poly.ring.from_dict(terms) for e, terms in apart.items()}


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


@lru_cache(maxsize=128)
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


@lru_cache(maxsize=128)
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
    c, factors = factors_of(primitive)
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
