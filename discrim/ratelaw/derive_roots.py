"""Balances that are not linear in the intermediates: roots in closed form, or kept implicit.

Radicals that meet, species on two sites, dissociation that is not equilibrated: the balances are
polynomials in the free unknowns and the references. Unknowns that enter an equation linearly are
eliminated exactly; what is left is an equation in one unknown, solved as a power or as the positive
root of a quadratic, or a system that the law keeps as it is (:mod:`discrim.ratelaw.implicit`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from math import lcm

import sympy
from sympy.polys.rings import PolyElement

from discrim.mechanism.exact import row_reduce
from discrim.mechanism.model import Species
from discrim.ratelaw.derive_algebra import Algebra, Quotient
from discrim.ratelaw.derive_balances import (
    Balances,
    Sides,
    Value,
    clearing,
    row_terms,
    undetermined,
)
from discrim.ratelaw.derive_equilibria import Monomial
from discrim.ratelaw.derive_factors import (
    coefficients,
    common_factor,
    exact_quotient,
    lowered,
    lowest,
)
from discrim.ratelaw.derive_network import Network
from discrim.ratelaw.model import total_amount
from discrim.ratelaw.roots import Group, one_root, powers_of
from discrim.ratelaw.solve import linear_in, one_sign, put

_MOST_FACTORED = 60  # terms; factoring is slow
_MOST = 3000  # terms of one equation while unknowns are eliminated; beyond it they stay implicit


@dataclass(frozen=True, slots=True)
class Rooted:
    """What :mod:`derive_balances` gives for linear balances, with roots beside it.

    ``values`` are those of the free unknowns, ``totals`` the inverses of the references.
    """

    algebra: Algebra
    values: dict[int, Value]
    powers: dict[int, int]  # values[u] is the unknown to the power 1/powers[u]
    totals: tuple[Quotient, ...]
    groups: tuple[Group, ...]  # unknowns that stand in the above as symbols


def solve_with_roots(
    network: Network,
    roots_of: Mapping[sympy.Symbol, int],
    unknowns: Sequence[Species],
    sides: Sides,
    monomials: Mapping[Species, Monomial],
    found: Balances,
    *,
    too_large: bool,
) -> Rooted:
    """All unknowns and references of balances that are polynomials of any degree in them.

    ``too_large``: the balances are linear, but their solution has too many terms to be written.
    """
    every = [m for side in sides for m in side if m is not None] + list(monomials.values())
    y = [sympy.Dummy(_name(network, s), positive=True) for s in unknowns]
    v = [sympy.Dummy(f"[{f.reference.name}]", positive=True) for f in network.families]
    q_y = [lcm(*(m.u.get(i, Fraction(0)).denominator for m in every)) for i in range(len(y))]
    q_v = [lcm(*(m.v.get(k, Fraction(0)).denominator for m in every)) for k in range(len(v))]
    totals_of = [total_amount(f.name) for f in network.families if f.kind != "sites"]
    roots_of = {**roots_of, **dict.fromkeys(totals_of, 1)}
    algebra = Algebra.over({**roots_of, **dict.fromkeys([*y, *v], 1)})

    def powers(m: Monomial) -> dict[sympy.Symbol, Fraction]:
        out = dict(m.symbols)
        out |= {y[i]: e * q_y[i] for i, e in m.u.items()}
        out |= {v[k]: e * q_v[k] for k, e in m.v.items()}
        return out

    equations = []
    for row in _exchange_first(found.rows, sides):
        equations.append([(c, powers(m)) for c, m in row_terms(row, sides)])
    for family in network.families:
        total = [(w, powers(monomials[s])) for s, w in family.weights.items()]
        # sites are counted as fractions; of a catalyst whose forms meet, the total matters
        whole = {} if family.kind == "sites" else {total_amount(family.name): Fraction(1)}
        equations.append([*total, (-1, whole)])
    first = len(roots_of)
    # Intermediates go first, vacant sites stay to the last: a root that is a share of the sites, or
    # a radical, is the one that a chemist would name.
    order = [*range(first, first + len(y) + len(v))]
    order.sort(key=lambda i: (i >= first + len(y), not _bound(network, unknowns, i - first)))
    polynomials = [_polynomial(algebra, terms) for terms in equations]
    elimination = _Elimination(algebra, first, order)
    determined = elimination.keep(polynomials) if too_large else elimination.run(polynomials)
    if (
        not too_large
        and determined
        and elimination.ambiguous()
        and not elimination.least_is_right()
    ):
        # a root of what is left may make negative what was eliminated: keep all of them
        elimination = _Elimination(algebra, first, order, only_certain=True)
        determined = elimination.run(polynomials)
    if not determined:
        raise undetermined(network, unknowns or [f.reference for f in network.families])
    solved = elimination.back_substituted()
    generator = algebra.ring.gens
    values: dict[int, Value] = {}
    totals: list[Quotient] = []
    for i in range(first, first + len(y) + len(v)):
        top, bottom = solved.get(i, (generator[i], algebra.ring.one))
        if i < first + len(y):
            values[i - first] = ([(top, 1)], [(bottom, 1)])
        else:
            q = q_v[i - first - len(y)]
            totals.append(Quotient(bottom**q, ((top, q),)))
    return Rooted(
        algebra,
        values,
        dict(enumerate(q_y)),
        tuple(totals),
        tuple(
            Group(tuple(algebra.symbols[i] for i in ids), tuple(algebra.expr(e) for e in equations))
            for ids, equations in elimination.kept
        ),
    )


def _name(network: Network, species: Species) -> str:
    """The name of a free unknown: a bound species stands relative to its reference."""
    k = network.family_of(species)
    return f"[{species.name}]" if k is None else f"[{species.name}]/[{network.families[k].name}]"


def _bound(network: Network, unknowns: Sequence[Species], u: int) -> bool:
    return u < len(unknowns) and network.family_of(unknowns[u]) is not None


def _exchange_first(rows: Sequence[Sequence[int]], sides: Sides) -> list[list[int]]:
    """The same balances, combined so that steps that turn one intermediate into another are in few.

    Such steps are fast in a chain; where they do not stand, what starts and ends it is balanced
    without being lost in their difference.
    """
    width = len(sides)

    def degree(s: int) -> Fraction:
        return max(
            sum(m.u.values(), Fraction(0)) + sum(m.v.values(), Fraction(0))
            for m in sides[s]
            if m is not None
        )

    order = sorted(range(width), key=lambda s: (degree(s) != 1, s))
    reduced, _ = (
        row_reduce([[Fraction(row[s]) for s in order] for row in rows]) if rows else ([], 0)
    )
    out = []
    for row in reduced:
        scale = lcm(*(x.denominator for x in row))
        whole = [0] * width
        for s, x in zip(order, row, strict=True):
            whole[s] = int(x * scale)
        out.append(whole)
    return out


def _polynomial(
    algebra: Algebra, terms: Sequence[tuple[int, Mapping[sympy.Symbol, Fraction]]]
) -> PolyElement:
    clear = clearing([p for _, p in terms])
    out: dict[tuple[int, ...], int] = {}
    for c, p in terms:
        shifted = dict(p)
        for symbol, e in clear.items():
            shifted[symbol] = shifted.get(symbol, Fraction(0)) + e
        key = tuple(algebra.exponents(shifted))
        out[key] = out.get(key, 0) + c
    domain = algebra.ring.domain
    return algebra.ring.from_dict({m: domain(c) for m, c in out.items() if c})


class _Elimination:
    """Unknowns put into one another, each from an equation that is linear in it."""

    def __init__(
        self, algebra: Algebra, first: int, order: Sequence[int], *, only_certain: bool = False
    ) -> None:
        self.algebra = algebra
        self.only_certain = only_certain
        self.uncertain: set[int] = set()
        self.first = first
        self.left = list(order)
        self.assigned: list[tuple[int, PolyElement, PolyElement]] = []
        self.kept: list[tuple[tuple[int, ...], tuple[PolyElement, ...]]] = []

    def run(self, equations: list[PolyElement]) -> bool:
        """False when the equations do not determine the unknowns."""
        equations = [self.tidy(e) for e in equations if e]
        while self.left:
            if any(not self.unknowns(e) for e in equations):
                return False
            single = next((e for e in equations if self.alone(e)), None)
            if single is not None:
                (i,) = self.unknowns(single)
                self.kept.append(((i,), (self.with_root(single, i),)))
                self.left.remove(i)
                equations = [e for e in equations if e is not single]
                # what is known now counts as a parameter
                continue
            step = self.best(equations)
            if step is None:
                return self.keep(equations)
            equation, i, slope, rest = step
            self.assigned.append((i, -rest, slope))
            self.left.remove(i)
            equations = [
                self.tidy(self.without(put(e, i, -rest, slope), slope))
                for e in equations
                if e is not equation
            ]
            equations = [e for e in equations if e]
        return not equations

    def keep(self, equations: Sequence[PolyElement]) -> bool:
        """Leave all equations as they are."""
        involved, self.left = tuple(self.left), []
        self.kept.append((involved, tuple(equations)))
        return len(equations) == len(involved)

    def unknowns(self, equation: PolyElement) -> set[int]:
        return {i for i in self.left if equation.degree(i) > 0}

    def alone(self, equation: PolyElement) -> bool:
        """One unknown, not linear."""
        found = self.unknowns(equation)
        return len(found) == 1 and equation.degree(next(iter(found))) > 1

    def with_root(self, equation: PolyElement, i: int) -> PolyElement:
        """The one factor of an equation in one unknown that can be zero, if that is sure."""
        if len(equation) > _MOST_FACTORED:
            return equation
        able = [
            f
            for f, _ in equation.factor_list()[1]
            if f.degree(i) > 0 and one_sign(f, frozenset()) is None
        ]
        return able[0] if len(able) == 1 else equation

    def best(
        self, equations: Sequence[PolyElement]
    ) -> tuple[PolyElement, int, PolyElement, PolyElement] | None:
        """The equation and unknown that make the others grow least; sure of sign before unsure."""
        choices = []
        for n, equation in enumerate(equations):
            for rank, i in enumerate(self.left):
                split = linear_in(equation, i)
                if split is None:
                    continue
                slope, rest = split
                if not rest:
                    continue
                a, b = one_sign(slope, frozenset()), one_sign(rest, frozenset())
                certain = a is not None and b == -a
                cost = max(len(slope), len(rest))
                touched = [e for e in equations if e is not equation and e.degree(i) > 0]
                if self.only_certain and not certain:
                    continue
                size = sum(len(e) * cost ** int(e.degree(i)) for e in touched)
                if size > 100 * _MOST:
                    continue
                choices.append(((not certain, size, rank, n), equation, i, slope, rest))
        if not choices:
            return None
        found = min(choices, key=lambda c: c[0])
        if found[0][0]:
            self.uncertain.add(found[2])
        return found[1:]

    def ambiguous(self) -> bool:
        """Whether what was kept has several positive roots, not all of them sure to be allowed."""
        several = any(
            len(ids) > 1
            or not one_root(
                powers_of(self.algebra.expr(equations[0]), self.algebra.symbols[ids[0]])
            )
            for ids, equations in self.kept
        )
        return several and bool(self.uncertain)

    def least_is_right(self) -> bool:
        """Whether the smallest positive root of the one equation left is allowed if any root is.

        It is where what may be negative is positive up to some value of the unknown that is left
        and negative beyond it.
        """
        if len(self.kept) != 1 or len(self.kept[0][0]) != 1:
            return False
        ((z,), _) = self.kept[0]
        found = self.back_substituted()
        return all(_positive_up_to(*found[i], z) for i in self.uncertain)

    def without(self, poly: PolyElement, factor: PolyElement) -> PolyElement:
        """Divided by what it shares with ``factor``, which cannot be zero."""
        while poly and not factor.is_ground:
            shared = common_factor(poly, factor)
            if shared.is_ground:
                break
            poly = exact_quotient(poly, shared)
        return poly

    def tidy(self, poly: PolyElement) -> PolyElement:
        """Without whole factors and powers of single symbols, none of which is zero."""
        if not poly:
            return poly
        low = lowest(poly)
        if any(low):
            poly = lowered(poly, low)
        poly = poly.primitive()[1]
        return -poly if poly.LC < 0 else poly

    def back_substituted(self) -> dict[int, tuple[PolyElement, PolyElement]]:
        """Each eliminated unknown as a quotient in what was kept."""
        out: dict[int, tuple[PolyElement, PolyElement]] = {}
        for i, top, bottom in reversed(self.assigned):
            for j, (a, b) in out.items():
                high_t, high_b = top.degree(j), bottom.degree(j)
                if max(high_t, high_b) <= 0:
                    continue
                top, bottom = put(top, j, a, b), put(bottom, j, a, b)
                if high_b > high_t:
                    top = top * b ** (max(high_b, 0) - max(high_t, 0))
                elif high_t > high_b:
                    bottom = bottom * b ** (max(high_t, 0) - max(high_b, 0))
            shared = common_factor(top, bottom)
            if not (shared.is_ground and abs(shared.LC) == 1):
                top, bottom = exact_quotient(top, shared), exact_quotient(bottom, shared)
            if bottom.LC < 0:
                top, bottom = -top, -bottom
            out[i] = (top, bottom)
        return out


def _positive_up_to(top: PolyElement, bottom: PolyElement, z: int) -> bool:
    """Whether a quotient is positive for small values of generator ``z`` and changes sign once."""
    changes, first = 0, 1
    for poly in (top, bottom):
        by_power = coefficients(poly, z)
        signs = [one_sign(by_power[e], frozenset()) for e in sorted(by_power)]
        if any(s is None for s in signs):
            return False
        changes += sum(a != b for a, b in pairwise(signs))
        first *= signs[0] or 0
    return first == 1 and changes <= 1
