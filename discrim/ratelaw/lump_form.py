"""A rate law as sums of coefficient times powers of amounts, over powers of such sums.

Each coefficient, a polynomial in the constants of the steps, is split into a whole number and a
product of *atoms*: single constants and polynomials that do not factor. In logarithms of the atoms
every coefficient is then a vector, and what data can tell apart is linear algebra on these vectors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from typing import Any

import sympy
from sympy import ZZ
from sympy.polys.rings import PolyElement

from discrim.ratelaw.derive_algebra import Algebra
from discrim.ratelaw.derive_factors import common_factor, exact_quotient, factors_of

Amounts = tuple[tuple[sympy.Symbol, Fraction], ...]  # monomial in the amounts, sorted by name
Vector = dict[int, Fraction]  # exponents of atoms, by index


class NotRational(Exception):
    """The law is no quotient of polynomials in its constants and amounts."""


@dataclass(frozen=True, slots=True)
class Coefficient:
    """``number`` times the product of atoms to the powers ``vector``."""

    number: Fraction
    vector: Vector


@dataclass(frozen=True, slots=True)
class Sum:
    """A polynomial in the amounts."""

    terms: dict[Amounts, Coefficient]


@dataclass(frozen=True, slots=True)
class Term:
    """``top`` over the product of ``sums[i]**power``."""

    top: Sum
    bottom: tuple[tuple[int, int], ...]  # (index into Form.sums, power)


@dataclass(frozen=True, slots=True)
class Form:
    """Several expressions (the rate, productions, pathways) over shared denominators.

    ``atoms`` are sympy expressions in the constants, which are themselves the first of them.
    """

    constants: tuple[sympy.Symbol, ...]
    atoms: tuple[Any, ...]
    slopes: tuple[tuple[Fraction, ...], ...]  # d log(atom)/d log(constant) at one point, exact
    sums: tuple[Sum, ...]
    expressions: tuple[tuple[Term, ...], ...]
    equations: tuple[int, ...] = ()  # sums that are zero: only ratios of their terms matter

    def coefficients(self) -> list[Coefficient]:
        found = [c for s in self.sums for c in s.terms.values()]
        return found + [c for e in self.expressions for t in e for c in t.top.terms.values()]


def is_amount(symbol: sympy.Symbol) -> bool:
    return symbol.name.startswith(("[", "{"))


def read_form(
    expressions: Sequence[Any], constants: Sequence[sympy.Symbol], equations: Sequence[Any] = ()
) -> Form:
    """Bring rational expressions to :class:`Form`; raises :class:`NotRational`."""
    roots: dict[sympy.Symbol, int] = dict.fromkeys(constants, 1)
    seen: set[Any] = set()
    for e in (*expressions, *equations):
        _collect(e, roots, seen)
    for symbol in roots:
        if symbol not in constants and not is_amount(symbol):
            raise NotRational(str(symbol))
    return _Reader(Algebra.over(roots), tuple(constants)).read(expressions, equations)


def _collect(e: Any, roots: dict[sympy.Symbol, int], seen: set[Any]) -> None:
    if e in seen:
        return
    if e.is_Add:
        seen.add(e)
    if e.is_Symbol:
        roots.setdefault(e, 1)
    elif e.is_Pow:
        if not e.exp.is_Rational:
            raise NotRational(str(e))
        if e.base.is_Symbol:
            roots[e.base] = lcm(roots.get(e.base, 1), int(e.exp.q))
        elif not e.exp.is_Integer:
            raise NotRational(str(e))
        else:
            _collect(e.base, roots, seen)
    elif e.is_Add or e.is_Mul:
        for a in e.args:
            _collect(a, roots, seen)
    elif not e.is_Rational:
        raise NotRational(str(e))


class _Reader:
    def __init__(self, algebra: Algebra, constants: tuple[sympy.Symbol, ...]) -> None:
        self.algebra = algebra
        self.ring = algebra.ring
        self.constants = constants
        self.n = len(constants)
        self.atoms: list[Any] = list(constants)
        self.atom_of: dict[PolyElement, int] = {}
        self.sums: list[Sum] = []
        self.read_already: dict[Any, PolyElement | None] = {}
        self.sum_of: dict[PolyElement, int] = {}

    def read(self, expressions: Sequence[Any], equations: Sequence[Any] = ()) -> Form:
        out = []
        for e in expressions:
            grouped: dict[tuple[tuple[int, int], ...], list[tuple[PolyElement, int]]] = {}
            for top, below in self.parts(e):
                keys: dict[int, int] = {}
                divisor = 1
                for poly, power in below:
                    if poly.is_ground:
                        divisor *= int(poly.LC) ** power
                        continue
                    k = self.shared(poly)
                    keys[k] = keys.get(k, 0) + power
                grouped.setdefault(tuple(sorted(keys.items())), []).append((top, divisor))
            terms = []
            for key, pieces in grouped.items():
                scale = lcm(*(d for _, d in pieces))
                top = self.ring.zero
                for piece, divisor in pieces:
                    top = top + piece * (scale // divisor)
                if top:
                    terms.append(Term(self.sum(top, scale), key))
            out.append(tuple(terms))
        zero = tuple(self.shared(self.rational(e)[0]) for e in equations)
        slopes = tuple(self.slope(k) for k in range(len(self.atoms)))
        return Form(self.constants, tuple(self.atoms), slopes, tuple(self.sums), tuple(out), zero)

    def parts(self, e: Any) -> list[tuple[PolyElement, list[tuple[PolyElement, int]]]]:
        """Additive parts of an expression as numerator and factors of the denominator."""
        terms = e.args if e.is_Add else (e,)
        return [self.part(t) for t in terms]

    def part(self, e: Any) -> tuple[PolyElement, list[tuple[PolyElement, int]]]:
        top = self.ring.one
        below: list[tuple[PolyElement, int]] = []
        for factor in e.args if e.is_Mul else (e,):
            base, power = (factor.base, factor.exp) if factor.is_Pow else (factor, sympy.Integer(1))
            if base.is_Symbol:
                i = self.algebra.index[base]
                whole = int(power * self.algebra.roots[i])
                gen = self.ring.gens[i]
                if whole >= 0:
                    top = top * gen**whole
                else:
                    below.append((gen, -whole))
            elif base.is_Rational:
                number = base**power
                top = top * ZZ(int(number.p))
                if number.q != 1:
                    below.append((self.ring(ZZ(int(number.q))), 1))
            else:
                over, under = self.rational(base)
                if power < 0:
                    over, under = under, over
                top = top * over ** abs(int(power))
                if under != 1:
                    below.append((under, abs(int(power))))
        return top, below

    def rational(self, e: Any) -> tuple[PolyElement, PolyElement]:
        """A sum as one numerator over one denominator."""
        over, under = self.ring.zero, self.ring.one
        if e not in self.read_already:
            self.read_already[e] = self.polynomial(e)
        whole = self.read_already[e]
        if whole is not None:
            return whole, under
        for top, below in self.parts(e):
            divisor = self.ring.one
            for poly, power in below:
                divisor = divisor * poly**power
            if divisor == under:
                over = over + top
                continue
            shared = common_factor(under, divisor)
            left, right = exact_quotient(divisor, shared), exact_quotient(under, shared)
            over, under = over * left + top * right, under * left
        return over, under

    def polynomial(self, e: Any) -> PolyElement | None:
        """A sum of products of powers of symbols, read directly; None if it is something else."""
        if not e.is_Add:
            return None
        out: dict[tuple[int, ...], Any] = {}
        for term in e.args:
            number = 1
            exponents = [0] * self.ring.ngens
            for factor in term.args if term.is_Mul else (term,):
                if factor.is_Integer:
                    number *= int(factor)
                    continue
                base, power = (factor.base, factor.exp) if factor.is_Pow else (factor, 1)
                if not base.is_Symbol:
                    return None
                i = self.algebra.index[base]
                whole = power * self.algebra.roots[i]
                if whole < 0:
                    return None
                exponents[i] += int(whole)
            key = tuple(exponents)
            out[key] = out.get(key, 0) + number
        return self.ring.from_dict({m: ZZ(c) for m, c in out.items() if c})

    def shared(self, poly: PolyElement) -> int:
        if poly not in self.sum_of:
            self.sum_of[poly] = len(self.sums)
            self.sums.append(self.sum(poly))
        return self.sum_of[poly]

    def sum(self, poly: PolyElement, divisor: int = 1) -> Sum:
        apart: dict[tuple[int, ...], dict[tuple[int, ...], Any]] = {}
        pad = (0,) * (self.ring.ngens - self.n)
        for monomial, c in poly.terms():
            apart.setdefault(monomial[self.n :], {})[(*monomial[: self.n], *pad)] = c
        terms: dict[Amounts, Coefficient] = {}
        for powers, inside in apart.items():
            amounts = tuple(
                (
                    self.algebra.symbols[self.n + i],
                    Fraction(e, self.algebra.roots[self.n + i]),
                )
                for i, e in enumerate(powers)
                if e
            )
            amounts = tuple(sorted(amounts, key=lambda item: item[0].name))
            terms[amounts] = self.coefficient(self.ring.from_dict(inside), divisor)
        ordered = sorted(terms.items(), key=lambda item: order_of(item[0]))
        return Sum(dict(ordered))

    def coefficient(self, poly: PolyElement, divisor: int) -> Coefficient:
        vector: Vector = {}
        if len(poly) == 1:
            monomial, c = next(iter(poly.terms()))
            number = int(c)
            self.powers(vector, monomial, 1)
            return Coefficient(Fraction(number, divisor), vector)
        content, factors = factors_of(poly)
        number = int(content)
        for factor, e in factors:
            if len(factor) == 1:
                monomial, c = next(iter(factor.terms()))
                number *= int(c) ** e
                self.powers(vector, monomial, e)
                continue
            if factor.LC < 0:
                factor = -factor
                number *= (-1) ** e
            if factor not in self.atom_of:
                self.atom_of[factor] = len(self.atoms)
                self.atoms.append(self.algebra.expr(factor))
            k = self.atom_of[factor]
            vector[k] = vector.get(k, Fraction(0)) + e
        return Coefficient(Fraction(number, divisor), vector)

    def slope(self, k: int) -> tuple[Fraction, ...]:
        """d log(atom k)/d log(constant) where the roots of the constants are 2, 5, 8, ..."""
        if k < self.n:
            return tuple(Fraction(int(i == k)) for i in range(self.n))
        poly = next(p for p, index in self.atom_of.items() if index == k)
        total = 0
        weighted = [0] * self.n
        for monomial, c in poly.terms():
            value = int(c)
            for i in range(self.n):
                value *= (3 * i + 2) ** monomial[i]
            total += value
            for i in range(self.n):
                weighted[i] += monomial[i] * value
        return tuple(
            Fraction(w, total * self.algebra.roots[i]) if total else Fraction(0)
            for i, w in enumerate(weighted)
        )

    def powers(self, vector: Vector, monomial: Sequence[int], times: int) -> None:
        for i, e in enumerate(monomial[: self.n]):
            if e:
                share = Fraction(e * times, self.algebra.roots[i])
                vector[i] = vector.get(i, Fraction(0)) + share


def order_of(amounts: Amounts) -> tuple[Fraction, int, tuple[str, ...]]:
    """Monomials by total power, then by name: 1, A, B, A B, ..."""
    total = sum((e for _, e in amounts), Fraction(0))
    return total, len(amounts), tuple(f"{s.name}^{e}" for s, e in amounts)
