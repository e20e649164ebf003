"""Which candidates are the same law, and which contain which, proven on what the columns observe."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import sympy

from discrim.ratelaw.model import Constant
from discrim.ratelaw.nesting import Nesting, Substitution, nested
from discrim.study.model import Study
from discrim.weigh.bench import fixed_put_in
from discrim.weigh.bind import Bound


@dataclass(frozen=True, slots=True, eq=False)
class Relations:
    """Proven relations among candidates, by index.

    ``same[(i, j)]`` with i < j; ``contains[(larger, smaller)]`` for laws that are not the same.
    """

    same: dict[tuple[int, int], Substitution]
    contains: dict[tuple[int, int], Nesting]


def relations(bounds: Sequence[Bound], study: Study) -> Relations:
    """Every pair is tried both ways; what is not proven is not claimed."""
    same: dict[tuple[int, int], Substitution] = {}
    contains: dict[tuple[int, int], Nesting] = {}
    for i in range(len(bounds)):
        for j in range(i + 1, len(bounds)):
            a, b = bounds[i], bounds[j]
            ea, eb, ca, cb = expanded(a, b, study)
            up = nested(ea, eb, ca, cb) if len(ca) <= len(cb) else None
            down = nested(eb, ea, cb, ca) if len(cb) <= len(ca) else None
            if up is not None and down is not None:
                same[(i, j)] = Substitution(a_from_b=down.values, b_from_a=up.values)
            elif up is not None:
                contains[(j, i)] = up
            elif down is not None:
                contains[(i, j)] = down
    return Relations(same, contains)


def expanded(
    a: Bound, b: Bound, study: Study
) -> tuple[list[Any], list[Any], list[Constant], list[Constant]]:
    """Both laws once for every combination of response and group labels, in their free constants."""
    n = len(a.column_of)
    patterns: dict[tuple[Any, ...], int] = {}
    response = a.predictor.response
    for i in range(n):
        key = (int(response[i]), tuple(a.column_of[i]), tuple(b.column_of[i]))
        patterns.setdefault(key, i)
    rows = list(patterns.values())
    return (
        [_at_row(a, i, study) for i in rows],
        [_at_row(b, i, study) for i in rows],
        _free(a),
        _free(b),
    )


def _free(bound: Bound) -> list[Constant]:
    out = []
    for j, name in enumerate(bound.names):
        base = bound.base_constant(j)
        out.append(replace(base, name=name, symbol=_symbol(base, name)))
    return out


def _symbol(base: Constant, name: str) -> Any:
    if name == base.name:
        return base.symbol
    return (
        sympy.Symbol(name, nonnegative=True) if base.lower >= 0 else sympy.Symbol(name, real=True)
    )


def _at_row(bound: Bound, i: int, study: Study) -> Any:
    e = fixed_put_in(bound.expressions[int(bound.predictor.response[i])], study)
    swap = {}
    for q, c in enumerate(bound.constants):
        name = bound.names[int(bound.column_of[i, q])]
        if name != c.name:
            swap[c.symbol] = _symbol(c, name)
    return e.xreplace(swap) if swap else e
