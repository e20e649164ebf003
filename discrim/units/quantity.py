"""Numbers and quantities in text: ``0.600``, ``2.5 mmol/L``, ``1 % + 0.02 umol/L/s``."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from discrim.errors import DiscrimError, Place
from discrim.units.model import ParsedUnit, Unit
from discrim.units.read import parse_unit

_NUMBER = re.compile(r"[-+−]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+−]?\d{1,4})?", re.ASCII)


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit, as written; ``number`` keeps its digits."""

    value: float
    number: str
    unit: ParsedUnit
    percent: bool = False  # of something else: ``value`` is then the fraction

    def internal(self, unit: Unit) -> float:
        return float(self.unit.to_internal(self.value, unit))


def parse_number(text: str, place: Place | None = None) -> float:
    """A finite decimal number; messages name decimal commas, nan and overflow."""
    clean = text.strip()
    if _NUMBER.fullmatch(clean):
        value = float(clean.replace("−", "-"))
        if math.isfinite(value) and (value or not _digits(clean)):
            return value
        if not value:
            raise DiscrimError(
                f'"{_short(clean)}" is too small for a number',
                place=place,
                do="Write 0 if that is meant, or use other units.",
            )
        raise DiscrimError(
            f'"{_short(clean)}" is too large for a number', place=place, do="Use other units."
        )
    if re.fullmatch(r"[-+−]?\d{1,3}(,\d{3})+(\.\d+)?|[-+−]?\d*,\d+(?:[eE][-+−]?\d+)?", clean):
        raise DiscrimError(
            f'"{_short(clean)}" has a comma in a number',
            place=place,
            do="Write decimals with a point (0.5, not 0,5) and no separators of thousands.",
        )
    if re.fullmatch(r"[-+−]?(?:nan|inf(?:inity)?|n/?a|null|none)", clean, re.IGNORECASE):
        raise DiscrimError(
            f'"{clean}" is not a measured value',
            place=place,
            do="Leave the cell empty where a rate is not measured yet; else give the number.",
        )
    raise DiscrimError(f'"{_short(clean)}" stands where a number belongs', place=place)


def parse_quantity(text: str, place: Place | None = None, *, percent: bool = False) -> Quantity:
    """A number and a unit, ``2.5 mmol/L``; with ``percent`` also ``5 %`` (of something else)."""
    clean = text.strip()
    match = _NUMBER.match(clean)
    rest = clean[match.end() :] if match else ""
    if match is None or rest[:1] in (",", "_") or rest[:1].isdigit():
        do = f'Write a number and its unit, for example "{"5 %" if percent else "2.5 mmol/L"}".'
        try:
            parse_number(clean.split(" ")[0] if clean else "", place)
        except DiscrimError as error:
            raise DiscrimError(error.says, place=place, do=error.do or do) from None
        raise DiscrimError(f'"{_short(clean)}" is no number with a unit', place=place, do=do)
    value = parse_number(match[0], place)
    unit = rest.strip()
    if unit == "%" and percent:
        return Quantity(value / 100, match[0], ParsedUnit("%", place=place), percent=True)
    return Quantity(value, match[0], parse_unit(unit, place))


def parse_sum(text: str, place: Place | None = None) -> tuple[Quantity, ...]:
    """Terms joined by ``+``: ``1 % + 0.02 umol/L/s``."""
    return tuple(
        parse_quantity(term, place, percent=True) for term in re.split(r"\s\+\s", text.strip())
    )


# Squares and products of a few such numbers still fit into double precision (IEEE 754: 1e±308).
MAX_DECADES = 60


def check_size(value: float, text: str, place: Place | None = None) -> None:
    """Refuse a number that is too large or too small to compute with."""
    size = abs(value)
    if size == 0 or 10.0**-MAX_DECADES <= size <= 10.0**MAX_DECADES:
        return
    raise DiscrimError(
        f'"{text}" is too {"small" if size < 1 else "large"} to compute with',
        place=place,
        do=f"Numbers lie between 1e-{MAX_DECADES} and 1e{MAX_DECADES} in the units of the study, "
        "or are 0. Check the exponent, or use other units.",
    )


def _digits(text: str) -> bool:
    """Whether a digit other than 0 stands before the exponent."""
    return any(ch in "123456789" for ch in text.lower().partition("e")[0])


def _short(text: str, most: int = 40) -> str:
    return text if len(text) <= most else text[:most] + "…"
