"""`discrim check`: what the runs can and cannot tell, before any fit is believed."""

from __future__ import annotations

from typing import Any

import numpy as np

from discrim.evidence.conditioning import conditioning, lockstep, trade_offs
from discrim.fit.fit import fit
from discrim.fit.measurements import Scale
from discrim.ratelaw.knockout import contains, knock_out
from discrim.ratelaw.printing import plain
from discrim.study.model import Study
from discrim.verdict.thresholds import LOCKSTEP_ERRORS, LOCKSTEP_MOST, LOCKSTEP_RELATIVE
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.chemistry import remarks, scene_before
from discrim.weigh.document_candidates import lockstep_words
from discrim.weigh.document_values import column_record, is_words, number
from discrim.weigh.prepare import prepare
from discrim.weigh.words import share, trade_off_words


def checked(study: Study) -> dict[str, Any]:
    """Conditioning of each law on the table; rates may be missing (a planned campaign)."""
    laws, bench, bounds = prepare(study, planned=True)
    planned = not np.isfinite(bench.measurements.y).all()
    out_laws = []
    findings: list[dict[str, str]] = []
    can: list[tuple[str, str]] = []
    cannot: list[tuple[str, str]] = []
    for c, b in zip(laws, bounds, strict=True):
        theta, how = _where(b, bench, planned)
        record, columns = _law(c.law.name, plain(c.law.rate), b, bench, theta, how)
        out_laws.append(record)
        for q in study.questions:
            if q.asks != "participates" or not contains(c.law, q.about):
                continue
            sentence, ok = _decides(q.about, c, b, bench, columns)
            if sentence:
                (can if ok else cannot).append((q.about, sentence))
    # one candidate in which the term is in lockstep leaves its question open
    open_ones = {about for about, _ in cannot}
    if planned:
        findings.append(
            {
                "severity": "note",
                "where": study.runs.file,
                "says": "some runs have no measured rate: the table is judged as planned",
            }
        )
    findings += [
        {"severity": severity, "where": where, "says": says}
        for severity, where, says in remarks(scene_before(study, bench, laws, bounds))
    ]
    runs = study.runs
    return {
        "title": study.title,
        "runs": {
            "n": int(runs.kept.sum()),
            "labels": list(runs.labels),
            "kept": [bool(k) for k in runs.kept],
            "observation": "; ".join(is_words(c) for c in bench.responses),
            "columns": [column_record(c) for c in runs.columns],
            "lockstep": [x for law in out_laws for x in law["lockstep"]],
        },
        "laws": out_laws,
        "findings": findings,
        "can_decide": list(dict.fromkeys(s for about, s in can if about not in open_ones)),
        "cannot_decide": list(dict.fromkeys(s for _, s in cannot)),
    }


def _where(b: Bound, bench: Bench, planned: bool) -> tuple[np.ndarray, str]:
    """Constants at which the sensitivities are taken, and in words where that is."""
    pred = b.predictor
    if bool(pred.linear.all()):
        return np.where(pred.lower >= 0, np.maximum(pred.scale, 0), pred.scale), ""
    if not planned:
        found = fit(pred, bench.measurements.as_origin(bench.measurements.origins()[0]))
        if found.ok:
            return found.theta, "at the best fit"
    theta = pred.scale.copy()
    if len(pred.starts):
        theta = np.where(np.isnan(pred.starts[0]), theta, pred.starts[0])
        return theta, "at the start values of the study"
    return theta, "at typical values of the constants (give `start` in [constants] for better ones)"


def _law(
    name: str, law: str, b: Bound, bench: Bench, theta: np.ndarray, how: str
) -> tuple[dict[str, Any], np.ndarray]:
    data = bench.measurements.as_origin(bench.measurements.origins()[0])
    pred = b.predictor.predict(theta[None], data.conditions, conditions_too=True)
    assert pred.by_constants is not None
    assert pred.by_conditions is not None
    values = pred.values[0]
    weight = _weights(data, values, pred.by_conditions[0])
    columns = pred.by_constants[0] * weight[:, None]
    cond = conditioning(columns, b.names)
    locks = []
    limits = {"errors": LOCKSTEP_ERRORS, "least": LOCKSTEP_RELATIVE, "most": LOCKSTEP_MOST}
    for lock in lockstep(b.predictor, data, theta, weight, **limits):
        used = [
            s.name.strip("[]{}")
            for j, s in enumerate(bench.symbols)
            if np.ptp(data.conditions[:, j]) >= 0 and _in_terms(b, lock.first, lock.second, s)
        ]
        words = lockstep_words(b.names[lock.first], b.names[lock.second], lock)
        locks.append(
            {
                "terms": [b.names[lock.first], b.names[lock.second]],
                "columns": used,
                "ratio": [number(lock.ratio[0]), number(lock.ratio[1])],
                "variation": number(lock.variation),
                "error": number(lock.error),
                "candidate": name,
                "words": words,
            }
        )
    record = {
        "name": name,
        "law": law,
        "columns": list(b.names),
        "condition_number": number(cond.condition_number),
        "digits_lost": number(cond.digits_lost),
        "condition_indices": [number(x) for x in cond.indices],
        "variance_proportions": [[number(x) for x in row] for row in cond.proportions],
        "trade_offs": [
            {"singular_value": number(t.singular_value), "words": trade_off_words(b, t, theta)}
            for t in trade_offs(cond)
        ],
        "lockstep": locks,
        "words": how,
    }
    return record, columns


def _in_terms(b: Bound, first: int, second: int, symbol: Any) -> bool:
    return any(symbol in e.free_symbols for e in b.expressions)


def _weights(data: Any, values: np.ndarray, by_conditions: np.ndarray) -> np.ndarray:
    var = np.zeros(len(values))
    size = np.maximum(np.abs(values), 1e-4 * np.max(np.abs(values), initial=1e-300))
    for s in data.of_observations:
        var += s.sd(size) ** 2
    if data.scale is Scale.ESTIMATED:
        var += (0.01 * size.mean()) ** 2
    for s in data.of_conditions:
        var += (s.sd(data.conditions[:, s.target]) * by_conditions[:, s.target]) ** 2
    return 1.0 / np.sqrt(np.where(var > 0, var, 1.0))


def _decides(about: str, c: Any, b: Bound, bench: Bench, columns: np.ndarray) -> tuple[str, bool]:
    """Whether the term of a species is outside lockstep with the rest of the law."""
    from discrim.evidence.score import basis, without
    from discrim.verdict import CONDITIONING_FRACTION, NOTHING_APART

    ko = knock_out(c.law, about, bench.typical(about))
    if ko is None or len(ko.psi) != 1:
        return "", True
    hit = [j for j in range(len(b.names)) if b.base_constant(j).name == ko.psi[0]]
    if len(hit) != 1:
        return "", True
    j = hit[0]
    g = columns[None, :, j]
    space = basis(np.delete(columns, j, axis=1)[None])
    left = float(np.sqrt((without(space, g) ** 2).sum() / max((g**2).sum(), 1e-300)))
    if left < CONDITIONING_FRACTION:
        part = f"only {share(left)}" if left > NOTHING_APART else "none"
        return (
            f"whether {about} takes part, with “{c.law.name}”: {part} of the sensitivity to "
            f"{b.names[j]} is apart from the other terms (lockstep)",
            False,
        )
    return (
        f"whether {about} takes part, with “{c.law.name}”: {share(left)} of the sensitivity to "
        f"{b.names[j]} is its own",
        True,
    )
