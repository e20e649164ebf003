"""The effect of a term at named conditions: its interval, its bound, and what could be detected."""

from __future__ import annotations

import numpy as np

from discrim.evidence.curve import Curve
from discrim.evidence.distributions import normal_quantile, t_quantile
from discrim.evidence.effect import FARTHEST, InEffect, effect_of
from discrim.evidence.intervals import OPEN, Side, along, standard_errors
from discrim.evidence.score import basis, without
from discrim.evidence.term import Effect, Kind, Term
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem

POWER = 0.8


def _sign(term: Term, theta: np.ndarray) -> int:
    """1 when the term can only add to the rate at the named conditions, -1 only lower, 0 both."""
    if term.kind is Kind.ORDER:
        return 0
    assert term.knocked is not None
    trial = theta.copy()[None]
    j = term.psi[0]
    trial[0, j] = max(theta[j], term.full.scale[j], 1e-300)
    e = term.knocked.effect(trial, term.points)[0]
    e = e[np.isfinite(e)]
    if (e >= 0).all():
        return 1
    if (e <= 0).all():
        return -1
    return 0


def chosen_point(term: Term, theta: np.ndarray) -> int:
    """The named condition with the largest effect when the term is of a size that matters."""
    assert term.knocked is not None
    trial = np.vstack([theta, theta])
    j = term.psi[0]
    if term.kind is Kind.ORDER:
        trial[1, j] = 1.0 if abs(theta[j]) < 1e-6 else theta[j]
    else:
        trial[1, j] = max(theta[j], 0.1 * term.full.scale[j])
    e = np.abs(term.knocked.effect(trial, term.points))
    e = np.where(np.isfinite(e), e, -1.0)
    return int(np.argmax(e[1]))


def in_effect(term: Term, theta: np.ndarray, point: int) -> InEffect:
    assert term.knocked is not None
    return InEffect(
        term.full,
        term.psi[0],
        term.knocked,
        term.points[point],
        _sign(term, theta),
        term.kind is Kind.ORDER,
    )


def _is_all(term: Term, theta: np.ndarray) -> np.ndarray:
    """Where the rate without the term is zero, shape (K,): of several responses one may be it alone.

    Zero whatever the constants: that a fit ended with the rest of the rate on its bound says nothing
    of how large the rest can be.
    """
    assert term.knocked is not None
    present = np.where(theta == 0, np.maximum(term.full.scale, 1e-300), theta)
    return np.asarray(term.knocked.rates(present[None], term.points)[1][0] == 0)


def effect_with_interval(term: Term, problem: Problem, full: Fit, level: float) -> Effect | None:
    if term.knocked is None or len(term.psi) != 1:
        return None
    point = chosen_point(term, full.theta)
    value = float(term.knocked.effect(full.theta[None], term.points)[0, point])
    if _is_all(term, full.theta)[point]:
        # all of that rate, or none of it: there is nothing between to give an interval of
        return Effect(value, 1.0 if value > 0 else 0.0, 1.0, 1.0, term.labels[point], False)
    wrapped = in_effect(term, full.theta, point)
    start = wrapped.from_inner(full.theta[None])
    shifted = fit(wrapped, problem.data, starts=1, near=start)
    label = term.labels[point]
    if not shifted.ok:
        return Effect(value, -1.0, 1.0, 1.0, label, True)
    j = term.psi[0]
    se = float(standard_errors(shifted)[j])
    result = along(shifted, Curve.of(shifted, j), level, se=se, with_profile=False, closeness=1e-4)

    def e(side: Side, otherwise: float) -> float:
        return float(effect_of(side.value)) if abs(side.value) < FARTHEST else otherwise

    low, high = e(result.reconciled.low, -1.0), e(result.reconciled.high, 1.0)
    if result.reconciled.empty:
        low, high = -1.0, 1.0
    up, down = e(result.upper_one_sided, 1.0), e(result.lower_one_sided, -1.0)
    if wrapped.sign > 0:
        bound = up
    elif wrapped.sign < 0:
        bound = -down
    else:
        bound = max(abs(up), abs(down))
    open_ended = OPEN in (result.reconciled.low.end, result.reconciled.high.end)
    if not np.isfinite(bound) or result.upper_one_sided.end == "failed":
        bound, open_ended = 1.0, True
    return Effect(value, low, high, min(abs(bound), 1.0), label, open_ended)


def detectable_effect(
    term: Term, problem: Problem, full: Fit, effect: Effect | None, alpha: float
) -> float:
    """Effect found with probability 0.8, from the information at the restricted optimum."""
    if term.kind not in (Kind.ZERO, Kind.ORDER) or effect is None or term.knocked is None:
        return float("nan")
    pts = Curve(problem, full.theta, term.psi[0], full.jacobian).at(np.array([0.0]))
    sol = pts.solution
    jac = sol.jacobian
    g = jac[:, :, term.psi[0]]
    space = basis(np.delete(jac, term.psi[0], axis=2))
    size = float(np.sqrt((without(space, g) ** 2).sum()))
    whole = float(np.sqrt((g**2).sum()))
    if not size > 1e-9 * whole:
        return 1.0
    tail = alpha / 2 if term.kind is Kind.ORDER else alpha
    need = normal_quantile(1.0 - tail) + normal_quantile(POWER)
    if problem.data.scale is Scale.ESTIMATED and not problem.with_conditions:
        df = full.degrees_of_freedom
        if df < 1 or not full.scale2 > 0:
            return float("nan")
        need = (t_quantile(1.0 - tail, df) + t_quantile(POWER, df)) * float(np.sqrt(full.scale2))
    theta = sol.theta.copy()
    theta[0, term.psi[0]] = need / size
    e = term.knocked.effect(theta, term.points)[0]
    e = e[np.isfinite(e) & ~_is_all(term, theta[0])]
    return float(np.max(np.abs(e))) if len(e) else float("nan")
