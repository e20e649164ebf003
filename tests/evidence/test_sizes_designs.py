"""Size of the test of one constant over designs: few runs, several observations a run, shared and mixed
errors, a nuisance constant on its bound, laws that are not linear.

One-sided at 5 % to either side; tables simulated with a seed, bounds binomial.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.score import score
from discrim.evidence.several import several
from discrim.fit.engine import solve
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem
from tests.reference.outside import predictor, symbols

k_A, k_B, k_C, K_A, K_B, A, B, C = symbols("k_A k_B k_C K_A K_B A B C")
STUDIES = 1500
Q95 = float(stats.norm.ppf(0.95))


@dataclass(frozen=True)
class Design:
    """B/A spread by ``spread``, conditions known within ``error``; ``runs`` of ``n`` observations."""

    n: int
    spread: float
    error: float
    runs: int = 0
    origins: tuple[str, str, str] = ("measured", "measured", "measured")
    shared: tuple[bool, bool] = (False, False)  # the error of A, of B by all runs


def drawn(design: Design, seed: int) -> tuple[np.ndarray, Measurements]:
    """True conditions and tables with y still empty."""
    rng = np.random.default_rng(seed)
    n = design.n
    run = np.arange(n) % (design.runs or n)
    a = rng.uniform(0.5, 2.0, (STUDIES, run.max() + 1))
    b = 2.5 * a * (1 + design.spread * rng.standard_normal(a.shape))
    c = 2.0 * a * (1 + 0.5 * rng.standard_normal(a.shape))
    true, shown = [], []
    sources = [source(OBSERVATION, n, relative=0.01)]
    for j, x in enumerate((a, b, np.abs(c))):
        groups = np.zeros(n, int) if j < 2 and design.shared[j] else run
        noise = design.error * rng.standard_normal((STUDIES, groups.max() + 1))[:, groups]
        nominal = x[:, run]
        shaken = nominal * (1 + noise)
        is_set = design.origins[j] == "set"
        true.append(shaken if is_set else nominal)
        shown.append(nominal if is_set else shaken)
        sources.append(source(j, n, relative=design.error, origin=design.origins[j], groups=groups))
    data = Measurements(
        np.zeros((STUDIES, n)), np.stack(shown, 2), tuple(sources), Scale.STATED, ("A", "B", "C")
    )
    return np.stack(true, 2), data


def noisy(y: np.ndarray, seed: int) -> np.ndarray:
    return np.asarray(y * (1 + 0.01 * np.random.default_rng(seed).standard_normal(y.shape)))


def check(z: np.ndarray) -> None:
    assert np.isfinite(z).all()
    for side in (z, -z):
        false = int((side > Q95).sum())
        assert stats.binomtest(false, STUDIES, 0.06, alternative="greater").pvalue > 0.001
        assert false > 0.02 * STUDIES


DESIGNS = [
    Design(2, 0.01, 0.02),
    Design(3, 0.01, 0.02),
    Design(12, 0.01, 0.02, runs=4),
    Design(12, 0.5, 0.01, runs=6),
    Design(12, 0.01, 0.02, shared=(True, False)),
    Design(12, 0.01, 0.02, shared=(True, True)),
    Design(12, 0.01, 0.02, origins=("set", "measured", "measured")),
    Design(12, 0.01, 0.02, origins=("measured", "set", "measured")),
]


@pytest.mark.parametrize("design", DESIGNS, ids=str)
def test_two_pathways(design: Design) -> None:
    true, data = drawn(design, 61)
    data = replace(data, y=noisy(3.0 * true[..., 0], 62))
    problem = Problem(
        predictor(k_A * A + k_B * B, (k_A, k_B), (A, B, C), design.n, lower=0.0), data
    )
    held = solve(problem, np.tile([3.0, 0.0], (STUDIES, 1)), fixed=np.array([False, True]))
    check(score(problem, held, 1).z)


@pytest.mark.parametrize("n", [3, 6, 20])
@pytest.mark.parametrize("k_c", [0.0, 0.6])
def test_a_nuisance_constant_on_its_bound(n: int, k_c: float) -> None:
    """With three runs as many constants as runs."""
    true, data = drawn(Design(n, 0.01, 0.02), 63)
    data = replace(data, y=noisy(3.0 * true[..., 0] + k_c * true[..., 2], 64))
    law = predictor(k_A * A + k_C * C + k_B * B, (k_A, k_C, k_B), (A, B, C), n, lower=0.0)
    problem = Problem(law, data)
    held = solve(
        problem, np.tile([3.0, 0.3, 0.0], (STUDIES, 1)), fixed=np.array([False] * 2 + [True])
    )
    check(score(problem, held, 2).z)


@pytest.mark.parametrize("spread", [0.5, 0.01])
@pytest.mark.parametrize("squared", [False, True])
def test_adsorption(spread: float, squared: bool) -> None:
    """K_B of a law with adsorption of A, also where the rate goes through its maximum."""
    n = 12
    rng = np.random.default_rng(65)
    a = 10 ** rng.uniform(-0.7, 0.7, (STUDIES, n))
    b = np.maximum(a * (1 + spread * rng.standard_normal(a.shape)), 0.02)
    shown = np.stack([a, b], 2) * (1 + 0.02 * rng.standard_normal((STUDIES, n, 2)))
    power = 2 if squared else 1
    sources = (
        source(OBSERVATION, n, relative=0.01),
        source(0, n, relative=0.02, origin="measured"),
        source(1, n, relative=0.02, origin="measured"),
    )
    y = noisy(2.0 * a / (1 + a) ** power, 66)
    law = predictor(
        k_A * A / (1 + K_A * A + K_B * B) ** power, (k_A, K_A, K_B), (A, B), n, lower=0.0
    )
    problem = Problem(law, Measurements(y, shown, sources, Scale.STATED, ("A", "B")))
    start = np.tile([2.0, 1.0, 0.0], (STUDIES, 1))
    check(score(problem, solve(problem, start, fixed=np.array([False] * 2 + [True])), 2).z)


@pytest.mark.parametrize("scale", [Scale.STATED, Scale.ESTIMATED])
def test_several_at_once(scale: Scale) -> None:
    """k_B and k_C together: chi-squared with two degrees of freedom; with the variance of the rates
    unknown no more than that (fewer: 0.2 to 4 %)."""
    true, data = drawn(Design(12, 0.02, 0.03), 67)
    y = 3.0 * true[..., 0]
    y = y + 0.05 * np.random.default_rng(68).standard_normal(y.shape)
    rates = () if scale is Scale.ESTIMATED else (source(OBSERVATION, 12, absolute=0.05),)
    data = replace(data, y=y, sources=(*rates, *data.of_conditions), scale=scale)
    law = predictor(k_A * A + k_B * B + k_C * C, (k_A, k_B, k_C), (A, B, C), 12, lower=0.0)
    problem = Problem(law, data)
    start = np.tile([3.0, 0.0, 0.0], (STUDIES, 1))
    z, _ = several(problem, solve(problem, start, fixed=np.array([False, True, True])), (1, 2))
    false = int((z > stats.norm.ppf(0.975)).sum())
    assert stats.binomtest(false, STUDIES, 0.06, alternative="greater").pvalue > 0.001
    if scale is Scale.STATED:
        assert false > 0.03 * STUDIES


def test_several_with_exact_conditions_are_the_extra_sum_of_squares() -> None:
    """F = ((RSS0 - RSS1)/q)/(RSS1/(N - p)) for a linear law, to 10 digits (Bates & Watts 1988, p. 103,
    from memory)."""
    rng = np.random.default_rng(69)
    n = 11
    x = rng.uniform(0.5, 2.0, (n, 3))
    y = x @ [3.0, 0.4, 0.2] + 0.2 * rng.standard_normal(n)
    data = Measurements(y, x, (), Scale.ESTIMATED, ("A", "B", "C"))
    problem = Problem(predictor(k_A * A + k_B * B + k_C * C, (k_A, k_B, k_C), (A, B, C), n), data)
    held = solve(problem, np.array([[3.0, 0.0, 0.0]]), fixed=np.array([False, True, True]))
    z, _ = several(problem, held, (1, 2))
    rss1 = float(np.linalg.lstsq(x, y, rcond=None)[1][0])
    rss0 = float(np.linalg.lstsq(x[:, :1], y, rcond=None)[1][0])
    f = ((rss0 - rss1) / 2) / (rss1 / (n - 3))
    assert 2 * stats.norm.sf(z[0]) == pytest.approx(float(stats.f.sf(f, 2, n - 3)), rel=1e-10)
