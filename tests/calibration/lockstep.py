"""Size and coverage where two terms move in lockstep: r = k_A A + k_B B with k_B = 0.

B = 2.5 A (1 + spread N(0, 1)), 12 runs, rate error 1 %. All studies of a cell are one batch
through the package's own engine and score; nothing here is a reimplementation of the test.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import sympy

from discrim.evidence.distributions import (
    chi2_quantile_upper,
    f_upper,
    normal_quantile,
    t_quantile,
)
from discrim.evidence.intervals import guard_level
from discrim.evidence.score import score
from discrim.fit.engine import Options, Problem, solve
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

N = 12
RATE_ERROR = 0.01
K_A = 3.0
ALPHA = 0.05


@dataclass(frozen=True)
class Cell:
    """One cell: how far the runs are from lockstep, how well conditions are known and of what origin.

    ``origin``: measured, set, or mixed (A measured, B set); ``shared``: every three runs share the
    error of A (made from one stock).
    """

    spread: float
    condition_error: float
    origin: str = "measured"
    shared: bool = False


@dataclass(frozen=True)
class Result:
    """Fractions of the studies of a cell; ``excluded`` counts those that could not be fitted."""

    cell: Cell
    studies: int
    textbook_false: float
    textbook_cover: float
    score_false: float
    score_cover: float
    interval_cover: float
    excluded: int


def predictor(lower: float = 0.0) -> RatePredictor:
    k_a, k_b, a, b = sympy.symbols("k_a k_b a b")
    law = CompiledLaw(k_a * a + k_b * b, [k_a, k_b], [a, b])
    return RatePredictor(
        [law],
        np.zeros(N, int),
        names=("k_a", "k_b"),
        lower=np.full(2, lower),
        upper=np.full(2, np.inf),
        linear=np.ones(2, bool),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )


def draw(cell: Cell, studies: int, rng: np.random.Generator) -> Measurements:
    """Tables of one cell; true conditions and printed ones according to the origin of the errors."""
    groups = np.arange(N) // 3 if cell.shared else np.arange(N)
    base_a = rng.uniform(0.5, 2.0, (studies, N))
    base_b = 2.5 * base_a * (1 + cell.spread * rng.standard_normal((studies, N)))
    noise_a = rng.standard_normal((studies, groups.max() + 1))[:, groups]
    noise_b = rng.standard_normal((studies, N))
    shaken_a = base_a * (1 + cell.condition_error * noise_a)
    shaken_b = base_b * (1 + cell.condition_error * noise_b)
    a_set = cell.origin == "set"
    b_set = cell.origin in ("set", "mixed")
    true_a, shown_a = (shaken_a, base_a) if a_set else (base_a, shaken_a)
    _, shown_b = (shaken_b, base_b) if b_set else (base_b, shaken_b)
    y = K_A * true_a * (1 + RATE_ERROR * rng.standard_normal((studies, N)))
    e = cell.condition_error
    return Measurements(
        y,
        np.stack([shown_a, shown_b], axis=2),
        (
            source(OBSERVATION, N, relative=RATE_ERROR),
            source(0, N, relative=e, origin="set" if a_set else "measured", groups=groups),
            source(1, N, relative=e, origin="set" if b_set else "measured"),
        ),
        Scale.STATED,
        ("a", "b"),
    )


def run_cell(cell: Cell, studies: int, seed: int) -> Result:
    rng = np.random.default_rng([seed, round(1e4 * cell.spread), round(1e4 * cell.condition_error)])
    data = draw(cell, studies, rng)
    start = np.tile([K_A, 0.0], (studies, 1))
    options = Options(max_iterations=60, gradient_tolerance=1e-9)

    # reconciled score at the true value, k_B = 0
    problem = Problem(predictor(), data)
    null = solve(problem, start, fixed=np.array([False, True]), options=options)
    z = score(problem, null, 1).z
    good = np.isfinite(z)
    two = normal_quantile(1 - (ALPHA - guard_level(ALPHA)) / 2)
    fits = null.objective <= chi2_quantile_upper(guard_level(ALPHA), N - 1)
    # at zero, the edge, only evidence for a larger value excludes
    inside = (np.maximum(z, 0.0) <= two) & fits

    # textbook: conditions exact, both constants free of bounds
    exact = Problem(predictor(-np.inf), data.without_condition_errors())
    full = solve(exact, start, options=options)
    zero = solve(exact, start, fixed=np.array([False, True]), options=options)
    df = N - 2
    f = (zero.objective - full.objective) / (full.objective / df)
    p = np.array([f_upper(x, 1, df) for x in f])
    k_b = full.theta[:, 1]
    t = np.sign(k_b) * np.sqrt(np.maximum(f, 0.0))
    return Result(
        cell,
        studies,
        float(np.mean((p < ALPHA) & (k_b > 0))),
        float(np.mean(np.abs(t) <= t_quantile(1 - ALPHA / 2, df))),
        float(np.mean(z[good] > normal_quantile(1 - ALPHA))),
        float(np.mean(np.abs(z[good]) <= normal_quantile(1 - ALPHA / 2))),
        float(np.mean(inside[good])),
        int((~good).sum()),
    )


SPREADS = ((0.5, 0.01), (0.02, 0.01), (0.01, 0.01), (0.01, 0.02), (0.003, 0.02))
CELLS = tuple(
    Cell(spread, error, origin, shared)
    for origin, shared in (("measured", False), ("set", False), ("mixed", False), ("set", True))
    for spread, error in SPREADS
)
