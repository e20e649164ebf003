"""Conditional bootstrap: tables drawn as the law taken for true would give them, and p-values from them.

The reconciled conditions c^ of the null fit are held and only residuals are drawn again:

    e* ~ N(0, V),   c* = c^ - S_c F' V^-1 e*,   y* = f(c^) + F (c* - c^) + e*,

F and S_c those of *measured* conditions; set ones stay as they are, their errors being part of V. At
the constants of the null, reconciling such a table gives c^ again, so that the sensitivities, which
carry what the runs can and cannot tell apart, are those of the study: the test is conditional on
them, as that of Moreira (Econometrica 71 (2003) 1027) is. Drawing the conditions around c^ as well
makes well-separated tables out of runs in lockstep; tests from such tables reject far too often.

Where y* follows f to first order from c^ only, this is the linearisation that the fit itself uses;
it also keeps c* from being put into a law outside its range.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy import special

from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Problem, Solution, joined

# draws after which it is looked whether the decision is clear
LOOKS = (100, 200, 400, 800, 1600)
# chance, over all looks, that stopping early makes a decision other than that of endless drawing
RISK = 1e-3
# optima of drawn tables: a Q that is wrong by a few thousandths, in lockstep, changes no comparison
COARSE = Options(max_iterations=40, gradient_tolerance=1e-4, step_tolerance=1e-5)

# a likelihood ratio that is smaller by this fraction only is as large: rounding
ROUNDING = 1e-9
# other optima of the observed table that far above the best, in Q, can be the best of a drawn one
NEAR = 15.0


@dataclass(frozen=True, slots=True)
class Simulated:
    """A p-value from draws: (1 + draws as extreme as the observed) / (1 + draws).

    ``error`` its standard error; ``clear``: whether the side of alpha on which it lies is settled
    (drawing on would change it with a chance of at most RISK).
    """

    p: float
    error: float
    draws: int
    clear: bool


def sequential(
    extreme: Callable[[int], np.ndarray], alpha: float, *, looks: Sequence[int] = LOOKS
) -> Simulated:
    """Draw until it is clear on which side of ``alpha`` the p-value lies.

    ``extreme(k)`` makes the next k draws and says, shape (k,), which are at least as extreme as what
    was observed. At each look drawing stops if a p-value of ``alpha`` would give as few or as many of
    them with a chance below RISK, shared by the looks and the two sides (in the manner of Gandy, J.
    Am. Stat. Assoc. 104 (2009) 1504, from memory). With the draws exhausted the p-value is that of all
    of them, valid as it is (Besag & Clifford, Biometrika 78 (1991) 301, from memory).
    """
    hits = draws = 0
    clear = False
    for look in looks:
        hits += int(np.count_nonzero(extreme(look - draws)))
        draws = look
        clear = settled(hits, draws, alpha, len(looks))
        if clear:
            break
    return of_counts(hits, draws, clear)


def settled(hits: int, draws: int, alpha: float, looks: int = len(LOOKS)) -> bool:
    """Whether ``hits`` of ``draws`` settles on which side of ``alpha`` the p-value lies."""
    few = special.bdtr(hits, draws, alpha)
    many = special.bdtrc(hits - 1, draws, alpha) if hits > 0 else 1.0
    return bool(min(few, many) < RISK / (2 * looks))


def of_counts(hits: int, draws: int, clear: bool) -> Simulated:
    p = (hits + 1) / (draws + 1)
    return Simulated(p, float(np.sqrt(p * (1 - p) / (draws + 1))), draws, clear)


class Tables:
    """Tables drawn from one fitted law, in batches; the same seed gives the same tables whatever the
    order of the runs or the size of the batches.

    ``rescaled``, beside each batch: shape (S,), by how much Q has to be divided because the size of
    the errors was itself estimated (1 where it was not).
    """

    def __init__(self, null: Fit, seed: int) -> None:
        self.null = null
        data, n = null.data, null.n
        # residuals go to runs by the values of the runs, not by their place in the table
        keys = [data.conditions[:, k] for k in range(data.m)] + [data.y]
        self._order = np.lexsort(keys)
        self._rng = np.random.default_rng([seed, 1])
        self._scale_rng = np.random.default_rng([seed, 2])
        problem = null.problem
        v = null.covariance
        if v.ndim == 1:
            self._root = np.sqrt(v)
        else:
            # the Cholesky factor depends on the order of the runs: made in the order of their values
            o = self._order
            self._root = _factor(v[np.ix_(o, o)])
        self._size = 1.0
        if data.scale is Scale.ESTIMATED and not problem.with_conditions:
            self._size = float(np.sqrt(null.scale2)) if null.scale2 > 0 else 0.0
        self._slopes = None
        if problem.measured:
            pred = null.predictor.predict(
                null.theta[None], null.conditions, constants=False, conditions_too=True
            )
            assert pred.by_conditions is not None
            self._slopes = pred.by_conditions
        self._n = n

    def draw(self, count: int) -> tuple[Measurements, np.ndarray]:
        """The next ``count`` tables, y of shape (S, N), and ``rescaled``."""
        null, data, problem = self.null, self.null.data, self.null.problem
        x = self._rng.standard_normal((count, self._n))
        o = self._order
        errors, weighted = np.empty_like(x), np.empty_like(x)  # e* and V^-1 e*
        if self._root.ndim == 1:
            errors[:, o] = x * self._root[o]
            with np.errstate(divide="ignore", invalid="ignore"):
                weighted[:, o] = x / self._root[o]
        else:
            errors[:, o] = x @ self._root.T
            weighted[:, o] = np.linalg.solve(self._root.T, x.T).T
        errors = errors * self._size
        if self._slopes is None:
            made = replace(data, y=null.values + errors)
        else:
            slopes = np.broadcast_to(self._slopes, (count, *self._slopes.shape[1:]))
            here = np.broadcast_to(null.conditions, (count, *null.conditions.shape))
            conditions = problem.moved(null.conditions, here, slopes, -weighted)
            moved = np.einsum("snm,snm->sn", slopes, conditions - null.conditions)
            made = replace(data, y=null.values + moved + errors, conditions=conditions)
        rescaled = np.ones(count)
        if data.scale is Scale.REPLICATES and data.scale_df > 0:
            rescaled = self._scale_rng.chisquare(data.scale_df, count) / data.scale_df
        return made, rescaled


def _factor(v: np.ndarray) -> np.ndarray:
    try:
        return np.linalg.cholesky(v)
    except np.linalg.LinAlgError:
        # singular to rounding: an error shared by all runs and nothing else
        return np.linalg.cholesky(v + 1e-12 * float(np.trace(v)) / len(v) * np.eye(len(v)))


def refitted(law: Fit, tables: Measurements, starts: np.ndarray) -> Solution:
    """The law of ``law`` fitted to each of S tables, from each of the ``starts``, shape (k, p); of
    each table the best."""
    s, k = len(tables.y), len(starts)
    problem = Problem(law.predictor, tables)
    guess = np.full(s, law.scale2) if problem.joint_scale else None
    found = [
        solve(
            problem,
            np.broadcast_to(start, (s, law.p)).copy(),
            options=COARSE,
            conditions=_begin(tables),
            scale2=guess,
        )
        for start in starts
    ]
    if k == 1:
        return found[0]
    merits = np.array([problem.merit(f) for f in found])
    best = np.argmin(np.where(np.isfinite(merits), merits, np.inf), axis=0)
    return joined(found).take(best * s + np.arange(s))


def _begin(tables: Measurements) -> np.ndarray:
    c = tables.conditions
    return np.broadcast_to(c, (len(tables.y), *c.shape[-2:]))


def gain(data: Measurements, smaller: np.ndarray, larger: np.ndarray) -> np.ndarray:
    """What the larger law (or a rival) gains on Q: the likelihood-ratio statistic, given the scale or
    with it unknown (exact conditions). Not finite values count as no gain."""
    if data.scale is not Scale.ESTIMATED:
        return np.asarray(smaller - larger)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(data.n * (np.log(smaller) - np.log(larger)))


def nested_p(
    smaller: Fit, larger: Fit, starts: np.ndarray, *, alpha: float, seed: int
) -> Simulated:
    """p-value of a law against one that contains it, where no reference distribution holds.

    Statistic: how much the larger law gains on Q. ``starts``, shape (k, p) of the larger law: where
    its fits to the drawn tables begin (the smaller law's optimum as a point of it, above all).
    Both fits are of the same measurements, their scale not estimated together with condition errors.
    """
    data = smaller.data
    if smaller.problem.joint_scale:
        raise ValueError("the scale of the observations has to be fixed first")
    if larger.problem.with_conditions:
        starts = np.vstack([starts, _corners(larger)])
    observed = float(gain(data, np.array(smaller.objective), np.array(larger.objective)))
    if not np.isfinite(observed) and smaller.objective > 0:
        observed = np.inf  # the larger law reproduces every run
    observed -= ROUNDING * abs(observed) if np.isfinite(observed) else 0.0
    draws = Tables(smaller, seed)

    def extreme(count: int) -> np.ndarray:
        tables, rescaled = draws.draw(count)
        small = refitted(smaller, tables, smaller.theta[None]).objective
        large = refitted(larger, tables, starts).objective
        drawn = gain(data, small, np.minimum(large, small)) / rescaled
        return np.asarray(~(drawn < observed))

    if observed <= 0:
        return Simulated(1.0, 0.0, 0, True)
    return sequential(extreme, alpha)


def _corners(law: Fit) -> np.ndarray:
    """Optima with one constant held at zero that come near the best, shape (k, p).

    Errors of conditions in lockstep leave an optimum at more than one edge: the rate may come from one
    term or from the other. Which is the lower changes from table to table.
    """
    at = [j for j in range(law.p) if law.predictor.lower[j] == 0 and law.theta[j] != 0]
    if not at:
        return np.zeros((0, law.p))
    start = np.repeat(law.theta[None], len(at), axis=0)
    fixed = np.zeros(start.shape, bool)
    start[np.arange(len(at)), at] = 0.0
    fixed[np.arange(len(at)), at] = True
    found = solve(law.problem, start, fixed=fixed, options=COARSE)
    return found.theta[found.objective - law.objective < NEAR]
