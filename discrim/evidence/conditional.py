"""The conditional likelihood ratio of one constant, where conditions are measured with errors.

At the restricted optimum split the whitened residual, with the nuisance columns taken off it, into
K, the part along the reconciled sensitivity D of the constant (also off the nuisance columns), and
J, the rest: chi-squared with 1 and k - 1 degrees of freedom, k = N less the nuisance constants, and
independent of D whether or not the runs identify the constant. With r the strength of D in units of
its own covariance,

    LR = 1/2 [K + J - r + sqrt((K + J + r)^2 - 4 r J)]

and its law given r depends on nothing else (Moreira, Econometrica 71 (2003) 1027; with a statistic of
rank in place of the concentration: Kleibergen, Econometrica 73 (2005) 1103). Any r that is a function
of D alone keeps the level; this one makes LR the fall of the objective, K where D is sure (exact
conditions: the ordinary test) and the whole objective where D is nothing but noise. K alone is valid
too, but where the law is far from the truth the conditions are reconciled to where D says nothing.

D's own covariance: given e, an error of measured conditions keeps S_c - C V^-1 C' with C = S_c F',
and moves the column of psi, less its regression on the nuisance columns, by the mixed derivatives of
the law.
"""

from __future__ import annotations

import numpy as np

from discrim.evidence.distributions import chi2_tail, normal_of_tail
from discrim.fit.covariance import Whitener
from discrim.fit.measurements import ErrorSource
from discrim.fit.problem import Problem, Solution

# strengths beyond this leave nothing of the condition: K decides
SURE = 1e9
RANK = 1e-10
_X, _W = np.polynomial.legendre.leggauss(32)


def tail(statistic: np.ndarray, strength: np.ndarray, df: np.ndarray | float) -> np.ndarray:
    """P(LR > statistic) given the strength r, all shapes broadcast to (S,); ``df`` is k >= 1.

    LR exceeds m where K does, and below that where J > (r + m)(1 - K/m), so with K = t^2

    P = P(chi2_1 > m) + integral of 2 phi(t) P(chi2_(k-1) > (r + m)(1 - t^2/m)) over t^2 < m

    (the same integral over an angle: Andrews, Moreira & Stock, Econometrica 74 (2006) 715, from memory).
    """
    m, r, k = np.broadcast_arrays(
        np.asarray(statistic, float), np.asarray(strength, float), np.asarray(df, float)
    )
    out = np.where(np.isnan(m) | np.isnan(r), np.nan, 1.0)
    some = np.flatnonzero((m > 0) & ~np.isnan(r))
    m, r, k = m[some], r[some], k[some]
    p = chi2_tail(m, 1.0)
    more = (k > 1) & (r < SURE)
    p[more] += _rest(m[more], r[more], k[more])
    out[some] = np.minimum(p, 1.0)
    return out


def _rest(m: np.ndarray, r: np.ndarray, k: np.ndarray) -> np.ndarray:
    # beyond this J has no tail left, and K has to be the nearer to m
    far = k + 9.0 * np.sqrt(2.0 * k) + 60.0
    low = np.sqrt(m * np.maximum(1.0 - far / (r + m), 0.0))
    half = 0.5 * (np.sqrt(m) - low)[:, None]
    t = low[:, None] + half * (1.0 + _X)
    need = np.maximum((r + m)[:, None] * (1.0 - t**2 / m[:, None]), 0.0)
    density = np.exp(-0.5 * t**2) * np.sqrt(2.0 / np.pi)
    return np.asarray((half * _W * density * chi2_tail(need, k[:, None] - 1.0)).sum(axis=1))


def ratio(k_part: np.ndarray, j_part: np.ndarray, strength: np.ndarray) -> np.ndarray:
    """LR of K, J and r, in a form that loses no digits where r is large."""
    a = k_part + j_part
    with np.errstate(invalid="ignore", over="ignore"):
        root = np.sqrt(np.maximum((a - strength) ** 2 + 4.0 * strength * k_part, 0.0))
        below = 2.0 * strength * k_part / (root + strength - a)
    return np.where(
        strength >= SURE, k_part, np.where(a > strength, (a - strength + root) / 2, below)
    )


def signed(
    s: np.ndarray, size: np.ndarray, rest: np.ndarray, strength: np.ndarray, df: np.ndarray
) -> np.ndarray:
    """The test as an equivalent standard normal with the sign of the score, all shape (S,).

    ``s`` = D'u and ``size`` = |D|; ``rest`` the square of the residual off the nuisance columns. On
    each side of the null value the tail is half the two-sided one: given everything but the sign of
    ``s``, both signs are equally likely when psi has its null value.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        k_part = np.where(size > 0, (s / size) ** 2, 0.0)
    j_part = np.maximum(rest - k_part, 0.0)
    p = tail(ratio(k_part, j_part, strength), strength, df)
    return np.where(s < 0, -1.0, 1.0) * np.maximum(normal_of_tail(0.5 * p), 0.0)


def strength_of(
    problem: Problem, solution: Solution, psi: int, space: np.ndarray, d: np.ndarray
) -> np.ndarray:
    """r, shape (S,): the square of D in units of its own covariance given the residual.

    ``space`` orthonormal basis of the whitened nuisance columns, shape (S, N, k); ``d`` the whitened
    column of psi with its projection on them taken off. ``SURE`` or more where no measured condition
    moves it.
    """
    s, n = d.shape
    moves = _moves(problem, solution, psi)
    if solution.covariance.ndim == 2 and all(source.individual for source, _, _ in moves):
        v = solution.covariance
        own, shared = np.zeros((s, n)), np.zeros((s, n))
        for _, u, along in moves:
            own += u**2
            shared += u * along
        with np.errstate(divide="ignore", invalid="ignore"):
            omega = np.where(np.isfinite(v), np.maximum(own - shared**2 / v, 0.0) / v, 0.0)
        # a run without a say in D's covariance is as sure as the surest that can be told
        floor = np.maximum(1e-12 * omega.max(axis=1, keepdims=True), 1e-300)
        weight = 1.0 / np.sqrt(np.maximum(omega, floor))
        weight = np.where(np.isfinite(v), weight, 0.0)
        x, y = space * weight[:, :, None], d * weight
        fitted = np.einsum("snk,sk->sn", x, _coefficients(x, y))
        r = np.einsum("sn,sn->s", y - fitted, y - fitted)
        return np.where(omega.max(axis=1) > 0, np.minimum(r, 2 * SURE), 2 * SURE)
    return _correlated(solution, moves, space, d)


def _coefficients(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Least squares of y, shape (S, N), on the columns of x, shape (S, N, k)."""
    if not x.shape[2]:
        return np.zeros((len(x), 0))
    # a value far from the fit, where the law is not finite, is ruled out by its objective
    x, y = np.where(np.isfinite(x), x, 0.0), np.where(np.isfinite(y), y, 0.0)
    norms = np.sqrt(np.einsum("snk,snk->sk", x, x))
    norms = np.where(norms > 0, norms, 1.0)
    pinv = np.linalg.pinv(x / norms[:, None, :], rcond=RANK)
    return np.asarray(np.einsum("skn,sn->sk", pinv, y) / norms)


def _moves(
    problem: Problem, solution: Solution, psi: int
) -> list[tuple[ErrorSource, np.ndarray, np.ndarray]]:
    """For each measured source what one standard error of it does to the column of psi, less its
    regression on the nuisance columns, and to the prediction, shape (S, N) each."""
    pred = problem.predictor.predict(
        solution.theta, solution.conditions, conditions_too=True, both=True
    )
    assert pred.by_conditions is not None
    assert pred.by_both is not None
    jac = solution.jacobian
    beta = _coefficients(np.delete(jac, psi, axis=2), jac[:, :, psi])
    contrast = np.insert(-beta, psi, 1.0, axis=1)
    out = []
    for source in problem.measured:
        j = source.target
        sd = source.sd(solution.conditions[..., j])
        turn = np.einsum("snp,sp->sn", pred.by_both[:, :, j, :], contrast)
        turn = np.where(np.isfinite(turn), turn, 0.0)
        out.append((source, sd * turn, sd * pred.by_conditions[..., j]))
    return out


def _correlated(
    solution: Solution,
    moves: list[tuple[ErrorSource, np.ndarray, np.ndarray]],
    space: np.ndarray,
    d: np.ndarray,
) -> np.ndarray:
    """The same with errors that several observations share, so that D's covariance is a matrix."""
    s, n = d.shape
    own, shared = np.zeros((s, n, n)), np.zeros((s, n, n))
    for source, u, along in moves:
        same = (source.groups[:, None] == source.groups[None, :]).astype(float)
        own += u[:, :, None] * u[:, None, :] * same
        shared += u[:, :, None] * along[:, None, :] * same
    white = Whitener(solution.covariance)
    # L^-1 (own - shared V^-1 shared') L^-T
    left = white.matrix(own)
    own = white.matrix(np.swapaxes(left, 1, 2))
    half = white.matrix(np.swapaxes(white.matrix(shared), 1, 2))
    omega = own - np.swapaxes(half, 1, 2) @ half
    size = np.einsum("snn->s", omega) / n
    sure = ~(size > 0) | ~np.isfinite(size)
    omega = np.where(sure[:, None, None], np.eye(n), omega)
    size = np.where(sure, 1.0, size)
    # what lies along the nuisance columns is no evidence; the least that can be told is the floor
    omega = omega + (1e4 * size)[:, None, None] * (space @ np.swapaxes(space, 1, 2))
    values, vectors = np.linalg.eigh(omega)
    values = np.maximum(values, 1e-10 * size[:, None])
    seen = np.einsum("snk,sn->sk", vectors, d)
    return np.where(sure, 2 * SURE, np.minimum((seen**2 / values).sum(axis=1), 2 * SURE))
