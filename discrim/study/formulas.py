"""Formulas of the study: what the names in them mean, derived quantities, units of results."""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import sympy

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.expression import parse_expression, size_of
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol, quantity
from discrim.runs.columns import CONDITIONS, OBSERVATIONS, Declaration, check_species
from discrim.runs.model import Role
from discrim.study.model import Derived
from discrim.study.node import Node
from discrim.units import ParsedUnit, Unit, UnitSet, parse_unit

MAX_SIZE = 2_000  # signs and symbols of a formula written out; formulas in use have a few dozen
MAX_DEPTH = 30  # a root of a sum of products is four deep
_NAME = re.compile(r"[^\W\d]\w*")
_BRACKETED = re.compile(r"\[([^\[\]]+)\]")


@dataclass(frozen=True, slots=True)
class Names:
    """What the names in a formula or law mean, from the columns and conditions of the study.

    Attributes
    ----------
    quantities : name -> symbol, for :func:`discrim.ratelaw.expression.parse_expression`
    units : symbol -> internal unit
    undeclared : columns of the table that the study does not declare
    observed : columns that are observations
    """

    quantities: Mapping[str, Any]
    units: Mapping[Any, Unit]
    undeclared: tuple[str, ...]
    observed: tuple[str, ...]

    def parse(
        self,
        text: str,
        place: Place,
        more: Mapping[str, Any] | None = None,
        *,
        grouped: Collection[str] = (),
    ) -> Any:
        """The expression; an undeclared or observed column in it is refused."""
        meaning = {**self.quantities, **(more or {})}
        expression = parse_expression(text, place, meaning, grouped=grouped)
        for symbol in sorted(expression.free_symbols, key=str):
            if symbol.name in self.undeclared:
                raise DiscrimError(
                    f'"{symbol.name}" is a column of the table that the study does not declare',
                    place=place,
                    do=f"Say what it is under [columns.{symbol.name}], or, if a constant is meant, "
                    "give the constant another name.",
                )
            if symbol.name in self.observed:
                raise DiscrimError(
                    f'"{symbol.name}" is the observed rate; it cannot stand in a formula',
                    place=place,
                )
        return expression


def names_of(
    declared: Sequence[Declaration], table: Sequence[str], units: Mapping[str, Unit]
) -> Names:
    """From the declarations; ``units`` are the internal units by name of column or condition."""
    quantities: dict[str, Any] = {}
    by_symbol: dict[Any, Unit] = {}
    known = {d.name for d in declared}
    for d in declared:
        if d.role in CONDITIONS or d.role is Role.TIME_ON_STREAM:
            symbol = amount(d.about) if d.role is Role.SPECIES else quantity(d.name)
            quantities[d.name] = symbol
            by_symbol[symbol] = units[d.name]
    for d in declared:
        # "pH" and "temperature" are understood whatever their column is called.
        if d.role in (Role.PH, Role.TEMPERATURE, Role.CATALYST) and d.role.value not in quantities:
            quantities[d.role.value] = quantity(d.name)
    return Names(
        quantities,
        by_symbol,
        tuple(name for name in table if name not in known),
        tuple(d.name for d in declared if d.role in OBSERVATIONS),
    )


def parse_derived(
    table: Node,
    names: Names,
    units: UnitSet,
    parsed_units: Mapping[str, ParsedUnit | None],
    constant_units: Mapping[str, Unit | None],
    measured: Sequence[str],
) -> tuple[Derived, ...]:
    """The ``[derived]`` quantities, each in terms of columns and constants alone.

    A formula without dimension whose ``units`` have one (``10^(-pH)`` in mol/L) gives numbers in
    those units and is brought to internal ones; any other formula computes in internal units, and
    its ``units`` must be of the same kind.

    Raises
    ------
    DiscrimError
        For a name that is a measured species too, formulas that need each other in a circle, units
        that do not fit.
    """
    texts = {name: table.table(name).needed("formula") for name in table.data}
    done: dict[str, Derived] = {}

    def put(name: str, above: tuple[str, ...]) -> None:
        if name in done:
            return
        node = table.table(name, f'derived quantity "{name}"')
        place = node.place("formula")
        if name in above:
            circle = " -> ".join((*above[above.index(name) :], name))
            raise DiscrimError(f"formulas need each other in a circle: {circle}", place=place)
        text = texts[name]
        mentioned = {m.strip() for m in _BRACKETED.findall(text)} | set(_NAME.findall(text))
        for other in texts:
            if other in mentioned and not (other == name and other in names.quantities):
                put(other, (*above, name))
        expression = names.parse(text, place, substitutions(done.values()))
        size, depth = size_of(expression)
        if size > MAX_SIZE or depth > MAX_DEPTH:
            raise DiscrimError(
                "the formula is too long or too deep once the others are put into it",
                place=place,
                do="Use fewer derived quantities inside one another.",
            )
        unit, factor = _unit(expression, node, units, parsed_units[name], names, constant_units)
        done[name] = Derived(name, expression * factor, text, unit, node.place(key=True))

    for name in texts:
        check_species(name, table.place(name, key=True))
        if name in measured:
            raise table.error(
                f'"{name}" is both measured and derived',
                "Take out the formula, or give one of them another name.",
                name,
                key=True,
            )
        if name in names.quantities:
            raise table.error(
                f'"{name}" is a column and a derived quantity',
                "Give the derived quantity another name.",
                name,
                key=True,
            )
        put(name, ())
    return _one_symbol_each([done[name] for name in texts])


def substitutions(derived: Any) -> dict[str, Any]:
    """Names of derived quantities, bare and in brackets, with what they stand for."""
    out: dict[str, Any] = {}
    for d in derived:
        out[f"[{d.name}]"] = d.formula
        if _NAME.fullmatch(d.name):
            out[d.name] = d.formula
    return out


def bare_names(derived: Sequence[Derived]) -> dict[str, Any]:
    """In a law a derived quantity stays a symbol, whether written bare or in brackets."""
    return {d.name: amount(d.name) for d in derived if _NAME.fullmatch(d.name)}


def _one_symbol_each(derived: list[Derived]) -> tuple[Derived, ...]:
    """One symbol for a constant that is an exponent in one formula and a factor in another."""
    changes = harmonised([d.formula for d in derived])
    return tuple(
        Derived(d.name, d.formula.xreplace(changes), d.text, d.unit, d.place) for d in derived
    )


def harmonised(expressions: Sequence[Any]) -> dict[Any, Any]:
    """Replacements so that one name is one symbol: free in sign if it is an exponent anywhere."""
    by_name: dict[str, set[Any]] = {}
    for expression in expressions:
        for symbol in expression.free_symbols:
            by_name.setdefault(symbol.name, set()).add(symbol)
    return {
        symbol: constant_symbol(name, ConstantKind.ORDER)
        for name, symbols in by_name.items()
        if len(symbols) > 1
        for symbol in symbols
    }


# --- units of formulas ---------------------------------------------------------------------------


def _unit(
    expression: Any,
    node: Node,
    units: UnitSet,
    stated: ParsedUnit | None,
    names: Names,
    constant_units: Mapping[str, Unit | None],
) -> tuple[Unit | None, Any]:
    """Internal unit of a formula, and the factor that brings it there."""
    known: dict[Any, Unit | None] = dict(names.units)
    for symbol in expression.free_symbols:
        if symbol not in known:
            known[symbol] = constant_units.get(symbol.name)
    computed = unit_of(expression, known)
    if stated is None:
        return computed, sympy.Integer(1)
    wanted = units.unit(stated)
    if computed is None or computed == wanted:
        return wanted, sympy.Integer(1)
    if computed.is_dimensionless:
        return wanted, sympy.Rational(*Fraction(repr(stated.factor(wanted))).as_integer_ratio())
    raise node.error(
        f'the formula is in {computed.text()}, "units" says {stated.text}',
        "Mend the formula or its units.",
        "units",
    )


def unit_of(expression: Any, units: Mapping[Any, Unit | None]) -> Unit | None:
    """Unit of an expression, None where it is not determined.

    In a sum the first term with a known unit that is not a bare number decides.
    """
    if expression.is_Number or not expression.free_symbols:
        return Unit()
    if expression.is_Symbol:
        return units.get(expression)
    if expression.is_Add:
        found = [unit_of(a, units) for a in expression.args if a.free_symbols]
        known = [u for u in found if u is not None]
        return known[0] if known else None
    if expression.is_Mul:
        total = Unit()
        for arg in expression.args:
            part = unit_of(arg, units)
            if part is None:
                return None
            total = total * part
        return total
    if expression.is_Pow:
        base, exponent = expression.args
        part = unit_of(base, units)
        if part is None or part.is_dimensionless:
            return part
        if exponent.is_Rational:
            return part ** Fraction(int(exponent.p), int(exponent.q))
        return None
    return Unit()  # exp, log and the like are numbers


def derived_units(table: Node) -> dict[str, ParsedUnit | None]:
    """Stated units of the ``[derived]`` quantities, and a check of their keys."""
    out: dict[str, ParsedUnit | None] = {}
    for name in table.data:
        node = table.table(name, f'derived quantity "{name}"')
        node.check_keys(("formula", "units", "note"))
        out[name] = (
            parse_unit(node.text("units"), node.place("units")) if "units" in node.data else None
        )
    return out
