"""Observed columns that were worked out from other columns: ``computed_from = "..."``.

The rate in a stirred tank, (A_in - A)/tau, holds the concentration A that its rate law holds too: one
error of A moves both. Taking them as independent claims dependences that are not there, so the formula
goes with the column to wherever errors are propagated (`weigh.bench`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import sympy

from discrim.errors import DiscrimError
from discrim.ratelaw.model import amount, quantity
from discrim.runs.columns import OBSERVATIONS, Declaration
from discrim.runs.model import Role, Runs
from discrim.study.formulas import Names, substitutions, unit_of
from discrim.study.model import Computed, ConstantSetting, Derived
from discrim.study.node import Node
from discrim.units import Unit, parse_number, parse_unit

# a table value and the value of its formula that differ by more than this fraction are pointed out
DIFFERS = 0.01


def read_computed(
    root: Node,
    declared: Sequence[Declaration],
    names: Names,
    derived: Sequence[Derived],
    constants: Mapping[str, ConstantSetting],
    units: Mapping[str, Unit],
) -> dict[str, Computed]:
    """The formulas of the observed columns that have one, in columns and known constants alone.

    Raises
    ------
    DiscrimError
        For a formula of a column that is not observed, a name that nothing gives a value to, units
        that do not fit those of the column.
    """
    table = root.table("columns", "columns")
    out: dict[str, Computed] = {}
    for d in declared:
        if not d.computed_from:
            continue
        node = table.table(d.name, f'column "{d.name}"')
        place = node.place("computed_from")
        if d.role not in OBSERVATIONS:
            raise DiscrimError(
                f'"{d.name}" is not observed, so it is not computed here',
                place=place,
                do=f'Give the formula under [derived]: "{d.name}" = {{ formula = "..." }}.',
            )
        formula = names.parse(d.computed_from, place, substitutions(derived))
        given = set(names.units)
        for s in sorted(formula.free_symbols, key=str):
            setting = constants.get(s.name)
            if s in given or (setting is not None and setting.value is not None):
                continue
            raise DiscrimError(
                f'"{s.name.strip("[]{}")}" in the formula of "{d.name}" has no value in the runs',
                place=place,
                do="It can hold columns, [conditions], [derived] quantities of these, and "
                "[constants] with a value.",
            )
        known: dict[Any, Unit | None] = dict(names.units)
        known |= {s: c.unit for s in formula.free_symbols if (c := constants.get(s.name))}
        found = unit_of(formula, known)
        if found is not None and d.unit is not None and found != units[d.name]:
            has = "has no unit" if found.is_dimensionless else f"is in {found.text()}"
            raise DiscrimError(
                f'the formula {has}, "{d.name}" is in {d.unit.text or "1 (no unit)"}',
                place=place,
                do="Mend the formula, or the units of the column.",
            )
        out[d.name] = Computed(d.name, formula, d.computed_from, place)
    return out


def values_from(
    computed: Mapping[str, Computed],
    declared: Sequence[Declaration],
    constants: Mapping[str, ConstantSetting],
) -> dict[str, Callable[[Mapping[str, np.ndarray]], np.ndarray]]:
    """For each computed column its values, shape (N,), from those of the other columns."""
    column_of = {
        amount(d.about) if d.role is Role.SPECIES else quantity(d.name): d.name for d in declared
    }

    def made(one: Computed) -> Callable[[Mapping[str, np.ndarray]], np.ndarray]:
        def values(columns: Mapping[str, np.ndarray]) -> np.ndarray:
            symbols = sorted(one.formula.free_symbols, key=str)
            given = [
                columns[column_of[s]] if s in column_of else constants[s.name].value
                for s in symbols
            ]
            n = len(next(iter(columns.values())))
            # neutral names: code is generated from the formula, and names are the user's
            plain = [sympy.Dummy(f"x{k}") for k in range(len(symbols))]
            f = sympy.lambdify(
                plain, one.formula.xreplace(dict(zip(symbols, plain, strict=True))), "numpy"
            )
            with np.errstate(all="ignore"):
                out = np.broadcast_to(np.asarray(f(*given), float), (n,)).copy()
            out[~np.isfinite(out)] = np.nan
            return out

        return values

    return {name: made(one) for name, one in computed.items()}


def other_values(runs: Runs, computed: Mapping[str, Computed]) -> list[str]:
    """Findings where the table holds other values than the formula gives."""
    out = []
    for name in computed:
        column = runs.find(name)
        if not column.in_table:
            continue
        factor = parse_unit(column.shown).factor(column.unit) if column.shown else 1.0
        shown = np.array([_number(text) for text in column.labels]) * factor
        with np.errstate(invalid="ignore"):
            size = np.maximum(np.abs(shown), np.abs(column.values))
            far = np.flatnonzero(np.abs(shown - column.values) > DIFFERS * size)
        if len(far):
            listed = ", ".join(runs.labels[int(i)] for i in far[:5])
            more = f" and {len(far) - 5} more" if len(far) > 5 else ""
            out.append(
                f'The cells of "{name}" differ from its formula by more than {100 * DIFFERS:g} % in '
                f"run {listed}{more}; the values of the formula are used."
            )
    return out


def _number(text: str) -> float:
    try:
        return parse_number(text)
    except DiscrimError:
        return float("nan")
