"""How often the true law stands among 3 to 100 laws of a surface reaction.

The laws are k times a product of powers of amounts over (1 + adsorption terms) to a power; the true one is
among them, the others are drawn from the family, some of which contain it. All studies of a cell are
fitted as one batch, then each is judged by the package.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import combinations, product

import numpy as np
import sympy

from discrim.evidence.rivals import standing
from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit, fit, of_solution
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.problem import Problem
from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.rates import RatePredictor
from tests.calibration.cells import Cell
from tests.calibration.methods import ALPHA

RUNS = 20
AMOUNTS = sympy.symbols("a b c", positive=True)
CONSTANT = sympy.Symbol("k", positive=True)
ADSORPTION = sympy.symbols("K_a K_b K_c", positive=True)
_TOPS = ((1, 1, 0), (1, 0, 0), (0, 1, 0), (1, 0.5, 0), (0.5, 1, 0), (1, 1, 0.5), (1, 1, -0.5))


@dataclass(frozen=True)
class Form:
    """k times amounts to the powers ``top``, over (1 + terms of the amounts ``adsorbed``)^``power``."""

    top: tuple[float, ...]
    adsorbed: tuple[int, ...]
    power: int

    def contains(self, other: Form) -> bool:
        """Whether ``other`` is this law with some adsorption constants at zero."""
        if self == other or self.top != other.top:
            return False
        fewer = set(other.adsorbed) < set(self.adsorbed)
        return fewer and (not other.adsorbed or other.power == self.power)

    def predictor(self) -> RatePredictor:
        terms = [ADSORPTION[j] * AMOUNTS[j] for j in self.adsorbed]
        rate = CONSTANT * sympy.prod(x**p for x, p in zip(AMOUNTS, self.top, strict=True))
        rate = rate / (1 + sympy.Add(*terms)) ** self.power
        constants = [CONSTANT, *(ADSORPTION[j] for j in self.adsorbed)]
        p = len(constants)
        return RatePredictor(
            [CompiledLaw(rate, constants, list(AMOUNTS))],
            np.zeros(RUNS, int),
            names=tuple(map(str, constants)),
            lower=np.zeros(p),
            upper=np.full(p, np.inf),
            linear=np.array([True] + [False] * (p - 1)),
            scale=np.ones(p),
            starts=np.zeros((0, p)),
        )


TRUE = {
    "A adsorbed": (Form((1, 1, 0), (0,), 1), (2.0, 1.0)),
    "A and B adsorbed, one site": (Form((1, 1, 0), (0, 1), 1), (2.0, 1.0, 0.6)),
    "A and B adsorbed, two sites": (Form((1, 1, 0), (0, 1), 2), (4.0, 0.7, 0.5)),
}


def family() -> list[Form]:
    """All forms, each once: without adsorption the power says nothing."""
    out = []
    for top, size in product(_TOPS, range(4)):
        for adsorbed in combinations(range(3), size):
            out += [Form(top, adsorbed, power) for power in ((1, 2) if adsorbed else (1,))]
    return out


@dataclass(frozen=True)
class RivalCell:
    """``number`` of laws, the true one among them; ``spread``: of B/A, None where all amounts vary on
    their own; ``stated``: whether the rate error is."""

    true: str
    number: int
    stated: bool = True
    condition_error: float = 0.0
    spread: float | None = None
    rate_error: float = 0.04

    @property
    def studies(self) -> float:
        """Part of the studies asked for, by the time that they take."""
        return {3: 1.0, 10: 0.5, 30: 0.25, 100: 0.1}[self.number]

    def seeds(self, seed: int) -> list[int]:
        return Cell(self.true, self.number, self.spread or 0.0, self.condition_error).seeds(
            seed, f"rivals {self.stated}"
        )


@dataclass(frozen=True)
class RivalResult:
    """How many of ``studies`` keep the true law; ``best``: in how many it is the best by AIC, and how
    many it is behind the best by 4 or more (of the studies with stated errors)."""

    cell: RivalCell
    studies: int
    stands: int
    behind: int


def tables(cell: RivalCell, studies: int, rng: np.random.Generator) -> Measurements:
    form, values = TRUE[cell.true]
    base = 10 ** rng.uniform(-1, 0.7, (studies, RUNS, 3))
    if cell.spread is not None:
        moved = 1 + cell.spread * rng.standard_normal((studies, RUNS))
        base[..., 1] = base[..., 0] * np.maximum(moved, 0.05)
    f = form.predictor().predict(np.tile(values, (studies, 1)), base, constants=False).values
    noise = rng.standard_normal(f.shape)
    sources = []
    if cell.stated:
        y = f * (1 + cell.rate_error * noise)
        sources.append(source(OBSERVATION, RUNS, relative=cell.rate_error))
    else:  # a constant variance, as an unweighted fit supposes
        y = f + cell.rate_error * f.mean(axis=1, keepdims=True) * noise
    shown = base
    if cell.condition_error:
        shown = base * (1 + cell.condition_error * rng.standard_normal(base.shape))
        sources += [source(j, RUNS, relative=cell.condition_error) for j in range(3)]
    scale = Scale.STATED if cell.stated else Scale.ESTIMATED
    return Measurements(y, shown, tuple(sources), scale, ("a", "b", "c"))


def run_rivals(cell: RivalCell, studies: int, seed: int) -> RivalResult:
    rng = np.random.default_rng(cell.seeds(seed))
    true, values = TRUE[cell.true]
    others = [f for f in family() if f != true]
    picked = rng.permutation(len(others))[: cell.number - 1]
    forms = [true, *(others[i] for i in picked)]
    contains = {
        (j, i): True
        for i, small in enumerate(forms)
        for j, large in enumerate(forms)
        if large.contains(small)
    }
    data = tables(cell, studies, rng)
    every = [_fits(f, true, values, data, studies) for f in forms]
    stands = behind = 0
    for s in range(studies):
        fits = [column[s] for column in every]
        kept = standing(fits, contains, {}, alpha=ALPHA, seed=1, only=[0])[0].stands
        stands += kept
        aic = np.array([f.objective + 2 * f.p for f in fits])
        behind += bool(aic[0] - np.nanmin(aic) >= 4)
    return RivalResult(cell, studies, stands, behind)


def _fits(
    form: Form, true: Form, values: tuple[float, ...], data: Measurements, studies: int
) -> list[Fit]:
    """One law fitted to all tables, from its fit to what the true law says of the first of them."""
    predictor = form.predictor()
    start = np.array(values)
    if form != true:
        first = replace(data, y=data.y[0], conditions=data.conditions[0], sources=())
        says = true.predictor().predict(np.array([values]), first.conditions, constants=False)
        aim = replace(
            first,
            y=says.values[0],
            sources=(source(OBSERVATION, RUNS, relative=0.04),),
            scale=Scale.STATED,
        )
        start = fit(predictor, aim, starts=16).theta
    begin = np.tile(start, (studies, 1))
    found = solve(Problem(predictor, data), begin, options=Options(gradient_tolerance=1e-8))
    return [
        of_solution(
            Problem(predictor, replace(data, y=data.y[s], conditions=data.conditions[s])),
            found.take(np.array([s])),
        )
        for s in range(studies)
    ]


RIVAL_CELLS = (
    *(
        RivalCell(true, number, stated)
        for true, number, stated in product(TRUE, (3, 10, 30), (True, False))
    ),
    *(RivalCell(true, 100, True) for true in TRUE),
    *(
        RivalCell(true, number, True, 0.02, spread)
        for true, number, spread in product(list(TRUE)[:2], (3, 10), (None, 0.02))
    ),
)
