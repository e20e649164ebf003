"""The bars of the calibration: one-sided binomial tests, with Holm's correction over the cells."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy import stats

MARGIN = 0.01  # rates may exceed what was asked for by this much
LEVEL = 0.05  # of all cells of a part together


def too_often(counts: Sequence[int], studies: Sequence[int], bar: float) -> np.ndarray:
    """Which rates are above ``bar``: P(this count or a larger one | bar), adjusted by Holm (Scand. J.
    Stat. 6 (1979) 65), under 5 %. Shape of ``counts``."""
    p = stats.binom.sf(np.asarray(counts) - 1, np.asarray(studies), bar)
    order = np.argsort(p)
    m = len(p)
    stepped = np.maximum.accumulate(p[order] * (m - np.arange(m)))
    adjusted = np.empty(m)
    adjusted[order] = stepped
    return adjusted < LEVEL
