"""The terminal: the verdict first, then why, then the numbers; 80 columns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from discrim.report import read, tables
from discrim.report.answers import Answer
from discrim.report.cases import Case
from discrim.report.constants import MEANING
from discrim.report.content import Content, build
from discrim.report.laws import Law, laws_of
from discrim.report.numbers import MISSING, count, factor, number
from discrim.report.paper import WIDTH, Paper
from discrim.report.read import Document
from discrim.report.table import Table
from discrim.report.wrapping import wrap_latex

#: Lines of a long formula that are printed, and where the rest is.
_MOST, _FEW, _REST = 24, 16, "; all of it with --json"
_PAIRS = 12  # pairs of laws that are named in one line
_KINDS = ("same", "special case", "neither")  # relations of two laws that are proven

#: Columns that only the HTML report shows.
_WIDE = ("RSS", "AIC", "BIC", "Degrees of freedom", "p of lack of fit")


def summary(document: Document, *, width: int = WIDTH, colour: bool = False) -> str:
    """What ``weigh`` and ``report`` print: verdicts, why, the candidates, the constants.

    Parameters
    ----------
    document : as saved in ``evidence.json``
    width : characters a line
    colour : whether emphasis is written as terminal codes
    """
    content = build(document)
    paper = Paper(width=width, colour=colour)
    paper.say(content.title)
    paper.say(content.scope)
    for answer in content.answers:
        _answer(paper, answer)
    if not content.answers:
        paper.blank()
        paper.say("The study asks no question.")
    if content.problems:
        paper.heading("Not computed")
        paper.bullets(content.problems)
    _findings(paper, content)
    _candidates(paper, content)
    _constants(paper, content)
    if content.cautions:
        paper.heading("Before you act on this")
        paper.bullets(content.cautions)
    if content.not_checked:
        paper.heading("Not checked")
        paper.bullets(content.not_checked)
    return str(paper)


def verdicts(document: Document, *, width: int = WIDTH) -> str:
    """One line or two for each question, for ``--quiet``."""
    paper = Paper(width=width)
    for answer in build(document).answers:
        paper.ends(answer.asks, answer.verdict)
        for line in answer.beside:
            paper.say(line, indent=2)
    return str(paper) if paper.lines else ""


def _answer(paper: Paper, answer: Answer) -> None:
    paper.blank()
    paper.ends(answer.asks, answer.verdict.upper())
    for line in answer.beside:
        paper.say(f"! {line}", indent=2, hang=4)
    paper.say(answer.sentence, indent=2)
    if answer.why:
        paper.blank()
        paper.say("Why", indent=2)
        paper.bullets(answer.why, indent=4)
    if answer.settle:
        paper.blank()
        paper.say("What would settle it", indent=2)
        paper.bullets(answer.settle, indent=4)
    if answer.facts:
        paper.blank()
        paper.pairs(answer.facts)


def _findings(paper: Paper, content: Content) -> None:
    lines = list(content.lockstep)
    lines += [f"{name}: {words}" for name, words in content.trade_offs]
    if lines:
        paper.heading("Conditioning of the runs")
        paper.bullets(lines)
    warnings = [
        f"{where}: {says}" if where else says
        for severity, where, says in content.findings
        if severity == "warning"
    ]
    notes = len(content.findings) - len(warnings)
    if warnings:
        paper.heading("Warnings")
        paper.bullets(warnings)
    if notes:
        paper.blank()
        paper.say(f"{count(notes, 'note')} on the runs and the fits in the report.", indent=2)


def _candidates(paper: Paper, content: Content) -> None:
    table = content.candidates
    if table is None:
        return
    paper.heading("Candidates")
    has_aicc = content.criteria is not None and "AICc" in content.criteria.heads
    shared = ", shared"
    criteria = content.criteria
    starred = criteria is not None and any(row[-1].endswith(shared) for row in criteria.rows)
    if criteria is not None and starred:
        # the word would make the table too wide to stand as one
        criteria = replace(
            criteria, rows=tuple((*row[:-1], row[-1].replace(shared, "*")) for row in criteria.rows)
        )
    paper.table(criteria, drop=[h for h in _WIDE if h != "AIC" or has_aicc])
    if starred:
        paper.blank()
        paper.say("* of one law under several names, weighed once", indent=2)
    if "Remark" in table.heads:
        i = table.heads.index("Remark")
        notes = [f"{row[0]}: {row[i]}" for row in table.rows if row[i]]
        paper.blank()
        paper.bullets(notes)
    laws = [item for item in content.laws if item.text]
    if len(laws) > 6:
        laws = [item for item in laws if item.outcome == "stands"]
    if laws:
        paper.heading("Rate laws")
        for item in laws:
            paper.say(item.name, indent=2)
            paper.formula(item.text, indent=4, most=6, rest=" in the report")
            for words, text, _ in item.observed:
                paper.formula(f"{words} = {text}", indent=6, most=6, rest=" in the report")
            if item.balances:
                paper.say(item.balance_words, indent=4)
                for formula, _ in item.balances:
                    paper.formula(formula, indent=6, most=6, rest=" in the report")


def _constants(paper: Paper, content: Content) -> None:
    standing = {item.name for item in content.laws if item.outcome == "stands"}
    shown = [t for t in content.constants if t.title in standing] or list(content.constants)
    for table in shown[:3]:
        paper.heading(f"Constants, {table.title}")
        paper.turned(table, drop=(MEANING,))
    if len(shown) > 3:
        paper.say(f"Constants of {len(shown) - 3} more candidates are in the report.", indent=2)
    for table in [t for t in content.reported if t.title in standing][:3]:
        paper.heading(f"Quantities, {table.title}")
        valued = _with_values(table)
        paper.turned(valued, drop=(MEANING,))
        if valued.rows:
            paper.blank()
        paper.bullets([f"{row[0]}: {row[-1]}" for row in table.rows])
    if shown:
        paper.blank()
        paper.say(
            f"Intervals at {content.level}; the reconciled one carries the verdicts.", indent=2
        )


def _with_values(table: Table) -> Table:
    """Quantities that a candidate has; why it lacks others is said in the report."""
    if "Value" not in table.heads:
        return replace(table, rows=())
    at = table.heads.index("Value")
    return replace(table, rows=tuple(row for row in table.rows if row[at] not in ("", MISSING)))


def laws(candidates: Sequence[Document], *, width: int = WIDTH, colour: bool = False) -> str:
    """What ``derive`` prints: each law, how it follows from the steps, what is assumed."""
    paper = Paper(width=width, colour=colour)
    found, conventions = laws_of(candidates)
    for item in found:
        paper.heading(item.name)
        _law(paper, item)
    if conventions:
        paper.heading("Conventions")
        paper.bullets(conventions)
    shared = _shared(candidates)
    if shared:
        paper.heading("Same law")
        paper.bullets(shared)
    related = _related(candidates)
    if related:
        paper.heading("How the laws are related")
        paper.bullets(related)
    return str(paper)


def _law(paper: Paper, item: Law) -> None:
    paper.formula(item.text, indent=2, most=_MOST, rest=_REST)
    if item.balances:
        paper.say(item.balance_words, indent=2)
        for formula, _ in item.balances:
            paper.formula(formula, indent=4, most=_MOST, rest=_REST)
    if item.step_text and item.step_text != item.text and not item.derives(item.step_text):
        paper.blank()
        paper.say("In the constants of the steps", indent=2)
        paper.formula(item.step_text, indent=4, most=_MOST, rest=_REST)
    if item.combinations:
        paper.blank()
        paper.say("Constants that only occur together", indent=2)
        for name, definition, words in item.combinations:
            line = f"- {name} = {definition}"
            if words and len(line) + len(words) + 3 <= paper.width - 4:
                line, words = f"{line} ({words})", ""
            paper.formula(line, indent=4, most=_FEW, rest=_REST)
            if words:
                paper.say(f"({words})", indent=6)
    if item.steps:
        paper.blank()
        paper.say("Steps", indent=2)
        paper.pairs(item.steps, indent=4)
    if item.routes:
        paper.blank()
        paper.say("Pathways" if len(item.routes) > 1 else "Overall", indent=2)
        lead = 7 + min(max(len(equation) for equation, _ in item.routes), paper.width // 2)
        for equation, steps in item.routes:
            # "from": two spaces alone would read on, as in "-> 2 CO2  2 ads + react".
            paper.say(f"{equation:<{lead - 7}}  from {steps}", indent=4, hang=4 + lead)
    _derivation(paper, item)
    for heading, lines in item.limits:
        _cases(paper, heading, lines)
    _list(paper, "Assumptions", item.assumptions)
    _list(paper, "Conventions", item.conventions)
    _list(paper, "Notes", item.notes)
    _list(paper, "Source", [item.source] if item.source else [])
    if item.latex:
        typeset = wrap_latex(item.latex, paper.width - 4).splitlines()
        paper.blank()
        paper.say("LaTeX (the whole derivation: --latex)", indent=2)
        if len(typeset) > _MOST:
            paper.say(f"{len(typeset)} lines{_REST}", indent=4)
        else:
            paper.lines += [f"    {line}" for line in typeset]


def _derivation(paper: Paper, item: Law) -> None:
    if not item.derivation:
        return
    paper.blank()
    paper.say("Derivation", indent=2)
    lead = len(str(len(item.derivation)))
    i = 0
    for words, formula, _ in item.derivation:
        i += bool(words)  # a formula without words belongs to those before
        if words:
            paper.say(f"{i:>{lead}}. {words}", indent=4, hang=6 + lead)
        if formula:
            paper.formula(formula, indent=6 + lead, most=_FEW, rest=_REST)


def _cases(paper: Paper, heading: str, lines: Sequence[Case]) -> None:
    """Range, order and law under one another; a law that is too long stands on its own lines."""
    paper.blank()
    paper.say(heading, indent=2)
    where = max(len(c.where) for c in lines)
    order = max((len(c.order) for c in lines if c.text), default=0)
    for c in lines:
        if not c.text:
            paper.say(f"{c.where:<{where}}  {c.order}", indent=4, hang=6 + where)
            continue
        head = f"{c.where:<{where}}  {c.order:<{order}}  " if c.order else f"{c.where:<{where}}  "
        paper.formula(c.text, head=head, indent=4, most=_FEW, rest=_REST)


def _list(paper: Paper, heading: str, lines: Sequence[str]) -> None:
    if lines:
        paper.blank()
        paper.say(heading, indent=2)
        paper.bullets(lines, indent=4)


def _shared(candidates: Sequence[Document]) -> list[str]:
    out = []
    for c in candidates:
        same = read.texts(c, "same_law_as")
        if same:
            names = " and ".join(f"“{n}”" for n in same)
            out.append(f"“{read.text(c, 'name')}” is the same law as {names}")
    return out


def _related(candidates: Sequence[Document]) -> list[str]:
    """One line for each pair of laws; many pairs of which nothing is known are counted."""
    found = {
        (read.text(r, "a"), read.text(r, "b")): (read.text(r, "relation"), read.text(r, "words"))
        for c in candidates
        for r in read.records(c, "relations")
    }
    out = []
    for (a, b), (relation, words) in found.items():
        if relation == "same":
            out.append(f"“{a}” and “{b}” are the same law" + (f": {words}" if words else ""))
        elif relation == "special case":
            kind = "limiting" if "infinite" in words else "special"
            out.append(f"“{a}” is a {kind} case of “{b}”" + (f": {words}" if words else ""))
    # With no pair left undecided, all that are not named above are proven apart: no need for names.
    undecided = any(r not in _KINDS for r, _ in found.values())
    for relation, one, many in (
        (
            "neither",
            "Neither is a case of the other, proven",
            "Proven not to be cases of each other",
        ),
        ("undecided", "Not decided", "Not decided"),
    ):
        pairs = [(a, b) for (a, b), (r, _) in found.items() if r == relation]
        if len(pairs) > _PAIRS and not undecided:
            out.append(f"Each of the other {len(pairs)} pairs is proven to be neither the same law "
                       "nor one a case of the other")  # fmt: skip
        elif pairs:
            said = "; ".join(f"“{a}” and “{b}”" for a, b in pairs[:_PAIRS])
            more = f"; and {len(pairs) - _PAIRS} more pairs" if len(pairs) > _PAIRS else ""
            out.append(f"{one if len(pairs) == 1 else many}: {said}{more}")
    return out


def check(document: Document, *, width: int = WIDTH, colour: bool = False) -> str:
    """What ``check`` prints: what the runs can and cannot decide, then how each law is conditioned.

    Parameters
    ----------
    document : with the keys ``title``, ``runs``, ``laws``, ``findings``, ``can_decide``,
        ``cannot_decide``
    """
    runs = read.part(document, "runs")
    paper = Paper(width=width, colour=colour)
    paper.say(read.text(document, "title", "Untitled study"))
    n = int(read.value(runs, "n") or 0)
    paper.say(f"{n} runs, before any fit")
    for heading, key in (
        ("These runs cannot decide", "cannot_decide"),
        ("These runs can decide", "can_decide"),
    ):
        lines = read.texts(document, key)
        if lines:
            paper.heading(heading)
            paper.bullets(lines)
    lockstep = [read.text(item, "words") for item in read.records(runs, "lockstep")]
    if any(lockstep):
        paper.heading("Lockstep")
        paper.bullets([line for line in lockstep if line])
    for item in read.records(document, "laws"):
        _conditioning(paper, item)
    warnings = [
        ": ".join(w for w in (read.text(f, "where"), read.text(f, "says")) if w)
        for f in read.records(document, "findings")
    ]
    if warnings:
        paper.heading("Findings")
        paper.bullets(warnings)
    if read.records(runs, "columns"):
        paper.heading("Columns")
        paper.table(tables.columns(runs))
    return str(paper)


def _or(shown: str, none: str) -> str:
    return none if shown == MISSING else shown


def _conditioning(paper: Paper, item: Any) -> None:
    paper.heading(read.text(item, "name", "unnamed"))
    if read.text(item, "law"):
        paper.say(tables.equation(read.text(item, "law")), indent=2, hang=6)
    paper.pairs([
        ("condition number", _or(factor(read.value(item, "condition_number")), "infinite")),
        ("digits lost", _or(number(read.value(item, "digits_lost"), 2), "all")),
    ])  # fmt: skip
    lines = read.texts(item, "words")
    lines += [read.text(t, "words") for t in read.records(item, "trade_offs")]
    lines += [read.text(t, "words") for t in read.records(item, "lockstep")]
    lines += read.texts(item, "trade_offs") + read.texts(item, "lockstep")
    paper.bullets(list(dict.fromkeys(line for line in lines if line)))
