"""Ends of intervals of a ratio of two constants against those of the constants themselves.

The ratio is 0 where its numerator is, and has no limit where its denominator may be 0: the same
hypotheses, so the intervals must agree. Tables are simulated here, with A and B in lockstep.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy

from discrim.evidence.curve import Curve
from discrim.evidence.intervals import Interval, along_all, standard_errors
from discrim.evidence.quantity_intervals import quantity_facts
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.quantity import Quantity
from discrim.reactor.rates import RatePredictor

k_b, k_a = sympy.symbols("k_b k_a", nonnegative=True)
a, b = sympy.symbols("a b", nonnegative=True)


def fitted(share: float, scale: Scale, seed: int) -> Fit:
    """Two pathways on 12 runs, B = 2.5 A within 1 %, both measured within 3 %."""
    rng = np.random.default_rng(seed)
    n = 12
    x = rng.uniform(0.5, 2.0, n)
    true = np.column_stack([x, 2.5 * x * (1 + 0.01 * rng.standard_normal(n))])
    y = true @ [3.0 * (1 - share), 1.2 * share] * (1 + 0.01 * rng.standard_normal(n))
    shown = true * (1 + 0.03 * rng.standard_normal(true.shape))
    own = (source(OBSERVATION, n, relative=0.01),) if scale is Scale.STATED else ()
    data = Measurements(
        y,
        shown,
        (*own, source(0, n, relative=0.03), source(1, n, relative=0.03)),
        scale,
        ("a", "b"),
    )
    law = RatePredictor(
        [CompiledLaw(k_a * a + k_b * b, [k_b, k_a], [a, b])],
        np.zeros(n, int),
        names=("k_b", "k_a"),
        lower=np.zeros(2),
        upper=np.full(2, np.inf),
        linear=np.ones(2, bool),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )
    return fit(law, data)


def agree(ratio: Interval, numerator: Interval, denominator: Interval) -> None:
    assert not ratio.empty
    assert not numerator.empty
    assert not denominator.empty
    assert (ratio.low.value == 0) == (numerator.low.value == 0)
    assert np.isinf(ratio.high.value) == (denominator.low.value == 0)


@pytest.mark.parametrize("scale", [Scale.STATED, Scale.ESTIMATED])
@pytest.mark.parametrize("share", [0.0, 0.1, 0.9])
def test_a_ratio_ends_where_its_constants_do(share: float, scale: Scale) -> None:
    for seed in (1, 2):
        f = fitted(share, scale, seed)
        curves = [Curve.of(f, 0), Curve.of(f, 1)]
        of_b, of_a = along_all(f, curves, 0.95, se=standard_errors(f))
        over_a = quantity_facts(
            f, Quantity(k_b / k_a, (k_b, k_a), (), np.zeros(0), np.ones(2)), 0.95
        )
        over_b = quantity_facts(
            f, Quantity(k_a / k_b, (k_b, k_a), (), np.zeros(0), np.ones(2)), 0.95
        )
        for kind in ("profile", "reconciled"):
            own_b, own_a = getattr(of_b, kind), getattr(of_a, kind)
            agree(getattr(over_a, kind), own_b, own_a)
            agree(getattr(over_b, kind), own_a, own_b)
