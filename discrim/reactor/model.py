"""The seam between chemistry and statistics.

Everything downstream (`fit`, `evidence`, `plan`) sees a law only through a :class:`Predictor`: for
given constants and conditions, the predicted observations of all runs, their sensitivities, and
whether they are finite. Any kind of reactor that offers this gets every test and every interval.

Arrays carry a leading batch axis S: many starts, many fixed values of one constant or many
simulated tables are one array program.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np


@dataclass(frozen=True, slots=True, eq=False)
class Prediction:
    """Predicted observations (N of them) for S sets of p constants at m conditions per observation.

    Attributes
    ----------
    values : shape (S, N)
    by_constants : shape (S, N, p), or None when not asked for
    by_conditions : shape (S, N, m), or None when not asked for
    by_both : shape (S, N, m, p), derivative of ``by_conditions`` by the constants, or None
    """

    values: np.ndarray
    by_constants: np.ndarray | None = None
    by_conditions: np.ndarray | None = None
    by_both: np.ndarray | None = None


class Predictor(Protocol):
    """A law bound to runs, as the statistics see it.

    Attributes
    ----------
    names : names of the p free constants
    lower, upper : shape (p,) bounds, infinite where there is none
    linear : shape (p,) True for constants in which, the others held, the observations are linear
    scale : shape (p,) a typical magnitude of each constant, for starting values
    starts : shape (k, p) starting values from the user, k may be 0
    """

    names: tuple[str, ...]
    lower: np.ndarray
    upper: np.ndarray
    linear: np.ndarray
    scale: np.ndarray
    starts: np.ndarray

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        """Predict; ``theta`` shape (S, p), ``conditions`` shape (N, m) or (S, N, m)."""
        ...
