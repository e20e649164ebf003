"""One-sided ends where the runs point beyond the bound of a constant.

Linear law, exact conditions, stated errors: the score is (estimate - value)/standard error, so that the
one-sided upper end is known in closed form: estimate + 1.645 s.e., and, by the power constraint, never
less than one s.e. above the bound.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy

from discrim.evidence.curve import Curve
from discrim.evidence.intervals import along, standard_errors
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

A = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
B = np.array([2.0, 1.0, 4.0, 3.0, 6.0, 1.0])


def predictor() -> RatePredictor:
    k_a, k_b, a, b = sympy.symbols("k_a k_b a b")
    return RatePredictor(
        [CompiledLaw(k_a * a + k_b * b, [k_a, k_b], [a, b])],
        np.zeros(6, int),
        names=("k_a", "k_b"),
        lower=np.zeros(2),
        upper=np.full(2, np.inf),
        linear=np.ones(2, bool),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )


@pytest.mark.parametrize("off", [-3.0, -2.0, -1.0, 0.0, 3.0])
def test_upper_end_in_closed_form(off: float) -> None:
    design = np.stack([A, B], axis=1)
    se = float(np.sqrt(np.linalg.inv(design.T @ design / 0.1**2)[1, 1]))
    y = design @ np.array([2.0, off * se])  # the free estimate is ``off`` standard errors
    data = Measurements(
        y, design, (source(OBSERVATION, 6, absolute=0.1),), Scale.STATED, ("a", "b")
    )
    found = fit(predictor(), data)
    result = along(found, Curve.of(found, 1), 0.95, se=float(standard_errors(found)[1]))
    # a fiftieth of the 5 % is left to the objective
    crit = 1.0 / se * result.upper_one_sided.value - off
    if off + 1.66 > 1.0:
        assert 1.644 < crit < 1.66
    else:
        assert result.upper_one_sided.value == pytest.approx(se, rel=2e-2)
