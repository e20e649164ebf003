"""Measured rates: the observation is the rate law itself, evaluated at the conditions of the run."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.model import Prediction


class RatePredictor:
    """One or several responses, each a rate law, over the same conditions.

    Parameters
    ----------
    laws : one compiled law for each response
    response : shape (N,) which law each observation belongs to
    index : shape (N, q) for each observation, which of the p free constants stands for each of the
        q constants of the law; None when they are the same for all runs (q = p)
    names, lower, upper, linear, scale, starts : see :class:`discrim.reactor.model.Predictor`
    """

    def __init__(
        self,
        laws: Sequence[CompiledLaw],
        response: np.ndarray,
        *,
        names: tuple[str, ...],
        lower: np.ndarray,
        upper: np.ndarray,
        linear: np.ndarray,
        scale: np.ndarray,
        starts: np.ndarray,
        index: np.ndarray | None = None,
    ) -> None:
        self.laws = tuple(laws)
        self.response = response
        self.index = index
        self.names = names
        self.lower, self.upper = lower, upper
        self.linear, self.scale, self.starts = linear, scale, starts
        self._rows = [np.flatnonzero(response == k) for k in range(len(self.laws))]

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        if len(self.laws) == 1 and self.index is None:
            out = self.laws[0](
                theta[:, None, :],
                conditions,
                constants=constants,
                conditions_too=conditions_too,
                both=both,
            )
            return Prediction(*out)
        return self._general(theta, conditions, constants, conditions_too, both)

    def _general(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        constants: bool,
        conditions_too: bool,
        both: bool,
    ) -> Prediction:
        s, p = theta.shape
        n, m = conditions.shape[-2:]
        values = np.empty((s, n))
        by_constants = np.zeros((s, n, p)) if constants else None
        by_conditions = np.zeros((s, n, m)) if conditions_too else None
        by_both = np.zeros((s, n, m, p)) if both else None
        for law, rows in zip(self.laws, self._rows, strict=True):
            if self.index is None:
                q = np.broadcast_to(np.arange(p), (len(rows), p))
            else:
                q = self.index[rows]
            f, g, h, b = law(
                theta[:, q],
                conditions[..., rows, :],
                constants=constants,
                conditions_too=conditions_too,
                both=both,
            )
            values[:, rows] = f
            if by_constants is not None and g is not None:
                for j in range(q.shape[1]):
                    by_constants[:, rows, q[:, j]] += g[..., j]
            if by_conditions is not None and h is not None:
                by_conditions[:, rows] = h
            if by_both is not None and b is not None:
                for j in range(q.shape[1]):
                    # advanced indices around a slice come first: (rows, S, m)
                    by_both[:, rows, :, q[:, j]] += np.moveaxis(b[..., j], 1, 0)
        return Prediction(values, by_constants, by_conditions, by_both)
