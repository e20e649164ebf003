"""The sets of values that criteria accept along constants: pieces on a grid, their ends refined.

The values to try of all constants are one batch, and so are the ends of all their sets. Where a set
ends is then looked at again from starts that owe nothing to the grid: if the restricted fit there
was not the best one, the values are tried again with what was found.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from discrim.evidence.curve import Curve, Points, at_all
from discrim.evidence.restricted import is_linear
from discrim.fit.problem import CONVERGED

Accept = Callable[[Points], np.ndarray]

# how often a grid is tried again because a restricted fit at an end was not the best one
ROUNDS = 3
# starts spread over the typical sizes of the constants, for each end
AFRESH = 3
# a restricted fit at an end is not the best one when another is lower by this, relative
LOWER = 1e-5
# ends closer together than this part of what all of them span are one
CLOSE = 0.3


@dataclass(frozen=True, slots=True, eq=False)
class Search:
    """One constant: its curve, the values to try, its bounds, and the criteria, which are made once
    the objective is known on the grid; ``hopeless`` as in `restricted.follow`."""

    curve: Curve
    grid: np.ndarray
    lower: float
    upper: float
    criteria: Callable[[Points], Sequence[Accept]]
    hopeless: float = np.inf


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """What one constant's search came to: the points of the grid, and for each criterion whether it
    accepts each of them and where between them that changes.

    ``settled``: False for an end whose restricted fit did not converge.
    """

    points: Points
    accepted: tuple[np.ndarray, ...]
    ends: tuple[np.ndarray, ...]
    settled: tuple[np.ndarray, ...]


def search_all(
    searches: Sequence[Search], closeness: float, *, checked: bool = True
) -> list[Found]:
    """The accepted sets of each search (all of one problem), ends to a relative ``closeness``.

    ``checked`` looks at every end again from other starts.
    """
    grids = [s.grid for s in searches]
    out: dict[int, Found] = {}
    left = list(range(len(searches)))
    for k in range(ROUNDS):
        some = [searches[i] for i in left]
        found, doubtful = _once(some, [grids[i] for i in left], closeness, checked)
        for i, one in zip(left, found, strict=True):
            out[i] = one
        if k + 1 == ROUNDS:
            break
        for i, values in zip(left, doubtful, strict=True):
            searches[i].curve.trail.keep_only(values)
            grids[i] = np.unique(np.concatenate([grids[i], values]))
        left = [i for i, values in zip(left, doubtful, strict=True) if len(values)]
        if not left:
            break
    return [out[i] for i in range(len(searches))]


def _once(
    searches: Sequence[Search], grids: Sequence[np.ndarray], closeness: float, checked: bool
) -> tuple[list[Found], list[np.ndarray]]:
    """The sets on these grids, and the ends at which a lower restricted fit was found (the curves
    remember it)."""
    curves = [s.curve for s in searches]
    hopeless = max(s.hopeless for s in searches)
    points = at_all(curves, grids, hopeless=hopeless)
    criteria = [s.criteria(p) for s, p in zip(searches, points, strict=True)]
    margins = [[c(p) for c in cs] for cs, p in zip(criteria, points, strict=True)]
    # one row for each change of sign: which search, which criterion, between which values
    rows = [
        (i, k, int(at))
        for i, of in enumerate(margins)
        for k, m in enumerate(of)
        for at in np.flatnonzero((m[1:] > 0) != (m[:-1] > 0))
    ]
    who = np.array([r[0] for r in rows], int)
    which = np.array([r[1] for r in rows], int)
    a = np.array([grids[i][at] for i, _, at in rows])
    b = np.array([grids[i][at + 1] for i, _, at in rows])
    fa = np.array([margins[i][k][at] for i, k, at in rows])
    fb = np.array([margins[i][k][at + 1] for i, k, at in rows])
    brackets = Brackets(curves, criteria, who, which, a, b, fa, fb)
    ends, merit, settled = brackets.refined(closeness)
    doubtful = [np.empty(0)] * len(searches)
    if checked and len(rows) and not is_linear(curves[0].problem):
        doubtful = _doubtful(curves, who, ends, merit, hopeless)
    found = []
    for i, p in enumerate(points):
        count = range(len(criteria[i]))
        mine = [(who == i) & (which == k) for k in count]
        found.append(
            Found(
                p,
                tuple(m > 0 for m in margins[i]),
                tuple(ends[m] for m in mine),
                tuple(settled[m] for m in mine),
            )
        )
    return found, doubtful


def _doubtful(
    curves: Sequence[Curve], who: np.ndarray, ends: np.ndarray, merit: np.ndarray, hopeless: float
) -> list[np.ndarray]:
    """Ends of each curve at which a search from other starts finds a lower restricted fit."""
    problem = curves[0].problem
    picked, rows = [], []
    for i in range(len(curves)):
        mine = np.flatnonzero(who == i)
        # of ends close to one another (a one-sided bound beside a two-sided one) one is enough
        mine = mine[np.argsort(ends[mine], kind="stable")]
        extent = ends[mine[-1]] - ends[mine[0]] if len(mine) else 0.0
        gaps = np.diff(ends[mine], prepend=-np.inf) > CLOSE * extent
        picked.append(mine[gaps])
        rows.append(ends[mine[gaps]])
    again = at_all(curves, rows, hopeless=hopeless, afresh=AFRESH)
    out = []
    for mine, p in zip(picked, again, strict=True):
        now = problem.merit(p.solution)
        out.append(ends[mine[now < merit[mine] - LOWER * np.abs(merit[mine])]])
    return out


@dataclass(frozen=True, slots=True, eq=False)
class Brackets:
    """Changes of sign between a and b, shape (R,): of criterion ``which`` of curve ``who``."""

    curves: Sequence[Curve]
    criteria: Sequence[Sequence[Accept]]
    who: np.ndarray
    which: np.ndarray
    a: np.ndarray
    b: np.ndarray
    fa: np.ndarray
    fb: np.ndarray

    def at(self, live: np.ndarray, x: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Margin, merit and whether the fit settled at x for the rows ``live``."""
        some = np.unique(self.who[live])
        parts = [np.flatnonzero(self.who[live] == i) for i in some]
        points = at_all([self.curves[i] for i in some], [x[r] for r in parts], careful=False)
        f, merit = np.empty(len(x)), np.empty(len(x))
        settled = np.zeros(len(x), bool)
        for i, rows, p in zip(some, parts, points, strict=True):
            which = self.which[live[rows]]
            for k in np.unique(which):
                mine = which == k
                f[rows[mine]] = self.criteria[i][k](p)[mine]
            merit[rows] = self.curves[i].problem.merit(p.solution)
            settled[rows] = p.solution.state == CONVERGED
        return tame(f), merit, settled

    def refined(self, closeness: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Where the margins change sign, the merit there and whether the fit settled.

        Inverse quadratic interpolation through the last three points where these say that it is
        safe, else halving (Chandrupatla, Adv. Eng. Software 28 (1997) 145, from memory): margins
        are flat far from an end and steep beside it, where secants creep. A secant comes first; it
        is all that a nearly straight margin needs.
        """
        # the newest point, the one on the other side, and the one before
        a, b = self.a.astype(float).copy(), self.b.astype(float).copy()
        fa, fb = tame(self.fa), tame(self.fb)
        c, fc = a.copy(), fa.copy()
        merit, settled = np.full(len(a), np.inf), np.ones(len(a), bool)
        live = np.arange(len(a))
        for k in range(60):
            if not len(live):
                break
            la, lb, lfa, lfb = a[live], b[live], fa[live], fb[live]
            x, guessed = _next(la, lb, lfa, lfb, c[live], fc[live], first=k == 0)
            room = 0.5 * closeness * np.abs(x)
            x = np.where(
                guessed, np.clip(x, np.minimum(la, lb) + room, np.maximum(la, lb) - room), x
            )
            fx, merit[live], settled[live] = self.at(live, x)
            same = (fx > 0) == (lfa > 0)
            c[live], fc[live] = np.where(same, la, lb), np.where(same, lfa, lfb)
            b[live], fb[live] = np.where(same, lb, la), np.where(same, lfb, lfa)
            a[live], fa[live] = x, fx
            narrow = np.abs(b[live] - x) <= closeness * np.maximum(np.abs(x), 1e-300)
            # an interpolated point is far closer than the one before it
            done = guessed & (k > 1) & (np.abs(x - la) <= closeness * np.abs(x))
            live = live[~(narrow | (np.abs(fx) <= 0.1 * closeness) | done)]
        # the last points say where the end is more closely than the newest alone
        x, guessed = _next(a, b, fa, fb, c, fc, first=False)
        return np.where(guessed, x, a), merit, settled


def _next(
    a: np.ndarray,
    b: np.ndarray,
    fa: np.ndarray,
    fb: np.ndarray,
    c: np.ndarray,
    fc: np.ndarray,
    *,
    first: bool,
) -> tuple[np.ndarray, np.ndarray]:
    """The next point of each bracket, shape (R,), and whether it was interpolated."""
    # halved in powers where the bracket spans decades
    middle = np.where((a > 0) & (b > 0), np.sqrt(np.abs(a * b)), 0.5 * (a + b))
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        if first:
            x = (a * fb - b * fa) / (fb - fa)
            guessed = np.abs(b - a) <= 0.5 * (np.abs(a) + np.abs(b))
        else:
            xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
            guessed = (phi**2 < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
            t = fa / (fb - fa) * fc / (fb - fc)
            t = t + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
            x = a + t * (b - a)
    guessed &= (x > np.minimum(a, b)) & (x < np.maximum(a, b))
    return np.where(guessed, x, middle), guessed


def tame(m: np.ndarray) -> np.ndarray:
    """Margins without infinities, so that a secant can be drawn."""
    return np.clip(np.nan_to_num(m, nan=-1e3, posinf=1e3, neginf=-1e3), -1e3, 1e3)
