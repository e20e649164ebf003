"""Intermediates as monomials: what the equilibrated steps alone say.

Every intermediate is written as

    x_i = m_i  prod_u y_u^(a_iu)  prod_k v_k^(b_ik)

with m_i a monomial in equilibrium constants and amounts, v_k the reference form of conserved total
k (vacant sites, free catalyst) and y_u the free unknowns: log-linear equilibria, solved exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import sympy

from discrim.errors import DiscrimError
from discrim.mechanism.exact import Matrix, row_reduce
from discrim.mechanism.model import Species, Step
from discrim.ratelaw.derive_cycles import Relation
from discrim.ratelaw.derive_network import Network, changes
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol

Powers = Mapping[sympy.Symbol, Fraction]


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


def forward(step: Step) -> sympy.Symbol:
    return constant_symbol(f"k_{step.name}")


def backward(step: Step) -> sympy.Symbol:
    return constant_symbol(f"k_rev_{step.name}")


def equilibrium(step: Step) -> sympy.Symbol:
    return constant_symbol(f"K_{step.name}", ConstantKind.EQUILIBRIUM)


class Constants:
    """Constants of the steps as powers of symbols, the relations of cycles put in."""

    def __init__(self, network: Network, relations: Sequence[Relation]) -> None:
        self._equilibrated = {s.name for s in network.equilibrated}
        self._steps = {s.name: s for s in network.mechanism.steps}
        self._relations = {r.step.name: r for r in relations}

    def ahead(self, step: Step) -> Powers:
        return {forward(step): Fraction(1)}

    def back(self, step: Step) -> Powers:
        """The constant back: k_rev, or k/K where a cycle gives K."""
        if step.name not in self._relations:
            return {backward(step): Fraction(1)}
        return _merge(self.ahead(step), self.equilibrium(step), Fraction(-1))

    def equilibrium(self, step: Step) -> Powers:
        relation = self._relations.get(step.name)
        if relation is not None:
            out: Powers = {}
            for name, e in relation.others.items():
                out = _merge(out, self.equilibrium(self._steps[name]), e)
            return out
        if step.name in self._equilibrated:
            return {equilibrium(step): Fraction(1)}
        return {forward(step): Fraction(1), backward(step): Fraction(-1)}


def equilibria(
    network: Network, constants: Constants
) -> tuple[tuple[Species, ...], dict[Species, Monomial]]:
    """The free unknowns, and each intermediate as a monomial of them.

    Raises ``DiscrimError`` when equilibrated steps put the measured species themselves at
    equilibrium, or fix the share of a reference by themselves.
    """
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
    _untied(network, cycles, n, len(outer))
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
                _log_constants(steps, rows[r][n + len(outer) :], constants),
                Fraction(1),
            )
        )
        for c in free:
            if rows[r][c]:
                made = made.times(monomials[inner[c]], -rows[r][c])
        monomials[inner[p]] = made
    ordered = {s: monomials[s] for s in network.intermediates}
    return tuple(unknown), ordered


def _untied(network: Network, cycles: Matrix, n: int, outer: int) -> None:
    """Refuse equilibrated steps that together tie measured amounts to each other."""
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


def _log_constants(
    steps: Sequence[Step], powers: Sequence[Fraction], constants: Constants
) -> Powers:
    out: Powers = {}
    for step, e in zip(steps, powers, strict=True):
        if e:
            out = _merge(out, constants.equilibrium(step), e)
    return out


def sides(
    step: Step, monomials: Mapping[Species, Monomial], constants: Constants
) -> tuple[Monomial, Monomial | None]:
    """Rates ahead and back of a step, as monomials (mass action, order = coefficient)."""

    def side(constant: Powers, parts: Sequence[tuple[Species, int]]) -> Monomial:
        out = Monomial(constant)
        for species, n in parts:
            one = monomials.get(species) or Monomial({amount(species.name): Fraction(1)})
            out = out.times(one, Fraction(n))
        return out

    ahead = side(constants.ahead(step), step.left)
    return ahead, side(constants.back(step), step.right) if step.reversible else None
