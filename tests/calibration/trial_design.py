"""Random studies with a known truth for the trial: design, law, errors, candidates, and the study file.

All numbers are invented and drawn from the seed of the study alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import sympy

from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.knocked import KnockedOut
from discrim.reactor.rates import RatePredictor

A, B, C = sympy.symbols("A B C", positive=True)
k, k_A, k_B, K_A, K_B, K_C = sympy.symbols("k k_A k_B K_A K_B K_C", positive=True)

# each law with the constant that is zero where B takes no part, the others, and typical values
ONE = "k_A*[A]"
TWO = "k_A*[A] + k_B*[B]"
ADSORBED = "k*[A]/(1 + K_A*[A])"
BOTH = "k*[A]/(1 + K_A*[A] + K_B*[B])"
PARTLY = "k*[A]/(1 + K_A*[A]) + k_B*[B]"
POISONED = "k*[A]/(1 + K_A*[A] + K_C*[C])"
FORMS: dict[str, tuple[Any, tuple[Any, ...], tuple[float, ...]]] = {
    TWO: (k_A * A + k_B * B, (k_B, k_A), (0.0, 0.3)),
    BOTH: (k * A / (1 + K_A * A + K_B * B), (K_B, k, K_A), (0.0, 0.6, 0.1)),
    PARTLY: (k * A / (1 + K_A * A) + k_B * B, (k_B, k, K_A), (0.0, 0.6, 0.1)),
}
# candidates of a study: the first holds B and contains the truth, with B's constant zero or not
FAMILIES = (
    (TWO,),
    (TWO, ONE),
    (TWO, ADSORBED),
    (TWO, PARTLY, ONE),
    (BOTH,),
    (BOTH, ADSORBED),
    (BOTH, TWO, ADSORBED),
    (BOTH, POISONED),
    (PARTLY, ADSORBED),
    (PARTLY, BOTH, TWO),
)


@dataclass(frozen=True, eq=False)
class Design:
    """One drawn study.

    ``truth``: constants of the first candidate, that of B first; ``base`` and ``shown``: conditions, shape
    (N, 3), of A, B and C: what their errors are independent of (true values of measured and nominal
    ones of set conditions), and as printed.
    """

    seed: list[int]
    family: tuple[str, ...]
    spread: float
    condition_error: float
    rate_error: float
    origins: tuple[str | None, str | None]
    shared: bool
    scale: str
    matters: float
    truth: np.ndarray
    base: np.ndarray
    shown: np.ndarray
    rate: np.ndarray
    stock: np.ndarray

    @property
    def runs(self) -> int:
        return len(self.rate)

    @property
    def well_spread(self) -> bool:
        return self.spread >= max(10 * self.condition_error, 0.1)

    def effects(self, psi: float) -> np.ndarray:
        """Effect of B in each run when its constant is ``psi``, the others true."""
        expression, constants, _ = FORMS[self.family[0]]
        with_it, without = (
            CompiledLaw(e, list(constants), [A, B, C])
            for e in (expression, expression.subs(constants[0], 0))
        )
        theta = self.truth.copy()
        theta[0] = psi
        knocked = KnockedOut(with_it, without, np.arange(len(constants)))
        return knocked.effect(theta[None], self.shown)[0]

    def problem(self) -> Problem:
        """The first candidate on the table, with the errors as they were drawn."""
        expression, constants, _ = FORMS[self.family[0]]
        p, n = len(constants), self.runs
        predictor = RatePredictor(
            [CompiledLaw(expression, list(constants), [A, B, C])],
            np.zeros(n, int),
            names=tuple(map(str, constants)),
            lower=np.zeros(p),
            upper=np.full(p, np.inf),
            linear=np.zeros(p, bool),
            scale=np.ones(p),
            starts=np.zeros((0, p)),
        )
        e = self.condition_error
        sources: list[ErrorSource] = [source(OBSERVATION, n, relative=self.rate_error)]
        if e > 0:
            groups = self.stock if self.shared else np.arange(n)
            sources.append(source(0, n, relative=e, origin="measured", groups=groups))
            sources.append(source(1, n, relative=e, origin="measured"))
        data = Measurements(self.rate, self.shown, tuple(sources), Scale.STATED, ("A", "B", "C"))
        return Problem(predictor, data)


def draw(seed: int, number: int) -> Design:
    """Study ``number`` of the trial with this ``seed``."""
    rng = np.random.default_rng([seed, number])
    family = FAMILIES[int(rng.integers(len(FAMILIES)))]
    n = int(np.round(2 * 20 ** rng.uniform(0, 1)))
    spread = float(10 ** rng.uniform(-2.5, 0.0))
    e = float(rng.choice([0.0, 0.002, 0.005, 0.01, 0.02, 0.05], p=[0.1, 0.2, 0.2, 0.2, 0.2, 0.1]))
    rate_error = float(rng.choice([0.003, 0.01, 0.03]))
    ways: list[tuple[str | None, str | None]] = [
        ("measured", "measured"),
        ("set", "set"),
        ("measured", "set"),
        (None, None),
    ]
    origins = ways[int(rng.choice(4, p=[0.4, 0.3, 0.15, 0.15]))]
    shared = bool(rng.random() < 0.2)
    scale = str(rng.choice(["stated", "estimated", "replicates"], p=[0.65, 0.25, 0.1]))
    if scale == "replicates":  # runs at the same conditions: set without error, done twice
        e, n, shared = 0.0, max(4, 2 * (n // 2)), False
    matters = float(rng.choice([0.05, 0.1, 0.2]))
    _, _, typical = FORMS[family[0]]
    truth = np.array(typical) * 10 ** rng.uniform(-0.3, 0.3, len(typical))
    if rng.random() < 0.5:
        share = float(10 ** rng.uniform(-2, -0.2))
        beside = truth[1] if family[0] == TWO else truth[1] / (1 + 10 * truth[2])
        if family[0] == BOTH:
            beside = (1 + 10 * truth[2]) / 10
        truth[0] = beside * share / (1 - share) / 2.5
    base, true, shown, stock = _conditions(
        rng, n, spread, e, origins, shared, scale == "replicates"
    )
    expression, constants, _ = FORMS[family[0]]
    law = CompiledLaw(expression, list(constants), [A, B, C])
    f = law(truth[None, None], true[None], constants=False, conditions_too=False, both=False)[0][0]
    noise = rng.standard_normal(n)
    sd = rate_error * (f if scale == "stated" else np.full(n, f.mean()))
    return Design(
        [seed, number],
        family,
        spread,
        e,
        rate_error,
        origins,
        shared,
        scale,
        matters,
        truth,
        base,
        shown,
        f + sd * noise,
        stock,
    )


def _conditions(
    rng: np.random.Generator,
    n: int,
    spread: float,
    e: float,
    origins: tuple[str | None, str | None],
    shared: bool,
    twice: bool,
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    different = n // 2 if twice else n
    a = rng.uniform(4.0, 20.0, different)
    b = 2.5 * a * np.maximum(1 + spread * rng.standard_normal(different), 0.02)
    c = rng.uniform(1.0, 30.0, different)
    base = np.stack([a, b, c], axis=1)
    if twice:
        base = np.repeat(base, 2, axis=0)
    stock = np.arange(n) // 3
    true, shown = base.copy(), base.copy()
    for j in range(2):
        groups = stock if shared and j == 0 else np.arange(n)
        factor = 1 + e * rng.standard_normal(groups.max() + 1)[groups]
        origin = origins[j] or str(rng.choice(["set", "measured"]))
        (true if origin == "set" else shown)[:, j] *= factor
    return base, true, shown, stock


def write(design: Design, folder: Path) -> Path:
    """The study file and its table; returns the path of the study."""

    def error(j: int) -> str:
        if design.condition_error == 0:
            return '"exact"'
        parts = [f'sd = "{100 * design.condition_error:g} %"']
        if design.origins[j] is not None:
            parts.append(f'origin = "{design.origins[j]}"')
        if j == 0 and design.shared:
            parts.append('shared_by = "stock"')
        return "{ " + ", ".join(parts) + " }"

    lines = ['title = "A simulated study"', 'table = "runs.csv"']
    for j, name in enumerate("AB"):
        lines += [f"[columns.{name.lower()}]", f'is = "{name}"', 'units = "mmol/L"']
        lines.append(f"error = {error(j)}")
    lines += ["[columns.c]", 'is = "C"', 'units = "mmol/L"', 'error = "exact"']
    lines += ["[columns.stock]", 'is = "group"']
    lines += ["[columns.rate]", 'is = "rate of P"', 'units = "mmol/L/s"']
    if design.scale == "stated":
        lines.append(f'error = "{100 * design.rate_error:g} %"')
    elif design.scale == "replicates":
        lines.append('error = "replicates"')
    for i, law in enumerate(design.family):
        lines += ["[[candidates]]", f'name = "law {i + 1}"', f'law = "{law}"']
    lines += [
        "[[questions]]",
        'participates = "B"',
        f'matters_above = "{100 * design.matters:g} %"',
    ]
    path = folder / "study.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    rows = ["a,b,c,stock,rate"]
    for (a, b, c), s, r in zip(design.shown, design.stock, design.rate, strict=True):
        rows.append(f"{a:.6g},{b:.6g},{c:.6g},s{s},{r:.6g}")
    (folder / "runs.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    return path
