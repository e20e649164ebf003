"""Exact linear algebra on logarithms: equations between products of powers, and directions.

An equation says that a sum of unknown logarithms, with integer coefficients, equals the logarithm
of a known product of powers. Known logarithms are kept as exponents of *atoms* (primes, symbols,
irreducible polynomials), which no product of powers relates: two are equal if and only if their
exponents are. All arithmetic is in integers and fractions, so "no solution" is a proof.
"""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping, Sequence
from fractions import Fraction
from math import gcd, lcm

Row = dict[int, int]  # column -> coefficient, none of them zero
Log = dict[Hashable, Fraction]  # atom -> exponent, none of them zero


def plus(a: Mapping[Hashable, Fraction], b: Mapping[Hashable, Fraction], times: Fraction) -> Log:
    """a + times*b."""
    out = dict(a)
    for atom, e in b.items():
        new = out.get(atom, Fraction(0)) + times * e
        if new:
            out[atom] = new
        else:
            out.pop(atom, None)
    return out


class Echelon:
    """Linear equations in row echelon form; a copy shares the rows, which never change."""

    def __init__(self, order: Sequence[int]) -> None:
        self.rank_of = {column: k for k, column in enumerate(order)}
        self.rows: dict[int, tuple[Row, Log]] = {}  # by pivot column

    def copy(self) -> Echelon:
        out = Echelon(())
        out.rank_of, out.rows = self.rank_of, dict(self.rows)
        return out

    def add(self, row: Mapping[int, int], right: Mapping[Hashable, Fraction]) -> bool:
        """Take in row·x = right; False if that contradicts what is known."""
        row, right = self.reduce(row, right)
        if not row:
            return not right
        self.rows[self._first(row)] = row, right
        return True

    def reduce(self, row: Mapping[int, int], right: Mapping[Hashable, Fraction]) -> tuple[Row, Log]:
        """What the known equations leave of one more."""
        now, log = dict(row), dict(right)
        while True:
            met = [c for c in now if c in self.rows]
            if not met:
                return now, log
            pivot = min(met, key=self.rank_of.__getitem__)
            now, log = _eliminated(now, log, pivot, *self.rows[pivot])

    def _first(self, row: Row) -> int:
        return min(row, key=self.rank_of.__getitem__)

    def solved(self) -> dict[int, tuple[Row, Log]]:
        """By pivot column, rows that hold no other pivot."""
        out: dict[int, tuple[Row, Log]] = {}
        for pivot in sorted(self.rows, key=self.rank_of.__getitem__, reverse=True):
            row, log = self.rows[pivot]
            for other in [c for c in row if c in out]:
                row, log = _eliminated(row, log, other, *out[other])
            out[pivot] = row, log
        return out

    def kernel(self) -> list[dict[int, Fraction]]:
        """A basis of the directions along which every equation keeps its left side."""
        solved = self.solved()
        out = []
        for free in self.rank_of:
            if free in solved:
                continue
            vector = {free: Fraction(1)}
            for pivot, (row, _) in solved.items():
                if free in row:
                    vector[pivot] = Fraction(-row[free], row[pivot])
            out.append(vector)
        return out


def _eliminated(row: Row, log: Log, pivot: int, by: Row, by_log: Log) -> tuple[Row, Log]:
    a, b = by[pivot], row[pivot]
    shared = gcd(a, b)
    times, less = a // shared, b // shared
    if times < 0:
        times, less = -times, -less
    now = {c: times * e for c, e in row.items()}
    for c, e in by.items():
        new = now.get(c, 0) - less * e
        if new:
            now[c] = new
        else:
            now.pop(c, None)
    out = plus({k: times * e for k, e in log.items()}, by_log, Fraction(-less))
    size = gcd(*now.values())
    if size > 1:
        now = {c: e // size for c, e in now.items()}
        out = {k: e / size for k, e in out.items()}
    return now, out


def restricted(
    basis: Iterable[dict[int, Fraction]], zero: Iterable[int]
) -> list[dict[int, Fraction]]:
    """A basis of the directions spanned by ``basis`` that are zero in the columns ``zero``."""
    out = list(basis)
    for column in zero:
        holds = next((v for v in out if column in v), None)
        if holds is None:
            continue
        rest = []
        for v in out:
            if v is holds:
                continue
            times = v.get(column, Fraction(0)) / holds[column]
            new = {c: v.get(c, Fraction(0)) - times * holds.get(c, Fraction(0))
                   for c in v.keys() | holds.keys()} if times else v  # fmt: skip
            rest.append({c: e for c, e in new.items() if e})
        out = rest
    return out


def direction(
    basis: Sequence[dict[int, Fraction]],
    strict: Iterable[Mapping[int, int]],
    weak: Iterable[Mapping[int, int]] = (),
) -> dict[int, Fraction] | None:
    """A combination w of ``basis`` with row·w < 0 for strict rows and <= 0 for weak ones, or None.

    None is a proof that there is none (Farkas's lemma: the simplex below ends either with such a
    combination or with one of the rows that is nonnegative and vanishes on the basis).
    """
    strict_rows = {_along(row, basis) for row in strict}
    weak_rows = {r for r in (_along(row, basis) for row in weak) if any(r)}
    if not strict_rows:
        return {}
    if any(not any(row) for row in strict_rows):
        return None
    columns = [(*row, Fraction(1)) for row in sorted(strict_rows)]
    columns += [(*row, Fraction(0)) for row in sorted(weak_rows)]
    y = _separating(columns)
    if y is None:
        return None
    out: dict[int, Fraction] = {}
    for times, vector in zip(y, basis, strict=False):
        for c, e in vector.items():
            out[c] = out.get(c, Fraction(0)) + times * e
    return {c: e for c, e in out.items() if e}


def simplest(
    moves: list[dict[int, Fraction]], gone: Sequence[Row], scales: Sequence[int], n: int
) -> dict[int, int] | None:
    """A direction along which the terms vanish: few constants, to zero rather than to infinity.

    Parameters
    ----------
    moves : directions that are allowed; gone : rows that must decrease
    scales : columns that stay if possible; n : columns 0 to n - 1 are constants
    """
    if not gone:
        return {}
    finite = restricted(moves, scales)
    falling: list[Row] = [{i: 1} for i in range(n)]
    if direction(finite, gone, falling) is not None:
        basis, weak = finite, falling
    else:
        basis, weak = moves, []
        if direction(basis, gone) is None:
            return None
        for i in reversed(range(n)):
            if direction(basis, gone, [*weak, {i: 1}]) is not None:
                weak.append({i: 1})
    for i in reversed(range(n)):
        fewer = restricted(basis, [i])
        if len(fewer) < len(basis) and direction(fewer, gone, weak) is not None:
            basis = fewer
    found = direction(basis, gone, weak)
    assert found is not None
    common = lcm(*(e.denominator for e in found.values()))
    whole = {i: int(e * common) for i, e in found.items()}
    shared = gcd(*whole.values())
    return {i: e // shared for i, e in whole.items()}


def _along(row: Mapping[int, int], basis: Sequence[dict[int, Fraction]]) -> tuple[Fraction, ...]:
    """The row applied to each vector, to a common scale."""
    found = [sum((e * v[c] for c, e in row.items() if c in v), Fraction(0)) for v in basis]
    size = max((abs(f) for f in found), default=Fraction(0))
    return tuple(f / size for f in found) if size else tuple(found)


def _separating(columns: Sequence[tuple[Fraction, ...]]) -> list[Fraction] | None:
    """y with y·column <= 0 for all columns and y[-1] > 0, or None if there is none.

    The first phase of the revised simplex method for: combine columns with weights >= 0 to
    (0, ..., 0, 1). Bland's rule (Math. Oper. Res. 2 (1977) 103, from memory) makes it end.
    """
    m = len(columns[0])
    inverse = [[Fraction(int(i == j)) for j in range(m)] for i in range(m)]
    weights = [Fraction(0)] * (m - 1) + [Fraction(1)]
    basis: list[int] = [-1 - i for i in range(m)]  # negative: artificial
    while True:
        artificial = [i for i in range(m) if basis[i] < 0]
        y = [sum((inverse[i][j] for i in artificial), Fraction(0)) for j in range(m)]
        if not any(weights[i] for i in artificial):
            return None
        entering = next((k for k, column in enumerate(columns) if _dot(y, column) > 0), None)
        if entering is None:
            return y
        step = [_dot(line, columns[entering]) for line in inverse]
        leaving = min(
            (i for i in range(m) if step[i] > 0),
            key=lambda i: (weights[i] / step[i], basis[i]),
        )
        size = step[leaving]
        inverse[leaving] = [e / size for e in inverse[leaving]]
        weights[leaving] /= size
        for i in range(m):
            if i != leaving and step[i]:
                times = step[i]
                inverse[i] = [
                    e - times * f for e, f in zip(inverse[i], inverse[leaving], strict=True)
                ]
                weights[i] -= times * weights[leaving]
        basis[leaving] = entering


def _dot(a: Sequence[Fraction], b: Sequence[Fraction]) -> Fraction:
    return sum((x * y for x, y in zip(a, b, strict=True) if x and y), Fraction(0))
