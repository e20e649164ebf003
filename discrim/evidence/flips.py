"""How far a test is from another answer: the error margin, and flip distances."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from discrim.evidence.curve import Curve
from discrim.evidence.distributions import chi2_quantile_upper, normal_quantile
from discrim.evidence.effect import effect_of, t_of
from discrim.evidence.flip_distance import flip_distance
from discrim.evidence.intervals import guard_level
from discrim.evidence.margin import factor_where
from discrim.evidence.term import Kind, Term
from discrim.evidence.term_effect import chosen_point, in_effect
from discrim.evidence.term_tests import absence_test, at_zero
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Problem


def error_margin(
    term: Term, data: Measurements, full: Fit, seed: int, alpha: float, two_sided: bool
) -> float:
    """Factor on all condition errors at which the test stops rejecting."""
    critical = normal_quantile(1.0 - (alpha / 2 if two_sided else alpha))
    guard = chi2_quantile_upper(guard_level(alpha), max(full.n - (full.p - 1), 1))

    def z_at(factor: float) -> float:
        problem = Problem(term.full, data.with_condition_errors_times(factor))
        if term.kind in (Kind.ZERO, Kind.ORDER):
            pts = Curve(problem, full.theta, term.psi[0], full.jacobian).at(np.array([0.0]))
            z = at_zero(term, problem, pts, alpha)[0]
            if not (abs(z) if two_sided else z) > critical and pts.objective[0] > guard:
                # see by_objective
                without_it = fit(term.reduced, problem.data, starts=4)
                if data.scale is Scale.STATED and _excluded(without_it, alpha):
                    return float("inf")
            return z
        reduced = fit(term.reduced, problem.data, starts=4)
        again = full
        if term.kind is Kind.FACTOR:
            again = fit(term.full, problem.data, starts=4, near=full.theta[None])
        z = absence_test(term, problem, again, reduced, seed, alpha)[0]
        if data.scale is Scale.STATED and _excluded(reduced, alpha):
            return float("inf")  # see by_objective
        return z

    def rejects(factor: float) -> bool:
        z = z_at(factor)
        return bool((abs(z) if two_sided else z) > critical)

    return factor_where(rejects)


def _excluded(reduced: Fit, alpha: float) -> bool:
    """Whether its objective alone excludes the law without the term, as in `by_objective`."""
    df = reduced.objective_df
    return df > 0 and reduced.objective > chi2_quantile_upper(guard_level(alpha), df)


def typical_flip(
    term: Term, data: Measurements, reduced: Fit, s2: float, seed: int, draws: int = 5
) -> float:
    """Median flip distance of tables drawn from the law without the term."""
    if not reduced.ok:
        return float("nan")
    rng = np.random.default_rng(seed)
    out = []
    fixed = np.zeros(reduced.p, bool)
    for _ in range(draws):
        c = np.array(reduced.conditions)
        shown = c.copy()
        truth = c.copy()
        for s in data.of_conditions:
            labels, where = np.unique(s.groups, return_inverse=True)
            noise = rng.standard_normal(len(labels))[where]
            step = s.sd(c[:, s.target]) * noise
            if s.origin == "set":
                truth[:, s.target] += step
            else:
                shown[:, s.target] += step
        y = reduced.predictor.predict(
            reduced.theta[None], np.maximum(truth, 0.0), constants=False
        ).values[0]
        for s in data.of_observations:
            labels, where = np.unique(s.groups, return_inverse=True)
            y = y + s.sd(np.abs(y)) * rng.standard_normal(len(labels))[where]
        if data.scale is Scale.ESTIMATED:
            y = y + np.sqrt(max(s2, 0.0)) * rng.standard_normal(len(y))
        table = replace(data, y=y, conditions=shown)
        out.append(flip_distance(term.reduced, table, s2, reduced.theta, fixed=fixed, rounds=8))
    return float(np.median(out))


def flip_to_effect(
    term: Term, problem: Problem, full: Fit, s2: float, matters_above: float
) -> float:
    """Flip distance to a law whose effect is as large as what matters."""
    if term.knocked is None or len(term.psi) != 1:
        return float("nan")
    point = chosen_point(term, full.theta)
    wrapped = in_effect(term, full.theta, point)
    best = float("inf")
    for sign in (1.0, -1.0):
        if wrapped.sign not in (0, int(sign)):
            continue
        theta = wrapped.from_inner(full.theta[None])[0]
        now = float(effect_of(theta[term.psi[0]]))
        if sign * now >= matters_above:
            theta_now = full.theta
            return flip_distance(
                term.full, problem.data, s2, theta_now, fixed=np.zeros(full.p, bool), rounds=8
            )
        theta[term.psi[0]] = float(t_of(sign * matters_above))
        fixed = np.zeros(full.p, bool)
        fixed[term.psi[0]] = True
        best = min(best, flip_distance(wrapped, problem.data, s2, theta, fixed=fixed, rounds=12))
    return best
