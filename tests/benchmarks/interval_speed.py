"""Time of all intervals of a five-constant law beside the time of its fit, in the same run.

Simulated tables: 24 runs of r = k K_A K_B A B/(1 + K_A A + K_B B + K_C C + K_D D)^2, rates with an
error of 2 %, all four amounts measured with an error of 1 %. The work is that of `discrim weigh` on
such a law: linearised, profile, reconciled and guaranteed interval of each constant.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from discrim.evidence.curve import Curve
from discrim.evidence.guaranteed import guaranteed
from discrim.evidence.guaranteed_cleared import Cleared
from discrim.evidence.intervals import along_all, linearised, standard_errors
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.reactor.rates import RatePredictor
from discrim.weigh.cleared_law import cleared_law
from tests.reference.outside import predictor, symbols

RUNS, STARTS, LEVEL = 24, 16, 0.95
AMOUNTS = symbols("A B C D")
CONSTANTS = symbols("k K_A K_B K_C K_D")
TRUE = np.array([5.0, 1.2, 0.6, 0.9, 0.4])


def law() -> RatePredictor:
    a, b, c, d = AMOUNTS
    k, k_a, k_b, k_c, k_d = CONSTANTS
    rate = k * k_a * k_b * a * b / (1 + k_a * a + k_b * b + k_c * c + k_d * d) ** 2
    return predictor(rate, CONSTANTS, AMOUNTS, RUNS, lower=0.0)


def table(bound: RatePredictor, seed: int) -> Measurements:
    rng = np.random.default_rng(seed)
    true = rng.uniform(0.1, 3.0, (RUNS, len(AMOUNTS)))
    y = bound.predict(TRUE[None], true, constants=False).values[0]
    errors = [source(OBSERVATION, RUNS, relative=0.02)]
    errors += [source(j, RUNS, relative=0.01) for j in range(len(AMOUNTS))]
    return Measurements(
        y * (1 + 0.02 * rng.standard_normal(RUNS)),
        true * (1 + 0.01 * rng.standard_normal(true.shape)),
        tuple(errors),
        Scale.STATED,
        tuple(str(s) for s in AMOUNTS),
    )


def intervals(found: Fit, form: Cleared | None) -> int:
    """All intervals of all constants; how many."""
    se = standard_errors(found)
    every = [linearised(found, j, float(se[j]), LEVEL) for j in range(found.p)]
    every += guaranteed(found.predictor, found.data, 1.0 - LEVEL, 1.0, form)
    for one in along_all(found, [Curve.of(found, j) for j in range(found.p)], LEVEL, se=se):
        every += [one.profile, one.reconciled]
    return len(every)


def processor_seconds(work: Callable[..., object], *given: object, **named: object) -> float:
    start = time.process_time()
    work(*given, **named)
    return time.process_time() - start


def ratios(tables: int = 9, repeats: int = 3) -> dict[str, float]:
    """Medians over ``tables`` tables: processor seconds of fit and intervals, and their ratio (the
    shortest of ``repeats`` each, taken in turn)."""
    bound = law()
    form = cleared_law(bound.laws[0])
    rows = []
    for seed in range(1, tables + 1):
        data = table(bound, seed)
        found = fit(bound, data, starts=STARTS)
        both = [
            (
                processor_seconds(fit, bound, data, starts=STARTS),
                processor_seconds(intervals, found, form),
            )
            for _ in range(repeats)
        ]
        rows.append(np.min(both, axis=0))
    seconds = np.array(rows)
    over = seconds[:, 1] / seconds[:, 0]
    return {
        "fit seconds": float(np.median(seconds[:, 0])),
        "interval seconds": float(np.median(seconds[:, 1])),
        "intervals over fit": float(np.median(over)),
        "worst": float(np.max(over)),
    }


if __name__ == "__main__":
    for key, value in ratios().items():
        print(f"{key:20s} {value:.6g}")
