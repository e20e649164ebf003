"""The conditional bootstrap: its tables, its sequential p-values, its size in lockstep.

Simulated tables drawn with a seed; reference probabilities from scipy.stats.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence.bootstrap import (
    COARSE,
    RISK,
    Tables,
    nested_p,
    of_counts,
    sequential,
    settled,
)
from discrim.fit.engine import solve
from discrim.fit.fit import Fit, fit, of_solution
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, joined
from discrim.reactor.rates import RatePredictor
from tests.reference.outside import predictor, symbols

k_A, k_B, k_C, A, B, C = symbols("k_A k_B k_C A B C")
N = 12


def lockstep_tables(
    studies: int, spread: float, error: float, seed: int
) -> tuple[np.ndarray, np.ndarray]:
    """Rates k_A A with k_A = 1 and readings of A and B, B = 2.5 A but for ``spread``."""
    rng = np.random.default_rng(seed)
    a = np.exp(rng.uniform(0.0, np.log(8.0), (studies, N)))
    b = 2.5 * a * (1 + spread * rng.standard_normal((studies, N)))
    true = np.stack([a, b], axis=2)
    readings = true * (1 + error * rng.standard_normal(true.shape))
    return a * (1 + 0.01 * rng.standard_normal((studies, N))), readings


def measured(y: np.ndarray, conditions: np.ndarray, error: float) -> Measurements:
    sources = (
        source(OBSERVATION, N, relative=0.01),
        source(0, N, relative=error),
        source(1, N, relative=error),
    )
    return Measurements(y, conditions, sources, Scale.STATED, ("A", "B"))


SMALL = predictor(k_A * A, (k_A,), (A, B), N, lower=0.0)
LARGE = predictor(k_A * A + k_B * B, (k_A, k_B), (A, B), N, lower=0.0)


def both(data: Measurements) -> tuple[Fit, Fit]:
    small = fit(SMALL, data, starts=1)
    return small, fit(LARGE, data, starts=1, near=np.array([[small.theta[0], 0.0]]))


def test_drawn_tables_keep_the_reconciled_conditions() -> None:
    """At the constants drawn from, a drawn table reconciles to the conditions held (to first order
    exactly; a law linear in its conditions is its first order), its Q is chi-squared with N degrees of
    freedom, and errors follow V."""
    y, c = lockstep_tables(1, 0.3, 0.02, 3)
    null, _ = both(measured(y[0], c[0], 0.02))
    tables, rescaled = Tables(null, 1).draw(4000)
    problem = Problem(SMALL, tables)
    at = np.broadcast_to(null.theta, (4000, 1))
    here = np.broadcast_to(null.conditions, (4000, *null.conditions.shape))
    found = problem.evaluate(at, here, None, np.ones(4000), np.arange(4000), passes=1)
    weighted = found.residual / np.sqrt(found.covariance)
    slopes = SMALL.predict(null.theta[None], null.conditions, conditions_too=True).by_conditions
    assert slopes is not None
    again = problem.moved(
        np.asarray(tables.conditions), here, np.broadcast_to(slopes, here.shape), weighted
    )
    assert np.abs(again / null.conditions - 1).max() < 1e-12
    assert stats.kstest(found.objective, stats.chi2(N).cdf).pvalue > 0.01
    scatter = np.var(found.error, axis=0) / null.covariance
    assert np.abs(scatter - 1).max() < 5 * np.sqrt(2 / 4000)
    assert (rescaled == 1).all()


def test_drawn_tables_have_shared_errors() -> None:
    """Correlation of the errors of two runs that share one: s_shared^2/(s_shared^2 + s_own^2)."""
    x = np.linspace(1.0, 3.0, N)
    data = Measurements(
        2.0 * x,
        x[:, None],
        (
            source(OBSERVATION, N, absolute=0.3),
            source(OBSERVATION, N, absolute=0.4, groups=np.repeat([0, 1], N // 2)),
        ),
        Scale.STATED,
        ("A",),
    )
    null = fit(predictor(k_A * A, (k_A,), (A,), N), data)
    tables, _ = Tables(null, 5).draw(20_000)
    correlation = np.corrcoef(tables.y.T)
    expected = 0.16 / 0.25
    assert correlation[0, 1] == pytest.approx(expected, abs=0.02)
    assert correlation[0, N - 1] == pytest.approx(0.0, abs=0.03)


def test_the_order_of_the_runs_and_the_size_of_the_batch_change_nothing() -> None:
    y, c = lockstep_tables(1, 0.3, 0.02, 3)
    data = measured(y[0], c[0], 0.02)
    turn = np.random.default_rng(0).permutation(N)
    one, other = (Tables(both(d)[0], 4) for d in (data, data.take(turn)))
    first = np.concatenate([one.draw(3)[0].y, one.draw(5)[0].y])
    second = other.draw(8)[0].y
    assert np.allclose(first[:, turn], second, rtol=1e-9)


def test_sequential_p_of_a_known_chance() -> None:
    """Draws that exceed with chance 0.3, 0.05 or 0.001: the side of 5 % is right, the p-value within five
    standard errors, and drawing stops early where the chance is not near 5 %."""
    for chance, low, high in ((0.3, 100, 100), (0.001, 200, 400), (0.05, 800, 1600)):
        rng = np.random.default_rng(2)
        got = sequential(lambda k, r=rng, x=chance: r.random(k) < x, 0.05)  # type: ignore[misc]
        assert low <= got.draws <= high
        assert abs(got.p - chance) < 5 * got.error + 1 / got.draws
        if chance != 0.05:
            assert got.clear
            assert (got.p < 0.05) == (chance < 0.05)


def test_stopping_seldom_changes_a_decision() -> None:
    """The chance of a stop on the wrong side, by the exact binomial recursion over the looks, for p-values
    on either side of alpha: at most RISK."""
    looks = (100, 200, 400, 800, 1600)
    for chance in (0.05 + 1e-9, 0.05 - 1e-9):
        alive = np.zeros(looks[-1] + 1)
        alive[0] = 1.0
        wrong, before = 0.0, 0
        for look in looks:
            step = stats.binom.pmf(np.arange(look - before + 1), look - before, chance)
            alive = np.convolve(alive, step)[: looks[-1] + 1]
            for hits in np.flatnonzero(alive > 0):
                if settled(int(hits), look, 0.05):
                    low = (hits + 1) / (look + 1) <= 0.05
                    wrong += float(alive[hits]) if low == (chance > 0.05) else 0.0
                    alive[hits] = 0.0
            before = look
        assert 0 < wrong <= RISK


def test_p_of_counts() -> None:
    """(1 + exceedances)/(1 + draws), as by Davison & Hinkley, Bootstrap Methods and their Application,
    Cambridge 1997, sec. 4.2 (from memory)."""
    assert of_counts(4, 99, True).p == pytest.approx(0.05)
    assert of_counts(0, 199, True).p == pytest.approx(1 / 200)


def fitted_together(
    law: RatePredictor, y: np.ndarray, c: np.ndarray, error: float, starts: np.ndarray
) -> list[Fit]:
    """One fit for each study, made in one batch."""
    whole = Problem(law, measured(y, c, error))
    found = [
        solve(whole, np.broadcast_to(start, (len(y), len(start))).copy(), conditions=c)
        for start in starts
    ]
    out = []
    for i in range(len(y)):
        one = joined([f.take(np.array([i])) for f in found])
        out.append(of_solution(Problem(law, measured(y[i], c[i], error)), one))
    return out


def q_of(law: RatePredictor, data: Measurements, start: np.ndarray) -> np.ndarray:
    """Q of a law on each of a batch of tables, from one start for each."""
    return solve(Problem(law, data), start, options=COARSE, conditions=data.conditions).objective


def rejected(
    nulls: list[Fit], larges: list[Fit], tables: list[Measurements], draws: int
) -> np.ndarray:
    """Whether the likelihood ratio is among the largest 5 % of those of the drawn tables, for each
    study; all tables of all studies are one batch."""
    every = replace(
        tables[0],
        y=np.concatenate([t.y for t in tables]),
        conditions=np.concatenate([t.conditions for t in tables]),
    )
    theta = np.repeat([f.theta for f in nulls], draws, axis=0)
    q0 = q_of(SMALL, every, theta)
    q1 = np.minimum(
        q_of(LARGE, every, np.hstack([theta, np.zeros_like(theta)])),
        q_of(LARGE, every, np.repeat([f.theta for f in larges], draws, axis=0)),
    )
    observed = np.array([a.objective - b.objective for a, b in zip(nulls, larges, strict=True)])
    as_large = (q0 - q1).reshape(len(nulls), draws) >= observed[:, None]
    return np.asarray((1 + as_large.sum(axis=1)) / (1 + draws) <= 0.05)


STUDIES, DRAWS = 200, 99


@pytest.mark.parametrize(("spread", "error"), [(0.5, 0.01), (0.003, 0.02)])
def test_size_in_lockstep(spread: float, error: float) -> None:
    """The likelihood ratio with the bootstrap keeps its level where the runs are in lockstep. Its
    chi-squared reference (half a chi-squared with one degree of freedom on the edge) does not, and
    neither do tables whose readings are drawn around the reconciled conditions: that is why these are
    held."""
    y, c = lockstep_tables(STUDIES, spread, error, 11)
    nulls = fitted_together(SMALL, y, c, error, np.ones((1, 1)))
    larges = fitted_together(LARGE, y, c, error, np.array([[1.0, 0.0], [0.5, 0.2]]))
    held = [Tables(f, i).draw(DRAWS)[0] for i, f in enumerate(nulls)]
    false = int(rejected(nulls, larges, held, DRAWS).sum())
    assert stats.binomtest(false, STUDIES, 0.06, alternative="greater").pvalue > 0.02
    if spread > 0.1:
        return
    gains = np.array([a.objective - b.objective for a, b in zip(nulls, larges, strict=True)])
    assert (gains > stats.chi2.ppf(0.9, 1)).mean() > 0.15
    redrawn = []
    for i, null in enumerate(nulls):
        rng = np.random.default_rng(i)
        around = null.conditions * (1 + error * rng.standard_normal((DRAWS, N, 2)))
        rates = null.values * (1 + 0.01 * rng.standard_normal((DRAWS, N)))
        redrawn.append(replace(null.data, y=rates, conditions=around))
    assert rejected(nulls, larges, redrawn, DRAWS).mean() > 0.12


def test_nested_p_is_that_share() -> None:
    """`nested_p` gives the share of the drawn tables as fits of each of them, to full precision and from
    more starts, give it (but for one table of a hundred, where those find another optimum)."""
    y, c = lockstep_tables(8, 0.003, 0.02, 11)
    for i in range(8):
        small, large = both(measured(y[i], c[i], 0.02))
        starts = np.array([[small.theta[0], 0.0], large.theta])
        got = nested_p(small, large, starts, alpha=0.05, seed=7)
        if got.draws != 100:
            continue
        tables, _ = Tables(small, 7).draw(got.draws)
        q0 = [fit(SMALL, one_of(tables, k), starts=1).objective for k in range(got.draws)]
        q1 = [
            fit(LARGE, one_of(tables, k), starts=1, near=starts).objective for k in range(got.draws)
        ]
        hits = np.count_nonzero(np.array(q0) - np.array(q1) >= small.objective - large.objective)
        assert got.p == pytest.approx((1 + hits) / (1 + got.draws), abs=1.5e-2)
        return
    raise AssertionError("every table was decided without a draw, or needed many")


def one_of(tables: Measurements, k: int) -> Measurements:
    return replace(tables, y=tables.y[k], conditions=tables.conditions[k])


def test_several_on_the_edge_against_the_mixture_of_chi_squares() -> None:
    """Two constants at zero with sensitivities at right angles and exact conditions: the likelihood ratio
    is 1/4 : 1/2 : 1/4 of chi-squared with 0, 1, 2 degrees of freedom (Self & Liang, J. Am. Stat. Assoc.
    82 (1987) 605, case 7, from memory)."""
    x = np.zeros((N, 3))
    x[:4, 0] = x[4:8, 1] = x[8:, 2] = 1.0
    law = predictor(k_A * A + k_B * B + k_C * C, (k_A, k_B, k_C), (A, B, C), N, lower=0.0)
    alone = predictor(k_A * A, (k_A,), (A, B, C), N, lower=0.0)
    rng = np.random.default_rng(8)
    error = (source(OBSERVATION, N, absolute=0.5),)
    for _ in range(3):
        y = 5 * x[:, 0] + 0.5 * rng.standard_normal(N)
        y[4:8] = y[4:8] - y[4:8].mean() + rng.uniform(0.1, 0.4)
        data = Measurements(y, x, error, Scale.STATED, ("A", "B", "C"))
        small, large = fit(alone, data), fit(law, data)
        gained = small.objective - large.objective
        expected = 0.5 * stats.chi2.sf(gained, 1) + 0.25 * stats.chi2.sf(gained, 2)
        start = np.array([[small.theta[0], 0.0, 0.0]])
        got = nested_p(small, large, start, alpha=expected, seed=1)
        assert abs(got.p - expected) < 4 * got.error + 1e-3


def test_f_where_it_holds() -> None:
    """Unknown variance, exact conditions, a linear law, a constant that can be negative: the bootstrap
    gives the p-value of the F test (scipy.stats.f)."""
    rng = np.random.default_rng(4)
    x = rng.uniform(1.0, 4.0, (N, 2))
    free = predictor(k_A * A + k_B * B, (k_A, k_B), (A, B), N)
    for slope in (0.0, 0.3):
        y = 2 * x[:, 0] + slope * x[:, 1] + 0.5 * rng.standard_normal(N)
        data = Measurements(y, x, (), Scale.ESTIMATED, ("A", "B"))
        small, large = fit(SMALL, data), fit(free, data)
        df = N - 2
        f = (small.objective - large.objective) / (large.objective / df)
        expected = stats.f.sf(f, 1, df)
        got = nested_p(small, large, large.theta[None], alpha=expected, seed=3)
        assert abs(got.p - expected) < 4 * got.error + 1e-3
