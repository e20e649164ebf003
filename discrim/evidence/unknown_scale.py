"""The variance of the observations unknown beside known errors of the conditions.

The score of the tested constants is then made orthogonal to that of s^2 as well: to S_j comes
c_j (Q - (N - p_l)), with dV/ds^2 = 1, D_j = -1/2 tr(V^-2 dV/dtheta_j) and
c_j = (D_j - I_jl I_ll^-1 D_l)/tr(V^-1), and to the information 2 (N - p_l) c c'. Only *measured*
conditions, whose reconciling needs s^2, are part of dV/dtheta: with set ones the score has mean zero
whatever s^2 is.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.fit.covariance import Whitener
from discrim.fit.problem import Problem, Solution

RANK = 1e-10


def scale_weights(problem: Problem, sol: Solution, tested: Sequence[int]) -> np.ndarray:
    """c, shape (S, q), for the constants ``tested``, all others nuisance."""
    data = problem.data
    p = sol.theta.shape[1]
    v = sol.covariance
    pred = problem.predictor.predict(sol.theta, sol.conditions, conditions_too=True, both=True)
    assert pred.by_conditions is not None
    assert pred.by_both is not None
    if v.ndim == 2:
        inverse_trace = (1.0 / v).sum(axis=1)
    else:
        white = Whitener(v)
        inverse = white.transposed_matrix(white.matrix(np.broadcast_to(np.eye(data.n), v.shape)))
        inverse_trace = np.einsum("snn->s", inverse)
    d = np.zeros((len(v), p))
    for src in problem.measured:
        sd = src.sd(sol.conditions[..., src.target])
        u = sd * pred.by_conditions[..., src.target]
        du = (sd[..., None] if sd.ndim == 2 else sd[:, None]) * pred.by_both[:, :, src.target, :]
        if v.ndim == 2:
            d -= np.einsum("sn,snp->sp", u / v**2, du)
        else:
            same = src.groups[:, None] == src.groups[None, :]
            squared = (inverse @ inverse) * same
            d -= np.einsum("sn,snk,skp->sp", u, squared, du)
    pick = list(tested)
    # a solution where the law is not finite is ruled out by its objective
    g_l = np.delete(np.where(np.isfinite(sol.jacobian), sol.jacobian, 0.0), pick, axis=2)
    d_l = np.delete(d, pick, axis=1)
    # regression of the tested columns on the nuisance columns, by the pseudo-inverse of scaled ones
    norms = np.sqrt(np.einsum("snk,snk->sk", g_l, g_l))
    norms = np.where(norms > 0, norms, 1.0)
    pinv = np.linalg.pinv(g_l / norms[:, None, :], rcond=RANK)
    beta = (pinv @ sol.jacobian[:, :, pick]) / norms[:, :, None]
    c = d[:, pick] - np.einsum("skq,sk->sq", beta, d_l)
    return np.asarray(c / inverse_trace[:, None])
