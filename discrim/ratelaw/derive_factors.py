"""Factors that polynomials share, and into which one splits: exact, and fast for sums over trees.

Polynomials are sympy ring elements over the whole numbers. Sums over the spanning trees of a network
are linear in most of their symbols, which general algorithms make no use of.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from functools import lru_cache
from math import gcd
from typing import Any

import numpy as np
from sympy import ZZ
from sympy.polys.rings import PolyElement

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
    of the others. General algorithms make no use of that and are far slower.
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
def square_free(poly: PolyElement) -> tuple[Any, list[tuple[PolyElement, int]]]:
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
        gens = square_free(common)[1]
    if not _repeats(primitive):
        return content, [*gens, (primitive, 1)]
    c, factors = factors_of(primitive)
    return content * c, [*gens, *factors]
