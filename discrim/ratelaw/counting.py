"""Proofs that one law is no case of another that hold whatever the orders of the latter.

Let the smaller law be N/D in lowest terms. Where the larger law, at some orders and constants or in
a limit, is the same function, its numerator is g*N and its denominator g*D, with g a sum of powers
of the amounts (real exponents). Each corner of the Newton polytope of N gives at least one corner
of that of g*N; so the larger law cannot have fewer terms than the smaller one has corners. And the
highest power of an amount in g*N less that in g*D is the same as in N and D; likewise the lowest.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from itertools import product
from typing import Any

import sympy

from discrim.ratelaw.case import Case, shown, varies
from discrim.ratelaw.polynomials import (
    Key,
    Variables,
    as_trees,
    collect,
    coprime,
    n_terms,
    ratio,
    reduced,
)

_MOST_TERMS = 2000
_MOST_COORDINATES = 5


def ruled_out(case: Case) -> str:
    """Why the larger law cannot become the smaller one, or "" if this does not show it."""
    if case.trouble or case.n_balances or any([*case.roots_larger, *case.roots_smaller]):
        return ""
    trees = as_trees((*case.larger, *case.smaller), frozenset())
    if max(n_terms(t) for t in trees) > _MOST_TERMS:
        return ""
    variables = collect(trees, lambda key: (varies(key), str(key)))
    if not _powers(variables.keys):
        return ""
    first = sum(not varies(k) for k in variables.keys)
    amounts = range(first, len(variables.keys))
    try:
        pairs = [reduced(*ratio(t, variables)) for t in trees]
    except ZeroDivisionError:
        return ""
    n = len(case.larger)
    for ours, theirs in zip(pairs[:n], pairs[n:], strict=True):
        if not coprime(theirs, amounts):
            continue
        known = _symbols(variables.keys, ours)
        new = _symbols(variables.keys, theirs) - known
        if new:
            return f"it depends on {', '.join(sorted(map(shown, new)))}, the other one does not"
        for symbol in sorted(known, key=str):
            if not _orders_can_meet(variables, symbol, ours, theirs):
                return f"its order in {shown(symbol)} is another one"
        for mine, other in zip(ours, theirs, strict=True):
            most = len({m[first:] for m in mine})
            if _corners({m[first:] for m in other}) > most:
                return "it has more different terms in the amounts than the other one can have"
    return ""


def _orders_can_meet(
    variables: Variables, symbol: Any, ours: Sequence[Any], theirs: Sequence[Any]
) -> bool:
    """Whether the highest and lowest power of an amount, numerator less denominator, can agree."""
    n = len(variables.keys)
    own = [i for i in range(n) if variables.keys[i][0] == symbol]
    plain = [i for i in own if variables.keys[i][1] == 1]
    symbolic = [i for i in own if variables.keys[i][1] != 1]
    if any(symbol in b.free_symbols | p.free_symbols for i, (b, p) in enumerate(variables.keys)
           if i not in own):  # fmt: skip
        return True
    if any(m[i] for poly in ours for m in poly for i in symbolic):
        return True
    if len({tuple(m[i] for i in symbolic) for m in theirs[0]}) > 1:
        return True
    if len({tuple(m[i] for i in symbolic) for m in theirs[1]}) > 1:
        return True
    first, second = next(iter(theirs[0])), next(iter(theirs[1]))
    if any(first[i] != second[i] for i in symbolic):
        return False  # an order of the smaller law, where the larger one has numbers
    above, below = ({sum(m[i] for i in plain) for m in poly} for poly in ours)
    top, bottom = ({sum(m[i] for i in plain) for m in poly} for poly in theirs)
    possible = {a - b for a in above for b in below}
    return max(top) - max(bottom) in possible and min(top) - min(bottom) in possible


def _powers(keys: tuple[Key, ...]) -> bool:
    """Whether all that varies is amounts to constant orders, or exponentials such as exp(-E/T) with
    one function of quantities that stand nowhere else."""
    amounts: set[Any] = set()
    functions: dict[Any, list[Any]] = {}  # by the quantities that they hold
    for base, power in keys:
        inside = {s for s in power.free_symbols if varies((s, sympy.Integer(1)))}
        if base.is_Symbol and not inside:
            amounts.add(base)
        elif varies((base, power)):
            if varies((base, sympy.Integer(1))):
                return False
            functions.setdefault(frozenset(inside), []).append(power)
    seen: set[Any] = set()
    for held, powers in functions.items():
        if held & (amounts | seen):
            return False
        seen |= held
        if any(held & sympy.cancel(p / powers[0]).free_symbols for p in powers):
            return False
    return True


def _symbols(keys: tuple[Key, ...], polys: Iterable[Any]) -> set[Any]:
    """Amounts and quantities that occur."""
    held = {i for p in polys for m in p for i, e in enumerate(m) if e}
    found = set().union(*(keys[i][0].free_symbols | keys[i][1].free_symbols for i in held))
    return {s for s in found if varies((s, sympy.Integer(1)))}


def _corners(points: set[tuple[int, ...]]) -> int:
    """At least so many corners: points that alone are farthest in some direction."""
    used = [i for i in range(len(next(iter(points)))) if len({p[i] for p in points}) > 1]
    found: set[tuple[int, ...]] = set()
    if len(used) > _MOST_COORDINATES:
        used = used[:_MOST_COORDINATES]
    for u in product((-5, -1, 0, 1, 5), repeat=len(used)):
        reach = {p: sum(e * p[i] for e, i in zip(u, used, strict=True)) for p in points}
        top = max(reach.values())
        best = [p for p, r in reach.items() if r == top]
        if len(best) == 1:
            found.add(best[0])
    return max(len(found), 1)
