"""Errors of several responses that the study does not state, estimated from the fits of a law.

With V = U + K, U the unknown part (a variance for each response, or one covariance between the responses
of a run) and K all that is stated, two steps alternate until they agree: the law is fitted with U
held, and U is taken from what that fit leaves.

A variance for each response: s_r^2 is where e_r' V_rr^-1 e_r equals its expectation
nu_r = n_r - tr(V_rr^-1 G_r (G' V^-1 G)^-1 G_r'). With exact conditions that is
s_r^2 = RSS_r / (n_r - sum of the leverages of that response), the equations of restricted maximum
likelihood (Patterson & Thompson, Biometrika 58 (1971) 545; from memory), and for one response the
usual RSS/(N - p).

A covariance between responses: S = E'E/n, E the residuals of n runs by R responses. The constants at
which the steps agree make |E'E| stationary, the determinant criterion of Box & Draper, Biometrika 52
(1965) 355. For tests it is then taken with nu = n - q degrees of freedom, q the most constants that
show in one response: |E'E| is made small by far more than p/R of them would. Responses missing in
some runs, or errors of conditions beside U, are averaged over (expectation-maximisation; Dempster,
Laird & Rubin, J. R. Stat. Soc. B 39 (1977) 1; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from discrim.fit.covariance import Whitener
from discrim.fit.engine import solve
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale
from discrim.fit.problem import Problem, Solution
from discrim.reactor.model import Predictor

ROUNDS = 200
CLOSE = 1e-7  # change of U in one round, relative to its standard deviations
OTHER_MINIMUM = 1e-3  # of the criterion: less apart are two ways to one minimum
RANK = 1e-10
# Of a test that rests on weights that were estimated: how much more its variance grows where several
# responses share in it than the t reference of one of them allows for. Weights estimated from nu
# residuals make the variance of a weighted mean too small by 4 w (1 - w)/nu (Meier, Biometrics 9 (1953)
# 59; from memory); t allows for (z^2 + 1)/(2 nu), 1.85/nu at one-sided 5 %.
SHARING = 4.0 / 1.853


@dataclass(frozen=True, slots=True, eq=False)
class Unknown:
    """Which errors of the observations are not known.

    Attributes
    ----------
    response, run : shape (N,) of each observation
    open : shape (R,) True for responses whose variance is to be estimated
    together : the errors of the responses of one run may be correlated (then all are open)
    least : shape (R,) sd below which none is estimated (rounding of the values)
    df : shape (R,) degrees of freedom of the errors of the others, inf where they are stated
    """

    response: np.ndarray
    run: np.ndarray
    open: np.ndarray
    together: bool
    least: np.ndarray
    df: np.ndarray

    @property
    def count(self) -> int:
        return len(self.open)


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """The errors of R responses, estimated with one law.

    Attributes
    ----------
    matrix : shape (R, R) covariance of the responses of one run; zero where the errors are stated
    held : shape (R, R) what tests and intervals are to use: ``matrix``, enlarged for having been
        estimated where the covariance is unknown
    df : shape (R,) degrees of freedom of each variance; inf where it is stated
    reference_df : of the t reference of a test that rests on ``held``
    criterion : -2 ln L without its constant, at the estimate; to be minimised over laws and starts
    theta : shape (p,) the constants at which fit and covariance agree
    on_least : shape (R,) True where the estimate ended at the least sd
    minima : distinct values of the criterion that the starts led to, ascending
    """

    matrix: np.ndarray
    held: np.ndarray
    df: np.ndarray
    reference_df: float
    criterion: float
    theta: np.ndarray
    converged: bool
    on_least: np.ndarray
    minima: tuple[float, ...] = ()

    @property
    def enough(self) -> bool:
        """Whether anything was left to estimate from."""
        return bool((self.df > 0).all()) and self.reference_df > 0


def first_guess(y: np.ndarray, unknown: Unknown) -> np.ndarray:
    """Variances to begin with, shape (R, R): 5 % of the typical size of each response."""
    out = np.zeros((unknown.count, unknown.count))
    for r in np.flatnonzero(unknown.open):
        mine = y[..., unknown.response == r]
        mine = mine[np.isfinite(mine)]
        size = 0.05 * float(np.sqrt(np.mean(mine**2))) if len(mine) else 0.0
        out[r, r] = max(size, unknown.least[r], 1e-150) ** 2
    return out


def with_covariance(
    data: Measurements, unknown: Unknown, matrix: np.ndarray, df: float
) -> Measurements:
    """``data`` (its observations with the stated errors only), the others as in ``matrix``."""
    return replace(
        data,
        sources=(*data.sources, *_sources(unknown, matrix)),
        scale=Scale.REPLICATES,
        scale_df=df,
        patterns=_patterns(unknown),
    )


def _patterns(unknown: Unknown) -> tuple[np.ndarray, ...]:
    """Where V holds each unknown variance, shape (N,), or covariance, shape (N, N)."""
    of = [(unknown.response == r).astype(float) for r in range(unknown.count)]
    if not unknown.together:
        return tuple(of[r] for r in np.flatnonzero(unknown.open))
    same = unknown.run[:, None] == unknown.run[None, :]
    out = []
    for r in range(unknown.count):
        for k in range(r + 1):
            block = of[r][:, None] * of[k][None, :]
            out.append(np.where(same, np.maximum(block, block.T), 0.0))
    return tuple(out)


def _sources(unknown: Unknown, matrix: np.ndarray) -> tuple[ErrorSource, ...]:
    """U as independent sources; a covariance by signed loadings, R sources shared within each run."""
    n = len(unknown.response)
    zero = np.zeros(n)
    if not unknown.together:
        sd = np.sqrt(np.diag(matrix))[unknown.response]
        return (ErrorSource(OBSERVATION, zero, sd, None, None, np.arange(n), True),)
    loadings = np.linalg.cholesky(matrix)
    alone = len(np.unique(unknown.run)) == n
    return tuple(
        ErrorSource(
            OBSERVATION, zero, loadings[unknown.response, k], None, None, unknown.run, alone
        )
        for k in range(unknown.count)
    )


def estimate(
    predictor: Predictor,
    data: Measurements,
    unknown: Unknown,
    *,
    seed: int = 1,
    several: bool = False,
) -> Estimate | None:
    """Fit and covariance in agreement; None when the law could not be fitted.

    ``data``: the measurements with the stated errors only, origins of condition errors resolved.
    ``several``: from other first guesses as well (each response in turn weighted up tenfold), since
    a determinant can have several minima; the lowest is taken.
    """
    first = first_guess(data.y, unknown)
    guesses = [first]
    if several:
        for r in np.flatnonzero(unknown.open):
            other = first.copy()
            other[r, r] = max(other[r, r] * 0.01, unknown.least[r] ** 2)
            guesses.append(other)
    found = [e for g in guesses if (e := _agreed(predictor, data, unknown, g, seed)) is not None]
    if not found:
        return None
    found.sort(key=lambda e: e.criterion)
    minima: list[float] = []
    for e in found:
        if not minima or e.criterion - minima[-1] > OTHER_MINIMUM:
            minima.append(e.criterion)
    return replace(found[0], minima=tuple(minima))


def _agreed(
    predictor: Predictor, data: Measurements, unknown: Unknown, guess: np.ndarray, seed: int
) -> Estimate | None:
    """The alternation from one first guess."""
    matrix = guess
    begin = fit(predictor, with_covariance(data, unknown, matrix, 1.0), seed=seed)
    if not begin.ok:
        return None
    sol = begin.solution
    converged = False
    freedom = np.zeros(unknown.count)
    for _ in range(ROUNDS):
        new, freedom = _updated(sol, matrix, data, unknown)
        size = np.sqrt(np.maximum(np.diag(new), np.diag(matrix)))
        scale = np.where(size > 0, size, 1.0)
        change = float(np.max(np.abs(new - matrix) / np.outer(scale, scale)))
        matrix = new
        problem = Problem(predictor, with_covariance(data, unknown, matrix, 1.0))
        again = solve(problem, sol.theta, conditions=sol.conditions)
        if not np.isfinite(again.objective[0]):
            return None
        sol = again
        if change < CLOSE:
            converged = True
            break
    return _record(sol, matrix, freedom, unknown, converged)


def _updated(
    sol: Solution, matrix: np.ndarray, data: Measurements, unknown: Unknown
) -> tuple[np.ndarray, np.ndarray]:
    """U from what a fit leaves, and the degrees of freedom of each response."""
    e = sol.error[0]
    cov = sol.covariance[0]
    space = _space(sol)
    if unknown.together:
        return _together(e, cov, matrix, data, unknown, _most_in_one(sol, unknown))
    out = np.zeros_like(matrix)
    freedom = unknown.df.copy()
    for r in np.flatnonzero(unknown.open):
        rows = np.flatnonzero(unknown.response == r)
        m = space[rows]
        if cov.ndim == 1:
            k, vectors = np.maximum(cov[rows] - matrix[r, r], 0.0), None
            own = (m**2 / cov[rows, None]).sum()
            e2 = e[rows] ** 2
        else:
            block = cov[np.ix_(rows, rows)]
            k, vectors = np.linalg.eigh(block - matrix[r, r] * np.eye(len(rows)))
            k = np.maximum(k, 0.0)
            own = float(np.einsum("ik,ik->", m, np.linalg.solve(block, m)))
            e2 = (vectors.T @ e[rows]) ** 2
        freedom[r] = len(rows) - own
        out[r, r] = max(_moment(e2, k, freedom[r]), unknown.least[r] ** 2)
    return out, freedom


def _moment(e2: np.ndarray, k: np.ndarray, freedom: float) -> float:
    """s^2 >= 0 with sum of e2/(k + s^2) = ``freedom`` (0 where the stated errors explain it all)."""
    if freedom <= 1e-6 or not e2.any():
        return 0.0
    if not k.any():
        return float(e2.sum() / freedom)
    low, high = 0.0, float(e2.sum() / freedom)
    with np.errstate(divide="ignore", invalid="ignore"):
        if np.where(e2 > 0, e2 / np.maximum(k, 1e-300), 0.0).sum() <= freedom:
            return 0.0
    for _ in range(100):
        middle = 0.5 * (low + high)
        if (e2 / np.maximum(k + middle, 1e-300)).sum() > freedom:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


def _together(
    e: np.ndarray,
    cov: np.ndarray,
    matrix: np.ndarray,
    data: Measurements,
    unknown: Unknown,
    rank: int,
) -> tuple[np.ndarray, np.ndarray]:
    """S = (1/n) sum over runs of E[u u'], u the part of each run's residuals that is unknown."""
    r = unknown.count
    runs, of_run = np.unique(unknown.run, return_inverse=True)
    n = len(runs)
    freedom = np.full(r, float(min(np.bincount(unknown.response, minlength=r)) - rank))
    if len(e) == n * r and data.exact_conditions:
        table = np.zeros((n, r))
        table[of_run, unknown.response] = e
        return _above(table.T @ table / n, unknown.least), freedom
    full = np.diag(cov) if cov.ndim == 1 else cov
    inverse = np.linalg.inv(full)
    link = np.zeros((n, r, len(e)))
    link[of_run, :, np.arange(len(e))] = matrix[:, unknown.response].T
    u = link @ (inverse @ e)
    spread = n * matrix - np.einsum("nrj,jk,nsk->rs", link, inverse, link, optimize=True)
    return _above((u.T @ u + spread) / n, unknown.least), freedom


def _above(matrix: np.ndarray, least: np.ndarray) -> np.ndarray:
    """The covariance with no standard deviation, in any direction, under the least one."""
    size = np.outer(least, least)
    values, vectors = np.linalg.eigh(0.5 * (matrix + matrix.T) / size)
    return np.asarray((vectors * np.maximum(values, 1.0)) @ vectors.T * size)


def _space(sol: Solution) -> np.ndarray:
    """M, shape (N, k), with M M' = G (G' V^-1 G)^-1 G': covariance of the fitted values."""
    g = sol.jacobian[0]
    norms = np.sqrt((g**2).sum(axis=0))
    usable = (norms > 0) & np.isfinite(norms)
    if not usable.any():
        return np.zeros((g.shape[0], 0))
    u, s, _ = np.linalg.svd(g[:, usable] / norms[usable], full_matrices=False)
    return Whitener(sol.covariance).undone(u[None, :, s > RANK * s[0]])[0]


def _most_in_one(sol: Solution, unknown: Unknown) -> int:
    """The most constants, or combinations of them, that the predictions of one response depend on."""
    g = Whitener(sol.covariance).undone(sol.jacobian)[0]
    whole = np.sqrt((g**2).sum(axis=0))
    most = 0
    for r in range(unknown.count):
        mine = g[unknown.response == r]
        norms = np.sqrt((mine**2).sum(axis=0))
        # whitening and undoing it leaves rounding where there is nothing
        usable = (norms > RANK * whole) & np.isfinite(norms)
        if usable.any():
            s = np.linalg.svd(mine[:, usable] / norms[usable], compute_uv=False)
            most = max(most, int((s > RANK * s[0]).sum()))
    return most


def _record(
    sol: Solution, matrix: np.ndarray, freedom: np.ndarray, unknown: Unknown, converged: bool
) -> Estimate:
    cov = sol.covariance[0]
    log_det = float(np.log(cov).sum()) if cov.ndim == 1 else float(np.linalg.slogdet(cov)[1])
    criterion = log_det + float(sol.objective[0])
    if unknown.together:
        r = unknown.count
        nu = float(freedom[0])
        runs = int(min(np.bincount(unknown.response, minlength=r)))
        plain = matrix * runs / nu if nu > 0 else matrix
        larger, df = enlargement(nu, r)
        held = plain * larger if df > 0 else plain  # without freedom it is not used
        on_least = np.diag(matrix) <= unknown.least**2 * (1 + 1e-9)
        values = np.linalg.eigvalsh(matrix / np.outer(unknown.least, unknown.least))
        on_least |= values[0] <= 1 + 1e-9
    else:
        plain = held = matrix
        df = reference_df(freedom)
        on_least = unknown.open & (np.diag(matrix) <= unknown.least**2 * (1 + 1e-9))
    return Estimate(
        plain, held, freedom, df, criterion, sol.theta[0].copy(), converged, np.array(on_least)
    )


def enlargement(nu: float, r: int) -> tuple[float, float]:
    """Factor on a covariance of r responses estimated with nu degrees of freedom, and the df of t.

    A mean of r correlated responses weighted with S is a mean adjusted for r - 1 covariates: its variance
    is understated by (nu - r + 1)/nu, and grows by (nu - 1)/(nu - r) for the adjustment (C. R. Rao's
    analysis of covariance; Anderson, An Introduction to Multivariate Statistical Analysis; from
    memory). Exact for that mean, a guide for others: measured size of a one-sided 5 % test 3.0 to 5.3 %
    with 6 to 20 runs and 2 to 5 responses, constants in one response, in all, or some of each.
    """
    df = nu - r + 1
    if r == 1:
        return 1.0, nu
    if nu <= r:
        return float("inf"), 0.0
    return nu * (nu - 1) / (df * (nu - r)), df


def reference_df(freedom: Sequence[float] | np.ndarray) -> float:
    """Degrees of freedom of t for any test that rests on variances with these degrees of freedom.

    1/df = max over the shares w_r of the responses in the test of sum of (c w - (c - 1) w^2)/nu, with
    c = ``SHARING``: the least favourable test. For one response its own. A guide: measured size of a
    one-sided 5 % test 3.1 to 6.0 % with 6 to 20 runs (7.7 to 8.5 % with the smallest nu alone and 6 runs).
    """
    nu = np.asarray(freedom, float)
    if not (nu > 0).all():
        return 0.0
    nu = nu[np.isfinite(nu)]
    if not len(nu):
        return float("inf")
    if len(nu) == 1:
        return float(nu[0])
    # concave: the shares are where the slopes (c - 2 (c - 1) w)/nu are equal
    low, high = -SHARING / float(nu.min()), SHARING / float(nu.min())
    share = np.zeros(len(nu))
    for _ in range(100):
        slope = 0.5 * (low + high)
        share = np.maximum((SHARING - slope * nu) / (2 * (SHARING - 1)), 0.0)
        low, high = (slope, high) if share.sum() > 1 else (low, slope)
    worst = float(((SHARING * share - (SHARING - 1) * share**2) / nu).sum())
    return 1.0 / max(worst, 1.0 / float(nu.min()))
