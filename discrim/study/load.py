"""A study file -> :class:`~discrim.study.model.Study`, checked and in internal units."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.build import Exclusion, build_runs, listed, require_column
from discrim.runs.columns import (
    CONDITIONS,
    OBSERVATIONS,
    Declaration,
    check_supported,
    parse_is,
)
from discrim.runs.errors import Piece, parse_error
from discrim.runs.model import Role, Runs
from discrim.runs.read import RawTable, read_table
from discrim.study.candidates import read_candidates
from discrim.study.constants import read_constants, settings
from discrim.study.file import StudyFile, inside, read_toml
from discrim.study.formulas import derived_units, names_of, parse_derived
from discrim.study.model import Candidate, Derived, OtherEvidence, Study
from discrim.study.node import Node
from discrim.study.questions import read_questions
from discrim.units import ParsedUnit, UnitSet, parse_quantity, parse_unit

KEYS = (
    "title",
    "table",
    "sheet",
    "reactor",
    "columns",
    "conditions",
    "derived",
    "constants",
    "candidates",
    "questions",
    "exclude",
    "controls",
    "other_evidence",
    "confidence",
)
NOT_YET = ("runs", "window")
REACTORS = ("rates", "differential")
REACTORS_NOT_YET = ("stirred-tank", "batch", "semi-batch", "plug-flow")
DEFAULT_LEVEL = 0.95
_ONE_ONLY = (Role.RUN, Role.RUN_ORDER, Role.TEMPERATURE, Role.PH, Role.IONIC_STRENGTH)


def load(path: str | Path) -> Study:
    """Read and check a study.

    Parameters
    ----------
    path : of the study file; the table and mechanisms that it names lie in its folder or below

    Returns
    -------
    Study
        In the internal units of the study. ``findings`` hold what was assumed.

    Raises
    ------
    DiscrimError
        For anything wrong in the study or its table, with file, line and characters.
    """
    file = read_toml(Path(path), str(path))
    root = file.root
    root.check_keys(KEYS, NOT_YET)
    reactor = _reactor(root)
    raw = _table(file)
    declared = _columns(root, raw) + _conditions(root, raw)
    _check_declared(declared, root)
    errors = {d.name: _pieces(d, root) for d in declared}
    derived_table = root.table("derived", "derived quantities")
    written_derived = derived_units(derived_table)
    constants = read_constants(root.table("constants", "constants"))
    stated = [u for u in written_derived.values() if u is not None]
    stated += [w.unit.unit for w in constants if w.unit is not None]
    units = UnitSet.choose([*_units_in_order(declared), *stated])
    exclusions = _exclusions(root)
    runs = build_runs(raw, declared, errors, units, exclusions)
    by_name = {d.name: runs.find(d.name).unit for d in declared}
    names = names_of(declared, raw.names, by_name)
    known = settings(constants, units, raw.names)
    derived = parse_derived(
        derived_table,
        names,
        units,
        written_derived,
        {name: setting.unit for name, setting in known.items()},
        [d.about for d in declared if d.role is Role.SPECIES],
    )
    candidates = read_candidates(
        root.tables("candidates", "candidate"), names, derived, file.folder
    )
    _check_totals(declared, derived, candidates)
    questions, not_answered = read_questions(
        root.tables("questions", "question"), candidates, derived, declared, by_name
    )
    return Study(
        path=file.path,
        title=root.text("title") or file.path.stem,
        reactor=reactor,
        runs=runs,
        candidates=candidates,
        questions=questions,
        derived=derived,
        constants=known,
        controls=_controls(root),
        other_evidence=_other_evidence(root, candidates),
        level=_level(root),
        units=units,
        sha256=file.sha256,
        exclusions=tuple((e.words, e.reason) for e in exclusions),
        findings=(*_findings(runs, declared), *not_answered),
    )


def _reactor(root: Node) -> str:
    node = root.table("reactor", "reactor")
    node.check_keys(("kind", "note"))
    kind = node.text("kind", "rates")
    if kind in REACTORS_NOT_YET:
        raise node.error(
            f'the reactor "{kind}" is not yet supported',
            'Give rates, with kind = "rates", or "differential" for a bed at low conversion.',
            "kind",
        )
    if kind not in REACTORS:
        every = (*REACTORS, *REACTORS_NOT_YET)
        raise node.error(
            f'there is no reactor "{kind}"',
            f"{nearest(kind, every)} Known are {', '.join(every)}.".lstrip(),
            "kind",
        )
    return kind


def _table(file: StudyFile) -> RawTable:
    root = file.root
    written = root.needed("table", 'Name the table of runs: table = "runs.csv".')
    place = root.place("table")
    path = inside(file.folder, written, place)
    if not path.exists():
        raise DiscrimError(
            f'there is no table "{written}" in the folder of the study',
            place=place,
            do="Write the path relative to the folder of the study.",
        )
    sheet = root.needed("sheet") if "sheet" in root.data else None
    return read_table(path, sheet=sheet, shown=written)


# --- columns and conditions ----------------------------------------------------------------------


def _columns(root: Node, raw: RawTable) -> list[Declaration]:
    table = root.table("columns", "columns")
    helpers = _error_columns(root)
    out = []
    for name in table.data:
        node = table.table(name, f'column "{name}"')
        node.check_keys(("is", "units", "error", "note"))
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
            unit = parse_unit(node.text("units"), node.place("units"))
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


def _conditions(root: Node, raw: RawTable) -> list[Declaration]:
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


def _check_declared(declared: Sequence[Declaration], root: Node) -> None:
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
    if d.role in (Role.SPECIES, Role.TOTAL) and "time" in powers:
        raise DiscrimError(
            f'the amount of {d.about} in "{text}"',
            place=d.unit_place,
            do="A concentration, partial pressure or fraction is needed. A rate is "
            f'"rate of {d.about}"; flows are not yet supported.',
        )


def _pieces(d: Declaration, root: Node) -> tuple[Piece, ...] | None:
    if d.error is None:
        return None
    section = "columns" if d.value is None else "conditions"
    what = f'{section.rstrip("s")} "{d.name}"'

    def locate(path: tuple[str | int, ...]) -> Place:
        return root.doc.place((section, d.name, "error", *path), what=what)

    return parse_error(d.error, d.error_place, locate)


def _units_in_order(declared: Sequence[Declaration]) -> list[ParsedUnit]:
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


# --- the smaller tables --------------------------------------------------------------------------


def _exclusions(root: Node) -> tuple[Exclusion, ...]:
    out = []
    for node in root.tables("exclude", "exclusion"):
        node.check_keys(("where", "reason"))
        node.needed("reason", "An exclusion is listed in the report with its reason.")
        where = node.table("where")
        if not where.data:
            raise node.error(
                "which runs?", "Write where = { run = 3 }, or another column.", "where"
            )
        values: dict[str, tuple[Any, ...]] = {}
        for name, value in where.data.items():
            many = value if isinstance(value, list) else [value]
            if not many or any(
                isinstance(v, bool) or not isinstance(v, str | int | float) for v in many
            ):
                raise where.error("a text, a number or a list of them is needed", "", name)
            values[name] = tuple(many)
        out.append(Exclusion(values, node.text("reason"), node.place("where")))
    return tuple(out)


def _controls(root: Node) -> dict[str, str]:
    table = root.table("controls", "controls")
    out = {}
    for name, value in table.data.items():
        if isinstance(value, dict):
            node = table.table(name, f'control "{name}"')
            node.check_keys(("done",))
            out[name] = node.needed("done")
        else:
            out[name] = table.needed(name)
    return out


def _other_evidence(root: Node, candidates: Sequence[Candidate]) -> tuple[OtherEvidence, ...]:
    names = [c.name for c in candidates]
    out = []
    for node in root.tables("other_evidence", "other evidence"):
        node.check_keys(("says", "source", "against"))
        against = node.texts("against")
        for i, name in enumerate(against):
            if name not in names:
                raise node.error(
                    f'there is no candidate "{name}"',
                    f"{nearest(name, names)} There are {listed(names)}.".lstrip(),
                    "against",
                    i,
                )
        out.append(OtherEvidence(node.needed("says"), node.text("source"), against))
    return tuple(out)


def _level(root: Node) -> float:
    node = root.table("confidence", "confidence")
    node.check_keys(("level",))
    if "level" not in node.data:
        return DEFAULT_LEVEL
    level = node.number("level")
    if not 0.5 <= level <= 0.9999:
        raise node.error(
            f"a level of {level:g}", "It lies between 0.5 and 0.9999, usually 0.95.", "level"
        )
    return level


def _check_totals(
    declared: Sequence[Declaration],
    derived: Sequence[Derived],
    candidates: Sequence[Candidate],
) -> None:
    """A total is usable where a formula or a bare law uses it, or a catalyst's total is meant."""
    used = {
        symbol.name
        for expression in [d.formula for d in derived] + [c.law for c in candidates if c.law]
        for symbol in expression.free_symbols
    }
    catalysts = {name for c in candidates if c.mechanism for name in c.mechanism.catalyst}
    for d in declared:
        if d.role is Role.TOTAL and f"{{{d.name}}}" not in used and d.about not in catalysts:
            raise DiscrimError(
                f'"total {d.about}" is not yet supported here',
                place=d.place,
                do=f"Say how the free amounts follow from it under [derived], with "
                f'"{d.name}" in a formula, or name {d.about} as catalyst of a candidate.',
            )


def _findings(runs: Runs, declared: Sequence[Declaration]) -> list[str]:
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
