"""The part of the document that says which pathways of a mechanism the runs need."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from discrim.ratelaw.printing import plain
from discrim.weigh.document_values import number
from discrim.weigh.knock_outs import KnockOuts
from discrim.weigh.weighed import Weighed


def knock_outs_record(w: Weighed, i: int) -> dict[str, Any] | None:
    """The lattice of candidate ``i`` with its tests; None where there is none."""
    found = w.knock_outs[i] if i < len(w.knock_outs) else None
    if found is None:
        return None
    lattice = found.lattice
    return {
        "pathways": [
            {"name": r.name, "steps": dict(r.steps), "overall": r.text} for r in lattice.routes
        ],
        "nodes": [
            {
                "pathways": list(node.pathways),
                "same_as": [list(s) for s in node.sets[1:]],
                "full": k == lattice.full,
                "law": plain(node.law.rate),
                "n_constants": tried.fit.p,
                "status": tried.fit.status.value,
                "objective": number(tried.fit.objective) if tried.fit.ok else None,
                "rss": number(tried.fit.rss) if tried.fit.ok else None,
                "aicc": number(tried.aicc),
                "p_against_full": number(tried.p),
                "enough": tried.enough,
            }
            for k, (node, tried) in enumerate(zip(lattice.nodes, found.tried, strict=True))
        ],
        "edges": [
            {
                "smaller": e.smaller,
                "larger": e.larger,
                "words": e.nesting.words(),
                "edge": e.nesting.edge,
                "vanish": list(e.nesting.vanish),
                "p": number(p),
            }
            for e, p in zip(lattice.edges, found.p, strict=True)
        ],
        "smallest": [list(lattice.nodes[k].pathways) for k in found.smallest],
        "left_out": [{"pathways": list(names), "why": why} for names, why in lattice.left_out],
        "complete": lattice.complete,
        "words": _words(found, w.study.level),
    }


def _words(found: KnockOuts, level: float) -> str:
    """Which smallest sets are enough, one sentence or two."""
    lattice = found.lattice
    n = len(lattice.routes)
    every = f"all {n} pathways" if n > 2 else "both pathways"
    smallest = [k for k in found.smallest if k != lattice.full]
    at = f"at {100 * level:g} %"
    if not smallest:
        out = f"No set of fewer pathways fits as well as {every} together, {at}."
    else:
        sets = "; or ".join(_joined(lattice.nodes[k].pathways) for k in smallest)
        out = f"Not worse than {every} together, {at}: {sets}."
    if not lattice.complete:
        out += " Only sets without one or two of the pathways were tried."
    return out


def _joined(names: Sequence[str]) -> str:
    return f"{names[0]} alone" if len(names) == 1 else " with ".join(names)
