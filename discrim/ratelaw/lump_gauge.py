"""Unknowns of a law measured in units of constants, so that fewer constants show.

An unknown that no data show (a radical, vacant sites) may be counted in any unit. With radicals in
units of k_prop the rate k_prop [A] z is [A] z, and one constant fewer stands in the law.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from fractions import Fraction

import sympy

from discrim.ratelaw.lump_form import Amounts, Coefficient, Form, Sum
from discrim.ratelaw.lump_span import Span, Vector

_LARGE = 200  # coefficients; beyond it the search takes longer than it is worth
_MOST = 60  # units that are tried for one unknown


def gauged(
    form: Form,
    unknowns: Sequence[sympy.Symbol],
    decisive: int,
    differences: Callable[[Form, int], list[Vector]],
) -> tuple[Form, dict[sympy.Symbol, Vector]]:
    """``form`` with each unknown in the unit in which the fewest constants show, and these units.

    ``differences`` gives what of the first ``decisive`` expressions of a form data can show.
    """
    units: dict[sympy.Symbol, Vector] = {}
    if len(differences(form, decisive)) > _LARGE:
        return form, units
    for z in unknowns:
        best = (Span(differences(form, decisive)).n, False, 0)
        found = form
        for k, unit in enumerate(_units(form, z)):
            other = _in_units(form, z, unit)
            broken = any(e.denominator > 1 for e in unit.values())
            score = (Span(differences(other, decisive)).n, broken, k + 1)
            if score < best:
                best, found = score, other
                units[z] = unit
        form = found
    return form, units


def _power(amounts: Amounts, z: sympy.Symbol) -> Fraction:
    return next((e for s, e in amounts if s == z), Fraction(0))


def _units(form: Form, z: sympy.Symbol) -> list[Vector]:
    """Units that make two coefficients equal, of one sum or of a numerator and its denominator."""
    pairs: list[tuple[tuple[Amounts, Coefficient], tuple[Amounts, Coefficient]]] = []
    for s in form.sums:
        terms = list(s.terms.items())
        pairs += [(terms[0], t) for t in terms[1:]]
    for expression in form.expressions:
        for term in expression:
            for t in term.top.terms.items():
                bottom = [next(iter(form.sums[k].terms.items())) for k, _ in term.bottom[:1]]
                pairs.append((bottom[0] if bottom else ((), Coefficient(Fraction(1), {})), t))
    units: list[Vector] = []
    for (a, c), (b, d) in pairs:
        m = _power(b, z) - _power(a, z)
        if not m:
            continue
        unit: Vector = {}
        for vector, sign in ((d.vector, -1), (c.vector, 1)):
            for i, e in vector.items():
                unit[i] = unit.get(i, Fraction(0)) + sign * e / m
        unit = {i: e for i, e in unit.items() if e}
        if unit and unit not in units:
            units.append(unit)
    return units[:_MOST]


def _in_units(form: Form, z: sympy.Symbol, unit: Vector) -> Form:
    def moved(s: Sum) -> Sum:
        terms = {}
        for amounts, c in s.terms.items():
            m = _power(amounts, z)
            vector = dict(c.vector)
            if m:
                for i, e in unit.items():
                    vector[i] = vector.get(i, Fraction(0)) + m * e
            terms[amounts] = Coefficient(c.number, {i: e for i, e in vector.items() if e})
        return Sum(terms)

    return replace(
        form,
        sums=tuple(moved(s) for s in form.sums),
        expressions=tuple(
            tuple(replace(t, top=moved(t.top)) for t in expression)
            for expression in form.expressions
        ),
    )
