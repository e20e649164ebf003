"""Intervals for one constant, side by side, each end saying how it was found.

linearised : Wald, estimate -+ t s.e. (what most programs print)
profile : values whose restricted objective is not too far above the minimum (Bates & Watts 1988,
ch. 6)
reconciled : values that the reconciled score test accepts; a two-sided set with a guard, because
the
    score alone also vanishes far from the optimum (evidence: `score`)
guaranteed : see :mod:`discrim.evidence.guaranteed`
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.acceptance import Acceptance, guard_level, quantile, scale_from_fit
from discrim.evidence.curve import Curve, Points
from discrim.evidence.search import Accept, Found, Search, search_all
from discrim.evidence.widened import Ends, weak_about, widened
from discrim.fit.fit import Fit
from discrim.fit.fit import fit as refit

__all__ = [
    "BOUND",
    "CROSSED",
    "FAILED",
    "OPEN",
    "Along",
    "Interval",
    "Side",
    "along",
    "along_all",
    "guard_level",
    "linearised",
    "nothing",
    "standard_errors",
    "united",
]

CROSSED, BOUND, OPEN, FAILED = "crossed", "bound", "open", "failed"


@dataclass(frozen=True, slots=True)
class Side:
    """One end: its value (infinite when open) and how it was found."""

    value: float
    end: str


@dataclass(frozen=True, slots=True)
class Interval:
    """A set of values: its hull, its pieces, and words when something is to be said.

    ``empty`` is True when no value is accepted; ``low`` and ``high`` are then nan.
    """

    kind: str
    low: Side
    high: Side
    pieces: tuple[tuple[float, float], ...] = ()
    empty: bool = False
    note: str = ""


def nothing(kind: str, note: str) -> Interval:
    """No interval of this kind, with the reason."""
    nan = Side(float("nan"), FAILED)
    return Interval(kind, nan, nan, note=note)


def standard_errors(fit: Fit) -> np.ndarray:
    """Standard errors of the constants from the SVD of the scaled Jacobian, shape (p,).

    A constant at a bound is held there; its own standard error is that of the free fit's column.
    Infinite for constants that these runs do not determine.
    """
    jac = fit.jacobian
    n, p = jac.shape
    norms = np.sqrt((jac**2).sum(axis=0))
    out = np.full(p, np.inf)
    use = norms > 0
    if not use.any() or not np.isfinite(jac).all():
        return out
    _u, s, vt = np.linalg.svd(jac[:, use] / norms[use], full_matrices=False)
    if n < use.sum():
        return out
    tiny = s <= 1e-14 * s[0]
    # a null direction leaves the constants that carry it undetermined, and no other
    share = vt / np.where(tiny, 1.0, s)[:, None]
    share = np.where(tiny[:, None], np.where(np.abs(vt) > 1e-8, np.inf, 0.0), share)
    var = (share**2).sum(axis=0)
    scale2 = fit.scale2 if scale_from_fit(fit) else 1.0
    fixed = np.isfinite(var)  # an exact fit (scale 0) does not determine what the runs leave open
    out[use] = np.where(fixed, np.sqrt(np.where(fixed, var, 0.0) * scale2), np.inf) / norms[use]
    return out


def linearised(fit: Fit, psi: int, se: float, level: float) -> Interval:
    """Estimate -+ quantile times standard error; not cut at the bounds, so that its failure shows."""
    half = quantile(fit, level) * se
    if not np.isfinite(half):
        return Interval(
            "linearised",
            Side(-np.inf, OPEN),
            Side(np.inf, OPEN),
            note="not determined by these runs",
        )
    x = float(fit.theta[psi])
    return Interval("linearised", Side(x - half, CROSSED), Side(x + half, CROSSED))


@dataclass(frozen=True, slots=True, eq=False)
class Along:
    """Both curve-based intervals of one constant, its one-sided bounds, and the raw points.

    ``upper_one_sided`` and ``lower_one_sided``: ends of the hull of values not rejected by the
    one-sided reconciled test at 1 - level, used by verdicts.
    """

    profile: Interval
    reconciled: Interval
    lower_one_sided: Side
    upper_one_sided: Side
    points: Points
    lower_objective: float


def along(
    fit: Fit,
    curve: Curve,
    level: float,
    *,
    se: float,
    with_profile: bool = True,
    closeness: float = 1e-6,
) -> Along:
    """Profile and reconciled intervals of the constant of ``curve``, as `along_all`."""
    return along_all(
        fit, [curve], level, se=np.array([se]), with_profile=with_profile, closeness=closeness
    )[0]


def along_all(
    fit: Fit,
    curves: Sequence[Curve],
    level: float,
    *,
    se: np.ndarray,
    with_profile: bool = True,
    closeness: float = 1e-6,
) -> list[Along]:
    """Profile and reconciled intervals of the constants of ``curves``, searched as one batch.

    ``se``: a standard error for each curve, infinite where there is none; ``with_profile`` False
    leaves the profile out; ends are found to a relative ``closeness``.
    """
    held = with_profile and fit.problem.joint_scale
    tests: list[Acceptance] = []
    searches = []
    for curve, spread in zip(curves, se, strict=True):
        psi = curve.psi
        lo, hi = float(fit.predictor.lower[psi]), float(fit.predictor.upper[psi])
        x, typical = float(fit.theta[psi]), float(fit.predictor.scale[psi])
        first = Acceptance(fit, fit.objective, level, lo, psi, hi)
        tests.append(first)

        def criteria(pts: Points, one: Acceptance = first) -> Sequence[Accept]:
            # a point below the optimum is the base of what lies around it
            one.rebase(min(fit.objective, _lowest(pts)))
            out: list[Accept] = [one.reconciled, one.not_too_high, one.not_too_low]
            return [*out, one.profile] if with_profile and not held else out

        grid = _grid(x, float(spread), lo, hi, typical, coarse=closeness > 1e-5)
        searches.append(Search(curve, grid, lo, hi, criteria, first.hopeless))
    profiles = _profiles_at_variance(fit, curves, level, se) if held else None
    out = []
    for k, (search, found) in enumerate(
        zip(searches, search_all(searches, closeness), strict=True)
    ):
        recon, (_, _, high), (_, low, _), *rest = (
            _pieces(found, c, search.lower, search.upper) for c in range(len(found.ends))
        )
        profile = nothing("profile", "not asked for")
        if profiles is not None:
            profile = profiles[k]
        elif rest:
            profile = rest[0][0]
        made = Along(
            _around(profile, float(fit.theta[search.curve.psi])),
            _named(recon[0], "reconciled", tests[k], found.points),
            low,
            high,
            found.points,
            _lowest(found.points),
        )
        out.append(_widened(fit, search, made, level))
    return out


def _widened(fit: Fit, search: Search, made: Along, level: float) -> Along:
    """With its reconciled ends moved on where other constants are in lockstep with one another."""
    recon = made.reconciled
    if recon.empty or not fit.problem.measured:
        return made
    psi = search.curve.psi
    sides = (recon.low, recon.high, made.lower_one_sided, made.upper_one_sided)
    ends = Ends(*(s.value for s in sides))
    weak = weak_about(fit.problem, made.points, psi, ends)
    if not weak.count:
        return made
    new = widened(
        search.curve, weak, level, ends, float(fit.theta[psi]), search.lower, search.upper
    )
    if new == ends:
        return made

    def side(old: Side, value: float) -> Side:
        if value == old.value or np.isnan(value):
            return old
        if value in (search.lower, search.upper):
            return Side(value, BOUND if np.isfinite(value) else OPEN)
        return Side(value, CROSSED)

    low, high = side(recon.low, new.low), side(recon.high, new.high)
    pieces = tuple(recon.pieces)
    if pieces:
        pieces = ((low.value, pieces[0][1]), *pieces[1:])
        pieces = (*pieces[:-1], (pieces[-1][0], high.value))
    return replace(
        made,
        reconciled=replace(recon, low=low, high=high, pieces=pieces),
        lower_one_sided=side(made.lower_one_sided, new.low_one_sided),
        upper_one_sided=side(made.upper_one_sided, new.high_one_sided),
    )


def _lowest(pts: Points) -> float:
    good = pts.objective[np.isfinite(pts.objective)]
    return float(good.min()) if len(good) else float("inf")


def _profiles_at_variance(
    fit: Fit, curves: Sequence[Curve], level: float, se: np.ndarray
) -> list[Interval]:
    """Profiles where s^2 is estimated beside known errors of the conditions: s^2 held at its estimate.

    With s^2 estimated anew at each value the objective is N - p everywhere and says nothing.
    """
    why = ""
    if fit.degrees_of_freedom < 1:
        why = "not computed: as many constants as runs, scale unknown"
    else:
        data = fit.data.with_variance(fit.scale2, fit.degrees_of_freedom)
        again = refit(fit.predictor, data, starts=1, near=fit.theta[None])
        if not again.ok:
            why = "not computed: the fit with the variance held failed"
    if why:
        return [nothing("profile", why) for _ in curves]
    made = [c.on(again) for c in curves]
    return [one.profile for one in along_all(made[0][0], [c for _, c in made], level, se=se)]


def _around(profile: Interval, x: float) -> Interval:
    """The piece of a profile that holds the estimate, as a trace from the estimate gives it; others
    (two terms of one form changing places, say) are named in the note and kept as pieces."""
    pieces = profile.pieces
    if len(pieces) < 2:
        return replace(profile, kind="profile")
    k = min(range(len(pieces)), key=lambda i: max(pieces[i][0] - x, x - pieces[i][1], 0.0))
    low = profile.low if k == 0 else Side(pieces[k][0], CROSSED)
    high = profile.high if k == len(pieces) - 1 else Side(pieces[k][1], CROSSED)
    elsewhere = "; ".join(_stretch(a, b) for i, (a, b) in enumerate(pieces) if i != k)
    words = _together(f"also consistent: {elsewhere}", profile.note)
    return Interval("profile", low, high, pieces, False, words)


def _stretch(a: float, b: float) -> str:
    if not np.isfinite([a, b]).all():
        return f"below {b:.4g}" if np.isfinite(b) else f"above {a:.4g}"
    return f"{a:.4g} to {b:.4g}"


def _together(*notes: str) -> str:
    return "; ".join(n for n in notes if n)


def _named(interval: Interval, kind: str, tests: Acceptance, pts: Points) -> Interval:
    note = interval.note
    if interval.empty:
        if not tests.fits_somewhere(pts):
            note = "empty: the law is rejected by these runs at every value (lack of fit)"
        else:
            note = "empty: accepted nowhere on the values tried; the estimate is on the edge"
    note = _together(_in_pieces(interval.pieces), note)
    return Interval(kind, interval.low, interval.high, interval.pieces, interval.empty, note)


def _in_pieces(pieces: tuple[tuple[float, float], ...]) -> str:
    return f"{len(pieces)} separate pieces; the hull is given" if len(pieces) > 1 else ""


ONE_EMPTY = "under one reading of the condition errors no value is accepted; this is the other"


def united(a: Interval, b: Interval) -> Interval:
    """What holds whichever of two readings of the errors is right: all values that either accepts."""
    for one in (a, b):  # of what could not be had under one reading nothing can be said
        if not one.empty and FAILED in (one.low.end, one.high.end):
            return one
    if a.empty or b.empty:
        rest = b if a.empty else a
        return rest if rest.empty else replace(rest, note=_together(ONE_EMPTY, rest.note))
    parts = sorted(
        part for one in (a, b) for part in one.pieces or ((one.low.value, one.high.value),)
    )
    merged = [parts[0]]
    for low, high in parts[1:]:
        if low <= merged[-1][1]:
            merged[-1] = (merged[-1][0], max(merged[-1][1], high))
        else:
            merged.append((low, high))
    notes = {
        note
        for one in (a, b)
        for note in one.note.split("; ")
        if note and note not in _in_pieces(one.pieces)
    }
    pieces = tuple(merged)
    return Interval(
        a.kind,
        a.low if a.low.value <= b.low.value else b.low,
        a.high if a.high.value >= b.high.value else b.high,
        pieces,
        False,
        _together(_in_pieces(pieces), *sorted(notes)),
    )


def _grid(
    x: float, se: float, lo: float, hi: float, typical: float, *, coarse: bool = False
) -> np.ndarray:
    """Values to try: near the estimate in standard errors, far from it in decades."""
    parts = [np.array([x])]
    if np.isfinite(se) and se > 0:
        k = np.array([0.25, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 6.0, 10.0, 20.0])
        if coarse:
            k = k[[1, 2, 4, 6, 7, 9]]
        parts += [x + se * k, x - se * k]
    size = max(abs(x), typical if np.isfinite(typical) else 0.0, 1e-300)
    # where the standard error is small the values around the estimate say most of it
    sharp = se < 0.2 * abs(x)
    if lo >= 0:
        parts.append(size * np.logspace(-5, 5, 11 if coarse or sharp else 21))
        if x > 0 and not sharp:
            parts.append(x * np.array([0.5, 0.8, 0.9, 0.95, 1.05, 1.1, 1.25, 2.0]))
    else:
        far = size * np.logspace(-1, 2, 7)
        parts += [x + far, x - far]
    if np.isfinite(lo):
        parts.append(np.array([lo]))
    if np.isfinite(hi):
        parts.append(np.array([hi]))
        if np.isfinite(lo):
            parts.append(lo + (hi - lo) * np.linspace(0.05, 0.95, 10))
    grid = np.unique(np.clip(np.concatenate(parts), lo, hi))
    # values closer than rounding to one another add nothing
    keep = np.concatenate([[True], np.diff(grid) > 1e-9 * np.maximum(np.abs(grid[1:]), 1e-300)])
    return grid[keep]


def _pieces(found: Found, criterion: int, lo: float, hi: float) -> tuple[Interval, Side, Side]:
    """Pieces and hull from what is accepted on the grid and where that changes."""
    yes, ends = found.accepted[criterion], found.ends[criterion]
    if not yes.any():
        nan = Side(float("nan"), FAILED)
        return Interval("", nan, nan, empty=True), nan, nan
    first = [-np.inf] if yes[0] else []
    values = found.points.values
    if len(ends) and not yes[0] and ends[0] - lo < 1e-6 * (values[1] - lo):
        # the bound itself alone is excluded, as where a law is nothing at all at zero
        first, ends = [-np.inf], ends[1:]
    last = [np.inf] if yes[-1] else []
    marks = [*first, *ends.tolist(), *last]
    pieces = tuple((marks[k], marks[k + 1]) for k in range(0, len(marks) - 1, 2))

    def side(value: float, edge: float) -> Side:
        if np.isinf(value):
            return Side(edge, BOUND) if np.isfinite(edge) else Side(value, OPEN)
        return Side(value, CROSSED)

    low, high = side(pieces[0][0], lo), side(pieces[-1][1], hi)
    shown = tuple(
        (max(a, lo) if np.isfinite(lo) else a, min(b, hi) if np.isfinite(hi) else b)
        for a, b in pieces
    )
    loose = not found.settled[criterion].all()
    note = "a restricted fit at an end did not settle: that end is not final" if loose else ""
    return Interval("", low, high, shown, note=note), low, high
