"""The part of a score's variance that comes from variances that were estimated, beside measured conditions.

Checked against differences of V in the constants, and against the form for one variance where V is a
multiple of the unit matrix. How it keeps the size of the test is in the slow tests of
`tests/fit/test_errors_between_responses.py`. Tables are simulated.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy
from scipy import stats

from discrim.evidence.score import score
from discrim.evidence.several import several
from discrim.evidence.unknown_scale import scale_weights
from discrim.evidence.unknown_variances import added_variance
from discrim.fit.engine import solve
from discrim.fit.measurements import Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.fit.responses import Unknown, with_covariance
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

A, B = sympy.symbols("A B", nonnegative=True)
K = sympy.symbols("k_1:4", nonnegative=True)


def problem(
    laws: list, n: int, *, together: bool, relative: float, absolute: float, seed: int = 2
) -> Problem:
    rng = np.random.default_rng(seed)
    c = np.exp(rng.uniform(-1, 1, (n, 2)))
    r = len(laws)
    response, run = np.repeat(np.arange(r), n), np.tile(np.arange(n), r)
    predictor = RatePredictor(
        [CompiledLaw(e, list(K), [A, B]) for e in laws],
        response,
        names=("k_1", "k_2", "k_3"),
        lower=np.zeros(3),
        upper=np.full(3, np.inf),
        linear=np.zeros(3, bool),
        scale=np.ones(3),
        starts=np.zeros((0, 3)),
    )
    conditions = np.vstack([c] * r)
    y = predictor.predict(np.array([[1.0, 0.4, 0.7]]), conditions).values[0]
    y = y + 0.1 * rng.standard_normal(len(y))
    sources = tuple(
        source(j, r * n, relative=relative, absolute=absolute, groups=run) for j in (0, 1)
    )
    data = Measurements(y, conditions, sources, Scale.STATED, ("A", "B"))
    unknown = Unknown(
        response, run, np.ones(r, bool), together, np.full(r, 1e-9), np.full(r, np.inf)
    )
    matrix = 0.01 * (np.eye(r) + 0.4 * together * (np.ones((r, r)) - np.eye(r)))
    return Problem(predictor, with_covariance(data, unknown, matrix, 6.0))


BENT = [K[0] * A / (1 + K[1] * A) + K[2] * B, K[2] * A * B + K[0] * B]


@pytest.mark.parametrize("together", [False, True])
def test_against_differences_of_v(together: bool) -> None:
    """d V/d theta by central differences at the same conditions; all else by plain matrix algebra."""
    p = problem(BENT, 6, together=together, relative=0.05, absolute=0.0)
    sol = solve(p, np.array([[1.0, 0.4, 0.7]]), fixed=np.array([[False, False, True]]))
    theta, conditions = sol.theta[0], sol.conditions[0]

    def v(t: np.ndarray) -> np.ndarray:
        f_c = p.predictor.predict(t[None], conditions, conditions_too=True).by_conditions
        assert f_c is not None
        own = p.own_covariance(np.zeros((1, p.data.n)), conditions[None], None, np.ones(1))
        return np.asarray(p.with_measured(own, conditions[None], f_c)[0])

    inverse = np.linalg.inv(v(theta))
    patterns = [np.diag(e) if e.ndim == 1 else e for e in p.data.patterns]
    assert len(patterns) == (3 if together else 2)
    d = np.zeros((3, len(patterns)))
    for j in range(3):
        step = 1e-5 * np.eye(3)[j]
        dv = (v(theta + step) - v(theta - step)) / 2e-5
        for m, e in enumerate(patterns):
            d[j, m] = -0.5 * np.trace(inverse @ dv @ inverse @ e)
    a = [[0.5 * np.trace(inverse @ x @ inverse @ y) for x in patterns] for y in patterns]
    g = sol.jacobian[0]
    beta = np.linalg.lstsq(g[:, :2], g[:, 2], rcond=None)[0]
    own = d[2] - beta @ d[:2]
    expected = own @ np.linalg.solve(np.array(a), own)
    assert added_variance(p, sol, [2])[0, 0, 0] == pytest.approx(expected, rel=1e-5)


def test_one_variance_under_equal_errors() -> None:
    """V = v I: D' A^-1 D is 2 N c^2, c of the form for one unknown variance."""
    p = problem([K[0] * A + K[1] * B + K[2]], 9, together=False, relative=0.0, absolute=0.05)
    sol = solve(p, np.array([[1.0, 0.4, 0.7]]), fixed=np.array([[False, True, False]]))
    c = scale_weights(p, sol, [1])[0, 0]
    assert c != 0
    assert added_variance(p, sol, [1])[0, 0, 0] == pytest.approx(2 * 9 * c**2, rel=1e-9)


@pytest.mark.parametrize("together", [False, True])
def test_several_constants_at_once(together: bool) -> None:
    """K = S' (I + D' A^-1 D)^-1 S by plain matrix algebra; of one constant the square of its z."""
    p = problem(BENT, 6, together=together, relative=0.3, absolute=0.0)
    tested = [1, 2]
    sol = solve(p, np.array([[1.0, 0.1, 0.5]]), fixed=np.array([[False, True, True]]))
    g, r = sol.jacobian[0], sol.residual[0]
    own = g[:, tested] - g[:, :1] @ np.linalg.lstsq(g[:, :1], g[:, tested], rcond=None)[0]
    added = added_variance(p, sol, tested)[0]
    assert np.linalg.eigvalsh(added)[-1] > 0.01 * np.linalg.eigvalsh(own.T @ own)[-1]
    k = (own.T @ r) @ np.linalg.solve(own.T @ own + added, own.T @ r)
    tail = stats.f.sf(k / 2, 2, p.data.scale_df)
    assert several(p, sol, tested)[0][0] == pytest.approx(stats.norm.isf(tail / 2), rel=1e-6)
    one = solve(p, np.array([[1.0, 0.4, 0.5]]), fixed=np.array([[False, False, True]]))
    assert several(p, one, [2])[0][0] == pytest.approx(abs(score(p, one, 2).z[0]), rel=1e-6)
