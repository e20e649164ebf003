"""Linearised standard errors of functions of the constants (law of propagation; GUM, JCGM 100:2008)."""

from __future__ import annotations

import numpy as np

from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale

# singular values below this, relative, are rounding: such directions are not determined
NULL = 1e-14
# share of a gradient along an undetermined direction from which its function is not determined
SHARE = 1e-8


def propagated(fit: Fit, gradients: np.ndarray) -> np.ndarray:
    """Standard errors of functions with ``gradients``, shape (k, p), by the constants; shape (k,).

    From the SVD of the sensitivities in columns of unit length. Infinite for a function that these
    runs do not determine; constants at a bound count as free, as in `standard_errors`.
    """
    jac = fit.jacobian
    k = len(gradients)
    norms = np.sqrt((jac**2).sum(axis=0))
    use = norms > 0
    if not np.isfinite(jac).all():
        return np.full(k, np.inf)
    wanted = gradients[:, use] / norms[use]
    size = np.sqrt((wanted**2).sum(axis=1))
    size = np.where(size > 0, size, 1.0)
    lost = (gradients[:, ~use] != 0).any(axis=1)
    if not use.any():
        return np.where(lost, np.inf, 0.0)
    _, s, vt = np.linalg.svd(jac[:, use] / norms[use], full_matrices=True)
    s = np.r_[s, np.zeros(len(vt) - len(s))]  # fewer runs than constants
    parts = wanted @ vt.T
    null = s <= NULL * s[0]
    lost |= (np.abs(parts[:, null]) > SHARE * size[:, None]).any(axis=1)
    variance = ((parts[:, ~null] / s[~null]) ** 2).sum(axis=1)
    estimated = fit.data.scale is Scale.ESTIMATED and not fit.problem.with_conditions
    if estimated:  # the whitened residuals still carry the scale; nan without degrees of freedom
        variance = variance * fit.scale2
    se = np.sqrt(variance)
    return np.where(lost | ~np.isfinite(se), np.inf, se)
