"""Covariances of residuals, and whitening with them, for a batch of S cases.

A covariance is either a plain array of variances, shape (S, N), when no error is shared by two
observations, or a full matrix, shape (S, N, N). An infinite variance, every covariance with it zero,
says that the observation does not count: whitened it is zero.
"""

from __future__ import annotations

import numpy as np

from discrim.fit.measurements import ErrorSource


def add_source(
    total: np.ndarray, src: ErrorSource, spread: np.ndarray, sensitivity: np.ndarray | None
) -> np.ndarray:
    """Add one source to a covariance, in place; returns it.

    ``spread`` shape (N,) or (S, N) standard deviations; ``sensitivity`` shape (S, N), None for 1.
    """
    u = spread if sensitivity is None else spread * sensitivity
    if total.ndim == 2:
        total += u**2
    elif src.individual:
        idx = np.arange(u.shape[-1])
        total[:, idx, idx] += u**2
    else:
        same = src.groups[:, None] == src.groups[None, :]
        u = np.atleast_2d(u)
        total += u[:, :, None] * u[:, None, :] * same
    return total


class Whitener:
    """L^-1 applied to vectors and matrices, where V = L L'."""

    def __init__(self, covariance: np.ndarray) -> None:
        self.full = covariance.ndim == 3
        self.ok = np.ones(covariance.shape[0], bool)
        if not self.full:
            with np.errstate(divide="ignore", invalid="ignore"):
                self._inv = 1.0 / np.sqrt(covariance)
            return
        cov = covariance
        variances = np.diagonal(cov, axis1=1, axis2=2)
        silent = np.isinf(variances)
        if silent.any():
            cov = np.where(silent[:, :, None] & np.eye(cov.shape[-1], dtype=bool), 1.0, cov)
        finite = np.isfinite(cov).all(axis=(1, 2))
        if not finite.all():
            cov = np.where(finite[:, None, None], cov, np.eye(cov.shape[-1]))
            self.ok = finite
        try:
            chol = np.linalg.cholesky(cov)
        except np.linalg.LinAlgError:
            chol = np.empty_like(cov)
            for k, v in enumerate(cov):
                chol[k], good = _cholesky(v)
                self.ok[k] &= good
        try:
            self._inverse = np.linalg.inv(chol)
        except np.linalg.LinAlgError:
            # variances so far apart that a pivot underflows: a trial step far from any fit
            self._inverse = np.empty_like(chol)
            for k, v in enumerate(chol):
                self._inverse[k], good = _inverted(v)
                self.ok[k] &= good
        if silent.any():
            self._inverse = np.where(silent[:, :, None], 0.0, self._inverse)

    def vector(self, x: np.ndarray) -> np.ndarray:
        """Shape (S, N)."""
        if not self.full:
            return x * self._inv
        return (self._inverse @ x[..., None])[..., 0]

    def matrix(self, x: np.ndarray) -> np.ndarray:
        """Shape (S, N, k)."""
        if not self.full:
            return x * self._inv[..., None]
        return self._inverse @ x

    def transposed(self, x: np.ndarray) -> np.ndarray:
        """L^-T x for x of shape (S, N): turns a whitened residual into V^-1 e."""
        if not self.full:
            return x * self._inv
        return (x[..., None, :] @ self._inverse)[..., 0, :]

    def undone(self, x: np.ndarray) -> np.ndarray:
        """L x for x of shape (S, N, k)."""
        if not self.full:
            return x / self._inv[..., None]
        return np.linalg.solve(self._inverse, x)

    def transposed_matrix(self, x: np.ndarray) -> np.ndarray:
        """L^-T x for x of shape (S, N, k)."""
        if not self.full:
            return x * self._inv[..., None]
        return np.swapaxes(self._inverse, 1, 2) @ x


def not_counting(covariance: np.ndarray, absent: np.ndarray) -> np.ndarray:
    """A covariance in which the observations marked in ``absent``, shape (S, N), do not count."""
    if covariance.ndim == 2:
        return np.where(absent, np.inf, covariance)
    gone = absent[:, :, None] | absent[:, None, :]
    own = absent[:, :, None] & np.eye(absent.shape[1], dtype=bool)
    return np.where(own, np.inf, np.where(gone, 0.0, covariance))


def _cholesky(v: np.ndarray) -> tuple[np.ndarray, bool]:
    try:
        return np.linalg.cholesky(v), True
    except np.linalg.LinAlgError:
        # singular to rounding: an error shared by all runs and nothing else
        jitter = 1e-12 * float(np.trace(v)) / len(v)
        try:
            return np.linalg.cholesky(v + jitter * np.eye(len(v))), True
        except np.linalg.LinAlgError:
            return np.eye(len(v)), False


def _inverted(v: np.ndarray) -> tuple[np.ndarray, bool]:
    try:
        return np.linalg.inv(v), True
    except np.linalg.LinAlgError:
        return np.eye(len(v)), False
