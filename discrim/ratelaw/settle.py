"""Implicit values whose balances became simple, because something in them was set to zero."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import sympy

from discrim.ratelaw.implicit import ImplicitValue, Terms, systems, terms_in

_ZERO = sympy.Integer(0)


def settled(expr: Any) -> Any:
    """The same with unknowns that are now zero, or known in closed form, put in.

    A balance whose terms all have one sign holds only where each term is zero: without initiation
    there are no radicals. Not a number where a balance cannot hold.
    """
    swap: dict[Any, Any] = {}
    for unknowns, equations in systems(expr):
        values = {z: ImplicitValue(k, unknowns, equations) for k, z in enumerate(unknowns)}
        found = _solved([e.xreplace(swap) for e in equations], list(unknowns))
        if found is not None:
            swap |= {values[z]: value for z, value in found.items()}
    return expr.xreplace(swap) if swap else expr


def _solved(equations: list[Any], unknowns: list[Any]) -> dict[Any, Any] | None:
    """Values of the unknowns, None where the balances have not become simpler."""
    found: dict[Any, Any] = {}
    left = list(unknowns)
    terms = [terms_in(e, unknowns) for e in equations]
    while True:
        terms = [t for t in terms if t]
        if any(not any(any(powers) for powers in t) for t in terms):
            return dict.fromkeys(unknowns, sympy.nan)
        gone = _vanishing(terms, unknowns)
        if gone:
            found |= dict.fromkeys(gone, _ZERO)
            left = [z for z in left if z not in gone]
            terms = [_without(t, unknowns, gone) for t in terms]
            continue
        value = _closed(terms, unknowns)
        if value is None:
            break
        z, value = value
        found = {k: v.xreplace({z: value}) for k, v in found.items()} | {z: value}
        left = [other for other in left if other != z]
        terms = [
            terms_in(sympy.numer(sympy.together(_sum(t, unknowns).xreplace({z: value}))), unknowns)
            for t in terms
        ]
    if not found:
        return None
    if len(terms) != len(left):  # what is left has no one solution
        return {z: v for z, v in found.items() if not v.free_symbols & set(left)}
    if left:
        rest = [_sum(t, unknowns) for t in terms]
        kept = {z: ImplicitValue(k, left, rest) for k, z in enumerate(left)}
        found = {z: v.xreplace(kept) for z, v in found.items()} | kept
    return found


def _vanishing(terms: list[Terms], unknowns: list[Any]) -> list[Any]:
    """Unknowns that stand alone in a term of a balance with terms of one sign."""
    for t in terms:
        signs = {_sign(c) for c in t.values()}
        if signs in ({1}, {-1}):
            gone = [
                z for k, z in enumerate(unknowns) if any(p[k] and sum(map(bool, p)) == 1 for p in t)
            ]
            if gone:
                return gone
    return []


def _closed(terms: list[Terms], unknowns: list[Any]) -> tuple[Any, Any] | None:
    """An unknown that alone stands in a balance of two terms, and its value."""
    for t in terms:
        if len(t) != 2 or {_sign(c) for c in t.values()} != {1, -1}:
            continue
        (p, a), (q, b) = sorted(t.items(), key=lambda item: sum(item[0]))
        apart = [k for k in range(len(unknowns)) if p[k] != q[k]]
        if len(apart) == 1:
            k = apart[0]
            return unknowns[k], (-a / b) ** (sympy.Integer(1) / (q[k] - p[k]))
    return None


def _sign(coefficient: Any) -> int:
    """1 or -1 for a sum of products of nonnegative symbols with numbers of one sign, else 0."""
    signs = set()
    for term in sympy.Add.make_args(sympy.expand(coefficient)):
        number, rest = term.as_coeff_Mul()
        if not rest.is_nonnegative or not number.is_real:
            return 0
        signs.add(1 if number > 0 else -1)
    return signs.pop() if len(signs) == 1 else 0


def _without(t: Mapping[Any, Any], unknowns: list[Any], gone: list[Any]) -> Terms:
    at = [k for k, z in enumerate(unknowns) if z in gone]
    return {p: c for p, c in t.items() if not any(p[k] for k in at)}


def _sum(t: Mapping[Any, Any], unknowns: list[Any]) -> Any:
    return sympy.Add(
        *(c * sympy.Mul(*(z**e for z, e in zip(unknowns, p, strict=True))) for p, c in t.items())
    )
