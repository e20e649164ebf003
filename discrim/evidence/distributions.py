"""Tails and quantiles of the reference distributions, from scipy.special.

The functions of scipy.stats say the same but take most of a second to import, which is much of the
time of a small study.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy import special

# a standard normal beyond this is not told apart from infinity by its tail in double precision
FAR = 38.0


def normal_quantile(p: float) -> float:
    """z with Phi(z) = p."""
    return float(special.ndtri(p))


def normal_upper(z: Any) -> Any:
    """P(Z > z)."""
    return special.ndtr(-np.asarray(z, float))


def t_quantile(p: float, df: float) -> float:
    """t with P(T <= t) = p; normal for infinite ``df``."""
    return normal_quantile(p) if np.isinf(df) else float(special.stdtrit(df, p))


def t_upper(t: Any, df: float) -> Any:
    """P(T > t); normal for infinite ``df``."""
    t = np.asarray(t, float)
    return normal_upper(t) if np.isinf(df) else special.stdtr(df, -t)


def f_upper(x: float, df1: float, df2: float) -> float:
    """P(F > x)."""
    return float(special.fdtrc(df1, df2, x)) if np.isfinite(x) else 0.0


def f_quantile_upper(p: float, df1: float, df2: float) -> float:
    """x with P(F > x) = p."""
    return float(special.fdtri(df1, df2, 1.0 - p))


def chi2_upper(x: float, df: float) -> float:
    """P(chi-squared > x)."""
    return float(special.chdtrc(df, x)) if np.isfinite(x) else 0.0


def chi2_lower(x: float, df: float) -> float:
    """P(chi-squared <= x)."""
    return float(special.chdtr(df, x)) if np.isfinite(x) else 1.0


def chi2_quantile_upper(p: float, df: float) -> float:
    """x with P(chi-squared > x) = p."""
    return float(special.chdtri(df, p))


def normal_of_tail(p: Any) -> np.ndarray:
    """z with P(Z > z) = p, capped where the tail underflows."""
    with np.errstate(divide="ignore"):
        z = -special.ndtri(np.asarray(p, float))
    return np.clip(z, -FAR, FAR)


def f_tail(x: Any, df1: Any, df2: Any) -> np.ndarray:
    """P(F > x) for arrays, broadcast."""
    return np.asarray(special.fdtrc(df1, df2, x))


def chi2_tail(x: Any, df: Any) -> np.ndarray:
    """P(chi-squared > x) for arrays, broadcast."""
    return np.asarray(special.chdtrc(df, x))
