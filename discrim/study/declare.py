"""``[columns]`` and ``[conditions]``: what the study says of the table, and leaves unsaid."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, Place
from discrim.runs.build import require_column
from discrim.runs.columns import (
    CONDITIONS,
    OBSERVATIONS,
    Declaration,
    check_supported,
    parse_is,
)
from discrim.runs.errors import KEYS as ERROR_KEYS
from discrim.runs.errors import Piece, parse_error
from discrim.runs.model import Role, Runs
from discrim.runs.read import RawTable
from discrim.study.node import Node
from discrim.units import ParsedUnit, parse_quantity, parse_unit

KINDS = frozenset(
    {"amount", "volume", "mass", "time", "pressure", "temperature", "length", "area", "energy"}
)
_ONE_ONLY = (Role.RUN, Role.RUN_ORDER, Role.TEMPERATURE, Role.PH, Role.IONIC_STRENGTH)


def columns(root: Node, raw: RawTable) -> list[Declaration]:
    """``[columns.X]``: each must be in the table and say what it is."""
    table = root.table("columns", "columns")
    helpers = _error_columns(root)
    out = []
    for name in table.data:
        node = table.table(name, f'column "{name}"')
        node.check_keys(("is", "units", "error", "computed_from", "note"))
        if "computed_from" not in node.data:
            require_column(raw, name, node.place(key=True))
        if "is" in node.data:
            role, about = parse_is(node.needed("is"), node.place("is"))
            check_supported(role, about, node.place("is"))
        elif name in helpers:
            role, about = Role.IGNORED, ""
        else:
            raise node.error(
                f'"is" is missing: what is the column "{name}"?',
                'Write for example is = "rate of P", or is = "A" for the amount of a species.',
                key=True,
            )
        unit = None
        if "units" in node.data:
            written = node.text("units")
            if role is Role.CONVERSION and written.strip() == "%":
                written = "mol %"  # of what, there is no doubt
            unit = parse_unit(written, node.place("units"))
        out.append(
            Declaration(
                name,
                role,
                about,
                unit,
                node.data.get("error"),
                None,
                node.place("is") if "is" in node.data else node.place(key=True),
                node.place("units"),
                node.place("error"),
                node.needed("computed_from") if "computed_from" in node.data else "",
                node.place("computed_from") if "computed_from" in node.data else None,
            )
        )
    return out


def _error_columns(root: Node) -> set[str]:
    """Names of columns that some ``error = { column = ... }`` points at."""
    out: set[str] = set()
    for data in root.data.get("columns", {}).values():
        error = data.get("error") if isinstance(data, dict) else None
        for part in error if isinstance(error, list) else [error]:
            if isinstance(part, dict) and isinstance(part.get("column"), str):
                out.add(part["column"])
    return out


def conditions(root: Node, raw: RawTable) -> list[Declaration]:
    """``[conditions.X]``: one value for all runs; without ``is`` the amount of species X."""
    table = root.table("conditions", "conditions")
    out = []
    for name in table.data:
        node = table.table(name, f'condition "{name}"')
        node.check_keys(("is", "value", "error", "note"))
        if name in raw.names:
            raise node.error(
                f'"{name}" is a column of the table too',
                "Declare the column, or give the condition another name.",
                key=True,
            )
        where = node.place("is") if "is" in node.data else node.place(key=True)
        role, about = parse_is(node.text("is") or name, where)
        check_supported(role, about, where)
        if role not in CONDITIONS:
            raise node.error(
                f'"{role.value} {about}'.strip() + '" cannot be the same in all runs',
                "Only conditions can: an amount, a temperature, a pH, an ionic strength.",
                key=True,
            )
        if "value" not in node.data:
            raise node.error(
                f'the condition "{name}" has no value', 'Write value = "2.5 mmol/L".', key=True
            )
        value = parse_quantity(node.quantity_text("value"), node.place("value"))
        out.append(
            Declaration(
                name,
                role,
                about,
                value.unit,
                node.data.get("error"),
                value,
                node.place("value"),
                node.place("value"),
                node.place("error"),
            )
        )
    return out


def check_declared(declared: Sequence[Declaration], root: Node) -> None:
    """One column a species, units of the right kind, something observed."""
    seen: dict[tuple[Role, str], Declaration] = {}
    for d in declared:
        alone = d.role in _ONE_ONLY or bool(d.about)
        if alone and (first := seen.setdefault((d.role, d.about), d)) is not d:
            words = d.about if d.role is Role.SPECIES else f"{d.role.value} {d.about}".strip()
            raise DiscrimError(
                f'both "{first.name}" and "{d.name}" are {words}',
                place=d.place,
                do="Each can have one column; leave the other undeclared.",
            )
        _check_unit(d)
    if not any(d.role in OBSERVATIONS for d in declared):
        raise DiscrimError(
            "no column is a rate",
            place=root.place("columns", key=True),
            do='Declare the observed column, for example [columns.rate] is = "rate of P".',
        )


def _check_unit(d: Declaration) -> None:
    powers: Mapping[str, Any] = d.unit.exponents() if d.unit is not None else {}
    text = d.unit.text if d.unit is not None else ""
    if d.role is Role.TEMPERATURE and powers != {"temperature": 1}:
        raise DiscrimError(f'a temperature in "{text}"', place=d.unit_place, do="Write K or °C.")
    if d.role is Role.PH and powers:
        raise DiscrimError(f'a pH in "{text}"', place=d.unit_place, do="A pH has no units.")
    # A unit of the user's own may hold a time; one of known kinds alone can be judged.
    if d.role in OBSERVATIONS and powers and powers.keys() <= KINDS and powers.get("time", 0) >= 0:
        words = f"{d.role.value} {d.about}"
        raise DiscrimError(
            f'the {words} in "{text}", which is not per time',
            place=d.unit_place,
            do="Write for example mol/L/s, mol/(kg s), kPa/min, or 1/s for a k_obs. If it is an "
            f'amount, it is not "{words}".',
        )
    if d.role in (Role.SPECIES, Role.TOTAL) and "time" in powers:
        raise DiscrimError(
            f'the amount of {d.about} in "{text}"',
            place=d.unit_place,
            do="A concentration, partial pressure or fraction is needed. A rate is "
            f'"rate of {d.about}"; flows are not yet supported.',
        )


def pieces(d: Declaration, root: Node) -> tuple[Piece, ...] | None:
    """The ``error`` of a declaration as read; None where the study gives none."""
    if d.error is None:
        return None
    section = "columns" if d.value is None else "conditions"
    what = f'{section.rstrip("s")} "{d.name}"'

    def locate(path: tuple[str | int, ...]) -> Place:
        unknown = isinstance(path[-1], str) and path[-1] not in ERROR_KEYS
        return root.doc.place((section, d.name, "error", *path), key=unknown, what=what)

    return parse_error(d.error, d.error_place, locate)


def units_in_order(declared: Sequence[Declaration]) -> list[ParsedUnit]:
    """Species first, then rates, then the rest: the first that uses a kind gives it its size."""

    def rank(d: Declaration) -> int:
        if d.role is Role.SPECIES:
            return 0 if d.value is None else 1
        return 2 if d.role in OBSERVATIONS else 3

    return [
        d.unit
        for d in sorted(declared, key=rank)
        if d.unit is not None and d.role is not Role.IGNORED
    ]


def findings(runs: Runs, declared: Sequence[Declaration]) -> list[str]:
    """What was assumed where the study is silent, in full sentences."""
    out = []
    for d in declared:
        needs = d.role in OBSERVATIONS or d.role in (Role.SPECIES, Role.TOTAL, Role.CATALYST)
        if needs and (d.unit is None or not d.unit.text):
            out.append(
                f'The units of "{d.name}" are not stated; its numbers are taken as they are.'
            )
        if d.value is not None and not _says_shared(d.error):
            out.append(
                f'The condition "{d.name}" has one value for all runs, so one error is taken to be '
                "shared by all of them."
            )
    for column in runs.observations():
        empty = int(np.count_nonzero(~np.isfinite(column.values)))
        if empty:
            out.append(
                f'"{column.name}" is empty in {empty} of {runs.n} runs; they count as planned, not '
                "as measured."
            )
    return out


def _says_shared(error: Any) -> bool:
    if isinstance(error, list):
        return all(_says_shared(part) for part in error)
    if isinstance(error, dict):
        return "shared_by" in error
    return bool(isinstance(error, str) and re.fullmatch(r"exact|0", error.strip())) or error == 0
