"""Tests that a term is absent from a law, by the way in which it is in the law."""

from __future__ import annotations

import numpy as np

from discrim.evidence.curve import Curve, Points
from discrim.evidence.distributions import chi2_upper, f_upper, normal_of_tail
from discrim.evidence.intervals import guard_level
from discrim.evidence.projected import outside_level, projected, weak_nuisance
from discrim.evidence.rivals import directions, joint_p, studentised
from discrim.evidence.score import basis, p_one_sided, without
from discrim.evidence.term import Kind, NestedF, Term
from discrim.fit.covariance import Whitener
from discrim.fit.engine import Problem, solve
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale

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


def absence_test(
    term: Term, problem: Problem, full: Fit, reduced: Fit, seed: int, alpha: float
) -> tuple[float, float, str, int]:
    """Equivalent normal, information, which test it was, and how many weak nuisance directions."""
    if term.kind in (Kind.ZERO, Kind.ORDER):
        pts = Curve(problem, full.theta, term.psi[0], full.jacobian).at(np.array([0.0]))
        z, weak = at_zero(term, problem, pts, alpha)
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
        rows = vanishing(term, null)
        words = "largest reconciled score over the constants that vanish with it"
    return (*along_directions(null, rows, term.kind is Kind.VANISH, seed), words, 0)


def at_zero(term: Term, problem: Problem, pts: Points, alpha: float) -> tuple[float, int]:
    """The score at zero, projected where other constants are in lockstep with one another."""
    z = float(pts.z[0])
    if not np.isfinite(z):
        return z, 0
    psi = term.psi[0]
    weak = weak_nuisance(problem, pts.solution, psi)
    if not weak.count:
        return z, 0
    outside = outside_level(alpha)
    every = projected(problem, pts.solution, psi, weak.constant, outside=outside)
    if term.kind is Kind.ZERO:  # only a rise counts
        tail = p_one_sided(float(every.min())) if len(every) else 0.0
        return float(normal_of_tail(min(tail + outside, 1.0))), weak.count
    same_side = len(every) > 0 and (every.min() > 0 or every.max() < 0)
    tail = 2.0 * p_one_sided(float(np.abs(every).min())) if same_side else float(len(every) > 0)
    side = np.sign(every[0]) if len(every) else np.sign(z)
    return float(side * normal_of_tail(min(tail + outside, 1.0) / 2.0)), weak.count


def by_objective(
    term: Term, problem: Problem, reduced: Fit, z: float, p: float, words: str, alpha: float
) -> tuple[float, float, str]:
    """The test, or the objective where that alone excludes the law without the term.

    The test holds its level everywhere but can lose its power far from the truth: the conditions are
    then reconciled to where the sensitivities say nothing, or point the other way. The objective of
    the restricted fit (Anderson & Rubin, Ann. Math. Stat. 20 (1949) 46) does not, and is the guard
    of the reconciled interval too. Used at its own level only (`guard_level`, a fiftieth of
    ``alpha``), which is all it can add to the size.
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


def vanishing(term: Term, null: Fit) -> list[np.ndarray]:
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


def along_directions(
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
