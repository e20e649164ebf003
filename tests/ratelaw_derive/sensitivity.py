"""How many combinations of constants rates can show, from the full mass-action equations alone.

The production of all fluid species at many random amounts (the total of a catalyst among them) is
differentiated, in many digits, along everything that can vary: log k of each kinetic step, and a
potential of each species, which gives the K of every step, so that closed cycles stay consistent.
The rank of these slopes is the number.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from typing import Any

import mpmath
import numpy as np

from discrim.mechanism.model import Mechanism
from tests.ratelaw_derive.full_mass_action import NoSteadyState, Steady, Values, steady_state

DIGITS = 60
STEP = mpmath.mpf(10) ** -30  # of the differences, in the logarithms
NONE = mpmath.mpf(10) ** -14  # a pivot below this is none: differences carry some 25 digits
SOME = mpmath.mpf(10) ** -8  # and one above is one
ROUNDING = mpmath.mpf(10) ** -20  # of the largest production: one below this is zero


def rank_of_rates(
    mechanism: Mechanism,
    *,
    families: Sequence[Mapping[str, int]],
    steady: Sequence[str],
    equilibrated: Collection[str],
    conditions: int,
    seed: int = 7,
) -> int:
    """The rank over ``conditions`` random sets of amounts; arguments as for ``steady_state``.

    Raises ``ArithmeticError`` when a pivot is neither clearly there nor clearly none.
    """
    rng = np.random.default_rng(seed)
    species = sorted({s.name for t in mechanism.steps for s, _ in (*t.left, *t.right)})
    inner = {name for family in families for name in family} | set(steady)
    kinetic = [s.name for s in mechanism.steps if s.name not in equilibrated]
    names = [*kinetic, *(f"mu {s}" for s in species)]
    matrix: list[list[Any]] = []
    with mpmath.workdps(DIGITS):
        point = {n: mpmath.mpf(rng.uniform(-1, 1)) for n in names}

        def state(
            p: Mapping[str, Any],
            amounts: Mapping[str, float],
            totals: Sequence[float],
            near: Any = None,
        ) -> Steady:
            big_k = {
                s.name: sum(n * p[f"mu {x.name}"] for x, n in s.left)
                - sum(n * p[f"mu {x.name}"] for x, n in s.right)
                for s in mechanism.steps
                if s.reversible
            }
            forward = {s.name: p.get(s.name, mpmath.mpf(0)) for s in mechanism.steps}
            return steady_state(
                mechanism,
                Values(forward, big_k, amounts, totals),
                families=families,
                steady=steady,
                equilibrated=list(equilibrated),
                near=near,
            )

        done = tries = 0
        while done < conditions:
            amounts = {s: float(10 ** rng.uniform(-1, 1)) for s in species if s not in inner}
            varied = bool(mechanism.catalyst)
            totals = [float(10 ** rng.uniform(-1, 1)) if varied else 1.0 for _ in families]
            tries += 1
            try:
                base = state(point, amounts, totals)
            except NoSteadyState:
                if tries > 3 * conditions:
                    raise
                continue
            done += 1
            moved = [
                state({**point, n: point[n] + STEP}, amounts, totals, base.shares) for n in point
            ]
            largest = max(abs(r) for r in base.production.values())
            for s, rate in base.production.items():
                if abs(rate) > ROUNDING * largest:
                    matrix.append([(m.production[s] - rate) / STEP for m in moved])
        sizes = _pivots(matrix)
    if any(NONE < x < SOME for x in sizes):
        raise ArithmeticError(f"no clear rank: {[float(x) for x in sizes]}")
    return sum(x > SOME for x in sizes)


def _pivots(matrix: list[list[Any]]) -> list[Any]:
    """Sizes of the pivots of elimination with full pivoting, rows scaled to one."""
    rows = [[v / max(abs(u) for u in row) for v in row] for row in matrix if any(row)]
    out = []
    while rows and rows[0]:
        size, r, c = max(
            ((abs(v), r, c) for r, row in enumerate(rows) for c, v in enumerate(row)),
            key=lambda item: item[0],
        )
        out.append(size)
        if size < NONE:
            break
        top = rows.pop(r)
        rows = [
            [
                u - row[c] / top[c] * v
                for j, (u, v) in enumerate(zip(row, top, strict=True))
                if j != c
            ]
            for row in rows
        ]
    return out
