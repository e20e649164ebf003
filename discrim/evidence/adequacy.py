"""Does a law fit at all: lack of fit against replicates and against the stated errors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.distributions import chi2_lower, chi2_upper, f_upper
from discrim.evidence.residuals import orthonormal
from discrim.fit.covariance import Whitener
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale


@dataclass(frozen=True, slots=True)
class LackOfFit:
    """F of the lack-of-fit sum of squares against pure error (Draper & Smith, Applied Regression
    Analysis, Wiley, ch. 2)."""

    statistic: float
    df: tuple[int, int]
    p: float


@dataclass(frozen=True, slots=True)
class ReplicateScatter:
    """Scatter of replicates against the stated errors: chi-squared with ``df`` degrees of freedom.

    ``ratio`` : by how much replicates scatter more than stated (standard deviations)
    ``p_more``, ``p_less`` : that so much, or so little, scatter is chance
    """

    ratio: float
    df: int
    p_more: float
    p_less: float


def pure_error(fit: Fit) -> tuple[float, int, int] | None:
    """(sum of squares of replicates about their means, its degrees of freedom, number of groups),
    weighted with the V of the fit; None without replicates.

    Errors of conditions and errors that runs share are in V: the means are generalised
    least-squares ones.
    """
    groups = fit.data.replicate_of
    if groups is None or not fit.ok or not np.isfinite(fit.covariance).all():
        return None
    labels, of = np.unique(groups, return_inverse=True)
    df = fit.n - len(labels)
    if df < 1:
        return None
    white = Whitener(fit.covariance[None])
    if not bool(white.ok.all()):
        return None
    each = white.matrix((of.reshape(-1)[:, None] == np.arange(len(labels))).astype(float)[None])[0]
    y = white.vector(fit.data.y[None])[0]
    means = orthonormal(each)
    left = y - means @ (means.T @ y)
    return float(left @ left), df, len(labels)


def lack_of_fit(fit: Fit) -> LackOfFit | None:
    """None when there are no replicates, or no degrees of freedom left beside them."""
    found = pure_error(fit)
    if found is None:
        return None
    pure, df_pure, n_groups = found
    df_lack = n_groups - (fit.n - fit.objective_df)
    if df_lack < 1 or pure <= 0:
        return None
    total = float(fit.residual @ fit.residual)
    f = max(total - pure, 0.0) / df_lack / (pure / df_pure)
    return LackOfFit(f, (df_lack, df_pure), f_upper(f, df_lack, df_pure))


def replicate_scatter(fit: Fit) -> ReplicateScatter | None:
    """None when the errors of the observations are not stated, or there are no replicates."""
    found = pure_error(fit)
    if found is None or fit.data.scale is not Scale.STATED:
        return None
    pure, df, _ = found
    return ReplicateScatter(
        float(np.sqrt(pure / df)), df, chi2_upper(pure, df), chi2_lower(pure, df)
    )


def objective_p(fit: Fit) -> float | None:
    """Upper tail of Q among chi-squared with N - p degrees of freedom, constants on a bound not
    counted in p (`fit.freedom`); None when the scale is not stated or nothing is left. Very
    conservative in lockstep: "it fits" is weak evidence there."""
    if fit.data.scale is not Scale.STATED or fit.objective_df < 1:
        return None
    return chi2_upper(fit.objective, fit.objective_df)
