"""Are constants equal, or is one at a value? From the facts to the verdict.

`differs` takes a test that rejects, with the same demands on the errors of the conditions as
`participates`; `agrees` takes bounds that lie within what matters. Not being rejected is not agreement.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from discrim.verdict.rejection import rejection
from discrim.verdict.thresholds import (
    CONDITIONING_FRACTION,
    FEW_RUNS,
    MOST_WEAK,
    NOTHING_APART,
)
from discrim.verdict.words import listed, p_value, percent

ConstantOutcome = Literal["differs", "agrees", "undecided"]


@dataclass(frozen=True, slots=True)
class ValueReading:
    """What one candidate says, errors read one way.

    ``p``: that the constants are equal (or the constant at its value); ``within``: the difference is
    surely below what matters, None when nothing is said to matter; ``information``: fraction of the
    sensitivity outside lockstep; ``weak``: combinations of the other constants that are in lockstep
    with one another.
    """

    p: float
    within: bool | None
    information: float
    margin: float
    weak: int = 0


@dataclass(frozen=True, slots=True)
class ValueFacts:
    """One candidate in a question about constants; ``measured``: value and interval in words."""

    name: str
    stands: bool
    has_them: bool
    readings: tuple[ValueReading, ...]
    exact_conditions: bool
    assumed_errors: tuple[str, ...]
    measured: tuple[str, ...] = ()
    untestable: str = ""


@dataclass(frozen=True, slots=True)
class ConstantVerdict:
    """The answer; fields as those of the verdict on participation."""

    outcome: ConstantOutcome
    sentence: str
    why: tuple[str, ...]
    settle: tuple[str, ...] = ()
    because: tuple[str, ...] = ()
    below_what_matters: bool = False
    votes: tuple[tuple[str, str], ...] = ()


def vote_on_value(c: ValueFacts, alpha: float) -> tuple[str, list[str]]:
    """What one candidate says, and why it says no more."""
    if not c.has_them:
        return "", []
    if c.untestable or not c.readings:
        return "undecided", [c.untestable or f"“{c.name}”: the test could not be computed"]
    rejects, stops = rejection(
        c.name,
        c.readings,
        alpha,
        exact_conditions=c.exact_conditions,
        assumed_errors=c.assumed_errors,
        shows="the difference shows on its own in {} of the sensitivity",
    )
    if rejects and not stops:
        return "differs", []
    if all(r.within for r in c.readings) and all(r.weak <= MOST_WEAK for r in c.readings):
        return "agrees", stops
    return "undecided", stops


def judge_value(
    *,
    about: str,
    claim: str,
    denial: str,
    question: str,
    matters: str,
    candidates: Sequence[ValueFacts],
    level: float,
    n_runs: int,
    n_constants: int,
) -> ConstantVerdict:
    """The verdict.

    ``about``: "k_1 and k_2"; ``claim``, ``denial``: "k_1 and k_2 agree", "k_1 and k_2 differ";
    ``question``: "k_1 and k_2 are equal"; ``matters``: what matters in words, "" when the
    study does not say.
    """
    alpha = 1.0 - level
    votes: list[tuple[str, str]] = []
    stops: list[str] = []
    for c in candidates:
        v, s = vote_on_value(c, alpha)
        votes.append((c.name, v))
        if c.stands:
            stops += [x for x in s if x not in stops]
    said = dict(votes)
    standing = [c for c in candidates if c.stands and c.has_them]
    without = [c for c in candidates if c.stands and not c.has_them]
    beside = []
    if without:
        names = listed([f"“{c.name}”" for c in without])
        verb = "stands and does" if len(without) == 1 else "stand and do"
        beside = [f"{names} {verb} not hold {about}, so this says nothing of it there"]
    if not standing:
        return ConstantVerdict(
            "undecided",
            f"Undecided whether {question}: no candidate that stands holds {about}.",
            tuple(beside) or (f"every candidate that holds {about} is rejected by the runs",),
            (f"a candidate that holds {about} and fits the runs",),
            ("no candidate stands",),
            votes=tuple(votes),
        )
    agree = {said[c.name] for c in standing}
    several = len([c for c in standing if c.measured]) > 1
    measured = [f"in “{c.name}” {m}" if several else m for c in standing for m in c.measured]
    if agree == {"differs"}:
        worst = max(r.p for c in standing for r in c.readings)
        margins = [r.margin for c in standing for r in c.readings if r.margin == r.margin]
        why = [f"that {question} is rejected ({p_value(worst)}, limit {alpha:g})", *measured]
        if margins:
            m = min(margins)
            at_least = "more than 10" if m == float("inf") else f"{m:.2g}"
            why.append(
                f"this holds until the condition errors are {at_least} times as large as stated"
            )
        below = all(r.within for c in standing for r in c.readings)
        sentence = (
            f"{denial}, but by less than the {matters} that matters." if below else f"{denial}."
        )
        return ConstantVerdict(
            "differs",
            sentence,
            tuple(why + beside),
            below_what_matters=below,
            votes=tuple(votes),
        )
    if agree == {"agrees"}:
        return ConstantVerdict(
            "agrees", f"{claim} within {matters}.", tuple(measured + beside), votes=tuple(votes)
        )
    return _undecided(
        question,
        matters,
        standing,
        said,
        stops,
        measured + beside,
        alpha,
        n_runs,
        n_constants,
        votes,
    )


def _undecided(
    question: str,
    matters: str,
    standing: Sequence[ValueFacts],
    said: dict[str, str],
    stops: list[str],
    measured: list[str],
    alpha: float,
    n_runs: int,
    n_constants: int,
    votes: list[tuple[str, str]],
) -> ConstantVerdict:
    why: list[str] = []
    because: list[str] = []
    settle: list[str] = []
    tested = [c for c in standing if c.readings and not c.untestable]
    open_ = [c for c in tested if not all(r.p < alpha for r in c.readings)]
    if open_:
        worst = max(r.p for c in open_ for r in c.readings)
        why.append(f"that {question} is not excluded ({p_value(worst)}, limit {alpha:g})")
        if not matters:
            why.append(
                "nor is it shown: the study does not say which difference matters (matters_above)"
            )
        elif not all(r.within for c in open_ for r in c.readings):
            why.append(f"nor is a difference of more than the {matters} that matters")
    why += measured
    information = min((r.information for c in tested for r in c.readings), default=1.0)
    if open_ and information < CONDITIONING_FRACTION:
        because.append("conditioning")
        apart = (
            "none of the sensitivity to the difference is"
            if information < NOTHING_APART
            else f"only {percent(information)} of the sensitivity to the difference is"
        )
        why.append(
            f"conditioning is to blame: over these runs {apart} apart from the rest of the law"
        )
        settle.append(
            "runs in which the terms of these constants are varied apart from one another"
        )
    elif open_ and n_runs < n_constants + FEW_RUNS:
        because.append("too few runs")
        why.append(f"{n_runs} runs for {n_constants} constants leave little to test with")
        settle.append("more runs, spread widely in the conditions")
    elif open_ and matters:
        because.append("noise")
        settle.append("replicates, or runs where these constants have the most to say")
    if len({said[c.name] for c in standing}) > 1:
        because.append("disagreement")
        why.append("the candidates that stand do not agree")
        settle.append("runs that separate the candidates that stand")
    if stops:
        because.append("errors of the conditions")
        why += stops
        settle.append("errors of the conditions stated with their origin (set or measured)")
    return ConstantVerdict(
        "undecided",
        f"Undecided whether {question}.",
        tuple(dict.fromkeys(why)),
        tuple(dict.fromkeys(settle)),
        tuple(dict.fromkeys(because)),
        votes=tuple(votes),
    )
