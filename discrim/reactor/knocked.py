"""A law beside the same law with one pathway or species knocked out, at named conditions."""

from __future__ import annotations

import numpy as np

from discrim.ratelaw.compile import CompiledLaw


class KnockedOut:
    """f and f0 of one law at given conditions taken as exact.

    Parameters
    ----------
    full, without : compiled laws over the same constants and conditions
    columns : shape (p_law,) which free constant stands for each constant of the laws
    """

    def __init__(self, full: CompiledLaw, without: CompiledLaw, columns: np.ndarray) -> None:
        self.full, self.without, self.columns = full, without, columns

    def rates(self, theta: np.ndarray, conditions: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """f and f0, shapes (S, K), at K conditions, shape (K, m)."""
        t = theta[:, None, self.columns]
        f = self.full(t, conditions, constants=False, conditions_too=False, both=False)[0]
        f0 = self.without(t, conditions, constants=False, conditions_too=False, both=False)[0]
        return f, f0

    def effect(self, theta: np.ndarray, conditions: np.ndarray) -> np.ndarray:
        """Effect, shape (S, K); 0 where both rates are zero."""
        f, f0 = self.rates(theta, conditions)
        top = np.maximum(f, f0)
        with np.errstate(divide="ignore", invalid="ignore"):
            e = (f - f0) / top
        return np.where(top > 0, e, 0.0)

    def with_gradient(
        self, theta: np.ndarray, condition: np.ndarray, *, knocked_out: bool
    ) -> tuple[np.ndarray, np.ndarray]:
        """f (or f0 when ``knocked_out``), shape (S,), and its derivatives by all p constants, shape
        (S, p), at one condition, shape (m,)."""
        law = self.without if knocked_out else self.full
        v, g, _, _ = law(
            theta[:, None, self.columns],
            condition[None, :],
            constants=True,
            conditions_too=False,
            both=False,
        )
        assert g is not None
        grad = np.zeros(theta.shape)
        for j, k in enumerate(self.columns):
            grad[:, k] += g[:, 0, j]
        return v[:, 0], grad
