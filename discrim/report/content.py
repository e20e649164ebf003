"""What the report says, apart from how it looks: sentences, facts and tables as plain records.

:func:`build` turns the saved document (``evidence.json``) into one :class:`Content`; the terminal
summary and the HTML report both draw it and do no arithmetic of their own.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from discrim.report import knock_outs, pairs, read, residuals, responses, tables
from discrim.report.cases import Case, groups
from discrim.report.numbers import (
    as_number,
    count,
    factor,
    listed,
    number,
    percent,
    probability,
    rounded,
    tiny_is_zero,
)
from discrim.report.read import Document
from discrim.report.tables import Table

__all__ = ["Answer", "Content", "Law", "Table", "build", "not_computed", "rounded"]

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
NOT_THE_ONLY_LAWS = "These laws are not the only possible ones."


@dataclass(frozen=True, slots=True)
class Answer:
    """The verdict on one question.

    ``decided`` says whether the runs carry a verdict; ``facts`` are (what, how much) pairs;
    ``details`` the tables behind the verdict.
    """

    asks: str
    verdict: str
    decided: bool
    sentence: str
    why: tuple[str, ...]
    settle: tuple[str, ...]
    facts: tuple[tuple[str, str], ...]
    details: tuple[Table, ...]


@dataclass(frozen=True, slots=True)
class Law:
    """One candidate, from its steps to its rate law. ``mathml`` is "" where there is none."""

    name: str
    outcome: str
    notes: tuple[str, ...]
    text: str
    latex: str
    mathml: str
    step_text: str
    step_mathml: str
    step_latex: str
    steps: tuple[tuple[str, str], ...]
    assumptions: tuple[str, ...]
    conventions: tuple[str, ...]
    derivation: tuple[tuple[str, str, str], ...]  # words, text, mathml
    combinations: tuple[tuple[str, str, str], ...]  # name, definition, words
    source: str
    place: str
    routes: tuple[tuple[str, str], ...] = ()  # overall equation, steps
    balances: tuple[tuple[str, str], ...] = ()  # text, mathml: what the law's unknowns solve
    unknowns: tuple[str, ...] = ()  # of these balances
    limits: tuple[tuple[str, tuple[Case, ...]], ...] = ()  # heading, lines
    whole_latex: str = ""  # the derivation as one block, several lines
    observed: tuple[tuple[str, str, str], ...] = ()  # of several columns: what, text, mathml

    @property
    def balance_words(self) -> str:
        """How the balances are led in: with [H] and x_Br = k_w*[Br]/k_i from"""
        whats = {t.partition(" = ")[0]: t for _, t, _ in self.derivation if " = " in t}
        # An amount in units of constants has a name of its own, which says nothing by itself.
        *first, last = (u if u.startswith("[") else whats.get(u, u) for u in self.unknowns or ("",))
        return f"with {', '.join(first)} and {last} from" if first else f"with {last} from"

    def derives(self, text: str) -> bool:
        """Whether the derivation holds this formula, so that it need not be said again."""
        return any(_bare(t) == _bare(text) for _, t, _ in self.derivation)


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
        answers=tuple(_answer(q, document) for q in read.records(document, "questions")),
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
        constants=tables.constants(ordered, level),
        reported=tables.constants(ordered, level, key="reported"),
        assumed=_assumed(study),
        not_checked=tuple(read.texts(document, "not_checked") or read.texts(study, "not_checked")),
        findings=tuple(
            (read.text(f, "severity", "note"), read.text(f, "where"), read.text(f, "says"))
            for f in read.records(document, "findings")
        ),
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
            out.append(f"{_asks(question)} Not answered{': ' + sentence if sentence else '.'}")
    return out


def laws_of(candidates: Sequence[Document]) -> tuple[tuple[Law, ...], tuple[str, ...]]:
    """Each candidate's law (also what ``derive`` prints), and the conventions that they share.

    Bare laws come without conventions and do not count.
    """
    laws = [law(c) for c in candidates]
    stated = [item.conventions for item in laws if item.conventions]
    if len(stated) < 2:
        return tuple(laws), ()
    shared = [c for c in stated[0] if all(c in other for other in stated)]
    own = [
        replace(item, conventions=tuple(c for c in item.conventions if c not in shared))
        for item in laws
    ]
    return tuple(own), tuple(shared)


def law(candidate: Document) -> Law:
    """One candidate's law and how it follows from the steps."""
    notes = []
    reasons = read.texts(candidate, "reasons")
    same = read.texts(candidate, "same_law_as")
    if same and not any("the same law as" in reason for reason in reasons):
        notes.append(
            f"Same law as {_quoted(same)}: no rate can tell them apart, only isotope effects, labelling, "
            "trapping or spectroscopy."
        )
    near = [n for n in read.texts(candidate, "inseparable_from") if n not in same]
    if near and not any("cannot separate" in reason for reason in reasons):
        notes.append(f"Inseparable from {_quoted(near)} by these runs.")
    special = read.text(candidate, "no_better_than")
    if special and not any("no better than" in reason for reason in reasons):
        notes.append(f"Stands, but no better than its special case “{special}”.")
    notes += reasons + read.texts(candidate, "findings") + read.texts(candidate, "warnings")
    notes += read.texts(candidate, "note")
    steps = read.part(candidate, "steps")
    return Law(
        name=read.text(candidate, "name", "unnamed"),
        outcome=tables.outcome(candidate),
        notes=tuple(notes),
        text=tables.equation(read.text(candidate, "law")),
        latex=tables.equation(read.text(candidate, "law_latex")),
        mathml=_equation_mathml(read.text(candidate, "law_mathml")),
        step_text=tables.equation(read.text(candidate, "step_law")),
        step_mathml=_equation_mathml(read.text(candidate, "step_law_mathml")),
        step_latex=tables.equation(read.text(candidate, "step_law_latex")),
        steps=tuple((str(read.clean(k)), read.text(steps, k)) for k in steps),
        assumptions=tuple(read.texts(candidate, "assumptions")),
        conventions=tuple(read.texts(candidate, "conventions")),
        derivation=tuple(
            (read.text(d, "words"), read.text(d, "text"), read.text(d, "mathml"))
            for d in read.records(candidate, "derivation")
        ),
        combinations=tuple(
            (read.text(c, "name"), read.text(c, "definition"), read.text(c, "words"))
            for c in read.records(candidate, "combinations")
        ),
        source=read.text(candidate, "source"),
        place=read.text(candidate, "place"),
        balances=tuple(
            (read.text(b, "text"), read.text(b, "mathml"))
            for b in read.records(candidate, "balances")
        ),
        unknowns=tuple(read.text(b, "unknown") for b in read.records(candidate, "balances")),
        routes=tuple(
            (read.text(r, "equation"), read.text(r, "words"))
            for r in read.records(candidate, "routes")
        ),
        limits=groups(candidate),
        whole_latex=read.block(candidate, "derivation_latex"),
        observed=tuple(
            (read.text(o, "is"), read.text(o, "law"), read.text(o, "law_mathml"))
            for o in read.records(candidate, "observed")
        ),
    )


def _bare(formula: str) -> str:
    return formula.removeprefix("r = ")


def _equation_mathml(formula: str) -> str:
    if not formula or "<mo>=</mo>" in formula:
        return formula
    return f"<mrow><mi>r</mi><mo>=</mo>{formula}</mrow>"


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


def _asks(question: Document) -> str:
    asks, about = read.text(question, "asks"), read.text(question, "about")
    names = read.texts(question, "names")
    if asks == "participates":
        return f"Does {about or 'it'} take part?"
    if asks == "stands":
        return "Which candidates stand?"
    if asks == "equal":
        return f"Are {listed(names) or about} equal?"
    if asks == "constant":
        value = read.text(question, "value_text") or number(read.value(question, "value"))
        return f"Is {about} equal to {value}?"
    if asks == "reversible" and about:
        return f"Does the reverse of {about} show within these runs?"
    if asks == "reversible":
        return "Is the reaction reversible within these runs?"
    return f"{asks or 'Question'} {about}".strip()


def _answer(question: Document, document: Document) -> Answer:
    verdict = read.text(question, "verdict")
    asks, about = read.text(question, "asks"), read.text(question, "about", "it")
    standing, rejected = read.texts(question, "standing"), read.texts(question, "rejected")
    shown = verdict or "not answered"
    if asks == "stands" and (standing or rejected):
        shown = f"{len(standing) or 'none'} of {len(standing) + len(rejected)} stand"
        if len(standing) == 1:
            shown += "s"
    sentence = read.text(question, "sentence") or _sentence(question, verdict, about)
    if asks == "stands" and NOT_THE_ONLY_LAWS not in sentence:
        sentence = f"{sentence} {NOT_THE_ONLY_LAWS}".strip()
    return Answer(
        asks=_asks(question),
        verdict=shown,
        decided=_decided(asks, verdict, len(standing), len(rejected)),
        sentence=sentence,
        why=tuple(read.texts(question, "why") or read.texts(question, "reasons")),
        settle=tuple(read.texts(question, "settle")),
        facts=tuple(_facts(question, standing, rejected)),
        details=tables.behind(question),
    )


def _decided(asks: str, verdict: str, standing: int, rejected: int) -> bool:
    """Whether the runs settled the question; rivals are settled when one alone stands."""
    if asks == "stands" and standing + rejected:
        return standing == 1
    return verdict not in ("", "undecided")


def _sentence(question: Document, verdict: str, about: str) -> str:
    matters = percent(read.value(read.part(question, "effect"), "matters_above"))
    return {
        "participates": f"The rate depends on {about}.",
        "negligible": f"No dependence of the rate on {about} above {matters} within these runs. "
        f"{about} may still be consumed, enter after the limiting step, or be at saturation; "
        "rates cannot show that.",
        "undecided": f"These runs cannot decide whether the rate depends on {about}.",
    }.get(verdict, "")


def _facts(question: Document, standing: list[str], rejected: list[str]) -> list[tuple[str, str]]:
    out: list[tuple[str, str]] = []
    if standing:
        out.append(("Stand" if len(standing) > 1 else "Stands", "; ".join(standing)))
    if rejected:
        out.append(("Rejected", "; ".join(rejected)))
    effect = read.part(question, "effect")
    if effect:
        low, high = read.value(effect, "low"), read.value(effect, "high")
        words = percent(read.value(effect, "value"))
        if low is not None and high is not None:
            words += f", interval {percent(low)} to {percent(high)}"
        bound = read.value(effect, "bound")
        words += f", one-sided bound {percent(bound)}" if bound is not None else ""
        run, where = read.text(effect, "run"), read.text(effect, "words")
        if where:
            words += f", {where}"
        elif run:
            words += f", at {run}" if run.lower().startswith("run") else f", at run {run}"
        out.append(("Effect on the rate", words))
        matters = read.value(effect, "matters_above")
        out.append(
            (
                "Matters above",
                percent(matters)
                if matters is not None
                else "not stated, so “negligible” is not possible",
            )
        )
    margin = read.value(question, "error_margin")
    if margin is not None:
        out.append(
            ("Error margin", f"the verdict changes at {factor(margin)} times the stated errors")
        )
    flip, typical = read.value(question, "flip_distance"), read.value(question, "flip_typical")
    if flip is not None:
        words = f"{number(tiny_is_zero(flip), 2)} times the stated errors"
        words += f" ({number(typical, 2)} would be ordinary)" if typical is not None else ""
        out.append(("Flip distance", words))
    detectable = read.value(question, "detectable")
    if detectable is not None:
        out.append(("Detectable effect", f"{percent(detectable)} (power 80 %)"))
    p = read.value(read.part(read.part(question, "tests"), "reconciled"), "p")
    if p is not None:
        out.append(("Reconciled test", f"p {_equals(probability(p))}"))
    return out


def _equals(p: str) -> str:
    return p if p[0] in "<>" else f"= {p}"


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
    return tuple(
        (read.text(c, "name"), words)
        for c in candidates
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


def _assumed(study: Document) -> tuple[tuple[str, tuple[str, ...]], ...]:
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
    return out + (f"; speaks against {_quoted(against)}" if against else "")


def _provenance(document: Document) -> tuple[tuple[str, str], ...]:
    provenance = read.part(document, "provenance")
    words = {"table_sha256": "SHA-256 of the table", "study_sha256": "SHA-256 of the study"}
    out = [("study file", read.text(read.part(document, "study"), "file"))]
    out += [(words.get(str(k), read.clean(k)), read.text(provenance, k)) for k in provenance]
    out.append(("seed", read.text(document, "seed")))
    return tuple((k, v) for k, v in out if v)


def _quoted(names: list[str]) -> str:
    return listed([f"“{n}”" for n in names])
