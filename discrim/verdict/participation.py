"""Does a species or pathway take part in the reaction? From the facts to the verdict."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

from discrim.verdict.rejection import rejection
from discrim.verdict.thresholds import (
    CONDITIONING_FRACTION,
    ERROR_MARGIN,
    FEW_RUNS,
    MOST_WEAK,
    NOTHING_APART,
)
from discrim.verdict.words import listed, p_value, percent

Outcome = Literal["participates", "negligible", "undecided"]


@dataclass(frozen=True, slots=True)
class Reading:
    """What one candidate says of a species or pathway, errors read one way ("set" or "measured").

    ``p``: that it is absent (one-sided unless ``two_sided``); ``bound``: one-sided bound of the
    size of its effect; ``information``: fraction of the sensitivity outside lockstep; ``weak``:
    combinations of the other constants that are in lockstep with one another; ``margin`` and
    ``margin_of_bound``: factors on the errors of conditions at which the test no longer rejects, and at
    which an effect that matters is no longer ruled out.
    """

    origin: str
    p: float
    bound: float
    information: float
    margin: float
    weak: int = 0
    margin_of_bound: float = float("nan")


@dataclass(frozen=True, slots=True)
class CandidateFacts:
    """One candidate in a participation question.

    ``stands_at``: of one that is rejected, the factor on the errors of conditions at which it would stand.
    """

    name: str
    stands: bool
    contains: bool
    readings: tuple[Reading, ...]
    exact_conditions: bool
    assumed_errors: tuple[str, ...]  # columns of the term whose error was only assumed
    factor: bool = False  # it multiplies every pathway
    untestable: str = ""
    stands_at: float = float("inf")


@dataclass(frozen=True, slots=True)
class StandIn:
    """Something else that could explain the runs as well, in words; ``stands_at`` as of candidates."""

    name: str
    words: str
    stands: bool
    stands_at: float = float("inf")


@dataclass(frozen=True, slots=True)
class Verdict:
    """The answer to a participation question.

    ``why``: short reasons with numbers; ``because``: tags of what is to blame when undecided;
    ``below_what_matters``: participates, yet its effect is under the smallest that matters;
    ``error_margin``: the factor on all errors of conditions at which a decided verdict changes, nan where
    that is not known or conditions are exact.
    """

    outcome: Outcome
    sentence: str
    why: tuple[str, ...]
    settle: tuple[str, ...] = ()
    because: tuple[str, ...] = ()
    below_what_matters: bool = False
    votes: tuple[tuple[str, str], ...] = field(default=())
    error_margin: float = float("nan")


def vote(c: CandidateFacts, alpha: float, matters_above: float | None) -> tuple[str, list[str]]:
    """What one candidate says, and why it says no more."""
    if not c.contains:
        return "negligible", []
    if c.untestable or not c.readings:
        return "undecided", [c.untestable or f"“{c.name}”: the test could not be computed"]
    # a bound that rests on two combinations in lockstep among the other constants is not carried
    small = [
        matters_above is not None and r.bound < matters_above and r.weak <= MOST_WEAK
        for r in c.readings
    ]
    rejects, stops = rejection(
        c.name,
        c.readings,
        alpha,
        exact_conditions=c.exact_conditions,
        assumed_errors=c.assumed_errors,
        shows="the term varies on its own by {}",
    )
    if rejects and not stops:
        return "participates", []
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
    back = [(c.stands_at, f"“{c.name}”, which says otherwise,") for c in candidates if not c.stands]
    back += [(x.stands_at, f"{x.name} in place of {about}") for x in stand_ins if not x.stands]
    returns, returning = min(back, default=(float("inf"), ""))
    if agree == {"participates"} and returns < ERROR_MARGIN:
        stops.append(
            f"{returning} would stand if the condition errors were {returns:.2g} times as large as "
            f"stated (at least {ERROR_MARGIN:g} is asked)"
        )
    elif agree == {"participates"} and not others:
        return _participates(subject, about, standing, alpha, matters_above, votes, returns)
    if agree == {"negligible"} and matters_above is not None:
        return _negligible(about, what, standing, matters_above, is_reactant, votes, returns)
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
    returns: float,
) -> Verdict:
    worst = max(r.p for c in standing for r in c.readings)
    exact = all(c.exact_conditions for c in standing)
    margins = [r.margin for c in standing for r in c.readings if r.margin == r.margin]
    margins += [] if exact else [returns]
    how = f"the one candidate that stands contains {about}"
    if len(standing) > 1:
        both = "both" if len(standing) == 2 else f"all {len(standing)}"
        how = f"{both} candidates that stand contain {about}"
    rejects = "rejects" if len(standing) == 1 else "each rejects"
    why = [f"{how}, and {rejects} a rate without {about} ({p_value(worst)}, limit {alpha:g})"]
    why += _margin(margins)
    below = False
    sentence = f"The rate depends on {subject}."
    if matters_above is not None:
        below = all(r.bound < matters_above for c in standing for r in c.readings)
        if below:
            sentence = (
                f"The rate depends on {subject}, but by less than the {percent(matters_above)} "
                "that matters."
            )
    return Verdict(
        "participates",
        sentence,
        tuple(why),
        below_what_matters=below,
        votes=tuple(votes),
        error_margin=min(margins, default=float("nan")),
    )


def _margin(margins: Sequence[float]) -> list[str]:
    if not margins:
        return []
    m = min(margins)
    at_least = "more than 10" if m == float("inf") else f"{m:.2g}"
    return [f"this holds until the condition errors are {at_least} times as large as stated"]


def _negligible(
    about: str,
    what: str,
    standing: Sequence[CandidateFacts],
    matters_above: float,
    is_reactant: bool,
    votes: list[tuple[str, str]],
    returns: float,
) -> Verdict:
    with_it = [c for c in standing if c.contains]
    bounds = [r.bound for c in with_it for r in c.readings]
    if what == "species":
        sentence = (
            f"No dependence of the rate on {about} above {percent(matters_above)} within these "
            f"runs. {about} may still be consumed, enter after the limiting step, or be at "
            "saturation; rates cannot show that."
        )
        if is_reactant:
            sentence += f" Zero order in {about} here."
    else:
        sentence = (
            f"The pathway “{about}” carries less than {percent(matters_above)} of the rate within "
            "these runs."
        )
    if bounds:
        why = (
            f"the effect of {about} is at most {percent(max(bounds))} in every candidate that stands "
            f"(smallest that matters: {percent(matters_above)})",
        )
    else:
        why = (f"no candidate that stands contains {about}",)
    found = [r.margin_of_bound for c in with_it for r in c.readings]
    margins: list[float] = []
    # one that is not known leaves the whole unknown
    if not all(c.exact_conditions for c in standing) and all(m == m for m in found):
        margins = [*found, returns]
    return Verdict(
        "negligible",
        sentence,
        (*why, *_margin(margins)),
        votes=tuple(votes),
        error_margin=min(margins, default=float("nan")),
    )


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
        why.append(f"a rate without {about} is not excluded ({p_value(worst)}, limit {alpha:g})")
    if tested:
        bound = max(r.bound for c in tested for r in c.readings)
        if matters_above is None:
            why.append(
                f"an effect of up to {percent(bound)} is not excluded either, and the study does "
                "not say which effect matters (matters_above)"
            )
        elif bound >= matters_above:
            why.append(
                f"nor is an effect of up to {percent(bound)} (smallest that matters: "
                f"{percent(matters_above)})"
                if not_rejecting
                else f"the effect of {about} could be as large as {percent(bound)}"
            )
    if information < CONDITIONING_FRACTION and not_rejecting:
        because.append("conditioning")
        apart = (
            f"none of the sensitivity to {about} is apart from the rest of the law (lockstep)"
            if information < NOTHING_APART
            else f"only {percent(information)} of the sensitivity to {about} is not in lockstep with "
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
        why.append(f"in place of {about}, {listed(names)} {verb} these runs as well")
        link = "the link" if len(names) == 1 else "the links"
        settle.append(f"runs that break {link} of {about} with {listed(names)}")
    kinds = {said[c.name] for c in standing}
    without = [c for c in standing if not c.contains]
    if without and tested:
        because.append("disagreement")
        named = listed([f"“{c.name}”" for c in without])
        why.append(f"{named} {'stands' if len(without) == 1 else 'stand'} without {about}")
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
                f"these runs would have found an effect of {percent(detectable)} four times in five"
            )
    return Verdict(
        "undecided",
        f"Undecided whether the rate depends on {subject}.",
        tuple(why),
        tuple(dict.fromkeys(settle)),
        tuple(dict.fromkeys(because)),
        votes=tuple(votes),
    )
