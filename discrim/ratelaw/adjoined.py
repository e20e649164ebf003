"""Laws with roots of sums, or with values that only balances fix, as tuples of polynomials.

A law e = (n0 + n1*s)/(d0 + d1*s) with s^2 = R obeys (d0*e - n0)^2 = R*(n1 - d1*e)^2, an equation
A*e^2 + B*e + C = 0. Two such laws agree only if their equations are proportional; whether they are
then the same root is checked with numbers (`same_root`). A law with implicit values agrees with
another if it does so as a function of those values, and the balances agree as well.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import mpmath
import sympy

from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.polynomials import coprime, divided, odd_somewhere, without_common

_DIGITS = 60  # of the check by numbers
_FAR = 12  # a limit is taken at t = 10^12; what is left of it then is far below the tolerance
_AGREE = 1e-5


@dataclass(frozen=True, slots=True)
class Root:
    """A symbol that stands for the square root of ``radicand``."""

    symbol: sympy.Symbol
    radicand: sympy.Expr


class TooManyRoots(Exception):
    """One expression holds several different roots."""


def without_roots(expr: sympy.Expr, name: str) -> tuple[sympy.Expr, Root | None]:
    """The expression with a symbol for its root of a sum, if it has one."""
    found = {
        p for p in expr.atoms(sympy.Pow)
        if p.exp.is_Rational and p.exp.q == 2 and p.base.is_Add
    }  # fmt: skip
    radicands = {p.base for p in found}
    if not radicands:
        return expr, None
    if len(radicands) > 1:
        raise TooManyRoots("several different roots of sums")
    (radicand,) = radicands
    symbol = sympy.Symbol(f"[sqrt {name}]", nonnegative=True)
    swap = {p: symbol ** (2 * p.exp) for p in found}
    out = expr.xreplace(swap)
    if any(p.base == radicand for p in out.atoms(sympy.Pow)) or radicand.has(sympy.Dummy("")):
        raise TooManyRoots("a root within a root")
    return out, Root(symbol, radicand)


def implicit_system(exprs: Sequence[sympy.Expr]) -> tuple[Any, Any] | None:
    """The unknowns and equations of the implicit values; None if there are none.

    Raises `TooManyRoots` if they belong to several systems.
    """
    systems = {v.system for e in exprs for v in e.atoms(ImplicitValue)}
    if len(systems) > 1:
        raise TooManyRoots("several sets of balances without a closed form")
    return next(iter(systems)) if systems else None


def with_balances(
    exprs: Sequence[sympy.Expr],
    system: tuple[Any, Any],
    order: Sequence[int],
    scales: Sequence[sympy.Symbol] = (),
) -> list[sympy.Expr]:
    """The expressions and the balances, with one symbol for each unknown.

    With ``scales`` each unknown is a constant times its symbol: the unknowns of two laws may differ
    by such factors, where constants have been combined.
    """
    unknowns, equations = system
    swap: dict[Any, Any] = {
        z: sympy.Symbol(f"[balance {order[k]}]", nonnegative=True) for k, z in enumerate(unknowns)
    }
    for z, scale in zip(unknowns, scales, strict=False):
        swap[z] = scale * swap[z]
    values = {v: swap[unknowns[v.index]] for e in exprs for v in e.atoms(ImplicitValue)}
    return [*(e.xreplace(values) for e in exprs), *(g.xreplace(swap) for g in equations)]


def quadratic(
    top: Any, bottom: Any, radicand: tuple[Any, Any], generator: int
) -> tuple[Any, Any, Any]:
    """(A, B, C) of the equation that top/bottom obeys, where generator^2 = radicand."""
    above, below = radicand
    n0, n1 = _split(top, above, below, generator)
    d0, d1 = _split(bottom, above, below, generator)
    # numerators and denominators to one power of the denominator of the radicand
    (n0, n1), (d0, d1) = _level((n0, n1), (d0, d1), below)
    a = below * d0**2 - above * d1**2
    b = -2 * (below * d0 * n0 - above * d1 * n1)
    c = below * n0**2 - above * n1**2
    return _reduced((a, b, c), [n0, n1, d0, d1, above, below])


def _split(poly: Any, above: Any, below: Any, i: int) -> tuple[tuple[Any, int], tuple[Any, int]]:
    """Parts without and with the root: each (p, k) for p/below^k."""
    ring = poly.ring
    by_power: dict[int, dict[Any, Any]] = {}
    for m, c in poly.items():
        by_power.setdefault(m[i], {})[(*m[:i], 0, *m[i + 1 :])] = c
    highest = max(by_power, default=0) // 2
    parts = [ring.zero, ring.zero]
    for power, terms in by_power.items():
        k = power // 2
        parts[power % 2] += ring.from_dict(terms) * above**k * below ** (highest - k)
    return (parts[0], highest), (parts[1], highest)


def _level(
    top: tuple[tuple[Any, int], tuple[Any, int]],
    bottom: tuple[tuple[Any, int], tuple[Any, int]],
    below: Any,
) -> tuple[tuple[Any, Any], tuple[Any, Any]]:
    most = max(k for _, k in (*top, *bottom))
    return tuple(  # type: ignore[return-value]
        tuple(p * below ** (most - k) for p, k in pair) for pair in (top, bottom)
    )


def _reduced(polys: tuple[Any, ...], likely: Sequence[Any]) -> tuple[Any, Any, Any]:
    """Without common factors, as far as they are found."""
    now = without_common(polys)
    pieces: dict[Any, None] = {}
    for p in likely:
        if len(p) > 1:
            pieces[p] = None
    for piece in pieces:
        while True:
            parts = [divided(p, piece) if p else p for p in now]
            if any(p is None for p in parts):
                break
            now = tuple(parts)
    constants = range(now[0].ring.ngens)
    some = [p for p in now if p]
    active = {i for p in some for i, d in enumerate(p.degrees()) if d}
    if len(active) <= 8 and not coprime(some, constants):
        shared = some[0]
        for p in some[1:]:
            shared = shared.gcd(p)
        now = tuple(p.exquo(shared) if p else p for p in now)
    a, b, c = without_common(now)
    return a, b, c


def irreducible(equation: tuple[Any, Any, Any], amounts: Sequence[int]) -> bool:
    """Whether it is proven that the roots of the equation are no rational functions of amounts."""
    a, b, c = equation
    return odd_somewhere(b**2 - 4 * a * c, amounts)


def same_root(
    larger: Sequence[sympy.Expr],
    smaller: Sequence[sympy.Expr],
    values: Mapping[sympy.Symbol, tuple[sympy.Expr, Any]],
) -> bool:
    """Whether the laws agree in numbers at a few points.

    ``values`` : constants of the larger law as (b, p), for b*t^p with t large.
    """
    bases = sorted(values, key=str)
    known = set().union(*(e.free_symbols for e in (*larger, *smaller)), *(
        b.free_symbols for b, _ in values.values()
    ))  # fmt: skip
    symbols = sorted(known - set(bases), key=str)
    left = sympy.lambdify([*symbols, *bases], list(larger), "mpmath", cse=True)
    right = sympy.lambdify(symbols, list(smaller), "mpmath", cse=True)
    base_of = sympy.lambdify(symbols, [values[s][0] for s in bases], "mpmath")
    with mpmath.workdps(_DIGITS):
        powers = [mpmath.mpf(10) ** (_FAR * _number(values[s][1])) for s in bases]
        for attempt in range(5):
            point = [
                mpmath.mpf(11 + (7 * k + 5 * attempt) % 17) / (5 + (3 * k + attempt) % 13)
                for k in range(len(symbols))
            ]
            far = [b * p for b, p in zip(base_of(*point), powers, strict=True)]
            for one, other in zip(left(*point, *far), right(*point), strict=True):
                if not abs(one - other) <= _AGREE * (abs(one) + abs(other)):
                    return False
    return True


def _number(value: Any) -> Any:
    exact = sympy.Rational(value)
    return mpmath.mpf(int(exact.p)) / int(exact.q)
