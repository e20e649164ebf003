"""How often intervals hold the true value, and how often `negligible` would be said falsely.

All studies of a cell are tested at the truth as one batch, as the package's intervals do at each value.
Of some the interval itself and the bound of the effect are computed, which must agree: what they leave
out the test must have rejected.
"""

from __future__ import annotations

import numpy as np

from discrim.evidence.curve import Curve
from discrim.evidence.distributions import chi2_quantile_upper, f_quantile_upper, normal_quantile
from discrim.evidence.effect import InEffect, t_of
from discrim.evidence.intervals import Interval, along, standard_errors
from discrim.evidence.term_effect import effect_with_interval
from discrim.fit.engine import solve
from discrim.fit.fit import of_solution
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution
from discrim.verdict import MOST_WEAK
from tests.calibration.cells import Cell
from tests.calibration.methods import ALPHA, excluded, score_z
from tests.calibration.simulate import OPTIONS, Drawn, draw
from tests.calibration.size import Counts, textbook, weak_of

# what matters, as a part of the true effect
JUST_UNDER = 0.999


def run_coverage(cell: Cell, studies: int, seed: int, whole: int) -> Counts:
    """Intervals of the constant in question that miss its true value."""
    rng = np.random.default_rng(cell.seeds(seed, "coverage"))
    drawn = draw(cell, studies, rng)
    truth = drawn.truth[:, 0]
    held, free = drawn.at(truth), drawn.free()
    z = score_z(drawn.problem, held)
    out = Counts(cell, studies, missing=int((~np.isfinite(z)).sum()))
    k = score_z(drawn.problem, held, conditional=False)
    out.false["K"] = int((np.abs(k) > normal_quantile(1 - ALPHA / 2)).sum())
    out.false["conditional"] = int((np.abs(z) > normal_quantile(1 - ALPHA / 2)).sum())
    out_of_set = excluded(drawn.problem, held, z, two_sided=True)
    out.false["discrim"] = int(out_of_set.sum())
    missed = np.array([_missed(drawn, free, i, "reconciled") for i in range(whole)], bool)
    out.whole, out.whole_false = whole, int(missed.sum())
    out.contrary = int((missed & ~out_of_set[:whole]).sum())
    n, p = drawn.problem.data.n, drawn.truth.shape[1]
    f, _ = textbook(drawn)
    with np.errstate(invalid="ignore"):
        out.false["textbook F"] = int((f > f_quantile_upper(ALPHA, 1, n - p)).sum())
        fall = held.objective - free.objective
    if drawn.problem.data.scale is Scale.STATED:
        out.false["likelihood ratio"] = int((fall > chi2_quantile_upper(ALPHA, 1)).sum())
    return out


def _missed(drawn: Drawn, free: Solution, i: int, kind: str) -> bool:
    """Whether the interval of study i leaves out the true value (its hull, as verdicts use it)."""
    problem = Problem(drawn.problem.predictor, drawn.table(i))
    full = of_solution(problem, free.take(np.array([i])))
    se = float(standard_errors(full)[0])
    found = along(full, Curve.of(full, 0), 1 - ALPHA, se=se)
    interval: Interval = getattr(found, kind)
    x = float(drawn.truth[i, 0])
    if interval.empty:
        return True
    return not interval.low.value <= x <= interval.high.value


def run_negligible(cell: Cell, studies: int, seed: int, whole: int) -> Counts:
    """Bounds of the effect under what matters, where the true effect is just over it."""
    rng = np.random.default_rng(cell.seeds(seed, "negligible"))
    drawn = draw(cell, studies, rng)
    law = drawn.law
    at = np.median(drawn.conditions.reshape(-1, drawn.conditions.shape[2]), axis=0)
    term = drawn.term(at[None])
    assert term.knocked is not None
    effect = float(term.knocked.effect(drawn.truth[:1], at[None])[0, 0])
    matters = JUST_UNDER * abs(effect)
    sign = 1 if effect > 0 else -1
    wrapped = InEffect(drawn.problem.predictor, 0, term.knocked, at, sign, law.two_sided)
    problem = Problem(wrapped, drawn.problem.data)
    start = wrapped.from_inner(drawn.truth.copy())
    start[:, 0] = float(t_of(effect))
    held = solve(problem, start, fixed=drawn.held, options=OPTIONS)
    free = drawn.free()
    # towards smaller effects
    z = -sign * score_z(problem, held)
    out = Counts(cell, studies, missing=int((~np.isfinite(z)).sum()))
    out.false["conditional"] = int((z > normal_quantile(1 - ALPHA)).sum())
    too_small = excluded(problem, held, z, two_sided=False)
    out.false["discrim"] = int(too_small.sum())
    under = np.array([_too_small(drawn, free, i, at, matters) for i in range(whole)], bool)
    out.whole, out.whole_false = whole, int(under.sum())
    out.contrary = int((under & ~too_small[:whole]).sum())
    return out


def _too_small(drawn: Drawn, free: Solution, i: int, at: np.ndarray, matters: float) -> bool:
    problem = Problem(drawn.problem.predictor, drawn.table(i))
    full = of_solution(problem, free.take(np.array([i])))
    found = effect_with_interval(drawn.term(at[None]), problem, full, 1 - ALPHA)
    assert found is not None
    if not found.bound < matters:
        return False
    # as in a verdict: two combinations of others in lockstep carry no bound
    return weak_of(drawn, i, full) <= MOST_WEAK
