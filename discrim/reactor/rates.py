"""Measured rates: the observation is the rate law itself, evaluated at the conditions of the run.

A rate that was worked out from conditions, y = h(c), carries their errors. Its predicted value is taken as
f(c, theta) - h(c) + h(reading): the difference from the reading and its derivatives by the
conditions, F - dh/dc, are then those of the measurements that were made, so that covariances and
reconciled conditions follow without an entry for the covariance between y and c.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

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
    worked_out : for each response the formula h that its values were worked out by, over the same
        conditions and no constants, or None; readings : shape (N,) its values, h(reading)
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
        worked_out: Sequence[CompiledLaw | None] = (),
        readings: np.ndarray | None = None,
    ) -> None:
        self.laws = tuple(laws)
        self.response = response
        self.index = index
        self.worked_out = tuple(worked_out) if any(worked_out) else ()
        self.readings = readings
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
            made = Prediction(*out)
        else:
            made = self._general(theta, conditions, constants, conditions_too, both)
        return self._less_formula(made, conditions) if self.worked_out else made

    def formula(self, conditions: np.ndarray) -> np.ndarray | None:
        """h at ``conditions``, shape (N, m) or (S, N, m), as shape (S, N): nan for observations that
        were not worked out from conditions; None when none was."""
        if not self.worked_out:
            return None
        c = conditions if conditions.ndim == 3 else conditions[None]
        out = np.full(c.shape[:2], np.nan)
        for rows, values, _ in self._formulas(c, slopes=False):
            out[:, rows] = values
        return out

    def _formulas(
        self, c: np.ndarray, *, slopes: bool
    ) -> Iterator[tuple[np.ndarray, np.ndarray, np.ndarray | None]]:
        """Rows, h and its slopes for each response that has a formula, at c, shape (S, N, m)."""
        none = np.zeros((len(c), 1, 0))
        for h, rows in zip(self.worked_out, self._rows, strict=True):
            if h is not None:
                v, _, d, _ = h(none, c[:, rows], constants=False, conditions_too=slopes, both=False)
                yield rows, v, d

    def _less_formula(self, made: Prediction, conditions: np.ndarray) -> Prediction:
        assert self.readings is not None
        c = conditions if conditions.ndim == 3 else conditions[None]
        values, by_conditions = made.values.copy(), made.by_conditions
        if by_conditions is not None:
            by_conditions = by_conditions.copy()
        for rows, h, d in self._formulas(c, slopes=by_conditions is not None):
            # a planned run has no reading
            own = np.where(np.isfinite(self.readings[rows]), self.readings[rows], h)
            values[:, rows] += own - h
            if by_conditions is not None and d is not None:
                by_conditions[:, rows] -= d
        return Prediction(values, made.by_constants, by_conditions, made.by_both)

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
