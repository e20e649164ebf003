"""What the residuals of one fit say: how far each run lies off, and how much it pulls.

Everything is done on whitened quantities, r = R^-1 e and G = R^-1 df/dtheta with V = R R, so that
errors in the conditions and errors shared by runs are allowed for. R is the symmetric root: with
another the residuals of runs that share an error would depend on the order of the table. With
M = I - Q Q' (Q an orthonormal basis of the columns of G, by SVD) and w_i = R^-1 u_i (u_i the unit
vector of run i), the shift of run i alone that the other runs ask for is
delta_i = w_i' r / (w_i' M w_i). For a diagonal V these are the usual leverages, studentised residuals
and Cook's distances (Cook & Weisberg, Residuals and Influence in Regression, Chapman & Hall 1982, ch. 2
and 3; from memory); for a full V they are those of the generalised least-squares fit with run i left
out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.evidence.distributions import t_upper
from discrim.fit.covariance import Whitener
from discrim.fit.fit import Fit

# singular values of the column-scaled sensitivities below this fraction count as rounding
RANK = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class Residuals:
    """The whitened residuals of a fit and the space that its constants fill.

    Attributes
    ----------
    r : shape (N,) whitened, without what lies along the sensitivities
    basis : shape (N, k) orthonormal basis of the sensitivities to the constants off their bounds
    values : shape (N,) predictions, in the units of the observations
    unit : R^-1, shape (N,) where V is diagonal, else (N, N); its column i is w_i
    root : shape (N,) or (N, N), R: a whitened residual times this is one in the units observed
    """

    r: np.ndarray
    basis: np.ndarray
    values: np.ndarray
    unit: np.ndarray
    root: np.ndarray

    @property
    def n(self) -> int:
        return len(self.r)

    @property
    def df(self) -> int:
        """N less the number of constants (or combinations of them) that were fitted."""
        return self.n - self.basis.shape[1]

    def outside(self, x: np.ndarray) -> np.ndarray:
        """The part of whitened vectors, shape (N,) or (N, q), that the constants cannot take up."""
        return x - self.basis @ (self.basis.T @ x)

    def white(self, x: np.ndarray) -> np.ndarray:
        """Directions in the units of the observations, shape (N, q), whitened."""
        return x * self.unit[:, None] if self.unit.ndim == 1 else self.unit @ x


def orthonormal(columns: np.ndarray) -> np.ndarray:
    """An orthonormal basis, shape (N, rank), of the space of columns, shape (N, k)."""
    norms = np.sqrt((columns**2).sum(axis=0))
    use = np.isfinite(norms) & (norms > 0)
    if not use.any():
        return np.zeros((len(columns), 0))
    u, s, _ = np.linalg.svd(columns[:, use] / norms[use], full_matrices=False)
    return np.asarray(u[:, s > RANK * s[0]])


def residuals_of(fit: Fit) -> Residuals | None:
    """None where the fit failed, or as many constants as runs leave no residual to look at."""
    if not fit.ok:
        return None
    free = fit.jacobian[:, ~fit.at_bound]
    return whitened(fit.residual, free, fit.values, fit.covariance)


def whitened(
    residual: np.ndarray, jacobian: np.ndarray, values: np.ndarray, covariance: np.ndarray
) -> Residuals | None:
    """From a residual, shape (N,), and sensitivities to the constants off their bounds, shape (N, k),
    as a fit whitens them (by the triangular root L of V), and V, shape (N,) or (N, N); None where
    nothing is left to look at."""
    if not (np.isfinite(residual).all() and np.isfinite(covariance).all()):
        return None
    n = len(residual)
    if covariance.ndim == 1:
        root = np.sqrt(covariance)
        unit = 1.0 / root
    else:
        white = Whitener(covariance[None])
        if not bool(white.ok.all()):
            return None
        sizes, vectors = np.linalg.eigh(covariance)
        sizes = np.sqrt(np.maximum(sizes, RANK**2 * sizes[-1]))
        root, unit = (vectors * sizes) @ vectors.T, (vectors / sizes) @ vectors.T
        turn = white.matrix(root[None])[0].T  # R^-1 L, a rotation
        residual, jacobian = turn @ residual, turn @ jacobian
    basis = orthonormal(jacobian)
    if n - basis.shape[1] < 1 or not np.isfinite(unit).all():
        return None
    r = residual - basis @ (basis.T @ residual)
    if float(r @ r) <= 1e-20 * max(float(residual @ residual), 1e-300):
        return None
    return Residuals(r, basis, values, unit, root)


@dataclass(frozen=True, slots=True, eq=False)
class Influence:
    """How far each observation lies off and how much the fit depends on it, each of shape (N,).

    Attributes
    ----------
    leverage : how much of an observation the fit takes up (0 to 1; they sum to the constants if no
        error is shared)
    studentised : delta_i over its standard error, the error estimated from the other observations
        (externally studentised); nan where leverage is 1
    cooks_distance : squared shift of all constants when it is left out, over k s^2
    p_largest : that the largest studentised residual is chance, Bonferroni over the observations
    """

    leverage: np.ndarray
    studentised: np.ndarray
    cooks_distance: np.ndarray
    p_largest: float | None


def influence(of: Residuals) -> Influence:
    """Leverage, externally studentised residuals and Cook's distances."""
    n, k = of.n, of.basis.shape[1]
    if of.unit.ndim == 1:
        size = of.unit**2
        taken = size * (of.basis**2).sum(axis=1)
        left = np.maximum(size - taken, 0.0)
        pull = of.unit * of.r
    else:
        size = (of.unit**2).sum(axis=0)
        taken = ((of.basis.T @ of.unit) ** 2).sum(axis=0)
        left = (of.outside(of.unit) ** 2).sum(axis=0)
        pull = of.unit.T @ of.r
    leverage = np.clip(taken / size, 0.0, 1.0)
    seen = left > RANK * size
    q = float(of.r @ of.r)
    s2 = q / of.df
    with np.errstate(divide="ignore", invalid="ignore"):
        gain = np.where(seen, pull**2 / left, np.nan)
        rest = np.maximum(q - gain, 0.0) / (of.df - 1) if of.df > 1 else np.full(n, np.nan)
        studentised = np.where(seen, pull / np.sqrt(left * rest), np.nan)
        cooks = np.where(seen, taken * (pull / left) ** 2 / (max(k, 1) * s2), np.nan)
    usable = studentised[np.isfinite(studentised)]
    p = None
    if of.df > 1 and len(usable):
        tail = 2.0 * float(t_upper(float(np.abs(usable).max()), of.df - 1))
        p = min(1.0, tail * len(usable))
    return Influence(leverage, studentised, cooks, p)
