"""The evidence as one plain document: what is saved as ``evidence.json`` and what reports are drawn from.

Keys are a contract (extended, never renamed). Numbers are plain floats in the units named beside
them; what is not known, open or infinite is null.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Mapping
from typing import Any

import numpy as np

from discrim.evidence.conditioning import Lockstep
from discrim.evidence.intervals import Interval
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.runs.model import Column, ErrorBasis, Role
from discrim.study.lookup import to_shown
from discrim.verdict import sentence_standing
from discrim.weigh.asked import Answer, InCandidate
from discrim.weigh.derived import law_keys
from discrim.weigh.planes import planes
from discrim.weigh.run import Weighed
from discrim.weigh.words import (
    CAUTIONS,
    CONTROLS,
    references,
    settings_words,
    share,
    trade_off_words,
)


def number(x: Any) -> float | None:
    """A finite float, or None."""
    if x is None:
        return None
    v = float(x)
    return v if math.isfinite(v) else None


def distance(x: float) -> float | None:
    """A flip distance; what is only rounding is none at all."""
    v = number(x)
    return 0.0 if v is not None and abs(v) < 1e-6 else v


def document(w: Weighed, every_run: Weighed | str | None = None) -> dict[str, Any]:
    """The whole document of one weighed study.

    ``every_run``: the study weighed again with its excluded runs, or why it could not be.
    """
    candidates = [_candidate(w, i) for i in range(len(w.laws))]
    out = _assembled(w, candidates)
    if every_run is not None:
        _add_excluded(out, w, every_run)
    return out


def _add_excluded(out: dict[str, Any], w: Weighed, every_run: Weighed | str) -> None:
    """What the excluded runs change, in each question and as findings."""
    if isinstance(every_run, str):
        for q in out["questions"]:
            q["with_excluded_runs"] = None
        out["findings"].append(
            {
                "severity": "note",
                "where": "excluded runs",
                "says": f"verdicts with them: {every_run}",
            }
        )
        return
    for q, again in zip(out["questions"], _questions(every_run), strict=True):
        q["with_excluded_runs"] = again["verdict"]
        q["sentence_with_excluded_runs"] = again["sentence"]
        about = f"question about {q['about']}"
        if q["asks"] == "stands":
            same = q.get("standing") == again.get("standing")
        else:
            same = q["verdict"] == again["verdict"]
        if same:
            says = "the answer is the same with the excluded runs put back"
        else:
            says = f"with the excluded runs put back the answer changes: {again['sentence']}"
        out["findings"].append(
            {"severity": "note" if same else "warning", "where": about, "says": says}
        )


def _assembled(w: Weighed, candidates: list[dict[str, Any]]) -> dict[str, Any]:
    study = w.study
    return {
        "format": 1,
        "title": study.title,
        "confidence": study.level,
        "seed": w.seed,
        "provenance": _provenance(w),
        "study": _study(w),
        "runs": _runs(w),
        "candidates": candidates,
        "comparisons": [_comparison(w, k) for k in range(len(w.comparisons))],
        "questions": _questions(w),
        "planes": planes(w),
        "findings": [{"severity": s, "where": p, "says": t} for s, p, t in w.findings],
        "cautions": list(CAUTIONS),
        "not_checked": _not_checked(w),
        "references": references(w),
    }


def _provenance(w: Weighed) -> dict[str, Any]:
    import scipy

    import discrim

    return {
        "discrim": discrim.__version__,
        "python": ".".join(map(str, sys.version_info[:3])),
        "numpy": np.__version__,
        "scipy": scipy.__version__,
        "table_sha256": w.study.runs.sha256,
        "study_sha256": w.study.sha256,
    }


def _study(w: Weighed) -> dict[str, Any]:
    study = w.study
    known = []
    for name, s in study.constants.items():
        if s.value is None:
            continue
        known.append(
            {
                "name": name,
                "value": number(s.value),
                "sd": number(s.sd),
                "units": s.unit.text() if s.unit is not None else "",
                "how": "fixed" if s.sd == 0 else "known with an uncertainty",
            }
        )
    runs = study.runs
    exclusions = []
    for where, reason in study.exclusions:
        labels = [
            runs.labels[i]
            for i in range(runs.n)
            if not runs.kept[i] and runs.excluded_because[i] == reason
        ]
        exclusions.append({"where": where, "reason": reason, "runs": labels})
    done = dict(study.controls.items())
    return {
        "file": study.path.name,
        "table": runs.file,
        "reactor": study.reactor,
        "controls": [{"name": k, "done": v} for k, v in done.items()],
        "not_checked": [k for k in CONTROLS if k not in done],
        "other_evidence": [
            {"says": e.says, "source": e.source, "against": list(e.against)}
            for e in study.other_evidence
        ],
        "exclusions": exclusions,
        "derived": [{"name": d.name, "text": d.text} for d in study.derived],
        "settings": settings_words(w),
        "known_constants": known,
    }


def _runs(w: Weighed) -> dict[str, Any]:
    runs = w.study.runs
    groups: dict[int, list[str]] = {}
    for i in range(runs.n):
        groups.setdefault(int(runs.replicate_of[i]), []).append(runs.labels[i])
    best = _lead(w)
    return {
        "n": int(runs.kept.sum()),
        "labels": list(runs.labels),
        "kept": [bool(k) for k in runs.kept],
        "observation": "; ".join(_is_words(c) for c in w.bench.responses),
        "columns": [_column(c) for c in runs.columns],
        "replicates": [g for g in groups.values() if len(g) > 1],
        "lockstep": lockstep_keys(w, best) if best is not None else [],
    }


def _lead(w: Weighed) -> int | None:
    """The candidate whose conditioning is shown first: best that stands, with most constants."""
    good = [i for i, s in enumerate(w.stands) if s] or list(range(len(w.laws)))
    return max(good, key=lambda i: (len(w.bounds[i].names), -w.rank[i])) if good else None


def lockstep_keys(w: Weighed, i: int) -> list[dict[str, Any]]:
    """Pairs of terms of candidate i that move together, explained by the columns that do."""
    out = []
    bound = w.bounds[i]
    for lock in w.assessments[i].lockstep:
        columns, ratio = _columns_behind(w, i, lock.first, lock.second)
        a, b = bound.names[lock.first], bound.names[lock.second]
        words = lockstep_words(a, b, lock)
        out.append(
            {
                "terms": [a, b],
                "columns": columns,
                "ratio": [number(ratio[0]), number(ratio[1])],
                "variation": number(lock.variation),
                "error": number(lock.error),
                "candidate": w.laws[i].law.name,
                "words": words,
            }
        )
    return out


def lockstep_words(a: str, b: str, lock: Lockstep) -> str:
    """Two terms in lockstep, as a sentence."""
    if lock.variation < 1e-6:
        return f"the terms of {a} and {b} keep exactly one ratio over the runs"
    words = (
        f"the terms of {a} and {b} keep nearly one ratio over the runs: it varies by "
        f"{share(lock.variation)}"
    )
    if lock.error > 0:
        words += f", its stated error is {share(lock.error)}"
    return words


def _columns_behind(
    w: Weighed, i: int, first: int, second: int
) -> tuple[list[str], tuple[float, float]]:
    """Columns that explain the lockstep of two terms, and the range of their ratio."""
    bound, bench = w.bounds[i], w.bench
    fit = w.assessments[i].fit
    pred = bound.predictor.predict(
        fit.theta[None], bench.measurements.conditions, conditions_too=True, both=True
    )
    assert pred.by_constants is not None
    assert pred.by_both is not None
    g = pred.by_constants[0]
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = g[:, second] / g[:, first]
    ratio = ratio[np.isfinite(ratio)]
    names = []
    for j, s in enumerate(bench.symbols):
        moves = np.abs(pred.by_both[0][:, j, [first, second]]).sum(axis=0)
        if moves.any():
            names.append(_column_name(w, s))
    return names, (float(ratio.min()), float(ratio.max())) if len(ratio) else (np.nan, np.nan)


def _column_name(w: Weighed, symbol: Any) -> str:
    name = symbol.name
    if name.startswith("["):
        col = w.study.runs.species().get(name[1:-1])
        return col.name if col is not None else name
    return name.strip("{}")


def _is_words(c: Column) -> str:
    if c.role is Role.SPECIES:
        return c.about
    return f"{c.role.value} {c.about}".strip()


def _column(c: Column) -> dict[str, Any]:
    numeric = bool(np.isfinite(c.values).any())
    values = to_shown(c, c.values) if numeric and c.shown else c.values
    sd = None
    if c.errors and numeric:
        var = sum(np.asarray(e.absolute) ** 2 + (e.relative * c.values) ** 2 for e in c.errors)
        zero = to_shown(c, np.zeros(1))[0] if c.shown else 0.0
        one = np.sqrt(np.asarray(var, float))
        sd_shown = (to_shown(c, one) - zero) if c.shown else one
        sd = [number(x) for x in np.atleast_1d(sd_shown)]
    origins = {e.origin for e in c.errors}
    origin = ""
    if c.errors and c.role not in (Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF):
        origin = "not stated" if None in origins else " and ".join(sorted(o for o in origins if o))
    return {
        "name": c.name,
        "is": _is_words(c),
        "units": _shown_units(c),
        "values": [number(x) for x in np.atleast_1d(values)] if numeric else [None] * len(c.values),
        "labels": None if numeric else list(c.labels),
        "cells": list(c.labels) if numeric and c.in_table else None,
        "sd": sd,
        "error": "; ".join(e.words for e in c.errors),
        "origin": origin,
        "basis": c.basis.value if c.role is not Role.IGNORED else "",
        "declared": c.role is not Role.IGNORED,
        "in_table": c.in_table,
    }


def _shown_units(c: Column) -> str:
    return c.shown


def _candidate(w: Weighed, i: int) -> dict[str, Any]:
    a, law, bound = w.assessments[i], w.laws[i].law, w.bounds[i]
    fit, c = a.fit, a.criteria
    s = w.standings[i]
    out = law_keys(w.laws[i])
    out.update(
        {
            "name": law.name,
            "note": w.laws[i].candidate.note,
            "same_law_as": [
                w.laws[j].law.name
                for j in range(len(w.laws))
                if (min(i, j), max(i, j)) in w.relations.same
            ],
            "status": fit.status.value,
            "n_constants": len(bound.names),
            "degrees_of_freedom": int(fit.degrees_of_freedom),
            "rss": number(fit.rss),
            "objective": number(fit.objective),
            "scale": number(np.sqrt(fit.scale2)) if fit.data.scale is Scale.ESTIMATED else None,
            "log_likelihood": number(c.log_likelihood),
            "aic": number(c.aic),
            "aicc": number(c.aicc),
            "bic": number(c.bic),
            "weight": number(w.weights[i]),
            "rank": w.rank[i],
            "fit_p": number(a.fit_p),
            "lack_of_fit": None
            if a.lack_of_fit is None
            else {
                "F": number(a.lack_of_fit.statistic),
                "df": list(a.lack_of_fit.df),
                "p": number(a.lack_of_fit.p),
            },
            "condition_number": number(a.conditioning.condition_number),
            "digits_lost": number(a.conditioning.digits_lost),
            "condition_indices": [number(x) for x in a.conditioning.indices],
            "variance_proportions": [
                [number(x) for x in row] for row in a.conditioning.proportions
            ],
            "correlations": {"names": list(bound.names), "matrix": _correlations(fit)},
            "trade_offs": [
                {
                    "singular_value": number(t.singular_value),
                    "words": trade_off_words(bound, t, fit.theta),
                    "direction": {n: number(x) for n, x in zip(bound.names, t.change, strict=True)},
                }
                for t in a.trade_offs
            ],
            "lockstep": lockstep_keys(w, i) if fit.ok else [],
            "constants": [_constant(w, i, j) for j in range(len(bound.names))],
            "fitted": _fitted(w, i) if fit.ok else [],
            "pathways": _pathways(w, i) if fit.ok else [],
            "outcome": "stands" if w.stands[i] else "rejected",
            "p_joint": number(s.p_joint),
            "inseparable_from": [w.laws[j].law.name for j in w.inseparable[i]],
            "no_better_than": None if w.no_better[i] is None else w.laws[w.no_better[i]].law.name,  # type: ignore[index]
            "reasons": _reasons(w, i),
        }
    )
    return out


def _reasons(w: Weighed, i: int) -> list[str]:
    s = w.standings[i]
    alpha = 1 - w.study.level
    out = []
    if not w.assessments[i].fit.ok:
        return ["it could not be fitted"]
    if s.p_fit is not None:
        word = "fits" if s.p_fit >= 0.2 * alpha else "does not fit"
        out.append(
            f"{word} within the stated errors (Q = {w.assessments[i].fit.objective:.3g} on "
            f"{w.assessments[i].fit.degrees_of_freedom} degrees of freedom, {_p(s.p_fit)})"
        )
    if s.worst_rival >= 0:
        name = w.laws[s.worst_rival].law.name
        how = "rejected in the direction of" if s.p_joint < alpha * 0.8 else "not rejected against"
        out.append(f"{how} “{name}” and all others ({_p(s.p_joint)} jointly)")
    for j in w.inseparable[i]:
        if (min(i, j), max(i, j)) in w.relations.same:
            out.append(
                f"the same law as “{w.laws[j].law.name}”: no rate can tell them apart, only isotope "
                "effects, labelling, trapping or spectroscopy"
            )
        else:
            out.append(
                f"these runs cannot separate it from “{w.laws[j].law.name}”: their rates differ by less "
                "than one standard deviation in every run"
            )
    nb = w.no_better[i]
    if nb is not None:
        out.append(f"stands, but no better than its special case “{w.laws[nb].law.name}”")
    return out


def _p(p: float) -> str:
    return "p < 0.0001" if p < 1e-4 else f"p = {p:.2g}"


def _correlations(fit: Fit) -> list[list[float | None]]:
    """Correlations of the constants, from the SVD of the scaled sensitivities."""
    jac = fit.jacobian
    n, p = jac.shape
    norms = np.sqrt((jac**2).sum(axis=0))
    if n < p or not np.isfinite(jac).all() or (norms == 0).any():
        return [[None] * p for _ in range(p)]
    _, s, vt = np.linalg.svd(jac / norms, full_matrices=False)
    if s[-1] <= 1e-14 * s[0]:
        return [[None] * p for _ in range(p)]
    root = vt.T / s
    cov = root @ root.T
    d = np.sqrt(np.diag(cov))
    return [[number(x) for x in row] for row in cov / np.outer(d, d)]


def interval_keys(kinds: Mapping[str, Interval]) -> tuple[dict, dict, dict]:
    """(ends, how each was found, notes) by kind; open and unknown ends are None."""
    values: dict[str, list[float | None]] = {}
    ends: dict[str, list[str]] = {}
    notes: dict[str, str] = {}
    for kind, it in kinds.items():
        if it.empty:
            values[kind], ends[kind] = [None, None], ["failed", "failed"]
        else:
            values[kind] = [number(it.low.value), number(it.high.value)]
            ends[kind] = [it.low.end, it.high.end]
        if it.note:
            notes[kind] = it.note
    return values, ends, notes


def _constant(w: Weighed, i: int, j: int) -> dict[str, Any]:
    a, bound = w.assessments[i], w.bounds[i]
    values, ends, notes = interval_keys(a.intervals[j]) if a.intervals[j] else ({}, {}, {})
    base = bound.base_constant(j)
    return {
        "name": bound.names[j],
        "units": bound.units[j],
        "value": number(a.fit.theta[j]),
        "standard_error": number(a.standard_errors[j]),
        "at_bound": bool(a.fit.at_bound[j]),
        "kind": base.kind.value,
        "meaning": base.meaning,
        "intervals": values,
        "interval_ends": ends,
        "interval_notes": notes,
    }


def _fitted(w: Weighed, i: int) -> list[dict[str, Any]]:
    bench, fit = w.bench, w.assessments[i].fit
    data = bench.measurements
    # predictions at the printed conditions are what a reader compares with the table
    at_printed = (
        w.bounds[i].predictor.predict(fit.theta[None], data.conditions, constants=False).values[0]
    )
    var = fit.variances
    if fit.data.scale is Scale.ESTIMATED and not fit.problem.with_conditions:
        var = var * fit.scale2
    out = []
    for k in range(data.n):
        col = bench.responses[int(bench.response[k])]
        sd = math.sqrt(var[k]) if var[k] > 0 else float("nan")
        f = _factor(col)
        y, p = data.y[k] * f, at_printed[k] * f
        out.append(
            {
                "run": w.study.runs.labels[bench.runs[k]],
                "column": col.name,
                "units": _shown_units(col),
                "observed": number(y),
                "predicted": number(p),
                "residual": number(y - p),
                "standardised": number((data.y[k] - at_printed[k]) / sd),
                "sd": number(sd * f),
                "low": number(y - 2 * sd * f),
                "high": number(y + 2 * sd * f),
            }
        )
    return out


def _factor(col: Column) -> float:
    """Internal to shown units (rates have no offset)."""
    return float(to_shown(col, np.ones(1))[0]) if col.shown else 1.0


def _pathways(w: Weighed, i: int) -> list[dict[str, Any]]:
    import sympy

    from discrim.ratelaw.compile import CompiledLaw
    from discrim.ratelaw.model import amount
    from discrim.weigh.bench import fixed_put_in, put_in

    law, bound, bench = w.laws[i].law, w.bounds[i], w.bench
    if len(law.pathways) < 2:
        return []
    fit = w.assessments[i].fit
    rows = np.flatnonzero(bench.response == 0)
    symbols = [c.symbol for c in bound.constants]
    rates = []
    for p in law.pathways:
        seen = p.rate
        if bench.responses[0].role is Role.K_OBS_OF:
            seen = sympy.cancel(seen / amount(bench.responses[0].about))
        e = fixed_put_in(put_in(seen, w.study), w.study)
        compiled = CompiledLaw(e, symbols, list(bench.symbols))
        theta = fit.theta[None][:, bound.column_of[rows]]
        value = compiled(
            theta,
            bench.measurements.conditions[rows],
            constants=False,
            conditions_too=False,
            both=False,
        )[0][0]
        rates.append(value)
    total = np.sum(np.abs(rates), axis=0)
    f = _factor(bench.responses[0])
    labels = [w.study.runs.labels[bench.runs[k]] for k in rows]
    with np.errstate(divide="ignore", invalid="ignore"):
        return [
            {
                "name": p.name,
                "steps": list(p.steps),
                "runs": labels,
                "values": [number(x * f) for x in r],
                "share": [number(x) for x in r / total],
            }
            for p, r in zip(law.pathways, rates, strict=True)
        ]


def _comparison(w: Weighed, k: int) -> dict[str, Any]:
    c = w.comparisons[k]
    t = c.test
    return {
        "smaller": w.laws[c.smaller].law.name,
        "larger": w.laws[c.larger].law.name,
        "nested": True,
        "edge": c.edge,
        "restriction": c.words,
        "F": None if t is None else number(t.statistic),
        "df": None if t is None else list(t.df),
        "p": None if t is None else number(t.p),
        "p_one_sided": None if t is None else number(t.p_one_sided),
        "p_reconciled": number(_reconciled_p(w, c.larger, c.smaller)),
        "p_bootstrap": None,
        "p_note": c.note,
        "words": f"“{w.laws[c.smaller].law.name}” is “{w.laws[c.larger].law.name}” with {c.words}",
    }


def _reconciled_p(w: Weighed, larger: int, smaller: int) -> float | None:
    """From the score of the smaller law in the direction of the larger one."""
    from discrim.evidence.distributions import t_upper

    zs = [abs(a.z) for a in w.standings[smaller].against if a.rival == larger]
    if not zs:
        return None
    df = w.common.scale_df if w.common.scale is Scale.REPLICATES else 0
    if w.common.scale is Scale.ESTIMATED:
        df = w.assessments[smaller].fit.degrees_of_freedom - 1
    z = max(zs)
    single = 2 * float(t_upper(z, df if df > 0 else np.inf))
    return float(min(1.0, single * len(zs)))


def _questions(w: Weighed) -> list[dict[str, Any]]:
    out = []
    answers = iter(w.answers)
    for q in w.study.questions:
        if q.asks == "participates":
            out.append(_participates(w, next(answers)))
        elif q.asks == "stands":
            names = [c.law.name for c in w.laws]
            about = names if q.about in ("all", "") else [n for n in names if n == q.about]
            yes = [n for n, s in zip(names, w.stands, strict=True) if s and n in about]
            no = [n for n, s in zip(names, w.stands, strict=True) if not s and n in about]
            out.append(
                {
                    "asks": "stands",
                    "about": q.about or "all",
                    "verdict": "stands" if yes else "rejected",
                    "sentence": sentence_standing(yes, no),
                    "standing": yes,
                    "rejected": no,
                    "reasons": [],
                    "why": _standing_why(w, yes),
                    "settle": _separate(w, yes),
                }
            )
        else:
            out.append(
                {
                    "asks": q.asks,
                    "about": q.about or ", ".join(q.names),
                    "verdict": "undecided",
                    "sentence": f"Not answered: questions of the kind “{q.asks}” are read but cannot "
                    "be answered yet.",
                    "reasons": [],
                    "why": [],
                }
            )
    return out


def _standing_why(w: Weighed, yes: list[str]) -> list[str]:
    """Groups of laws that these runs, or any runs, cannot separate; laws that gain nothing."""
    out = []
    names = [c.law.name for c in w.laws]
    inside = {i for i, n in enumerate(names) if n in yes}
    for same in (True, False):
        for group in _groups(w, inside, same):
            listed = _listed([f"“{names[i]}”" for i in group])
            if same:
                out.append(f"{listed} are the same law")
            elif len(group) == len(inside) > 2:
                out.append("these runs cannot separate any two of the laws that stand")
            else:
                out.append(f"these runs cannot separate {listed}")
    for i, nb in enumerate(w.no_better):
        if nb is not None and i in inside:
            out.append(f"“{names[i]}” stands, but no better than its special case “{names[nb]}”")
    return out


def _groups(w: Weighed, inside: set[int], same: bool) -> list[list[int]]:
    """Sets of candidates each pair of which is the same law, or inseparable by these runs."""

    def linked(i: int, j: int) -> bool:
        return (min(i, j), max(i, j)) in w.relations.same if same else j in w.inseparable[i]

    groups: list[list[int]] = []
    for i in sorted(inside):
        for g in groups:
            if all(linked(i, j) for j in g):
                g.append(i)
                break
        else:
            groups.append([i])
    return [
        g
        for g in groups
        if len(g) > 1
        and (same or not all((a, b) in w.relations.same for a in g for b in g if a < b))
    ]


def _listed(items: list[str]) -> str:
    return items[0] if len(items) == 1 else ", ".join(items[:-1]) + " and " + items[-1]


def _separate(w: Weighed, yes: list[str]) -> list[str]:
    if len(yes) < 2:
        return []
    if any(w.relations.same):
        return [
            "runs where the laws that stand differ most; for the same law under two names only what is "
            "not a rate (isotope effect, labelling, trapping, spectroscopy)"
        ]
    return ["runs where the laws that stand differ most"]


def _participates(w: Weighed, a: Answer) -> dict[str, Any]:
    q, v = a.question, a.verdict
    lead = _lead_candidate(w, a)
    effect: dict[str, Any] = {
        "value": None,
        "low": None,
        "high": None,
        "bound": None,
        "matters_above": number(q.matters_above),
        "at": {s: number(x) for s, x in q.at.items()},
        "run": None,
        "words": "",
    }
    tests: dict[str, Any] = {}
    by_origin: dict[str, Any] = {}
    margin = flip = typical = detectable = matters = None
    if lead is not None:
        readings = list(lead.by_origin.values())
        first = readings[0]
        e = first.effect
        if e is not None:
            effect.update(
                value=number(e.value),
                low=number(min(r.effect.low for r in readings if r.effect is not None)),
                high=number(max(r.effect.high for r in readings if r.effect is not None)),
                bound=number(max(r.effect.bound for r in readings if r.effect is not None)),
                run=e.label,
                words=f"in “{w.laws[lead.index].law.name}”, at {e.label}",
            )
        for r in readings:
            by_origin[r.origin] = _reading(r)
        worst = min(readings, key=lambda r: r.z if r.z == r.z else -1e9)
        tests["reconciled"] = {
            "p": number(worst.p),
            "z": number(worst.z),
            "statistic": number(worst.z),
            "df": None,
            "words": worst.words + (", two-sided" if worst.two_sided else ", one-sided"),
        }
        if first.nested is not None:
            n = first.nested
            tests["nested_F"] = {
                "p": number(n.p_one_sided),
                "p_two_sided": number(n.p),
                "statistic": number(n.statistic),
                "z": None,
                "df": list(n.df),
                "words": "extra sum of squares, conditions taken as exact; not used for the verdict",
            }
        margins = [r.error_margin for r in readings if r.error_margin == r.error_margin]
        margin = number(min(margins)) if margins else None
        flip, typical = distance(first.flip), distance(first.flip_typical)
        matters = distance(first.flip_matters)
        detectable = number(max((r.detectable for r in readings), default=float("nan")))
    flip_shown = matters if v.outcome == "negligible" else flip
    return {
        "asks": "participates",
        "about": q.about,
        "what": a.what,
        "verdict": v.outcome,
        "sentence": v.sentence,
        "reasons": list(v.why),
        "why": list(v.why),
        "settle": list(v.settle),
        "undecided_because": list(v.because),
        "below_what_matters": v.below_what_matters,
        "effect": effect,
        "error_margin": margin,
        "flip_distance": flip_shown,
        "flip_typical": None if v.outcome == "negligible" else typical,
        "tests": tests,
        "by_origin": by_origin,
        "stand_ins": [
            {"name": s.name, "words": s.words, "stands": s.stands, "p": number(p)}
            for s, p in a.stand_ins
        ],
        "by_candidate": [_by_candidate(w, a, k) for k in a.per_candidate],
        "detectable": detectable,
    }


def _lead_candidate(w: Weighed, a: Answer) -> InCandidate | None:
    """The candidate whose numbers head the answer: stands, contains it, best ranked.

    Of an undecided question the one that leaves it most open, so that the numbers agree with why.
    """
    tested = [k for k in a.per_candidate if k.by_origin]
    if not tested:
        return None
    standing = [k for k in tested if w.stands[k.index]]
    if a.verdict.outcome == "undecided" and standing:
        return max(
            standing, key=lambda k: (max(r.p for r in k.by_origin.values()), -w.rank[k.index])
        )
    return min(tested, key=lambda k: (not w.stands[k.index], w.rank[k.index]))


def _reading(r: Any) -> dict[str, Any]:
    e = r.effect
    return {
        "p": number(r.p),
        "z": number(r.z),
        "effect": None if e is None else [number(e.low), number(e.high)],
        "bound": None if e is None else number(e.bound),
        "information": number(r.information),
        "error_margin": number(r.error_margin),
    }


def _by_candidate(w: Weighed, a: Answer, k: InCandidate) -> dict[str, Any]:
    votes = dict(a.verdict.votes)
    name = w.laws[k.index].law.name
    readings = list(k.by_origin.values())
    first = readings[0] if readings else None
    e = first.effect if first is not None else None
    return {
        "candidate": name,
        "stands": bool(w.stands[k.index]),
        "contains": k.contains,
        "how": k.knock_out.kind.value if k.knock_out is not None else "",
        "p": number(max((r.p for r in readings), default=float("nan"))),
        "effect": None if e is None else [number(e.low), number(e.high)],
        "votes": votes.get(name, ""),
        "note": k.note,
    }


def _not_checked(w: Weighed) -> list[str]:
    out = [
        f"{name}: not checked ({words})"
        for name, words in CONTROLS.items()
        if name not in w.study.controls
    ]
    for c in w.study.runs.columns:
        if c.role is Role.SPECIES and c.basis is ErrorBasis.ASSUMED:
            out.append(f"the error of “{c.name}”: assumed, not stated")
    return out
