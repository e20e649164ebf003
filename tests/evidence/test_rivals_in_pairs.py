"""Rivals two at a time: against statsmodels and closed forms on linear laws; sizes by simulation.

Simulated tables drawn with a seed.
"""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats
from statsmodels.stats.diagnostic import compare_cox

from discrim.evidence.mimic import mimics
from discrim.evidence.pairs import pairs, vuong
from discrim.evidence.quadratic import weighted_chi2_upper
from discrim.evidence.rivals import apart, directions, standing, standing_in_studies
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from tests.reference.outside import predictor, symbols

k, h, K, A, B, C = symbols("k h K A B C")


def linear_pair(n: int, seed: int, extra: float = 0.0) -> tuple[np.ndarray, np.ndarray, list[Fit]]:
    """y from A and C (and ``extra`` of B), fitted by A and C, and by B and C, the variance unknown."""
    rng = np.random.default_rng(seed)
    x = rng.standard_normal((n, 3))
    x[:, 1] = 0.6 * x[:, 0] + 0.8 * x[:, 1]
    y = x[:, 0] + x[:, 2] + extra * x[:, 1] + rng.standard_normal(n)
    data = Measurements(y, x, (), Scale.ESTIMATED, ("A", "B", "C"))
    laws = [predictor(k * a + h * C, (k, h), (A, B, C), n) for a in (A, B)]
    return x, y, [fit(law, data) for law in laws]


def cox(y: np.ndarray, x: np.ndarray, z: np.ndarray) -> float:
    """Normal statistic of statsmodels, positive where the rival gains more than it should."""
    return -float(compare_cox(sm.OLS(y, x).fit(), sm.OLS(y, z).fit(), result_object=False)[0])


@pytest.mark.parametrize("seed", [0, 1])
def test_cox_on_linear_laws(seed: int) -> None:
    """statsmodels `compare_cox`: the same statistic, and its normal p-value within the simulation error
    and what a normal reference is off by at 400 runs."""
    x, y, fits = linear_pair(400, seed)
    got = pairs(fits, [0, 1], {}, [0.0, 0.0], alpha=0.05, seed=1, looks=(600,)).pairs[0]
    one, two = x[:, [0, 2]], x[:, [1, 2]]
    for i, (own, rival) in enumerate(((one, two), (two, one))):
        null, other = sm.OLS(y, own).fit(), sm.OLS(y, rival).fit()
        distance = sm.OLS(null.fittedvalues, rival).fit().ssr
        expected = 400 * np.log((null.ssr + distance) / other.ssr)
        assert got.gains[i] == pytest.approx(expected, rel=1e-9)
    p, error = got.as_truth[0].p, got.as_truth[0].error
    assert abs(p - stats.norm.sf(cox(y, one, two))) < 4 * error + 0.03
    assert got.as_truth[1].p < 0.01
    assert stats.norm.sf(cox(y, two, one)) < 0.01


def test_size_of_each_as_the_truth() -> None:
    """The true law is rejected in about 5 % of tables, its rival in nearly all; of 12 runs, where the
    normal reference (statsmodels) rejects the true law too often."""
    n, studies = 12, 150
    false = found = normal = 0
    for seed in range(studies):
        x, y, fits = linear_pair(n, 1000 + seed)
        got = pairs(fits, [0, 1], {}, [0.0, 0.0], alpha=0.05, seed=seed, looks=(99,)).pairs[0]
        false += got.as_truth[0].p <= 0.05
        found += got.as_truth[1].p <= 0.05
        normal += stats.norm.sf(cox(y, x[:, [0, 2]], x[:, [1, 2]])) <= 0.05
    assert stats.binomtest(false, studies, 0.06, alternative="greater").pvalue > 0.02
    assert false > 0
    assert normal > false
    assert found > 4 * false


def langmuir_pair(n: int, seed: int, *, near: float, reading: float = 0.01) -> list[Fit]:
    """k A/(1 + K A) against k A/(1 + K B), B within a factor 10^near of A, error stated; conditions
    measured to ``reading``."""
    rng = np.random.default_rng(seed)
    a = 10 ** rng.uniform(-1, 0.5, n)
    true = np.column_stack([a, a * 10 ** rng.uniform(-near, near, n)])
    y = 2 * a / (1 + a) + 0.03 * rng.standard_normal(n)
    readings = true * (1 + reading * rng.standard_normal(true.shape))
    sources = (
        source(OBSERVATION, n, absolute=0.03),
        source(0, n, relative=reading),
        source(1, n, relative=reading),
    )
    data = Measurements(y, readings, sources, Scale.STATED, ("A", "B"))
    laws = [predictor(k * A / (1 + K * x), (k, K), (A, B), n, lower=0.0) for x in (A, B)]
    return [fit(law, data, starts=4) for law in laws]


def test_who_ranks_first_with_conditions_measured() -> None:
    """Shares are shares; laws far apart rank first when true, laws alike about half the time; the order
    of the candidates and of the batch changes nothing."""
    far = pairs(langmuir_pair(16, 1, near=0.5), [0, 1], {}, [4.0, 4.0], alpha=0.05, seed=1)
    assert far.repeats is not None
    assert np.allclose(far.repeats.shares.sum(axis=1), 1.0)
    assert far.repeats.first_if_true(0) > 0.9  # type: ignore[operator]
    alike = langmuir_pair(16, 1, near=0.0005, reading=0.001)
    close = pairs(alike, [0, 1], {}, [4.0, 4.0], alpha=0.05, seed=1)
    assert close.repeats is not None
    assert close.repeats.first_share(0) == pytest.approx(0.5, abs=0.25)
    assert close.pairs[0].as_truth[0].p == 1.0
    assert close.pairs[0].as_truth[0].draws == 0
    fits = langmuir_pair(16, 1, near=0.5)
    turned = pairs(fits[::-1], [0, 1], {}, [4.0, 4.0], alpha=0.05, seed=1)
    assert turned.repeats is not None
    assert np.allclose(turned.repeats.shares[::-1, ::-1], far.repeats.shares)
    assert turned.pairs[0].as_truth[1].p == far.pairs[0].as_truth[0].p


def test_related_laws_are_not_paired() -> None:
    fits = langmuir_pair(16, 1, near=0.5)
    got = pairs(fits, [0, 1], {(1, 0): True}, [4.0, 4.0], alpha=0.05, seed=1)
    assert got.pairs == ()
    assert got.repeats is not None
    alone = pairs(fits, [0], {}, [4.0, 4.0], alpha=0.05, seed=1)
    assert alone.pairs == ()
    assert alone.repeats is None


def test_vuong_on_linear_laws() -> None:
    """Statistic from its definition (Vuong, Econometrica 57 (1989) 307, eqs 3.1 and 4.2, numbers from memory)
    with the normal likelihoods that statsmodels gives for each run."""
    x, y, fits = linear_pair(60, 3)
    logs = []
    for columns in ([0, 2], [1, 2]):
        r = sm.OLS(y, x[:, columns]).fit()
        logs.append(stats.norm.logpdf(r.resid, scale=np.sqrt(r.ssr / 60)))
    d = logs[0] - logs[1]
    got = vuong(fits[0], fits[1], alpha=0.05)
    assert got is not None
    assert got.statistic == pytest.approx(d.sum() / (np.sqrt(60) * d.std()), rel=1e-9)
    assert got.p == pytest.approx(2 * stats.norm.sf(abs(got.statistic)), rel=1e-9)
    other = vuong(fits[1], fits[0], alpha=0.05)
    assert other is not None
    assert other.statistic == pytest.approx(-got.statistic)
    assert other.p_alike == pytest.approx(got.p_alike)
    assert got.prefers == 0
    assert other.prefers == 1


def test_size_of_the_first_step_of_vuong() -> None:
    """Laws that predict alike (both constants of the second step zero in truth): the variance test finds a
    difference in about 5 % of tables."""
    n, studies = 200, 300
    laws = [predictor(h + k * x, (k, h), (A, B), n) for x in (A, B)]
    false = 0
    for seed in range(studies):
        rng = np.random.default_rng(seed)
        x = rng.standard_normal((n, 2))
        data = Measurements(2 + rng.standard_normal(n), x, (), Scale.ESTIMATED, ("A", "B"))
        got = vuong(fit(laws[0], data), fit(laws[1], data), alpha=0.05)
        assert got is not None
        false += got.p_alike < 0.05
    assert stats.binomtest(false, studies, 0.05).pvalue > 0.01


def test_weighted_sums_of_chi_squares() -> None:
    """Imhof, Biometrika 48 (1961) 419, table 1, first form (figures from memory); pairs of equal weights,
    where the tail is a sum of exponentials; scipy.stats.chi2 for equal weights."""
    for x, expected in ((0.1, 0.9458), (0.7, 0.5064), (2.0, 0.1240)):
        got = weighted_chi2_upper(x, np.array([0.6, 0.3, 0.1]))
        assert got == pytest.approx(expected, abs=5e-5)
    a, b, x = 1.0, 0.2, 3.0
    exact = (a * np.exp(-x / (2 * a)) - b * np.exp(-x / (2 * b))) / (a - b)
    assert weighted_chi2_upper(x, np.array([a, a, b, b])) == pytest.approx(exact, rel=1e-12)
    got = weighted_chi2_upper(14.0, np.full(5, 2.0))
    assert got == pytest.approx(float(stats.chi2.sf(7.0, 5)), rel=1e-12)
    wide = weighted_chi2_upper(900.0, np.array([300.0, 100.0, 1.0, 0.4, 300.0]))
    draws = np.random.default_rng(1).chisquare(1, (400_000, 5)) @ [300.0, 100.0, 1.0, 0.4, 300.0]
    assert wide == pytest.approx(float((draws > 900).mean()), abs=0.003)
    assert weighted_chi2_upper(1.0, np.zeros(2)) == 0.0
    assert weighted_chi2_upper(-1.0, np.ones(2)) == 1.0


def test_mimicking_a_linear_law_is_weighted_regression() -> None:
    """A rival fitted to the predictions of a law: statsmodels' weighted least squares, for several laws
    with different weights in one batch."""
    rng = np.random.default_rng(5)
    n = 10
    x = rng.uniform(1.0, 3.0, (n, 3))
    y = x[:, 0] + x[:, 2] + 0.05 * rng.standard_normal(n)
    error = (source(OBSERVATION, n, relative=0.05, absolute=0.01),)
    data = Measurements(y, x, error, Scale.STATED, ("A", "B", "C"))
    forms = (k * A + h * C, k * B + h * C, k * A + h * B)
    fits = [fit(predictor(form, (k, h), (A, B, C), n), data) for form in forms]
    got = mimics([fits[0], fits[2]], fits[1])
    for row, null in zip(got, (fits[0], fits[2]), strict=True):
        expected = sm.WLS(null.values, x[:, [1, 2]], weights=1 / null.variances).fit().params
        assert row == pytest.approx(expected, rel=1e-9)
    d = directions(fits[0], fits[1])
    assert len(d) == 1
    white = 1 / np.sqrt(fits[0].variances)
    gap = white * (x[:, [1, 2]] @ got[0] - fits[0].values)
    left = sm.OLS(gap, fits[0].jacobian).fit().resid
    assert d[0] == pytest.approx(left, rel=1e-6, abs=1e-9)


def test_the_order_of_runs_and_candidates_leaves_p_values_alone() -> None:
    rng = np.random.default_rng(7)
    n = 14
    x = rng.uniform(0.5, 3.0, (n, 3))
    y = 2 * x[:, 0] / (1 + x[:, 1]) * (1 + 0.05 * rng.standard_normal(n))
    forms = [k * A / (1 + K * z) for z in (A, B, C)] + [k * A]
    contains = {(j, 3): True for j in range(3)}
    data = Measurements(
        y, x, (source(OBSERVATION, n, relative=0.05),), Scale.STATED, ("A", "B", "C")
    )

    def weighed(table: Measurements, order: list[int]) -> dict[int, float]:
        laws = [
            predictor(forms[i], (k, K) if i < 3 else (k,), (A, B, C), n, lower=0.0) for i in order
        ]
        inside = {(order.index(j), order.index(i)): True for j, i in contains}
        found = standing([fit(law, table) for law in laws], inside, {}, alpha=0.05, seed=1)
        return {i: s.p_joint for i, s in zip(order, found, strict=True)}

    first = weighed(data, [0, 1, 2, 3])
    for table, order in (
        (data, [2, 0, 3, 1]),
        (data.take(np.random.default_rng(1).permutation(n)), [0, 1, 2, 3]),
    ):
        again = weighed(table, order)
        for i in range(4):
            assert again[i] == pytest.approx(first[i], rel=1e-4, abs=1e-9)


def test_laws_alike_on_the_runs_apart_in_a_window() -> None:
    """k A and k B where B = 2 A in every run: no difference there, one stated error where the window has
    them 5 % apart and the error is 5 %."""
    n = 8
    a = np.linspace(1.0, 3.0, n)
    x = np.column_stack([a, 2 * a])
    data = Measurements(
        3 * a, x, (source(OBSERVATION, n, relative=0.05),), Scale.STATED, ("A", "B")
    )
    fits = [fit(predictor(k * z, (k,), (A, B), n), data) for z in (A, B)]
    assert apart(fits[0], fits[1]) < 1e-9
    window = np.array([[1.0, 2.0], [1.0, 1.9]])
    assert apart(fits[0], fits[1], window) == pytest.approx(1.0, rel=1e-6)


def test_many_studies_at_once_are_judged_as_one_by_one() -> None:
    """Linear laws, whose fits have one optimum: the same joint p-values from the batch of studies."""
    nulls, rivals = [], []
    alone = []
    for seed in range(3):
        _, _, fits = linear_pair(20, seed)
        nulls.append(fits[0])
        rivals.append(fits[1])
        alone.append(standing(fits, {}, {}, alpha=0.05, seed=1, only=[0])[0])
    together = standing_in_studies(nulls, rivals[:1], [False], alpha=0.05, seed=1)
    for one, other in zip(alone, together, strict=True):
        assert other.stands == one.stands
        assert other.p_joint == pytest.approx(one.p_joint, rel=1e-6)
