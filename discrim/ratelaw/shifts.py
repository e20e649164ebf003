"""The polynomials g in the amounts for which g times one law fits into the terms of another.

If g·P_j has only monomials that occur in Q_j, for all polynomials of the laws, then each monomial
p of g moves the Newton polytope of P_j into that of Q_j (the Newton polytope of a product is the
sum of those of its factors). The monomials that do so are few, mostly one.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import combinations, product

Amounts = tuple[int, ...]  # exponents of the amounts
Pair = tuple[set[Amounts], set[Amounts]]  # monomials of Q_j and of P_j

_MOST_POINTS = 3000  # monomials looked at
_MOST_MONOMIALS = 5  # of g


def factors_that_fit(
    larger: Sequence[set[Amounts]], smaller: Sequence[set[Amounts]]
) -> tuple[list[tuple[Amounts, ...]], bool, str]:
    """Sets of monomials that g can have, single ones first.

    Returns
    -------
    the sets; whether no other is possible; and words on what has no partner if there is none
    """
    pairs = [(o, t) for o, t in zip(larger, smaller, strict=True) if t]
    if not pairs:
        return [], False, "one law is zero"
    if not all(o for o, _ in pairs):
        return [], True, "it has terms where the other one has none"
    inside = _inside(pairs)
    if inside is not None and len(inside) <= _MOST_MONOMIALS:
        sets = [c for n in range(1, len(inside) + 1) for c in combinations(inside, n)]
        return sets, True, "" if sets else _missing(pairs)
    single = _single(pairs)
    return [(p,) for p in single], False, "" if single else _missing(pairs)


def moved(point: Amounts, shift: Amounts) -> Amounts:
    return tuple(a + b for a, b in zip(point, shift, strict=True))


def _single(pairs: Sequence[Pair]) -> list[Amounts]:
    """Monomials that move every term onto one of the other law."""
    ours, theirs = min(pairs, key=lambda p: len(p[0]))
    first = min(theirs)
    out = []
    for end in sorted(ours):
        shift = tuple(a - b for a, b in zip(end, first, strict=True))
        if all(moved(point, shift) in o for o, t in pairs for point in t):
            out.append(shift)
    return out


def _inside(pairs: Sequence[Pair]) -> list[Amounts] | None:
    """Monomials that move every Newton polytope into its partner, by widths in some directions.

    More than there are is no harm; None if there are too many to look at.
    """
    n = len(next(iter(pairs[0][1])))
    low = [max(min(x[i] for x in o) - min(x[i] for x in t) for o, t in pairs) for i in range(n)]
    high = [min(max(x[i] for x in o) - max(x[i] for x in t) for o, t in pairs) for i in range(n)]
    count = 1
    for a, b in zip(low, high, strict=True):
        count *= max(b - a + 1, 0)
        if count > _MOST_POINTS:
            return None
    if not count:
        return []
    free = [i for i in range(n) if high[i] > low[i]]
    limits = []
    for u in _directions(n, free):
        limits.append((u, min(_reach(o, u) - _reach(t, u) for o, t in pairs)))
    return [
        p
        for p in product(*(range(a, b + 1) for a, b in zip(low, high, strict=True)))
        if all(sum(e * p[i] for i, e in u) <= reach for u, reach in limits)
    ]


def _directions(n: int, free: Sequence[int]) -> Iterator[tuple[tuple[int, int], ...]]:
    """Sparse directions, as (coordinate, component): pairs, and triples where few are free."""
    for i in free if free else range(min(n, 1)):
        for j in range(n):
            if j != i:
                for a, b in product((1, -1, 2, -2), repeat=2):
                    yield (i, a), (j, b)
    if not free:  # one monomial is left: all pairs, to see whether it fits at all
        for i, j in combinations(range(n), 2):
            for a, b in product((1, -1), repeat=2):
                yield (i, a), (j, b)
    for three in combinations(free, 3) if len(free) <= 6 else ():
        for signs in product((1, -1), repeat=3):
            yield tuple(zip(three, signs, strict=True))
    yield tuple((i, 1) for i in range(n))
    yield tuple((i, -1) for i in range(n))


def _reach(points: set[Amounts], u: Sequence[tuple[int, int]]) -> int:
    return max(sum(e * p[i] for i, e in u) for p in points)


def _missing(pairs: Sequence[Pair]) -> str:
    if any(len(t) > len(o) for o, t in pairs):
        return "it has more different terms in the amounts"
    return "its terms in the amounts are others than those of the other one"
