"""Exact linear algebra on small matrices of fractions: stoichiometry, balances, exponents."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import gcd, lcm

Matrix = list[list[Fraction]]


def row_reduce(matrix: Matrix, columns: int | None = None) -> tuple[Matrix, list[int]]:
    """Reduced row echelon form over the first ``columns`` columns, and the pivot columns.

    Rows below the last pivot are zero in those columns; exact.
    """
    rows = [list(r) for r in matrix]
    width = len(rows[0]) if rows else 0
    columns = width if columns is None else columns
    pivots: list[int] = []
    at = 0
    for c in range(columns):
        p = next((r for r in range(at, len(rows)) if rows[r][c]), None)
        if p is None:
            continue
        rows[at], rows[p] = rows[p], rows[at]
        lead = rows[at][c]
        if lead != 1:
            rows[at] = [x / lead if x else x for x in rows[at]]
        held = [(k, y) for k, y in enumerate(rows[at]) if y]
        for r in range(len(rows)):
            if r != at and rows[r][c]:
                f, row = rows[r][c], rows[r]
                for k, y in held:
                    row[k] = row[k] - f * y
        pivots.append(c)
        at += 1
        if at == len(rows):
            break
    return rows, pivots


def null_space(matrix: Matrix, width: int) -> Matrix:
    """Basis of {x : matrix x = 0}, as rows of length ``width``."""
    rows, pivots = row_reduce(matrix) if matrix else ([], [])
    basis = []
    for free in (c for c in range(width) if c not in pivots):
        x = [Fraction(0)] * width
        x[free] = Fraction(1)
        for r, p in enumerate(pivots):
            x[p] = -rows[r][free]
        basis.append(x)
    return basis


def transpose(matrix: Matrix, width: int) -> Matrix:
    return [[row[c] for row in matrix] for c in range(width)]


def primitive(vector: Sequence[Fraction]) -> list[int]:
    """The shortest whole-number vector along ``vector``, same direction."""
    scale = lcm(*(v.denominator for v in vector)) if vector else 1
    whole = [int(v * scale) for v in vector]
    g = gcd(*whole) or 1
    return [w // g for w in whole]
