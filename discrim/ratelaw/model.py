"""Records of a rate law: what a mechanism implies for the rates that can be measured."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import Enum
from typing import Any

import sympy

from discrim.errors import Place
from discrim.mechanism.routes import Route


class ConstantKind(Enum):
    """What a constant is; it fixes the default lower bound (zero, or none for an order)."""

    RATE = "rate constant"
    EQUILIBRIUM = "equilibrium constant"
    LUMPED = "combination of constants"
    ORDER = "order"
    OTHER = "constant"


@dataclass(frozen=True, slots=True)
class Constant:
    """One adjustable constant of a law.

    Attributes
    ----------
    symbol : the sympy symbol that stands for it in the law (its name is ``name``)
    kind : rate constants, equilibrium constants and combinations are >= 0; orders are free
    meaning : in words or as an expression of the constants of the steps, "" if it is one of them
    definition : for a combination, the expression in the constants of the steps; else None
    """

    name: str
    symbol: sympy.Symbol
    kind: ConstantKind
    meaning: str = ""
    definition: Any = None

    @property
    def lower(self) -> float:
        return float("-inf") if self.kind is ConstantKind.ORDER else 0.0


@dataclass(frozen=True, slots=True)
class Pathway:
    """An additive part of a law: a step (or chain of steps) by which it proceeds.

    ``steps`` are the names of the steps that belong to it alone.
    """

    name: str
    steps: tuple[str, ...]
    rate: Any  # sympy expression


@dataclass(frozen=True, slots=True, eq=False)
class RateLaw:
    """The rate law of one candidate.

    Attributes
    ----------
    name : name of the candidate
    rate : sympy expression; the rate of the limiting step as written, the sum over pathways, or
        the bare law. Species stand in it as ``amount(name)`` symbols, see :func:`amount`.
    production : net rate of production of each fluid species, sympy expressions
    constants : the constants of ``rate``, in the identifiable (lumped) form that is fitted
    step_rate, step_constants : the same law in the constants of the steps, before lumping
    species : names of the species whose amounts occur in the law
    pathways : additive parts, if more than one
    assumptions, conventions : full sentences
    derivation : the lines of the derivation, (words, sympy expression or equation or None)
    steps : the steps as written, by name; empty for a bare law
    stoichiometry : overall stoichiometry, by species; None if not one fixed ratio
    knocked_out : for a name of a step or pathway, the law without it is made by
        :mod:`discrim.ratelaw.knockout`; this holds which constants each step owns
    routes : the pathways of a mechanism through its steps, each with its overall equation
    warnings : what is improbable or thermodynamically doubtful about its steps, full sentences
    """

    name: str
    rate: Any
    production: Mapping[str, Any]
    constants: tuple[Constant, ...]
    species: tuple[str, ...]
    step_rate: Any = None
    step_constants: tuple[Constant, ...] = ()
    pathways: tuple[Pathway, ...] = ()
    assumptions: tuple[str, ...] = ()
    conventions: tuple[str, ...] = ()
    derivation: tuple[tuple[str, Any], ...] = ()
    steps: Mapping[str, str] = field(default_factory=dict)
    stoichiometry: Mapping[str, Any] | None = None
    source: str = ""
    place: Place | None = None
    findings: tuple[str, ...] = ()
    routes: tuple[Route, ...] = ()
    warnings: tuple[str, ...] = ()

    def constant(self, name: str) -> Constant:
        for c in self.constants:
            if c.name == name:
                return c
        raise KeyError(name)


def amount(species: str) -> sympy.Symbol:
    """The symbol for the amount (concentration or partial pressure) of a species.

    Its name is the species in square brackets, so it can never collide with a constant.
    """
    return sympy.Symbol(f"[{species}]", nonnegative=True)


def total_amount(catalyst: str) -> sympy.Symbol:
    """The symbol for the total amount of a catalyst over all its forms."""
    return amount(f"total {catalyst}")


def constant_symbol(name: str, kind: ConstantKind = ConstantKind.RATE) -> sympy.Symbol:
    """The symbol of a constant: nonnegative unless it is an order."""
    if kind is ConstantKind.ORDER:
        return sympy.Symbol(name, real=True)
    return sympy.Symbol(name, nonnegative=True)


def quantity(name: str) -> sympy.Symbol:
    """The symbol of a measured quantity that is no species (pH, temperature), by column name."""
    return sympy.Symbol(f"{{{name}}}", real=True)
