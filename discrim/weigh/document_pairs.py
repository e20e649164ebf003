"""The part of the document that holds candidates against one another."""

from __future__ import annotations

from typing import Any

from discrim.evidence.bootstrap import Simulated
from discrim.weigh.document_values import number
from discrim.weigh.weighed import Weighed


def comparison_record(w: Weighed, k: int) -> dict[str, Any]:
    """A special case against the law that contains it."""
    c = w.comparisons[k]
    t, b = c.test, c.bootstrap
    smaller, larger = w.laws[c.smaller].law.name, w.laws[c.larger].law.name
    return {
        "smaller": smaller,
        "larger": larger,
        "nested": True,
        "edge": c.edge,
        "restriction": c.words,
        "F": None if t is None else number(t.statistic),
        "df": None if t is None else list(t.df),
        "p": None if t is None else number(t.p),
        "p_one_sided": None if t is None else number(t.p_one_sided),
        "p_reconciled": number(c.reconciled),
        "p_bootstrap": None if b is None else number(b.p),
        "bootstrap": None if b is None else simulated_record(b),
        "p_that_holds": number(c.decides),
        "p_that_holds_from": c.source,
        "p_note": c.note,
        "words": f"“{smaller}” is “{larger}” with {c.words}",
    }


def simulated_record(s: Simulated) -> dict[str, Any]:
    """A p-value from drawn tables, with its standard error."""
    return {"p": number(s.p), "error": number(s.error), "draws": s.draws, "settled": s.clear}


def pair_records(w: Weighed) -> list[dict[str, Any]]:
    """Different laws that stand and of which neither contains the other, two at a time."""
    out = []
    for pair in w.pairs.pairs:
        a, b = w.laws[pair.a].law.name, w.laws[pair.b].law.name
        v = pair.vuong
        out.append(
            {
                "a": a,
                "b": b,
                "vuong": None
                if v is None
                else {
                    "statistic": number(v.statistic),
                    "p": number(v.p),
                    "p_alike": number(v.p_alike),
                    "prefers": None if v.prefers is None else (a, b)[v.prefers],
                },
                "cox_williams": [
                    {"null": null, "statistic": number(gain), **simulated_record(s)}
                    for null, s, gain in zip((a, b), pair.as_truth, pair.gains, strict=True)
                ],
            }
        )
    return out


def share_keys(w: Weighed, i: int) -> dict[str, Any]:
    """How often candidate i ranks first on drawn tables, and with whom it shares its weight."""
    same = [
        w.laws[j].law.name for j in range(len(w.laws)) if (min(i, j), max(i, j)) in w.relations.same
    ]
    repeats = w.pairs.repeats
    member = i
    for j in range(i):  # a law that appears twice was drawn from once
        if (j, i) in w.relations.same:
            member = j
            break
    return {
        "weight_shared_with": same,
        "first_share": None if repeats is None else number(repeats.first_share(member)),
        "first_share_if_true": None if repeats is None else number(repeats.first_if_true(member)),
    }
