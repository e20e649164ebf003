"""Size of the one-sided test at 5 % where the rates' variance is unknown, or other constants are weak.

Unknown variance: r = k_A A + k_B B, k_B = 0, B = 2.5 A (1 + 2 % N(0,1)), concentration errors 3 %, those of A
shared by runs or not. Weak: a third pathway k_C C, with A and C in lockstep, and B moving along what
little they differ by. Everything goes through the package's own engine and tests.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import sympy

from discrim.evidence.distributions import normal_quantile
from discrim.evidence.projected import outside_level, reach, weak_nuisance
from discrim.evidence.score import score
from discrim.fit.engine import Problem, solve
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor

ALPHA = 0.05
K_A = 3.0


@dataclass(frozen=True)
class ScaleCell:
    """``together``: how many runs share one error of A (0: all of them); ``rate_error``: its standard
    deviation, as a fraction of the mean rate."""

    runs: int
    origin: str
    together: int
    rate_error: float


@dataclass(frozen=True)
class WeakCell:
    """``spread`` of C/A; ``sign`` of B's movement against that of C."""

    runs: int
    spread: float
    condition_error: float
    sign: int


def law(expression: sympy.Expr, constants: list[sympy.Symbol], runs: int) -> RatePredictor:
    p = len(constants)
    amounts = list(sympy.symbols("a b c"))
    return RatePredictor(
        [CompiledLaw(expression, constants, amounts)],
        np.zeros(runs, int),
        names=tuple(map(str, constants)),
        lower=np.zeros(p),
        upper=np.full(p, np.inf),
        linear=np.ones(p, bool),
        scale=np.ones(p),
        starts=np.zeros((0, p)),
    )


def run_scale(cell: ScaleCell, studies: int, seed: int) -> float:
    """Fraction of studies that falsely claim B."""
    n = cell.runs
    rng = np.random.default_rng([seed, n, cell.together, round(1e4 * cell.rate_error)])
    groups = np.arange(n) // cell.together if cell.together else np.zeros(n, int)
    a = rng.uniform(0.5, 2.0, (studies, n))
    b = 2.5 * a * (1 + 0.02 * rng.standard_normal((studies, n)))
    shaken_a = a * (1 + 0.03 * rng.standard_normal((studies, groups.max() + 1))[:, groups])
    shaken_b = b * (1 + 0.03 * rng.standard_normal((studies, n)))
    is_set = cell.origin == "set"
    true_a = shaken_a if is_set else a
    shown = (a, b) if is_set else (shaken_a, shaken_b)
    y = K_A * true_a + cell.rate_error * 1.25 * K_A * rng.standard_normal((studies, n))
    sources = (
        source(0, n, relative=0.03, origin=cell.origin, groups=groups),
        source(1, n, relative=0.03, origin=cell.origin),
    )
    conditions = np.stack([*shown, np.zeros((studies, n))], axis=2)
    k_a, k_b, x, z = sympy.symbols("k_a k_b a b")
    problem = Problem(
        law(k_a * x + k_b * z, [k_a, k_b], n),
        Measurements(y, conditions, sources, Scale.ESTIMATED, ("a", "b", "c")),
    )
    held = solve(problem, np.tile([K_A, 0.0], (studies, 1)), fixed=np.array([False, True]))
    return float(np.mean(score(problem, held, 1).z > normal_quantile(1 - ALPHA)))


def run_weak(cell: WeakCell, studies: int, seed: int) -> tuple[float, float]:
    """Fractions of false claims of B, by the plain and by the projected form."""
    n = cell.runs
    rng = np.random.default_rng(
        [seed, n, round(1e4 * cell.spread), round(1e4 * cell.condition_error)]
    )
    a = rng.uniform(0.5, 2.0, (studies, n))
    d = rng.standard_normal((studies, n))
    b = 2.5 * a * np.maximum(1 + cell.sign * 0.3 * d, 0.02)
    c = 2.0 * a * np.maximum(1 + cell.spread * d, 0.02)
    true = np.stack([a, b, c], axis=2)
    y = K_A * a * (1 + 0.01 * rng.standard_normal((studies, n)))
    shown = true * (1 + cell.condition_error * rng.standard_normal(true.shape))
    sources: tuple[ErrorSource, ...] = (
        source(OBSERVATION, n, relative=0.01),
        *(source(j, n, relative=cell.condition_error, origin="measured") for j in range(3)),
    )
    k_a, k_b, k_c, x, z, w = sympy.symbols("k_a k_b k_c a b c")
    problem = Problem(
        law(k_a * x + k_b * z + k_c * w, [k_a, k_b, k_c], n),
        Measurements(y, shown, sources, Scale.STATED, ("a", "b", "c")),
    )
    start = np.tile([K_A, 0.0, 0.0], (studies, 1))
    held = solve(problem, start, fixed=np.array([False, True, False]))
    z_plain = score(problem, held, 1).z
    outside = outside_level(ALPHA)
    need = normal_quantile(1 - (ALPHA - outside))
    false = 0
    for i in range(studies):
        table = replace(problem.data, y=y[i], conditions=shown[i])
        one, at = Problem(problem.predictor, table), held.take(np.array([i]))
        weak = weak_nuisance(one, at, 1)
        if not weak.count:
            false += z_plain[i] > normal_quantile(1 - ALPHA)
        elif z_plain[i] > need:
            found = reach(one, at, (1,), weak, lambda p, s: score(p, s, 1).z, outside=outside)
            false += not (found.low[0] <= need)
    return float(np.mean(z_plain > normal_quantile(1 - ALPHA))), false / studies


SCALE_CELLS = tuple(
    ScaleCell(n, origin, together, rate_error)
    for n in (6, 12, 30)
    for origin in ("measured", "set")
    for together in (1, 3, 0)
    for rate_error in (0.01, 0.05)
)
WEAK_CELLS = tuple(
    WeakCell(n, spread, error, sign)
    for n in (12, 30)
    for spread, error in ((0.02, 0.01), (0.02, 0.03), (0.05, 0.03), (0.1, 0.03), (0.3, 0.01))
    for sign in (1, -1)
)
