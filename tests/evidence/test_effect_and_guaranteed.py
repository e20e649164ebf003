"""Effects and guaranteed ranges against theorems and examples worked by hand.

Sources: Oettli & Prager, Numer. Math. 6 (1964) 405 (solutions of linear equations with bounds on
all coefficients); Fieller, J. R. Stat. Soc. B 16 (1954) 175 (interval of a ratio), both from
memory. The examples are invented and worked by hand here.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.effect import effect_of, t_of
from discrim.evidence.flip_distance import flip_distance
from discrim.evidence.guaranteed import guaranteed
from discrim.evidence.participation import participation
from discrim.evidence.term import Kind, Participation, Term
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.knocked import KnockedOut
from tests.reference.outside import measurements, predictor, symbols

k_A, k_B, A, B = symbols("k_A k_B A B")
LAW = k_A * A + k_B * B


def _bounded(
    y: list[float], dy: list[float], c: list[list[float]], dc: list[list[float]]
) -> Measurements:
    """Hard bounds on everything."""
    n = len(y)
    half, widths = np.array(dy), np.array(dc)
    root3 = np.sqrt(3.0)
    sources = [source(OBSERVATION, n, absolute=half / root3, bound=half)]
    for j in range(widths.shape[1]):
        if widths[:, j].any():
            sources.append(source(j, n, absolute=widths[:, j] / root3, bound=widths[:, j]))
    return Measurements(np.array(y), np.array(c), tuple(sources), Scale.STATED, ("A", "B"))


def _ranges(data: Measurements) -> list[tuple[float, float]]:
    law = predictor(LAW, (k_A, k_B), (A, B), data.n, lower=0.0)
    found = guaranteed(law, data, 0.05, 1.0)
    assert all(i.note == "" for i in found)
    return [(i.low.value, i.high.value) for i in found]


def test_bounds_on_everything() -> None:
    """Worked by hand here. Run 1: A = 1 exactly, B = 0, rate 2 +- 0.2, so k_A is 1.8 to 2.2. Run 2:
    A and B = 1 +- 0.1, rate 5 +- 0.3: by Oettli & Prager |k_A + k_B - 5| <= 0.1 (k_A + k_B) + 0.3,
    that is k_A + k_B is 4.7/1.1 to 5.3/0.9, and k_B is 4.7/1.1 - 2.2 to 5.3/0.9 - 1.8."""
    data = _bounded([2.0, 5.0], [0.2, 0.3], [[1.0, 0.0], [1.0, 1.0]], [[0.0, 0.0], [0.1, 0.1]])
    first, second = _ranges(data)
    assert first == pytest.approx((1.8, 2.2))
    assert second == pytest.approx((4.7 / 1.1 - 2.2, 5.3 / 0.9 - 1.8))


def test_bounds_that_only_the_sign_closes() -> None:
    """Worked by hand here: one run A = B = 1 exactly, rate 5 +- 0.5: k_A + k_B is 4.5 to 5.5, and
    with both at or above zero each is 0 to 5.5. With A = 0 nothing bounds k_A above."""
    data = _bounded([5.0], [0.5], [[1.0, 1.0]], [[0.0, 0.0]])
    assert _ranges(data) == [pytest.approx((0.0, 5.5)), pytest.approx((0.0, 5.5))]
    blind = _bounded([5.0], [0.5], [[0.0, 1.0]], [[0.0, 0.0]])
    first, second = guaranteed(predictor(LAW, (k_A, k_B), (A, B), 1, lower=0.0), blind, 0.05, 1.0)
    assert (first.low.value, first.low.end, first.high.end) == (0.0, "bound", "open")
    assert (second.low.value, second.high.value) == pytest.approx((4.5, 5.5))


def test_bounds_that_contradict_one_another() -> None:
    """Two runs at one and the same condition whose bounds do not meet: no value at all."""
    data = _bounded([5.0, 6.0], [0.4, 0.4], [[1.0, 0.0]] * 2, [[0.0, 0.0]] * 2)
    law = predictor(LAW, (k_A, k_B), (A, B), 2, lower=0.0)
    for found in guaranteed(law, data, 0.05, 1.0):
        assert found.empty
        assert found.note == "empty: no value fits every run within its bounds"


def test_standard_deviations_become_bounds_that_hold_together() -> None:
    """One constant, M measurements with standard deviations: each bounded at Phi^-1(1 - 0.05/(2
    M)). Worked by hand here: y = k with y = 4 and 5, sd 1: k is 5 - z to 4 + z, z at 1 - 0.05/4."""
    data = measurements(np.array([4.0, 5.0]), np.ones((2, 1)), sd=1.0)
    (found,) = guaranteed(predictor(k_A * A, (k_A,), (A,), 2, lower=0.0), data, 0.05, 1.0)
    z = stats.norm.ppf(1 - 0.05 / 4)
    assert (found.low.value, found.high.value) == pytest.approx((5 - z, 4 + z))
    assert found.note.startswith("worst-case")


def test_no_range_for_a_law_that_is_not_linear() -> None:
    data = measurements(np.array([1.0, 2.0]), np.array([[1.0], [2.0]]), sd=0.1)
    law = predictor(k_A * A / (1 + k_B * A), (k_A, k_B), (A,), 2, lower=0.0)
    for found in guaranteed(law, data, 0.05, 1.0):
        assert found.note == "not computed: the law is not linear in its constants"


def test_flip_distance_by_hand() -> None:
    """Worked by hand here: y = k A, runs (1; 1 +- 0.1) and (1; 2 +- 0.3), A exact: with each moved
    by m errors they meet where 1 + 0.1 m = 2 - 0.3 m, m = 2.5. With A = 1 +- 0.05 as well: 1 + 0.1
    m = k (1 - 0.05 m) and 2 - 0.3 m = k (1 + 0.05 m); with both k from the two, m solves a
    quadratic."""
    law = predictor(k_A * A, (k_A,), (A,), 2, lower=0.0)
    y, c = np.array([1.0, 2.0]), np.ones((2, 1))
    data = measurements(y, c, sd=np.array([0.1, 0.3]))
    start, free = np.array([1.3]), np.zeros(1, bool)
    assert flip_distance(law, data, 1.0, start, fixed=free) == pytest.approx(2.5, rel=1e-5)
    data = measurements(y, c, sd=np.array([0.1, 0.3]), conditions_sd=[0.05])
    # (1 + 0.1 m)(1 + 0.05 m) = (2 - 0.3 m)(1 - 0.05 m): 0.01 m^2 - 0.55 m + 1 = 0
    m = (0.55 - np.sqrt(0.55**2 - 0.04)) / 0.02
    assert flip_distance(law, data, 1.0, start, fixed=free) == pytest.approx(m, rel=1e-4)


def test_flip_distance_is_zero_when_the_law_fits_and_with_constants_held() -> None:
    law = predictor(LAW, (k_A, k_B), (A, B), 2, lower=0.0)
    c = np.array([[1.0, 2.0], [2.0, 1.0]])
    data = measurements(c @ [3.0, 1.0], c, sd=0.1)
    free = np.zeros(2, bool)
    assert flip_distance(law, data, 1.0, np.array([2.0, 2.0]), fixed=free) == pytest.approx(
        0.0, abs=1e-6
    )
    # k_B held at 0: 5 = k_A and 7 = 2 k_A within 0.1 m each: 2 (5 - 0.1 m) = 7 + 0.1 m, m = 10
    held = np.array([False, True])
    assert flip_distance(law, data, 1.0, np.array([3.0, 0.0]), fixed=held) == pytest.approx(
        10.0, rel=1e-5
    )


@pytest.mark.parametrize("effect", [-0.999, -0.5, 0.0, 1e-9, 0.3, 0.999999])
def test_effect_and_its_coordinate(effect: float) -> None:
    """effect = (f - f0)/max(f, f0), T = log(f/f0)."""
    f, f0 = (1.0, 1.0 - effect) if effect >= 0 else (1.0 + effect, 1.0)
    assert float(t_of(effect)) == pytest.approx(np.log(f / f0), rel=1e-9, abs=1e-12)
    assert float(effect_of(t_of(effect))) == pytest.approx(effect, rel=1e-9)


def _additive(data: Measurements, at: list[float]) -> Participation:
    full = predictor(LAW, (k_A, k_B), (A, B), data.n, lower=0.0)
    reduced = predictor(k_A * A, (k_A,), (A, B), data.n, lower=0.0)
    knocked = KnockedOut(
        CompiledLaw(LAW, (k_A, k_B), (A, B)),
        CompiledLaw(k_A * A, (k_A, k_B), (A, B)),
        np.array([0, 1]),
    )
    term = Term(Kind.ZERO, full, reduced, (1,), (), knocked, np.array([at]), ("as asked",))
    return participation(
        term,
        data,
        fit(full, data),
        fit(reduced, data),
        origin="stated",
        level=0.95,
        seed=1,
        matters_above=0.05,
    )


def _fieller(y: np.ndarray, c: np.ndarray, at: list[float], t: float) -> tuple[float, float]:
    """Ends of the ratio rho = k_B B / (k_A A): t^2 var(d) = d^2 for d = k_B B - rho k_A A."""
    g = c / np.array(at)
    beta, rss, *_ = np.linalg.lstsq(g, y, rcond=None)
    s2 = float(rss[0]) / (len(y) - 2)
    v = s2 * np.linalg.inv(g.T @ g)
    q = t**2
    coefficients = [
        beta[0] ** 2 - q * v[0, 0],
        -2 * (beta[0] * beta[1] - q * v[0, 1]),
        beta[1] ** 2 - q * v[1, 1],
    ]
    low, high = np.sort(np.roots(coefficients).real)
    return float(low), float(high)


def test_effect_interval_is_fiellers_for_a_linear_law() -> None:
    """Exact conditions, unknown scale: "effect = e" restricts the constants linearly, so the
    interval is Fieller's with the t quantile; effect = rho/(1 + rho)."""
    rng = np.random.default_rng(3)
    c = np.column_stack([np.linspace(1, 4, 10), rng.uniform(1, 4, 10)])
    y = c @ [3.0, 1.0] + 0.3 * rng.standard_normal(10)
    at = [2.0, 3.0]
    found = _additive(measurements(y, c), at)
    assert found.effect is not None
    low, high = _fieller(y, c, at, float(stats.t.ppf(0.975, 8)))
    assert [found.effect.low, found.effect.high] == pytest.approx(
        [low / (1 + low), high / (1 + high)], rel=1e-5
    )
    beta = np.linalg.lstsq(c, y, rcond=None)[0]
    share = beta[1] * 3 / (beta[0] * 2 + beta[1] * 3)
    assert found.effect.value == pytest.approx(share, rel=1e-9)
    # the bound used by verdicts is the one-sided one
    _, high = _fieller(y, c, at, float(stats.t.ppf(0.95, 8)))
    assert found.effect.bound == pytest.approx(high / (1 + high), rel=1e-5)


def test_detectable_effect_is_found_four_times_in_five() -> None:
    """Worked by hand here for one constant in question, k_A known to all intents (huge runs without
    B would fix it): stated errors, the estimate of k_B has sd s, and k_B = (1.645 + 0.842) s is
    found with probability 0.8 by the one-sided 5 % test."""
    c = np.array([[1.0, 0.0]] * 6 + [[1.0, 1.0]] * 6)
    y = c @ [3.0, 0.5]
    data = measurements(y, c, sd=0.1)
    found = _additive(data, [1.0, 1.0])
    assert found.effect is not None
    s = 0.1 * np.sqrt(1 / 6 + 1 / 6)
    k = (stats.norm.ppf(0.95) + stats.norm.ppf(0.8)) * s
    # k_A at the fit without B: the mean of all runs
    assert found.detectable == pytest.approx(k / (k + y.mean()), rel=1e-6)


def test_error_margin_by_hand() -> None:
    """Worked by hand here: set conditions, k_A A with A exact and k_B B with a shared error of B
    never matters at k_B = 0; so the margin is unlimited there and the test is that of exact
    conditions."""
    c = np.array([[1.0, 0.0]] * 6 + [[1.0, 1.0]] * 6)
    y = c @ [3.0, 0.5]
    exact = _additive(measurements(y, c, sd=0.1), [1.0, 1.0])
    data = measurements(y, c, sd=0.1)
    data = replace(data, sources=(*data.sources, source(1, 12, relative=0.2, origin="set")))
    found = _additive(data, [1.0, 1.0])
    assert found.z == pytest.approx(exact.z, rel=1e-9)
    assert found.error_margin == np.inf
    assert np.isnan(exact.error_margin)
