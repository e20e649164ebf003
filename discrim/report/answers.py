"""What the report says of one question: the verdict, the facts beside it, the tables behind it."""

from __future__ import annotations

from dataclasses import dataclass

from discrim.report import behind, read
from discrim.report.numbers import listed, number, percent, probability, tiny_is_zero
from discrim.report.read import Document
from discrim.report.table import Table

#: an effect that is found only when it is all of the rate is none that is found
NONE_FOUND = 0.995
#: how reasons begin that say what a single run decides
_ONE_RUN = ("leaving out run", "leaving out any one of", "without run ", "without any one of runs ")
NOT_THE_ONLY_LAWS = "These laws are not the only possible ones."


@dataclass(frozen=True, slots=True)
class Answer:
    """The verdict on one question.

    ``decided`` says whether the runs carry a verdict; ``facts`` are (what, how much) pairs;
    ``details`` the tables behind the verdict; ``beside`` what must be read with the verdict: the
    single runs that it rests on, and what excluded runs would make of it; ``kind`` one word for its
    look.
    """

    asks: str
    verdict: str
    decided: bool
    sentence: str
    why: tuple[str, ...]
    settle: tuple[str, ...]
    facts: tuple[tuple[str, str], ...]
    details: tuple[Table, ...]
    beside: tuple[str, ...] = ()
    kind: str = ""


def question_words(question: Document) -> str:
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


def answer(question: Document, document: Document) -> Answer:
    verdict = read.text(question, "verdict")
    asks, about = read.text(question, "asks"), read.text(question, "about", "it")
    standing, rejected = read.texts(question, "standing"), read.texts(question, "rejected")
    shown = verdict or "not answered"
    if asks == "stands" and (standing or rejected):
        shown = f"{len(standing) or 'none'} of {len(standing) + len(rejected)} stand"
        if len(standing) == 1:
            shown += "s"
    small = question.get("below_what_matters") is True
    if small and verdict in ("participates", "differs"):
        shown = f"{verdict}, too little to matter"
    sentence = read.text(question, "sentence") or _sentence(question, verdict, about)
    if asks == "stands" and NOT_THE_ONLY_LAWS not in sentence:
        sentence = f"{sentence} {NOT_THE_ONLY_LAWS}".strip()
    decided = _decided(asks, verdict, len(standing), len(rejected))
    why = read.texts(question, "why") or read.texts(question, "reasons")
    one_run = _one_run(question, asks, why) if decided else []
    if one_run:  # said beside the verdict, not again below it
        why = [line for line in why if not line.startswith(_ONE_RUN)]
    return Answer(
        asks=question_words(question),
        verdict=shown,
        kind=f"{verdict} small" if small else verdict,
        decided=decided,
        beside=tuple(one_run + _excluded(question, asks, verdict)),
        sentence=sentence,
        why=tuple(why),
        settle=tuple(read.texts(question, "settle")),
        facts=tuple(_facts(question, standing, rejected)),
        details=behind.behind(question),
    )


def _one_run(question: Document, asks: str, why: list[str]) -> list[str]:
    """Of a decided question: the single runs that it rests on."""
    if asks == "stands":
        return [f"Rests on single runs: {line}." for line in why if line.startswith(_ONE_RUN)]
    runs: dict[str, list[str]] = {}
    for left in read.records(question, "left_out"):
        runs.setdefault(read.text(left, "verdict"), []).append(read.text(left, "run"))
    return [
        f"Rests on run {labels[0]}: without it the verdict is {verdict}."
        if len(labels) == 1
        else f"Rests on single runs: without any one of {listed(labels)} the verdict is {verdict}."
        for verdict, labels in runs.items()
    ]


def _excluded(question: Document, asks: str, verdict: str) -> list[str]:
    """What the verdict would be with the excluded runs, where it is another."""
    again = read.text(question, "with_excluded_runs")
    if asks == "stands" or not again or again == verdict:
        return []
    return [f"With the excluded runs put back the verdict is {again}."]


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
        words, bound = percent(read.value(effect, "value")), read.value(effect, "bound")
        if low is not None and high is not None and percent(low) != percent(high):
            words += f", interval {percent(low)} to {percent(high)}"
            words += f", one-sided bound {percent(bound)}" if bound is not None else ""
        run, where = read.text(effect, "run"), read.text(effect, "words")
        if where:
            words += f", {where}"
        elif run:
            words += f", at {run}" if run.lower().startswith("run") else f", at run {run}"
        if read.value(effect, "value") is not None:
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
        # as many digits as in the reasons
        out.append(
            ("Error margin", f"the verdict changes at {number(margin, 2)} times the stated errors")
        )
    flip, typical = read.value(question, "flip_distance"), read.value(question, "flip_typical")
    if flip is not None:
        words = f"{number(tiny_is_zero(flip), 2)} times the stated errors"
        words += f" ({number(typical, 2)} would be ordinary)" if typical is not None else ""
        out.append(("Flip distance", words))
    detectable = read.value(question, "detectable")
    if detectable is not None:
        words = percent(detectable) if detectable < NONE_FOUND else "none of any size"
        out.append(("Detectable effect", f"{words} (power 80 %)"))
    p = read.value(read.part(read.part(question, "tests"), "reconciled"), "p")
    if p is not None:
        out.append(("Reconciled test", f"p {_equals(probability(p))}"))
    return out


def _equals(p: str) -> str:
    return p if p[0] in "<>" else f"= {p}"
