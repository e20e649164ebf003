"""Terms of every kind where the other constants are in lockstep with one another.

r = k_A A + k_C C (+ k_E E), only k_A not zero, C = 2 A (1 + 2 % d), E = 1.5 A (1 + 2 % d'),
B = 2.5 A (1 - 30 % d): B moves along the direction in which A and C are not told apart.
Concentrations measured within 3 %, 30 runs, rate error 1 %; tables simulated with a seed, so that
every claim of B is false.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from discrim.evidence import term_tests
from discrim.evidence.curve import Curve
from discrim.evidence.intervals import along, standard_errors
from discrim.evidence.projected import Weak, reach, weak_nuisance
from discrim.evidence.score import score
from discrim.evidence.several import several
from discrim.evidence.term import Kind, Term
from discrim.fit.engine import solve
from discrim.fit.fit import fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution
from tests.reference.outside import predictor, symbols

k_A, k_C, k_E, k_B, k_D, K = symbols("k_A k_C k_E k_B k_D K")
A, B, C, D, E = symbols("A B C D E")
N = 30
CONDITIONS = (A, B, C, D, E)
Q96 = float(stats.norm.ppf(0.96))


def drawn(studies: int, seed: int, *, both: bool = False, share: float = 0.0) -> Measurements:
    """A batch of tables; ``both``: B moves against C and E alike; ``share`` of the rate by B."""
    rng = np.random.default_rng(seed)
    a = rng.uniform(0.5, 2.0, (studies, N))
    d, e = rng.standard_normal((2, studies, N))
    turn = 0.7 * (d + e) if both else d
    c, f = 2.0 * a * (1 + 0.02 * d), 1.5 * a * (1 + 0.02 * e)
    b = 2.5 * a * np.maximum(1 - 0.3 * turn, 0.02)
    other = a * rng.uniform(0.5, 1.5, a.shape)
    true = np.stack([a, b, c, other, f], axis=2)
    y = 3.0 * ((1 - share) * a + share * b / 2.5) * (1 + 0.01 * rng.standard_normal(a.shape))
    shown = true * (1 + 0.03 * rng.standard_normal(true.shape))
    sources = (
        source(OBSERVATION, N, relative=0.01),
        *(source(j, N, relative=0.03, origin="measured") for j in range(5)),
    )
    return Measurements(y, shown, sources, Scale.STATED, tuple("ABCDE"))


def one_of(data: Measurements, i: int) -> Measurements:
    return replace(data, y=data.y[i], conditions=data.conditions[i])


def at_most(false: int, studies: int, level: float = 0.06) -> bool:
    return bool(stats.binomtest(false, studies, level, alternative="greater").pvalue > 0.001)


def test_two_weak_directions() -> None:
    """k_A, k_C and k_E in lockstep: the plain form claims B in 16 to 20 %."""
    studies = 120
    data = drawn(studies, 51, both=True)
    law = predictor(
        k_A * A + k_C * C + k_E * E + k_B * B, (k_A, k_C, k_E, k_B), CONDITIONS, N, lower=0.0
    )
    problem = Problem(law, data)
    start = np.tile([3.0, 1e-3, 1e-3, 0.0], (studies, 1))
    held = solve(problem, start, fixed=np.array([False, False, False, True]))
    z = score(problem, held, 3).z
    assert (z > stats.norm.ppf(0.95)).mean() > 0.1
    false = 0
    for i in np.flatnonzero(z > Q96).tolist():
        one, at = Problem(law, one_of(data, i)), held.take(np.array([i]))
        weak = weak_nuisance(one, at, 3)
        assert weak.count == 2
        assert len(set(weak.constants) & {0, 1, 2}) == 2
        found = reach(one, at, (3,), weak, lambda p, s: score(p, s, 3).z, outside=0.01)
        false += not found.low[0] <= Q96
    assert at_most(false, studies)


def test_several_constants_at_once() -> None:
    """k_B and k_D together, two-sided."""
    studies = 200
    data = drawn(studies, 52)
    law = predictor(
        k_A * A + k_C * C + k_B * B + k_D * D, (k_A, k_C, k_B, k_D), CONDITIONS, N, lower=0.0
    )
    problem = Problem(law, data)
    start = np.tile([3.0, 1e-3, 0.0, 0.0], (studies, 1))
    held = solve(problem, start, fixed=np.array([False, False, True, True]))
    z, _ = several(problem, held, (2, 3))
    assert (z > stats.norm.ppf(0.975)).mean() > 0.09
    false = 0

    def scores(p: Problem, s: Solution) -> np.ndarray:
        return several(p, s, (2, 3))[0]

    for i in np.flatnonzero(z > stats.norm.ppf(0.98)).tolist():
        one, at = Problem(law, one_of(data, i)), held.take(np.array([i]))
        found = reach(one, at, (2, 3), weak_nuisance(one, at, (2, 3)), scores, outside=0.01)
        false += not found.low[0] <= stats.norm.ppf(0.98)
    assert at_most(false, studies)


TERMS = {
    Kind.VANISH: (k_A * A + k_C * C + k_B * K * B / (1 + K * B), (k_A, k_C, k_B, K), (2,), (3,)),
    Kind.FACTOR: ((k_A * A + k_C * C) * B / A, (k_A, k_C), (), ()),
}


@pytest.mark.parametrize("kind", list(TERMS))
def test_constants_that_vanish_and_factors(kind: Kind, monkeypatch: pytest.MonkeyPatch) -> None:
    """The plain forms claim B in 17 to 19 % of the studies."""
    studies = 40
    data = drawn(studies, 53)
    law, constants, psi, vanish = TERMS[kind]
    full = predictor(law, constants, CONDITIONS, N, lower=0.0)
    small = predictor(k_A * A + k_C * C, (k_A, k_C), CONDITIONS, N, lower=0.0)
    term = Term(kind, full, small, psi, vanish, None, np.zeros((1, 5)), ("a run",))
    need = float(stats.norm.ppf(0.95 if kind is Kind.VANISH else 0.975))
    plain = false = 0
    for i in range(studies):
        one = one_of(data, i)
        reduced = fit(small, one, starts=1, near=np.array([[3.0, 0.1]]))
        whole = reduced
        if kind is Kind.FACTOR:
            whole = fit(full, one, starts=1, near=np.array([[3.0, 0.1]]))
        problem = Problem(full, one)
        with monkeypatch.context() as m:
            m.setattr(term_tests, "weak_nuisance", lambda *_: Weak(0, (), np.inf))
            z = term_tests.absence_test(term, problem, whole, reduced, 1, 0.05)[0]
        if abs(z) > need:
            plain += 1
            z, _, words, weak = term_tests.absence_test(term, problem, whole, reduced, 1, 0.05)
            assert weak == 1
            assert "least significant" in words
            false += abs(z) > need
    assert plain > 0.08 * studies
    assert at_most(false, studies)


def test_ends_of_intervals_move_on() -> None:
    """Of studies whose plain set leaves out the true k_B (15 to 20 % do, 5 % may) most hold it in the
    interval shown; no interval gets shorter, and none where nothing is in lockstep moves."""
    studies, share = 120, 0.1
    data = drawn(studies, 54, share=share)
    true = 3.0 * share / 2.5
    law = predictor(k_A * A + k_C * C + k_B * B, (k_A, k_C, k_B), CONDITIONS, N, lower=0.0)
    problem = Problem(law, data)
    start = np.tile([3.0 * (1 - share), 1e-3, true], (studies, 1))
    held = solve(problem, start, fixed=np.array([False, False, True]))
    z = score(problem, held, 2).z
    missed = np.flatnonzero(np.abs(z) > stats.norm.ppf(0.975) + 0.02)
    assert not at_most(len(missed), studies)
    some = missed[:8]
    kept = 0
    for i in some.tolist():
        found = fit(law, one_of(data, i), starts=1, near=start[:1])
        curve = Curve.of(found, 2)
        got = along(found, curve, 0.95, se=float(standard_errors(found)[2]), closeness=1e-4)
        kept += got.reconciled.low.value <= true <= got.reconciled.high.value
        assert got.lower_one_sided.value >= got.reconciled.low.value - 1e-12
    assert kept >= 0.6 * len(some)
