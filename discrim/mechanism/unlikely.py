"""What is possible on paper but improbable in nature: warnings about steps, never errors."""

from __future__ import annotations

from collections.abc import Sequence

from discrim.mechanism.model import Mechanism, Species, Step
from discrim.mechanism.routes import Routes

MOST_FLUID = 3  # molecules of fluid species that meet in one elementary step
MOST_SITES = 2  # sites that take part where fluid species do too


def warnings_of(mechanism: Mechanism, routes: Routes) -> tuple[str, ...]:
    """Sentences, each naming the step and where it is written."""
    out = []
    for step in mechanism.steps:
        out += _crowd(step)
    said: set[str] = set()
    for cycle in sorted(routes.cycles, key=len):  # of many circles through a step the shortest
        lone = _lone(mechanism, list(cycle))
        if lone is not None and lone.name not in said:
            said.add(lone.name)
            out.append(_one_way_circle(lone, list(cycle)))
    return tuple(out)


def notes_of(
    mechanism: Mechanism, routes: Routes, measured: frozenset[str] | None = None
) -> tuple[str, ...]:
    """What else a reader should know, sentences; ``measured`` as for the derivation."""
    out = []
    unused = [n for n in mechanism.steady or () if measured and n in measured]
    if unused:
        out.append(
            f"{_listed(unused)} {'is' if len(unused) == 1 else 'are'} measured, but taken at "
            "steady state: the law does not use the measured amounts."
        )
    if not routes.complete:
        out.append(
            "The mechanism has more pathways than are listed."
            if routes.routes
            else "The mechanism has too many pathways to list."
        )
    return tuple(out)


def _crowd(step: Step) -> list[str]:
    sides = [("", step.left)]
    if step.reversible:
        sides.append((" backwards", step.right))
    for way, side in sides:
        fluid = sum(n for s, n in side if not s.site)
        sites = sum(n * s.occupies for s, n in side if s.site)
        if fluid > MOST_FLUID:
            what = f"{fluid} molecules would have to meet at once"
        elif fluid and sites > MOST_SITES:
            what = f"{_molecules(fluid)} and {sites} sites would have to meet at once"
        else:
            continue
        return [
            f"Step {step.name}{_where(step)} is improbable as one elementary step{way}: {what}. "
            "Write it as several steps."
        ]
    return []


def _molecules(n: int) -> str:
    return "a molecule" if n == 1 else f"{n} molecules"


def _lone(mechanism: Mechanism, names: Sequence[str]) -> Step | None:
    """The last step of a circle that is written in one direction and nowhere backwards."""
    steps = {s.name: s for s in mechanism.steps}
    lone = [n for n in names if not steps[n].reversible and not _mirrored(steps[n], mechanism)]
    return steps[lone[-1]] if lone else None


def _one_way_circle(step: Step, names: Sequence[str]) -> str:
    """A circle without net reaction is at equilibrium, where each step runs both ways."""
    return (
        f"Step {step.name}{_where(step)} is written in one direction, but with "
        f"{_listed([n for n in names if n != step.name])} it closes a circle in which nothing is "
        "consumed or made. Such a circle is at equilibrium, so the step must go both ways: write "
        "it with <=>, unless light or current drives it."
    )


def _mirrored(step: Step, mechanism: Mechanism) -> bool:
    """Whether its way back is written as a step of its own."""
    left, right = _set(step.left), _set(step.right)
    return any(_set(s.left) == right and _set(s.right) == left for s in mechanism.steps)


def _set(side: tuple[tuple[Species, int], ...]) -> frozenset[tuple[Species, int]]:
    return frozenset(side)


def _where(step: Step) -> str:
    place = step.place
    if place is None or not place.line:
        return ""
    return f" ({place.file}, line {place.line})" if place.file else f" (line {place.line})"


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
