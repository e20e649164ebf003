"""Criteria for rivals on one and the same table: they rank, they never reject.

With stated errors -2 ln L = Q + a constant common to all candidates (ln|V| is left out where V
depends on the law: it rewards laws that are insensitive to noisy conditions). With an unknown
scale and exact conditions -2 ln L = N (ln(2 pi RSS/N) + 1), the variance counted as one constant.
AIC: Akaike, IEEE Trans. Autom. Control 19 (1974) 716; AICc: Hurvich & Tsai, Biometrika 76 (1989)
297; BIC: Schwarz, Ann. Stat. 6 (1978) 461; weights: Burnham & Anderson, Model Selection and
Multimodel Inference, Springer 2002.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, slots=True)
class Criteria:
    """Criteria of one fit, tied to the data they came from.

    ``data`` identifies table and errors; criteria with different ``data`` must not be compared, and
    :func:`weights` refuses to. ``aicc`` is inf when N - k - 1 <= 0.
    """

    data: str
    log_likelihood: float
    k: int
    aic: float
    aicc: float
    bic: float


def criteria(
    *, data: str, n: int, p: int, objective: float, scale_known: bool, exact_conditions: bool = True
) -> Criteria:
    """From Q (stated scale, or s^2 fixed beforehand) or from RSS (unknown scale)."""
    if scale_known:
        minus2 = objective
        k = p
    else:
        if objective <= 0:
            minus2 = float("-inf")
        else:
            minus2 = n * (np.log(2 * np.pi * objective / n) + 1.0)
        k = p + 1
    aic = minus2 + 2 * k
    aicc = aic + 2 * k * (k + 1) / (n - k - 1) if n - k - 1 > 0 else float("inf")
    return Criteria(data, -0.5 * minus2, k, aic, aicc, minus2 + k * np.log(n))


def weights(values: list[Criteria], use: list[bool]) -> list[float]:
    """Akaike weights (from AICc where it is finite for all, else AIC) over the candidates in use.

    Raises ValueError when criteria of different data are mixed.
    """
    chosen = [c for c, u in zip(values, use, strict=True) if u]
    if len({c.data for c in chosen}) > 1:
        raise ValueError("criteria from different tables or errors cannot be compared")
    if not chosen:
        return [0.0] * len(values)
    corrected = all(np.isfinite(c.aicc) for c in chosen)
    numbers = np.array([c.aicc if corrected else c.aic for c in chosen])
    if np.isneginf(numbers).any():
        w = np.isneginf(numbers).astype(float)
    else:
        w = np.exp(-0.5 * (numbers - numbers.min()))
    w = w / w.sum()
    it = iter(w)
    return [float(next(it)) if u else 0.0 for u in use]
