"""Two laws at fixed values of the amounts and quantities that orders and activation energies act on.

If a law is a case of another, it still is one where some amounts are held fixed. With [A] = 1 an
unknown order in [A] is gone, with T = 1 an unknown exp(-E/T) is one more positive constant: what is
left is comparable, and if it is proven to be no case, nor are the laws themselves.
"""

from __future__ import annotations

from typing import Any

import sympy

from discrim.ratelaw.case import Case, shown, varies
from discrim.ratelaw.model import Constant, ConstantKind

_ONE = sympy.Integer(1)


def frozen(case: Case) -> tuple[list[Any], list[Any], list[Constant], str] | None:
    """(smaller, larger, constants of the larger, what is fixed), or None if nothing is left."""
    held = set(case.held)
    fixed: set[Any] = set()
    for e in case.as_given[0]:
        for piece in e.atoms(sympy.Pow, sympy.Function):
            if piece.free_symbols & held and not _is_plain(piece, held):
                fixed |= {s for s in piece.free_symbols if varies((s, _ONE))}
    at = dict.fromkeys(fixed, _ONE)
    larger = [e.xreplace(at) for e in case.as_given[0]]
    smaller = [e.xreplace(at) for e in case.as_given[1]]
    pieces = {
        p
        for e in larger
        for p in e.atoms(sympy.Pow, sympy.Function)
        if p.free_symbols & held and not _is_plain(p, held)
    }
    if any(p.free_symbols - set(case.names) for p in pieces):
        return None
    new = {p: sympy.Dummy(f"c{i}", nonnegative=True) for i, p in enumerate(sorted(pieces, key=str))}
    larger = [e.xreplace(new) for e in larger]
    left = set().union(*(e.free_symbols for e in larger))
    if not any(varies((s, _ONE)) for s in left) or held & left:
        return None
    constants = [
        Constant(s.name, s, ConstantKind.OTHER) for s in (*case.names, *new.values()) if s in left
    ]
    return smaller, larger, constants, " and ".join(sorted(shown(s) for s in fixed))


def _is_plain(piece: Any, held: set[Any]) -> bool:
    """A power that holds unknowns only in a base, to a number."""
    return bool(piece.is_Pow and not piece.exp.free_symbols & held and piece.base is not sympy.E
                and piece.exp.is_Integer)  # fmt: skip
