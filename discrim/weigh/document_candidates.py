"""The part of the document that is about each candidate."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from discrim.evidence.conditioning import Lockstep, TradeOff, collinearity_index
from discrim.evidence.delta import propagated
from discrim.evidence.intervals import Interval, quantile
from discrim.fit.fit import Fit
from discrim.fit.measurements import Scale
from discrim.runs.model import Column, Role
from discrim.study.lookup import to_shown
from discrim.weigh.adequacy_said import adequacy_record
from discrim.weigh.combinations import combination_record, combination_words
from discrim.weigh.derived import law_keys
from discrim.weigh.document_knock_outs import knock_outs_record
from discrim.weigh.document_pairs import share_keys
from discrim.weigh.document_responses import observed_records
from discrim.weigh.document_values import number, shown_units
from discrim.weigh.magnitudes import magnitudes_record
from discrim.weigh.weighed import Weighed
from discrim.weigh.words import (
    share,
    trade_off_words,
)


def candidate_record(w: Weighed, i: int) -> dict[str, Any]:
    a, law, bound = w.assessments[i], w.laws[i].law, w.bounds[i]
    fit, c = a.fit, a.criteria
    s = w.standings[i]
    out = law_keys(w.laws[i])
    out.update(
        {
            "name": law.name,
            "observed": observed_records(w.bench, w.laws[i]),
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
            **share_keys(w, i),
            "fit_p": number(a.fit_p),
            "lack_of_fit": None
            if a.lack_of_fit is None
            else {
                "F": number(a.lack_of_fit.statistic),
                "df": list(a.lack_of_fit.df),
                "p": number(a.lack_of_fit.p),
            },
            "adequacy": adequacy_record(w, i),
            "magnitudes": magnitudes_record(w, i),
            "condition_number": number(a.conditioning.condition_number),
            "digits_lost": number(a.conditioning.digits_lost),
            "collinearity_index": number(collinearity_index(fit.jacobian)) if fit.ok else None,
            "condition_indices": [number(x) for x in a.conditioning.indices],
            "variance_proportions": [
                [number(x) for x in row] for row in a.conditioning.proportions
            ],
            "correlations": {"names": list(bound.names), "matrix": _correlations(fit)},
            "trade_offs": [_trade_off(w, i, t) for t in a.trade_offs],
            "lockstep": lockstep_keys(w, i) if fit.ok else [],
            "constants": [_constant(w, i, j) for j in range(len(bound.names))],
            "fitted": _fitted(w, i) if fit.ok else [],
            "pathways": _pathways(w, i) if fit.ok else [],
            "knock_outs": knock_outs_record(w, i),
            "outcome": "stands" if w.stands[i] else "rejected",
            "p_joint": number(s.p_joint),
            "inseparable_from": [w.laws[j].law.name for j in w.inseparable[i]],
            "no_better_than": None if w.no_better[i] is None else w.laws[w.no_better[i]].law.name,  # type: ignore[index]
            "reasons": _reasons(w, i),
        }
    )
    return out


def _trade_off(w: Weighed, i: int, t: TradeOff) -> dict[str, Any]:
    a, bound = w.assessments[i], w.bounds[i]
    words = trade_off_words(bound, t, a.fit.theta)
    fixed = combination_record(a, t, w.study.level) if w.stands[i] else None
    return {
        "singular_value": number(t.singular_value),
        "words": words if fixed is None else f"{words}: {combination_words(fixed)}",
        "direction": {n: number(x) for n, x in zip(bound.names, t.change, strict=True)},
        "combination": fixed,
    }


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
            f"{w.assessments[i].fit.objective_df} degrees of freedom, {_p(s.p_fit)})"
        )
    if s.worst_rival >= 0:
        name = w.laws[s.worst_rival].law.name
        limit = alpha if s.p_fit is None else alpha * 0.8
        how = "rejected in the direction of" if s.p_joint < limit else "not rejected against"
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
    if n < p or not np.isfinite(norms).all() or (norms == 0).any():
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
    there = w.bounds[i].predictor.predict(fit.theta[None], data.conditions)
    assert there.by_constants is not None
    at_printed = there.values[0]
    half = quantile(fit, w.study.level) * propagated(fit, there.by_constants[0])
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
                "units": shown_units(col),
                "observed": number(y),
                "predicted": number(p),
                "residual": number(y - p),
                "standardised": number((data.y[k] - at_printed[k]) / sd),
                "sd": number(sd * f),
                "low": number(y - 2 * sd * f),
                "high": number(y + 2 * sd * f),
                "fit_low": number(p - half[k] * f),
                "fit_high": number(p + half[k] * f),
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
