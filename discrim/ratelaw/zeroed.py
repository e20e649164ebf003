"""A special case that is seen by putting zeros in: the short way before a general proof.

A law without one of its pathways is mostly the larger law with a rate constant at zero, written in
the same constants. Putting the zero in and comparing term by term proves that at once; where it
does not, nothing is said and :mod:`discrim.ratelaw.nesting` has to look.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import sympy

from discrim.ratelaw.model import Constant, ConstantKind
from discrim.ratelaw.nesting import Nesting

MOST_AT_ONCE = 2  # constants set to zero together


def zeroed(
    smaller: Sequence[Any],
    larger: Sequence[Any],
    constants_smaller: Sequence[Constant],
    constants_larger: Sequence[Constant],
) -> Nesting | None:
    """The nesting by constants at zero, all others of the same name in both laws; else None.

    Arguments as for :func:`discrim.ratelaw.nesting.examine`.
    """
    known = {c.symbol for c in constants_smaller}
    if not known <= {c.symbol for c in constants_larger}:
        return None
    extra = [c for c in constants_larger if c.symbol not in known and c.symbol.is_nonnegative]
    for chosen in _choices(extra):
        nothing = {c.symbol: sympy.Integer(0) for c in chosen}
        left = [e.subs(nothing) for e in larger]
        if any(e.has(sympy.zoo, sympy.nan, sympy.oo) for e in left):
            continue
        if all(a == b for a, b in zip(left, smaller, strict=True)):
            return _nesting(left, chosen, constants_smaller, constants_larger)
    return None


def _choices(extra: Sequence[Constant]) -> Iterator[tuple[Constant, ...]]:
    """One constant of the larger law alone, rate constants first; then two, if no more are left."""
    ordered = sorted(extra, key=lambda c: c.kind is not ConstantKind.RATE)
    yield from ((c,) for c in ordered)
    if len(extra) == MOST_AT_ONCE:
        yield tuple(extra)


def _nesting(
    left: Sequence[Any],
    chosen: Sequence[Constant],
    constants_smaller: Sequence[Constant],
    constants_larger: Sequence[Constant],
) -> Nesting:
    occurring = set().union(*(e.free_symbols for e in left))
    zero = tuple(c.name for c in chosen)
    return Nesting(
        values={
            c.name: sympy.Integer(0) if c.name in zero else c.symbol
            for c in constants_larger
            if c.name in zero or c.symbol in occurring
        },
        zero=zero,
        fixed={},
        vanish=tuple(
            c.name for c in constants_larger if c.name not in zero and c.symbol not in occurring
        ),
        n_restrictions=len(constants_larger) - len(constants_smaller),
        edge=True,
    )
