"""From evidence to verdicts. Every threshold that is an opinion stands in this file.

Nothing here computes statistics: it reads facts from `evidence` and says what follows, with the
numbers and thresholds in the reasons, so that a chemist can dispute a threshold by reading one
file.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

# The stated errors of the conditions must be able to grow by this factor before "participates"
# falls.
ERROR_MARGIN = 1.5
# Where condition errors were only assumed, the conditions must vary on their own by at least this
# fraction (ten times the assumed 1 %) for "participates".
ASSUMED_SPREAD = 0.10
# A sensitivity with less than this fraction outside lockstep is called conditioning, not noise.
CONDITIONING_FRACTION = 0.10
# Combinations of the other constants that the runs do not tell apart: the test allows for one.
MOST_WEAK = 1
# A fraction below this is rounding of the arithmetic.
NOTHING_APART = 1e-9
# Fewer runs than constants plus this are called too few.
FEW_RUNS = 3

Outcome = Literal["participates", "negligible", "undecided"]


@dataclass(frozen=True, slots=True)
class Reading:
    """What one candidate says of a species or pathway, errors read one way ("set" or "measured").

    ``p``: that it is absent (one-sided unless ``two_sided``); ``bound``: one-sided bound of the
    size of its effect; ``information``: fraction of the sensitivity outside lockstep; ``weak``:
    combinations of the other constants that are in lockstep with one another.
    """

    origin: str
    p: float
    bound: float
    information: float
    margin: float
    weak: int = 0


@dataclass(frozen=True, slots=True)
class CandidateFacts:
    """One candidate in a participation question."""

    name: str
    stands: bool
    contains: bool
    readings: tuple[Reading, ...]
    exact_conditions: bool
    assumed_errors: tuple[str, ...]  # columns of the term whose error was only assumed
    factor: bool = False  # it multiplies every pathway
    untestable: str = ""


@dataclass(frozen=True, slots=True)
class StandIn:
    """Something else that explains the runs as well, in words."""

    name: str
    words: str
    stands: bool


@dataclass(frozen=True, slots=True)
class Verdict:
    """The answer to a participation question.

    ``why``: short reasons with numbers; ``because``: tags of what is to blame when undecided;
    ``below_what_matters``: participates, yet its effect is under the smallest that matters.
    """

    outcome: Outcome
    sentence: str
    why: tuple[str, ...]
    settle: tuple[str, ...] = ()
    because: tuple[str, ...] = ()
    below_what_matters: bool = False
    votes: tuple[tuple[str, str], ...] = field(default=())


def _percent(x: float) -> str:
    if x >= 0.995:
        return "100 %"
    if x >= 0.1:
        return f"{100 * x:.0f} %"
    return f"{100 * x:.2g} %"


def _p(p: float) -> str:
    return "p < 0.0001" if p < 1e-4 else f"p = {p:.2g}"


def _listed(items: Sequence[str]) -> str:
    return items[0] if len(items) == 1 else ", ".join(items[:-1]) + " and " + items[-1]


def vote(c: CandidateFacts, alpha: float, matters_above: float | None) -> tuple[str, list[str]]:
    """What one candidate says, and why it says no more."""
    if not c.contains:
        return "negligible", []
    if c.untestable or not c.readings:
        return "undecided", [c.untestable or f"“{c.name}”: the test could not be computed"]
    rejects = [r.p < alpha for r in c.readings]
    # a bound that rests on two combinations in lockstep among the other constants is not carried
    small = [
        matters_above is not None and r.bound < matters_above and r.weak <= MOST_WEAK
        for r in c.readings
    ]
    stops: list[str] = []
    if all(rejects):
        for r in c.readings:
            if not c.exact_conditions and r.margin < ERROR_MARGIN:
                stops.append(
                    f"with “{c.name}” the test would fail if the condition errors were "
                    f"{r.margin:.2g} times as large as stated (at least {ERROR_MARGIN:g} is asked)"
                )
                break
        most = max(r.weak for r in c.readings)
        if most > MOST_WEAK:
            stops.append(
                f"in “{c.name}” {most} combinations of the other constants are in lockstep with one "
                f"another within the errors of the conditions (the test allows for {MOST_WEAK})"
            )
        weakest = min(r.information for r in c.readings)
        if c.assumed_errors and weakest < ASSUMED_SPREAD:
            stops.append(
                "the error of "
                + " and ".join(c.assumed_errors)
                + " was only assumed, and over these runs the term varies on its own by "
                f"{_percent(weakest)} (at least {_percent(ASSUMED_SPREAD)} is asked)"
            )
        if not stops:
            return "participates", []
    elif any(rejects):
        stops.append(
            f"with “{c.name}” the answer depends on whether the conditions were set or measured, "
            "which the study does not say"
        )
    if all(small) and small and not c.factor:
        return "negligible", stops
    return "undecided", stops


def judge_participation(
    about: str,
    *,
    what: str,
    candidates: Sequence[CandidateFacts],
    stand_ins: Sequence[StandIn],
    level: float,
    matters_above: float | None,
    n_runs: int,
    n_constants: int,
    detectable: float,
    is_reactant: bool,
) -> Verdict:
    """The verdict on a species (``what`` = "species") or pathway ("pathway")."""
    alpha = 1.0 - level
    standing = [c for c in candidates if c.stands]
    votes: list[tuple[str, str]] = []
    stops: list[str] = []
    for c in candidates:
        v, s = vote(c, alpha, matters_above)
        votes.append((c.name, v))
        if c.stands:
            stops += [x for x in s if x not in stops]
    said = dict(votes)
    subject = about if what == "species" else f"the pathway “{about}”"
    if not standing:
        return Verdict(
            "undecided",
            f"Undecided whether {subject} takes part: no candidate stands.",
            ("every candidate is rejected by the runs, so none can speak for or against it",),
            ("a candidate that fits the runs",),
            ("no candidate stands",),
            votes=tuple(votes),
        )
    others = [s for s in stand_ins if s.stands]
    agree = {said[c.name] for c in standing}
    if agree == {"participates"} and not others:
        return _participates(subject, about, standing, alpha, matters_above, votes)
    if agree == {"negligible"} and matters_above is not None:
        return _negligible(about, what, standing, matters_above, is_reactant, votes)
    return _undecided(
        about,
        subject,
        standing,
        said,
        stops,
        others,
        alpha,
        matters_above,
        n_runs,
        n_constants,
        detectable,
        votes,
    )


def _participates(
    subject: str,
    about: str,
    standing: Sequence[CandidateFacts],
    alpha: float,
    matters_above: float | None,
    votes: list[tuple[str, str]],
) -> Verdict:
    worst = max(r.p for c in standing for r in c.readings)
    margins = [r.margin for c in standing for r in c.readings if r.margin == r.margin]
    how = f"the one candidate that stands contains {about}"
    if len(standing) > 1:
        both = "both" if len(standing) == 2 else f"all {len(standing)}"
        how = f"{both} candidates that stand contain {about}"
    rejects = "rejects" if len(standing) == 1 else "each rejects"
    why = [f"{how}, and {rejects} a rate without {about} ({_p(worst)}, limit {alpha:g})"]
    if margins:
        m = min(margins)
        at_least = "more than 10" if m == float("inf") else f"{m:.2g}"
        why.append(f"this holds until the condition errors are {at_least} times as large as stated")
    below = False
    sentence = f"The rate depends on {subject}."
    if matters_above is not None:
        below = all(r.bound < matters_above for c in standing for r in c.readings)
        if below:
            sentence = (
                f"The rate depends on {subject}, but by less than the {_percent(matters_above)} "
                "that matters."
            )
    return Verdict(
        "participates", sentence, tuple(why), below_what_matters=below, votes=tuple(votes)
    )


def _negligible(
    about: str,
    what: str,
    standing: Sequence[CandidateFacts],
    matters_above: float,
    is_reactant: bool,
    votes: list[tuple[str, str]],
) -> Verdict:
    with_it = [c for c in standing if c.contains]
    bounds = [r.bound for c in with_it for r in c.readings]
    if what == "species":
        sentence = (
            f"No dependence of the rate on {about} above {_percent(matters_above)} within these "
            f"runs. {about} may still be consumed, enter after the limiting step, or be at "
            "saturation; rates cannot show that."
        )
        if is_reactant:
            sentence += f" Zero order in {about} here."
    else:
        sentence = (
            f"The pathway “{about}” carries less than {_percent(matters_above)} of the rate within "
            "these runs."
        )
    if bounds:
        why = (
            f"the effect of {about} is at most {_percent(max(bounds))} in every candidate that stands "
            f"(smallest that matters: {_percent(matters_above)})",
        )
    else:
        why = (f"no candidate that stands contains {about}",)
    return Verdict("negligible", sentence, why, votes=tuple(votes))


def _undecided(
    about: str,
    subject: str,
    standing: Sequence[CandidateFacts],
    said: dict[str, str],
    stops: list[str],
    others: Sequence[StandIn],
    alpha: float,
    matters_above: float | None,
    n_runs: int,
    n_constants: int,
    detectable: float,
    votes: list[tuple[str, str]],
) -> Verdict:
    why: list[str] = []
    because: list[str] = []
    settle: list[str] = []
    tested = [c for c in standing if c.contains and c.readings]
    rejecting = [c for c in tested if all(r.p < alpha for r in c.readings)]
    not_rejecting = [c for c in tested if c not in rejecting and not c.untestable]
    information = min((r.information for c in tested for r in c.readings), default=1.0)
    if not_rejecting:
        worst = max(r.p for c in not_rejecting for r in c.readings)
        why.append(f"a rate without {about} is not excluded ({_p(worst)}, limit {alpha:g})")
    if tested:
        bound = max(r.bound for c in tested for r in c.readings)
        if matters_above is None:
            why.append(
                f"an effect of up to {_percent(bound)} is not excluded either, and the study does "
                "not say which effect matters (matters_above)"
            )
        elif bound >= matters_above:
            why.append(
                f"nor is an effect of up to {_percent(bound)} (smallest that matters: "
                f"{_percent(matters_above)})"
                if not_rejecting
                else f"the effect of {about} could be as large as {_percent(bound)}"
            )
    if information < CONDITIONING_FRACTION and not_rejecting:
        because.append("conditioning")
        apart = (
            f"none of the sensitivity to {about} is apart from the rest of the law (lockstep)"
            if information < NOTHING_APART
            else f"only {_percent(information)} of the sensitivity to {about} is not in lockstep with "
            "the rest of the law"
        )
        why.append(f"conditioning is to blame: over these runs {apart}")
        settle.append(f"runs in which {about} is varied on its own, the other conditions held")
    elif not_rejecting:
        if n_runs < n_constants + FEW_RUNS:
            because.append("too few runs")
            why.append(f"{n_runs} runs for {n_constants} constants leave little to test with")
            settle.append(f"more runs, spread widely in {about}")
        else:
            because.append("noise")
            settle.append(f"replicates, or runs at more extreme amounts of {about}")
    if others:
        because.append("stand-in")
        names = [s.name for s in others]
        verb = "explains" if len(names) == 1 else "each explain"
        why.append(f"in place of {about}, {_listed(names)} {verb} these runs as well")
        settle.append(f"runs that break the link between {about} and {_listed(names)}")
    kinds = {said[c.name] for c in standing}
    without = [c for c in standing if not c.contains]
    if without and tested:
        because.append("disagreement")
        listed = _listed([f"“{c.name}”" for c in without])
        why.append(f"{listed} {'stands' if len(without) == 1 else 'stand'} without {about}")
        if not settle:
            settle.append("runs that separate the candidates that stand")
    elif "participates" in kinds and len(kinds) > 1:
        because.append("disagreement")
        why.append("the candidates that stand do not agree")
    if stops:
        because.append("errors of the conditions")
        why += stops
        settle.append("errors of the conditions stated with their origin (set or measured)")
    for c in standing:
        if c.untestable and c.untestable not in why:
            why.append(c.untestable)
    if detectable == detectable and not_rejecting:
        if detectable >= 0.995:
            why.append("no effect of any size could have been found with these runs")
        else:
            why.append(
                f"these runs would have found an effect of {_percent(detectable)} four times in five"
            )
    return Verdict(
        "undecided",
        f"Undecided whether the rate depends on {subject}.",
        tuple(why),
        tuple(dict.fromkeys(settle)),
        tuple(dict.fromkeys(because)),
        votes=tuple(votes),
    )


def sentence_standing(names: Sequence[str], rejected: Sequence[str]) -> str:
    """The printed answer to `stands`."""
    if not names:
        return "No candidate stands: every law is rejected by these runs."
    if len(names) == 1:
        head = f"“{names[0]}” stands"
    else:
        head = f"{len(names)} candidates stand: " + ", ".join(f"“{n}”" for n in names)
    tail = f"; {len(rejected)} rejected" if rejected else ""
    return f"{head}{tail}. These laws are not the only possible ones."
