"""Speed of one fit beside two plain scripts: the same law, table and 16 starts, in the same run."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import sympy
from scipy.optimize import least_squares

from discrim.fit.engine import solve
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Problem
from discrim.fit.scout import scout, starting_values
from discrim.mechanism.library import load_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.linear import linear_constants
from discrim.ratelaw.model import amount
from discrim.reactor.rates import RatePredictor

RUNS = 40
STARTS = 16
TRUE = {"k_surface": 5.0, "K_ads_A": 1.2, "K_ads_B": 0.6, "K_ads_C": 0.9}


def best_of(work: Callable[[], object], times: int) -> float:
    took = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        took.append(time.perf_counter() - start)
    return min(took)


def compare(repeats: int = 5, seed: int = 1) -> dict[str, float]:
    """Seconds for each route, and how often each reaches the best optimum found by any."""
    from pathlib import Path

    mechanism = load_mechanism("two-adsorbed-product-inhibits", base=Path.cwd())
    law = derive(mechanism)
    constants = [c.symbol for c in law.constants]
    species = [amount(s) for s in law.species]
    rng = np.random.default_rng(seed)
    conditions = rng.uniform(0.1, 3.0, (RUNS, len(species)))
    compiled = CompiledLaw(law.rate, constants, species)
    p = len(constants)
    predictor = RatePredictor(
        [compiled],
        np.zeros(RUNS, int),
        names=tuple(c.name for c in law.constants),
        lower=np.zeros(p),
        upper=np.full(p, np.inf),
        linear=np.isin(
            [c.name for c in law.constants], linear_constants([law.rate], law.constants)
        ),
        scale=np.ones(p),
        starts=np.zeros((0, p)),
    )
    true = np.array([list(TRUE.values())[k % 4] for k in range(p)])
    y = predictor.predict(true[None], conditions, constants=False).values[0]
    y = y * (1 + 0.03 * rng.standard_normal(RUNS))
    data = Measurements(y, conditions, (), Scale.ESTIMATED, tuple(s.name for s in species))
    starts = starting_values(predictor, STARTS, seed)
    weight = np.ones(RUNS)
    found: dict[str, float] = {}

    def ours() -> None:
        problem = Problem(predictor, data)
        sol = solve(problem, scout(predictor, data, weight, starts))
        found["discrim"] = float(sol.objective.min())

    columns = list(conditions.T)
    f = sympy.lambdify([*constants, *species], law.rate, "numpy")

    def plain() -> None:
        best = np.inf
        for s in starts:
            r = least_squares(lambda t: f(*t, *columns) - y, s, bounds=(0, np.inf))
            best = min(best, 2 * r.cost)
        found["plain"] = best

    g = sympy.lambdify(
        [*constants, *species], [law.rate.diff(c) for c in constants], "numpy", cse=True
    )
    fast = sympy.lambdify([*constants, *species], law.rate, "numpy", cse=True)

    def expert() -> None:
        best = np.inf
        for s in starts:
            with np.errstate(all="ignore"):
                try:
                    r = least_squares(
                        lambda u: fast(*np.exp(u), *columns) - y,
                        np.log(s),
                        jac=lambda u: np.stack(g(*np.exp(u), *columns), axis=1) * np.exp(u),
                        method="lm",
                    )
                except ValueError:  # a residual that is not finite
                    continue
            best = min(best, 2 * r.cost)
        found["expert"] = best

    ours()
    out = {"discrim": best_of(ours, repeats)}
    out["plain"] = best_of(plain, max(1, repeats // 2))
    out["expert"] = best_of(expert, repeats)
    out |= {f"{k} objective": v for k, v in found.items()}
    return out


def ratios(tables: int = 9) -> dict[str, float]:
    """Medians over ``tables`` tables: seconds a fit and how many times faster."""
    rows = [compare(seed=k + 1) for k in range(tables)]
    best = [min(r["discrim objective"], r["plain objective"], r["expert objective"]) for r in rows]
    return {
        "seconds": float(np.median([r["discrim"] for r in rows])),
        "plain seconds": float(np.median([r["plain"] for r in rows])),
        "expert seconds": float(np.median([r["expert"] for r in rows])),
        "times faster than plain": float(np.median([r["plain"] / r["discrim"] for r in rows])),
        "times faster than expert": float(np.median([r["expert"] / r["discrim"] for r in rows])),
        "best optimum reached": float(
            np.mean(
                [r["discrim objective"] <= b * (1 + 1e-8) for r, b in zip(rows, best, strict=True)]
            )
        ),
    }


if __name__ == "__main__":
    for key, value in ratios().items():
        print(f"{key:26s} {value:.6g}")
