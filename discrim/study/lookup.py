"""What later stages ask of a study: what is measured, in which units, what is left over."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.build import listed
from discrim.runs.model import Role
from discrim.study.model import Study
from discrim.units import Unit, parse_unit


def measured_species(study: Study) -> frozenset[str]:
    """Species that a column, a condition or a derived quantity gives the amount of."""
    return frozenset(study.runs.species()) | {d.name for d in study.derived}


def unmeasured(law: Any, study: Study, cancelled: Collection[str] = ()) -> tuple[str, ...]:
    """Species in a law that nothing measures; also those behind derived quantities.

    ``law`` is a :class:`discrim.ratelaw.model.RateLaw`; ``cancelled`` are species whose amount
    drops out of what is observed, as that of S does from ``k_obs of S``.
    """
    known = measured_species(study) | set(cancelled)
    return tuple(species for species in law.species if species not in known)


def check_measured(
    law: Any, study: Study, place: Place | None = None, cancelled: Collection[str] = ()
) -> None:
    """Raise ``DiscrimError`` for the first species in a law that nothing measures."""
    missing = unmeasured(law, study, cancelled)
    if not missing:
        return
    by_column = {c.name: c.about for c in study.runs.columns if c.role is Role.SPECIES}
    known = sorted(measured_species(study))
    first = missing[0]
    place = law.place if place is None else place
    if place is not None and (at := place.text.find(f"[{first}]", max(place.column - 1, 0))) >= 0:
        place = replace(place, column=at + 1, length=len(first) + 2)
    if first in by_column:
        do = (
            f'The column "{first}" is the species "{by_column[first]}": write [{by_column[first]}].'
        )
    else:
        have = listed([f"{c.about} ({c.name})" for c in study.runs.species().values()]) or "none"
        do = (
            f"{nearest(first, known)} Measured are {have}. Declare the column that gives it, a "
            f"[conditions.{first}] value, or how it follows from others under [derived]."
        ).lstrip()
    raise DiscrimError(
        f'the law of "{law.name}" contains {listed(missing)}, which no column measures',
        place=place,
        do=do,
    )


def unused_constants(study: Study, names: set[str]) -> tuple[str, ...]:
    """Entries of ``[constants]`` that are in no law; ``names`` are the constants of all laws."""
    used = set(names)
    for d in study.derived:
        used |= {symbol.name for symbol in d.formula.free_symbols}
    return tuple(name for name in study.constants if name not in used)


def unit_of_species(study: Study, species: str) -> Unit:
    """Internal unit of the amount of a species.

    A species that nothing measures (a product, an intermediate) is given the unit of the first
    measured one.
    """
    measured = study.runs.species()
    if species in measured:
        return measured[species].unit
    for d in study.derived:
        if d.name == species and d.unit is not None:
            return d.unit
    return next(iter(measured.values())).unit if measured else Unit()


def to_shown(column: Any, values: Any) -> Any:
    """Internal values of a :class:`discrim.runs.model.Column` in the units its user wrote."""
    return parse_unit(column.shown).from_internal(np.asarray(values, dtype=float), column.unit)
