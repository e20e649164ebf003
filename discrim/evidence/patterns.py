"""Patterns of the residuals among themselves: signs in a row, uneven scatter, odd shape.

The reference tables of these tests are for independent numbers, and residuals of a fit are not
independent: p constants have been spent. So the references are made here: normal errors, the same
sensitivities projected out, the same statistic (Dufour, Farhat, Gardiol & Khalaf, Econometrics J. 1
(1998) C154; Dufour, Khalaf, Bernard & Genest, J. Econometrics 122 (2004) 317; from memory). The
statistics do not depend on the size of the errors, so for a law linear in its constants the p-values
are exact whatever N, up to the number of draws.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from discrim.evidence.residuals import Residuals

DRAWS = 999
FEWEST_DRAWS, MOST_NUMBERS = 199, 4_000_000  # of a long table
FEWEST = 8  # runs: below this no shape or scatter can be told
FEWEST_LEFT = 4  # degrees of freedom


@dataclass(frozen=True, slots=True)
class Pattern:
    """A statistic with its Monte Carlo p-value; ``slope`` the sign of a trend of the scatter."""

    statistic: float
    p: float
    expected: float
    slope: int = 0


def draws(n: int, seed: int, count: int = DRAWS) -> np.ndarray:
    """Standard normal numbers, shape (count, n), the same for all laws of a study; fewer rows where n
    is very large."""
    if count * n > MOST_NUMBERS:
        count = max(FEWEST_DRAWS, MOST_NUMBERS // n)
    return np.random.default_rng([seed, n]).standard_normal((count, n))


def projected(of: Residuals, normal: np.ndarray) -> np.ndarray:
    """What residuals would be if the law were true, whitened; shape of ``normal``."""
    return normal - (normal @ of.basis) @ of.basis.T


def as_observed(of: Residuals, r: np.ndarray) -> np.ndarray:
    """Whitened residuals, shape (N,) or (S, N), in the units of the observations."""
    return r * of.root if of.root.ndim == 1 else r @ of.root.T


def count_runs(signs: np.ndarray) -> np.ndarray:
    """Number of unbroken rows of one sign along the last axis (Wald & Wolfowitz, Ann. Math. Stat. 11
    (1940) 147)."""
    up = signs > 0
    return 1 + np.asarray(np.count_nonzero(up[..., 1:] != up[..., :-1], axis=-1))


def runs_of_signs(of: Residuals, order: np.ndarray, null: np.ndarray) -> Pattern | None:
    """Too few changes of sign when the observations stand in ``order``, shape (N,)?

    ``null`` : shape (S, N), drawn residuals from :func:`projected`.
    """
    if of.n < FEWEST or of.df < FEWEST_LEFT:
        return None
    seen = int(count_runs(as_observed(of, of.r)[order]))
    drawn = count_runs(as_observed(of, null)[:, order])
    return Pattern(float(seen), _share(drawn <= seen), float(drawn.mean()))


def explained(size: np.ndarray, z: np.ndarray) -> np.ndarray:
    """N R^2 of the sizes of residuals, shape (..., N), on a constant and z.

    For their squares this is the statistic of Breusch & Pagan (Econometrica 47 (1979) 1287) as
    studentised by Koenker (J. Econometrics 17 (1981) 107).
    """
    n = size.shape[-1]
    z = z - z.mean()
    c = size - size.mean(axis=-1, keepdims=True)
    total = (c**2).sum(axis=-1) * float(z @ z)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.where(total > 0, n * (c @ z) ** 2 / total, 0.0))


def equal_variance(of: Residuals, z: np.ndarray, null: np.ndarray) -> Pattern | None:
    """Is the scatter, in stated errors, the same at all z, shape (N,)?

    Of the absolute residuals, as by Glejser (J. Am. Stat. Assoc. 64 (1969) 316): of squares a few
    large ones are all that counts. At 1 %, 24 runs and a scatter that grows in proportion, squares
    find it in 20 % of simulated tables, absolute values in 29 %.
    """
    if of.n < FEWEST or of.df < FEWEST_LEFT or float(np.ptp(z)) == 0.0:
        return None
    size = np.abs(of.r)
    seen = float(explained(size, z))
    drawn = explained(np.abs(null), z)
    slope = int(np.sign((size - size.mean()) @ (z - z.mean())))
    return Pattern(seen, _share(drawn >= seen), float(drawn.mean()), slope)


def anderson_darling(r: np.ndarray) -> np.ndarray:
    """A^2 of normality with mean and variance estimated, along the last axis (Anderson & Darling,
    J. Am. Stat. Assoc. 49 (1954) 765; Stephens, ibid. 69 (1974) 730)."""
    n = r.shape[-1]
    u = r - r.mean(axis=-1, keepdims=True)
    u = np.sort(u / u.std(axis=-1, ddof=1, keepdims=True), axis=-1)
    weight = (2.0 * np.arange(1, n + 1) - 1.0) / n
    tails = special.log_ndtr(u) + special.log_ndtr(-u)[..., ::-1]
    return np.asarray(-n - (weight * tails).sum(axis=-1))


def normality(of: Residuals, null: np.ndarray) -> Pattern | None:
    """Do the residuals look like normal errors?"""
    if of.n < FEWEST or of.df < FEWEST_LEFT:
        return None
    if float(np.ptp(of.r)) == 0.0:
        return None
    seen = float(anderson_darling(of.r))
    drawn = anderson_darling(null)
    return Pattern(seen, _share(drawn >= seen), float(drawn.mean()))


def _share(as_far: np.ndarray) -> float:
    """A Monte Carlo p-value (Barnard, J. R. Stat. Soc. B 25 (1963) 294)."""
    return float((1 + np.count_nonzero(as_far)) / (1 + len(as_far)))
