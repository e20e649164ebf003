"""Steady-state balances, and the free unknowns from them where they enter linearly.

For one catalyst or one kind of site the ratio of every intermediate to the reference is the
quotient of two sums over spanning trees (:mod:`discrim.ratelaw.derive_trees`); where steps split or
join intermediates, fraction-free elimination gives the same. Balances that are not linear are left
to :mod:`discrim.ratelaw.derive_roots`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import sympy
from sympy import ZZ
from sympy.polys.rings import PolyElement

from discrim.errors import DiscrimError
from discrim.mechanism.claims import taken
from discrim.mechanism.exact import Matrix, null_space, primitive, row_reduce, transpose
from discrim.mechanism.model import Species
from discrim.ratelaw import derive_trees
from discrim.ratelaw.derive_algebra import (
    MAX_TERMS,
    Algebra,
    TooLarge,
    solve_linear,
)
from discrim.ratelaw.derive_equilibria import Monomial
from discrim.ratelaw.derive_network import Network, changes

Sides = Sequence[tuple[Monomial, Monomial | None]]
Factors = list[tuple[PolyElement, int]]
Value = tuple[Factors, Factors]  # factors above and below


@dataclass(frozen=True, slots=True)
class Balances:
    """Independent balances that equilibrated steps do not enter.

    Attributes
    ----------
    pools : for each balance, how much of each intermediate it counts
    rows : for each balance, the coefficient of the net rate of each kinetic step
    """

    pools: Matrix
    rows: list[list[int]]


def balances(network: Network, unknowns: Sequence[Species]) -> Balances:
    """As many balances as there are unknowns.

    Raises ``DiscrimError`` when a total is conserved that the mechanism does not declare, or when
    the balances do not determine the unknowns.
    """
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
        return Balances([], [])
    pools = (
        null_space(transpose(of_equilibrated, len(network.equilibrated)), n)
        if network.equilibrated
        else [[Fraction(int(i == j)) for j in range(n)] for i in range(n)]
    )
    # Pools that hold the reference of a total come last: their balance follows from the others.
    references = {f.reference for f in network.families}
    pools.sort(key=lambda p: any(x and inter[i] in references for i, x in enumerate(p)))
    kept_pools: Matrix = []
    kept: Matrix = []
    rows: list[list[int]] = []
    for pool in pools:
        row = [
            sum((pool[i] * of_kinetic[i][s] for i in range(n)), Fraction(0))
            for s in range(len(network.kinetic))
        ]
        trial = [*kept, row]
        if any(row) and len(row_reduce(trial)[1]) == len(trial):
            kept = trial
            kept_pools.append(pool)
            rows.append(primitive(row))
    if len(rows) != len(unknowns):
        raise undetermined(network, unknowns)
    return Balances(kept_pools, rows)


def undetermined(network: Network, unknowns: Sequence[Species]) -> DiscrimError:
    names = ", ".join(s.name for s in unknowns)
    return DiscrimError(
        f"the balances do not determine the intermediates {names}",
        place=network.mechanism.place,
        do="Each needs a step that makes it and one that consumes it."
        + (
            taken(network.mechanism, network.intermediates)
            or " If one of them is measured or is a reactant or product, name the others in "
            "steady = [...]."
        ),
    )


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


def linear(
    network: Network,
    algebra: Algebra,
    unknowns: Sequence[Species],
    sides: Sides,
    found: Balances,
) -> dict[int, Value] | None:
    """The unknowns, each in proportion to its reference; None where they do not enter linearly."""
    for row in found.rows:
        terms = [m for _, m in row_terms(row, sides)]
        if len({tuple(sorted(m.v.items())) for m in terms}) > 1:
            return None  # their steps need different numbers of vacant sites
        if any(m.u and (len(m.u) > 1 or next(iter(m.u.values())) != 1) for m in terms):
            return None  # two of them meet in one step
    if not unknowns:
        return {}
    values = _by_trees(network, algebra, unknowns, sides, found.pools)
    return values or _by_elimination(network, algebra, unknowns, sides, found.rows)


def row_terms(row: Sequence[int], sides: Sides) -> list[tuple[int, Monomial]]:
    """The terms of one balance: coefficient and monomial of each way of each step."""
    terms: list[tuple[int, Monomial]] = []
    for factor, (ahead, back) in zip(row, sides, strict=True):
        if factor:
            terms.append((factor, ahead))
            if back is not None:
                terms.append((-factor, back))
    return terms


def _by_trees(
    network: Network,
    algebra: Algebra,
    unknowns: Sequence[Species],
    sides: Sides,
    pools: Matrix,
) -> dict[int, Value] | None:
    """By spanning trees, where every step moves one unit from one pool to another; else None."""
    inter = network.intermediates
    at = [inter.index(s) for s in unknowns]
    node_of: list[int] = []
    for pool in pools:
        held = [u for u, i in enumerate(at) if pool[i]]
        if len(held) != 1 or pool[at[held[0]]] != 1:
            return None
        node_of.append(held[0] + 1)
    if sorted(node_of) != list(range(1, len(unknowns) + 1)):
        return None
    of_kinetic = changes(network.kinetic, inter)
    edges: dict[tuple[int, int], derive_trees.Sum] = {}
    for s, (ahead, back) in enumerate(sides):
        moved = [
            sum((pool[i] * of_kinetic[i][s] for i in range(len(inter)) if pool[i]), Fraction(0))
            for pool in pools
        ]
        for sign, m in ((1, ahead), (-1, back)):
            if m is None or not any(moved):
                continue
            came_from = next(iter(m.u)) + 1 if m.u else derive_trees.ROOT
            gone_to = derive_trees.ROOT
            for node, change in zip(node_of, moved, strict=True):
                change *= sign
                if change == 1 and gone_to == derive_trees.ROOT:
                    gone_to = node
                elif change and (change != -1 or node != came_from):
                    return None
            if came_from == gone_to:
                continue
            if came_from and not moved[node_of.index(came_from)]:
                return None
            key = derive_trees.packed(algebra.exponents(m.symbols))
            into = edges.setdefault((came_from, gone_to), {})
            into[key] = into.get(key, 0) + 1
    try:
        found = derive_trees.steady_state(len(unknowns) + 1, edges, MAX_TERMS)
    except derive_trees.TooManyTrees:
        raise TooLarge from None
    if found is None:
        raise undetermined(network, unknowns)
    return {u: _as_factors(algebra, factors) for u, factors in enumerate(found)}


def _as_factors(
    algebra: Algebra, factors: Sequence[tuple[derive_trees.Sum, derive_trees.Sum]]
) -> Value:
    """As polynomials without common powers, so that the same sum over trees is the same factor."""
    width = len(algebra.symbols)
    above: Factors = []
    below: Factors = []
    shift = [0] * width
    for top, bottom in factors:
        for sums, into, sign in ((top, above, 1), (bottom, below, -1)):
            terms = {derive_trees.unpacked(k, width): c for k, c in sums.items()}
            low = tuple(map(min, *terms)) if len(terms) > 1 else next(iter(terms), (0,) * width)
            lowered = {tuple(map(int.__sub__, m, low)): ZZ(c) for m, c in terms.items()}
            into.append((algebra.ring.from_dict(lowered), 1))
            shift = [x + sign * e for x, e in zip(shift, low, strict=True)]
    over = tuple(max(e, 0) for e in shift)
    under = tuple(max(-e, 0) for e in shift)
    above.append((algebra.ring.from_dict({over: ZZ(1)}), 1))
    below.append((algebra.ring.from_dict({under: ZZ(1)}), 1))
    return above, below


def _by_elimination(
    network: Network,
    algebra: Algebra,
    unknowns: Sequence[Species],
    sides: Sides,
    rows: Sequence[Sequence[int]],
) -> dict[int, Value]:
    matrix: list[list[PolyElement]] = []
    right: list[PolyElement] = []
    for row in rows:
        terms = row_terms(row, sides)
        line = [algebra.ring.zero for _ in unknowns]
        b = algebra.ring.zero
        clear = clearing([m.symbols for _, m in terms])
        for factor, m in terms:
            top, bottom = algebra.monomial(m.times(Monomial(clear)).symbols)
            assert bottom == 1
            if m.u:
                u = next(iter(m.u))
                line[u] = line[u] + top * factor
            else:
                b = b - top * factor
        matrix.append(line)
        right.append(b)
    solved = solve_linear(matrix, right, algebra.ring.one)
    if solved is None:
        raise undetermined(network, unknowns)
    numerators, denominator = solved
    return {u: ([(x, 1)], [(denominator, 1)]) for u, x in enumerate(numerators)}


def clearing(powers: Sequence[Mapping[sympy.Symbol, Fraction]]) -> dict[sympy.Symbol, Fraction]:
    """The powers of symbols that make the lowest of each among these monomials zero."""
    low: dict[sympy.Symbol, Fraction] = {}
    for symbols in powers:
        for symbol in symbols:
            low.setdefault(symbol, Fraction(0))
    for symbol in low:
        low[symbol] = min(symbols.get(symbol, Fraction(0)) for symbols in powers)
    return {s: -e for s, e in low.items() if e}
