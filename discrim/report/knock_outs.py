"""What the saved document says of the pathways that a mechanism needs, read for figure and table."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from discrim.report import read
from discrim.report.numbers import MISSING, number, probability
from discrim.report.read import Document
from discrim.report.table import Table, make

MOST_SHOWN = 2  # candidates; what they say is in evidence.json for all
MOST_NODES = 63


@dataclass(frozen=True, slots=True)
class LatticeNode:
    pathways: tuple[str, ...]
    full: bool
    enough: bool | None
    p: float | None
    record: Mapping[str, Any]


def with_pathways(document: Document) -> list[Mapping[str, Any]]:
    """Candidates whose lattice is shown: not those whose laws are all in that of another."""
    found = [
        c for c in read.candidates_first_standing(document) if 1 < len(nodes_of(c)) <= MOST_NODES
    ]
    laws = [{read.text(n.record, "law") for n in nodes_of(c)} for c in found]
    return [
        c
        for i, c in enumerate(found)
        if not any(
            laws[i] < other or (laws[i] == other and j < i)
            for j, other in enumerate(laws)
            if j != i
        )
    ][:MOST_SHOWN]


def nodes_of(candidate: Any) -> list[LatticeNode]:
    out = []
    for n in read.records(read.part(candidate, "knock_outs"), "nodes"):
        flag = n.get("enough")
        out.append(
            LatticeNode(
                tuple(read.texts(n, "pathways")),
                n.get("full") is True,
                flag if isinstance(flag, bool) else None,
                read.value(n, "p_against_full"),
                n,
            )
        )
    return out


def edges_of(candidate: Any, n: int) -> list[tuple[int, int, float | None]]:
    out = []
    for e in read.records(read.part(candidate, "knock_outs"), "edges"):
        a, b = read.value(e, "smaller"), read.value(e, "larger")
        if a is not None and b is not None and 0 <= a < n and 0 <= b < n:
            out.append((int(a), int(b), read.value(e, "p")))
    return out


def _set_to(edges: Sequence[Mapping[str, Any]], full: int) -> dict[int, str]:
    """What is set in the full law to give each smaller one, by way of the laws in between.

    Zeros add up along a way: the constants that stay keep their names. Anything else that is set
    is said only for the laws next to the full one.
    """
    out: dict[int, str] = {}
    ahead, seen = [full], {full}
    while ahead:
        larger = ahead.pop(0)
        for e in edges:
            smaller, words = int(read.value(e, "smaller") or 0), read.text(e, "words")
            if read.value(e, "larger") != larger or smaller in seen:
                continue
            parts = [*out[larger].split(", "), *words.split(", ")] if larger != full else [words]
            if larger != full and not all(p.endswith(" = 0") for p in parts):
                continue
            out[smaller] = ", ".join(dict.fromkeys(parts))
            seen.add(smaller)
            ahead.append(smaller)
    return out


def table(candidate: Any) -> Table | None:
    """The same in numbers: one row for each law."""
    nodes = nodes_of(candidate)
    record = read.part(candidate, "knock_outs")
    full = next((i for i, n in enumerate(nodes) if n.full), -1)
    set_to = _set_to(read.records(record, "edges"), full)
    rows = []
    for i, n in enumerate(nodes):
        same = [", ".join(read.clean(x) for x in s) for s in read.items(n.record, "same_as")
                if isinstance(s, list | tuple)]  # fmt: skip
        rows.append(
            [
                ", ".join(n.pathways) + (f" (same law: {'; '.join(same)})" if same else ""),
                number(read.value(n.record, "n_constants")),
                number(read.value(n.record, "objective")),
                MISSING if (aicc := read.value(n.record, "aicc")) is None else f"{aicc:.1f}",
                "" if n.full else probability(n.p),
                {True: "yes", False: "no", None: "not tested"}[n.enough],
                set_to.get(i, ""),
            ]
        )
    heads = [
        ("Pathways", False),
        ("Constants", True),
        ("Q", True),
        ("AICc", True),
        ("p against all", True),
        ("Enough", False),
        ("What is set in the full law", False),
    ]
    return (
        make(
            f"Pathways taken out of “{read.text(candidate, 'name')}”",
            heads,
            rows,
            note="p is that of the extra sum of squares against the law with all pathways, the "
            "conditions taken as exact; it is a guide where other constants lose their effect. These "
            "tests change no verdict.",
        )
        if rows
        else None
    )
