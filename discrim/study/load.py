"""A study file -> :class:`~discrim.study.model.Study`, checked and in internal units."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from discrim.errors import DiscrimError, nearest
from discrim.runs.build import Exclusion, build_runs, listed, units_of
from discrim.runs.columns import IN_FORMULAS, Declaration
from discrim.runs.model import Role
from discrim.runs.read import RawTable, read_table
from discrim.study.candidates import read_candidates
from discrim.study.computed import other_values, read_computed, values_from
from discrim.study.constants import read_constants, settings
from discrim.study.declare import (
    check_declared,
    columns,
    conditions,
    findings,
    pieces,
    units_in_order,
)
from discrim.study.file import StudyFile, inside, read_toml
from discrim.study.formulas import derived_units, names_of, parse_derived
from discrim.study.model import Candidate, Computed, Derived, OtherEvidence, Study
from discrim.study.node import Node
from discrim.study.questions import read_questions
from discrim.study.reported import read_reported
from discrim.study.responses import independent, read_between_responses
from discrim.units import UnitSet

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
    "errors",
    "report_constants",
)
NOT_YET = ("runs", "window")
REACTORS = ("rates", "differential")
REACTORS_NOT_YET = ("stirred-tank", "batch", "semi-batch", "plug-flow")
DEFAULT_LEVEL = 0.95
MAX_TITLE = 300


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
    title = root.text("title")
    if len(title) > MAX_TITLE:
        raise root.error(
            f"a title of {len(title):,} characters", f"At most {MAX_TITLE} are read.", "title"
        )
    reactor = _reactor(root)
    raw = _table(file)
    declared = columns(root, raw) + conditions(root, raw)
    check_declared(declared, root)
    errors = {d.name: pieces(d, root) for d in declared}
    derived_table = root.table("derived", "derived quantities")
    written_derived = derived_units(derived_table)
    constants = read_constants(root.table("constants", "constants"))
    stated = [u for u in written_derived.values() if u is not None]
    stated += [w.unit.unit for w in constants if w.unit is not None]
    units = UnitSet.choose([*units_in_order(declared), *stated])
    by_name = units_of(declared, units)
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
    computed = read_computed(root, declared, names, derived, known, by_name)
    exclusions = _exclusions(root)
    runs = build_runs(
        raw, declared, errors, units, exclusions, values_from(computed, declared, known)
    )
    runs, dependent = independent(runs)
    candidates = read_candidates(
        root.tables("candidates", "candidate"), names, derived, file.folder
    )
    _check_in_use(declared, derived, candidates, computed)
    questions = read_questions(
        root.tables("questions", "question"), candidates, derived, declared, by_name
    )
    return Study(
        path=file.path,
        title=title or file.path.stem,
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
        findings=(
            *findings(runs, declared),
            *other_values(runs, computed),
            *dependent,
        ),
        computed=computed,
        reported=read_reported(
            root.table("report_constants", "quantities to report"),
            names,
            declared,
            derived,
            known,
            by_name,
        ),
        responses_together=read_between_responses(root, runs),
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
        against = tuple(name.strip() for name in node.texts("against"))  # as candidates' names are
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
    level = node.number("level", "Write level = 0.95.")
    if not 0.5 <= level <= 0.9999:
        raise node.error(
            f"a level of {level:g}", "It lies between 0.5 and 0.9999, usually 0.95.", "level"
        )
    return level


def _check_in_use(
    declared: Sequence[Declaration],
    derived: Sequence[Derived],
    candidates: Sequence[Candidate],
    computed: Mapping[str, Computed],
) -> None:
    """A total, an inlet or a time is usable where a formula uses it, a total also for a catalyst."""
    formulas = [d.formula for d in derived] + [c.formula for c in computed.values()]
    used = {
        symbol.name
        for expression in formulas + [c.law for c in candidates if c.law]
        for symbol in expression.free_symbols
    }
    catalysts = {name for c in candidates if c.mechanism for name in c.mechanism.catalyst}
    for d in declared:
        if d.role not in IN_FORMULAS or f"{{{d.name}}}" in used:
            continue
        if d.role is Role.TOTAL and d.about in catalysts:
            continue
        words = f"{d.role.value} {d.about}".strip()
        do = (
            f'Say how the free amounts follow from it under [derived], with "{d.name}" in a '
            f"formula, or name {d.about} as catalyst of a candidate."
            if d.role is Role.TOTAL
            else f'Say how the rate was worked out from it: computed_from = "...", with "{d.name}" '
            "in the formula, for the column that is observed."
        )
        raise DiscrimError(f'"{words}" is not yet supported here', place=d.place, do=do)
