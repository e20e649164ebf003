"""The part of the document that answers the questions."""

from __future__ import annotations

from typing import Any

from discrim.verdict import sentence_standing
from discrim.weigh.asked import TAKEN_OUT, Answer, InCandidate
from discrim.weigh.document_constants import constants_record
from discrim.weigh.document_values import distance, number
from discrim.weigh.left_out import answer_keys, standing_keys, standing_sentences
from discrim.weigh.weighed import Weighed


def question_records(w: Weighed) -> list[dict[str, Any]]:
    out = []
    answers = iter(w.answers)
    for k, q in enumerate(w.study.questions):
        if q.asks in TAKEN_OUT:
            out.append(_participates(w, next(answers)))
        elif q.asks == "stands":
            names = [c.law.name for c in w.laws]
            wanted = set(q.names) or ({q.about} if q.about not in ("all", "") else set(names))
            about = [n for n in names if n in wanted]
            yes = [n for n, s in zip(names, w.stands, strict=True) if s and n in about]
            no = [n for n, s in zip(names, w.stands, strict=True) if not s and n in about]
            out.append(
                {
                    "asks": "stands",
                    "about": "all" if len(about) == len(names) else ", ".join(about),
                    "verdict": "stands" if yes else "rejected",
                    "sentence": sentence_standing(yes, no),
                    "standing": yes,
                    "rejected": no,
                    "reasons": [],
                    "why": [*_standing_why(w, yes), *standing_sentences(w.left_out, yes, about)],
                    "settle": _separate(w, yes),
                    **standing_keys(w.left_out, yes, about),
                }
            )
        else:
            out.append(constants_record(w, w.of_constants[k]))
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
        worst = max(readings, key=lambda r: r.p if r.p == r.p else 2.0)
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
    if v.outcome != "undecided":
        margin = number(v.error_margin)
    flip_shown = matters if v.outcome == "negligible" else flip
    return {
        "asks": q.asks,
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
        **answer_keys(w.left_out, w.answers.index(a)),
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
    effects = [r.effect for r in readings if r.effect is not None]
    return {
        "candidate": name,
        "stands": bool(w.stands[k.index]),
        "contains": k.contains,
        "how": k.knock_out.kind.value if k.knock_out is not None else "",
        "p": number(max((r.p for r in readings), default=float("nan"))),
        # whichever way the errors of the conditions are read
        "effect": [number(min(e.low for e in effects)), number(max(e.high for e in effects))]
        if effects
        else None,
        "votes": votes.get(name, ""),
        "note": k.note,
    }
