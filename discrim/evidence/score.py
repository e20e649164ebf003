"""The reconciled score test, on which verdicts rest.

For a constant psi with nuisance constants lambda, at the restricted optimum and the reconciled
conditions, with whitened residual r = L^-1 e and sensitivities G = L^-1 df/dtheta,

    S_psi.lambda = g' r,   I_psi.lambda = g' g,   z = g' r / sqrt(g' g),

where g is the column of psi with its projection on the nuisance columns taken off. K = z^2 is
chi-squared with one degree of freedom whether or not the runs identify the constants (Kleibergen,
Econometrica 70 (2002) 1781; 73 (2005) 1103): the sensitivities at the reconciled conditions are
asymptotically independent of the residuals, which those at the printed conditions are not.

Where conditions are measured with stated errors, the rest of the residual says something too, the more
the less the sensitivities are known, and the conditional likelihood ratio (`conditional`) stands in
place of K: the same level, and the power that K loses where the law is far from the truth.

Every form is returned as an equivalent standard normal z, so that p = Phi(-z) one-sided.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.conditional import signed, strength_of
from discrim.evidence.distributions import normal_of_tail, normal_upper, t_upper
from discrim.evidence.unknown_scale import scale_weights
from discrim.evidence.unknown_variances import added_variance
from discrim.fit.covariance import Whitener
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution

# columns whose part outside the nuisance space is smaller than this carry only rounding error
NO_INFORMATION = 1e-9
RANK = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class Score:
    """One score per batch row.

    Attributes
    ----------
    z : shape (S,) equivalent standard normal; nan where it cannot be tested
    raw : shape (S,) the score statistic before any conversion (z, or t)
    information : shape (S,) square root of I_psi.lambda relative to that of psi alone: the fraction
        of the sensitivity that is not in lockstep with the nuisance constants
    df : degrees of freedom of the reference, inf for a normal
    strength : shape (S,) r of the conditional likelihood ratio; None where K alone decides
    """

    z: np.ndarray
    raw: np.ndarray
    information: np.ndarray
    df: float
    strength: np.ndarray | None = None


def basis(columns: np.ndarray) -> np.ndarray:
    """Orthonormal bases of the column spaces, shape (S, N, k); null directions are zero columns."""
    if columns.shape[2] == 0:
        return columns
    norms = np.sqrt(np.einsum("snk,snk->sk", columns, columns))
    usable = (norms > 0) & np.isfinite(norms)
    scaled = np.where(np.isfinite(columns), columns, 0.0) / np.where(usable, norms, 1.0)[:, None, :]
    scaled = np.where(usable[:, None, :], scaled, 0.0)
    u, s, _ = np.linalg.svd(scaled, full_matrices=False)
    keep = s > RANK * np.maximum(s[:, :1], 1e-300)
    return u * keep[:, None, :]


def without(space: np.ndarray, x: np.ndarray) -> np.ndarray:
    """x, shape (S, N), with its projection on the orthonormal ``space`` taken off (twice)."""
    if space.shape[2] == 0:
        return x
    for _ in range(2):
        x = x - np.einsum("snk,sk->sn", space, np.einsum("snk,sn->sk", space, x))
    return x


def to_normal(statistic: np.ndarray, df: float) -> np.ndarray:
    """The standard normal value with the same tail probability as a t value with ``df``."""
    if not np.isfinite(df):
        return statistic
    z = normal_of_tail(np.minimum(t_upper(np.abs(statistic), df), 0.5))
    return np.where(np.isnan(statistic), np.nan, np.sign(statistic) * np.maximum(z, 0.0))


def p_one_sided(z: float) -> float:
    """Upper-tail p-value of a standard normal."""
    return float(normal_upper(z))


def score(
    problem: Problem,
    solution: Solution,
    psi: int,
    *,
    direction: np.ndarray | None = None,
    conditional: bool = True,
) -> Score:
    """Score of constant ``psi`` at the restricted optima in ``solution``.

    ``direction``, shape (S, N) unwhitened change of the predictions, is tested instead of a column
    of the law when given (then ``psi`` is -1 and every constant is a nuisance). ``conditional`` False
    gives K where the conditional likelihood ratio would be used.
    """
    data = problem.data
    jac = solution.jacobian
    if direction is None:
        g = jac[:, :, psi]
        nuisance = np.delete(jac, psi, axis=2)
    else:
        g = Whitener(solution.covariance).vector(direction)
        nuisance = jac
    space = basis(nuisance)
    g_perp = without(space, g)
    size = np.sqrt(np.einsum("sn,sn->s", g_perp, g_perp))
    whole = np.sqrt(np.einsum("sn,sn->s", g, g))
    with np.errstate(divide="ignore", invalid="ignore"):
        information = np.where(whole > 0, size / whole, 0.0)
        s = np.einsum("sn,sn->s", g_perp, solution.residual)
        z = np.where(information > NO_INFORMATION, s / size, 0.0)
    df = np.inf
    n, p_nuisance = data.count, nuisance.shape[2]
    if data.scale is Scale.REPLICATES:
        df = float(data.scale_df)
        if data.patterns and problem.measured and direction is None:
            extra = added_variance(problem, solution, [psi])[:, 0, 0]
            with np.errstate(divide="ignore", invalid="ignore"):
                z = np.where(information > NO_INFORMATION, s / np.sqrt(size**2 + extra), 0.0)
    elif data.scale is Scale.ESTIMATED and not problem.with_conditions:
        # F = (K/1)/((N - p_l - K)/(N - p)) with the scale from the restricted fit
        df = float(n - p_nuisance - 1)
        if df <= 0:
            z = np.full_like(z, np.nan)
        else:
            rest = solution.objective - z**2
            rest = np.where(rest > 1e-15 * solution.objective, rest, np.nan)
            with np.errstate(divide="ignore", invalid="ignore"):
                t = z / np.sqrt(rest / df)
            # an exact fit once psi is free: as decisive as rounding allows
            t = np.where(np.isnan(rest) & (z != 0), np.sign(z) * 1e8, t)
            z = np.where((z == 0) & np.isnan(t), 0.0, t)
    elif problem.joint_scale and direction is None:
        df_rest = n - p_nuisance
        c = scale_weights(problem, solution, [psi])[:, 0]
        top = s + c * (solution.objective - df_rest)
        with np.errstate(divide="ignore", invalid="ignore"):
            z = top / np.sqrt(size**2 + 2.0 * max(df_rest, 1) * c**2)
    raw = np.where(np.isfinite(solution.objective), z, np.nan)
    if conditional and uses_strength(problem) and direction is None:
        off = without(space, solution.residual)
        rest = np.einsum("sn,sn->s", off, off)
        counted = n - np.einsum("snk,snk->s", space, space).round()
        r = strength_of(problem, solution, psi, space, g_perp)
        usable = np.isfinite(raw) & (information > NO_INFORMATION) & (counted >= 1)
        z = np.where(usable, signed(s, size, rest, r, np.maximum(counted, 1.0)), raw)
        return Score(z, raw, information, df, r)
    return Score(to_normal(raw, df), raw, information, df)


def uses_strength(problem: Problem) -> bool:
    """Whether the conditional likelihood ratio decides: measured conditions, all errors stated.

    With the variance of the observations estimated the objective carries no evidence of its own.
    """
    return bool(problem.measured) and problem.data.scale is Scale.STATED
