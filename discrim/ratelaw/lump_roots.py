"""A law whose unknowns are fixed by balances: before it is lumped, and when it is solved."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import sympy
from sympy import Rational

from discrim.ratelaw.lump_form import Form
from discrim.ratelaw.lump_names import in_other_units
from discrim.ratelaw.lump_span import Vector
from discrim.ratelaw.model import RateLaw
from discrim.ratelaw.roots import Group, powers_of, solve_group, solve_groups

_SHORT = 60  # operations of a balance that is put into the law


def renamed(
    law: RateLaw, groups: Sequence[Group], form: Form, units: Mapping[sympy.Symbol, Vector]
) -> tuple[RateLaw, list[Group], list[tuple[str, Any]]]:
    """Unknowns that are counted in units of constants under names of their own."""
    swap = {}
    lines: list[tuple[str, Any]] = []
    for z, unit in units.items():
        x = in_other_units(z)
        swap[z] = x
        powers = (form.atoms[i] ** Rational(-e.numerator, e.denominator) for i, e in unit.items())
        counted = sympy.Eq(x, sympy.Mul(z, *powers), evaluate=False)
        lines.append((f"{z.name} counted in units of constants", counted))
    if not swap:
        return law, list(groups), lines
    law = replace(
        law,
        rate=law.rate.xreplace(swap),
        production={n: e.xreplace(swap) for n, e in law.production.items()},
        pathways=tuple(replace(p, rate=p.rate.xreplace(swap)) for p in law.pathways),
    )
    moved = [
        Group(
            tuple(swap.get(z, z) for z in g.unknowns), tuple(e.xreplace(swap) for e in g.equations)
        )
        for g in groups
    ]
    return law, moved, lines


def powers_put_in(law: RateLaw, groups: Sequence[Group]) -> tuple[RateLaw, Sequence[Group]]:
    """Unknowns that are products of powers put into the law, which stays a quotient of sums."""
    for group in groups:
        found = solve_group(group)
        if found.closed and not any(v.has(sympy.Add) for v in found.values):
            values = dict(zip(group.unknowns, found.values, strict=True))
            rest = [
                replace(g, equations=tuple(sympy.expand(e.xreplace(values)) for e in g.equations))
                for g in groups
                if g is not group
            ]
            return powers_put_in(solved(law, [group]), rest)
    for group in groups:
        law = _reduced(law, group)
    return law, groups


def _reduced(law: RateLaw, group: Group) -> RateLaw:
    """Powers of an unknown put in by its equation where that is shorter: k_1 - k_2 z^2 may be one term."""
    if len(group.unknowns) != 1:
        return law
    (z,), (equation,) = group.unknowns, group.equations
    by_power = powers_of(equation, z)
    n = max(by_power)
    if n < 2 or len(by_power) > 3 or sympy.count_ops(equation) > _SHORT:
        return law
    lead = by_power[n]
    known = sum((-c / lead * z**e for e, c in by_power.items() if e < n), sympy.Integer(0))

    def reduced(e: Any) -> Any:
        high = {p for p in e.atoms(sympy.Pow) if p.base == z and p.exp.is_Integer and p.exp >= n}
        if not high or sympy.count_ops(e) > 5 * _SHORT:
            return e
        swap = {}
        for p in high:
            power = z ** int(p.exp)
            while (top := sympy.degree(power, z)) >= n:
                lower = power.coeff(z, top) * z ** (top - n) * known
                power = sympy.expand(power - power.coeff(z, top) * z**top + lower)
            swap[p] = power
        shorter = sympy.cancel(sympy.together(e.xreplace(swap)))
        return shorter if sympy.count_ops(shorter) < sympy.count_ops(e) else e

    return replace(
        law,
        rate=reduced(law.rate),
        production={name: reduced(e) for name, e in law.production.items()},
        pathways=tuple(replace(p, rate=reduced(p.rate)) for p in law.pathways),
    )


def solved(law: RateLaw, groups: Sequence[Group]) -> RateLaw:
    """``law`` with the unknowns of ``groups`` solved for."""
    if not groups:
        return law
    values, _ = solve_groups(groups)
    return replace(
        law,
        rate=law.rate.xreplace(values),
        production={n: e.xreplace(values) for n, e in law.production.items()},
        pathways=tuple(replace(p, rate=p.rate.xreplace(values)) for p in law.pathways),
    )
