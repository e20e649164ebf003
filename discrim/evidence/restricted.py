"""Restricted fits along constants of a fitted law: one held, the others free.

All values of all constants asked for are one batch. A first pass starts each value from the fit
with the one constant replaced, and from where the others would follow it on a straight line. Sweeps
then continue from neighbour to neighbour, both ways, until no value gains: a valley that bends away
from the straight line is followed round the bend, and a restricted fit caught in a side valley is
freed from either side.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

import numpy as np

from discrim.fit.engine import Options, solve
from discrim.fit.problem import STEP_LIMIT, Problem, Solution, joined
from discrim.fit.scout import starting_values

# the score takes out what is left of the gradient of the others, so 1e-6 is plenty
OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)
BRIEF = replace(OPTIONS, max_iterations=20)
SHORT = replace(OPTIONS, max_iterations=10)
# fewer values than this of one constant have no neighbours worth hearing from
FEW = 3
# how far the objective may be from that of a linear law to be taken for it
STRAIGHT = 0.25
# the factor by which a constant may be carried on from neighbour to neighbour
FARTHEST_STEP = 1e3
# sweeps carry a gain one value further each; most often the first finds none
SWEEPS = 60
# a restricted fit is in another valley, and its neighbours are to hear of it, when it is lower by
# this, relative; smaller gains are only taken
GAIN = 1e-4


class Trail:
    """One constant of a fitted law and what has been solved along it already.

    Parameters
    ----------
    theta : shape (p,) unrestricted optimum; psi : index of the constant
    jacobian : shape (N, p) whitened sensitivities there
    """

    def __init__(self, problem: Problem, theta: np.ndarray, psi: int, jacobian: np.ndarray) -> None:
        self.problem, self.theta, self.psi = problem, theta, psi
        p = len(theta)
        self.others = np.delete(np.arange(p), psi)
        # how the others follow psi near the optimum (least squares on whitened columns)
        self.slope = np.zeros(p)
        apart = jacobian[:, psi]
        if len(self.others):
            cols = jacobian[:, self.others]
            norms = np.sqrt((cols**2).sum(axis=0))
            norms = np.where(norms > 0, norms, 1.0)
            follow, *_ = np.linalg.lstsq(cols / norms, -jacobian[:, psi], rcond=1e-10)
            self.slope[self.others] = np.nan_to_num(follow / norms)
            apart = apart + (cols / norms) @ follow
        # rise of the objective with the square of the distance, were the law linear
        self.steepness = float(apart @ apart)
        # by rising value: later points start between their neighbours
        self.values, self.merit = np.empty(0), np.empty(0)
        self.found = np.empty((0, p))
        self.conditions: np.ndarray | None = None

    def starts(self, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """The fit with psi replaced, and the others following on a straight line, (S, p) each."""
        plain = np.tile(self.theta, (len(values), 1))
        plain[:, self.psi] = values
        line = self.theta + self.slope * (values - self.theta[self.psi])[:, None]
        line[:, self.psi] = values
        return plain, line

    def between(self, values: np.ndarray) -> tuple[np.ndarray, np.ndarray | None]:
        """Starts interpolated between the solved neighbours of each value."""
        known = self.values
        if len(known) == 1:
            left = right = np.zeros(len(values), int)
        else:
            right = np.clip(np.searchsorted(known, values), 1, len(known) - 1)
            left = right - 1
        gap = known[right] - known[left]
        share = np.clip((values - known[left]) / np.where(gap > 0, gap, 1.0), 0.0, 1.0)
        theta = self.found[left] + share[:, None] * (self.found[right] - self.found[left])
        theta[:, self.psi] = values
        nearest = np.where(share > 0.5, right, left)
        return theta, None if self.conditions is None else self.conditions[nearest]

    def remember(self, values: np.ndarray, sol: Solution) -> None:
        """Add what was solved; of two at one value the lower is kept."""
        good = np.isfinite(sol.objective)
        every = np.concatenate([self.values, values[good]])
        merit = np.concatenate([self.merit, self.problem.merit(sol)[good]])
        order = np.lexsort((merit, every))
        order = order[np.diff(every[order], prepend=-np.inf) > 0]
        self.values, self.merit = every[order], merit[order]
        self.found = np.concatenate([self.found, sol.theta[good]])[order]
        if self.problem.measured:
            old = self.conditions
            new = np.asarray(sol.conditions[good])
            self.conditions = (new if old is None else np.concatenate([old, new]))[order]

    def keep_only(self, values: np.ndarray) -> None:
        """Forget what was solved elsewhere."""
        kept = np.isin(self.values, values)
        self.values, self.merit = self.values[kept], self.merit[kept]
        self.found = self.found[kept]
        if self.conditions is not None:
            self.conditions = self.conditions[kept]


def follow(
    trails: Sequence[Trail],
    values: Sequence[np.ndarray],
    *,
    careful: bool = True,
    hopeless: float = np.inf,
    afresh: int = 0,
) -> list[Solution]:
    """Restricted optima at ``values`` of each trail, all of one problem, as one batch.

    ``careful`` searches each value from several starts, those of its neighbours among them; without
    it each starts between its solved neighbours, which is enough where a first pass was careful.
    Values with an objective above ``hopeless`` are rejected whatever it is: nothing is followed from
    there. ``afresh``: so many further starts spread over the typical sizes of the constants.
    """
    problem = trails[0].problem
    sizes = [len(v) for v in values]
    fixed = np.zeros((sum(sizes), len(trails[0].theta)), bool)
    ends = np.cumsum([0, *sizes])
    parts = [slice(int(a), int(b)) for a, b in pairwise(ends)]
    for trail, part in zip(trails, parts, strict=True):
        fixed[part, trail.psi] = True
    if not careful and all(len(t.values) > 1 for t in trails):
        near = [t.between(v) for t, v in zip(trails, values, strict=True)]
        conditions = None
        if problem.measured:
            conditions = np.concatenate([c for _, c in near if c is not None])
        start = np.concatenate([theta for theta, _ in near])
        sol = solve(problem, start, fixed=fixed, options=OPTIONS, conditions=conditions)
    else:
        sol = _searched(problem, trails, values, parts, fixed, hopeless, afresh)
    out = [sol.take(np.arange(part.start, part.stop)) for part in parts]
    for trail, v, one in zip(trails, values, out, strict=True):
        trail.remember(v, one)
    return out


def _searched(
    problem: Problem,
    trails: Sequence[Trail],
    values: Sequence[np.ndarray],
    parts: Sequence[slice],
    fixed: np.ndarray,
    hopeless: float,
    afresh: int,
) -> Solution:
    both = [t.starts(v) for t, v in zip(trails, values, strict=True)]
    plain = np.concatenate([a for a, _ in both])
    if len(trails[0].theta) == 1:
        return solve(problem, plain, fixed=fixed, options=OPTIONS)
    line = np.concatenate([b for _, b in both])
    s = len(plain)
    # where there are neighbours to hear from, one start each: the straight line while it moves no
    # other constant by half of its value
    close = np.abs(line - plain) <= 0.5 * np.abs(plain)
    near = (close | fixed).all(axis=1)
    alone = np.concatenate([np.full(len(v), len(v) < FEW) for v in values])
    hints, hinted = _hints(trails, values, parts)
    other = np.flatnonzero(alone)
    fresh = np.tile(np.arange(s), afresh)
    spread = np.repeat(starting_values(problem.predictor, afresh, seed=1), s, axis=0)
    rows = np.concatenate([np.arange(s), other, hinted, fresh])
    start = np.concatenate(
        [np.where((near & ~alone)[:, None], line, plain), line[other], hints, spread]
    )
    start = np.where(fixed[rows], plain[rows], start)
    every = solve(problem, start, fixed=fixed[rows], options=BRIEF)
    sol, _ = improved(
        problem, every.take(np.arange(s)), rows[s:], every.take(np.arange(s, len(rows)))
    )
    # one optimum only: far from it says nothing but that the start was far
    on = alone | (sol.objective <= hopeless) | is_linear(problem)
    rows = np.flatnonzero((sol.state == STEP_LIMIT) & on)
    if len(rows):
        sol, _ = improved(problem, sol, rows, _further(problem, sol.take(rows), fixed[rows]))
    if is_linear(problem):
        return sol
    straight = np.zeros(s, bool)
    if not problem.joint_scale:
        for trail, v, part in zip(trails, values, parts, strict=True):
            straight[part] = _straight(trail, v, sol.objective[part])
    return _swept(problem, sol, values, parts, plain, fixed, hopeless, straight)


def _further(problem: Problem, sol: Solution, fixed: np.ndarray) -> Solution:
    return solve(problem, sol.theta, fixed=fixed, options=OPTIONS, conditions=sol.conditions)


def _straight(trail: Trail, values: np.ndarray, objective: np.ndarray) -> np.ndarray:
    """Values at which the objective is what a law linear in its constants would have."""
    if len(values) < FEW or not np.isfinite(objective).any():
        return np.zeros(len(values), bool)
    rise = objective - np.nanmin(objective)
    expected = trail.steepness * (values - trail.theta[trail.psi]) ** 2
    with np.errstate(invalid="ignore"):
        return np.asarray(np.abs(rise - expected) <= STRAIGHT * expected)


def _swept(
    problem: Problem,
    sol: Solution,
    values: Sequence[np.ndarray],
    parts: Sequence[slice],
    plain: np.ndarray,
    fixed: np.ndarray,
    hopeless: float,
    straight: np.ndarray,
) -> Solution:
    """Continued from neighbour to neighbour, both ways, until no value gains; not to values in
    ``straight`` at first, which are as they should be."""
    left, right = _neighbours(values, parts)
    came = np.ones(len(plain), bool)  # rows whose solution is new to their neighbours
    for k in range(SWEEPS):
        to = np.arange(len(plain))
        rows, source = [], []
        for beside in (left, right):
            ok = (beside >= 0) & came[beside] & np.isfinite(sol.objective[beside])
            ok &= sol.objective[beside] <= hopeless
            if k == 0:
                ok &= ~straight
            rows.append(to[ok])
            source.append(beside[ok])
        row, origin = np.concatenate(rows), np.concatenate(source)
        if not len(row):
            break
        beyond = np.concatenate([b[o] for b, o in zip((left, right), source, strict=True)])
        start = _continued(sol, origin, beyond, plain[row], fixed[row], hopeless)
        again = solve(
            problem, start, fixed=fixed[row], options=SHORT, conditions=sol.conditions[origin]
        )
        # what is lower already is worth carrying on
        on = (again.state == STEP_LIMIT) & (problem.merit(again) < problem.merit(sol)[row])
        on &= again.objective <= hopeless
        if on.any():
            again = joined([again])  # own, writable arrays
            again.put(np.flatnonzero(on), _further(problem, again.take(on), fixed[row[on]]))
        sol, came = improved(problem, sol, row, again)
        if not came.any():
            break
    return sol


def _continued(
    sol: Solution,
    near: np.ndarray,
    far: np.ndarray,
    plain: np.ndarray,
    fixed: np.ndarray,
    hopeless: float,
) -> np.ndarray:
    """Starts from the neighbours ``near``, shape (R, p), carried on along the powers by which the
    constants went from the next ones, ``far`` (-1 for none), to them: where two constants grow
    together, and their ratio is all that the runs fix, that is the way.
    """
    known = (far >= 0) & (sol.objective[far] <= hopeless)
    one, two = sol.theta[near], sol.theta[far]
    with np.errstate(all="ignore"):
        held = [np.where(fixed, x, 1.0).prod(axis=1) for x in (plain, one, two)]
        power = np.log(held[0] / held[1]) / np.log(held[1] / held[2])
        factor = (one / two) ** power[:, None]
    fair = known[:, None] & (factor > 1.0 / FARTHEST_STEP) & (factor < FARTHEST_STEP)
    return np.where(fixed, plain, np.where(fair, one * np.where(fair, factor, 1.0), one))


def _hints(
    trails: Sequence[Trail], values: Sequence[np.ndarray], parts: Sequence[slice]
) -> tuple[np.ndarray, np.ndarray]:
    """Starts from what is solved already, for trails that have solved something."""
    starts, rows = [np.empty((0, len(trails[0].theta)))], [np.empty(0, int)]
    for trail, v, part in zip(trails, values, parts, strict=True):
        if len(trail.values):
            starts.append(trail.between(v)[0])
            rows.append(np.arange(part.start, part.stop))
    return np.concatenate(starts), np.concatenate(rows)


def _neighbours(
    values: Sequence[np.ndarray], parts: Sequence[slice]
) -> tuple[np.ndarray, np.ndarray]:
    """For each row the rows with the next lower and next higher value of its trail, -1 for none."""
    s = parts[-1].stop if parts else 0
    left, right = np.full(s, -1), np.full(s, -1)
    for v, part in zip(values, parts, strict=True):
        order = part.start + np.argsort(v, kind="stable")
        left[order[1:]] = order[:-1]
        right[order[:-1]] = order[1:]
    return left, right


def is_linear(problem: Problem) -> bool:
    """Whether the restricted problem is linear, so that it has one optimum only."""
    predictor = problem.predictor
    return bool(predictor.linear.all()) or bool(getattr(predictor, "linear_when_held", False))


def better(problem: Problem, a: Solution, b: Solution) -> Solution:
    """The lower of two solutions, row by row."""
    out, _ = improved(problem, a, np.arange(len(a.objective)), b)
    return out


def improved(
    problem: Problem, sol: Solution, rows: np.ndarray, new: Solution
) -> tuple[Solution, np.ndarray]:
    """``sol`` with ``new`` (for ``rows``, some perhaps twice) put in where it is lower, and which rows
    it lowered by more than rounding."""
    now = problem.merit(sol).copy()
    own = problem.merit(new)
    came = np.zeros(len(now), bool)
    pick: dict[int, int] = {}
    for k in np.flatnonzero(own < now[rows]):
        row = int(rows[k])
        if own[k] < now[row]:
            finite = np.isfinite(now[row])
            came[row] |= not finite or bool(own[k] < now[row] - GAIN * abs(now[row]))
            now[row] = own[k]
            pick[row] = int(k)
    if pick:
        sol = joined([sol])  # own, writable arrays
        sol.put(np.fromiter(pick, int), new.take(np.fromiter(pick.values(), int)))
    return sol, came
