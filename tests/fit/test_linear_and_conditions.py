"""Linear laws in badly conditioned tables, and fits with errors in the conditions.

Sources: certified values of the National Institute of Standards and Technology (Statistical
Reference Datasets, linear regression: Longley, Wampler1, Wampler3, Wampler5); Neter, Wasserman &
Kutner, Applied Linear Statistical Models, table 7.1 (body fat); York, Can. J. Phys. 44 (1966) 1079
with the standard errors of York et al., Am. J. Phys. 72 (2004) 367 (from memory; the figures are in
SOURCES.toml); User's Reference Guide for ODRPACK version 2.01, NISTIR 4834 (1992), p. 39.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from sympy import Rational, exp, sqrt

from discrim.evidence.intervals import standard_errors
from discrim.fit.fit import Fit, FitStatus, fit
from discrim.fit.measurements import Measurements
from tests.reference.outside import column, digits, measurements, model, predictor, symbols


def _linear(table: str, name: str = "") -> tuple[Fit, dict[str, Any]]:
    entry = model(table, name)
    constants = symbols(" ".join(entry["parameters"]))
    if "degree" in entry:
        (x,) = symbols("x")
        conditions: tuple[Any, ...] = (x,)
        law = sum(b * x**k for k, b in enumerate(constants))
    else:
        conditions = symbols(" ".join(entry["predictors"]))
        law = constants[0] + sum(b * s for b, s in zip(constants[1:], conditions, strict=True))
    c = np.column_stack([column(table, str(s)) for s in conditions])
    # starts from 3 for every constant: Wampler's are all 1
    bound = predictor(law, constants, conditions, len(c), scale=np.full(len(constants), 3.0))
    return fit(bound, measurements(column(table, entry["response"]), c)), entry


# Digits that double precision allows: numpy.linalg.lstsq on the same columns reaches 10.9, 9.6, 9.5
# and 5.8 of the certified estimates of the first four.
LINEAR = [
    ("nist_longley", "", 8.0, 10.0),
    ("nist_wampler1", "", 8.5, 0.0),
    ("nist_wampler3", "", 8.5, 10.0),
    ("nist_wampler5", "", 5.5, 10.0),
    ("bodyfat", "all", 9.0, 9.0),
    ("bodyfat", "triceps_thigh", 9.0, 9.0),
    ("bodyfat", "triceps", 9.0, 9.0),
]


@pytest.mark.parametrize(("table", "name", "estimates", "errors"), LINEAR)
def test_linear_laws(table: str, name: str, estimates: float, errors: float) -> None:
    found, entry = _linear(table, name)
    certified = entry["published"]
    exact = entry["refit"]  # rational arithmetic or the published value to more digits
    assert found.status is FitStatus.CONVERGED
    assert digits(found.theta, exact["estimates"]) >= estimates
    if table == "nist_wampler1":  # no error at all in these data
        assert found.rss < 1e-12
        assert np.all(standard_errors(found) < 1e-6)
        return
    assert digits(standard_errors(found), exact["standard_errors"]) >= errors
    assert digits(found.rss, exact["rss"]) >= 9
    if "estimates" in certified:
        least = 6.0 if table == "bodyfat" else estimates
        assert digits(found.theta, certified["estimates"]) >= least
    if "residual_sd" in certified:
        assert digits(np.sqrt(found.scale2), certified["residual_sd"]) >= 6.0


def _line(x_sd: np.ndarray, y_sd: np.ndarray) -> Fit:
    a, b, x = symbols("a b x")
    xs, ys = column("pearson_york", "x"), column("pearson_york", "y")
    data = measurements(ys, xs[:, None], sd=y_sd, conditions_sd=[x_sd], origin="measured")
    return fit(predictor(a + b * x, [a, b], [x], 10, scale=[5, 0.5]), data)


def _york(name: str) -> tuple[Fit, dict[str, Any]]:
    if name == "york_weights":
        x_sd = 1 / np.sqrt(column("pearson_york", "weight_x"))
        y_sd = 1 / np.sqrt(column("pearson_york", "weight_y"))
    else:
        x_sd = column("pearson_york", "sd_x_rounded")
        y_sd = column("pearson_york", "sd_y_rounded")
    return _line(x_sd, y_sd), model("pearson_york", name)


@pytest.mark.parametrize(
    ("name", "published_digits"), [("york_weights", 9.0), ("rounded_standard_deviations", 5.9)]
)
def test_line_with_errors_in_both_variables(name: str, published_digits: float) -> None:
    """Estimates, unscaled standard errors and weighted sum of squares. The published values of the
    rounded weights come from an iteration stopped at 6 digits."""
    found, entry = _york(name)
    exact = entry["refit"]
    assert found.status is FitStatus.CONVERGED
    assert digits(found.theta, entry["published"]["estimates"]) >= published_digits
    assert digits(found.theta, exact["estimates"]) >= 9
    assert digits(standard_errors(found), exact["unscaled_standard_errors"]) >= 9
    assert digits(found.objective, exact["weighted_ss"]) >= 9
    scaled = standard_errors(found) * np.sqrt(found.objective / found.degrees_of_freedom)
    assert digits(scaled, exact["standard_errors"]) >= 9
    if name == "york_weights":
        published = entry["published"]
        assert digits(standard_errors(found), published["unscaled_standard_errors"]) >= 8
        assert digits(found.objective / 8, published["reduced_chi_square"]) >= 9


@pytest.mark.parametrize("name", ["unweighted_y_on_x", "weighted_y_only"])
def test_line_with_errors_in_one_variable(name: str) -> None:
    """The same ten points with x exact: published solutions beside York's."""
    a, b, x = symbols("a b x")
    entry = model("pearson_york", name)
    sd = None if "weight" not in entry else 1 / np.sqrt(column("pearson_york", "weight_y"))
    data = measurements(column("pearson_york", "y"), column("pearson_york", "x")[:, None], sd=sd)
    found = fit(predictor(a + b * x, [a, b], [x], 10, scale=[5, 0.5]), data)
    assert digits(found.theta, entry["published"]["estimates"]) >= 8
    assert digits(found.theta, entry["refit"]["estimates"]) >= 9
    assert digits(found.rss, entry["refit"]["rss"]) >= 9


def test_reconciled_points_lie_where_york_puts_them() -> None:
    """At the solution the reconciled x is x + (b/w_x) e /(1/w_y + b^2/w_x) (York 1966, written out
    for uncorrelated errors): worked here from the fitted line."""
    found, _ = _york("york_weights")
    a, b = found.theta
    x, y = column("pearson_york", "x"), column("pearson_york", "y")
    vx, vy = 1 / column("pearson_york", "weight_x"), 1 / column("pearson_york", "weight_y")
    expected = x + b * vx * (y - a - b * x) / (vy + b**2 * vx)
    assert np.allclose(found.conditions[:, 0], expected, rtol=1e-9)


def _curve() -> tuple[Fit, dict[str, Any]]:
    b1, b2, b3, x = symbols("b1 b2 b3 x")
    entry = model("odrpack_explicit", "odr")
    law = b1 + b2 * (exp(b3 * x) - 1) ** 2
    free = column("odrpack_explicit", "x_free")  # three x values are exact: sd 0
    data = measurements(
        column("odrpack_explicit", "y"),
        column("odrpack_explicit", "x")[:, None],
        sd=1.0,
        conditions_sd=[free],
    )
    start = np.array(entry["starts"], float)
    return fit(predictor(law, [b1, b2, b3], [x], 12, scale=start[0]), data, near=start), entry


def test_curve_with_errors_in_some_conditions() -> None:
    found, entry = _curve()
    published, exact = entry["published"], entry["refit"]
    scaled = standard_errors(found) * np.sqrt(found.objective / 9)
    # the published iteration stopped at its own tolerance; the refit agrees with it to 5.7 and 5.4
    # digits
    assert digits(found.theta, published["estimates"]) >= 5.5
    assert digits(scaled, published["standard_errors"]) >= 5.2
    assert digits(found.theta, exact["estimates"]) >= 8.5
    assert digits(standard_errors(found), exact["unscaled_standard_errors"]) >= 8.5
    assert digits(found.objective, exact["weighted_ss"]) >= 9
    held = column("odrpack_explicit", "x_free") == 0
    assert np.array_equal(found.conditions[held, 0], column("odrpack_explicit", "x")[held])


def test_curve_against_an_independent_orthogonal_regression() -> None:
    """The same curve by the odrpack library (a port of the Fortran reference), tight tolerances."""
    odrpack = pytest.importorskip("odrpack")
    found, entry = _curve()
    x, y = column("odrpack_explicit", "x"), column("odrpack_explicit", "y")

    def law(xs: np.ndarray, b: np.ndarray) -> np.ndarray:
        return np.asarray(b[0] + b[1] * (np.exp(b[2] * xs) - 1) ** 2)

    other = odrpack.odr_fit(
        law,
        x,
        y,
        np.array(entry["starts"][0], float),
        fix_x=column("odrpack_explicit", "x_free") == 0,
        sstol=1e-14,
        partol=1e-14,
        maxit=500,
    )
    assert digits(found.theta, other.beta) >= 6
    assert digits(found.objective, other.sum_square) >= 8
    assert np.allclose(found.conditions[:, 0], other.xplusd, rtol=1e-6)


def test_errors_shared_by_runs_against_generalised_least_squares() -> None:
    """Set conditions with a shared error, law linear in the condition: V = sy^2 I + b^2 (s1^2 I +
    s2^2 J) is known once b is, and the fit must be the generalised least-squares solution for it
    (statsmodels GLS, iterated to its own fixed point)."""
    sm = pytest.importorskip("statsmodels.api")
    from dataclasses import replace

    from discrim.fit.measurements import source

    a, b, x = symbols("a b x")
    rng = np.random.default_rng(5)
    xs = np.linspace(1.0, 4.0, 9)
    ys = 0.4 + 1.7 * xs + 0.05 * rng.standard_normal(9)
    lots = np.array([0, 0, 0, 1, 1, 1, 2, 2, 2])
    plain = measurements(ys, xs[:, None], sd=0.05, conditions_sd=[0.02], origin="set")
    shared = source(0, 9, absolute=0.05, origin="set", groups=lots)
    data: Measurements = replace(plain, sources=(*plain.sources, shared))
    found = fit(predictor(a + b * x, [a, b], [x], 9), data)
    design = np.column_stack([np.ones(9), xs])
    slope = 1.7
    for _ in range(50):
        v = np.eye(9) * (0.05**2 + (slope * 0.02) ** 2)
        v = v + (slope * 0.05) ** 2 * (lots[:, None] == lots[None, :])
        other = sm.GLS(ys, design, sigma=v).fit()
        slope = float(other.params[1])
    assert digits(found.theta, other.params) >= 9
    # unscaled standard errors: the stated errors are the errors
    assert digits(standard_errors(found), np.sqrt(np.diag(other.normalized_cov_params))) >= 9
    assert found.objective == pytest.approx(float(other.wresid @ other.wresid), rel=1e-9)


def test_relative_errors_follow_the_fit() -> None:
    """Worked by hand here: one constant, y = k x, relative error r of the fitted value. The weights
    are 1/(r k x)^2, so the fitted k is the plain mean of y/x; with x = (1, 2, 4), y = (3, 5, 14): k
    = (3 + 5/2 + 7/2)/3 = 3."""
    from dataclasses import replace

    from discrim.fit.measurements import OBSERVATION, source

    k, x = symbols("k x")
    data = measurements(np.array([3.0, 5.0, 14.0]), np.array([[1.0], [2.0], [4.0]]), sd=1.0)
    data = replace(data, sources=(source(OBSERVATION, 3, relative=0.1),))
    found = fit(predictor(k * x, [k], [x], 3, lower=0.0), data)
    assert found.theta[0] == pytest.approx(3.0, rel=1e-10)
    # Q = sum ((y/x - k)/(0.1 k))^2 = (0 + 1/4 + 1/4)/0.09
    assert found.objective == pytest.approx(0.5 / 0.09, rel=1e-10)
    assert standard_errors(found)[0] == pytest.approx(float(0.3 / sqrt(3)), rel=1e-10)


def test_constants_reach_zero_and_leave_it() -> None:
    """Worked by hand here: y = a + b x with a, b >= 0. For y falling in x the best b is 0 and a the
    mean; for y = x - 1/2 the best a is 0 and b = sum xy / sum xx."""
    a, b, x = symbols("a b x")
    xs = np.array([1.0, 2.0, 3.0])
    falling = fit(
        predictor(a + b * x, [a, b], [x], 3, lower=0.0),
        measurements(np.array([3.0, 2.0, 1.0]), xs[:, None]),
    )
    assert falling.theta == pytest.approx([2.0, 0.0])
    assert falling.at_bound.tolist() == [False, True]
    rising = fit(
        predictor(a + b * x, [a, b], [x], 3, lower=0.0),
        measurements(xs - 0.5, xs[:, None]),
    )
    slope = Rational(1, 2) * 1 + Rational(3, 2) * 2 + Rational(5, 2) * 3
    assert rising.theta == pytest.approx([0.0, float(slope / 14)])
    assert rising.at_bound.tolist() == [True, False]
