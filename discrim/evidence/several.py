"""The reconciled score of several constants at once.

K = S' I^-1 S of the tested columns with the nuisance columns taken off both them and the residual:
chi-squared with q degrees of freedom in the limit, whether or not the runs identify the constants
(Kleibergen, Econometrica 73 (2005) 1103). Exact conditions and an unknown variance: F, the extra sum
of squares. The edges of the constants are not used: valid, at a loss of power.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.evidence.distributions import chi2_tail, f_tail, normal_of_tail
from discrim.evidence.score import basis, without
from discrim.evidence.unknown_scale import scale_weights
from discrim.evidence.unknown_variances import added_variance
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution

# columns whose part outside the nuisance space is smaller than this carry only rounding error
NO_INFORMATION = 1e-9


def several(
    problem: Problem, solution: Solution, tested: Sequence[int]
) -> tuple[np.ndarray, np.ndarray]:
    """Equivalent normals, positive, two-sided tail that of K, and the share of the sensitivities that
    is not in lockstep with the nuisance constants; shape (S,) each. nan where it cannot be tested."""
    pick = list(tested)
    data, jac = problem.data, solution.jacobian
    p = jac.shape[2]
    space = basis(np.delete(jac, pick, axis=2))
    g = jac[:, :, pick]
    whole = np.sqrt(np.einsum("snq,snq->sq", g, g))
    scaled = g / np.where(whole > 0, whole, 1.0)[:, None, :]
    off = scaled
    for _ in range(2):
        off = off - space @ (np.swapaxes(space, 1, 2) @ off)
    finite = np.isfinite(off).all(axis=(1, 2)) & np.isfinite(solution.objective)
    off = np.where(finite[:, None, None], off, 0.0)
    residual = without(space, np.where(finite[:, None], solution.residual, 0.0))
    u, s, vt = np.linalg.svd(off, full_matrices=False)
    seen = s > np.maximum(NO_INFORMATION, 1e-10 * s[:, :1])
    along = np.einsum("snq,sn->sq", u, residual)
    q = seen.sum(axis=1)
    n, p_l = data.count, p - len(pick)
    if problem.joint_scale:
        c = scale_weights(problem, solution, pick) / np.where(whole > 0, whole, 1.0)
        turned = np.einsum("sqk,sk->sq", vt, np.where(np.isfinite(c), c, 0.0))
        turned = np.where(seen, turned / np.where(seen, s, 1.0), 0.0)
        along = along + turned * (solution.objective - (n - p_l))[:, None]
        k = np.where(seen, along, 0.0)
        twice = 2.0 * max(n - p_l, 1)
        cross = np.einsum("sq,sq->s", turned, k)
        own = np.einsum("sq,sq->s", turned, turned)
        k_all = np.einsum("sq,sq->s", k, k) - twice * cross**2 / (1.0 + twice * own)
    else:
        along = np.where(seen, along, 0.0)
        k_all = (along**2).sum(axis=1)
        if data.scale is Scale.REPLICATES and data.patterns and problem.measured:
            # variances of the observations that were estimated (see `unknown_variances`)
            turn = (
                vt / np.where(seen, s, 1.0)[:, :, None] / np.where(whole > 0, whole, 1.0)[:, None]
            )
            turn = np.where(seen[:, :, None], turn, 0.0)
            extra = turn @ added_variance(problem, solution, pick) @ np.swapaxes(turn, 1, 2)
            usable = np.isfinite(extra).all(axis=(1, 2))
            extra = np.where(usable[:, None, None], extra, 0.0)
            weighed = np.linalg.solve(np.eye(len(s[0])) + extra, along[:, :, None])[:, :, 0]
            k_all = np.where(usable, (along * weighed).sum(axis=1), np.nan)
    tail = _tail(problem, solution, k_all, np.maximum(q, 1), p)
    z = normal_of_tail(np.minimum(tail, 1.0) / 2)
    z = np.where(finite & (q > 0) & np.isfinite(tail), z, np.nan)
    size = np.sqrt(np.einsum("snq,snq->s", off * whole[:, None, :], off * whole[:, None, :]))
    every = np.sqrt((whole**2).sum(axis=1))
    return z, np.where(q > 0, size / np.maximum(every, 1e-300), 0.0)


def _tail(problem: Problem, solution: Solution, k: np.ndarray, q: np.ndarray, p: int) -> np.ndarray:
    data = problem.data
    if data.scale is Scale.REPLICATES:
        return f_tail(k / q, q, data.scale_df)
    if data.scale is Scale.ESTIMATED and not problem.with_conditions:
        df = data.count - p
        if df < 1:
            return np.full(k.shape, np.nan)
        rest = np.maximum(solution.objective - k, 1e-300)
        return f_tail((k / q) / (rest / df), q, df)
    return chi2_tail(k, q)
