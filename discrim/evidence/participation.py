"""Does a term take part: the facts about one law with and without it, on one reading of the errors."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import Enum

import numpy as np

from discrim.evidence.curve import Curve, Points
from discrim.evidence.distributions import (
    chi2_quantile_upper,
    chi2_upper,
    f_upper,
    normal_of_tail,
    normal_quantile,
    t_quantile,
)
from discrim.evidence.effect import FARTHEST, InEffect, effect_of, t_of
from discrim.evidence.guaranteed import flip_distance
from discrim.evidence.intervals import OPEN, Side, along, guard_level, standard_errors
from discrim.evidence.projected import projected, weak_nuisance
from discrim.evidence.rivals import directions, joint_p, studentised
from discrim.evidence.score import basis, p_one_sided, without
from discrim.fit.covariance import Whitener
from discrim.fit.engine import Problem, solve
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import Measurements, Scale
from discrim.reactor.knocked import KnockedOut
from discrim.reactor.model import Predictor


class Kind(Enum):
    """How the term is in the law, which decides the test (see `ratelaw.knockout`)."""

    ZERO = "zero"
    VANISH = "vanish"
    SEVERAL = "several"
    ORDER = "order"
    FACTOR = "factor"


@dataclass(frozen=True, slots=True, eq=False)
class Term:
    """A term of a law, as the statistics see it.

    Attributes
    ----------
    full, reduced : predictors of the law with and without the term
    psi : indices, in ``full``, of the constants that are zero without it (empty for FACTOR)
    vanish : indices, in ``full``, of the constants that then no longer occur
    knocked : rates with and without at named conditions; None for FACTOR
    points : shape (K, m) named conditions; labels : K names (of runs, or "as asked")
    """

    kind: Kind
    full: Predictor
    reduced: Predictor
    psi: tuple[int, ...]
    vanish: tuple[int, ...]
    knocked: KnockedOut | None
    points: np.ndarray
    labels: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class NestedF:
    """Extra sum of squares with conditions taken as exact (Bates & Watts 1988, sec. 3.10)."""

    statistic: float
    df: tuple[int, int]
    p: float
    p_one_sided: float
    edge: bool


@dataclass(frozen=True, slots=True)
class Effect:
    """Effect at one named condition, with its reconciled two-sided interval and one-sided bound.

    ``bound``: one-sided 1 - alpha bound of the size of the effect (1 when it is open).
    """

    value: float
    low: float
    high: float
    bound: float
    label: str
    open_ended: bool


@dataclass(frozen=True, slots=True, eq=False)
class Participation:
    """All facts about one term in one law, errors read one way.

    Attributes
    ----------
    z : equivalent normal of the test that the term is absent, positive towards presence; nan where
        it cannot be tested; p : its p-value, one-sided unless ``two_sided``
    information : fraction of the sensitivity to the term that is not in lockstep with the rest
    detectable : effect that the test would have found with probability 0.8; nan if not known
    error_margin : factor on all condition errors at which the test stops rejecting; inf when it
    still
        rejects at the largest factor tried, nan when it never rejected or conditions are exact
    flip, flip_typical : smallest m such that all measurements moved by m stated errors are
    reproduced
        exactly without the term; its median when the term is absent
    flip_matters : the same for an effect of ``matters_above``
    weak : combinations of the *other* constants that the runs do not tell apart from the errors of the
        conditions; with one the test is the projected one, with more it does not hold its level
    """

    kind: Kind
    origin: str
    z: float
    p: float
    two_sided: bool
    information: float
    nested: NestedF | None
    effect: Effect | None
    detectable: float
    error_margin: float
    flip: float
    flip_typical: float
    flip_matters: float
    words: str
    weak: int = 0


MARGIN_FACTORS = (1.0, 1.25, 1.5, 2.0, 3.0, 5.0, 10.0)
POWER = 0.8
VANISH_GRID = np.logspace(-2.0, 2.0, 9)


def nested_f(full: Fit, reduced: Fit, *, edge: bool) -> NestedF | None:
    """F from the sums of squares with exact conditions; None without degrees of freedom."""
    q = full.p - reduced.p
    df = full.n - full.p
    if q < 1 or df < 1:
        return None
    rss1, rss0 = full.rss, max(reduced.rss, full.rss)
    if rss1 <= 0:
        f = float("inf") if rss0 > 0 else 0.0
    else:
        f = ((rss0 - rss1) / q) / (rss1 / df)
    p = f_upper(f, q, df)
    one = p / 2 if edge and q == 1 else p
    return NestedF(f, (q, df), p, one, edge)


def participation(
    term: Term,
    data: Measurements,
    full: Fit,
    reduced: Fit,
    *,
    origin: str,
    level: float,
    seed: int,
    matters_above: float | None,
    brief: bool = False,
) -> Participation:
    """Facts about ``term`` on ``data`` (origins of the condition errors resolved).

    ``brief`` leaves out effect, margin and flip distances (a law that does not stand).
    """
    alpha = 1.0 - level
    problem = Problem(term.full, data)
    two_sided = term.kind in (Kind.ORDER, Kind.FACTOR, Kind.SEVERAL)
    z, information, words, weak = _test(term, problem, full, reduced, seed, alpha)
    p = float("nan")
    if np.isfinite(z):
        p = 2 * p_one_sided(abs(z)) if two_sided else p_one_sided(z)
    z, p, words = _by_objective(term, problem, reduced, z, p, words, alpha)
    edge = term.kind in (Kind.ZERO, Kind.VANISH, Kind.SEVERAL)
    f = None
    if term.kind is not Kind.FACTOR:
        f = nested_f(full, reduced, edge=edge)
    effect = None
    if term.kind is not Kind.FACTOR and not brief:
        effect = _effect(term, problem, full, level)
    if term.kind is Kind.FACTOR:
        effect = Effect(1.0, 1.0, 1.0, 1.0, "every run", False)
    detectable = _detectable(term, problem, full, effect, alpha)
    margin = flip = typical = matters = float("nan")
    if not brief:
        if np.isfinite(p) and p < alpha and not data.exact_conditions:
            margin = _margin(term, data, full, seed, alpha, two_sided)
        s2 = full.scale2 if data.scale is Scale.ESTIMATED else 1.0
        flip = flip_distance(term.reduced, data, s2, reduced.theta, fixed=np.zeros(reduced.p, bool))
        typical = _typical_flip(term, data, reduced, s2, seed)
        if matters_above is not None and effect is not None and term.kind is not Kind.FACTOR:
            matters = _flip_to_effect(term, problem, full, s2, matters_above)
    return Participation(
        term.kind,
        origin,
        z,
        p,
        two_sided,
        information,
        f,
        effect,
        detectable,
        margin,
        flip,
        typical,
        matters,
        words,
        weak,
    )


# ---- the test that the term is absent -------------------------------------------------------


def _test(
    term: Term, problem: Problem, full: Fit, reduced: Fit, seed: int, alpha: float
) -> tuple[float, float, str, int]:
    """Equivalent normal, information, which test it was, and how many weak nuisance directions."""
    if term.kind in (Kind.ZERO, Kind.ORDER):
        pts = Curve(problem, full.theta, term.psi[0], full.jacobian).at(np.array([0.0]))
        z, weak = _at_zero(term, problem, pts, alpha)
        words = "reconciled score test"
        if weak:
            words += ", the least significant over other constants in lockstep with one another"
        return z, float(pts.score.information[0]), words, weak
    if term.kind is Kind.SEVERAL:
        words = "reconciled score test, several constants at once"
        return (*_several(term, problem, full), words, 0)
    null = reduced
    if term.kind is Kind.FACTOR:
        rows = directions(null, full)
        words = "score of the law without it, along what the law with it predicts"
    else:
        rows = _vanishing(term, null)
        words = "largest reconciled score over the constants that vanish with it"
    return (*_along_directions(null, rows, term.kind is Kind.VANISH, seed), words, 0)


def _at_zero(term: Term, problem: Problem, pts: Points, alpha: float) -> tuple[float, int]:
    """The score at zero, projected where other constants are in lockstep with one another."""
    z = float(pts.z[0])
    if not np.isfinite(z):
        return z, 0
    psi = term.psi[0]
    weak = weak_nuisance(problem, pts.solution, psi)
    if not weak.count:
        return z, 0
    outside = guard_level(alpha)
    every = projected(problem, pts.solution, psi, weak.constant, outside=outside)
    if term.kind is Kind.ZERO:  # only a rise counts
        tail = p_one_sided(float(every.min())) if len(every) else 0.0
        return float(normal_of_tail(min(tail + outside, 1.0))), weak.count
    same_side = len(every) > 0 and (every.min() > 0 or every.max() < 0)
    tail = 2.0 * p_one_sided(float(np.abs(every).min())) if same_side else float(len(every) > 0)
    side = np.sign(every[0]) if len(every) else np.sign(z)
    return float(side * normal_of_tail(min(tail + outside, 1.0) / 2.0)), weak.count


def _by_objective(
    term: Term, problem: Problem, reduced: Fit, z: float, p: float, words: str, alpha: float
) -> tuple[float, float, str]:
    """The test, or the objective where that alone excludes the law without the term.

    The score test holds its level everywhere but can lose all power far from the truth: the
    conditions are then reconciled to where the sensitivities say nothing. The objective of the
    restricted fit (Anderson & Rubin, Ann. Math. Stat. 20 (1949) 46) does not, and is the guard of
    the reconciled interval too. Used at its own level only (0.01, or a fifth of ``alpha``), which is
    all it can add to the size: measured 5.3 to 6.2 % in all where ``alpha`` is 5 %.
    """
    known = problem.data.scale is Scale.STATED and problem.with_conditions
    if term.kind not in (Kind.ZERO, Kind.ORDER) or not known or reduced.degrees_of_freedom < 1:
        return z, p, words
    p_objective = chi2_upper(reduced.objective, reduced.degrees_of_freedom)
    if not p_objective < guard_level(alpha) or p_objective >= p:
        return z, p, words
    return float(normal_of_tail(p_objective)), p_objective, "objective of the law without it"


def _several(term: Term, problem: Problem, full: Fit) -> tuple[float, float]:
    """K with q degrees of freedom, as an equivalent normal (positive)."""
    p = full.p
    fixed = np.zeros(p, bool)
    fixed[list(term.psi)] = True
    start = full.theta.copy()
    start[list(term.psi)] = 0.0
    sol = solve(problem, start[None], fixed=fixed[None])
    others = [j for j in range(p) if not fixed[j]]
    space = basis(sol.jacobian[:, :, others])
    g = np.stack([without(space, sol.jacobian[:, :, j])[0] for j in term.psi], axis=1)
    own = basis(g[None])[0]
    k = float(((own.T @ sol.residual[0]) ** 2).sum())
    q = int((np.abs(own).sum(axis=0) > 0).sum())
    if q == 0 or not np.isfinite(sol.objective[0]):
        return float("nan"), 0.0
    data = problem.data
    if data.scale is Scale.ESTIMATED and not problem.with_conditions:
        df = data.n - p
        if df < 1:
            return float("nan"), 0.0
        f = (k / q) / (max(float(sol.objective[0]) - k, 1e-300) / df)
        tail = f_upper(f, q, df)
    else:
        tail = chi2_upper(k, q)
    size = np.sqrt((g**2).sum() / max((sol.jacobian[0][:, list(term.psi)] ** 2).sum(), 1e-300))
    return float(normal_of_tail(min(tail, 1.0) / 2)), float(size)


def _vanishing(term: Term, null: Fit) -> list[np.ndarray]:
    """Directions of the term for a grid of the constants that vanish with it (Davies 1977, 1987)."""
    names = {n: k for k, n in enumerate(null.predictor.names)}
    base = np.array(
        [
            null.theta[names[n]] if n in names else s
            for n, s in zip(term.full.names, term.full.scale, strict=True)
        ]
    )
    base[list(term.psi)] = 0.0
    rows = []
    for factor in VANISH_GRID if term.vanish else np.ones(1):
        theta = base.copy()
        theta[list(term.vanish)] = term.full.scale[list(term.vanish)] * factor
        g = term.full.predict(theta[None], null.conditions).by_constants
        assert g is not None
        rows.append(g[0][:, term.psi[0]])
    return rows


def _along_directions(
    null: Fit, rows: list[np.ndarray], unwhitened: bool, seed: int
) -> tuple[float, float]:
    """The largest score along directions, as an equivalent normal with the joint p-value."""
    white = Whitener(null.covariance[None])
    own = basis(null.jacobian[None])
    units, info = [], []
    for row in rows:
        w = white.vector(row[None]) if unwhitened else row[None]
        d = without(own, w)[0]
        size = float(np.sqrt(d @ d))
        whole = float(np.sqrt((w @ w.T)[0, 0]))
        if whole > 0 and size > 1e-8 * whole and np.isfinite(d).all():
            units.append(d / size)
            info.append(size / whole)
    df = null.degrees_of_freedom
    if not units or df < 1:
        return (0.0, 0.0) if df >= 1 else (float("nan"), 0.0)
    d = np.array(units)
    z = d @ null.residual
    data = null.data
    estimated = data.scale is Scale.ESTIMATED and not null.problem.with_conditions
    seen = studentised(z, float(null.residual @ null.residual), df) if estimated else z
    if estimated and df < 2:
        return float("nan"), 0.0
    k = int(np.argmax(seen if unwhitened else np.abs(seen)))
    replicate_df = data.scale_df if data.scale is Scale.REPLICATES else 0
    if unwhitened:  # on the edge only a rise counts
        p = joint_p(d, float(seen[k]), df, estimated, replicate_df, seed, two_sided=False)
        return float(normal_of_tail(p)), float(info[k])
    p = joint_p(d, abs(float(seen[k])), df, estimated, replicate_df, seed)
    return float(np.sign(seen[k]) * normal_of_tail(min(p / 2, 0.5))), float(info[k])


# ---- the effect ------------------------------------------------------------------------------


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


def _chosen_point(term: Term, theta: np.ndarray) -> int:
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


def _in_effect(term: Term, theta: np.ndarray, point: int) -> InEffect:
    assert term.knocked is not None
    return InEffect(
        term.full,
        term.psi[0],
        term.knocked,
        term.points[point],
        _sign(term, theta),
        term.kind is Kind.ORDER,
    )


def _effect(term: Term, problem: Problem, full: Fit, level: float) -> Effect | None:
    if term.knocked is None or len(term.psi) != 1:
        return None
    point = _chosen_point(term, full.theta)
    value = float(term.knocked.effect(full.theta[None], term.points)[0, point])
    wrapped = _in_effect(term, full.theta, point)
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
    bound = _projected_bound(wrapped, shifted, min(abs(bound), 1.0), level)
    return Effect(value, low, high, min(abs(bound), 1.0), label, open_ended)


# how far beyond its plain bound an effect is looked for where other constants are in lockstep
WIDER = (1.0, 1.1, 1.25, 1.5, 2.0, 3.0, 5.0, 10.0, 30.0, 100.0)


def _projected_bound(wrapped: InEffect, shifted: Fit, bound: float, level: float) -> float:
    """The bound of the size of an effect, where other constants are in lockstep with one another: the
    next value that the projected test rejects as well."""
    psi = wrapped.psi
    problem, alpha = shifted.problem, 1.0 - level
    if bound >= 1.0 or not weak_nuisance(problem, shifted.solution, psi).count:
        return bound
    outside = guard_level(alpha)
    need = normal_quantile(1.0 - (alpha - outside))
    curve = Curve.of(shifted, psi)
    for factor in WIDER:
        size = factor * max(bound, 1e-3)
        if size >= 1.0:
            break
        rejected = True
        for sign in (1.0, -1.0):
            if wrapped.sign not in (0, int(sign)):
                continue
            pts = curve.at(np.array([float(t_of(sign * size))]))
            weak = weak_nuisance(problem, pts.solution, psi)
            every = pts.z
            if weak.count:
                every = projected(problem, pts.solution, psi, weak.constant, outside=outside)
            rejected &= not (sign * every >= -need).any()
        if rejected:
            return size
    return 1.0


def _detectable(
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
    e = e[np.isfinite(e)]
    return float(np.max(np.abs(e))) if len(e) else float("nan")


# ---- how far from another verdict ------------------------------------------------------------


def _margin(
    term: Term, data: Measurements, full: Fit, seed: int, alpha: float, two_sided: bool
) -> float:
    """Factor on all condition errors at which the test stops rejecting."""
    critical = normal_quantile(1.0 - (alpha / 2 if two_sided else alpha))
    guard = chi2_quantile_upper(guard_level(alpha), max(full.n - (full.p - 1), 1))

    def z_at(factor: float) -> float:
        problem = Problem(term.full, data.with_condition_errors_times(factor))
        if term.kind in (Kind.ZERO, Kind.ORDER):
            pts = Curve(problem, full.theta, term.psi[0], full.jacobian).at(np.array([0.0]))
            z = _at_zero(term, problem, pts, alpha)[0]
            if not (abs(z) if two_sided else z) > critical and pts.objective[0] > guard:
                # see _by_objective
                without_it = fit(term.reduced, problem.data, starts=4)
                if data.scale is Scale.STATED and without_it.objective > guard:
                    return float("inf")
            return z
        reduced = fit(term.reduced, problem.data, starts=4)
        again = full
        if term.kind is Kind.FACTOR:
            again = fit(term.full, problem.data, starts=4, near=full.theta[None])
        return _test(term, problem, again, reduced, seed, alpha)[0]

    last, last_z = 1.0, float("nan")
    for factor in MARGIN_FACTORS:
        z = z_at(factor)
        value = abs(z) if two_sided else z
        if not value > critical:
            if factor == 1.0 or not np.isfinite(last_z) or not np.isfinite(value):
                return last
            share = (last_z - critical) / max(last_z - value, 1e-12)
            return last + (factor - last) * float(np.clip(share, 0.0, 1.0))
        last, last_z = factor, value
    return float("inf")


def _typical_flip(
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


def _flip_to_effect(
    term: Term, problem: Problem, full: Fit, s2: float, matters_above: float
) -> float:
    """Flip distance to a law whose effect is as large as what matters."""
    if term.knocked is None or len(term.psi) != 1:
        return float("nan")
    point = _chosen_point(term, full.theta)
    wrapped = _in_effect(term, full.theta, point)
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
