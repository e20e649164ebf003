"""Does a mechanism balance, and do its assumptions fit its steps?"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.exact import null_space
from discrim.mechanism.formula import elements
from discrim.mechanism.model import Mechanism, Species, Step
from discrim.mechanism.step import side_text


def check_mechanism(mechanism: Mechanism) -> None:
    """Raise :class:`~discrim.errors.DiscrimError` for the first thing that cannot be.

    Sites balance in every step; elements and charge balance where they are given for all species
    of a step; assumptions name steps and species that exist and do not contradict each other;
    catalysts are conserved; every surface species and named intermediate is made and consumed.
    """
    for step in mechanism.steps:
        _sites(step, mechanism.sites)
    _elements(mechanism)
    _assumptions(mechanism)
    for name in mechanism.catalyst:
        catalyst_forms(mechanism, name)
    _intermediates(mechanism)


def species_of(mechanism: Mechanism) -> tuple[Species, ...]:
    """All species, in the order in which the steps first name them."""
    seen: dict[Species, None] = {}
    for step in mechanism.steps:
        for species, _ in (*step.left, *step.right):
            seen.setdefault(species)
    return tuple(seen)


def net(step: Step) -> dict[Species, int]:
    """Net change of each species in the step as written, zeros left out."""
    change: dict[Species, int] = {}
    for species, n in step.left:
        change[species] = change.get(species, 0) - n
    for species, n in step.right:
        change[species] = change.get(species, 0) + n
    return {s: n for s, n in change.items() if n}


def _sites(step: Step, signs: tuple[str, ...]) -> None:
    for sign in signs:
        left = sum(n * s.occupies for s, n in step.left if s.site == sign)
        right = sum(n * s.occupies for s, n in step.right if s.site == sign)
        if left == right:
            continue
        missing = abs(left - right)
        arrow = "<=>" if step.reversible else "->"
        vacant = Species(sign, sign, 1)
        sides = [dict(step.left), dict(step.right)]
        short = sides[1] if left > right else sides[0]
        short[vacant] = short.get(vacant, 0) + missing
        fixed = f" {arrow} ".join(side_text(tuple(parts.items())) for parts in sides)
        do = (
            f"{left} site{_s(left)} on the left, {right} on the right. "
            f"Write the {'freed' if left > right else 'vacant'} "
            f"site{_s(missing)} too: {fixed}"
        )
        which = "right" if left > right else "left"
        raise DiscrimError("sites do not balance", place=_side_place(step, arrow, which), do=do)


def _s(n: int) -> str:
    return "" if n == 1 else "s"


def _side_place(step: Step, arrow: str, side: str) -> Place | None:
    """The side of the step that is short of sites."""
    if step.place is None or not step.place.text:
        return step.place
    start = max(step.place.text.find(step.text), 0)
    left, right = step.text.split(arrow, 1)
    text = left if side == "left" else right
    at = start + (0 if side == "left" else len(left) + len(arrow))
    at += len(text) - len(text.lstrip())
    return replace(step.place, column=at + 1, length=max(1, len(text.strip())))


def _elements(mechanism: Mechanism) -> None:
    known = {s.name for s in species_of(mechanism)}
    for name in (*mechanism.formulas, *mechanism.charges):
        if name not in known:
            raise DiscrimError(
                f'species "{name}" is described but stands in no step',
                place=mechanism.place,
                do=f"{nearest(name, known)} Species: {', '.join(sorted(known))}.".strip(),
            )
    counts = {n: elements(f, mechanism.place) for n, f in mechanism.formulas.items()}
    for step in mechanism.steps:
        involved = [s.name for s, _ in (*step.left, *step.right) if s.name != s.site]
        if involved and all(name in counts for name in involved):
            _balance(step, counts)
        if involved and all(name in mechanism.charges for name in involved):
            _balance(step, {n: {"charge": c} for n, c in mechanism.charges.items()})


def _balance(step: Step, counts: Mapping[str, Mapping[str, int]]) -> None:
    totals: list[dict[str, int]] = []
    for side in (step.left, step.right):
        total: dict[str, int] = {}
        for species, n in side:
            for element, m in counts.get(species.name, {}).items():
                total[element] = total.get(element, 0) + n * m
        totals.append(total)
    wrong = [e for e in {**totals[0], **totals[1]} if totals[0].get(e, 0) != totals[1].get(e, 0)]
    if wrong:
        words = "; ".join(
            f"{e}: {totals[0].get(e, 0)} on the left, {totals[1].get(e, 0)} on the right"
            for e in sorted(wrong)
        )
        what = "charge does" if wrong == ["charge"] else "elements do"
        raise DiscrimError(
            f"{what} not balance",
            place=step.place,
            do=f"{words}. Correct the step, or the formula or charge of a species.",
        )


def _assumptions(mechanism: Mechanism) -> None:
    steps = {s.name: s for s in mechanism.steps}
    for name in (*mechanism.equilibrated, *([mechanism.limiting] if mechanism.limiting else [])):
        if name not in steps:
            raise DiscrimError(
                f'no step is called "{name[:40]}"',
                place=mechanism.place,
                do=f"{nearest(name, steps)} Steps: {', '.join(steps)}.".strip(),
            )
    for name in mechanism.equilibrated:
        if name == mechanism.limiting:
            raise DiscrimError(
                f'step "{name}" is called both limiting and equilibrated',
                place=steps[name].place or mechanism.place,
                do="A limiting step is not at equilibrium; take it out of one of the two.",
            )
        if not steps[name].reversible:
            raise DiscrimError(
                f'step "{name}" is called equilibrated but is written in one direction',
                place=steps[name].place or mechanism.place,
                do=f"Write it with <=>: {steps[name].text.replace('->', '<=>')}",
            )
    fluid = {s.name: s for s in species_of(mechanism)}
    for name in (*(mechanism.steady or ()), *mechanism.catalyst):
        if name not in fluid:
            raise DiscrimError(
                f'species "{name[:40]}" stands in no step',
                place=mechanism.place,
                do=f"{nearest(name, fluid)} Species: {', '.join(fluid)}.".strip(),
            )
    for name in mechanism.catalyst:
        if fluid[name].site:
            raise DiscrimError(
                f'"{name}" sits on a site; a catalyst is a dissolved species',
                place=mechanism.place,
                do="Sites are conserved without being named; leave it out of catalyst.",
            )


def _intermediates(mechanism: Mechanism) -> None:
    """Surface species and named intermediates have to be made and consumed somewhere."""
    for species in species_of(mechanism):
        named = species.name in (mechanism.steady or ())
        if not (named or species.site):
            continue
        made = consumed = False
        place = None
        for step in mechanism.steps:
            change = net(step).get(species, 0)
            if change:
                place = place or step.place
                made |= change > 0 or step.reversible
                consumed |= change < 0 or step.reversible
        if made and consumed:
            continue
        what = "is consumed but never made" if consumed else "is made but never consumed"
        if not made and not consumed:
            what = "is neither made nor consumed"
        raise DiscrimError(
            f'"{species.name}" {what}',
            place=place or mechanism.place,
            do="An intermediate that is only made or only consumed can reach no steady state. "
            "Write the missing step, or make its step reversible (<=>).",
        )


def catalyst_forms(
    mechanism: Mechanism, name: str, measured: frozenset[str] = frozenset()
) -> dict[Species, int]:
    """The species that hold the catalyst whose free form is ``name``, itself first, and how many.

    They are the smallest set of species whose total no step changes and within which the catalyst
    can turn over, one catalyst each if that can be (two for a dimer); a species that some step only
    makes or only consumes (a reactant, a product) is not among them.
    """
    every = species_of(mechanism)
    free = next(s for s in every if s.name == name)
    changes = [net(step) for step in mechanism.steps]
    one_way: set[Species] = set()
    for species in every:
        made = any(
            c.get(species, 0) > 0 or (s.reversible and c.get(species, 0) < 0)
            for c, s in zip(changes, mechanism.steps, strict=True)
        )
        consumed = any(
            c.get(species, 0) < 0 or (s.reversible and c.get(species, 0) > 0)
            for c, s in zip(changes, mechanism.steps, strict=True)
        )
        if made != consumed and species != free:
            one_way.add(species)
    barred = one_way | {s for s in every if s.site or s.name in measured} - {free}
    barred |= {s for s in every if s.name in mechanism.catalyst} - {free}
    best: list[dict[Species, int]] = []
    idle: list[dict[Species, int]] = []  # the smallest set within which nothing turns over
    budget = [5000]  # a hostile mechanism must not search for ever

    def search(forms: dict[Species, int], rejected: frozenset[Species]) -> None:
        budget[0] -= 1
        if budget[0] < 0 or (best and len(forms) >= len(best[0])):
            return
        for change in changes:
            balance = sum(n * forms.get(s, 0) for s, n in change.items())
            if balance == 0:
                continue
            options = [
                (s, n)
                for s, n in change.items()
                if s not in forms and s not in barred and s not in rejected and n * balance < 0
            ]
            tried: frozenset[Species] = frozenset()
            for option, n in options:
                whole = {1} | ({-balance // n} if balance % n == 0 else set())
                for weight in sorted(whole):
                    search({**forms, option: weight}, rejected | tried)
                tried |= {option}
            return
        budget[0] -= 20  # about the work of a look at the fluxes
        if _turns_over(changes, forms, free):
            best[:] = [forms]
        elif not idle or len(forms) < len(idle[0]):
            idle[:] = [forms]

    search({free: 1}, frozenset())
    best = best or idle
    if not best:
        broken = next(
            (s for s, c in zip(mechanism.steps, changes, strict=True) if c.get(free)),
            mechanism.steps[0],
        )
        raise DiscrimError(
            f'the catalyst "{name}" is not conserved',
            place=broken.place or mechanism.place,
            do="Every step that takes it up has to lead, over the other steps, back to it. Write "
            "the step that sets it free again, or leave it out of catalyst.",
        )
    return {free: 1} | {s: best[0][s] for s in every if s in best[0]}


def _turns_over(
    changes: Sequence[Mapping[Species, int]], forms: Iterable[Species], free: Species
) -> bool:
    """Whether a step that changes the free form can run while the amount of no form changes.

    Where each step of a cycle takes something up and sets something free, other totals than that of
    the catalyst are conserved too: free catalyst with its first product and its last reactant.
    """
    own = [j for j, c in enumerate(changes) if c.get(free)]
    balances = [[Fraction(c.get(species, 0)) for c in changes] for species in forms]
    flows = null_space(balances, len(changes))
    return not own or any(flow[j] for flow in flows for j in own)
