"""Records of the study file: the questions, the runs and the candidates, as the user wrote them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from importlib import import_module
from pathlib import Path
from typing import Any

import numpy as np

from discrim.errors import Place
from discrim.mechanism.model import Mechanism
from discrim.runs.model import Runs
from discrim.units import ParsedUnit, Unit, UnitSet


@dataclass(frozen=True, slots=True, eq=False)
class Candidate:
    """One mechanism or bare law. Exactly one of ``mechanism`` and ``law`` is given.

    ``law`` is a sympy expression read by our own parser (`ratelaw.expression`); ``overall`` the
    stoichiometry of a bare law by species, or None. ``source`` is where a law from a file was
    published.
    """

    name: str
    mechanism: Mechanism | None
    law: Any
    law_text: str
    overall: Mapping[str, int] | None
    place: Place
    note: str = ""
    source: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Derived:
    """``[derived]``: a quantity put symbolically into the law wherever ``name`` stands in it.

    ``formula`` holds ``amount(species)``, ``quantity(column)`` and constant symbols.
    """

    name: str
    formula: Any
    text: str
    unit: Unit | None
    place: Place


@dataclass(frozen=True, slots=True, eq=False)
class Computed:
    """An observed column that was worked out from other columns, by ``formula``."""

    name: str
    formula: Any
    text: str
    place: Place


@dataclass(frozen=True, slots=True, eq=False)
class Reported:
    """``[report_constants]``: a quantity of the constants that is wanted with its intervals.

    ``formula`` holds constant symbols, ``amount(species)``, ``quantity(column)`` and, for what a law
    says of an observed column, ``quantity("observed column")``. ``at``: conditions by species or
    column, internal units; ``written`` the same as the user wrote them. ``units`` those asked for.
    """

    name: str
    formula: Any
    text: str
    at: Mapping[str, float]
    written: Mapping[str, str]
    units: ParsedUnit | None
    place: Place
    units_place: Place
    at_place: Place


@dataclass(frozen=True, slots=True)
class ConstantSetting:
    """``[constants]``: what the user knows or demands of one constant (internal units).

    ``value`` with ``sd`` 0: fixed. ``value`` with ``sd`` > 0: known with an uncertainty, enters
    like a measured condition shared by all runs. Neither: estimated between ``at_least`` and
    ``at_most`` (None: the default of its kind), from ``start`` if given, one for each label of
    column ``per``.
    """

    name: str
    value: float | None = None
    sd: float = 0.0
    bound: float | None = None
    start: float | None = None
    at_least: float | None = None
    at_most: float | None = None
    per: str | None = None
    unit: Unit | None = None
    shown: str = ""
    place: Place | None = None


@dataclass(frozen=True, slots=True)
class Question:
    """What the study asks. ``asks``: participates, stands, equal, constant, reversible.

    ``matters_above`` as a fraction; ``at`` amounts by species in internal units. ``value`` is in the
    units ``value_units`` that it was written in, ``value_text`` as it was written.
    """

    asks: str
    about: str
    matters_above: float | None = None
    at: Mapping[str, float] = field(default_factory=dict)
    names: tuple[str, ...] = ()
    value: float | None = None
    place: Place | None = None
    value_units: ParsedUnit | None = None
    value_text: str = ""
    value_place: Place | None = None


@dataclass(frozen=True, slots=True)
class OtherEvidence:
    says: str
    source: str
    against: tuple[str, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Study:
    """Everything that a study file says, checked and in internal units."""

    path: Path
    title: str
    reactor: str
    runs: Runs
    candidates: tuple[Candidate, ...]
    questions: tuple[Question, ...]
    derived: tuple[Derived, ...]
    constants: Mapping[str, ConstantSetting]
    controls: Mapping[str, str]
    other_evidence: tuple[OtherEvidence, ...]
    level: float
    units: UnitSet
    sha256: str
    exclusions: tuple[tuple[str, str], ...] = ()  # (where in words, reason)
    findings: tuple[str, ...] = ()
    computed: Mapping[str, Computed] = field(default_factory=dict)
    # errors of the responses of one run: independent, or of a covariance that is to be estimated
    responses_together: bool = False

    reported: tuple[Reported, ...] = ()

    def kept(self) -> np.ndarray:
        """Indices of the runs that are not excluded."""
        return np.flatnonzero(self.runs.kept)

    def weigh(self, *, seed: int = 1) -> dict[str, Any]:
        """The evidence document of this study, as ``discrim weigh`` saves it.

        The one call that goes up the layers, for whoever has a study in hand.
        """
        return import_module("discrim.weigh").weigh(self, seed=seed)
