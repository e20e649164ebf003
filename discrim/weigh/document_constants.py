"""The part of the document that answers questions about constants."""

from __future__ import annotations

from typing import Any

from discrim.evidence.at_value import AtValue
from discrim.weigh.asked_constants import ConstantAnswer, ConstantInCandidate
from discrim.weigh.document_values import number
from discrim.weigh.weighed import Weighed


def constants_record(w: Weighed, a: ConstantAnswer) -> dict[str, Any]:
    """One record; tests and measures are those of the candidate that leads: it stands, best ranked.

    Of an undecided question the one that leaves it most open, so that the numbers agree with why.
    """
    q, v = a.question, a.verdict
    lead = _lead(w, a)
    tests: dict[str, Any] = {}
    by_origin: dict[str, Any] = {}
    margin = None
    if lead is not None:
        readings = list(lead.by_origin.values())
        by_origin = {r.origin: _reading(r) for r in readings}
        tested = [r.test for r in readings if r.test is not None]
        if tested:
            worst = max(tested, key=lambda t: t.p if t.p == t.p else -1.0)
            tests["reconciled"] = {
                "p": number(worst.p),
                "z": number(worst.z),
                "statistic": number(worst.z),
                "df": None,
                "words": worst.words + (", two-sided" if worst.two_sided else ", one-sided"),
            }
            n = tested[0].nested
            if n is not None:
                tests["nested_F"] = {
                    "p": number(n.p_one_sided),
                    "p_two_sided": number(n.p),
                    "statistic": number(n.statistic),
                    "z": None,
                    "df": list(n.df),
                    "words": "extra sum of squares, conditions taken as exact; not used for the "
                    "verdict",
                }
            margins = [t.error_margin for t in tested if t.error_margin == t.error_margin]
            margin = number(min(margins)) if margins else None
    return {
        "asks": q.asks,
        "about": q.about,
        "names": list(q.names),
        "value": number(q.value),
        "value_text": q.value_text,
        "verdict": v.outcome,
        "sentence": v.sentence,
        "reasons": list(v.why),
        "why": list(v.why),
        "settle": list(v.settle),
        "undecided_because": list(v.because),
        "below_what_matters": v.below_what_matters,
        "matters_above": number(q.matters_above),
        "error_margin": margin,
        "tests": tests,
        "by_origin": by_origin,
        "by_candidate": [_by_candidate(w, a, k) for k in a.per_candidate],
    }


def _lead(w: Weighed, a: ConstantAnswer) -> ConstantInCandidate | None:
    tested = [k for k in a.per_candidate if k.by_origin]
    if not tested:
        return None
    standing = [k for k in tested if w.stands[k.index]]
    if a.verdict.outcome == "undecided" and standing:
        return max(standing, key=lambda k: (_p(k) or 0.0, -w.rank[k.index]))
    return min(tested, key=lambda k: (not w.stands[k.index], w.rank[k.index]))


def _p(k: ConstantInCandidate) -> float | None:
    ps = [r.test.p for r in k.by_origin.values() if r.test is not None and r.test.p == r.test.p]
    return max(ps) if ps else None


def _reading(r: AtValue) -> dict[str, Any]:
    t = r.test
    return {
        "p": None if t is None else number(t.p),
        "z": None if t is None else number(t.z),
        "within": r.within,
        "information": None if t is None else number(t.information),
        "error_margin": None if t is None else number(t.error_margin),
    }


def _by_candidate(w: Weighed, a: ConstantAnswer, k: ConstantInCandidate) -> dict[str, Any]:
    name = w.laws[k.index].law.name
    return {
        "candidate": name,
        "stands": bool(w.stands[k.index]),
        "contains": k.has_them,
        "p": number(_p(k)),
        "measures": [
            {
                "name": m.name,
                "units": m.units,
                "value": number(m.value),
                "interval": [None, None]
                if m.interval.empty
                else [number(m.interval.low.value), number(m.interval.high.value)],
                "ends": [m.interval.low.end, m.interval.high.end],
            }
            for m in k.measures
        ],
        "votes": dict(a.verdict.votes).get(name, ""),
        "note": k.note,
    }
