"""Estimated variances of several responses beside errors of measured conditions.

The sensitivities at reconciled conditions are independent of the residuals only where V is right. With
variances s_m^2 that were estimated (or covariances: E_m = dV/ds_m), the score S of the tested constants
moves with them, by D_m = -1/2 tr(V^-1 dV/dtheta V^-1 E_m) each, the nuisance constants regressed
out. Their estimates have the covariance A^-1, A_mq = 1/2 tr(V^-1 E_m V^-1 E_q), so the variance of S
is I + D' A^-1 D; for one variance that is the form of `unknown_scale`.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.fit.covariance import Whitener
from discrim.fit.problem import Problem, Solution

RANK = 1e-10


def added_variance(problem: Problem, sol: Solution, tested: Sequence[int]) -> np.ndarray:
    """D' A^-1 D, shape (S, q, q), for the constants ``tested``, all others nuisance."""
    data = problem.data
    n, p, q = data.n, sol.theta.shape[1], len(tested)
    s = len(sol.theta)
    v = sol.covariance
    if v.ndim == 2:
        v = v[:, :, None] * np.eye(n)
    white = Whitener(np.ascontiguousarray(v))
    inverse = white.transposed_matrix(white.matrix(np.broadcast_to(np.eye(n), v.shape)))
    pred = problem.predictor.predict(sol.theta, sol.conditions, conditions_too=True, both=True)
    assert pred.by_conditions is not None
    assert pred.by_both is not None
    patterns = [np.diag(e) if e.ndim == 1 else e for e in data.patterns]
    weights = [inverse @ e @ inverse for e in patterns]
    m = len(patterns)
    d = np.zeros((s, p, m))
    for src in problem.measured:
        sd = np.broadcast_to(src.sd(sol.conditions[..., src.target]), (s, n))
        u = sd * pred.by_conditions[..., src.target]
        du = sd[..., None] * pred.by_both[:, :, src.target, :]
        same = (src.groups[:, None] == src.groups[None, :]).astype(float)
        for k, w in enumerate(weights):
            d[:, :, k] -= np.einsum("sk,skp->sp", np.einsum("sn,snk->sk", u, w * same), du)
    a = np.empty((s, m, m))
    for k, w in enumerate(weights):
        for j, e in enumerate(patterns):
            a[:, k, j] = 0.5 * np.einsum("snk,kn->s", w, e)
    pick = list(tested)
    # a solution where the law is not finite is ruled out by its objective
    g_l = np.delete(np.where(np.isfinite(sol.jacobian), sol.jacobian, 0.0), pick, axis=2)
    norms = np.sqrt(np.einsum("snk,snk->sk", g_l, g_l))
    norms = np.where(norms > 0, norms, 1.0)
    pinv = np.linalg.pinv(g_l / norms[:, None, :], rcond=RANK)
    beta = (pinv @ sol.jacobian[:, :, pick]) / norms[:, :, None]
    own = d[:, pick] - np.einsum("skq,skm->sqm", beta, np.delete(d, pick, axis=1))
    good = np.isfinite(own).all(axis=(1, 2)) & np.isfinite(a).all(axis=(1, 2))
    out = np.full((s, q, q), np.nan)
    if good.any():
        size = np.sqrt(np.maximum(np.einsum("smm->sm", a[good]), 1e-300))
        scaled = own[good] / size[:, None, :]
        inner = a[good] / (size[:, :, None] * size[:, None, :])
        out[good] = scaled @ np.linalg.pinv(inner, rcond=RANK) @ np.swapaxes(scaled, 1, 2)
    return out
