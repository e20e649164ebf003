"""Whole fits of laws that only balances give. All data here are invented and made in the test; what
is recovered are the constants that they were made with.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import sympy
from scipy.optimize import brentq

from discrim.fit.fit import FitStatus, fit
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.model import amount, constant_symbol
from discrim.reactor.rates import RatePredictor
from tests.reference.outside import measurements, predictor

k, K_2, K_3 = (constant_symbol(n) for n in ("k", "K_2", "K_3"))
A, B = amount("A"), amount("B")
FREE = sympy.Dummy("[*]", positive=True)
# A on two sites, B on three; A reacts from two vacant sites
SITES = [FREE + 2 * K_2 * A * FREE**2 + 3 * K_3 * B * FREE**3 - 1]
LAW = k * A * ImplicitValue(0, [FREE], SITES) ** 2
TRUE = np.array([0.7, 3.0, 12.0])


def table() -> np.ndarray:
    a, b = np.meshgrid([0.02, 0.1, 0.4, 1.5, 4.0], [0.0, 0.05, 0.3, 1.0, 3.0])
    return np.column_stack([a.ravel(), b.ravel()])


def rates(theta: np.ndarray, conditions: np.ndarray) -> np.ndarray:
    """Point by point by scipy's bracketed root, apart from the code under test."""
    out = []
    for a, b in conditions:
        z = brentq(
            lambda z, a=a, b=b: z + 2 * theta[1] * a * z**2 + 3 * theta[2] * b * z**3 - 1,
            0,
            1,
            xtol=1e-15,
        )
        out.append(theta[0] * a * z**2)
    return np.array(out)


def bound(**more: Any) -> RatePredictor:
    return predictor(LAW, [k, K_2, K_3], [A, B], len(table()), lower=0.0, **more)


def test_exact_rates_give_back_the_constants() -> None:
    found = fit(bound(), measurements(rates(TRUE, table()), table(), sd=1e-6))
    assert found.status is FitStatus.CONVERGED
    assert found.theta == pytest.approx(TRUE, rel=1e-7)


def test_scattered_rates_and_measured_conditions() -> None:
    rng = np.random.default_rng(5)
    c = table()
    read = c * (1 + 0.01 * rng.normal(size=c.shape))
    y = rates(TRUE, c) * (1 + 0.02 * rng.normal(size=len(c)))
    data = measurements(
        y, read, sd=0.02 * rates(TRUE, c), conditions_sd=[0.01 * c[:, 0], 0.01 * c[:, 1] + 1e-6]
    )
    found = fit(bound(), data)
    assert found.status is FitStatus.CONVERGED
    assert found.theta == pytest.approx(TRUE, rel=0.1)
    again = fit(bound(), data)
    assert found.theta.tobytes() == again.theta.tobytes()


def test_the_gradient_is_zero_at_the_optimum() -> None:
    """By differences of the objective, each law value from scipy's root."""
    rng = np.random.default_rng(6)
    c = table()
    y = rates(TRUE, c) * (1 + 0.05 * rng.normal(size=len(c)))
    found = fit(bound(), measurements(y, c, sd=0.01))

    def objective(theta: np.ndarray) -> float:
        return float((((y - rates(theta, c)) / 0.01) ** 2).sum())

    q = objective(found.theta)
    for j in range(3):
        step = np.zeros(3)
        step[j] = 1e-3 * found.theta[j]
        up, down = objective(found.theta + step), objective(found.theta - step)
        assert up > q
        assert down > q
        assert abs(up - down) < 1e-2 * (up + down - 2 * q)


def test_starts_without_a_solution_do_not_harm_the_others() -> None:
    """A law that has no positive solution in part of the range: 1 - z - K_2 A z^2 needs no sign of
    K_2, but with K_2 free to be negative it ends at 4 K_2 A = -1."""
    k_free = sympy.Symbol("K_2", real=True)
    law = k * A * ImplicitValue(0, [FREE], [1 - FREE - k_free * A * FREE**2])
    c = table()
    z = 2 / (1 + np.sqrt(1 + 4 * 3.0 * c[:, 0]))
    starts = np.array([[1.0, -50.0], [1.0, 1.0], [np.nan, np.nan]])[:2]
    made = predictor(law, [k, k_free], [A, B], len(c), starts=starts)
    found = fit(made, measurements(0.7 * c[:, 0] * z, c, sd=1e-6))
    assert found.status is FitStatus.CONVERGED
    assert found.theta == pytest.approx([0.7, 3.0], rel=1e-7)


def test_a_constant_that_ends_at_zero() -> None:
    c = table()
    theta = np.array([0.7, 3.0, 0.0])
    rng = np.random.default_rng(8)
    y = rates(theta, c) + 0.002 * rng.normal(size=len(c))
    # a little steeper than the law without B allows, so that the bound holds
    y += 0.01 * c[:, 1] * rates(theta, c)
    found = fit(bound(), measurements(y, c, sd=0.002))
    assert found.status is FitStatus.CONVERGED
    assert found.theta[2] == 0.0
    assert found.theta[:2] == pytest.approx(theta[:2], rel=0.1)
