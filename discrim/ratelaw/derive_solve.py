"""Elimination of the intermediates: equilibria, steady states, conserved totals.

Every intermediate is written as

    x_i = m_i  prod_u y_u^(a_iu)  prod_k v_k^(b_ik)

with m_i a monomial in equilibrium constants and amounts (from the equilibrated steps), v_k the
reference form of conserved total k (vacant sites, free catalyst) and y_u the free unknowns. Steady
states are linear in the y_u; sum_i w_i x_i = 1 then gives v_k. Exact throughout. The steady-state
part for one catalyst is the method of King and Altman (1956, Journal of Physical Chemistry 60,
1375-1378, pages from memory), done by fraction-free elimination instead of by drawing patterns.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from math import lcm
from typing import Any

import sympy
from sympy.polys.rings import PolyElement

from discrim.errors import DiscrimError
from discrim.mechanism.model import Species, Step
from discrim.ratelaw.derive_algebra import (
    MAX_TERMS,
    Algebra,
    Quotient,
    TooLarge,
    add,
    ratio,
    solve_linear,
)
from discrim.ratelaw.derive_network import (
    Matrix,
    Network,
    changes,
    null_space,
    primitive,
    row_reduce,
    transpose,
)
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol


@dataclass(frozen=True, slots=True)
class Monomial:
    """Powers of symbols, of free unknowns ``u`` (by index) and of references ``v`` (by index)."""

    symbols: Mapping[sympy.Symbol, Fraction] = field(default_factory=dict)
    u: Mapping[int, Fraction] = field(default_factory=dict)
    v: Mapping[int, Fraction] = field(default_factory=dict)

    def times(self, other: Monomial, power: Fraction = Fraction(1)) -> Monomial:
        return Monomial(
            _merge(self.symbols, other.symbols, power),
            _merge(self.u, other.u, power),
            _merge(self.v, other.v, power),
        )


def _merge(
    a: Mapping[Any, Fraction], b: Mapping[Any, Fraction], p: Fraction
) -> dict[Any, Fraction]:
    out = dict(a)
    for key, e in b.items():
        out[key] = out.get(key, Fraction(0)) + p * e
    return {k: e for k, e in out.items() if e}


@dataclass(frozen=True, slots=True)
class Solution:
    """Everything eliminated: net rates of the kinetic steps and the intermediates."""

    algebra: Algebra
    rates: Mapping[str, Quotient]  # net rate of each kinetic step that was asked for
    relations: tuple[tuple[str, Mapping[str, Fraction]], ...]  # K of a step, from others, in cycles
    unknowns: tuple[Species, ...]  # found from steady-state balances
    monomials: Mapping[Species, Monomial]
    values: Mapping[int, tuple[PolyElement, PolyElement]]  # y_u as numerator, denominator
    totals: tuple[Quotient, ...]  # S_k, so that v_k = 1/S_k


def forward(step: Step) -> sympy.Symbol:
    return constant_symbol(f"k_{step.name}")


def backward(step: Step) -> sympy.Symbol:
    return constant_symbol(f"k_rev_{step.name}")


def equilibrium(step: Step) -> sympy.Symbol:
    return constant_symbol(f"K_{step.name}", ConstantKind.EQUILIBRIUM)


def solve(network: Network, wanted: frozenset[str]) -> Solution:
    """Eliminate all intermediates of ``network``; net rates of the ``wanted`` kinetic steps.

    Raises ``DiscrimError`` when the balances are not linear in the intermediates, when they do not
    determine them, or when equilibrated steps put the measured species themselves at equilibrium.
    """
    free, monomials, relations = _equilibria(network)
    sides = [_sides(network, step, monomials) for step in network.kinetic]
    roots: dict[sympy.Symbol, int] = {}
    for step, (ahead, back) in zip(network.kinetic, sides, strict=True):
        roots.setdefault(forward(step), 1)
        _roots(roots, ahead)
        if back is not None:
            roots.setdefault(backward(step), 1)
            _roots(roots, back)
    for m in monomials.values():
        _roots(roots, m)
    names = {amount(s.name) for s in network.fluid}
    ordered = {s: q for s, q in roots.items() if s not in names}
    ordered |= {s: q for s, q in roots.items() if s in names}
    algebra = Algebra.over(ordered)
    values = _steady_state(network, algebra, free, sides)
    totals = _totals(network, algebra, monomials, values)
    rates = {
        step.name: _net_rate(algebra, step, side, values, totals)
        for step, side in zip(network.kinetic, sides, strict=True)
        if step.name in wanted
    }
    return Solution(algebra, rates, relations, free, monomials, values, totals)


def _roots(roots: dict[sympy.Symbol, int], m: Monomial) -> None:
    for symbol, e in m.symbols.items():
        roots[symbol] = lcm(roots.get(symbol, 1), e.denominator)


def _equilibria(
    network: Network,
) -> tuple[
    tuple[Species, ...],
    dict[Species, Monomial],
    tuple[tuple[str, Mapping[str, Fraction]], ...],
]:
    """Each intermediate as a monomial of the free ones: log-linear equilibria, solved exactly."""
    references = [f.reference for f in network.families]
    inner = [s for s in network.intermediates if s not in references] + references
    outer = list(network.fluid)
    steps = network.equilibrated
    of_inner, of_outer = changes(steps, inner), changes(steps, outer)
    n, m = len(inner), len(steps)
    # Row j: sum_i nu_ij log x_i + sum_f nu_fj log c_f = log K_j
    rows = [
        [of_inner[i][j] for i in range(n)]
        + [-of_outer[f][j] for f in range(len(outer))]
        + [Fraction(int(j == k)) for k in range(m)]
        for j in range(m)
    ]
    rows, pivots = row_reduce(rows, n)
    cycles = rows[len(pivots) :]
    relations = _cycles(network, cycles, n, len(outer))
    free = [c for c in range(n) if c not in pivots]
    for k, reference in enumerate(references):
        if n - len(references) + k not in free:
            raise DiscrimError(
                f'the equilibrated steps fix the share of "{reference.name}" by themselves',
                place=network.mechanism.place,
                do="They exchange the kinds of site or catalysts with each other in a way that is "
                "not yet supported. Leave one of them out of equilibrated.",
            )
    unknown = [inner[c] for c in free if inner[c] not in references]
    monomials: dict[Species, Monomial] = {}
    for k, reference in enumerate(references):
        monomials[reference] = Monomial(v={k: Fraction(1)})
    for u, species in enumerate(unknown):
        k_of = network.family_of(species)
        v = {} if k_of is None else {k_of: Fraction(network.families[k_of].weights[species])}
        monomials[species] = Monomial(u={u: Fraction(1)}, v=v)
    for r, p in enumerate(pivots):
        made = Monomial(
            _merge(
                {amount(s.name): rows[r][n + f] for f, s in enumerate(outer) if rows[r][n + f]},
                _log_constants(steps, rows[r][n + len(outer) :], relations),
                Fraction(1),
            )
        )
        for c in free:
            if rows[r][c]:
                made = made.times(monomials[inner[c]], -rows[r][c])
        monomials[inner[p]] = made
    ordered = {s: monomials[s] for s in network.intermediates}
    return tuple(unknown), ordered, relations


def _cycles(
    network: Network, cycles: Matrix, n: int, outer: int
) -> tuple[tuple[str, Mapping[str, Fraction]], ...]:
    """Relations that closed cycles of equilibrated steps put on their constants."""
    steps = network.equilibrated
    for row in cycles:
        touched = [network.fluid[f].name for f in range(outer) if row[n + f]]
        if touched:
            involved = [s.name for j, s in enumerate(steps) if row[n + outer + j]]
            raise DiscrimError(
                f"the equilibrated step{'s' if len(involved) > 1 else ''} {', '.join(involved)} "
                f"put{'' if len(involved) > 1 else 's'} {', '.join(touched)} at equilibrium with "
                "each other, without any intermediate",
                place=next(s.place for s in steps if s.name == involved[0]),
                do="Amounts that are all in the law cannot also be tied to each other. Take one of "
                "the steps out, or leave one of the species unmeasured or write it as [derived].",
            )
    backwards = [list(reversed(row[n + outer :])) for row in cycles]
    reduced, pivots = row_reduce(backwards) if backwards else ([], [])
    names = [s.name for s in reversed(steps)]
    return tuple(
        (names[p], {names[c]: -x for c, x in enumerate(reduced[r]) if x and c != p})
        for r, p in enumerate(pivots)
    )


def _log_constants(
    steps: Sequence[Step],
    powers: Sequence[Fraction],
    relations: tuple[tuple[str, Mapping[str, Fraction]], ...],
) -> dict[sympy.Symbol, Fraction]:
    by_name = {s.name: s for s in steps}
    replaced = dict(relations)
    out: dict[sympy.Symbol, Fraction] = {}
    for step, e in zip(steps, powers, strict=True):
        if not e:
            continue
        for name, f in replaced.get(step.name, {step.name: Fraction(1)}).items():
            symbol = equilibrium(by_name[name])
            out[symbol] = out.get(symbol, Fraction(0)) + e * f
    return {s: e for s, e in out.items() if e}


def _sides(
    network: Network, step: Step, monomials: Mapping[Species, Monomial]
) -> tuple[Monomial, Monomial | None]:
    """Rates ahead and back of a step, as monomials (mass action, order = coefficient)."""

    def side(constant: sympy.Symbol, parts: Sequence[tuple[Species, int]]) -> Monomial:
        out = Monomial({constant: Fraction(1)})
        for species, n in parts:
            one = monomials.get(species) or Monomial({amount(species.name): Fraction(1)})
            out = out.times(one, Fraction(n))
        return out

    ahead = side(forward(step), step.left)
    return ahead, side(backward(step), step.right) if step.reversible else None


def _unsupported(network: Network, species: Sequence[Species], why: str) -> DiscrimError:
    names = ", ".join(s.name for s in species)
    return DiscrimError(
        f"the balances of {names} are not linear in the intermediates: {why}",
        place=network.mechanism.place,
        do="Such a law has no closed form that is yet supported. If one of them is measured or is "
        "a reactant or product, name only the intermediates in steady = [...]; else take the fast "
        "steps between them as equilibrated, or write the rate law itself as law = ....",
    )


def _steady_state(
    network: Network,
    algebra: Algebra,
    unknowns: tuple[Species, ...],
    sides: Sequence[tuple[Monomial, Monomial | None]],
) -> dict[int, tuple[PolyElement, PolyElement]]:
    """The free unknowns y_u from the balances that equilibrated steps do not enter."""
    inter = network.intermediates
    n = len(inter)
    of_equilibrated = changes(network.equilibrated, inter)
    of_kinetic = changes(network.kinetic, inter)
    everything = [a + b for a, b in zip(of_equilibrated, of_kinetic, strict=True)]
    width = len(network.equilibrated) + len(network.kinetic)
    conserved = null_space(transpose(everything, width), n) if n else []
    if len(conserved) > len(network.families):
        raise _undeclared(network, conserved)
    if not unknowns:
        return {}
    pools = (
        null_space(transpose(of_equilibrated, len(network.equilibrated)), n)
        if network.equilibrated
        else [[Fraction(int(i == j)) for j in range(n)] for i in range(n)]
    )
    balances: list[list[int]] = []
    kept: Matrix = []
    for pool in pools:
        row = [
            sum((pool[i] * of_kinetic[i][s] for i in range(n)), Fraction(0))
            for s in range(len(network.kinetic))
        ]
        trial = [*kept, row]
        if any(row) and len(row_reduce(trial)[1]) == len(trial):
            kept = trial
            balances.append(primitive(row))
    matrix: list[list[PolyElement]] = []
    right: list[PolyElement] = []
    for balance in balances:
        m_row, b = _balance_row(network, algebra, unknowns, sides, balance)
        matrix.append(m_row)
        right.append(b)
    solved = None
    if len(matrix) == len(unknowns):
        try:
            solved = solve_linear(matrix, right, algebra.ring.one)
        except TooLarge:
            raise DiscrimError(
                f"the law would have more than {MAX_TERMS} terms",
                place=network.mechanism.place,
                do="Take the fast steps as equilibrated, or leave out steps that cannot matter.",
            ) from None
    if solved is None:
        names = ", ".join(s.name for s in unknowns)
        raise DiscrimError(
            f"the balances do not determine the intermediates {names}",
            place=network.mechanism.place,
            do="Each needs a step that makes it and one that consumes it. If one of them is "
            "measured or is a reactant or product, name the others in steady = [...].",
        )
    numerators, denominator = solved
    return {u: (x, denominator) for u, x in enumerate(numerators)}


def _undeclared(network: Network, conserved: Matrix) -> DiscrimError:
    inter = network.intermediates
    known = {s for f in network.families for s in f.weights}
    vector = next(
        (v for v in conserved if any(v[i] for i in range(len(inter)) if inter[i] not in known)),
        conserved[-1],
    )
    members = [s for s, w in zip(inter, vector, strict=True) if w]
    names = ", ".join(s.name for s in members)
    return DiscrimError(
        f"no step changes the total of {names}",
        place=network.mechanism.place,
        do=f'If it is a catalyst, name its free form: catalyst = ["{members[0].name}"]. If one of '
        "them is measured, it is no intermediate: name the intermediates in steady = [...].",
    )


def _balance_row(
    network: Network,
    algebra: Algebra,
    unknowns: tuple[Species, ...],
    sides: Sequence[tuple[Monomial, Monomial | None]],
    balance: Sequence[int],
) -> tuple[list[PolyElement], PolyElement]:
    """One balance as a row of the linear system and its right-hand side, denominators cleared."""
    terms: list[tuple[int, Monomial]] = []
    for factor, (ahead, back) in zip(balance, sides, strict=True):
        if factor:
            terms.append((factor, ahead))
            if back is not None:
                terms.append((-factor, back))
    powers = {tuple(sorted(m.v.items())) for _, m in terms}
    if len(powers) > 1:
        raise _unsupported(
            network, unknowns, "their steps need different numbers of vacant sites or catalysts"
        )
    lowest: dict[sympy.Symbol, Fraction] = {}
    for _, m in terms:
        for symbol, e in m.symbols.items():
            lowest[symbol] = min(lowest.get(symbol, Fraction(0)), e)
    clear = Monomial({s: -e for s, e in lowest.items() if e})
    row = [algebra.ring.zero for _ in unknowns]
    right = algebra.ring.zero
    for factor, m in terms:
        top, bottom = algebra.monomial(m.times(clear).symbols)
        assert bottom == 1
        if not m.u:
            right = right - top * factor
        elif len(m.u) == 1 and next(iter(m.u.values())) == 1:
            u = next(iter(m.u))
            row[u] = row[u] + top * factor
        else:
            involved = [unknowns[u] for u in m.u]
            raise _unsupported(network, involved, "two of them meet in one step")
    return row, right


Factors = list[tuple[PolyElement, int]]


def _powers(
    algebra: Algebra, m: Monomial, values: Mapping[int, tuple[PolyElement, PolyElement]]
) -> tuple[Factors, Factors]:
    """Factors above and below of a monomial without its references."""
    top, bottom = algebra.monomial(m.symbols)
    above: Factors = [(top, 1)]
    below: Factors = [(bottom, 1)]
    for u, e in m.u.items():
        if e.denominator != 1:
            raise DiscrimError(
                "an intermediate at steady state takes part in an equilibrium with a broken power",
                do="Such a law is not yet supported; write the rate law itself as law = ....",
            )
        y, d = values[u]
        above.append((y, int(e)))
        below.append((d, int(e)))
    return above, below


def _totals(
    network: Network,
    algebra: Algebra,
    monomials: Mapping[Species, Monomial],
    values: Mapping[int, tuple[PolyElement, PolyElement]],
) -> tuple[Quotient, ...]:
    """S_k = sum of w_i x_i / v_k over each conserved total, so that v_k = 1/S_k."""
    totals = []
    for k, family in enumerate(network.families):
        total = Quotient(algebra.ring.zero)
        for species, weight in family.weights.items():
            m = monomials[species]
            if dict(m.v) != {k: Fraction(1)}:
                raise _unsupported(
                    network,
                    [species],
                    "it takes more or less than one "
                    + (
                        "site, so that the balance of sites"
                        if family.kind == "sites"
                        else "catalyst, so that the balance of the catalyst"
                    )
                    + " becomes quadratic",
                )
            above, below = _powers(algebra, m, values)
            total = add(total, ratio([*above, (algebra.ring(weight), 1)], below))
        totals.append(total)
    return tuple(totals)


def _net_rate(
    algebra: Algebra,
    step: Step,
    side: tuple[Monomial, Monomial | None],
    values: Mapping[int, tuple[PolyElement, PolyElement]],
    totals: Sequence[Quotient],
) -> Quotient:
    total = Quotient(algebra.ring.zero)
    for sign, m in ((1, side[0]), (-1, side[1])):
        if m is None:
            continue
        above, below = _powers(algebra, m, values)
        for k, e in m.v.items():
            if e.denominator != 1:
                raise DiscrimError(
                    "a step needs a broken number of vacant sites",
                    place=step.place,
                    do="Such a law is not yet supported; write the rate law itself as law = ....",
                )
            above += [(poly, power * int(e)) for poly, power in totals[k].bottom]
            below.append((totals[k].top, int(e)))
        total = add(total, ratio([*above, (algebra.ring(sign), 1)], below))
    return total
