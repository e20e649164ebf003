"""Criteria and nested tests against statsmodels, published tables and one simulation.

Sources: SOURCES.toml (Puromycin and others of Bates & Watts 1988; corrected AIC of Bezerra, Fraga &
Dias, Comput. Methods Programs Biomed. 109 (2013) 26; ethylene hydrogenation of Fogler). General-
purpose reference: statsmodels OLS, compare_f_test.
"""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.adequacy import lack_of_fit
from discrim.evidence.criteria import Criteria, criteria, weights
from discrim.evidence.curve import Curve
from discrim.evidence.score import p_one_sided, score
from discrim.evidence.several import several
from discrim.evidence.term_tests import nested_f
from discrim.fit.engine import solve
from discrim.fit.fit import Fit, fit
from discrim.fit.problem import Problem
from tests.reference.outside import (
    column,
    comparison,
    digits,
    labels,
    measurements,
    model,
    predictor,
    sources,
    symbols,
)

conc, treated = symbols("conc treated")
Vm, K, dV, dK, h = symbols("Vm K dV dK h")
x1, x2, x3 = symbols("x1 x2 x3")
c0, c1, c2, c3 = symbols("c0 c1 c2 c3")

PUROMYCIN: dict[str, tuple[Any, tuple[Any, ...]]] = {
    "both_separate": (
        (Vm + dV * treated) * conc / (K + dK * treated + conc),
        (Vm, K, dV, dK),
    ),
    "both_common_K": ((Vm + dV * treated) * conc / (K + conc), (Vm, dV, K)),
    "both_common_Vm": (Vm * conc / (K + dK * treated + conc), (Vm, K, dK)),
    "both_common": (Vm * conc / (K + conc), (Vm, K)),
    "treated": (Vm * conc / (K + conc), (Vm, K)),
    "treated_hill": (Vm * conc**h / (K**h + conc**h), (Vm, K, h)),
    "untreated": (Vm * conc / (K + conc), (Vm, K)),
    "untreated_hill": (Vm * conc**h / (K**h + conc**h), (Vm, K, h)),
}


@cache
def _puromycin(name: str) -> Fit:
    law, constants = PUROMYCIN[name]
    state = labels("puromycin", "state")
    c = np.column_stack([column("puromycin", "conc"), (state == "treated").astype(float)])
    y = column("puromycin", "rate")
    if not name.startswith("both"):
        rows = state == name.split("_")[0]
        c, y = c[rows], y[rows]
    entry = model("puromycin", name)
    start = np.array(entry["starts"][:1], float)
    bound = predictor(law, constants, (conc, treated), len(y), scale=start[0])
    return fit(bound, measurements(y, c), near=start)


@pytest.mark.parametrize("name", PUROMYCIN)
def test_puromycin_fits(name: str) -> None:
    found, entry = _puromycin(name), model("puromycin", name)
    assert digits(found.theta, entry["refit"]["estimates"]) >= 5
    assert digits(found.rss, entry["refit"]["rss"]) >= 9
    if "published" in entry:
        assert digits(found.theta, entry["published"]["estimates"]) >= 5


@pytest.mark.parametrize("name", [c["name"] for c in sources()["puromycin"]["comparisons"]])
def test_puromycin_extra_sum_of_squares(name: str) -> None:
    entry = comparison("puromycin", name)
    full, reduced = _puromycin(entry["full"]), _puromycin(entry["reduced"])
    found = nested_f(full, reduced, edge=False)
    assert found is not None
    exact = entry["refit"]
    assert found.df == (exact["df1"], exact["df2"])
    assert digits(found.statistic, exact["F"]) >= 7
    assert digits(found.p, exact["p"]) >= 6
    if "published" in entry:
        assert digits(found.statistic, entry["published"]["F"]) >= 4
        assert found.p == pytest.approx(entry["published"]["p"], abs=6e-5)
    assert found.p_one_sided == found.p
    on_edge = nested_f(full, reduced, edge=True)
    assert on_edge is not None
    halved = found.df[0] == 1
    assert on_edge.p_one_sided == pytest.approx(found.p / 2 if halved else found.p)


def _criteria(f: Fit) -> Criteria:
    return criteria(data="one", n=f.n, p=f.p, objective=f.rss, scale_known=False)


@pytest.mark.parametrize("name", PUROMYCIN)
def test_criteria_of_fits(name: str) -> None:
    """The variance counted as a constant: aic_full of SOURCES.toml. Its aic and aicc leave a
    constant n ln(2 pi) + n out (and aic the variance), which differences do not see."""
    found = _criteria(_puromycin(name))
    entry = model("puromycin", name)["refit"]
    n = entry["n"]
    rest = n * (np.log(2 * np.pi) + 1)
    assert found.aic == pytest.approx(entry["aic_full"], rel=1e-9)
    assert found.aic - rest - 2 == pytest.approx(entry["aic"], rel=1e-8)
    assert found.aicc - rest == pytest.approx(entry["aicc"], rel=1e-8)
    assert found.bic - rest - np.log(n) == pytest.approx(entry["bic"], rel=1e-8)


def test_criteria_without_residual_degrees_of_freedom() -> None:
    """Four points, two constants and the variance: AICc is infinite (silane deposition)."""
    entry = model("silane_deposition", "saturation")["refit"]
    found = criteria(data="one", n=4, p=2, objective=entry["rss"], scale_known=False)
    assert found.aicc == np.inf
    assert found.aic == pytest.approx(entry["aic_full"], rel=1e-8)


def test_published_corrected_aic() -> None:
    entry = sources()["aicc_arithmetic"]["comparisons"][0]
    names = labels("aicc_arithmetic", "model")
    found = {
        str(name): criteria(data="one", n=int(n), p=int(p), objective=sse, scale_known=False)
        for name, n, p, sse in zip(
            names,
            column("aicc_arithmetic", "n"),
            column("aicc_arithmetic", "p"),
            column("aicc_arithmetic", "sse"),
            strict=True,
        )
    }
    rest = 105 * (np.log(2 * np.pi) + 1)
    for name in names:
        assert found[name].aicc - rest == pytest.approx(entry["refit"][name], abs=6e-4)
        if name in entry["published"]:
            assert found[name].aicc - rest == pytest.approx(entry["published"][name], abs=0.051)
    pair = [found["mixed"], found["competitive"]]
    share = weights(pair, [True, True])[0]
    assert share == pytest.approx(entry["refit"]["probability_mixed_over_competitive"], abs=1e-6)
    assert share == pytest.approx(
        entry["published"]["probability_mixed_over_competitive"], abs=5e-3
    )


def test_weights_refuse_different_data() -> None:
    a = criteria(data="one", n=9, p=2, objective=1.0, scale_known=False)
    b = criteria(data="another", n=9, p=2, objective=1.0, scale_known=False)
    with pytest.raises(ValueError, match="criteria from different tables or errors"):
        weights([a, b], [True, True])
    assert weights([a, b], [True, False]) == [1.0, 0.0]


# ---- linear laws with exact conditions: everything has a textbook counterpart ----------------


def _body_fat(names: tuple[str, ...]) -> tuple[np.ndarray, np.ndarray]:
    c = np.column_stack([column("bodyfat", s) for s in names])
    return c, column("bodyfat", "bodyfat")


@cache
def _linear(q: int) -> tuple[Fit, Any]:
    """Body fat with the first q of three measures, and statsmodels' fit of the same."""
    sm = pytest.importorskip("statsmodels.api")
    c, y = _body_fat(("triceps", "thigh", "midarm"))
    constants, conditions = (c0, c1, c2, c3)[: q + 1], (x1, x2, x3)
    law = c0 + sum(k * s for k, s in zip(constants[1:], conditions, strict=False))
    found = fit(predictor(law, constants, conditions, len(y)), measurements(y, c))
    return found, sm.OLS(y, sm.add_constant(c[:, :q])).fit()


@pytest.mark.parametrize("q", [1, 2, 3])
def test_criteria_against_statsmodels(q: int) -> None:
    found, other = _linear(q)
    mine = _criteria(found)
    # statsmodels does not count the variance
    assert digits(mine.log_likelihood, other.llf) >= 10
    assert digits(mine.aic - 2, other.aic) >= 10
    assert digits(mine.bic - np.log(20), other.bic) >= 10
    tools = pytest.importorskip("statsmodels.tools.eval_measures")
    assert digits(mine.aicc, tools.aicc(other.llf, 20, q + 2)) >= 10


@pytest.mark.parametrize(("small", "large"), [(1, 2), (1, 3), (2, 3)])
def test_nested_f_against_statsmodels(small: int, large: int) -> None:
    (a, a_other), (b, b_other) = _linear(small), _linear(large)
    f, p, df = b_other.compare_f_test(a_other)
    found = nested_f(b, a, edge=False)
    assert found is not None
    assert found.df == (int(df), b.degrees_of_freedom)
    assert digits(found.statistic, f) >= 10
    assert digits(found.p, p) >= 10


@pytest.mark.parametrize("q", [1, 2, 3])
@pytest.mark.parametrize("value", [0.0, 0.7])
def test_score_is_the_extra_sum_of_squares_for_linear_laws(q: int, value: float) -> None:
    """With exact conditions and unknown scale the F form of the score, (K/1)/((N - p_l - K)/(N -
    p)), is the extra-sum-of-squares F of a linear law; signed, its t. Here of "constant = value" in
    statsmodels.
    """
    found, other = _linear(q)
    for j in range(q + 1):
        at = Curve(found.problem, found.theta, j, found.jacobian).at(np.array([value]))
        restriction = np.zeros((1, q + 1))
        restriction[0, j] = 1.0
        test = other.f_test((restriction, [value]))
        t = float(at.score.raw[0])
        assert digits(t**2, float(np.squeeze(test.fvalue))) >= 10
        assert np.sign(t) == np.sign(other.params[j] - value)
        p = 2 * p_one_sided(abs(float(at.z[0])))
        assert digits(p, float(test.pvalue)) >= 10


@pytest.mark.parametrize(("small", "large"), [(1, 2), (1, 3), (2, 3)])
def test_extra_sum_of_squares_is_the_reconciled_test_for_linear_laws(
    small: int, large: int
) -> None:
    """Two ways that share no arithmetic: F of two fits, and K of the larger law at the restricted
    optimum, for one constant and for two at once; the p-value of both is that of statsmodels."""
    (a, a_other), (b, b_other) = _linear(small), _linear(large)
    tested = list(range(small + 1, large + 1))
    start = np.insert(a.theta, small + 1, np.zeros(len(tested)))[None]
    held = np.isin(np.arange(b.p), tested)
    restricted = solve(b.problem, start, fixed=held)
    z, _ = several(b.problem, restricted, tested)
    two_fits = nested_f(b, a, edge=False)
    assert two_fits is not None
    assert digits(2 * p_one_sided(float(z[0])), two_fits.p) >= 10
    assert digits(2 * p_one_sided(float(z[0])), b_other.compare_f_test(a_other)[1]) >= 10
    if len(tested) == 1:
        t = float(score(b.problem, restricted, tested[0]).raw[0])
        assert digits(t**2, two_fits.statistic) >= 10


def test_score_with_stated_errors_is_the_wald_z_for_linear_laws() -> None:
    c, y = _body_fat(("triceps", "thigh", "midarm"))
    law = c0 + c1 * x1 + c2 * x2 + c3 * x3
    found = fit(predictor(law, (c0, c1, c2, c3), (x1, x2, x3), 20), measurements(y, c, sd=2.0))
    _, other = _linear(3)
    for j in range(4):
        at = Curve(found.problem, found.theta, j, found.jacobian).at(np.zeros(1))
        z = other.params[j] / np.sqrt(other.normalized_cov_params[j, j]) / 2.0
        assert digits(float(at.z[0]), z) >= 9
        assert digits(at.objective[0] - found.objective, z**2) >= 7


def test_lack_of_fit_by_hand() -> None:
    """Worked by hand here: y = k x; runs (1; 1.0, 1.2), (2; 1.9, 2.1), (3; 3.6, 3.4).

    Pure error: 2 * 0.1^2 three times, 0.06 with 3 degrees of freedom. k = sum xy / sum xx =
    (2.2 + 8.0 + 21.0)/28 = 31.2/28; rss = sum yy - k * 31.2 = 34.98 - 31.2^2/28. Lack of fit: rss -
    0.06 with 3 - 1 degrees of freedom.
    """
    from dataclasses import replace

    y = np.array([1.0, 1.2, 1.9, 2.1, 3.6, 3.4])
    x = np.array([[1.0], [1.0], [2.0], [2.0], [3.0], [3.0]])
    data = replace(measurements(y, x), replicate_of=np.array([0, 0, 1, 1, 2, 2]))
    found = fit(predictor(c1 * x1, (c1,), (x1,), 6), data)
    test = lack_of_fit(found)
    assert test is not None
    lack = 34.98 - 31.2**2 / 28 - 0.06
    assert test.df == (2, 3)
    assert test.statistic == pytest.approx((lack / 2) / (0.06 / 3), rel=1e-9)
    assert test.p == pytest.approx(stats.f.sf(test.statistic, 2, 3), rel=1e-9)


def test_half_p_on_the_edge() -> None:
    """Self & Liang (J. Am. Stat. Assoc. 82 (1987) 605, from memory): with one constant on the edge
    of its range and the others inside, the statistic is half 0 and half chi-squared with one degree
    of freedom. 4 000 tables of r = k_A A + k_B B with k_B = 0, stated errors; share below 0.05 of
    half the two- sided p.
    """
    rng = np.random.default_rng(11)
    n, tables = 8, 4000
    a = np.linspace(1.0, 4.0, n)
    b = np.array([2.0, 1.0, 4.0, 3.0, 1.0, 4.0, 2.0, 3.0])
    y = 3.0 * a + 0.3 * rng.standard_normal((tables, n))
    c = np.broadcast_to(np.column_stack([a, b]), (tables, n, 2))
    law = predictor(c1 * x1 + c2 * x2, (c1, c2), (x1, x2), n, lower=0.0)
    problem = Problem(law, measurements(y, c, sd=0.3))
    start = np.tile([3.0, 0.1], (tables, 1))
    free = solve(problem, start)
    held = solve(problem, start * [1.0, 0.0], fixed=np.tile([False, True], (tables, 1)))
    rise = held.objective - free.objective
    at_zero = free.theta[:, 1] == 0.0
    # half of the tables put the constant on its bound, exactly
    assert stats.binomtest(int(at_zero.sum()), tables, 0.5).pvalue > 0.001
    assert np.allclose(rise[at_zero], 0.0, atol=1e-9)
    half = np.where(at_zero, 1.0, stats.chi2.sf(rise, 1) / 2)
    rejected = int((half < 0.05).sum())
    assert stats.binomtest(rejected, tables, 0.05).pvalue > 0.001
    # where the estimate is above zero, the two-sided p is chi-squared
    inside = stats.chi2.sf(rise[~at_zero], 1)
    assert stats.kstest(inside, "uniform").pvalue > 0.001
