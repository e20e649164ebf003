"""``[report_constants]``: quantities of the constants that the user wants with their intervals."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from discrim.errors import DiscrimError, Place, nearest
from discrim.ratelaw.model import quantity
from discrim.runs.build import listed
from discrim.runs.columns import OBSERVATIONS, Declaration
from discrim.runs.model import Role
from discrim.study.formulas import Names, substitutions
from discrim.study.model import ConstantSetting, Derived, Reported
from discrim.study.node import Node
from discrim.study.questions import read_at
from discrim.units import Unit, parse_unit

KEYS = ("formula", "at", "units", "note")
RATE = "rate"
MOST = 100  # each is a search of its own in each candidate


def observed_symbol(column: str) -> Any:
    """What stands in a formula for what a law says of an observed column."""
    return quantity(f"observed {column}")


def read_reported(
    table: Node,
    names: Names,
    declared: Sequence[Declaration],
    derived: Sequence[Derived],
    constants: Mapping[str, ConstantSetting],
    units: Mapping[str, Unit],
) -> tuple[Reported, ...]:
    """The quantities asked for; ``units`` are the internal units by name of column or condition.

    A formula holds constants, amounts and conditions that ``at`` names, and the word ``rate``, which
    is what the law of each candidate says of the rate column at these conditions; other observed
    columns stand by their name.

    Raises
    ------
    DiscrimError
        For keys, formulas and conditions that cannot be read, and species that nothing measures.
    """
    if len(table.data) > MOST:
        raise table.error(f"{len(table.data)} quantities to report", f"At most {MOST} are read.")
    observed = {d.name: observed_symbol(d.name) for d in declared if d.role in OBSERVATIONS}
    meaning = {**substitutions(derived), **observed}
    if observed and RATE not in observed:
        meaning[RATE] = next(iter(observed.values()))
    grouped = [name for name, setting in constants.items() if setting.per is not None]
    given = {(d.about if d.role is Role.SPECIES else d.name) for d in declared}
    measured = sorted(d.about for d in declared if d.role is Role.SPECIES)
    out = []
    for name in table.data:
        simple = isinstance(table.data[name], str)
        node = table if simple else table.table(name, f'quantity "{name}"')
        if not simple:
            node.check_keys(KEYS)
        key = name if simple else "formula"
        text, place = node.needed(key), node.place(key)
        formula = names.parse(text, place, meaning, grouped=grouped)
        for symbol in sorted(formula.free_symbols, key=str):
            species = symbol.name[1:-1]
            if symbol.name.startswith("[") and species not in given:
                raise DiscrimError(
                    f'"{species}" is no species that the runs give the amount of',
                    place=_at_characters(place, symbol.name),
                    do=f"{nearest(species, measured)} Measured are {listed(measured)}.".lstrip(),
                )
        if not formula.free_symbols:
            raise DiscrimError(
                f'"{text}" holds no constant', place=place, do='Write for example "k_b/k_a".'
            )
        at_values = {} if simple else read_at(node, declared, units)
        written = {} if simple else node.table("at").data
        out.append(
            Reported(
                name,
                formula,
                text,
                at_values,
                {k: str(v) for k, v in written.items()},
                parse_unit(node.text("units"), node.place("units"))
                if not simple and "units" in node.data
                else None,
                place,
                node.place("units") if not simple and "units" in node.data else place,
                node.place("at") if not simple and "at" in node.data else place,
            )
        )
    return tuple(out)


def _at_characters(place: Place, text: str) -> Place:
    """The place of ``text`` inside the line of ``place``."""
    at = place.text.find(text, max(place.column - 1, 0))
    return place if at < 0 else replace(place, column=at + 1, length=len(text))
