"""Sizes of the tests of terms: constants that vanish together, joint quantiles, the guard.

Invented tables drawn with a seed; reference probabilities from scipy.stats.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.intervals import guard_level
from discrim.evidence.projected import outside_level
from discrim.evidence.rivals import joint_p
from discrim.evidence.term import Kind, Term
from discrim.evidence.term_tests import along_directions, vanishing
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from tests.reference.outside import predictor, symbols

k_A, k_2, K, A, B = symbols("k_A k_2 K A B")
N = 12


@pytest.mark.parametrize("x", [1.0, 1.645, 2.5])
@pytest.mark.parametrize("angle", [0.0, 60.0, 90.0, 180.0])
def test_joint_tails_of_two_directions(x: float, angle: float) -> None:
    """Against the bivariate normal: one- and two-sided chances of the largest of two scores."""
    c = float(np.cos(np.radians(angle)))
    d = np.array([[1.0, 0.0, 0.0], [c, np.sqrt(max(1 - c * c, 0.0)), 0.0]])
    pair = stats.multivariate_normal([0.0, 0.0], [[1.0, c], [c, 1.0]], allow_singular=True)
    one = 1.0 - float(pair.cdf([x, x]))
    box = pair.cdf([x, x]) - pair.cdf([x, -x]) - pair.cdf([-x, x]) + pair.cdf([-x, -x])
    for expected, two_sided in ((one, False), (1.0 - float(box), True)):
        got = joint_p(d, x, 10, False, 0, 1, two_sided=two_sided)
        assert got == pytest.approx(expected, abs=0.012, rel=0.01)


def test_size_where_constants_vanish_in_opposite_directions() -> None:
    """k_2 K B/(1 + K B) beside k_A A with B = A^2: for small K the term bends upwards, for large K
    downwards. Half of the two-sided joint tail counted one of the two only (8 % false claims)."""
    studies = 700
    rng = np.random.default_rng(31)
    full = predictor(k_A * A + k_2 * K * B / (1 + K * B), (k_A, k_2, K), (A, B), N)
    small = predictor(k_A * A, (k_A,), (A, B), N)
    term = Term(Kind.VANISH, full, small, (1,), (2,), None, np.zeros((1, 2)), ("a run",))
    a = rng.uniform(0.5, 2.0, (studies, N))
    b = a**2 * (1 + 0.01 * rng.standard_normal((studies, N)))
    y = 3.0 * a * (1 + 0.02 * rng.standard_normal((studies, N)))
    error = source(OBSERVATION, N, relative=0.02)
    table = Measurements(y, np.stack([a, b], axis=2), (error,), Scale.STATED, ("A", "B"))
    false = 0
    for i in range(studies):
        one = replace(table, y=y[i], conditions=table.conditions[i])
        null = fit(small, one, starts=1)
        z, _ = along_directions(null, vanishing(term, null), True, 1)
        false += z > stats.norm.ppf(0.95)
    assert stats.binomtest(false, studies, 0.06, alternative="greater").pvalue > 0.05
    assert false > 0.02 * studies


@pytest.mark.parametrize("level", [0.90, 0.95, 0.99, 0.999])
def test_the_guard_never_spends_what_the_score_needs(level: float) -> None:
    """The guard's level is part of 1 - confidence: fixed at 0.01, intervals at 99 % held 98.5 %."""
    alpha = 1.0 - level
    assert 0 < guard_level(alpha) <= 0.02 * alpha * (1 + 1e-12)
    assert 0 < outside_level(alpha) <= 0.2 * alpha * (1 + 1e-12)


def test_the_root_of_an_amount_read_as_zero() -> None:
    """sqrt(A) has no finite slope at A = 0, nor a value below it, where reconciling may lead."""
    n = 10
    rng = np.random.default_rng(32)
    a = np.r_[0.0, 0.0, np.linspace(0.1, 2.0, n - 2)]
    shown = np.maximum(a + 0.02 * rng.standard_normal((20, n)), 0.0)
    shown[:, 0] = 0.0
    y = 3.0 * np.sqrt(a) + 0.03 * rng.standard_normal((20, n))
    law = predictor(k_A * A**0.5, (k_A,), (A,), n)
    errors = (source(OBSERVATION, n, absolute=0.03), source(0, n, absolute=0.02, origin="measured"))
    for i in range(20):
        found = fit(law, Measurements(y[i], shown[i][:, None], errors, Scale.STATED, ("A",)))
        assert found.ok
        assert found.theta[0] == pytest.approx(3.0, abs=0.3)
        assert (found.conditions >= 0.0).all()
