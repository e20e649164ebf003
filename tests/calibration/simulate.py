"""Simulated tables of one cell, all studies as one batch of the package's own engine."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.term import Kind, Term
from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit, of_solution
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.fit.problem import Problem, Solution
from tests.calibration.cells import Cell
from tests.calibration.laws import LAWS, Law

OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-9)
MEAN_RATE = 3.75  # of the two pathways; an absolute error is given relative to it
# own error of a rate that is computed from conditions, so that it is not known exactly
TANK_OWN = 0.005
# of a stirred tank: columns of what is fed and of the residence time
FED, STAYS = 2, 3


@dataclass(frozen=True, eq=False)
class Drawn:
    """A batch of S studies of one cell.

    ``truth`` shape (S, p), the constant in question first; ``conditions`` true, shape (S, N, m);
    ``base`` what their errors are independent of, true values of measured and nominal ones of set
    conditions; ``variance`` the true one of the observations where it is unknown to the studies.
    """

    cell: Cell
    law: Law
    problem: Problem
    truth: np.ndarray
    conditions: np.ndarray
    base: np.ndarray
    variance: float = 0.0

    @property
    def studies(self) -> int:
        return len(self.truth)

    @property
    def held(self) -> np.ndarray:
        out = np.zeros(self.truth.shape[1], bool)
        out[0] = True
        return out

    def at(self, value: float | np.ndarray) -> Solution:
        """Fits with the constant in question held at ``value``, the others free, from the truth."""
        start = self.truth.copy()
        start[:, 0] = value
        return solve(self.problem, start, fixed=self.held, options=OPTIONS)

    def free(self) -> Solution:
        """Fits with all constants free, from the truth, which can only favour them."""
        return solve(self.problem, self.truth.copy(), options=OPTIONS)

    def table(self, i: int) -> Measurements:
        """The table of study i by itself."""
        data = self.problem.data
        return replace(data, y=data.y[i], conditions=data.conditions[i])

    def without(self) -> Solution:
        """Fits of the law without the term, as one batch."""
        reduced = self.law.predictor(self.problem.data.n, with_term=False)
        return solve(Problem(reduced, self.problem.data), self.truth[:, 1:].copy(), options=OPTIONS)

    def fits(self, i: int, free: Solution, without: Solution) -> tuple[Fit, Fit]:
        """Study i with and without the term, as records of the package."""
        table, row = self.table(i), np.array([i])
        reduced = self.law.predictor(table.n, with_term=False)
        return (
            of_solution(Problem(self.problem.predictor, table), free.take(row)),
            of_solution(Problem(reduced, table), without.take(row)),
        )

    def term(self, at: np.ndarray) -> Term:
        """The term in question with named conditions ``at``, shape (K, m)."""
        kind = Kind.ORDER if self.law.two_sided else Kind.ZERO
        n = self.problem.data.n
        labels = tuple(f"point {j + 1}" for j in range(len(at)))
        reduced = self.law.predictor(n, with_term=False)
        knocked = self.law.knocked
        return Term(kind, self.problem.predictor, reduced, (0,), (), knocked, at, labels)


def draw(cell: Cell, studies: int, rng: np.random.Generator, psi: float | None = None) -> Drawn:
    """Tables of one cell; ``psi`` is the constant in question, else the cell's share gives it."""
    law = LAWS[cell.law]
    base = law.columns(rng, studies, cell.runs, cell.spread)
    n, m = base.shape[1:]
    truth = np.tile(law.truth(cell.share), (studies, 1))
    if psi is not None:
        truth[:, 0] = psi
    predictor = law.predictor(n)
    if law.formula is not None:
        base[..., FED] += predictor.predict(truth, base, constants=False).values * base[..., STAYS]
    true, shown = base.copy(), base.copy()
    sources: list[ErrorSource] = []
    for j in range(m):
        if not law.errors[j] or cell.origin == "exact":
            continue
        groups = _groups(cell, n, law.samples, shared=cell.shared if j == 0 else 1)
        noise = rng.standard_normal((studies, groups.max() + 1))[:, groups]
        size = law.errors[j] * cell.condition_error
        moved = FED if law.formula is not None else 1
        is_set = cell.origin == "set" or (cell.origin == "mixed" and j == moved)
        factor = 1 + cell.drawn * size * noise
        (true if is_set else shown)[..., j] *= factor
        if is_set and j == FED:  # what leaves the tank follows what is fed
            for both in (true, shown):
                both[..., 0] *= factor
                both[..., 1] *= factor
        origin = "set" if is_set else "measured"
        sources.append(source(j, n, relative=size, origin=origin, groups=groups))
    f = predictor.predict(truth, true, constants=False).values
    noise = rng.standard_normal((studies, n))
    y, truth, own, scale = _observed(cell, law, f, noise, truth, rng)
    data = Measurements(
        y,
        shown,
        (*own, *sources),
        scale,
        tuple(map(str, law.conditions)),
        cell.scale_df,
    )
    variance = (cell.rate_error * MEAN_RATE) ** 2
    return Drawn(cell, law, Problem(predictor, data), truth, true, base, variance)


def _groups(cell: Cell, n: int, samples: int, *, shared: int) -> np.ndarray:
    run = np.arange(n) // samples
    return np.zeros(n, int) if shared == 0 else run // shared


def _observed(
    cell: Cell,
    law: Law,
    f: np.ndarray,
    noise: np.ndarray,
    truth: np.ndarray,
    rng: np.random.Generator,
) -> tuple[np.ndarray, np.ndarray, tuple[ErrorSource, ...], Scale]:
    """Observations, constants, own errors of the observations, and what is known of these."""
    n = f.shape[1]
    if law.formula is not None:  # f is zero: what is fed was made to fit the law
        own = TANK_OWN * MEAN_RATE
        return own * noise, truth, (source(OBSERVATION, n, absolute=own),), Scale.STATED
    if cell.scale == "stated":
        y = f * (1 + cell.rate_error * noise)
        return y, truth, (source(OBSERVATION, n, relative=cell.rate_error),), Scale.STATED
    sd = cell.rate_error * MEAN_RATE
    y = f + sd * noise
    if cell.scale == "estimated":
        return y, truth, (), Scale.ESTIMATED
    # replicates: each study has its own pooled standard deviation; in units of it (both constants
    # are linear) all studies of a batch state the same error
    pooled = sd * np.sqrt(rng.chisquare(cell.scale_df, len(y)) / cell.scale_df)
    own_sources = (source(OBSERVATION, n, absolute=1.0),)
    return y / pooled[:, None], truth / pooled[:, None], own_sources, Scale.REPLICATES
