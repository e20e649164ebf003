"""Several responses with errors that are not stated, against other ways to the same estimates.

References: direct minimisation of the published criteria by scipy (a general-purpose library), statsmodels
for regressions of one response, closed forms of linear theory named beside each check, and published
estimates (tests/reference/SOURCES.toml). The tables are simulated, with their seeds, unless they are
said to be measured.
"""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
import sympy
from scipy.linalg import expm
from scipy.optimize import minimize

from discrim.evidence.score import score
from discrim.fit.engine import solve
from discrim.fit.fit import fit
from discrim.fit.measurements import Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.fit.responses import (
    Estimate,
    Unknown,
    enlargement,
    estimate,
    reference_df,
    with_covariance,
)
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.model import Prediction
from discrim.reactor.rates import RatePredictor
from tests.reference.outside import column, model

A, B = sympy.symbols("A B", nonnegative=True)
K = sympy.symbols("k_1:6", nonnegative=True)


def predictor(laws: list, p: int, response: np.ndarray, *, linear: bool = True) -> RatePredictor:
    lower = np.full(p, -np.inf) if linear else np.zeros(p)
    return RatePredictor(
        [CompiledLaw(e, list(K[:p]), [A, B]) for e in laws],
        response,
        names=tuple(s.name for s in K[:p]),
        lower=lower,
        upper=np.full(p, np.inf),
        linear=np.full(p, linear),
        scale=np.ones(p),
        starts=np.zeros((0, p)),
    )


class Table:
    """n runs at random conditions, each with one observation of each law."""

    def __init__(self, laws: list, p: int, n: int, seed: int, *, linear: bool = True) -> None:
        self.rng = np.random.default_rng(seed)
        self.n, self.r = n, len(laws)
        c = np.exp(self.rng.uniform(-1.0, 1.2, (n, 2)))
        self.conditions = np.vstack([c] * self.r)
        self.response = np.repeat(np.arange(self.r), n)
        self.run = np.tile(np.arange(n), self.r)
        self.predictor = predictor(laws, p, self.response, linear=linear)

    def draw(self, theta: list, covariance: np.ndarray) -> np.ndarray:
        mean = self.predictor.predict(np.array([theta], float), self.conditions).values[0]
        noise = self.rng.multivariate_normal(np.zeros(self.r), covariance, self.n)
        return np.asarray(mean + noise.T.ravel())

    def data(self, y: np.ndarray, sources: tuple = ()) -> Measurements:
        return Measurements(y, self.conditions, sources, Scale.STATED, ("A", "B"))

    def unknown(self, *, together: bool) -> Unknown:
        r = self.r
        return Unknown(
            self.response,
            self.run,
            np.ones(r, bool),
            together,
            np.full(r, 1e-9),
            np.full(r, np.inf),
        )

    def residuals(self, theta: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Shape (n, R)."""
        e = y - self.predictor.predict(theta[None], self.conditions).values[0]
        return e.reshape(self.r, self.n).T


BENT = [K[0] * A / (1 + K[1] * A), K[2] * K[0] * A / (1 + K[1] * A) + K[0] * B / 10]
CORRELATED = np.array([[0.01, 0.012], [0.012, 0.03]])


def found(e: Estimate | None) -> Estimate:
    assert e is not None
    assert e.converged
    return e


def test_determinant_criterion_is_minimised() -> None:
    """Box & Draper, Biometrika 52 (1965) 355: the constants minimise |E'E|. scipy does it directly."""
    table = Table(BENT, 3, 12, 3, linear=False)
    y = table.draw([2.0, 0.5, 0.7], CORRELATED)

    def log_det(theta: np.ndarray) -> float:
        e = table.residuals(np.abs(theta), y)
        return float(np.linalg.slogdet(e.T @ e)[1])

    ours = found(
        estimate(table.predictor, table.data(y), table.unknown(together=True), several=True)
    )
    options = {"xatol": 1e-10, "fatol": 1e-14, "maxiter": 4000}
    theirs = minimize(log_det, [2.0, 0.5, 0.7], method="Nelder-Mead", options=options)
    assert ours.theta == pytest.approx(theirs.x, rel=1e-6)
    assert log_det(ours.theta) <= theirs.fun + 1e-9
    assert len(ours.minima) == 1
    e = table.residuals(ours.theta, y)
    assert ours.matrix == pytest.approx(e.T @ e / (12 - 3), rel=1e-6)


def test_same_regressors_leave_the_separate_fits() -> None:
    """Zellner, J. Am. Stat. Assoc. 57 (1962) 348 (from memory): where all responses have the same
    regressors, least squares of each alone is the estimate under any covariance; its residuals give S."""
    laws = [K[0] * A + K[1] * B, K[2] * A + K[3] * B]
    table = Table(laws, 4, 11, 5)
    y = table.draw([1.0, 0.4, -0.3, 2.0], CORRELATED)
    ours = found(estimate(table.predictor, table.data(y), table.unknown(together=True)))
    x = table.conditions[:11]
    alone = [sm.OLS(y[table.response == r], x).fit() for r in (0, 1)]
    assert ours.theta == pytest.approx(np.concatenate([f.params for f in alone]), rel=1e-9)
    e = np.stack([f.resid for f in alone], axis=1)
    assert ours.matrix == pytest.approx(e.T @ e / 9, rel=1e-9)
    assert ours.df == pytest.approx([9, 9])


def test_a_variance_for_each_of_separate_laws() -> None:
    """Laws without a constant in common: the residual variance of each regression (statsmodels)."""
    table = Table([K[0] * A + K[1] * B, K[2] * A], 3, 9, 6)
    y = table.draw([1.0, 0.5, 2.0], np.diag([0.02, 0.5]))
    ours = found(estimate(table.predictor, table.data(y), table.unknown(together=False)))
    x = table.conditions[:9]
    first, second = sm.OLS(y[:9], x).fit(), sm.OLS(y[9:], x[:, :1]).fit()
    assert np.diag(ours.matrix) == pytest.approx([first.scale, second.scale], rel=1e-9)
    assert ours.df == pytest.approx([7, 8])


def test_a_variance_for_each_with_a_constant_in_common() -> None:
    """The restricted likelihood of Patterson & Thompson, Biometrika 58 (1971) 545 (from memory):
    ln|V| + ln|G'V^-1 G| + e'V^-1 e, minimised by scipy."""
    table = Table([K[0] * A + K[1] * B, K[0] * B + K[2] * A], 3, 8, 7)
    y = table.draw([1.0, 0.5, 2.0], np.diag([0.02, 0.4]))
    ours = found(estimate(table.predictor, table.data(y), table.unknown(together=False)))
    g = table.predictor.predict(np.ones((1, 3)), table.conditions).by_constants
    assert g is not None

    def minus_two_l(log_variance: np.ndarray) -> float:
        w = np.exp(-log_variance[table.response])
        normal = g[0].T @ (w[:, None] * g[0])
        theta = np.linalg.solve(normal, g[0].T @ (w * y))
        e = y - g[0] @ theta
        return float(-np.log(w).sum() + np.linalg.slogdet(normal)[1] + e @ (w * e))

    theirs = minimize(minus_two_l, [-3.0, -1.0], method="BFGS", options={"gtol": 1e-8})
    assert np.diag(ours.matrix) == pytest.approx(np.exp(theirs.x), rel=1e-5)


def test_responses_missing_in_some_runs() -> None:
    """Maximum likelihood over constants and covariance, by scipy, with three observations missing."""
    table = Table(BENT, 3, 12, 3, linear=False)
    y = table.draw([2.0, 0.5, 0.7], CORRELATED)
    keep = np.delete(np.arange(24), [3, 17, 20])
    response, run = table.response[keep], table.run[keep]
    pred = predictor(BENT, 3, response, linear=False)
    data = Measurements(y[keep], table.conditions[keep], (), Scale.STATED, ("A", "B"))
    unknown = Unknown(response, run, np.ones(2, bool), True, np.full(2, 1e-9), np.full(2, np.inf))
    ours = found(estimate(pred, data, unknown))

    def minus_two_l(x: np.ndarray) -> float:
        low = np.array([[np.exp(x[3]), 0.0], [x[4], np.exp(x[5])]])
        v = (low @ low.T)[np.ix_(response, response)] * (run[:, None] == run[None, :])
        e = data.y - pred.predict(np.abs(x[:3])[None], data.conditions).values[0]
        return float(np.linalg.slogdet(v)[1] + e @ np.linalg.solve(v, e))

    begin = np.r_[2.0, 0.5, 0.7, -2.3, 0.1, -2.0]
    theirs = minimize(minus_two_l, begin, method="BFGS", options={"gtol": 1e-7})
    assert ours.theta == pytest.approx(theirs.x[:3], rel=1e-5)
    assert ours.criterion == pytest.approx(theirs.fun, abs=1e-6)


# where each constant stands in the matrix of the scheme
ENTRIES = (
    (((0, 0), -1), ((1, 0), 1)),
    (((0, 0), -1), ((2, 0), 1)),
    (((2, 2), -1), ((3, 2), 1)),
    (((2, 2), -1), ((4, 2), 1)),
    (((4, 4), -1), ((2, 4), 1)),
)


class Pinene:
    """Combinations of the five shares of the pinene scheme, a linear system: y = expm(M t) y(0)."""

    names: tuple[str, ...] = ("k1", "k2", "k3", "k4", "k5")
    lower, upper = np.zeros(5), np.full(5, np.inf)
    linear = np.zeros(5, bool)
    scale = np.array([6.0, 3.0, 2.0, 27.0, 4.0])  # in units of 1e-5 per minute
    starts = np.array([[6.0, 3.0, 2.0, 27.0, 4.0]])

    def __init__(self, times: np.ndarray, combinations: np.ndarray) -> None:
        self.times, self.combinations = times, combinations

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        k = 1e-5 * theta
        m = np.zeros((len(k), 5, 5))
        for j, entries in enumerate(ENTRIES):
            for (a, b), sign in entries:
                m[:, a, b] += sign * k[:, j]
        w, v = np.linalg.eig(m)
        inverse = np.linalg.pinv(v)
        begin = 100.0 * inverse[:, :, 0]
        t = self.times[None, :, None]
        grown = np.exp(w[:, None] * t)  # (S, T, 5)
        shares = np.einsum("sij,stj,sj->sti", v, grown, begin)
        values = self._seen(shares)
        if not constants:
            return Prediction(values)
        # derivative of exp(M t) in the eigenvectors: divided differences of the exponentials
        gap = w[:, :, None] - w[:, None, :]
        same = np.abs(gap) < 1e-12
        apart = (grown[..., :, None] - grown[..., None, :]) / np.where(same, 1.0, gap)[:, None]
        divided = np.where(same[:, None], t[..., None] * grown[..., :, None], apart)
        slopes = []
        for entries in ENTRIES:
            change = np.zeros((5, 5))
            for at, sign in entries:
                change[at] = 1e-5 * sign
            inner = inverse @ change @ v
            slopes.append(self._seen(np.einsum("sij,stjk,sjk,sk->sti", v, divided, inner, begin)))
        return Prediction(values, np.stack(slopes, axis=2))

    def _seen(self, shares: np.ndarray) -> np.ndarray:
        """The combinations of shares (S, T, 5), one after the other, shape (S, 3 T)."""
        seen = np.einsum("ri,sti->srt", self.combinations, shares.real)
        return np.asarray(seen.reshape(len(shares), -1))


def test_the_scheme_against_matrix_exponentials() -> None:
    """Shares by scipy's expm, slopes by central differences."""
    scheme = Pinene(np.array([1e3, 2e4]), np.eye(5))
    k = np.array([5.9, 2.9, 2.0, 27.0, 4.0])
    m = 1e-5 * np.array(
        [
            [-k[0] - k[1], 0, 0, 0, 0],
            [k[0], 0, 0, 0, 0],
            [k[1], 0, -k[2] - k[3], 0, k[4]],
            [0, 0, k[2], 0, 0],
            [0, 0, k[3], 0, -k[4]],
        ]
    )
    expected = np.stack([100 * expm(m * t)[:, 0] for t in (1e3, 2e4)], axis=1)
    made = scheme.predict(k[None], np.zeros((10, 0)))
    assert made.values[0] == pytest.approx(expected.ravel(), rel=1e-9)
    assert made.by_constants is not None
    for j in range(5):
        up, down = (k + s * 1e-4 * np.eye(5)[j] for s in (1, -1))
        both = scheme.predict(np.stack([up, down]), np.zeros((10, 0))).values
        assert made.by_constants[0, :, j] == pytest.approx((both[0] - both[1]) / 2e-4, abs=1e-6)


def test_published_estimates_by_the_determinant_criterion() -> None:
    """Isomerization of alpha-pinene, measured: the estimates of Bates & Watts on three responses.

    Theirs have three digits; the third constant is poorly fixed.
    """
    names = ("pinene", "dipentene", "allo", "pyronene", "dimer")
    y = np.stack([column("alpha_pinene", n) for n in names], axis=1)
    _, s, vt = np.linalg.svd(y - y.mean(axis=0), full_matrices=False)
    published = model("alpha_pinene")["published"]
    # the eigenvalues of Box et al. (1973), of which three are more than rounding
    assert np.sort(s**2)[[0, 1, 2, 4]] == pytest.approx(
        np.array(published["eigenvalues"])[[0, 1, 2, 4]], rel=0.01
    )
    times, combinations = column("alpha_pinene", "t"), vt[:3]
    n = len(times)
    unknown = Unknown(
        np.repeat(np.arange(3), n),
        np.tile(np.arange(n), 3),
        np.ones(3, bool),
        True,
        np.full(3, 1e-6),
        np.full(3, np.inf),
    )
    data = Measurements((y @ combinations.T).T.ravel(), np.zeros((3 * n, 0)), (), Scale.STATED, ())
    ours = found(estimate(Pinene(times, combinations), data, unknown))
    theirs = np.array(published["determinant"]) * 1e5
    assert ours.theta[[0, 1, 3, 4]] == pytest.approx(theirs[[0, 1, 3, 4]], rel=0.01)
    assert ours.theta[2] == pytest.approx(theirs[2], rel=0.06)


def test_one_response_is_the_usual_variance() -> None:
    """For one response the equations are RSS/(N - p), and with measured conditions those that the
    engine solves for s^2 (which `tests/evidence/test_sizes_unknown_scale.py` checks)."""
    table = Table([K[0] * A + K[1] * B], 2, 15, 8)
    y = table.draw([1.0, 0.5], np.array([[0.01]]))
    for sources in ((), (source(0, 15, relative=0.05), source(1, 15, relative=0.05))):
        data = table.data(y, sources)
        ours = found(estimate(table.predictor, data, table.unknown(together=False)))
        usual = fit(
            table.predictor,
            Measurements(y, table.conditions, sources, Scale.ESTIMATED, ("A", "B")),
        )
        assert ours.matrix[0, 0] == pytest.approx(usual.scale2, rel=1e-3)
        assert ours.theta == pytest.approx(usual.theta, rel=1e-4)


def test_condition_errors_are_taken_off() -> None:
    """Errors of conditions shared by the responses of one run: the variances of the rest come out
    right on average (their true values are those simulated)."""
    seen = []
    for seed in range(30):
        table = Table([K[0] * A, K[1] * A + K[2] * B], 3, 20, 100 + seed)
        y = table.draw([1.0, 0.5, 1.0], np.diag([0.0025, 0.01]))
        noise = 1 + 0.05 * table.rng.standard_normal((20, 2))
        table.conditions = table.conditions * np.vstack([noise, noise])
        sources = tuple(source(j, 40, relative=0.05, groups=table.run) for j in (0, 1))
        e = estimate(table.predictor, table.data(y, sources), table.unknown(together=False))
        assert e is not None
        seen.append(np.diag(e.matrix))
    mean, spread = np.mean(seen, axis=0), np.std(seen, axis=0) / np.sqrt(len(seen))
    assert np.abs(mean - [0.0025, 0.01]) == pytest.approx(0, abs=3.5 * spread.max())
    assert (np.abs(mean - [0.0025, 0.01]) < 3.5 * spread).all()


def test_a_covariance_becomes_sources_shared_within_runs() -> None:
    """Signed loadings of the observations of one run give back the covariance, also a negative one."""
    table = Table([K[0] * A, K[0] * B], 1, 5, 9)
    matrix = np.array([[2.0, -1.2], [-1.2, 1.0]])
    data = with_covariance(table.data(np.ones(10)), table.unknown(together=True), matrix, 4.0)
    sol = solve(Problem(table.predictor, data), np.ones((1, 1)))
    v = sol.covariance[0]
    expected = matrix[np.ix_(table.response, table.response)]
    expected = expected * (table.run[:, None] == table.run[None, :])
    assert v == pytest.approx(expected, rel=1e-12)
    assert data.scale is Scale.REPLICATES
    assert data.scale_df == 4.0


def test_an_exact_fit_ends_at_the_least_error() -> None:
    table = Table([K[0] * A, K[1] * B], 2, 8, 10)
    mean = table.predictor.predict(np.array([[1.0, 2.0]]), table.conditions).values[0]
    for together in (False, True):
        unknown = table.unknown(together=together)
        e = estimate(table.predictor, table.data(mean), unknown)
        assert e is not None
        assert e.on_least.all()
        assert e.theta == pytest.approx([1.0, 2.0], rel=1e-9)


def test_degrees_of_freedom() -> None:
    assert reference_df([7.0]) == 7.0
    assert reference_df([np.inf, np.inf]) == np.inf
    assert reference_df([10.0, 0.0]) == 0.0
    # one that is stated takes nothing away; a second one that is estimated does
    assert reference_df([10.0, np.inf]) == pytest.approx(10.0)
    assert 0.5 * 10 < reference_df([10.0, 10.0]) < 10.0
    # two equal shares are the worst: 1/df = (c - (c - 1)/2)/nu
    c = 4.0 / 1.853
    assert reference_df([10.0, 10.0]) == pytest.approx(10.0 / (c - (c - 1) / 2), rel=1e-6)
    assert enlargement(9.0, 1) == (1.0, 9.0)
    assert enlargement(9.0, 2) == (pytest.approx(9 * 8 / (8 * 7)), 8.0)
    assert enlargement(2.0, 2)[1] == 0.0


def test_variance_of_a_mean_of_correlated_responses() -> None:
    """The enlargement against simulation: the mean of 3 correlated responses of 9 runs, weighted with
    their own S; nu = 8. The variance of the estimate over 40,000 tables, and the mean of what is said
    of it."""
    rng = np.random.default_rng(4)
    n, r = 9, 3
    y = rng.standard_normal((40_000, n, r)) @ np.linalg.cholesky(np.eye(r) + 0.5).T
    mean = y.mean(axis=1)
    e = y - mean[:, None]
    s = np.einsum("snr,snq->srq", e, e) / (n - 1)
    w = np.linalg.solve(s, np.ones((len(s), r, 1)))[..., 0]
    estimates = (w * mean).sum(axis=1) / w.sum(axis=1)
    said = 1.0 / w.sum(axis=1) / n
    factor, _ = enlargement(n - 1.0, r)
    assert estimates.var() / said.mean() == pytest.approx(factor, rel=0.03)


SIZES = [(False, 8), (True, 8)]


@pytest.mark.parametrize(("together", "n"), SIZES)
def test_size_of_the_score_test(together: bool, n: int) -> None:
    """A term that is absent is found at 5 % one-sided in no more studies than 5 % and three binomial
    errors; 120 simulated tables of two responses, the term in both of them."""
    assert _size(together, n, 120) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 120)


@pytest.mark.slow
@pytest.mark.parametrize(("together", "n"), SIZES)
def test_size_of_the_score_test_in_full(together: bool, n: int) -> None:
    assert _size(together, n, 2000) <= 0.06 + 2 * np.sqrt(0.06 * 0.94 / 2000)


def _size(together: bool, n: int, studies: int) -> float:
    covariance = CORRELATED if together else np.diag([0.01, 0.03])
    hits = 0
    for seed in range(studies):
        table = Table([K[0] * A + K[2] * B, K[1] * A + 1.2 * K[2] * B], 3, n, 1000 + seed)
        y = table.draw([1.0, 0.5, 0.0], covariance)
        data, unknown = table.data(y), table.unknown(together=together)
        e = estimate(table.predictor, data, unknown)
        assert e is not None
        held = with_covariance(data, unknown, e.held, e.reference_df)
        problem = Problem(table.predictor, held)
        begin = np.array([[1.0, 0.5, 0.0]])
        sol = solve(problem, begin, fixed=np.array([[False, False, True]]))
        hits += int(score(problem, sol, 2).z[0] > 1.6449)
    return hits / studies


@pytest.mark.slow
@pytest.mark.parametrize("rate_error", [0.01, 0.003])
def test_size_in_lockstep_with_measured_conditions(rate_error: float) -> None:
    """A and B measured at 2 %, B = 2.5 A within 1 %, two rates that both could hold B and do not."""
    studies, hits = 500, 0
    for seed in range(studies):
        table = Table([K[0] * A + K[1] * B, K[2] * A + K[1] * B], 3, 20, 5000 + seed)
        a = table.conditions[:20, 0]
        b = 2.5 * a * (1 + 0.01 * table.rng.standard_normal(20))
        table.conditions = np.vstack([np.column_stack([a, b])] * 2)
        y = table.draw([1.0, 0.0, 0.5], rate_error**2 * np.eye(2))
        noise = 1 + 0.02 * table.rng.standard_normal((20, 2))
        table.conditions = table.conditions * np.vstack([noise, noise])
        sources = tuple(source(j, 40, relative=0.02, groups=table.run) for j in (0, 1))
        data, unknown = table.data(y, sources), table.unknown(together=False)
        e = estimate(table.predictor, data, unknown)
        assert e is not None
        held = with_covariance(data, unknown, e.held, e.reference_df)
        problem = Problem(table.predictor, held)
        sol = solve(problem, np.array([[1.0, 0.0, 0.5]]), fixed=np.array([[False, True, False]]))
        hits += int(score(problem, sol, 1).z[0] > 1.6449)
    assert hits / studies <= 0.06 + 2 * np.sqrt(0.06 * 0.94 / studies)
