"""Do the residuals follow something: a condition, a column that is in no law, the order of the runs.

A column that acts on a rate as a whole turns f into f (1 + gamma x). So the residuals are tested
for the direction f x, what the constants of the law (and one factor on all rates) can take up left
out first, because a fit has already used it up. That makes it the extra-sum-of-squares F of an added
variable, exact for a law linear in its constants with normal errors (Draper & Smith, Applied
Regression Analysis, Wiley, ch. 6; from memory), whatever the size of the errors: the scale cancels.
Of numbers their ranks are taken, so that units, pH or concentration, and outlying values do not
matter; of words one factor a group.

Several tests of one law are held together by Holm's procedure (Scand. J. Statist. 6 (1979) 65).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from discrim.evidence.distributions import f_upper
from discrim.evidence.residuals import RANK, Residuals, orthonormal


@dataclass(frozen=True, slots=True)
class Added:
    """F of added directions; ``slope`` the sign of the first one's coefficient."""

    statistic: float
    df: tuple[int, int]
    p: float
    slope: int


def added(of: Residuals, directions: np.ndarray, beside: np.ndarray | None = None) -> Added | None:
    """The F-test of whitened directions, shape (N, q), beside the constants of the law.

    ``beside``, shape (N, b): whitened directions that are fitted in either case. None when the
    directions are taken up already, or no degrees of freedom are left.
    """
    basis = of.basis
    r = of.r
    if beside is not None:
        more = _new(of, basis, beside)
        basis = np.hstack([basis, more])
        r = r - more @ (more.T @ r)
    new = _new(of, basis, directions)
    df = of.n - basis.shape[1] - new.shape[1]
    if new.shape[1] == 0 or df < 1:
        return None
    gain = float(((new.T @ r) ** 2).sum())
    rest = float(r @ r) - gain
    first = directions[:, 0] - basis @ (basis.T @ directions[:, 0])
    slope = int(np.sign(first @ r))
    if rest <= 1e-14 * gain:
        return Added(float("inf"), (new.shape[1], df), 0.0, slope)
    f = (gain / new.shape[1]) / (rest / df)
    return Added(f, (new.shape[1], df), f_upper(f, new.shape[1], df), slope)


def _new(of: Residuals, basis: np.ndarray, x: np.ndarray) -> np.ndarray:
    """An orthonormal basis of what x has outside ``basis``; rounding is nothing."""
    norms = np.sqrt((x**2).sum(axis=0))
    x = x[:, norms > 0] / norms[norms > 0]
    out = x - basis @ (basis.T @ x)
    out = out[:, np.sqrt((out**2).sum(axis=0)) > np.sqrt(RANK)]
    found = orthonormal(out) if out.shape[1] else out
    return found - basis @ (basis.T @ found)


def scores(x: np.ndarray) -> np.ndarray:
    """Ranks of x from -1 to 1, ties in their middle; shape (N,)."""
    _, where, counts = np.unique(x, return_inverse=True, return_counts=True)
    last = np.cumsum(counts)
    middle = (last - 0.5 * (counts - 1))[where.reshape(-1)]
    return np.asarray((2.0 * middle - len(x) - 1.0) / max(len(x) - 1, 1))


def trend(of: Residuals, x: np.ndarray) -> Added | None:
    """Do the residuals, relative to the predictions, rise or fall with x, shape (N,)?"""
    f = of.values
    white = of.white(np.column_stack([f * scores(x), f]))
    return added(of, white[:, :1], white[:, 1:])


def groups(of: Residuals, labels: np.ndarray) -> Added | None:
    """Do the residuals differ between groups (labels of shape (N,)) by more than within them?"""
    f = of.values
    each = [np.where(labels == g, f, 0.0) for g in np.unique(labels)]
    white = of.white(np.column_stack([*each, f]))
    return added(of, white[:, :-1], white[:, -1:])


def holm(p: Sequence[float]) -> list[float]:
    """p-values that hold for all tests together."""
    out = [1.0] * len(p)
    largest = 0.0
    for k, i in enumerate(sorted(range(len(p)), key=lambda i: p[i])):
        largest = max(largest, min(1.0, (len(p) - k) * p[i]))
        out[i] = largest
    return out
