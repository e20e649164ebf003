"""Linear algebra on sparse vectors of exact fractions: spans, and coordinates in them."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction

Vector = dict[int, Fraction]  # entries by index; zeros are left out


class Span:
    """The span of vectors, with the coordinates of a vector in those that were added.

    ``rows`` by the index of their first entry, in echelon form.
    """

    def __init__(self, vectors: Iterable[Vector] = ()) -> None:
        self.rows: dict[int, Vector] = {}
        self._made_of: dict[int, Vector] = {}  # each row in terms of the vectors added
        self.n = 0
        for v in vectors:
            self.add(v)

    def _reduce(self, vector: Vector) -> tuple[Vector, Vector]:
        """What is left of ``vector``, and what was taken from it, in terms of vectors added."""
        left = dict(vector)
        taken: Vector = {}
        while left:
            inside = [i for i in left if i in self.rows]
            if not inside:
                break
            pivot = min(inside)
            factor = left[pivot]
            _subtract(left, self.rows[pivot], factor)
            _subtract(taken, self._made_of[pivot], -factor)
        return left, taken

    def holds(self, vector: Vector) -> bool:
        return not self._reduce(vector)[0]

    def add(self, vector: Vector) -> bool:
        """Add a vector; False, and nothing changes, when the span holds it already."""
        left, taken = self._reduce(vector)
        if not left:
            return False
        pivot = min(left)
        scale = left[pivot]
        self.rows[pivot] = {i: e / scale for i, e in left.items()}
        made_of = {i: -e / scale for i, e in taken.items()}
        made_of[self.n] = made_of.get(self.n, Fraction(0)) + 1 / scale
        self._made_of[pivot] = made_of
        self.n += 1
        return True

    def __call__(self, vector: Vector) -> list[Fraction]:
        """Coordinates of a vector of the span in the vectors that were added (and enlarged it)."""
        _, taken = self._reduce(vector)
        return [taken.get(i, Fraction(0)) for i in range(self.n)]


def _subtract(into: Vector, row: Vector, factor: Fraction) -> None:
    for i, e in row.items():
        x = into.get(i, Fraction(0)) - factor * e
        if x:
            into[i] = x
        else:
            into.pop(i, None)
