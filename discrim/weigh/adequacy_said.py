"""What the residuals show, in words, and as it stands in the document."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from discrim.evidence.patterns import FEWEST_LEFT, Pattern
from discrim.runs.model import ErrorBasis, Role
from discrim.verdict.thresholds import (
    ALONE,
    FAR_RUN,
    MOVES_CONSTANTS,
    PATTERN,
    REPLICATES_LESS,
    REPLICATES_MORE,
    TREND,
)
from discrim.weigh.adequacy import TABLE_ORDER, Adequacy, Trend
from discrim.weigh.document_values import number

if TYPE_CHECKING:
    from discrim.weigh.weighed import Weighed

Finding = tuple[str, str, str]


def adequacy_record(w: Weighed, i: int) -> dict[str, Any] | None:
    """The key ``adequacy`` of a candidate; None where no residual was left to look at."""
    a = w.adequacy[i] if i < len(w.adequacy) else None
    if a is None:
        return None
    of = a.influence
    return {
        "trends": [
            {
                "columns": list(t.follows.names),
                "in_law": t.in_law,
                "groups": t.follows.words,
                "F": number(t.test.statistic),
                "df": list(t.test.df),
                "p": number(t.test.p),
                "p_all": number(t.p_all),
                "slope": _slope(t),
            }
            for t in a.trends
        ],
        "runs_of_signs": {
            "order": a.order,
            "in_order": _runs_record(a.runs_in_order),
            "by_prediction": _runs_record(a.runs_by_prediction),
        },
        "equal_variance": _pattern_record(a.equal_variance),
        "normality": _pattern_record(a.normality),
        "runs": _labels(w),
        "leverage": [number(x) for x in of.leverage],
        "studentised": [number(x) for x in of.studentised],
        "cooks_distance": [number(x) for x in of.cooks_distance],
        "farthest_run": _labels(w)[_largest(np.abs(of.studentised))]
        if np.isfinite(of.studentised).any()
        else None,
        "p_farthest": number(of.p_largest),
        "replicates": None
        if a.replicates is None
        else {
            "ratio": number(a.replicates.ratio),
            "df": a.replicates.df,
            "p_more": number(a.replicates.p_more),
            "p_less": number(a.replicates.p_less),
        },
    }


def _runs_record(p: Pattern | None) -> dict[str, Any] | None:
    if p is None:
        return None
    return {"runs": int(p.statistic), "expected": number(p.expected), "p": number(p.p)}


def _pattern_record(p: Pattern | None) -> dict[str, Any] | None:
    return None if p is None else {"statistic": number(p.statistic), "p": number(p.p)}


def _labels(w: Weighed) -> list[str]:
    return [w.study.runs.labels[i] for i in w.bench.runs]


def _largest(x: np.ndarray) -> int:
    return int(np.nanargmax(x))


def _slope(t: Trend) -> str:
    if t.follows.words or len(t.follows.names) > 1 or t.test.slope == 0:
        return ""
    return "rises" if t.test.slope > 0 else "falls"


def adequacy_findings(w: Weighed) -> list[Finding]:
    """Of the candidates that stand; where none does, of the one that fits best."""
    looked = [i for i, ok in enumerate(w.stands) if ok] or [int(np.argmin(w.rank))]
    have = [(i, w.adequacy[i]) for i in looked if i < len(w.adequacy)]
    found = [(i, a) for i, a in have if a is not None]
    if not found:
        return []
    return [
        *_trends(w, found),
        *_signs(w, found),
        *_scatter(w, found),
        *_far(w, found),
        *_replicates(w, found),
    ]


Found = list[tuple[int, Adequacy]]


def _names(w: Weighed, which: Iterable[int]) -> str:
    names = [f"“{w.laws[i].law.name}”" for i in which]
    if len(names) > 4:
        return f"{', '.join(names[:3])} and {len(names) - 3} more"
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)


def _where(which: list[int], w: Weighed) -> str:
    return f"candidate{'s' if len(which) > 1 else ''} {_names(w, which)}"


def _p(p: float) -> str:
    return "p < 0.0001" if p < 1e-4 else f"p = {p:.2g}"


def _trends(w: Weighed, found: Found) -> list[Finding]:
    """One finding a column, for all candidates whose residuals follow it."""
    hits: dict[tuple[str, ...], list[tuple[int, Trend]]] = {}
    for i, a in found:
        for t in a.trends:
            if t.p_all < TREND:
                hits.setdefault(t.follows.names, []).append((i, t))
    out: list[Finding] = []
    for names, which in hits.items():
        first = which[0][1]
        where = _where([i for i, _ in which], w)
        worst = min(t.p_all for _, t in which)
        columns = " and ".join(f"“{n}”" for n in names)
        slopes = {_slope(t) for _, t in which}
        verb = {"rises": "rise with", "falls": "fall with"}.get(slopes.pop(), "follow")
        if slopes or first.follows.words:
            verb = "follow"
        says = f"the residuals {verb} column{'s' if len(names) > 1 else ''} {columns}"
        says = f"{says} ({_p(worst)}, all columns together)"
        out.append(
            ("warning", where, f"{says}, {_meaning(first, all(t.in_law for _, t in which))}")
        )
    return out


def _meaning(t: Trend, in_law: bool) -> str:
    role = t.follows.role
    if role in (Role.RUN_ORDER, Role.TIME_ON_STREAM, Role.RUN):
        return (
            "which is in no law here: a catalyst that changes, a stock that ages or an instrument "
            "that drifts; repeat an early run at the end"
        )
    if in_law:
        return (
            "which the law contains: it depends on it in another way than the law says; a candidate "
            "with another dependence is missing"
        )
    if role is Role.TEMPERATURE:
        return "which is not in the law: rate constants depend on temperature"
    name = t.follows.names[0]
    if t.follows.words:
        return (
            f"which is not in the law: find out what differs between them; a constant that has one "
            f'value for each (per = "{name}"), or an error that they share (shared_by = "{name}"), '
            "allows for it"
        )
    return (
        "which is not in the law: what it stands for acts on the rate, or moves with what does; a "
        "candidate that contains it is missing (unless the column was worked out from the rate)"
    )


def _signs(w: Weighed, found: Found) -> list[Finding]:
    out: list[Finding] = []
    for order in (True, False):
        which = []
        for i, a in found:
            pattern = a.runs_in_order if order else a.runs_by_prediction
            if pattern is not None and pattern.p < PATTERN:
                which.append((i, pattern))
        if not which:
            continue
        name = found[0][1].order if order else "the predicted rate"
        means = (
            "neighbouring runs share an error that the study does not state (a stock, a day, a drift)"
            if order and name != TABLE_ORDER
            else "the law bends otherwise than the runs, or neighbouring runs share an error"
        )
        p = which[0][1]
        out.append(
            (
                "warning",
                _where([i for i, _ in which], w),
                f"in the order of {name.removeprefix('the order of ')} the residuals change sign "
                f"too seldom ({int(p.statistic)} rows of one sign, {p.expected:.3g} are ordinary, "
                f"{_p(min(q.p for _, q in which))}): {means}",
            )
        )
    return out


def _scatter(w: Weighed, found: Found) -> list[Finding]:
    out: list[Finding] = []
    estimated = any(c.basis is ErrorBasis.ESTIMATED for c in w.bench.responses)
    for slope, words, do in (
        (
            1,
            "grows with the predicted rate",
            'state a relative error, for example "3 %"'
            if estimated
            else "the relative part of its error is larger than stated, or the law fails at high rates",
        ),
        (
            -1,
            "shrinks with the predicted rate",
            'state an error with an absolute and a relative part, for example "2 % + 0.1 umol/L/s"'
            if estimated
            else "the absolute part of its error is larger than stated, or the law fails at low rates",
        ),
    ):
        which = [
            (i, a.equal_variance)
            for i, a in found
            if a.equal_variance is not None
            and a.equal_variance.p < PATTERN
            and a.equal_variance.slope == slope
        ]
        if which:
            p = min(v.p for _, v in which)
            than = "" if estimated else " in stated errors"
            out.append(
                (
                    "warning",
                    _where([i for i, _ in which], w),
                    f"the scatter of the residuals{than} {words} ({_p(p)}): {do}",
                )
            )
    odd = [i for i, a in found if a.normality is not None and a.normality.p < PATTERN]
    if odd:
        out.append(
            (
                "note",
                _where(odd, w),
                "the residuals are not shaped like normal errors (a few far ones, or two kinds of "
                "run): tests and intervals are approximate; look at the farthest runs",
            )
        )
    return out


def _far(w: Weighed, found: Found) -> list[Finding]:
    labels = _labels(w)
    far: dict[str, list[tuple[int, float]]] = {}
    alone: dict[str, list[int]] = {}
    pulls: dict[str, list[int]] = {}
    for i, a in found:
        of = a.influence
        enough = w.assessments[i].fit.degrees_of_freedom >= FEWEST_LEFT
        if enough and of.p_largest is not None and of.p_largest < FAR_RUN:
            k = _largest(np.abs(of.studentised))
            far.setdefault(labels[k], []).append((i, of.p_largest))
        for k in np.flatnonzero(of.leverage > ALONE).tolist():
            alone.setdefault(labels[k], []).append(i)
        with np.errstate(invalid="ignore"):
            heavy = np.flatnonzero(of.cooks_distance > MOVES_CONSTANTS).tolist()
        for k in heavy:
            if not of.leverage[k] > ALONE:
                pulls.setdefault(labels[k], []).append(i)
    out: list[Finding] = []
    for run, which in far.items():
        p = max(q for _, q in which)
        out.append(
            (
                "warning",
                f"run {run}",
                f"lies further off {_names(w, [i for i, _ in which])} than chance throws the "
                f"farthest of {len(labels)} ({_p(p)}): look at its record; exclude it only for a reason "
                "found there",
            )
        )
    for where, ones in _together(alone):
        each = "each alone fixes" if where.startswith("runs") else "alone fixes"
        out.append(
            (
                "note",
                where,
                f"{each} a constant of {_names(w, ones)}: no other run checks what it reads; repeat it",
            )
        )
    for where, ones in _together(pulls):
        each = "each moves" if where.startswith("runs") else "moves"
        out.append(
            (
                "note",
                where,
                f"{each} the constants of {_names(w, ones)} far (Cook's distance above "
                f"{MOVES_CONSTANTS:g}): without it they lie outside the middle of their confidence "
                "region; repeat it",
            )
        )
    return out


def _together(by_run: dict[str, list[int]]) -> list[tuple[str, tuple[int, ...]]]:
    """Runs of which the same is said, in one line."""
    runs: dict[tuple[int, ...], list[str]] = {}
    for run, ones in by_run.items():
        runs.setdefault(tuple(dict.fromkeys(ones)), []).append(run)
    return [
        (f"run {r[0]}" if len(r) == 1 else f"runs {', '.join(r[:-1])} and {r[-1]}", ones)
        for ones, r in runs.items()
    ]


def _replicates(w: Weighed, found: Found) -> list[Finding]:
    """Of the best candidate: the V of the others differs little and says the same."""
    _, a = min(found, key=lambda item: w.rank[item[0]])
    r = a.replicates
    if r is None:
        return []
    if r.p_more < REPLICATES_MORE:
        return [
            (
                "warning",
                "replicates",
                f"scatter {r.ratio:.2g} times as much as the stated errors allow ({_p(r.p_more)}): an "
                "error is larger than stated, or the runs were not the same; everything rests on "
                "the stated errors",
            )
        ]
    if r.p_less < REPLICATES_LESS:
        return [
            (
                "note",
                "replicates",
                f"scatter only {r.ratio:.2g} times as much as stated ({_p(r.p_less)}): errors are "
                "stated too large, or replicates share an error and are no independent runs",
            )
        ]
    return []
