"""Proof that one law is no case of another by counting terms, whatever the orders of the latter.

Let the smaller law be N/D in lowest terms. Where the larger law, at some orders and constants or in
a limit, is the same function, its numerator is g*N and its denominator g*D, with g a sum of powers
of the amounts (real exponents). Each corner of the Newton polytope of N gives at least one corner
of that of g*N; so the larger law cannot have fewer terms than the smaller one has corners.
"""

from __future__ import annotations

from collections.abc import Iterable
from itertools import product
from typing import Any

import sympy

from discrim.ratelaw.case import Case, varies
from discrim.ratelaw.polynomials import (
    Key,
    as_trees,
    collect,
    coprime,
    n_terms,
    ratio,
    reduced,
)

_MOST_TERMS = 2000
_MOST_COORDINATES = 5


def too_few_terms(case: Case) -> str:
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
            return f"it depends on {', '.join(sorted(map(str, new)))}, the other one does not"
        for mine, other in zip(ours, theirs, strict=True):
            most = len({m[first:] for m in mine})
            if _corners({m[first:] for m in other}) > most:
                return "it has more different terms in the amounts than the other one can have"
    return ""


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
