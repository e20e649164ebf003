"""What the steps of a mechanism connect: intermediates, conserved totals, equilibria.

Pure integer and rational algebra on the stoichiometry; no symbols yet.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from discrim.errors import DiscrimError
from discrim.mechanism.check import catalyst_forms, net, species_of
from discrim.mechanism.exact import Matrix
from discrim.mechanism.model import Mechanism, Species, Step


@dataclass(frozen=True, slots=True)
class Family:
    """A conserved total: all sites of one kind, or all forms of one dissolved catalyst.

    ``reference`` is the form the others are related to (vacant site, free catalyst); ``weights``
    how many sites (catalyst units) each member holds.
    """

    kind: str  # "sites" or "catalyst"
    name: str
    reference: Species
    weights: dict[Species, int]


@dataclass(frozen=True, slots=True)
class Network:
    """A mechanism with the part that each species and step plays."""

    mechanism: Mechanism
    species: tuple[Species, ...]
    fluid: tuple[Species, ...]  # amounts that stand in the law
    intermediates: tuple[Species, ...]  # eliminated
    families: tuple[Family, ...]
    equilibrated: tuple[Step, ...]
    kinetic: tuple[Step, ...]
    taken_as_equilibrated: bool  # because only the limiting step was named
    findings: tuple[str, ...]

    def family_of(self, species: Species) -> int | None:
        for k, family in enumerate(self.families):
            if species in family.weights:
                return k
        return None


def classify(mechanism: Mechanism, measured: frozenset[str] | None) -> Network:
    """Find intermediates, conserved totals and equilibrated steps.

    A fluid species is an intermediate when it is named ``steady``; or, when none are named, if it
    is not ``measured`` and is made by one step and consumed by a later one. Surface species and
    forms of a catalyst always are.
    """
    every = species_of(mechanism)
    families: list[Family] = []
    for sign in mechanism.sites:
        members = {s: s.occupies for s in every if s.site == sign}
        if members:
            vacant = next((s for s in members if s.name == sign), next(iter(members)))
            families.append(Family("sites", sign, vacant, members))
    known = measured or frozenset()
    for name in mechanism.catalyst:
        # The measured amount of a catalyst is its total, which the law is per.
        forms = catalyst_forms(mechanism, name, known - {name})
        taken = [s for f in families for s in f.weights if s in forms]
        if taken:
            raise DiscrimError(
                f'"{taken[0].name}" would hold two catalysts',
                place=mechanism.place,
                do="A complex of two named catalysts is not yet supported.",
            )
        families.append(Family("catalyst", name, next(iter(forms)), forms))
    bound = {s for f in families for s in f.weights}
    findings: list[str] = []
    steady = _steady(mechanism, every, bound, measured, findings)
    intermediates = tuple(s for s in every if s in bound or s in steady)
    fluid = tuple(s for s in every if s not in intermediates)
    names = set(mechanism.equilibrated)
    by_default = False
    if mechanism.limiting and not names and mechanism.steady is None:
        names = {s.name for s in mechanism.steps if s.reversible and s.name != mechanism.limiting}
        by_default = bool(names)
    equilibrated = tuple(s for s in mechanism.steps if s.name in names)
    kinetic = tuple(s for s in mechanism.steps if s.name not in names)
    if not kinetic:
        raise DiscrimError(
            "all steps are equilibrated, so none sets the rate",
            place=mechanism.place,
            do="Take the slow step out of equilibrated and name it as limiting.",
        )
    return Network(
        mechanism,
        every,
        fluid,
        intermediates,
        tuple(families),
        equilibrated,
        kinetic,
        by_default,
        tuple(findings),
    )


def _steady(
    mechanism: Mechanism,
    every: Sequence[Species],
    bound: set[Species],
    measured: frozenset[str] | None,
    findings: list[str],
) -> set[Species]:
    if mechanism.steady is not None:
        return {s for s in every if s.name in mechanism.steady}
    found: set[Species] = set()
    for species in every:
        if species in bound or species.site or (measured and species.name in measured):
            continue
        changes = [net(s).get(species, 0) for s in mechanism.steps]
        touched = [k for k, c in enumerate(changes) if c]
        made = [k for k in touched if changes[k] > 0]
        consumed = [k for k in touched if changes[k] < 0]
        if not made or not consumed:
            continue
        if min(made) < max(consumed):
            found.add(species)
        else:
            findings.append(
                f"{species.name} is consumed first and made again later: its amount in the law is "
                f"that of free {species.name}. If its total is what is known, write catalyst = "
                f'["{species.name}"].'
            )
    return found


def changes(steps: Sequence[Step], species: Sequence[Species]) -> Matrix:
    """Net stoichiometry, shape (species, steps)."""
    nets = [net(s) for s in steps]
    return [[Fraction(n.get(s, 0)) for n in nets] for s in species]
