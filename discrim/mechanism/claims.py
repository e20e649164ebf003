"""What a mechanism claims about itself: steps written twice, sources, limiting and equilibrium.

Each check raises :class:`~discrim.errors.DiscrimError` at the step that cannot be as it is said.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from fractions import Fraction

from discrim.errors import DiscrimError
from discrim.mechanism.check import net, species_of
from discrim.mechanism.exact import row_reduce
from discrim.mechanism.model import Mechanism, Species, Step
from discrim.mechanism.routes import Routes, routes_of


def check_claims(mechanism: Mechanism) -> None:
    """Raise for the first claim that the steps themselves contradict.

    Of fluid species only those named ``steady`` are taken as intermediates here; what the table
    does not measure is known to :func:`check_sources` and :func:`check_limiting` later.
    """
    _written_twice(mechanism.steps)
    named = {s for s in species_of(mechanism) if s.site or s.name in (mechanism.steady or ())}
    check_sources(mechanism, named)
    _limiting_at_equilibrium(mechanism)
    if mechanism.limiting:
        check_limiting(mechanism, routes_of(mechanism, named))


def _written_twice(steps: Sequence[Step]) -> None:
    seen: dict[tuple[frozenset[tuple[Species, int]], frozenset[tuple[Species, int]]], Step] = {}
    for step in steps:
        left, right = frozenset(step.left), frozenset(step.right)
        twin, mirror = seen.get((left, right)), seen.get((right, left))
        if twin is not None:
            less = twin if step.reversible and not twin.reversible else step
            raise DiscrimError(
                f'step "{step.name}" is the same as step "{twin.name}"',
                place=step.place,
                do=f'Leave "{less.name}" out: no data could tell the constants of the two apart. '
                "Where they differ in a transition state that holds another species, write that "
                "species on both sides.",
            )
        if mirror is not None and (step.reversible or mirror.reversible):
            both, less = (mirror, step) if mirror.reversible else (step, mirror)
            raise DiscrimError(
                f'step "{step.name}" is step "{mirror.name}" read backwards',
                place=step.place,
                do=f'Leave "{less.name}" out: "{both.name}" is written with <=> and holds both '
                "directions.",
            )
        seen[left, right] = step


def check_sources(mechanism: Mechanism, intermediates: Iterable[Species]) -> None:
    """Raise for an intermediate that the reactants, vacant sites and free catalysts never lead to."""
    inner = set(intermediates)
    every = species_of(mechanism)
    vacant = {s.site for s in every if s.name == s.site}
    there = {s for s in every if s not in inner or s.name in mechanism.catalyst}
    there |= {s for s in every if s.site and (s.name == s.site or s.site not in vacant)}
    more = True
    while more:
        more = False
        for step in mechanism.steps:
            for left, right in _ways(step):
                if left <= there and not right <= there:
                    there |= right
                    more = True
    missing = [s for s in every if s not in there]
    if not any(s.site for s in missing) and not any(
        sum(n for s, n in net(step).items() if s not in there) for step in mechanism.steps
    ):
        return  # forms of a catalyst that is not named as one; the derivation says so
    for species in missing:
        makes = [s for s in mechanism.steps if any(species in right for _, right in _ways(s))]
        step = (makes or mechanism.steps)[0]
        itself = all(
            species in left for s in mechanism.steps for left, right in _ways(s) if species in right
        )
        of = "itself" if itself else "species that come from it"
        raise DiscrimError(
            f'"{species.name}" is made only from {of}',
            place=step.place,
            do="Without another source none of it is ever there. Write the step that makes it from "
            "a reactant" + (" and a vacant site." if species.site else ", such as an initiation, ")
            + ("" if species.site else "or measure it and leave it out of steady.")
            + taken(mechanism, inner),
        )  # fmt: skip


def taken(mechanism: Mechanism, intermediates: Collection[Species]) -> str:
    """Where nothing is named as steady: which species were guessed to be intermediates.

    A reactant that a side step gives back, or a product that an earlier step takes up, is guessed
    wrongly; the user can only see that when the guess is said.
    """
    free = [
        s.name
        for s in species_of(mechanism)
        if s in intermediates and not s.site and s.name not in mechanism.catalyst
    ]
    if mechanism.steady is not None or not free:
        return ""
    return (
        f" Taken as intermediates here: {', '.join(free)}. If one of them is a reactant or a "
        "product, name the others under assume: steady = [...]."
    )


def _ways(step: Step) -> list[tuple[set[Species], set[Species]]]:
    left, right = {s for s, _ in step.left}, {s for s, _ in step.right}
    return [(left, right), (right, left)] if step.reversible else [(left, right)]


def at_equilibrium(mechanism: Mechanism) -> tuple[Step, ...]:
    """The quasi-equilibrated steps: those named, or all reversible ones beside a limiting step."""
    names = set(mechanism.equilibrated)
    if mechanism.limiting and not names and mechanism.steady is None:
        names = {s.name for s in mechanism.steps if s.reversible and s.name != mechanism.limiting}
    return tuple(s for s in mechanism.steps if s.name in names)


def _limiting_at_equilibrium(mechanism: Mechanism) -> None:
    """The equilibrated steps must not fix the ratio of the two sides of the limiting step."""
    limiting = next((s for s in mechanism.steps if s.name == mechanism.limiting), None)
    if limiting is None:
        return
    fast = at_equilibrium(mechanism)
    makes_up = _combination([net(s) for s in fast], net(limiting))
    if makes_up is None:
        return
    used = [s.name for s, x in zip(fast, makes_up, strict=True) if x]
    if not used:  # nothing changes in it
        return
    named = bool(mechanism.equilibrated)
    which = _listed(used)
    raise DiscrimError(
        f'the limiting step "{limiting.name}" is at equilibrium already, over {which}',
        place=limiting.place or mechanism.place,
        do="Together the equilibrated steps do the same as it does, so its net rate would be zero. "
        + (
            "Take one of them out of equilibrated, or name another step as limiting."
            if named
            else "All reversible steps beside it count as equilibrated; name under equilibrated "
            "those that are."
        ),
    )


def _combination(
    vectors: Sequence[dict[Species, int]], target: dict[Species, int]
) -> list[Fraction] | None:
    """x with sum_i x_i vectors[i] = target, or None; exact elimination."""
    keys = sorted({s for v in (*vectors, target) for s in v})
    rows = [[*(Fraction(v.get(k, 0)) for v in vectors), Fraction(target.get(k, 0))] for k in keys]
    n = len(vectors)
    rows, pivots = row_reduce(rows, n)
    if any(row[n] for row in rows[len(pivots) :]):
        return None
    out = [Fraction(0)] * n
    for r, p in enumerate(pivots):
        out[p] = rows[r][n]
    return out


def check_limiting(mechanism: Mechanism, routes: Routes) -> None:
    """Raise where the limiting step belongs to no pathway."""
    name = mechanism.limiting
    if not name or not routes.complete or not routes.routes:
        return
    if any(name in r.steps for r in routes.routes):
        return
    step = next(s for s in mechanism.steps if s.name == name)
    others = [s.name for s in mechanism.steps if any(s.name in r.steps for r in routes.routes)]
    raise DiscrimError(
        f'the limiting step "{name}" carries no net rate',
        place=step.place or mechanism.place,
        do="It leads nowhere: no pathway from reactants to products runs through it. Name another "
        f"step as limiting; {_listed(others)} carry a net rate.",
    )


def check_limiting_shows(mechanism: Mechanism, in_law: Iterable[str]) -> None:
    """Raise where the constant of the limiting step is not among those of the law, ``in_law``."""
    name = mechanism.limiting
    if not name or {f"k_{name}", f"k_rev_{name}"} & set(in_law):
        return
    step = next(s for s in mechanism.steps if s.name == name)
    fast = {s.name for s in at_equilibrium(mechanism)}
    before = [
        s.name
        for s in mechanism.steps
        if not s.reversible and s.name != name and s.name not in fast
    ]
    sets = f" The rate is set by {_listed(before)}." if before else ""
    raise DiscrimError(
        f'step "{name}" is called limiting, but its constant is not in the law',
        place=step.place or mechanism.place,
        do=f"It has to run as fast as the steps before it, which are not at equilibrium.{sets} "
        "Write what precedes the limiting step with <=> and as equilibrated, or name another step.",
    )


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
