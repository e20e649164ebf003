"""What a column can be (``is = "..."``), and which of that is supported."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.model import Role
from discrim.units import ParsedUnit, Quantity

OBSERVATIONS = frozenset({Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF})
# Conditions that a law can hold, so that their errors count.
CONDITIONS = frozenset(
    {
        Role.SPECIES,
        Role.TOTAL,
        Role.CATALYST,
        Role.TEMPERATURE,
        Role.PH,
        Role.IONIC_STRENGTH,
        Role.INLET,
        Role.INITIAL,
        Role.TOTAL_FLOW,
        Role.TIME,
        Role.CONVERSION,
    }
)
# Conditions that stand in no rate law of their own, only in formulas that the study gives.
IN_FORMULAS = frozenset({Role.TOTAL, Role.INLET, Role.INITIAL, Role.TOTAL_FLOW, Role.TIME})
LABELS = frozenset({Role.RUN, Role.RUN_ORDER, Role.GROUP})
NOT_NEGATIVE = frozenset(
    IN_FORMULAS | {Role.SPECIES, Role.CATALYST, Role.TEMPERATURE, Role.IONIC_STRENGTH}
)
SUPPORTED = OBSERVATIONS | CONDITIONS | LABELS | {Role.TIME_ON_STREAM}

_WITH_SPECIES = (
    Role.RATE_OF,
    Role.CONSUMPTION_OF,
    Role.K_OBS_OF,
    Role.TOTAL,
    Role.INITIAL,
    Role.INLET,
    Role.CONVERSION,
    Role.SIGNAL,
)
_ALONE = (
    Role.ABSORBANCE,
    Role.PRESSURE,
    Role.TEMPERATURE,
    Role.PH,
    Role.IONIC_STRENGTH,
    Role.CATALYST,
    Role.TOTAL_FLOW,
    Role.TIME,
    Role.TIME_ON_STREAM,
    Role.RUN,
    Role.RUN_ORDER,
    Role.GROUP,
)
VOCABULARY = (
    'a species by its name ("A"), ' + ", ".join(f'"{role.value} X"' for role in _WITH_SPECIES)
    + ", " + ", ".join(f'"{role.value}"' for role in _ALONE)
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Declaration:
    """What the study says of one column of the table, or of a condition without a column.

    Attributes
    ----------
    name : of the column, or the key under ``[conditions]``
    unit : as written; None when the study gives none
    error : as written (text, number, table or list), read by :mod:`discrim.runs.errors`; None when
        the study gives none
    value : of a condition without a column, else None
    place, unit_place, error_place : where each stands in the study
    computed_from : formula of an observed column that was worked out from others, as written, and
        formula_place : where it stands
    """

    name: str
    role: Role
    about: str = ""
    unit: ParsedUnit | None = None
    error: Any = None
    value: Quantity | None = None
    place: Place | None = None
    unit_place: Place | None = None
    error_place: Place | None = None
    computed_from: str = ""
    formula_place: Place | None = None


def parse_is(text: str, place: Place | None) -> tuple[Role, str]:
    """Role and species of ``is = "..."``; ``DiscrimError`` with what is allowed otherwise."""
    words = " ".join(text.split())
    for role in _ALONE:
        if words == role.value:
            return role, ""
    for role in _WITH_SPECIES:
        head = role.value + " "
        if words.startswith(head):
            return role, check_species(words.removeprefix(head), place)
    folded = {role.value.lower(): role for role in _ALONE}
    if words.lower() in folded:
        raise DiscrimError(
            f'"{text}" is not known',
            place=place,
            do=f'Did you mean "{folded[words.lower()].value}"?',
        )
    if words in {role.value for role in _WITH_SPECIES}:
        raise DiscrimError(f'"{words}" of what?', place=place, do=f'Name the species: "{words} A".')
    if " " in words:
        first = words.rsplit(" ", 1)[0]
        known = [role.value for role in (*_WITH_SPECIES, *_ALONE)]
        hint = nearest(first, known) or nearest(words, known)
        raise DiscrimError(
            f'"{words}" is not known',
            place=place,
            do=f"{hint} A column can be: {VOCABULARY}.".lstrip(),
        )
    return Role.SPECIES, check_species(words, place)


def check_species(name: str, place: Place | None) -> str:
    """The name of a species, as it can stand in a step and in square brackets."""
    if not name:
        raise DiscrimError("the name of a species is missing", place=place)
    if len(name) > 60 or re.search(r"[\[\]{}\"'\\<>\s]", name) or not name.isprintable():
        raise DiscrimError(
            f'"{name[:60]}" cannot be the name of a species',
            place=place,
            do="Names have no spaces, quotes, backslashes, <, > or square or curly brackets.",
        )
    return name


def check_supported(role: Role, about: str, place: Place | None) -> None:
    """Refuse what is understood but not computed yet."""
    if role not in SUPPORTED:
        words = f"{role.value} {about}".strip()
        raise DiscrimError(
            f'"{words}" is not yet supported for rates',
            place=place,
            do="Leave the column undeclared for now: it is then looked at as a possible stand-in.",
        )
