"""The distribution of a weighted sum of chi-squared variables, each with one degree of freedom."""

from __future__ import annotations

import numpy as np
from scipy import special

# weights below this fraction of the largest are counted by their mean alone
SMALL = 1e-3
TERMS = 6000


def weighted_chi2_upper(x: float, weights: np.ndarray) -> float:
    """P(sum w_j X_j > x), X_j independent chi-squared with one degree of freedom, w_j >= 0.

    The mixture of chi-squared distributions of Ruben (Ann. Math. Stat. 33 (1962) 542, from memory),
    with the scale at the least weight, so that every coefficient is positive and what the series
    leaves out is known.
    """
    w = np.asarray(weights, float)
    largest = float(w.max(initial=0.0))
    if not largest > 0:
        return 1.0 if x < 0 else 0.0
    x = x - float(w[w < SMALL * largest].sum())
    w = w[w >= SMALL * largest]
    if x <= 0:
        return 1.0
    n, beta = len(w), float(w.min())
    y = x / beta
    ratio = 1.0 - beta / w
    # beyond this many degrees of freedom every term of the mixture is above y for certain
    count = int(min(TERMS, 60 + 0.5 * y + 6.0 * np.sqrt(y)))
    powers = np.cumprod(np.broadcast_to(ratio, (count, n)), axis=0).sum(axis=1)  # g_1, g_2, ..
    c = np.zeros(count)
    c[0] = float(np.prod(np.sqrt(beta / w)))
    for k in range(1, count):
        c[k] = powers[:k][::-1] @ c[:k] / (2 * k)
    tails = special.chdtrc(n + 2.0 * np.arange(count), y)
    rest = max(0.0, 1.0 - float(c.sum()))
    return float(min(1.0, c @ tails + rest))
