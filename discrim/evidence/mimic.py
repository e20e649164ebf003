"""A law fitted to what another law predicts, not to the data, for many other laws at once."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution, joined
from discrim.fit.scout import scout, starting_values
from discrim.reactor.model import Prediction, Predictor

OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-8, step_tolerance=1e-9)
# with more laws than this a rival is started from its fit to the data only: a direction that is not
# the best one costs power, never validity
FEW = 12
STARTS = 8


class _Weighed:
    """A predictor of observations in units of their standard deviations, one over which is the last
    of the conditions: so tables with different errors are one batch."""

    def __init__(self, inner: Predictor) -> None:
        self.inner = inner
        self.names = inner.names
        self.lower, self.upper = inner.lower, inner.upper
        self.linear, self.scale, self.starts = inner.linear, inner.scale, inner.starts

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        if conditions_too or both:
            raise ValueError("the conditions are exact here")
        made = self.inner.predict(theta, conditions[..., :-1], constants=constants)
        weight = conditions[..., -1]
        g = made.by_constants
        return Prediction(made.values * weight, None if g is None else g * weight[..., None])


def mimics(nulls: Sequence[Fit], rival: Fit, *, thorough: bool = True) -> np.ndarray:
    """Constants of ``rival`` fitted to the predictions of each of ``nulls`` at their reconciled
    conditions, weighted as each null fit weighs the runs; shape (S, p), nan where it failed.

    ``thorough``: from several starts, not only from the fit of the rival to the data.
    """
    found = mimicked(
        np.array([f.values for f in nulls]),
        np.array([f.conditions for f in nulls]),
        np.array([f.variances for f in nulls]),
        rival,
        _starts(rival, thorough),
    )
    return np.where(np.isfinite(found.objective)[:, None], found.theta, np.nan)


def mimicked(
    values: np.ndarray,
    conditions: np.ndarray,
    variances: np.ndarray,
    rival: Fit,
    starts: np.ndarray,
    options: Options = OPTIONS,
) -> Solution:
    """``rival`` fitted to S sets of predictions, shape (S, N), made at ``conditions``, shape (S, N, m),
    from ``starts``, shape (k, p); the objective is the squared distance in standard errors."""
    s = len(values)
    sd = np.sqrt(variances)
    usable = np.isfinite(sd) & (sd > 0)
    weight = np.where(usable, 1.0 / np.where(usable, sd, 1.0), 0.0)
    data = Measurements(
        values * weight,
        np.concatenate([conditions, weight[..., None]], axis=2),
        (source(OBSERVATION, rival.n, absolute=1.0),),
        Scale.STATED,
        (*rival.data.condition_names, "weight"),
    )
    problem = Problem(_Weighed(rival.predictor), data)
    found = [
        solve(problem, np.broadcast_to(start, (s, rival.p)).copy(), options=options)
        for start in starts
    ]
    if len(found) == 1:
        return found[0]
    q = np.array([f.objective for f in found])
    best = np.argmin(np.where(np.isfinite(q), q, np.inf), axis=0)
    return joined(found).take(best * s + np.arange(s))


def _starts(rival: Fit, thorough: bool) -> np.ndarray:
    own = rival.theta[None]
    if not thorough or rival.p == 0 or bool(rival.predictor.linear.all()):
        return own
    sd = np.sqrt(rival.variances)
    usable = np.isfinite(sd).all() and (sd > 0).all()
    weight = 1.0 / sd if usable else np.ones(rival.n)
    begin = np.vstack([own, starting_values(rival.predictor, STARTS, 1)])
    return np.vstack([own, scout(rival.predictor, rival.data, weight, begin)])
