"""What the report says, apart from how it looks: sentences, facts and tables as plain records.

:func:`build` turns the saved document (``evidence.json``) into one :class:`Content`; the terminal
summary and the HTML report both draw it and do no arithmetic of their own.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from discrim.report import constants, knock_outs, pairs, read, residuals, responses, tables
from discrim.report.answers import Answer, answer, question_words
from discrim.report.laws import Law, laws_of, quoted
from discrim.report.numbers import (
    as_number,
    count,
    listed,
    number,
    percent,
    rounded,
)
from discrim.report.read import Document
from discrim.report.table import Table

#: Said in every report, whatever the document holds (design: words and cautions).
STANDING_CAUTIONS = (
    "The verdicts concern these runs, these candidates and the stated errors. They are not "
    "permission to change a process.",
    "A species without effect on the rate may still be a stabiliser, inhibitor, oxygen scavenger, "
    "neutraliser, diluent or heat sink, or govern selectivity, coking or corrosion.",
    "A rate law is not a basis for relief sizing or for scale-up of heat removal.",
    "Transport limits (heat and mass) must be ruled out before rates are read as kinetics.",
    "Changes go through the site's own hazard review and management of change, local codes, and "
    "qualified, licensed people where the law asks for them.",
)


@dataclass(frozen=True, slots=True)
class Content:
    """Everything that a report says, in the order in which it is read."""

    title: str
    scope: str
    answers: tuple[Answer, ...] = ()
    problems: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()
    candidates: Table | None = None
    criteria: Table | None = None
    residuals: Table | None = None
    laws: tuple[Law, ...] = ()
    conventions: tuple[str, ...] = ()  # those that hold for every law, said once
    lockstep: tuple[str, ...] = ()
    trade_offs: tuple[tuple[str, str], ...] = ()  # candidate, words
    replicates: str = ""
    exclusions: tuple[str, ...] = ()
    columns: Table | None = None
    response_errors: Table | None = None
    runs: Table | None = None
    conditioning: tuple[Table, ...] = ()
    comparisons: Table | None = None
    constants: tuple[Table, ...] = ()
    assumed: tuple[tuple[str, tuple[str, ...]], ...] = ()  # heading, lines
    not_checked: tuple[str, ...] = ()
    findings: tuple[tuple[str, str, str], ...] = ()  # severity, where, says
    references: tuple[tuple[str, str], ...] = ()
    provenance: tuple[tuple[str, str], ...] = ()
    level: str = "95 %"
    reported: tuple[Table, ...] = ()  # quantities of the constants that the study asks for
    pairs: Table | None = None  # rivals that stand, two at a time
    first_places: Table | None = None
    knock_outs: tuple[Table, ...] = ()  # the laws of each mechanism with some of its pathways
    rejected: tuple[str, ...] = ()  # names, where others stand


def build(document: Document) -> Content:
    """The whole content of a report, from the document saved as ``evidence.json``.

    Missing or odd entries become empty ones; nothing raises.
    """
    runs = read.part(document, "runs")
    study = read.part(document, "study")
    ordered = read.candidates_first_standing(document)
    level = percent(as_number(document.get("confidence")) or 0.95)
    laws, shared = laws_of(ordered)
    return Content(
        title=read.text(document, "title", "Untitled study"),
        scope=_scope(document, level),
        answers=tuple(answer(q, document) for q in read.records(document, "questions")),
        problems=tuple(not_computed(document)),
        cautions=_cautions(document),
        candidates=tables.candidates(ordered),
        criteria=tables.criteria(ordered),
        residuals=residuals.table(ordered),
        laws=laws,
        conventions=shared,
        lockstep=tuple(_lockstep(item) for item in read.records(runs, "lockstep")),
        trade_offs=_trade_offs(ordered),
        replicates=_replicates(runs),
        exclusions=tuple(_exclusion(e) for e in read.records(study, "exclusions")),
        columns=tables.columns(runs),
        response_errors=responses.table(document),
        runs=tables.runs(runs),
        conditioning=tables.conditioning(ordered),
        comparisons=tables.comparisons(read.records(document, "comparisons")),
        pairs=pairs.pairs(read.records(document, "pairs")),
        first_places=pairs.first_places(ordered),
        constants=constants.constants(ordered, level),
        reported=constants.constants(ordered, level, key="reported"),
        assumed=_assumed(study, read.records(runs, "columns")),
        not_checked=tuple(
            line.replace(": not checked (", " (")  # the heading says it
            for line in read.texts(document, "not_checked") or read.texts(study, "not_checked")
        ),
        findings=_findings(document),
        rejected=_rejected(ordered),
        references=tuple(
            (read.text(r, "method"), read.text(r, "source"))
            for r in read.records(document, "references")
        ),
        provenance=_provenance(document),
        level=level,
        knock_outs=tuple(
            t for t in (knock_outs.table(c) for c in knock_outs.with_pathways(document)) if t
        ),
    )


def _rejected(candidates: list[Any]) -> tuple[str, ...]:
    outcomes = {read.text(c, "name"): tables.outcome(c) for c in candidates}
    if "stands" not in outcomes.values():
        return ()
    return tuple(name for name, outcome in outcomes.items() if outcome != "stands")


def _findings(document: Document) -> tuple[tuple[str, str, str], ...]:
    """(severity, where, says), warnings first; what is said beside a verdict is not said again."""
    found = [
        (read.text(f, "severity", "note"), read.text(f, "where"), read.text(f, "says"))
        for f in read.records(document, "findings")
    ]
    found = [f for f in found if not (f[1].startswith("question about") and "leaving out" in f[2])]
    return tuple(sorted(found, key=lambda f: f[0] != "warning"))


def not_computed(document: Document) -> list[str]:
    """What was asked for and could not be computed, in sentences; empty when all was."""
    out = []
    for candidate in read.records(document, "candidates"):
        status = read.text(candidate, "status")
        if status and status != "converged":
            name = read.text(candidate, "name")
            out.append(f"The candidate “{name}” could not be fitted: {status}.")
    for question in read.records(document, "questions"):
        if not read.text(question, "verdict"):
            sentence = read.text(question, "sentence")
            out.append(
                f"{question_words(question)} Not answered{': ' + sentence if sentence else '.'}"
            )
    return out


def _scope(document: Document, level: str) -> str:
    runs = read.part(document, "runs")
    kept = [k for k in read.items(runs, "kept") if k is False]
    n = int(read.value(runs, "n") or 0)
    words = [count(n, "run") + (f" ({len(kept)} excluded)" if kept else "")]
    words.append(count(len(read.records(document, "candidates")), "candidate"))
    words.append(f"confidence {level}")
    observed = read.text(runs, "observation")
    if observed:
        words.insert(0, observed)
    return ", ".join(words)


def _cautions(document: Document) -> tuple[str, ...]:
    """The study's own cautions first; the standing ones only where those say nothing alike."""
    given = read.texts(document, "cautions")
    return tuple(given) if len(given) >= 4 else tuple(dict.fromkeys(given + _missing(given)))


def _missing(given: list[str]) -> list[str]:
    keys = ("permission", "stabiliser", "relief", "Transport", "hazard review")
    together = " ".join(given)
    return [c for c, key in zip(STANDING_CAUTIONS, keys, strict=True) if key not in together]


def _lockstep(item: Document) -> str:
    words = read.text(item, "words")
    if words:
        return words
    terms, columns = read.texts(item, "terms"), read.texts(item, "columns")
    ratio = read.numbers(item, "ratio")
    out = f"{listed(terms) or 'Two terms'} move in lockstep"
    if len(columns) == 2 and len(ratio) == 2 and None not in ratio:
        out += f": {columns[1]}/{columns[0]} stays between {number(ratio[0], 5)} and "
        out += f"{number(ratio[1], 5)}"
    return out + "."


def _trade_offs(candidates: list[Any]) -> tuple[tuple[str, str], ...]:
    """Of the candidates that stand; of all where none does."""
    standing = [c for c in candidates if tables.outcome(c) == "stands"]
    return tuple(
        (read.text(c, "name"), words)
        for c in standing or candidates
        for words in (read.text(t, "words") for t in read.records(c, "trade_offs"))
        if words
    )


def _replicates(runs: Document) -> str:
    groups = [
        listed([read.clean(label) for label in group])
        for group in read.items(runs, "replicates")
        if isinstance(group, list | tuple) and len(group) > 1
    ]
    return "; ".join(groups)


def _exclusion(e: Document) -> str:
    labels = read.texts(e, "runs")
    words = read.text(e, "where") or f"runs {listed(labels)}"
    return f"{words}: {read.text(e, 'reason', 'no reason given')}"


def _assumed(study: Document, columns: Sequence[Any]) -> tuple[tuple[str, tuple[str, ...]], ...]:
    known = []
    for c in read.records(study, "known_constants"):
        v, u = rounded(read.value(c, "value"), read.value(c, "sd"))
        shown = f"{read.text(c, 'name')} = {v}" + (f" ± {u}" if u else "")
        units, how = read.text(c, "units"), read.text(c, "how")
        known.append(
            shown + (f" {units}" if units not in ("", "1") else "") + (f" ({how})" if how else "")
        )
    settings = read.part(study, "settings")
    groups = [
        (
            "Quantities put into the laws",
            [
                f"{read.text(d, 'name')} = {read.text(d, 'text')}"
                for d in read.records(study, "derived")
            ],
        ),
        (
            "Worked out from other columns, whose errors go with them",
            [
                f"{read.text(c, 'name')} = {read.text(c, 'computed_from')}"
                for c in columns
                if read.text(c, "computed_from")
            ],
        ),
        ("Constants known beforehand", known),
        (
            "Controls done",
            [
                f"{read.text(c, 'name')}: {read.text(c, 'done')}"
                for c in read.records(study, "controls")
            ],
        ),
        ("Other evidence (listed, not weighed)", [_other(e) for e in _others(study)]),
        ("Settings", [f"{read.clean(k)}: {read.text(settings, k)}" for k in settings]),
    ]
    return tuple((heading, tuple(lines)) for heading, lines in groups if lines)


def _others(study: Document) -> list[Any]:
    return list(read.records(study, "other_evidence"))


def _other(e: Document) -> str:
    against = read.texts(e, "against")
    out = read.text(e, "says")
    source = read.text(e, "source")
    out += f" ({source})" if source else ""
    return out + (f"; speaks against {quoted(against)}" if against else "")


def _provenance(document: Document) -> tuple[tuple[str, str], ...]:
    provenance = read.part(document, "provenance")
    words = {"table_sha256": "SHA-256 of the table", "study_sha256": "SHA-256 of the study"}
    out = [("study file", read.text(read.part(document, "study"), "file"))]
    out += [(words.get(str(k), read.clean(k)), read.text(provenance, k)) for k in provenance]
    out.append(("seed", read.text(document, "seed")))
    return tuple((k, v) for k, v in out if v)
