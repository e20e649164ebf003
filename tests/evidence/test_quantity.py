"""Intervals for quantities of the constants, against closed forms and general-purpose libraries.

Linear quantities of linear laws: statsmodels (`OLS.t_test`). Ratios of two constants of a linear
law: the exact set of Fieller, J. R. Stat. Soc. B 16 (1954) 175 (formula from memory, derived in
`fieller`). Everything else: the same law written with the quantity as a constant of its own, and a
general-purpose constrained minimiser (scipy). The tables are simulated.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm
import sympy
from scipy.optimize import minimize
from scipy.stats import t as student

from discrim.evidence.curve import Curve
from discrim.evidence.delta import propagated
from discrim.evidence.guaranteed import guaranteed
from discrim.evidence.intervals import along, standard_errors
from discrim.evidence.quantity import AlongQuantity, InQuantity
from discrim.evidence.quantity_intervals import guaranteed_quantity, quantity_facts
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.quantity import Quantity
from discrim.reactor.rates import RatePredictor

A, B = sympy.symbols("[A] [B]", nonnegative=True)
k_a, k_b, K, R = sympy.symbols("k_a k_b K R", nonnegative=True)


def bound(law: Any, constants: list[Any], n: int) -> RatePredictor:
    p = len(constants)
    return RatePredictor(
        [CompiledLaw(law, constants, [A, B])],
        np.zeros(n, int),
        names=tuple(str(c) for c in constants),
        lower=np.zeros(p),
        upper=np.full(p, np.inf),
        linear=np.full(p, bool(law.is_polynomial(*constants) and law.has(k_b) and not law.has(R))),
        scale=np.ones(p),
        starts=np.zeros((0, p)),
    )


def table(
    k: float, *, conditions: bool = False, seed: int = 1, bounds: bool = False
) -> Measurements:
    rng = np.random.default_rng(seed)
    n = 12
    a, b = rng.uniform(1, 5, n), rng.uniform(1, 5, n)
    y = a + k * b + 0.2 * rng.standard_normal(n)
    sources: tuple[ErrorSource, ...] = ()
    if conditions:
        y_sd = source(OBSERVATION, n, absolute=0.2)
        sources = (source(0, n, relative=0.02), source(1, n, relative=0.02), y_sd)
    if bounds:
        half = np.full(n, 0.5)
        sources = (source(OBSERVATION, n, absolute=0.3, bound=half),)
    scale = Scale.STATED if sources else Scale.ESTIMATED
    return Measurements(y, np.column_stack([a, b]), sources, scale, ("A", "B"))


def quantity(expression: Any, constants: list[Any], at: tuple[float, ...] = ()) -> Quantity:
    symbols = [A, B][: len(at)]
    return Quantity(expression, constants, symbols, np.array(at), np.ones(len(constants)))


LINEAR = k_a * A + k_b * B
TWO = [k_a, k_b]


def linear_fit(k: float, **options: Any) -> Fit:
    data = table(k, **options)
    return fit(bound(LINEAR, TWO, data.n), data)


@pytest.mark.parametrize(
    ("weights", "expression"),
    [((1, 1), k_a + k_b), ((1, -1), k_a - k_b), ((2, 3), k_a * A + k_b * B)],
)
def test_linear_quantities_are_those_of_statsmodels(weights: tuple[int, int], expression: Any):
    found = linear_fit(0.5)
    q = quantity(expression, TWO, (2.0, 3.0))
    facts = quantity_facts(found, q, 0.95, closeness=1e-12)
    outside = sm.OLS(found.data.y, found.data.conditions).fit().t_test(np.array(weights, float))
    assert facts.value == pytest.approx(float(outside.effect[0]), rel=1e-10)
    assert facts.standard_error == pytest.approx(float(outside.sd.item()), rel=1e-10)
    for interval, digits in (
        (facts.linearised, 1e-10),
        (facts.profile, 1e-7),  # found by a search along the quantity
        (facts.reconciled, 1e-7),
    ):
        ends = [interval.low.value, interval.high.value]
        np.testing.assert_allclose(ends, outside.conf_int(0.05)[0], rtol=digits)


def fieller(found: Fit, level: float) -> np.ndarray:
    """Values q of k_b/k_a with |k_b - q k_a| <= t s.e.(k_b - q k_a): roots of a quadratic."""
    outside = sm.OLS(found.data.y, found.data.conditions).fit()
    (a, b), v = outside.params, outside.cov_params()
    t2 = student.ppf(0.5 + level / 2, found.data.n - 2) ** 2
    roots = np.roots([a * a - t2 * v[0, 0], -2 * (a * b - t2 * v[0, 1]), b * b - t2 * v[1, 1]])
    return np.sort(roots)


def test_a_ratio_has_the_interval_of_fieller():
    found = linear_fit(0.5)
    facts = quantity_facts(found, quantity(k_b / k_a, TWO), 0.95, closeness=1e-10)
    for interval in (facts.profile, facts.reconciled):
        ends = [interval.low.value, interval.high.value]
        np.testing.assert_allclose(ends, fieller(found, 0.95), rtol=1e-7)
    # the linearised interval is another one: symmetric about the ratio
    assert facts.linearised.high.value < facts.profile.high.value


def test_a_ratio_near_zero_ends_on_its_bound():
    found = linear_fit(0.02)
    facts = quantity_facts(found, quantity(k_b / k_a, TWO), 0.95, closeness=1e-10)
    assert facts.reconciled.low.end == "bound"
    assert facts.reconciled.low.value == 0
    assert facts.reconciled.high.value == pytest.approx(fieller(found, 0.95)[1], rel=1e-7)


@pytest.mark.parametrize("conditions", [False, True])
def test_the_same_as_a_law_with_the_quantity_for_a_constant(conditions: bool):
    data = table(0.5, conditions=conditions)
    first = fit(bound(LINEAR, TWO, data.n), data)
    second = fit(bound(k_a * (A + R * B), [k_a, R], data.n), data)
    facts = quantity_facts(first, quantity(k_b / k_a, TWO), 0.95, closeness=1e-9)
    se = float(standard_errors(second)[1])
    other = along(second, Curve.of(second, 1), 0.95, se=se, closeness=1e-9)
    assert facts.standard_error == pytest.approx(se, rel=1e-6)
    for mine, own in ((facts.profile, other.profile), (facts.reconciled, other.reconciled)):
        assert mine.low.value == pytest.approx(own.low.value, rel=1e-5)
        assert mine.high.value == pytest.approx(own.high.value, rel=1e-5)


def test_bounds_of_the_other_constants_hold_along_a_sum():
    """Restricted minima of 3 k_a + 4 k_b = q with both >= 0, by scipy's constrained minimiser."""
    data = table(0.02)
    found = fit(bound(LINEAR, [k_b, k_a], data.n), data)  # k_b is the one that is replaced
    x, y = data.conditions, data.y
    curve = AlongQuantity(found, quantity(3 * k_a + 4 * k_b, [k_b, k_a]))
    values = np.array([1.0, 2.8, 2.9, 3.0, 3.1, 3.4])
    pts = curve.at(values)
    for q, objective in zip(values, pts.objective, strict=True):
        outside = minimize(
            lambda k: ((y - x @ k) ** 2).sum(),
            np.array([q / 6, q / 8]),
            jac=lambda k: -2 * x.T @ (y - x @ k),
            bounds=[(0, None), (0, None)],
            constraints={"type": "eq", "fun": lambda k, q=q: 3 * k[0] + 4 * k[1] - q},
            options={"ftol": 1e-14, "maxiter": 500},
        )
        assert outside.success
        assert objective == pytest.approx(outside.fun, rel=1e-6)
    # at the low values k_b is on its bound, and those points were solved again with k_a replaced
    assert len(curve._again(pts))


def test_no_constants_give_a_share_above_one():
    found = linear_fit(0.02)
    curve = AlongQuantity(found, quantity(k_a / (k_a + k_b), TWO))
    pts = curve.at(np.array([0.9, 1.1]))
    assert np.isfinite(pts.objective[0])
    assert np.isinf(pts.objective[1])
    assert pts.z[1] < -100  # far too high
    facts = quantity_facts(found, quantity(k_a / (k_a + k_b), TWO), 0.95)
    assert facts.reconciled.high.value == pytest.approx(1.0, abs=1e-4)


EXPRESSIONS = [
    k_b / k_a,
    k_a * k_b,
    k_a * A / (1 + K * A) + k_b * B,
    k_a * K * A / (1 + K * A),
    sympy.sqrt(k_a) + K * sympy.exp(k_b),
]


@pytest.mark.parametrize("expression", EXPRESSIONS)
def test_derivatives_in_the_new_constants(expression: Any):
    law = k_a * A / (1 + K * A) + k_b * B**2
    constants = [k_a, k_b, K]
    n = 5
    rng = np.random.default_rng(3)
    conditions = rng.uniform(1, 3, (n, 2))
    inner = bound(law, constants, n)
    q = quantity(expression, constants, (2.0, 1.5))
    theta = rng.uniform(0.5, 2, (3, 3))
    for which in range(len(q.inverses)):
        wrapped = InQuantity(inner, q, which, theta[0])
        new = wrapped.from_inner(theta)
        np.testing.assert_allclose(wrapped.to_inner(new), theta, rtol=1e-9)
        _differences_agree(wrapped, new, conditions)


def _differences_agree(wrapped: InQuantity, new: np.ndarray, conditions: np.ndarray) -> None:
    pred = wrapped.predict(new, conditions, conditions_too=True, both=True)
    assert pred.by_constants is not None
    assert pred.by_both is not None
    for j in range(3):
        step = np.zeros(3)
        step[j] = 1e-5
        up, down = (
            wrapped.predict(new + s * step, conditions, conditions_too=True) for s in (1, -1)
        )
        assert up.by_conditions is not None
        assert down.by_conditions is not None
        slope = (up.values - down.values) / 2e-5
        np.testing.assert_allclose(pred.by_constants[:, :, j], slope, rtol=1e-5, atol=1e-8)
        both = (up.by_conditions - down.by_conditions) / 2e-5
        np.testing.assert_allclose(pred.by_both[..., j], both, rtol=1e-5, atol=1e-8)


def test_standard_errors_are_the_propagated_unit_vectors():
    found = linear_fit(0.5, conditions=True)
    np.testing.assert_allclose(propagated(found, np.eye(2)), standard_errors(found), rtol=1e-12)


def test_what_the_runs_leave_open_has_no_standard_error():
    data = table(0.5)
    same = Measurements(
        data.y, data.conditions[:, [0, 0]], (), Scale.ESTIMATED, ("A", "B")
    )  # A and B in lockstep
    found = fit(bound(LINEAR, TWO, data.n), same)
    out = propagated(found, np.array([[1.0, 0.0], [1.0, 1.0], [1.0, -1.0]]))
    assert np.isinf(out[[0, 2]]).all()
    alone = sm.OLS(data.y, data.conditions[:, 0]).fit()
    # the sum is what the runs determine; one degree of freedom fewer is counted for the variance
    expected = alone.bse[0] * np.sqrt((data.n - 1) / (data.n - 2))
    assert out[1] == pytest.approx(float(expected), rel=1e-8)


def test_guaranteed_ranges_of_quantities():
    """A single constant gives its own range; over the polytope a ratio is checked at random points."""
    found = linear_fit(0.5, bounds=True)
    own = guaranteed(found.predictor, found.data, 0.05, 1.0)
    alone = guaranteed_quantity(found, quantity(k_a, TWO), 0.05, own)
    assert alone.low.value == pytest.approx(own[0].low.value, rel=1e-9)
    assert alone.high.value == pytest.approx(own[0].high.value, rel=1e-9)
    x, y = found.data.conditions, found.data.y
    rng = np.random.default_rng(1)
    trial = np.column_stack(
        [
            rng.uniform(own[0].low.value, own[0].high.value, 200_000),
            rng.uniform(own[1].low.value, own[1].high.value, 200_000),
        ]
    )
    inside = trial[(np.abs(y - trial @ x.T) <= 0.5).all(axis=1)]
    assert len(inside) > 1000
    for expression, seen in (
        (k_b / k_a, inside[:, 1] / inside[:, 0]),
        (3 * k_a + 4 * k_b, inside @ [3, 4]),
    ):
        it = guaranteed_quantity(found, quantity(expression, TWO), 0.05, own)
        width = it.high.value - it.low.value
        assert it.low.value <= seen.min() <= it.low.value + 0.05 * width
        assert it.high.value - 0.05 * width <= seen.max() <= it.high.value


def test_what_cannot_be_solved_for_is_found_by_iteration():
    q = quantity(sympy.sqrt(k_a) + k_a * k_b, TWO)
    inverse = next(i for i in q.inverses if i.psi == 0)
    assert inverse.closed is None
    theta = np.array([[0.3, 2.0], [5.0, 0.1], [1e-4, 3.0]])
    asked = theta.copy()
    asked[:, 0] = q.value(theta)
    np.testing.assert_allclose(q.solve(inverse, asked), theta[:, 0], rtol=1e-10)
    asked[:, 0] = -1.0
    assert np.isnan(q.solve(inverse, asked)).all()


def in_lockstep(seed: int) -> Measurements:
    """B/A varies by 2 %, both are measured with 2 %, the rate with 1 %."""
    rng = np.random.default_rng(seed)
    n = 12
    a = np.geomspace(0.3, 10, n)
    x = np.column_stack([a, 2 * a * (1 + 0.02 * rng.standard_normal(n))])
    y = (x @ [1.0, 0.5]) * (1 + 0.01 * rng.standard_normal(n))
    read = x * (1 + 0.02 * rng.standard_normal((n, 2)))
    errors = (
        source(0, n, relative=0.02),
        source(1, n, relative=0.02),
        source(OBSERVATION, n, relative=0.01),
    )
    return Measurements(y, read, errors, Scale.STATED, ("A", "B"))


@pytest.mark.parametrize("seed", [3, 5, 6])
def test_a_share_and_a_ratio_say_the_same_in_lockstep(seed: int):
    """share = 3 r/(2 + 3 r) is a monotone function of r = k_b/k_a: so are the ends of its intervals."""
    data = in_lockstep(seed)
    found = fit(bound(LINEAR, TWO, data.n), data)
    ratio = quantity_facts(found, quantity(k_b / k_a, TWO), 0.95)
    share = quantity_facts(found, quantity(3 * k_b / (2 * k_a + 3 * k_b), TWO), 0.95)
    for r, s in ((ratio.profile, share.profile), (ratio.reconciled, share.reconciled)):
        for end in ("low", "high"):
            x = getattr(r, end).value
            expected = 1.0 if np.isinf(x) else 3 * x / (2 + 3 * x)
            assert getattr(s, end).value == pytest.approx(expected, abs=2e-3)


def test_a_ratio_whose_denominator_is_zero_at_the_best_fit_has_a_lower_end():
    x = table(0.02).conditions
    noise = 0.05 * np.random.default_rng(2).standard_normal(len(x))
    y = x[:, 1] - 0.02 * x[:, 0] + noise  # k_a would be negative
    data = Measurements(y, x, (), Scale.ESTIMATED, ("A", "B"))
    other = fit(bound(LINEAR, TWO, data.n), data)
    assert other.theta[0] == 0
    facts = quantity_facts(other, quantity(k_b / k_a, TWO), 0.95, closeness=1e-9)
    back = quantity_facts(other, quantity(k_a / k_b, TWO), 0.95, closeness=1e-9)
    assert np.isinf(facts.value)
    assert facts.reconciled.high.end == "open"
    assert facts.reconciled.low.value == pytest.approx(1 / back.reconciled.high.value, rel=1e-6)
