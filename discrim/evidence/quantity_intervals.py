"""Intervals for a quantity of the constants: the same four as for a constant itself."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import sympy

from discrim.evidence.delta import propagated
from discrim.evidence.error_box import bounds_of, coefficient_range, in_law
from discrim.evidence.intervals import (
    BOUND,
    CROSSED,
    FAILED,
    OPEN,
    Along,
    Interval,
    Side,
    along,
    nothing,
    quantile,
)
from discrim.evidence.quantity import AlongQuantity
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.reactor.quantity import Quantity

# how far beyond an end, relative, it is asked whether any constants give a value there
STEP = 1e-4


@dataclass(frozen=True, slots=True, eq=False)
class QuantityFacts:
    """A quantity in one fit.

    ``result`` is None where profile and reconciled interval could not be had; they then say why.
    """

    value: float
    standard_error: float
    linearised: Interval
    profile: Interval
    reconciled: Interval
    result: Along | None = None


def quantity_facts(
    fit: Fit, quantity: Quantity, level: float, *, brief: bool = False, closeness: float = 1e-6
) -> QuantityFacts:
    """Value, standard error (delta method) and intervals of ``quantity`` in a fitted law.

    ``brief`` leaves out all but the linearised interval (a law that does not stand).
    """
    v, g = quantity.with_gradient(fit.theta[None])
    value = float(v[0])
    se = float(propagated(fit, g)[0]) if np.isfinite(g).all() else float("inf")
    half = quantile(fit, level) * se
    if np.isfinite(half) and np.isfinite(value):
        ends = Side(value - half, CROSSED), Side(value + half, CROSSED)
        wald = Interval("linearised", *ends)
    else:
        wald = Interval(
            "linearised",
            Side(-np.inf, OPEN),
            Side(np.inf, OPEN),
            note="not determined by these runs",
        )

    def without(why: str) -> QuantityFacts:
        none = [nothing(kind, f"not computed: {why}") for kind in ("profile", "reconciled")]
        return QuantityFacts(value, se, wald, none[0], none[1])

    if brief:
        return without("the law is rejected by these runs")
    if not np.isfinite(value):
        upside_down = _inverse(fit, quantity, level, closeness)
        if upside_down is None:
            return without("it has no finite value at the best fit")
        return replace(
            upside_down,
            value=value,
            standard_error=float("inf"),
            linearised=wald,
        )
    if not quantity.involved:
        return without("it holds no constant that these runs estimate")
    if fit.data.scale is Scale.ESTIMATED and fit.degrees_of_freedom < 1:
        return without("as many constants as runs, scale unknown")
    curve = AlongQuantity(fit, quantity)
    if not curve.possible:
        return without("at the best fit it moves with no constant")
    found = along(curve.fit_in_it, curve, level, se=se, closeness=closeness)
    step = max(STEP, 10.0 * closeness)
    profile, reconciled = (_ended(i, curve, step) for i in (found.profile, found.reconciled))
    return QuantityFacts(value, se, wald, profile, reconciled, found)


def _inverse(fit: Fit, quantity: Quantity, level: float, closeness: float) -> QuantityFacts | None:
    """A quotient whose denominator is zero at the best fit, from its inverse."""
    over = Quantity(
        1 / quantity.expression, quantity.symbols, quantity.conditions, quantity.at, quantity.scale
    )
    if not quantity.nonnegative or not np.isfinite(over.value(fit.theta[None])[0]):
        return None
    found = quantity_facts(fit, over, level, closeness=closeness)
    result = found.result
    if result is not None:
        result = replace(
            result,
            lower_one_sided=_one_over(result.upper_one_sided),
            upper_one_sided=_one_over(result.lower_one_sided),
        )
    return replace(
        found,
        profile=_turned_over(found.profile),
        reconciled=_turned_over(found.reconciled),
        result=result,
    )


def _one_over(side: Side) -> Side:
    if side.end == FAILED:
        return side
    if side.value == 0:
        return Side(np.inf, OPEN)
    return Side(0.0, BOUND) if np.isinf(side.value) else Side(1.0 / side.value, side.end)


def _turned_over(interval: Interval) -> Interval:
    pieces = tuple(
        (_one_over(Side(b, CROSSED)).value, _one_over(Side(a, CROSSED)).value)
        for a, b in reversed(interval.pieces)
    )
    return replace(
        interval, low=_one_over(interval.high), high=_one_over(interval.low), pieces=pieces
    )


def _ended(interval: Interval, curve: AlongQuantity, step: float) -> Interval:
    """An end beyond which no constants give a value at all is a bound."""
    if interval.empty:
        return interval
    out = interval
    for name, sign in (("low", -1.0), ("high", 1.0)):
        side: Side = getattr(interval, name)
        if side.end != CROSSED or not np.isfinite(side.value):
            continue
        beyond = side.value + sign * step * max(
            abs(side.value), 1e-3 * curve.wrapped.scale[curve.psi]
        )
        if np.isinf(curve.at(np.array([beyond]), careful=False).objective[0]):
            end = Side(side.value, BOUND)
            out = replace(out, low=end) if name == "low" else replace(out, high=end)
    return out


def guaranteed_quantity(
    fit: Fit, quantity: Quantity, alpha: float, constants: Sequence[Interval]
) -> Interval:
    """Every value consistent with hard bounds on all errors, or nothing with the reason.

    A law linear in its constants leaves a polytope of them (see `guaranteed`); over it a linear
    quantity is a linear program and a quotient of two is one as well (Charnes & Cooper, Naval Res.
    Logist. Quart. 9 (1962) 181; from memory). Otherwise a product of powers gets an outer bound from
    the ranges of the single ``constants``.
    """
    predictor = fit.predictor
    form = _quotient(quantity)
    if form is not None and bool(predictor.linear.all()):
        for one in constants:  # what stands against a range of one constant does so here
            if not one.empty and FAILED in (one.low.end, one.high.end):
                return one
        return _by_programs(fit, form, alpha, quantity.nonnegative, constants)
    powers = _powers(quantity)
    if powers is None:
        return nothing(
            "guaranteed", "not computed: neither law and quantity linear, nor a product of powers"
        )
    return _by_powers(powers, float(quantity.value(np.ones((1, fit.p)))[0]), constants)


def _numbered(quantity: Quantity) -> sympy.Expr:
    values = {
        s: sympy.Float(float(x), 17) for s, x in zip(quantity.conditions, quantity.at, strict=True)
    }
    return quantity.expression.xreplace(values)


def _quotient(quantity: Quantity) -> tuple[np.ndarray, np.ndarray] | None:
    """Coefficients (p + 1,) of numerator and denominator where both are linear, the last the number."""
    top, bottom = sympy.fraction(sympy.together(_numbered(quantity)))
    out = []
    for part in (top, bottom):
        if not part.is_polynomial(*quantity.symbols):
            return None
        poly = sympy.Poly(part, *quantity.symbols)
        if poly.total_degree() > 1:
            return None
        out.append(
            np.array([float(poly.coeff_monomial(s)) for s in (*quantity.symbols, sympy.Integer(1))])
        )
    return out[0], out[1]


def _by_programs(
    fit: Fit,
    form: tuple[np.ndarray, np.ndarray],
    alpha: float,
    nonnegative: bool,
    constants: Sequence[Interval],
) -> Interval:
    from scipy.optimize import linprog

    predictor, data = fit.predictor, fit.data
    scale2 = fit.scale2 if data.scale is Scale.ESTIMATED else 1.0
    half = bounds_of(data, alpha, scale2, in_law(predictor, data))
    c = coefficient_range(predictor, data, half.conditions)
    a = np.vstack([c.low, -c.high])
    b = np.concatenate([data.y + half.y - c.rest_low, -(data.y - half.y - c.rest_high)])
    col = np.max(np.abs(a), axis=0)
    col = np.where(col > 0, col, 1.0)
    a = a / col
    row = np.maximum(np.max(np.abs(a), axis=1), np.abs(b))
    row = np.where(row > 0, row, 1.0)
    a, b = a / row[:, None], b / row
    p = a.shape[1]
    # unknowns: the scaled constants times t, and t; t is one over the denominator
    rows, right = [np.hstack([a, -b[:, None]])], [np.zeros(len(b))]
    for j in range(p):
        for sign, bound in ((-1.0, predictor.lower[j]), (1.0, predictor.upper[j])):
            if np.isfinite(bound):
                line = np.zeros(p + 1)
                line[j], line[p] = sign, -sign * bound * col[j]
                rows.append(line[None])
                right.append(np.zeros(1))
    top, bottom = (np.r_[x[:p] / col, x[p]] for x in form)
    size = [max(float(np.abs(x).max()), 1e-300) for x in (top, bottom)]
    ends = []
    for sign in (1.0, -1.0):
        res = linprog(
            sign * top / size[0],
            A_ub=np.vstack(rows),
            b_ub=np.concatenate(right),
            A_eq=(bottom / size[1])[None],
            b_eq=[1.0],
            bounds=[(0.0, None)] * (p + 1),
            method="highs",
        )
        if res.status == 0:
            value = float(top @ res.x) / float(bottom @ res.x)
            at = sign > 0 and nonnegative and value <= 0
            ends.append(Side(max(value, 0.0) if at else value, BOUND if at else CROSSED))
        elif res.status == 3:
            ends.append(Side(-sign * np.inf, OPEN))
        else:
            ends.append(Side(float("nan"), FAILED))
    return Interval(
        "guaranteed",
        ends[0],
        ends[1],
        (),
        FAILED in (ends[0].end, ends[1].end),
        next((one.note for one in constants if one.note), ""),
    )


def _powers(quantity: Quantity) -> np.ndarray | None:
    """Exponents (p,) of a product of powers of the constants, or None."""
    powers = np.zeros(len(quantity.symbols))
    for factor in sympy.Mul.make_args(_numbered(quantity)):
        base, exponent = factor.as_base_exp()
        if base.is_Number and exponent.is_Number and factor > 0:
            continue
        if base not in quantity.symbols or not exponent.is_Number or not base.is_nonnegative:
            return None
        powers[quantity.symbols.index(base)] += float(exponent)
    return powers


def _by_powers(powers: np.ndarray, factor: float, constants: Sequence[Interval]) -> Interval:
    low = high = factor
    notes = []
    for j in np.flatnonzero(powers):
        one = constants[int(j)]
        if one.empty or FAILED in (one.low.end, one.high.end):
            return nothing("guaranteed", one.note or "not computed: a constant has no such range")
        with np.errstate(divide="ignore"):
            ends = np.sort(np.array([max(one.low.value, 0.0), one.high.value]) ** powers[j])
        low, high = low * float(ends[0]), high * float(ends[1])
        notes.append(one.note)
    note = "outer bound, from the ranges of the single constants"
    extra = next((n for n in notes if n), "")
    return Interval(
        "guaranteed",
        Side(low, BOUND if low <= 0 else CROSSED),
        Side(high, OPEN if np.isinf(high) else CROSSED),
        (),
        False,
        note + (f"; {extra}" if extra else ""),
    )
