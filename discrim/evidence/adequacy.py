"""Does a law fit at all: lack of fit against replicates and against the stated errors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.distributions import chi2_upper, f_upper
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale


@dataclass(frozen=True, slots=True)
class LackOfFit:
    """F of the lack-of-fit sum of squares against pure error (Draper & Smith, Applied Regression
    Analysis, Wiley, ch. 2)."""

    statistic: float
    df: tuple[int, int]
    p: float


def lack_of_fit(fit: Fit) -> LackOfFit | None:
    """None when there are no replicates, or no degrees of freedom left beside them."""
    groups = fit.data.replicate_of
    if groups is None:
        return None
    n, p = fit.n, fit.p
    y = fit.data.y
    v = fit.variances
    weight = 1.0 / np.sqrt(v)
    pure = 0.0
    labels = np.unique(groups)
    for g in labels:
        rows = groups == g
        if rows.sum() > 1:
            w = weight[rows] ** 2
            mean = (w * y[rows]).sum() / w.sum()
            pure += float((w * (y[rows] - mean) ** 2).sum())
    df_pure = n - len(labels)
    df_lack = len(labels) - p
    if df_pure < 1 or df_lack < 1 or pure <= 0:
        return None
    total = float((((y - fit.values) * weight) ** 2).sum())
    f = max(total - pure, 0.0) / df_lack / (pure / df_pure)
    return LackOfFit(f, (df_lack, df_pure), f_upper(f, df_lack, df_pure))


def objective_p(fit: Fit) -> float | None:
    """Upper tail of Q among chi-squared with N - p degrees of freedom; None when the scale is not
    stated or nothing is left. Very conservative in lockstep: "it fits" is weak evidence there."""
    if fit.data.scale is not Scale.STATED or fit.degrees_of_freedom < 1:
        return None
    return chi2_upper(fit.objective, fit.degrees_of_freedom)
