"""The score test where other constants move in lockstep with one another.

The plain form puts the nuisance constants at their restricted estimate. Where the runs do not tell
two of them apart, that estimate follows the errors of the conditions, and a term that moves along
the same weak direction is claimed falsely (up to 22 % at 5 %, 30 runs). The projected form takes the least
significant score over all values of the weak constant that the objective allows, the others
profiled (Chaudhuri & Zivot, J. Econometrics 164 (2011) 239), with S_lambda, which is not zero there,
kept in the formula: the residual is projected off all nuisance columns.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.distributions import chi2_quantile_upper, f_quantile_upper
from discrim.evidence.score import score
from discrim.fit.engine import Options, Problem, Solution, solve
from discrim.fit.measurements import Scale

# A combination of nuisance sensitivities counts as told apart when its length over the runs is at least
# four times what the errors of measured conditions alone would give it (compared as squares). Measured
# sizes one-sided at 5 %, B along the weak direction: at a median ratio of 1, 14 to 22 %; 6, 7 %; 12, 6 to
# 6.7 %; 20 and more, 5 to 6 %.
TOLD_APART = 16.0
# values of a weak constant may be ruled out by the objective at this level, and at no more than this share
# of alpha; it is added to the p-value (Berger & Boos, J. Am. Stat. Assoc. 89 (1994) 1012)
OUTSIDE = 0.01
OUTSIDE_SHARE = 0.2
_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)


def outside_level(alpha: float) -> float:
    """What of ``alpha`` is spent on ruling out values of weak nuisance constants."""
    return min(OUTSIDE, OUTSIDE_SHARE * alpha)


@dataclass(frozen=True, slots=True)
class Weak:
    """Nuisance directions that the runs do not tell apart from the errors of the conditions.

    ``count`` of them; ``constant`` the one (index in the law) that takes the largest part in the
    weakest, -1 for none; ``ratio`` squared length of the weakest direction relative to what the
    errors alone give it (inf without measured conditions).
    """

    count: int
    constant: int
    ratio: float


def weak_nuisance(problem: Problem, solution: Solution, psi: int) -> Weak:
    """Of the constants other than ``psi``, at one restricted optimum (batch axis 1)."""
    jac = np.delete(solution.jacobian[0], psi, axis=1)
    lengths = np.sqrt((jac**2).sum(axis=0))
    free = np.flatnonzero((lengths > 0) & np.isfinite(lengths))
    if not problem.measured or len(free) < 2:
        return Weak(0, -1, float("inf"))
    _, s, vt = np.linalg.svd(jac[:, free] / lengths[free], full_matrices=False)
    pred = problem.predictor.predict(
        solution.theta[:1], solution.conditions[:1], conditions_too=True, both=True
    )
    assert pred.by_both is not None
    turns = np.delete(pred.by_both[0], psi, axis=2)[:, :, free] / lengths[free]
    v = solution.covariance[0]
    variance = v if v.ndim == 1 else np.diagonal(v)
    noise = np.zeros(len(vt))
    for src in problem.measured:
        sd = np.broadcast_to(src.sd(solution.conditions[0][:, src.target]), variance.shape)
        along = turns[:, src.target, :] @ vt.T
        noise += ((sd**2 / variance)[:, None] * along**2).sum(axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(noise > 0, s**2 / noise, np.inf)
    k = int(np.argmin(ratio))
    others = np.delete(np.arange(solution.theta.shape[1]), psi)
    constant = int(others[free[int(np.argmax(np.abs(vt[k])))]])
    return Weak(int((ratio < TOLD_APART).sum()), constant, float(ratio[k]))


def projected(
    problem: Problem, solution: Solution, psi: int, weak: int, *, outside: float
) -> np.ndarray:
    """Scores z of ``psi`` at the values of the constant ``weak`` that the objective allows.

    ``solution``: the restricted optimum, batch axis 1. ``outside``: level at which the objective may
    rule values out, to be added to the p-value (Berger & Boos, J. Am. Stat. Assoc. 89 (1994) 1012).
    Empty when it rules out all of them.
    """
    limit = _limit(problem, solution, outside)
    held_problem = problem
    if problem.joint_scale:
        df = max(problem.data.n - solution.theta.shape[1] + 1, 1)
        held_problem = Problem(
            problem.predictor, problem.data.with_variance(float(solution.scale2[0]), df)
        )
    values = _values(problem, solution, weak)
    for _ in range(2):
        q, z = _scan(held_problem, solution, psi, weak, values)
        kept = q <= limit
        if not kept.any():
            return np.empty(0)
        # a second, finer pass about the ends of what is allowed and about the least score
        marks = np.flatnonzero(kept[1:] != kept[:-1])
        least = int(np.argmin(np.where(kept, np.abs(z), np.inf)))
        marks = np.unique(np.clip(np.r_[marks, least - 1, least], 0, len(values) - 2))
        fine = [np.linspace(values[k], values[k + 1], 9) for k in marks]
        values = np.unique(np.concatenate([values, *fine]))
    return z[kept]


def _limit(problem: Problem, solution: Solution, outside: float) -> float:
    data = problem.data
    n, p = data.n, solution.theta.shape[1]
    if data.scale is Scale.STATED:
        # psi and the weak constant are held, the rest profiled
        return chi2_quantile_upper(outside, max(n - (p - 2), 1))
    q = float(solution.objective[0])
    df = n - p + 1 if problem.joint_scale else data.scale_df
    return q + f_quantile_upper(outside, 1, max(df, 1))


def _values(problem: Problem, solution: Solution, weak: int) -> np.ndarray:
    """From its lower bound to where the constant alone would give the rates twice over."""
    theta = solution.theta[0]
    lower = float(problem.predictor.lower[weak])
    upper = float(problem.predictor.upper[weak])
    length = float(np.sqrt((solution.jacobian[0][:, weak] ** 2).sum()))
    v = solution.covariance[0]
    variance = v if v.ndim == 1 else np.diagonal(v)
    most = 2.0 * float(np.sqrt((solution.values[0] ** 2 / variance).sum())) / max(length, 1e-300)
    here = float(theta[weak])
    spread = np.r_[np.linspace(0.0, 1.0, 33), np.logspace(-4, 0, 9)]
    around = here * np.logspace(-1, 1, 13)
    values = np.r_[most * spread, around, here]
    if lower < 0:
        values = np.r_[values, -values, here - most * spread]
    return np.unique(np.clip(values, lower, upper))


def _scan(
    problem: Problem, solution: Solution, psi: int, weak: int, values: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Objective and score at each value of the weak constant, the others profiled."""
    start = np.tile(solution.theta[0], (len(values), 1))
    jac = solution.jacobian[0]
    p = start.shape[1]
    rest = [j for j in range(p) if j not in (psi, weak)]
    if rest:  # how the others follow
        follow, *_ = np.linalg.lstsq(jac[:, rest], -jac[:, weak], rcond=1e-10)
        start[:, rest] += (values - start[0, weak])[:, None] * np.nan_to_num(follow)
    start[:, weak] = values
    fixed = np.zeros(p, bool)
    fixed[[psi, weak]] = True
    conditions = np.repeat(np.asarray(solution.conditions[:1]), len(values), axis=0)
    found = solve(problem, start, fixed=fixed, options=_OPTIONS, conditions=conditions)
    z = score(problem, found, psi).z
    q = np.where(np.isfinite(z), found.objective, np.inf)
    return q, z
