"""The objective beside the score where the variance of the rates is not stated.

Simulated tables of two parallel pathways with known constants: the true value is never lost to the
guard (closed form of its reference: F), values far off are excluded by it whatever the score says there.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy

from discrim.evidence.acceptance import Acceptance
from discrim.evidence.curve import Curve
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

STUDIES = 40


def predictor(n: int) -> RatePredictor:
    k_a, k_b, a, b = sympy.symbols("k_a k_b a b")
    return RatePredictor(
        [CompiledLaw(k_a * a + k_b * b, [k_a, k_b], [a, b])],
        np.zeros(n, int),
        names=("k_a", "k_b"),
        lower=np.zeros(2),
        upper=np.full(2, np.inf),
        linear=np.ones(2, bool),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )


def table(n: int, spread: float, replicates: int, rng: np.random.Generator) -> Measurements:
    """Rates of 3 A + 0.3 B with 2 % of scatter, concentrations read to 2 %."""
    a = rng.uniform(0.5, 2.0, n)
    b = 2.5 * a * (1.0 + spread * rng.standard_normal(n))
    y = 3.0 * a + 0.3 * b + 0.1 * rng.standard_normal(n)
    read = np.stack([a, b], axis=1) * (1.0 + 0.02 * rng.standard_normal((n, 2)))
    conditions = (source(0, n, relative=0.02), source(1, n, relative=0.02))
    if not replicates:
        return Measurements(y, read, conditions, Scale.ESTIMATED, ("a", "b"))
    sd = 0.1 * float(np.sqrt(rng.chisquare(replicates) / replicates))
    every = (*conditions, source(OBSERVATION, n, absolute=sd))
    return Measurements(y, read, every, Scale.REPLICATES, ("a", "b"), replicates)


@pytest.mark.parametrize("replicates", [0, 4])
@pytest.mark.parametrize(("n", "spread"), [(5, 0.3), (12, 0.01), (12, 0.5)])
def test_truth_is_kept_and_far_values_are_not(n: int, spread: float, replicates: int) -> None:
    rng = np.random.default_rng(20 + n)
    lost = 0
    for _ in range(STUDIES):
        found = fit(predictor(n), table(n, spread, replicates, rng))
        accepts = Acceptance(found, found.objective, 0.95, 0.0, 1)
        points = Curve.of(found, 1).at(np.array([0.3, 1e6]))
        truth, far = accepts.guarded(points) > 0
        lost += not truth
        assert not far
    # 0.1 % is asked: more than two of forty would happen once in 100,000 times
    assert lost <= 2
