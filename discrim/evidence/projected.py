"""Tests where other constants move in lockstep with one another.

The plain form puts the nuisance constants at their restricted estimate. Where the runs do not tell
two of them apart, that estimate follows the errors of the conditions, and a term that moves along
the same weak direction is claimed falsely (up to 22 % at 5 %, 30 runs). The projected form takes the least
significant statistic over all values of the weak constants that the objective allows, the others
profiled (Chaudhuri & Zivot, J. Econometrics 164 (2011) 239), with S_lambda, which is not zero there,
kept in the formula: the residual is projected off all nuisance columns.

One weak constant is scanned along a line; several are searched over a lattice with every face on
which some of them are zero. Both then look closer about the extremes found.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from enum import Enum

import numpy as np

from discrim.evidence.distributions import chi2_quantile_upper, f_quantile_upper
from discrim.fit.engine import Options, solve
from discrim.fit.freedom import on_bounds
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution

# A combination of nuisance sensitivities counts as told apart when its length over the runs is at least
# four times what the errors of measured conditions alone would give it (compared as squares). Measured
# sizes one-sided at 5 %, B along the weak direction: at a median ratio of 1, 14 to 22 %; 6, 7 %; 12, 6 to
# 6.7 %; 20 and more, 5 to 6 %.
TOLD_APART = 16.0
# values of a weak constant may be ruled out by the objective at this level, and at no more than this share
# of alpha; it is added to the p-value (Berger & Boos, J. Am. Stat. Assoc. 89 (1994) 1012)
OUTSIDE = 0.01
OUTSIDE_SHARE = 0.2
# more weak directions than this are searched along so many constants only
MOST = 3
_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)
_LATTICE = (0.0, 1e-3, 0.02, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.75, 1.0, 2.0)
_DRAWN = 400

# signed (or positive) equivalent normals of restricted optima, shape (S,); nan where there is none
Statistic = Callable[[Problem, Solution], np.ndarray]


class Effort(Enum):
    """How closely extremes are looked for."""

    FULL = "full"
    SOME = "some"
    LITTLE = "little"


_CLOSER = {Effort.FULL: 2, Effort.SOME: 1, Effort.LITTLE: 0}  # rounds about the extremes


def outside_level(alpha: float) -> float:
    """What of ``alpha`` is spent on ruling out values of weak nuisance constants."""
    return min(OUTSIDE, OUTSIDE_SHARE * alpha)


@dataclass(frozen=True, slots=True)
class Weak:
    """Nuisance directions that the runs do not tell apart from the errors of the conditions.

    ``count`` of them; ``constants`` as many of the law's (indices) that take the largest part in
    them; ``ratio`` squared length of the weakest direction relative to what the errors alone give
    it (inf without measured conditions).
    """

    count: int
    constants: tuple[int, ...]
    ratio: float


@dataclass(frozen=True, slots=True, eq=False)
class Reach:
    """What a statistic can be over the values of the weak constants that the objective allows.

    ``low``, ``high`` shape (S,) least and greatest; ``allowed`` shape (S,) whether any value is.
    """

    low: np.ndarray
    high: np.ndarray
    allowed: np.ndarray


def weak_nuisance(problem: Problem, solution: Solution, tested: int | Sequence[int]) -> Weak:
    """Of the constants other than ``tested``, at one restricted optimum (batch axis 1)."""
    p = solution.theta.shape[1]
    others = np.delete(np.arange(p), np.atleast_1d(np.asarray(tested, int)))
    jac = solution.jacobian[0][:, others]
    lengths = np.sqrt((jac**2).sum(axis=0))
    free = np.flatnonzero((lengths > 0) & np.isfinite(lengths))
    if not problem.measured or len(free) < 2:
        return Weak(0, (), float("inf"))
    _, s, vt = np.linalg.svd(jac[:, free] / lengths[free], full_matrices=False)
    pred = problem.predictor.predict(
        solution.theta[:1], solution.conditions[:1], conditions_too=True, both=True
    )
    assert pred.by_both is not None
    turns = pred.by_both[0][:, :, others[free]] / lengths[free]
    v = solution.covariance[0]
    variance = v if v.ndim == 1 else np.diagonal(v)
    noise, rounding = np.zeros(len(vt)), np.zeros(len(vt))
    for src in problem.measured:
        sd = np.broadcast_to(src.sd(solution.conditions[0][:, src.target]), variance.shape)
        along = turns[:, src.target, :] @ vt.T
        weight = (sd**2 / variance)[:, None]
        noise += (weight * np.nan_to_num(along) ** 2).sum(axis=0)
        parts = np.abs(np.nan_to_num(turns[:, src.target, :])) @ np.abs(vt.T)
        rounding += (weight * parts**2).sum(axis=0)
    # constants that the law itself does not tell apart: no error of a condition does
    noise = np.where(noise > 1e-20 * rounding, noise, 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(noise > 0, s**2 / noise, np.inf)
    weak = np.flatnonzero(ratio < TOLD_APART)
    weak = weak[np.argsort(ratio[weak], kind="stable")]
    # the constants that carry them, so that the rest is determined once they are held
    left = vt[weak[:MOST]].copy()
    chosen: list[int] = []
    for _ in range(len(left)):
        size = np.abs(left) if not chosen else np.where(np.isin(free, chosen), 0.0, np.abs(left))
        row, column = np.unravel_index(int(np.argmax(size)), size.shape)
        chosen.append(int(free[column]))
        left = left - np.outer(left[:, column] / left[row, column], left[row])
        left[row] = 0.0
    return Weak(len(weak), tuple(int(others[c]) for c in chosen), float(ratio.min()))


def reach(
    problem: Problem,
    solution: Solution,
    tested: Sequence[int],
    weak: Weak,
    statistic: Statistic,
    *,
    outside: float,
    effort: Effort = Effort.FULL,
) -> Reach:
    """Extremes of ``statistic`` over the values of the weak constants that the objective allows.

    ``solution``: restricted optima, the constants ``tested`` held, any batch axis S. ``outside``:
    level at which the objective may rule values out, to be added to the p-value. ``effort``: how
    closely the extremes are looked for; a verdict needs all of it.
    """
    s = len(solution.theta)
    limit = _limit(problem, solution, len(tested), len(weak.constants), outside)
    if problem.joint_scale:
        df = max(problem.data.count - solution.theta.shape[1] + len(tested), 1)
        variance = float(np.median(solution.scale2))
        problem = Problem(problem.predictor, problem.data.with_variance(variance, df))
    fixed = np.zeros(solution.theta.shape[1], bool)
    fixed[[*tested, *weak.constants]] = True
    points = _first(problem, solution, weak.constants, effort)
    z = np.full(points.shape[:2], np.nan)
    todo = slice(0, points.shape[1])
    rounds = _CLOSER[effort]
    for k in range(rounds + 1):
        q, new, on = _solved(problem, solution, weak.constants, fixed, points[:, todo], statistic)
        z[:, todo] = np.where(q <= np.take_along_axis(limit, on, axis=1), new, np.nan)
        if k < rounds:
            more = _closer(problem, points, z, weak.constants, 0.35**k)
            todo = slice(points.shape[1], points.shape[1] + more.shape[1])
            points = np.concatenate([points, more], axis=1)
            z = np.concatenate([z, np.full((s, more.shape[1]), np.nan)], axis=1)
    some = np.isfinite(z).any(axis=1)
    low = np.where(np.isfinite(z), z, np.inf).min(axis=1)
    high = np.where(np.isfinite(z), z, -np.inf).max(axis=1)
    return Reach(np.where(some, low, np.nan), np.where(some, high, np.nan), some)


def _limit(
    problem: Problem, solution: Solution, tested: int, weak: int, outside: float
) -> np.ndarray:
    """Of the objective, shape (S, K + 1), with 0 to K of the constants that are profiled on bounds."""
    data = problem.data
    n, p = data.count, solution.theta.shape[1]
    # the constants tested and the weak ones are held, the rest profiled
    rest = p - tested - weak
    out = np.empty((len(solution.theta), rest + 1))
    if data.scale is Scale.STATED:
        df = np.maximum(n - rest + np.arange(rest + 1), 1)
        out[:] = [chi2_quantile_upper(outside, d) for d in df]
        return out
    df = n - p + tested if problem.joint_scale else data.scale_df
    out[:] = (solution.objective + weak * f_quantile_upper(outside, weak, max(df, 1)))[:, None]
    return out


def _most(problem: Problem, solution: Solution, constants: Sequence[int]) -> np.ndarray:
    """Where each constant alone would give the rates twice over, shape (S, q)."""
    v = solution.covariance
    variance = v if v.ndim == 2 else np.diagonal(v, axis1=1, axis2=2)
    length = np.sqrt((solution.jacobian[:, :, list(constants)] ** 2).sum(axis=1))
    rates = np.sqrt((solution.values**2 / variance).sum(axis=1))
    most = 2.0 * rates[:, None] / np.maximum(length, 1e-300)
    return np.where(np.isfinite(most), most, problem.predictor.scale[list(constants)])


def _first(
    problem: Problem, solution: Solution, constants: tuple[int, ...], effort: Effort
) -> np.ndarray:
    """Values to begin with, shape (S, G, q), the restricted estimate among them."""
    pick = list(constants)
    lower, upper = problem.predictor.lower[pick], problem.predictor.upper[pick]
    most = _most(problem, solution, constants)[:, None, :]
    here = solution.theta[:, None, pick]
    if len(pick) == 1:
        spread, about = np.r_[np.linspace(0.0, 1.0, 33), np.logspace(-4, -1, 7)], 13
        if effort is Effort.SOME:
            spread, about = spread[::2], 5
        elif effort is Effort.LITTLE:
            spread, about = np.array([0.0, 0.1, 0.3, 0.6]), 3
        points = np.concatenate(
            [most * spread[None, :, None], here * np.logspace(-1, 1, about)[None, :, None], here], 1
        )
        if lower[0] < 0:
            points = np.concatenate([points, -points, here - most * spread[None, :, None]], axis=1)
    else:
        if len(pick) == 2:
            one = _LATTICE if effort is Effort.FULL else _LATTICE[::2]
            axes = np.meshgrid(one, one, indexing="ij")
            share = np.stack([a.ravel() for a in axes], axis=1)
        else:
            rng = np.random.default_rng(1)
            drawn = _DRAWN if effort is Effort.FULL else _DRAWN // 4
            share = rng.uniform(0.0, 1.0, (drawn, len(pick)))
            share *= rng.uniform(0.0, 1.0, share.shape) > 1 / 3
        points = np.concatenate([0.5 * most * share[None], here], axis=1)
        if (lower < 0).any():
            points = np.concatenate([points, here + most * (share - 0.5)[None]], axis=1)
    return np.clip(points, lower, upper)


def _closer(
    problem: Problem, points: np.ndarray, z: np.ndarray, constants: tuple[int, ...], shrink: float
) -> np.ndarray:
    """Values about the least and the greatest statistic so far, as far as their neighbours."""
    s, _, q = points.shape
    rows = np.arange(s)
    usable = np.isfinite(z)
    out = []
    for extreme in (
        np.argmin(np.where(usable, z, np.inf), axis=1),
        np.argmax(np.where(usable, z, -np.inf), axis=1),
    ):
        centre = points[rows, extreme]
        if q == 1:
            gap = points[:, :, 0] - centre
            left = np.where(gap < 0, gap, -np.inf).max(axis=1)
            right = np.where(gap > 0, gap, np.inf).min(axis=1)
            step = np.linspace(0.125, 1.0, 8)
            left, right = (
                np.where(np.isfinite(left), left, 0.0),
                np.where(np.isfinite(right), right, 0.0),
            )
            near = np.concatenate([left[:, None] * step, right[:, None] * step], axis=1)
            out.append(centre[:, None, :] + near[:, :, None])
        else:
            width = 0.1 * np.ptp(points, axis=1)[:, None, :] * shrink
            if q == 2:
                axes = np.meshgrid(*[np.linspace(-1, 1, 5)] * 2, indexing="ij")
                near = np.stack([a.ravel() for a in axes], axis=1)
            else:
                near = np.random.default_rng(2).uniform(-1.0, 1.0, (60, q))
            out.append(centre[:, None, :] + width * near[None])
    pick = list(constants)
    lower, upper = problem.predictor.lower[pick], problem.predictor.upper[pick]
    return np.clip(np.concatenate(out, axis=1), lower, upper)


def _repeated(problem: Problem, member: np.ndarray) -> Problem:
    """The problem over a batch in which each table of its own batch, if it has one, comes again."""
    data = problem.data
    if data.y.ndim == 1 and data.conditions.ndim == 2 and data.absent is None:
        return problem
    return Problem(
        problem.predictor,
        replace(
            data,
            y=data.y if data.y.ndim == 1 else data.y[member],
            conditions=data.conditions if data.conditions.ndim == 2 else data.conditions[member],
            absent=None if data.absent is None else data.absent[member],
        ),
    )


def _solved(
    problem: Problem,
    solution: Solution,
    constants: tuple[int, ...],
    fixed: np.ndarray,
    points: np.ndarray,
    statistic: Statistic,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Objective, statistic and how many of the others, which are profiled, are on a bound at
    ``points``, shape (S, G, q); shape (S, G) each."""
    s, g, _ = points.shape
    pick = list(constants)
    member = np.repeat(np.arange(s), g)
    problem = _repeated(problem, member)
    start = solution.theta[member].copy()
    # where the law is not finite a point is ruled out by its objective
    jac = np.where(np.isfinite(solution.jacobian), solution.jacobian, 0.0)
    rest = np.flatnonzero(~fixed)
    moved = points - solution.theta[:, None, pick]
    if len(rest):  # how the others follow
        norms = np.sqrt((jac[:, :, rest] ** 2).sum(axis=1))
        norms = np.where(norms > 0, norms, 1.0)
        pinv = np.linalg.pinv(jac[:, :, rest] / norms[:, None, :], rcond=1e-10)
        follow = -(pinv @ jac[:, :, pick]) / norms[:, :, None]
        start[:, rest] += np.einsum("srq,sgq->sgr", follow, moved).reshape(s * g, -1)
    start[:, pick] = points.reshape(s * g, -1)
    found = solve(
        problem,
        start,
        fixed=fixed,
        options=_OPTIONS,
        conditions=np.asarray(solution.conditions)[member],
    )
    z = statistic(problem, found)
    q = np.where(np.isfinite(z), found.objective, np.inf)
    on = on_bounds(found.theta, problem.predictor.lower, problem.predictor.upper) & ~fixed
    return q.reshape(s, g), z.reshape(s, g), on.sum(axis=1).reshape(s, g)
