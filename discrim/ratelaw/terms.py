"""Polynomials read as products of powers: terms and coefficients by monomial in the amounts.

Logarithms of constants and numbers are kept by atoms, see :mod:`discrim.ratelaw.loglinear`.
"""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import sympy

from discrim.ratelaw.loglinear import Log, Row, plus
from discrim.ratelaw.shifts import Amounts
from discrim.ratelaw.solve import one_sign


class NotMonomial(Exception):
    """A coefficient has no logarithm that can be compared: its sign is not known."""


@dataclass(frozen=True, slots=True)
class Layout:
    """Which generators of the ring are what: unknowns first, then parameters, then amounts.

    ``signed`` : generators that may be negative; ``numbers`` : logarithms of those that stand for
    a number, such as 10^(1/2)
    """

    n_unknown: int
    n_parameter: int
    n: int
    signed: frozenset[int]
    numbers: Mapping[int, Log] = field(default_factory=dict)

    @property
    def n_constant(self) -> int:
        return self.n_unknown + self.n_parameter


@dataclass(frozen=True, slots=True)
class Term:
    """One product of powers in the larger law: c * constants^exponents, c without its sign."""

    sign: int
    exponents: Row
    log: Log


@dataclass(frozen=True, slots=True)
class Coefficient:
    """A coefficient of the smaller law: its sign (0: either), its logarithm, those of its terms.

    ``generic`` : its logarithm is in atoms that no product of powers relates
    """

    sign: int
    log: Log | None
    terms: tuple[tuple[int, Log], ...]
    generic: bool = True


#: For each polynomial of a tuple, by monomial in the amounts.
Larger = tuple[dict[Amounts, list[Term]], ...]
Smaller = tuple[dict[Amounts, Coefficient], ...]


def terms_of(poly: Any, layout: Layout) -> dict[Amounts, list[Term]]:
    """The terms of a polynomial of the larger law, by monomial in the amounts."""
    out: dict[Amounts, list[Term]] = {}
    n, split = layout.n_unknown, layout.n_constant
    for monomial, c in poly.terms():
        if any(monomial[i] for i in layout.signed if i < split):
            raise NotMonomial("a constant that may be negative stands outside of an exponent")
        log = _log_of_monomial(abs(int(c)), (*(0,) * n, *monomial[n:split]), layout)
        row = {i: monomial[i] for i in range(n) if monomial[i]}
        out.setdefault(monomial[split:], []).append(Term(1 if c > 0 else -1, row, log))
    return out


def coefficients_of(poly: Any, layout: Layout) -> dict[Amounts, Coefficient]:
    """The coefficients of a polynomial of the smaller law, by monomial in the amounts."""
    split = layout.n_constant
    groups: dict[Amounts, dict[Any, Any]] = {}
    for monomial, c in poly.terms():
        constant = (*monomial[:split], *(0 for _ in range(split, layout.n)))
        groups.setdefault(monomial[split:], {})[constant] = c
    return {
        amounts: _coefficient(poly.ring.from_dict(terms), layout)
        for amounts, terms in groups.items()
    }


def _coefficient(poly: Any, layout: Layout) -> Coefficient:
    if any(m[i] for m in poly for i in layout.signed):
        raise NotMonomial("a constant that may be negative stands outside of an exponent")
    terms = tuple(
        (1 if c > 0 else -1, _log_of_monomial(abs(int(c)), monomial, layout))
        for monomial, c in poly.terms()
    )
    sign = one_sign(poly, layout.signed)
    if sign is None:
        return Coefficient(0, None, terms, generic=False)
    if len(terms) == 1:
        return Coefficient(sign, terms[0][1], terms)
    log, generic = _log_of_sum(poly, layout)
    return Coefficient(sign, log, terms, generic)


def _log_of_monomial(number: int, monomial: Amounts, layout: Layout) -> Log:
    log = log_of_number(number)
    for i, e in enumerate(monomial):
        if e:
            log = plus(log, layout.numbers.get(i, {i: Fraction(1)}), Fraction(e))
    return log


def log_of_number(number: int) -> Log:
    """By primes."""
    return {("prime", int(p)): Fraction(e) for p, e in sympy.factorint(number).items()}


def _log_of_sum(poly: Any, layout: Layout) -> tuple[Log, bool]:
    """By irreducible factors; a sum that is not factored is one atom, and nothing is disproven."""
    plain = poly if poly.LC > 0 else -poly
    # sums of numbers such as 10^(1/2) could hide more
    generic = not any(m[i] for m in poly for i in layout.numbers)
    if len(poly) <= 12 and sum(1 for d in poly.degrees() if d) <= 8:
        number, factors = plain.factor_list()
        if all(one_sign(f, layout.signed) == 1 for f, _ in factors):
            log = log_of_number(abs(int(number)))
            for factor, power in factors:
                if len(factor) == 1:
                    ((monomial, _),) = factor.terms()
                    log = plus(log, _log_of_monomial(1, monomial, layout), Fraction(power))
                else:
                    log = plus(log, {("sum", factor): Fraction(1)}, Fraction(power))
            return log, generic
    return {("sum", plain): Fraction(1)}, False


def expression_of(log: Mapping[Hashable, Fraction], symbols: Sequence[Any], as_expr: Any) -> Any:
    """exp(log) as a sympy expression; ``as_expr`` turns a polynomial into one."""
    out = sympy.Integer(1)
    for atom, e in log.items():
        if isinstance(atom, int):
            base = symbols[atom]
        elif isinstance(atom, tuple) and atom[0] == "prime":
            base = sympy.Integer(atom[1])
        else:
            assert isinstance(atom, tuple)
            base = as_expr(atom[1])
        out *= base ** sympy.Rational(e.numerator, e.denominator)
    return out
