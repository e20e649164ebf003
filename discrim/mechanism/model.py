"""Records of a mechanism: species and elementary steps, as the chemist wrote them; written laws."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass

from discrim.errors import Place


@dataclass(frozen=True, slots=True, order=True)
class Species:
    """A species as named in a step.

    ``site`` is the sign of the site it sits on ("" for a fluid species), ``occupies`` how many;
    a vacant site is ``Species(name="*", site="*", occupies=1)``.
    """

    name: str
    site: str = ""
    occupies: int = 0


@dataclass(frozen=True, slots=True)
class Step:
    """One elementary step; ``left`` and ``right`` hold (species, coefficient) pairs."""

    name: str
    left: tuple[tuple[Species, int], ...]
    right: tuple[tuple[Species, int], ...]
    reversible: bool
    text: str
    place: Place | None = None


@dataclass(frozen=True, slots=True)
class Mechanism:
    """Elementary steps with what is assumed of them.

    Attributes
    ----------
    sites : signs of the kinds of site
    catalyst : names of dissolved species (an enzyme, a metal complex) whose total over all their
        forms is conserved; the law is then per total catalyst
    equilibrated : names of the quasi-equilibrated steps
    limiting : name of the limiting step, or ""
    steady : names of the intermediates at steady state ("" elements never occur); None lets
        :func:`discrim.ratelaw.derive.derive` take every species that is neither measured nor a
        reactant or product of the whole
    overall_equilibrium : name of the constant with which a reversible law is written (its reverse
        term divided by it), for a known equilibrium of the overall reaction; "" writes the reverse
        term with a constant of its own, which can be zero
    field : branch of kinetics that the library lists it under, or ""
    """

    name: str
    title: str
    steps: tuple[Step, ...]
    sites: tuple[str, ...] = ()
    catalyst: tuple[str, ...] = ()
    equilibrated: tuple[str, ...] = ()
    limiting: str = ""
    steady: tuple[str, ...] | None = None
    source: str = ""
    note: str = ""
    formulas: Mapping[str, str] = dataclasses.field(default_factory=dict)
    charges: Mapping[str, int] = dataclasses.field(default_factory=dict)
    place: Place | None = None
    overall_equilibrium: str = ""
    field: str = ""


@dataclass(frozen=True, slots=True)
class WrittenLaw:
    """A rate law as written, where no elementary steps give one.

    Attributes
    ----------
    text : in the grammar of :mod:`discrim.ratelaw.expression`; species in square brackets
    overall : the reaction that the law is the rate of, None where it is not said
    place : where the law stands
    field : as in :class:`Mechanism`
    """

    name: str
    title: str
    text: str
    overall: Step | None = None
    source: str = ""
    note: str = ""
    place: Place | None = None
    field: str = ""
