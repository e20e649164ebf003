"""How often a term that is absent is claimed, by the methods, on the same studies of a cell.

The test is the package's own, through `participation`. It is slow next to a batch, so studies in which the
batch is far from rejecting are not put through it, except for some of them, which check that this is so.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from discrim.evidence.distributions import (
    chi2_quantile_upper,
    f_quantile_upper,
    normal_quantile,
)
from discrim.evidence.participation import participation
from discrim.evidence.projected import weak_nuisance
from discrim.fit.engine import solve
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution
from discrim.verdict import MOST_WEAK
from tests.calibration.cells import Cell
from tests.calibration.methods import ALPHA, score_z
from tests.calibration.simulate import OPTIONS, Drawn, draw

# of those that cannot be rejected, how many are put through the whole test all the same
CHECKED = 20


@dataclass
class Counts:
    """How many of ``studies`` each method decides against the truth (or, of power, with it).

    ``missing``: could not be tested. ``whole``: how many were put through the interval or the bound itself,
    ``whole_false`` of which leave out the truth, ``contrary`` of these although the test accepts it.
    """

    cell: Cell
    studies: int
    false: dict[str, int] = field(default_factory=dict)
    missing: int = 0
    whole: int = 0
    whole_false: int = 0
    contrary: int = 0

    def rate(self, method: str) -> float:
        return self.false.get(method, 0) / self.studies if method in self.false else float("nan")


def rejected(drawn: Drawn, free: Solution, rows: np.ndarray) -> np.ndarray:
    """Whether the package's test rejects absence in the studies ``rows``, shape of ``rows``."""
    out = np.zeros(len(rows), bool)
    without = drawn.without()
    for k, i in enumerate(rows):
        full, reduced = drawn.fits(int(i), free, without)
        term = drawn.term(drawn.table(int(i)).conditions[:1])
        found = participation(
            term,
            drawn.table(int(i)),
            full,
            reduced,
            origin="stated",
            level=1 - ALPHA,
            seed=1,
            matters_above=None,
            brief=True,
        )
        towards = drawn.law.two_sided or found.z > 0
        out[k] = found.p < ALPHA and towards and found.weak <= MOST_WEAK
    return out


def weak_of(drawn: Drawn, i: int, full: Fit) -> int:
    """Combinations of the other constants that study i does not tell apart."""
    at_zero = full.theta.copy()
    at_zero[0] = 0.0
    held = solve(full.problem, at_zero[None], fixed=drawn.held)
    return weak_nuisance(full.problem, held, 0).count


def suspects(drawn: Drawn, held: Solution, z: np.ndarray) -> np.ndarray:
    """Studies that the package could reject: z near 1.645 or beyond (1.96 two-sided; where other constants
    are in lockstep more is asked for, never less), or an objective near what excludes by itself."""
    data = drawn.problem.data
    far = np.abs(z) > 1.8 if drawn.law.two_sided else z > 1.5
    far |= ~np.isfinite(z)
    if data.scale is Scale.STATED:
        df = max(data.n - (drawn.truth.shape[1] - 1), 1)
        far |= held.objective > chi2_quantile_upper(0.02, df)
    return np.flatnonzero(far)


def textbook(drawn: Drawn) -> tuple[np.ndarray, np.ndarray]:
    """The F test of one constant with conditions as exact: F, shape (S,), and the estimates.

    With stated errors chi-squared over one degree of freedom in its place would be narrower still;
    F is what is printed by most.
    """
    exact = Problem(drawn.problem.predictor, drawn.problem.data.without_condition_errors())
    full = solve(exact, drawn.truth.copy(), options=OPTIONS)
    start = drawn.truth.copy()
    held = solve(exact, start, fixed=drawn.held, options=OPTIONS)
    df = exact.data.n - drawn.truth.shape[1]
    if df < 1:
        return np.full(drawn.studies, np.nan), full.theta[:, 0]
    with np.errstate(divide="ignore", invalid="ignore"):
        f = (held.objective - full.objective) / (full.objective / df)
    return f, full.theta[:, 0]


def run_size(cell: Cell, studies: int, seed: int) -> Counts:
    """A cell in which the term is absent."""
    rng = np.random.default_rng(cell.seeds(seed, "size"))
    drawn = draw(cell, studies, rng)
    held, free = drawn.at(0.0), drawn.free()
    z = score_z(drawn.problem, held)
    out = Counts(cell, studies, missing=int((~np.isfinite(z)).sum()))
    sided = ALPHA / 2 if drawn.law.two_sided else ALPHA
    k = score_z(drawn.problem, held, conditional=False)
    for name, x in (("K", k), ("conditional", z)):
        claims = np.abs(x) if drawn.law.two_sided else x
        out.false[name] = int((claims > normal_quantile(1 - sided)).sum())

    look = suspects(drawn, held, z)
    out.false["discrim"] = int(rejected(drawn, free, look).sum())
    rest = np.setdiff1d(np.arange(studies), look)
    some = rng.permutation(rest)[:CHECKED]
    out.whole, out.contrary = len(some), int(rejected(drawn, free, some).sum())

    n, p = drawn.problem.data.n, drawn.truth.shape[1]
    up = np.ones(studies, bool) if drawn.law.two_sided else free.theta[:, 0] > 0
    f, estimate = textbook(drawn)
    if n > p:
        rises = np.ones(studies, bool) if drawn.law.two_sided else estimate > 0
        with np.errstate(invalid="ignore"):
            out.false["textbook F"] = int(((f > f_quantile_upper(ALPHA, 1, n - p)) & rises).sum())
    if drawn.problem.data.scale is Scale.STATED:
        with np.errstate(invalid="ignore"):
            fall = held.objective - free.objective
        limit = chi2_quantile_upper(ALPHA if drawn.law.two_sided else 2 * ALPHA, 1)
        out.false["likelihood ratio"] = int(((fall > limit) & up).sum())
        out.false["AIC by 2"] = int(((fall - 2 >= 2) & up).sum())
        out.false["AIC by 4"] = int(((fall - 2 >= 4) & up).sum())
    return out
