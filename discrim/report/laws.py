"""Each candidate's law as the report shows it, and how it follows from the steps."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from discrim.report import read, tables
from discrim.report.cases import Case, groups
from discrim.report.numbers import listed
from discrim.report.read import Document


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
            f"Same law as {quoted(same)}: no rate can tell them apart, only isotope effects, labelling, "
            "trapping or spectroscopy."
        )
    near = [n for n in read.texts(candidate, "inseparable_from") if n not in same]
    if near and not any("cannot separate" in reason for reason in reasons):
        notes.append(f"Inseparable from {quoted(near)} by these runs.")
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


def quoted(names: list[str]) -> str:
    return listed([f"“{n}”" for n in names])
