"""Elimination of the intermediates: equilibria, steady states, conserved totals.

Equilibrated steps make each intermediate a monomial of a few free unknowns and of the references,
vacant sites or free catalyst (:mod:`discrim.ratelaw.derive_equilibria`). Steady states give the
free unknowns, sums over all sites or forms of a catalyst the references: linear where each
intermediate meets only vacant sites and what is measured (:mod:`discrim.ratelaw.derive_balances`),
else with roots (:mod:`discrim.ratelaw.derive_roots`). Exact throughout.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from typing import Any

import sympy
from sympy.polys.rings import PolyElement

from discrim.errors import DiscrimError
from discrim.mechanism.model import Species, Step
from discrim.ratelaw.derive_algebra import Algebra, Quotient, TooLarge, total
from discrim.ratelaw.derive_balances import Factors, Sides, Value, balances, linear
from discrim.ratelaw.derive_cycles import Relation, relations
from discrim.ratelaw.derive_equilibria import Constants, Monomial, equilibria, sides
from discrim.ratelaw.derive_network import Network
from discrim.ratelaw.derive_roots import solve_with_roots
from discrim.ratelaw.model import amount, total_amount
from discrim.ratelaw.roots import Group, Solved, solve_groups


@dataclass(frozen=True, slots=True)
class Solution:
    """Everything eliminated: net rates of the kinetic steps and the intermediates.

    Attributes
    ----------
    rates : net rate of each kinetic step that was asked for, in symbols of ``algebra``
    relations : what closed cycles say of the constants
    unknowns : found from steady-state balances
    monomials : each intermediate in symbols, unknowns and references
    values : the unknowns as factors above and below; ``powers[u]``: to the power 1/powers[u]
    totals : S_k, so that reference k is 1/S_k
    per_catalyst : amounts of a catalyst are fractions of its total, and rates per total
    groups : unknowns that stand in the above as symbols, with their equations
    too_large : the equations are linear, but have too many terms to be solved in writing
    roots : what the unknowns of ``groups`` are
    """

    algebra: Algebra
    constants: Constants
    rates: Mapping[str, Quotient]
    relations: tuple[Relation, ...]
    unknowns: tuple[Species, ...]
    monomials: Mapping[Species, Monomial]
    values: Mapping[int, Value]
    powers: Mapping[int, int]
    totals: tuple[Quotient, ...]
    groups: tuple[Group, ...]
    too_large: bool
    roots: Mapping[sympy.Symbol, Any]
    solved: Sequence[Solved]
    per_catalyst: bool


def solve(network: Network, wanted: frozenset[str]) -> Solution:
    """Eliminate all intermediates of ``network``; net rates of the ``wanted`` kinetic steps.

    Raises ``DiscrimError`` when the balances do not determine the intermediates, or when
    equilibrated steps put the measured species themselves at equilibrium.
    """
    found_relations = relations(network)
    constants = Constants(network, found_relations)
    free, monomials = equilibria(network, constants)
    both = [sides(step, monomials, constants) for step in network.kinetic]
    roots: dict[sympy.Symbol, int] = {}
    for ahead, back in both:
        _roots(roots, ahead)
        if back is not None:
            _roots(roots, back)
    for m in monomials.values():
        _roots(roots, m)
    names = {amount(s.name) for s in network.fluid}
    ordered = {s: q for s, q in roots.items() if s not in names}
    ordered |= {s: q for s, q in roots.items() if s in names}
    absolute = not _first_order(network, both)
    if absolute:
        catalysts = [f.name for f in network.families if f.kind == "catalyst"]
        ordered |= {total_amount(name): 1 for name in catalysts}
    algebra = Algebra.over(ordered)
    found = balances(network, free)
    values: Mapping[int, Value] | None = None
    powers: Mapping[int, int] = dict.fromkeys(range(len(free)), 1)
    totals: tuple[Quotient, ...] | None = None
    groups: tuple[Group, ...] = ()
    too_large = False
    if _in_proportion(network, monomials):
        try:
            values = linear(network, algebra, free, both, found)
        except TooLarge:
            too_large = True
    catalysed = any(f.kind == "catalyst" for f in network.families)
    per_catalyst = catalysed and values is not None and not absolute
    if values is not None:
        totals = _totals(network, algebra, monomials, values)
        if absolute:
            totals = _with_amounts(network, algebra, totals)
    else:
        rooted = solve_with_roots(
            network, ordered, free, both, monomials, found, too_large=too_large
        )
        algebra, values, powers, totals, groups = (
            rooted.algebra,
            rooted.values,
            rooted.powers,
            rooted.totals,
            rooted.groups,
        )
    rates = {
        step.name: _net_rate(algebra, step, side, values, powers, totals)
        for step, side in zip(network.kinetic, both, strict=True)
        if step.name in wanted
    }
    return Solution(
        algebra,
        constants,
        rates,
        found_relations,
        free,
        monomials,
        values,
        powers,
        totals,
        groups,
        too_large,
        *solve_groups(groups),
        per_catalyst,
    )


def _roots(roots: dict[sympy.Symbol, int], m: Monomial) -> None:
    for symbol, e in m.symbols.items():
        roots[symbol] = lcm(roots.get(symbol, 1), e.denominator)


def _first_order(network: Network, both: Sides) -> bool:
    """Whether every rate is first order in each catalyst, so that a rate per catalyst has a sense."""
    return all(
        m.v.get(k) == 1
        for k, family in enumerate(network.families)
        if family.kind == "catalyst"
        for side in both
        for m in side
        if m is not None
    )


def _with_amounts(
    network: Network, algebra: Algebra, totals: Sequence[Quotient]
) -> tuple[Quotient, ...]:
    """References of catalysts as amounts: their share times the total."""
    out = []
    for family, total_of in zip(network.families, totals, strict=True):
        if family.kind == "catalyst":
            whole = algebra.monomial({total_amount(family.name): Fraction(1)})[0]
            total_of = Quotient(total_of.top, (*total_of.bottom, (whole, 1)))
        out.append(total_of)
    return tuple(out)


def _in_proportion(network: Network, monomials: Mapping[Species, Monomial]) -> bool:
    """Whether every member of a total takes one reference, so that the sum gives it directly."""
    return all(
        dict(monomials[s].v) == {k: Fraction(1)}
        and all(e.denominator == 1 for e in monomials[s].u.values())
        for k, family in enumerate(network.families)
        for s in family.weights
    )


def _powers(
    algebra: Algebra, m: Monomial, values: Mapping[int, Value], powers: Mapping[int, int]
) -> tuple[Factors, Factors]:
    """Factors above and below of a monomial without its references."""
    top, bottom = algebra.monomial(m.symbols)
    above: Factors = [(top, 1)]
    below: Factors = [(bottom, 1)]
    for u, e in m.u.items():
        whole = e * powers[u]
        assert whole.denominator == 1
        over, under = values[u]
        above += [(poly, power * int(whole)) for poly, power in over]
        below += [(poly, power * int(whole)) for poly, power in under]
    return above, below


def _totals(
    network: Network,
    algebra: Algebra,
    monomials: Mapping[Species, Monomial],
    values: Mapping[int, Value],
) -> tuple[Quotient, ...]:
    """S_k = sum of w_i x_i / v_k over each conserved total, so that v_k = 1/S_k."""
    ones = dict.fromkeys(values, 1)
    out = []
    for family in network.families:
        terms = []
        for species, weight in family.weights.items():
            above, below = _powers(algebra, monomials[species], values, ones)
            terms.append(([*above, (algebra.ring(weight), 1)], below))
        out.append(total(terms, algebra.ring, cancel=False))
    return tuple(out)


def _net_rate(
    algebra: Algebra,
    step: Step,
    side: tuple[Monomial, Monomial | None],
    values: Mapping[int, Value],
    powers: Mapping[int, int],
    totals: Sequence[Quotient],
) -> Quotient:
    terms = []
    for sign, m in ((1, side[0]), (-1, side[1])):
        if m is None:
            continue
        above, below = _powers(algebra, m, values, powers)
        for k, e in m.v.items():
            s = totals[k]
            above += [(poly, _whole(step, power * e)) for poly, power in s.bottom]
            below.append((s.top, _whole(step, e)))
        terms.append(([*above, (algebra.ring(sign), 1)], below))
    return total(terms, algebra.ring)


def _whole(step: Step, e: Fraction) -> int:
    if e.denominator != 1:
        raise DiscrimError(
            "a step needs a broken number of vacant sites",
            place=step.place,
            do="Its equilibrium with the other species splits a site. Check the equilibrated steps.",
        )
    return int(e)


def poly_expr(algebra: Algebra, factors: Sequence[tuple[PolyElement, int]]) -> Any:
    """A product of powers of polynomials as an expression."""
    return sympy.Mul(*(algebra.expr(poly) ** power for poly, power in factors))
