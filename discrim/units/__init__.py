"""Units: one internal, coherent set a study, and conversion where files are read and written.

A :class:`Unit` is a product of powers of *kinds* (amount, volume, pressure, ...). Volume, area and
length are kept apart, since a chemist's litre is no cubed length. Each kind has one internal size
in a study, taken from the first column that uses it (:class:`UnitSet`), so that constants come out
in the user's own units. Factors and dimensions of single units come from pint; the grammar is ours.
"""

from discrim.units.model import Base, ParsedUnit, Unit, UnitSet
from discrim.units.quantity import (
    MAX_DECADES,
    Quantity,
    check_size,
    parse_number,
    parse_quantity,
    parse_sum,
)
from discrim.units.read import parse_unit

__all__ = [
    "MAX_DECADES",
    "Base",
    "ParsedUnit",
    "Quantity",
    "Unit",
    "UnitSet",
    "check_size",
    "parse_number",
    "parse_quantity",
    "parse_sum",
    "parse_unit",
]
