"""The evidence as one plain document: what is saved as ``evidence.json`` and what reports are drawn from.

Keys are a contract (extended, never renamed). Numbers are plain floats in the units named beside
them; what is not known, open or infinite is null.
"""

from __future__ import annotations

import sys
from typing import Any

import numpy as np

from discrim.runs.model import ErrorBasis, Role
from discrim.weigh.document_candidates import candidate_record, lockstep_keys
from discrim.weigh.document_pairs import comparison_record, pair_records
from discrim.weigh.document_questions import question_records
from discrim.weigh.document_reported import reported_records
from discrim.weigh.document_responses import response_records
from discrim.weigh.document_values import column_record, is_words, number
from discrim.weigh.planes import planes
from discrim.weigh.weighed import Weighed
from discrim.weigh.words import (
    CAUTIONS,
    CONTROLS,
    references,
    settings_words,
)


def document(w: Weighed, every_run: Weighed | str | None = None) -> dict[str, Any]:
    """The whole document of one weighed study.

    ``every_run``: the study weighed again with its excluded runs, or why it could not be.
    """
    candidates = [candidate_record(w, i) for i in range(len(w.laws))]
    for record, found in zip(candidates, w.reported or [()] * len(candidates), strict=True):
        record["reported"] = reported_records(found)
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
    for q, again in zip(out["questions"], question_records(every_run), strict=True):
        q["with_excluded_runs"] = again["verdict"]
        q["sentence_with_excluded_runs"] = again["sentence"]
        about = f"question about {q['about'] or 'the reverse reaction'}"
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
        "responses": response_records(w.bench),
        "candidates": candidates,
        "comparisons": [comparison_record(w, k) for k in range(len(w.comparisons))],
        "pairs": pair_records(w),
        "relations": w.relations.records([c.law.name for c in w.laws]),
        "questions": question_records(w),
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
        "observation": "; ".join(is_words(c) for c in w.bench.responses),
        "columns": [{**column_record(c), **_computed(w, c.name)} for c in runs.columns],
        "replicates": [g for g in groups.values() if len(g) > 1],
        "lockstep": lockstep_keys(w, best) if best is not None else [],
    }


def _computed(w: Weighed, column: str) -> dict[str, Any]:
    """Of an observed column that was worked out from others: its formula, and whose errors it carries."""
    computed = w.study.computed.get(column)
    if computed is None:
        return {}
    held = {str(s).strip("[]{}") for s in computed.formula.free_symbols}
    with_error = [
        c.about if c.role is Role.SPECIES else c.name
        for c in w.study.runs.columns
        if c.errors and (c.name in held or (c.role is Role.SPECIES and c.about in held))
    ]
    with_error += [k for k, c in w.study.constants.items() if k in held and c.sd]
    return {"computed_from": computed.text, "carries_errors_of": with_error}


def _lead(w: Weighed) -> int | None:
    """The candidate whose conditioning is shown first: best that stands, with most constants."""
    good = [i for i, s in enumerate(w.stands) if s] or list(range(len(w.laws)))
    return max(good, key=lambda i: (len(w.bounds[i].names), -w.rank[i])) if good else None


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
