"""Residual diagnostics against statsmodels on exact linear laws, published examples, closed forms.

Sources: statsmodels (OLSInfluence, het_breuschpagan, normal_ad, runstest_1samp, compare_f_test;
general-purpose reference). Cook's distances of the Longley data: R. D. Cook, Technometrics 19 (1977)
15 (SOURCES.toml; figures from memory). Runs test: mean number of runs
2 n1 n2/(n1 + n2) + 1 of Wald & Wolfowitz (1940). Holm's example: p-values worked by hand.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats
from statsmodels.sandbox.stats.runs import runstest_1samp
from statsmodels.stats.diagnostic import het_breuschpagan, normal_ad
from statsmodels.stats.multitest import multipletests
from statsmodels.stats.outliers_influence import OLSInfluence

from discrim.evidence.adequacy import lack_of_fit, replicate_scatter
from discrim.evidence.patterns import (
    anderson_darling,
    count_runs,
    draws,
    equal_variance,
    explained,
    normality,
    projected,
    runs_of_signs,
)
from discrim.evidence.residuals import Residuals, influence, residuals_of, whitened
from discrim.evidence.trends import added, groups, holm, scores, trend
from discrim.fit.engine import solve
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem
from tests.reference.outside import column, digits, measurements, predictor, sources, symbols

x1, x2, x3, x4, x5, x6 = symbols("x1 x2 x3 x4 x5 x6")
b0, b1, b2, b3, b4, b5, b6 = symbols("b0 b1 b2 b3 b4 b5 b6")


def linear_fit(seed: int = 1, n: int = 20, sd: float | None = None) -> tuple[Fit, np.ndarray]:
    """A linear law on simulated numbers, and its design matrix."""
    rng = np.random.default_rng(seed)
    c = rng.uniform(1, 5, (n, 2))
    y = 3 + 2 * c[:, 0] + 0.5 * c[:, 1] + 0.3 * rng.standard_normal(n)
    law = predictor(b0 + b1 * x1 + b2 * x2, (b0, b1, b2), (x1, x2), n)
    return fit(law, measurements(y, c, sd=sd)), np.column_stack([np.ones(n), c])


def of(f: Fit) -> Residuals:
    found = residuals_of(f)
    assert found is not None
    return found


@pytest.mark.parametrize("sd", [None, 0.3])
def test_influence_is_that_of_statsmodels(sd: float | None) -> None:
    f, design = linear_fit(sd=sd)
    ols = sm.OLS(f.data.y, design).fit()
    outside = OLSInfluence(ols)
    found = influence(of(f))
    assert digits(found.leverage, outside.hat_matrix_diag) >= 10
    assert digits(found.studentised, outside.resid_studentized_external) >= 10
    assert digits(found.cooks_distance, outside.cooks_distance[0]) >= 10
    assert found.p_largest is not None
    worst = ols.outlier_test(method="bonferroni")[:, 2].min()
    assert found.p_largest == pytest.approx(worst, rel=1e-9)


def test_cooks_distances_of_longley() -> None:
    names = ("x1", "x2", "x3", "x4", "x5", "x6")
    c = np.column_stack([column("nist_longley", name) for name in names])
    # centred and scaled: the influence of a run does not depend on it
    c = (c - c.mean(axis=0)) / c.std(axis=0)
    law = b0 + b1 * x1 + b2 * x2 + b3 * x3 + b4 * x4 + b5 * x5 + b6 * x6
    pred = predictor(law, (b0, b1, b2, b3, b4, b5, b6), (x1, x2, x3, x4, x5, x6), 16)
    found = influence(of(fit(pred, measurements(column("nist_longley", "y"), c))))
    year = column("nist_longley", "x6")
    first, second = np.argsort(-found.cooks_distance)[:2]
    published = sources()["nist_longley"]["influence"]
    assert [year[first], year[second]] == published["years"]
    largest = found.cooks_distance[[first, second]]
    assert largest == pytest.approx(published["cooks_distance"], abs=0.005)


def test_influence_with_shared_errors_is_that_of_leaving_a_run_out() -> None:
    """Generalised least squares with an error shared by groups of four: each run left out in turn."""
    n = 12
    rng = np.random.default_rng(7)
    c = rng.uniform(1, 5, (n, 1))
    stock = np.repeat([0, 1, 2], 4)
    y = 2 * c[:, 0] + 1 + rng.standard_normal(n) + np.repeat(rng.standard_normal(3), 4)
    data = Measurements(
        y,
        c,
        (
            source(OBSERVATION, n, absolute=1.0),
            source(OBSERVATION, n, absolute=1.0, groups=stock),
        ),
        Scale.STATED,
        ("x",),
    )
    law = predictor(b0 + b1 * x1, (b0, b1), (x1,), n)
    found = influence(of(fit(law, data)))
    v = np.eye(n) + (stock[:, None] == stock[None, :])
    design = np.column_stack([np.ones(n), c])
    whole = sm.GLS(y, design, sigma=v).fit()
    information = design.T @ np.linalg.solve(v, design)
    for i in range(n):
        rest = np.arange(n) != i
        without = sm.GLS(y[rest], design[rest], sigma=v[np.ix_(rest, rest)]).fit()
        shift = whole.params - without.params
        assert found.cooks_distance[i] == pytest.approx(
            shift @ information @ shift / (2 * whole.scale), rel=1e-9
        )
        alone = np.column_stack([design, ~rest])
        t = sm.GLS(y, alone, sigma=v).fit().tvalues[-1]
        assert found.studentised[i] == pytest.approx(t, rel=1e-9)


def test_shared_errors_do_not_depend_on_the_order_of_the_table() -> None:
    """V, residuals and sensitivities in another order: the same residuals in that order."""
    n = 10
    rng = np.random.default_rng(8)
    stock = np.arange(n) % 3
    v = np.diag(rng.uniform(1, 2, n)) + 2.0 * (stock[:, None] == stock[None, :])
    e, g = rng.standard_normal(n), rng.standard_normal((n, 2))
    first: list[np.ndarray] = []
    second: list[np.ndarray] = []
    for order, out in ((np.arange(n), first), (rng.permutation(n), second)):
        lower = np.linalg.cholesky(v[np.ix_(order, order)])
        found = whitened(
            np.linalg.solve(lower, e[order]), np.linalg.solve(lower, g[order]), e[order],
            v[np.ix_(order, order)],
        )  # fmt: skip
        assert found is not None
        back = np.argsort(order)
        out += [found.r[back], found.outside(np.eye(n))[np.ix_(back, back)]]
        # L r is R R^-1 e less what the sensitivities take up
        bare = whitened(np.linalg.solve(lower, e[order]), g[order] * 0, e, v[np.ix_(order, order)])
        assert bare is not None
        assert bare.root @ bare.r == pytest.approx(e[order], rel=1e-9)
    assert second[0] == pytest.approx(first[0], rel=1e-9)
    assert second[1] == pytest.approx(first[1], abs=1e-12)


def test_a_run_that_alone_fixes_a_constant_has_leverage_one() -> None:
    n = 9
    rng = np.random.default_rng(2)
    c = np.column_stack([np.arange(1.0, n + 1), np.r_[np.zeros(n - 1), 1.0]])
    y = 2 * c[:, 0] + c[:, 1] + 0.1 * rng.standard_normal(n)
    found = influence(of(fit(predictor(b1 * x1 + b2 * x2, (b1, b2), (x1, x2), n),
                             measurements(y, c))))  # fmt: skip
    assert found.leverage[-1] == pytest.approx(1.0)
    assert np.isnan(found.studentised[-1])
    assert found.p_largest is not None


def test_added_direction_is_the_extra_sum_of_squares() -> None:
    f, design = linear_fit()
    more = np.column_stack([design[:, 1] ** 2, design[:, 2] ** 2])
    base = sm.OLS(f.data.y, design).fit()
    larger = sm.OLS(f.data.y, np.column_stack([design, more])).fit()
    statistic, p, _ = larger.compare_f_test(base)
    found = added(of(f), more)
    assert found is not None
    assert found.df == (2, f.n - 5)
    assert digits(found.statistic, statistic) >= 10
    assert digits(found.p, p) >= 9


def test_trend_is_the_t_test_of_predictions_times_ranks() -> None:
    f, design = linear_fit()
    x = np.random.default_rng(5).permutation(f.n).astype(float)
    larger = sm.OLS(f.data.y, np.column_stack([design, f.values * (2 * x - 19) / 19])).fit()
    found = trend(of(f), 100.0 * np.exp(x))
    assert found is not None
    assert digits(found.statistic, larger.tvalues[-1] ** 2) >= 9
    assert found.slope == np.sign(larger.params[-1])


def test_groups_are_tested_with_one_factor_each() -> None:
    f, design = linear_fit()
    lot = np.arange(f.n) % 4
    dummies = np.column_stack([f.values * (lot == g) for g in range(3)])
    # a common factor is in the law already: predictions are a combination of its terms
    larger = sm.OLS(f.data.y, np.column_stack([design, dummies])).fit()
    statistic, p, _ = larger.compare_f_test(sm.OLS(f.data.y, design).fit())
    found = groups(of(f), lot)
    assert found is not None
    assert found.df[0] == 3
    assert digits(found.statistic, statistic) >= 9
    assert digits(found.p, p) >= 8


def test_what_the_law_takes_up_already_is_no_trend() -> None:
    f, design = linear_fit()
    assert added(of(f), design) is None
    assert trend(of(f), np.full(f.n, 3.0)) is None


def test_scores_are_ranks_with_ties_in_the_middle() -> None:
    assert scores(np.array([3.0, 1.0, 2.0])) == pytest.approx([1.0, -1.0, 0.0])
    assert scores(np.array([1.0, 5.0, 5.0, 9.0])) == pytest.approx([-1.0, 0.0, 0.0, 1.0])


def test_holm_is_that_of_statsmodels() -> None:
    p = [0.04, 0.001, 0.3, 0.02, 0.02]
    assert holm(p) == pytest.approx(list(multipletests(p, method="holm")[1]), rel=1e-12)
    assert holm([0.01, 0.04, 0.03]) == pytest.approx([0.03, 0.06, 0.06])  # by hand


def test_statistics_are_those_of_statsmodels() -> None:
    f, _ = linear_fit()
    z = scores(f.values)
    lm = het_breuschpagan(f.residual, sm.add_constant(z), robust=True)[0]
    assert digits(explained(f.residual**2, z), lm) >= 10
    # of absolute values: what it squares are their roots
    lm = het_breuschpagan(np.sqrt(np.abs(f.residual)), sm.add_constant(z), robust=True)[0]
    assert digits(explained(np.abs(f.residual), z), lm) >= 10
    null = projected(of(f), draws(f.n, 1))
    found = equal_variance(of(f), z, null)
    assert found is not None
    assert digits(found.statistic, lm) >= 9
    assert digits(anderson_darling(f.residual), normal_ad(f.residual)[0]) >= 10


def test_runs_are_counted_as_statsmodels_counts_them() -> None:
    """Its z from the count, by mean and variance of Wald & Wolfowitz."""
    r = np.random.default_rng(3).standard_normal(40)
    up, down = (r > 0).sum(), (r <= 0).sum()
    mean = 2 * up * down / 40 + 1
    variance = (mean - 1) * (mean - 2) / 39
    z = (int(count_runs(r)) - mean) / np.sqrt(variance)
    assert z == pytest.approx(runstest_1samp(r, cutoff=0.0, correction=False)[0], rel=1e-10)


def test_reference_of_runs_without_constants_is_the_table() -> None:
    """With nothing fitted the changes of random signs are binomial, n - 1 of one half each."""
    n = 16
    null = draws(n, 1, 40_000)
    plain = Residuals(null[0], np.zeros((n, 0)), np.ones(n), np.eye(n), np.ones(n))
    found = runs_of_signs(plain, np.arange(n), projected(plain, null))
    assert found is not None
    assert found.expected == pytest.approx((n - 1) / 2 + 1, abs=0.03)
    for k in range(1, 8):
        alike = np.where(np.arange(n) * k // n % 2 == 0, 1.0, -1.0)
        few = Residuals(alike, np.zeros((n, 0)), np.ones(n), np.eye(n), np.ones(n))
        seen = runs_of_signs(few, np.arange(n), projected(few, null))
        assert seen is not None
        assert seen.statistic == k
        exact = stats.binom.cdf(k - 1, n - 1, 0.5)
        assert seen.p == pytest.approx(exact, abs=3 * np.sqrt(exact / 40_000) + 5e-5)


def test_patterns_are_found_where_they_are() -> None:
    """Simulated: slow waves, scatter that grows, one far run; p small, and not small without."""
    n = 40
    x = np.linspace(1, 10, n)
    rng = np.random.default_rng(4)
    noise = rng.standard_normal(n)
    law = predictor(b0 + b1 * x1, (b0, b1), (x1,), n)

    def looked_at(errors: np.ndarray) -> tuple[float, float, float, float]:
        base = of(fit(law, measurements(3 + x + errors, x[:, None])))
        null = projected(base, draws(n, 1))
        runs = runs_of_signs(base, np.arange(n), null)
        even = equal_variance(base, scores(base.values), null)
        normal = normality(base, null)
        far = influence(base).p_largest
        assert runs is not None
        assert even is not None
        assert normal is not None
        assert far is not None
        return runs.p, even.p, normal.p, far

    quiet = looked_at(noise)
    assert min(quiet) > 0.05
    assert looked_at(np.sin(x) * 3 + noise)[0] < 0.01
    assert looked_at(noise * x**2)[1] < 0.01
    one_off = noise + np.where(np.arange(n) == 7, 12.0, 0.0)
    assert looked_at(one_off)[2] < 0.01
    assert looked_at(one_off)[3] < 1e-6


def test_rates_of_false_alarms() -> None:
    """Simulated, 400 linear laws with five constants on 16 runs: each test at its level of 5 %."""
    n, count = 16, 400
    rng = np.random.default_rng(9)
    c = rng.uniform(1, 5, (n, 4))
    design = np.column_stack([np.ones(n), c])
    q = np.linalg.qr(design)[0]
    values = design @ np.array([3.0, 2.0, 1.0, 1.0, 0.5])
    order = rng.permutation(n)
    null = draws(n, 1)
    hits = np.zeros(5)
    for _ in range(count):
        e = rng.standard_normal(n)
        base = Residuals(e - q @ (q.T @ e), q, values, np.eye(n), np.ones(n))
        drawn = projected(base, null)
        found = [
            trend(base, order.astype(float)),
            groups(base, order % 3),
            runs_of_signs(base, order, drawn),
            equal_variance(base, scores(values), drawn),
            normality(base, drawn),
        ]
        hits += [f is not None and f.p <= 0.05 for f in found]
    # two binomial standard errors and a half above 5 %
    assert (hits / count <= 0.05 + 2.5 * np.sqrt(0.05 * 0.95 / count)).all(), hits / count
    assert hits[0] / count > 0.02
    assert hits[1] / count > 0.02


@pytest.mark.parametrize("bent", [False, True])
def test_rates_of_false_alarms_in_lockstep_with_errors_in_the_conditions(bent: bool) -> None:
    """Simulated, 300 tables of 12 runs, r = k [A] + L [B] or k K [A]/(1 + K [A] + L [B]), with
    [B] = 2.5 [A] within 0.5 %, both measured with 2 %: trends together at 5 %, each pattern at 5 %."""
    n, count = 12, 300
    rng = np.random.default_rng(12)
    a = rng.permutation(np.linspace(1.0, 10.0, n))
    true = np.column_stack([a, 2.5 * a * (1 + 0.005 * rng.standard_normal(n))])
    theta = np.array([3.0, 0.3, 0.2]) if bent else np.array([1.0, 0.4])
    law = b0 * b1 * x1 / (1 + b1 * x1 + b2 * x2) if bent else b0 * x1 + b1 * x2
    names = (b0, b1, b2) if bent else (b0, b1)
    pred = predictor(law, names, (x1, x2), n, scale=theta, lower=0.0, starts=theta[None])
    exact = pred.predict(theta[None], true).values[0]
    normal = draws(n, 1)
    hits = np.zeros(4)
    y = exact * (1 + 0.02 * rng.standard_normal((count, n)))
    c = true * (1 + 0.02 * rng.standard_normal((count, n, 2)))
    errors = (*(source(j, n, relative=0.02) for j in (0, 1)),
              source(OBSERVATION, n, relative=0.02))  # fmt: skip
    problem = Problem(pred, Measurements(y, c, errors, Scale.STATED, ("A", "B")))
    solved = solve(problem, np.tile(theta, (count, 1)))
    for s in range(count):
        free = solved.jacobian[s][:, solved.theta[s] > 0]
        base = whitened(solved.residual[s], free, solved.values[s], solved.covariance[s])
        assert base is not None
        null = projected(base, normal)
        order = rng.permutation(n)
        trends = [trend(base, x) for x in (*c[s].T, order.astype(float))]
        patterns = [
            runs_of_signs(base, order, null),
            equal_variance(base, scores(base.values), null),
            normality(base, null),
        ]
        together = min(holm([t.p for t in trends if t is not None]))
        hits += [together <= 0.05, *(p is not None and p.p <= 0.05 for p in patterns)]
    assert (hits / count <= 0.05 + 2.5 * np.sqrt(0.05 * 0.95 / count)).all(), hits / count


def test_errors_in_the_conditions_are_in_the_whitening() -> None:
    """A straight line with errors in x and y: leverages sum to the two constants."""
    n = 12
    rng = np.random.default_rng(6)
    true = np.linspace(1, 6, n)
    c = (true + 0.1 * rng.standard_normal(n))[:, None]
    y = 1 + 2 * true + 0.2 * rng.standard_normal(n)
    data = measurements(y, c, sd=0.2, conditions_sd=[0.1])
    found = fit(predictor(b0 + b1 * x1, (b0, b1), (x1,), n), data)
    assert influence(of(found)).leverage.sum() == pytest.approx(2.0, rel=1e-9)


def test_replicates_are_held_against_the_stated_error() -> None:
    """Four pairs that differ by 2 sqrt(2): a pooled standard deviation of 2, worked by hand."""
    d = 2 * np.sqrt(2)
    c = np.repeat([1.0, 2.0, 3.0, 4.0], 2)[:, None]
    y = 10 * c[:, 0] + np.tile([0.0, d], 4)
    data = replace(measurements(y, c, sd=1.0), replicate_of=np.repeat(np.arange(4), 2))
    found = fit(predictor(b0 + b1 * x1, (b0, b1), (x1,), 8), data)
    scatter = replicate_scatter(found)
    assert scatter is not None
    assert (scatter.ratio, scatter.df) == (pytest.approx(2.0), 4)
    # chi-squared of 16 on 4: P = exp(-8) (1 + 8), closed form of an even number of degrees
    assert scatter.p_more == pytest.approx(np.exp(-8.0) * 9.0, rel=1e-9)
    assert scatter.p_less == pytest.approx(1.0 - np.exp(-8.0) * 9.0, rel=1e-9)
    lack = lack_of_fit(found)
    assert lack is not None
    assert lack.statistic == pytest.approx(0.0, abs=1e-9)


def test_nothing_to_say_where_constants_use_up_the_runs() -> None:
    f, _ = linear_fit(n=3)
    assert residuals_of(f) is None
