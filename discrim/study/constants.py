"""``[constants]``: what the user knows or demands of the constants of the laws."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.build import listed
from discrim.runs.errors import half_a_digit, parse_error
from discrim.study.model import ConstantSetting
from discrim.study.node import Node
from discrim.units import Quantity, Unit, UnitSet, check_size, parse_quantity

KEYS = ("value", "error", "fixed", "start", "at_least", "at_most", "per", "note")
_VALUES = ("value", "start", "at_least", "at_most")


@dataclass(frozen=True, slots=True)
class WrittenConstant:
    """One entry with its quantities read, before internal units are known."""

    name: str
    node: Node
    quantities: Mapping[str, Quantity]

    @property
    def unit(self) -> Quantity | None:
        """The first quantity that says a unit."""
        for quantity in self.quantities.values():
            if quantity.unit.text:
                return quantity
        return None


def read_constants(table: Node) -> tuple[WrittenConstant, ...]:
    """The entries with keys and combinations of keys checked."""
    out = []
    for name in table.data:
        node = table.table(name, f'constant "{name}"')
        node.check_keys(KEYS)
        out.append(
            WrittenConstant(
                name,
                node,
                {
                    key: parse_quantity(node.quantity_text(key), node.place(key))
                    for key in _VALUES
                    if key in node.data
                },
            )
        )
        _check_combination(node)
    return tuple(out)


def _check_combination(node: Node) -> None:
    known = "value" in node.data
    if known and not node.flag("fixed") and "error" not in node.data:
        raise node.error(
            "a value without fixed and without error",
            "Write fixed = true if it is exact, its error if it is uncertain, or start = to have "
            "it estimated from there.",
            "value",
        )
    if node.flag("fixed") and "error" in node.data:
        raise node.error("a fixed value has no error", "Take out one of the two.", "error")
    for key in ("fixed", "error"):
        if key in node.data and not known and node.data[key] is not False:
            raise node.error(f'"{key}" needs a value', 'Write value = "...".', key)
    for key in ("start", "at_least", "at_most", "per"):
        if key in node.data and known:
            raise node.error(
                f'"{key}" belongs to a constant that is estimated, but this one has a value',
                "Take out one of the two.",
                key,
            )


def settings(
    written: Sequence[WrittenConstant], units: UnitSet, columns: Sequence[str]
) -> dict[str, ConstantSetting]:
    """The entries in internal units; ``columns`` are those of the table, for ``per``."""
    out: dict[str, ConstantSetting] = {}
    for w in written:
        named = w.unit
        unit = units.unit(named.unit) if named else None
        numbers = {key: _internal(q, unit, w, key) for key, q in w.quantities.items()}
        for key, number in numbers.items():
            check_size(number, w.quantities[key].number, w.node.place(key))
        sd, bound = _error(w, unit, numbers.get("value", 0.0))
        per = w.node.text("per") or None
        if per is not None and per not in columns:
            raise w.node.error(
                f'the table has no column "{per}"',
                f"{nearest(per, columns)} It has {listed(columns)}.".lstrip(),
                "per",
            )
        _check_order(w.node, numbers)
        out[w.name] = ConstantSetting(
            w.name,
            numbers.get("value"),
            sd,
            bound,
            numbers.get("start"),
            numbers.get("at_least"),
            numbers.get("at_most"),
            per,
            unit,
            named.unit.text if named else "",
            w.node.place(key=True),
        )
    return out


def _internal(q: Quantity, unit: Unit | None, w: WrittenConstant, key: str) -> float:
    if unit is None:
        return q.value
    if not q.unit.text:
        raise w.node.error(
            f'"{q.number}" has no unit, but the constant has one elsewhere',
            "Write the unit with each of its numbers.",
            key,
        )
    if not q.unit.fits(unit):
        raise w.node.error("the units of its numbers do not fit one another", "", key)
    return q.internal(unit)


def _check_order(node: Node, numbers: Mapping[str, float]) -> None:
    low = numbers.get("at_least", -math.inf)
    high = numbers.get("at_most", math.inf)
    if low >= high:
        raise node.error("at_least is not below at_most", "Exchange them.", "at_least")
    start = numbers.get("start")
    if start is not None and not low <= start <= high:
        raise node.error("start is not between at_least and at_most", "", "start")


def _error(w: WrittenConstant, unit: Unit | None, value: float) -> tuple[float, float | None]:
    """Standard deviation and, for hard limits, the half-width; internal units."""
    if "error" not in w.node.data:
        return 0.0, None

    def locate(path: tuple[str | int, ...]) -> Place | None:
        return w.node.place("error", *path)

    variance, bound = 0.0, 0.0
    hard = True
    for piece in parse_error(w.node.data["error"], w.node.place("error"), locate):
        if piece.how in ("replicates", "column") or piece.shared_by:
            words = f'"{piece.how}"' if not piece.shared_by else '"shared_by"'
            raise DiscrimError(
                f"{words} does not fit a constant",
                place=piece.place,
                do='State its error, for example "0.02" or "3 %".',
            )
        if piece.how == "digits":
            number = w.quantities["value"]
            half = half_a_digit([number.number])
            if unit is not None:
                half *= number.unit.factor(unit)
        else:
            sizes = [
                t.value * abs(value) if t.percent else _size(t, unit, w, piece.place)
                for t in piece.terms
            ]
            half = sum(sizes) if piece.how == "limits" else math.hypot(*sizes)
        if piece.how in ("digits", "limits"):
            bound += half
            variance += half**2 / 3
        elif piece.how != "exact":
            hard = False
            variance += half**2
    return math.sqrt(variance), bound if hard and bound > 0 else None


def _size(term: Quantity, unit: Unit | None, w: WrittenConstant, place: Place | None) -> float:
    if unit is None and not term.unit.text:
        return term.value
    if unit is None or not term.unit.fits(unit):
        raise DiscrimError(
            f'the error of "{w.name}" and its value are in different units',
            place=place,
            do="Units of the same kind, or a percentage, are needed.",
        )
    return term.value * term.unit.factor(unit)
