"""Tests that a term is absent from a law, by the way in which it is in the law."""

from __future__ import annotations

import numpy as np

from discrim.evidence.acceptance import guard_level
from discrim.evidence.curve import Curve, Points
from discrim.evidence.distributions import chi2_upper, f_upper, normal_of_tail, normal_quantile
from discrim.evidence.mimic import mimics
from discrim.evidence.projected import Reach, Weak, outside_level, reach, weak_nuisance
from discrim.evidence.rivals import directions, joint_p, studentised
from discrim.evidence.score import basis, p_one_sided, score, uses_strength, without
from discrim.evidence.several import several
from discrim.evidence.term import Kind, NestedF, Term
from discrim.fit.covariance import Whitener
from discrim.fit.engine import solve
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution

LEAST = ", the least significant over other constants in lockstep with one another"
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
        if uses_strength(problem):
            words = "conditional likelihood ratio at the reconciled conditions"
        words += LEAST if weak else ""
        return z, float(pts.score.information[0]), words, weak
    if term.kind is Kind.SEVERAL:
        words = "reconciled score test, several constants at once"
        z, information, weak = _several(term, problem, full, alpha)
        return z, information, words + (LEAST if weak else ""), weak
    null = reduced
    if term.kind is Kind.FACTOR:
        rows = directions(null, full)
        words = "score of the law without it, along what the law with it predicts"
    else:
        rows = vanishing(term, null)
        words = "largest reconciled score over the constants that vanish with it"
    z, information = along_directions(null, rows, term.kind is Kind.VANISH, seed)
    found = weak_nuisance(null.problem, null.solution, ())
    if found.count and np.isfinite(z) and abs(z) > normal_quantile(1.0 - alpha):
        z = _least_along(term, null, full, rows, found, seed, alpha)
    return z, information, words + (LEAST if found.count else ""), found.count


def at_zero(term: Term, problem: Problem, pts: Points, alpha: float) -> tuple[float, int]:
    """The score at zero, projected where other constants are in lockstep with one another."""
    z = float(pts.z[0])
    if not np.isfinite(z):
        return z, 0
    psi = term.psi[0]
    weak = weak_nuisance(problem, pts.solution, psi)
    if not weak.count:
        return z, 0

    def scores(there: Problem, sol: Solution) -> np.ndarray:
        return score(there, sol, psi).z

    outside = outside_level(alpha)
    found = reach(problem, pts.solution, (psi,), weak, scores, outside=outside)
    if term.kind is Kind.ZERO:  # only a rise counts
        return one_sided(found, outside), weak.count
    return two_sided(found, z, outside), weak.count


def one_sided(found: Reach, outside: float) -> float:
    """The least significant of the scores that are possible, as an equivalent normal upwards."""
    tail = p_one_sided(float(found.low[0])) if found.allowed[0] else 0.0
    return float(normal_of_tail(min(tail + outside, 1.0)))


def two_sided(found: Reach, z: float, outside: float) -> float:
    """The same to both sides; ``z`` of the plain form gives the side where none is possible."""
    low, high = float(found.low[0]), float(found.high[0])
    if not found.allowed[0]:
        tail, side = 0.0, float(np.sign(z))
    elif low <= 0.0 <= high:
        tail, side = 1.0, float(np.sign(z))
    else:
        tail, side = 2.0 * p_one_sided(min(abs(low), abs(high))), float(np.sign(low))
    return float(side * normal_of_tail(min(tail + outside, 1.0) / 2.0))


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
    if not known or reduced.objective_df < 1 or not np.isfinite(p):
        return z, p, words
    p_objective = chi2_upper(reduced.objective, reduced.objective_df)
    if not p_objective < guard_level(alpha) or p_objective >= p:
        return z, p, words
    both = term.kind in (Kind.ORDER, Kind.FACTOR, Kind.SEVERAL)
    z = float(normal_of_tail(p_objective / 2 if both else p_objective))
    return z, p_objective, "objective of the law without it"


def _several(term: Term, problem: Problem, full: Fit, alpha: float) -> tuple[float, float, int]:
    """Equivalent normal (positive), information, and how many weak nuisance directions."""
    fixed = np.zeros(full.p, bool)
    fixed[list(term.psi)] = True
    start = full.theta.copy()
    start[list(term.psi)] = 0.0
    sol = solve(problem, start[None], fixed=fixed[None])
    z, information = several(problem, sol, term.psi)
    weak = weak_nuisance(problem, sol, term.psi)
    if not weak.count or not np.isfinite(z[0]):
        return float(z[0]), float(information[0]), weak.count

    def scores(there: Problem, at: Solution) -> np.ndarray:
        return several(there, at, term.psi)[0]

    outside = outside_level(alpha)
    found = reach(problem, sol, term.psi, weak, scores, outside=outside)
    return two_sided(found, float(z[0]), outside), float(information[0]), weak.count


def _least_along(
    term: Term, null: Fit, full: Fit, rows: list[np.ndarray], weak: Weak, seed: int, alpha: float
) -> float:
    """The largest score along directions, the least significant over what the objective allows.

    The directions are made again at each value of the weak constants; their joint quantile is that at
    the fit.
    """
    rising = term.kind is Kind.VANISH

    def scores(there: Problem, sol: Solution) -> np.ndarray:
        space = basis(sol.jacobian)
        white = Whitener(sol.covariance)
        best = np.full(len(sol.theta), -np.inf)
        for change in _changes(term, null, full, sol):
            w = white.vector(np.where(np.isfinite(change), change, 0.0))
            d = without(space, w)
            size = np.sqrt(np.einsum("sn,sn->s", d, d))
            whole = np.sqrt(np.einsum("sn,sn->s", w, w))
            some = size > 1e-8 * whole
            z = np.einsum("sn,sn->s", d, sol.residual) / np.where(some, size, 1.0)
            z = np.where(some, z, 0.0)
            best = np.maximum(best, z if rising else np.abs(z))
        return np.where(np.isfinite(sol.objective), best, np.nan)

    outside = outside_level(alpha)
    found = reach(null.problem, null.solution, (), weak, scores, outside=outside)
    if not found.allowed[0]:
        p = outside
    else:
        p = outside + _joint(null, rows, rising, float(found.low[0]), seed)
    return float(normal_of_tail(min(p, 1.0) if rising else min(p, 1.0) / 2.0))


def _changes(term: Term, null: Fit, full: Fit, sol: Solution) -> list[np.ndarray]:
    """Changes of the predictions, shape (S, N), in whose direction the term would show."""
    if term.kind is Kind.FACTOR:
        theta = np.repeat(mimics([null], full), len(sol.theta), axis=0)
        made = full.predictor.predict(theta, sol.conditions, constants=False)
        return [made.values - sol.values]
    names = {n: k for k, n in enumerate(null.predictor.names)}
    theta = np.stack(
        [
            sol.theta[:, names[n]] if n in names else np.full(len(sol.theta), s)
            for n, s in zip(term.full.names, term.full.scale, strict=True)
        ],
        axis=1,
    )
    theta[:, list(term.psi)] = 0.0
    out = []
    for factor in VANISH_GRID if term.vanish else np.ones(1):
        theta[:, list(term.vanish)] = term.full.scale[list(term.vanish)] * factor
        g = term.full.predict(theta, sol.conditions).by_constants
        assert g is not None
        out.append(g[:, :, term.psi[0]])
    return out


def _joint(null: Fit, rows: list[np.ndarray], rising: bool, x: float, seed: int) -> float:
    """Chance that the largest score along the directions exceeds x."""
    own = basis(null.jacobian[None])
    white = Whitener(null.covariance[None])
    units = []
    for row in rows:
        w = white.vector(row[None]) if rising else row[None]
        d = without(own, w)[0]
        size = float(np.sqrt(d @ d))
        if np.isfinite(size) and size > 1e-8 * float(np.sqrt((w**2).sum())):
            units.append(d / size)
    if not units:
        return 1.0
    data = null.data
    replicate_df = data.scale_df if data.scale is Scale.REPLICATES else 0
    df = max(null.degrees_of_freedom, 1)
    return joint_p(np.array(units), x, df, False, replicate_df, seed, two_sided=not rising)


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
