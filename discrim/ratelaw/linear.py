"""Which constants enter a law linearly, so that a fit can eliminate them exactly."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import sympy

from discrim.ratelaw.implicit import named
from discrim.ratelaw.model import Constant, ConstantKind

_SEED = 20240229  # of the points at which a second derivative is tried before it is proven
_DIGITS = 60  # of the numbers at that point
_EXACT_LIMIT = 400  # operations up to which a doubtful second derivative is simplified


def linear_constants(exprs: Sequence[sympy.Expr], constants: Sequence[Constant]) -> tuple[str, ...]:
    """A largest set L of constants in which every expression is affine.

    Affine in L: all second derivatives with respect to pairs within L (a constant with itself
    included) are zero, so that for given other constants the fit over L is a linear problem.
    A constant under a root of a sum, or in balances without a closed form, does not count.

    Parameters
    ----------
    exprs : the law, or its observed parts
    constants : its constants; those of kind ORDER may belong to L if they enter linearly

    Returns
    -------
    Names in the order of ``constants``. Of several largest sets, the one with the most rate
    constants, then with the earliest constants.
    """
    symbols = [c.symbol for c in constants]
    opened = [_without_roots(e) for e in exprs]
    within = set().union(*(inside for _, inside in opened))
    first = [[sympy.diff(e, s) for s in symbols] for e, _ in opened]
    used = [any(row[i] != 0 for row in first) and s not in within for i, s in enumerate(symbols)]

    def affine(i: int, j: int) -> bool:
        return all(_no_second(row[i], symbols[j]) for row in first)

    alone = [i for i in range(len(symbols)) if used[i] and affine(i, i)]
    together = {(i, j) for i, j in combinations(alone, 2) if affine(i, j)}

    def score(chosen: tuple[int, ...]) -> tuple[int, int, tuple[int, ...]]:
        rates = sum(constants[i].kind is ConstantKind.RATE for i in chosen)
        return len(chosen), rates, tuple(-i for i in chosen)

    best: tuple[int, ...] = ()
    stack: list[tuple[tuple[int, ...], list[int]]] = [((), alone)]
    while stack:
        chosen, rest = stack.pop()
        if score(chosen) > score(best):
            best = chosen
        if len(chosen) + len(rest) < len(best):
            continue
        for n, i in enumerate(rest):
            stack.append(((*chosen, i), [j for j in rest[n + 1 :] if (i, j) in together]))
    return tuple(constants[i].name for i in best)


def _without_roots(expr: sympy.Expr) -> tuple[sympy.Expr, set[sympy.Symbol]]:
    """The law with symbols for roots of sums and for implicit values, and what stands in these."""
    bare, values = named(expr)
    inside: set[sympy.Symbol] = set().union(*(v.free_symbols for v in values.values()))
    roots = [p for p in bare.atoms(sympy.Pow) if p.exp.is_Rational and not p.exp.is_Integer]
    swap = {p: sympy.Dummy("root") for p in roots if p.base.has(sympy.Add)}
    inside |= set().union(*(p.free_symbols for p in swap))
    return bare.xreplace(swap), inside


def _no_second(slope: sympy.Expr, symbol: sympy.Symbol) -> bool:
    """Whether the derivative of ``slope`` by ``symbol`` is zero identically, proven."""
    if symbol not in slope.free_symbols:
        return True
    second = sympy.diff(slope, symbol)
    if second == 0:
        return True
    # A nonzero value at one point refutes; only when it vanishes there is a proof worth its time.
    point = {
        s: sympy.Rational(_SEED % (97 + 2 * i), 61 + 4 * i) + sympy.Rational(1, 3)
        for i, s in enumerate(sorted(second.free_symbols, key=str))
    }
    # Floats of many digits, not exact numbers, whose size explodes in powers of sums.
    value = second.xreplace({s: sympy.Float(x, _DIGITS) for s, x in point.items()})
    if value.is_number and abs(sympy.N(value, 30)) > sympy.Float("1e-15"):
        return False
    if sympy.count_ops(second) > _EXACT_LIMIT:
        return False
    return bool(sympy.simplify(second) == 0)
