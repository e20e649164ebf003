"""From the table as text and what the study says of it, to the runs in internal units."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.columns import CONDITIONS, LABELS, NOT_NEGATIVE, OBSERVATIONS, Declaration
from discrim.runs.errors import Cells, Piece, error_parts, label_key, same_label
from discrim.runs.model import Column, ErrorBasis, ErrorPart, Role, Runs, frozen
from discrim.runs.read import RawTable
from discrim.units import MAX_DECADES, ParsedUnit, Unit, UnitSet, check_size, parse_number

DIMENSIONLESS = ParsedUnit("")


@dataclass(frozen=True, slots=True)
class Exclusion:
    """Runs that the study leaves out: those for which every (column, values) of ``where`` fits."""

    where: Mapping[str, Sequence[Any]]
    reason: str
    place: Place | None = None

    @property
    def words(self) -> str:
        return " and ".join(
            f"{name} = {' or '.join(str(v) for v in values)}" for name, values in self.where.items()
        )


def build_runs(
    raw: RawTable,
    declared: Sequence[Declaration],
    errors: Mapping[str, tuple[Piece, ...] | None],
    units: UnitSet,
    exclusions: Sequence[Exclusion] = (),
    computed: Mapping[str, Callable[[Mapping[str, np.ndarray]], np.ndarray]] | None = None,
) -> Runs:
    """The runs of a study.

    Parameters
    ----------
    raw : the table, N rows
    declared : columns and conditions of the study; columns without one come as ``Role.IGNORED``
    errors : for each declared name its error as read, or None
    units : the internal units, chosen from the same declarations
    computed : for columns that were worked out from others, their values from those of the others;
        such a column need not be in the table

    Raises
    ------
    DiscrimError
        A declared column that is not in the table, a cell that is no number or negative where that
        cannot be, an empty cell among the conditions, an exclusion that fits no run.
    """
    by_name = {d.name: d for d in declared}
    for d in declared:
        if d.value is None and not d.computed_from:
            require_column(raw, d.name, d.place)
    values: dict[str, np.ndarray] = {}
    for name in raw.names:
        values[name] = _values(raw, name, by_name.get(name), units)
    for d in declared:
        if d.value is not None:
            values[d.name] = _condition(d, raw.n, units)
    for name, from_others in (computed or {}).items():
        values[name] = _worked_out(by_name[name], raw, values.get(name), from_others(values))
    labels = _labels(raw, declared)
    kept, reasons = _excluded(raw, declared, labels, exclusions)
    replicate_of = _replicates(raw, declared, values)
    table = _Table(raw, by_name, values, units, kept, replicate_of)
    columns = [table.column(name, errors) for name in raw.names]
    columns += [table.column(d.name, errors) for d in declared if d.name not in raw.names]
    return Runs(
        raw.file,
        labels,
        tuple(columns),
        frozen(kept, bool),
        reasons,
        frozen(replicate_of, int),
        raw.sha256,
    )


def require_column(raw: RawTable, name: str, place: Place | None) -> None:
    """Refuse a column that the table does not have, naming those that it has."""
    if name not in raw.names:
        raise DiscrimError(
            f'the table {raw.file} has no column "{name}"',
            place=place,
            do=f"{nearest(name, raw.names)} It has {listed(raw.names)}.".lstrip(),
        )


def listed(names: Sequence[str], most: int = 15) -> str:
    """Names for a message, not too many."""
    shown = ", ".join(f'"{name}"' for name in names[:most])
    return shown + (f" and {len(names) - most} more" if len(names) > most else "")


@dataclass(frozen=True, slots=True, eq=False)
class _Table:
    """What the columns are built from."""

    raw: RawTable
    declared: Mapping[str, Declaration]
    values: Mapping[str, np.ndarray]
    units: UnitSet
    kept: np.ndarray
    replicate_of: np.ndarray

    def written(self, name: str) -> ParsedUnit:
        return _written(self.declared.get(name))

    def column(self, name: str, errors: Mapping[str, tuple[Piece, ...] | None]) -> Column:
        d = self.declared.get(name)
        in_table = name in self.raw.names
        texts = self.raw.column(name) if in_table else ()
        parts: tuple[ErrorPart, ...] = ()
        basis, df = ErrorBasis.EXACT, 0
        if d is None:
            unit = Unit()
        else:
            written = self.written(name)
            # An undeclared or helping column is kept in the numbers that it shows.
            unit = Unit() if d.role is Role.IGNORED else self.units.unit(written)
            if d.value is not None:
                texts = (d.value.number,) * self.raw.n
            elif not in_table:  # computed here, with all digits
                texts = tuple(repr(float(x)) for x in self.values[name])
            has_error = d.role in OBSERVATIONS or d.role in CONDITIONS
            pieces = errors.get(name)
            if not has_error:
                if pieces is not None:
                    words = f"{d.role.value} {d.about}".strip() or "an undeclared column"
                    raise DiscrimError(
                        f'"{name}" is {words}, which has no error',
                        place=d.error_place or d.place,
                        do="Errors belong to rates, amounts, temperatures and pH.",
                    )
            else:
                cells = Cells(self.values[name], texts, unit, written, self.replicate_of, self.kept)
                parts, basis, df = error_parts(
                    d,
                    pieces,
                    cells,
                    labels_of=self.labels_of,
                    sd_of=lambda other, place: self.sd_of(other, name, unit, place),
                )
        return Column(
            name,
            d.role if d else Role.IGNORED,
            d.about if d else "",
            unit,
            self.written(name).text,
            frozen(self.values[name]),
            tuple(texts),
            parts,
            basis,
            df,
            in_table,
            d.place if d else None,
        )

    def labels_of(self, name: str, place: Place | None) -> Sequence[str]:
        require_column(self.raw, name, place)
        labels = self.raw.column(name)
        for row, label in enumerate(labels):
            if not label:
                raise DiscrimError(
                    "an empty cell in a column that an error is shared by",
                    place=self.raw.place(row, name),
                    do="Every run needs a label there.",
                )
        return labels

    def sd_of(self, name: str, whose: str, unit: Unit, place: Place | None) -> np.ndarray:
        """Standard deviations from the cells of a column, in that column's unit or the same."""
        require_column(self.raw, name, place)
        d = self.declared.get(name)
        own = self.written(whose)
        written = d.unit if d is not None and d.unit is not None else own
        if not written.fits(unit):
            raise DiscrimError(
                f'the error of "{whose}" is in {written.text}, its values are in {own.text}',
                place=place,
                do="Units of the same kind are needed.",
            )
        out = np.zeros(self.raw.n)
        for row, text in enumerate(self.raw.column(name)):
            if not text and not np.isfinite(self.values[whose][row]):
                continue
            value = parse_number(text, self.raw.place(row, name))
            if value < 0:
                raise DiscrimError("a negative error", place=self.raw.place(row, name))
            out[row] = value * written.factor(unit)
        return out


def units_of(declared: Sequence[Declaration], units: UnitSet) -> dict[str, Unit]:
    """Internal unit of each declared column or condition."""
    return {d.name: Unit() if d.role is Role.IGNORED else units.unit(_written(d)) for d in declared}


def _written(d: Declaration | None) -> ParsedUnit:
    if d is None:
        return DIMENSIONLESS
    if d.value is not None:
        return d.value.unit
    return d.unit if d.unit is not None else DIMENSIONLESS


def _values(raw: RawTable, name: str, d: Declaration | None, units: UnitSet) -> np.ndarray:
    """Values of a column of the table in internal units; nan where a cell is empty."""
    texts = raw.column(name)
    out = np.full(raw.n, np.nan)
    if d is None or d.role in LABELS or d.role is Role.IGNORED:
        for row, text in enumerate(texts):
            if not text and d is not None and d.role in LABELS:
                raise DiscrimError(
                    f'"{name}" is empty here', place=raw.place(row, name), do="Give every run one."
                )
            try:
                out[row] = parse_number(text) if text else np.nan
            except DiscrimError:
                return np.full(raw.n, np.nan)  # a column of words
        if np.nanmax(np.abs(out), initial=0.0) > 10.0**MAX_DECADES:
            return np.full(raw.n, np.nan)  # numbers that cannot be computed with: words as well
        return out
    for row, text in enumerate(texts):
        if text:
            out[row] = _number(raw, row, name, text)
        elif d.role not in OBSERVATIONS:
            raise DiscrimError(
                "an empty cell among the conditions",
                place=raw.place(row, name),
                do="Only rates may be empty (a run that is planned). Give the value, or exclude "
                "the run and take its row out.",
            )
    written = _written(d)
    out = np.asarray(written.to_internal(out, units.unit(written)), dtype=float)
    for row, text in enumerate(texts):
        if text:
            check_size(float(out[row]), text, raw.place(row, name))
    if d.role in NOT_NEGATIVE and np.any(out < 0):
        first = int(np.flatnonzero(out < 0)[0])
        where = raw.place(first, name)
        raise DiscrimError(_negative(d, texts[first]), place=where, do=_NEGATIVE_DO)
    return out


_NEGATIVE_DO = "Check the sign. A reading below zero after a blank is taken off counts as 0."


def _negative(d: Declaration, text: str) -> str:
    if d.role is Role.TEMPERATURE:
        return f"{text} {_written(d).text} is below the absolute zero"
    kind = "partial pressure" if "pressure" in _written(d).exponents() else "concentration"
    return f"a negative {kind if d.role in (Role.SPECIES, Role.TOTAL) else d.role.value}: {text}"


def _worked_out(
    d: Declaration, raw: RawTable, shown: np.ndarray | None, values: np.ndarray
) -> np.ndarray:
    """Values of a column that its formula gives; nan in runs that the table leaves empty."""
    for row, value in enumerate(values):
        planned = shown is not None and not np.isfinite(shown[row])
        if planned:
            values[row] = np.nan
        elif not np.isfinite(value):
            raise DiscrimError(
                f'the formula of "{d.name}" has no value in {raw.row_words(row)} of the table',
                place=d.formula_place or d.place,
                do="It divides by zero there, or takes the root or logarithm of a negative number. "
                "Mend the cells, or take the row out.",
            )
    return values


def _number(raw: RawTable, row: int, name: str, text: str) -> float:
    place = raw.place(row, name)
    try:
        return parse_number(text, place)
    except DiscrimError as error:
        if error.do:
            raise
        do = f'Every cell of "{name}" must hold a number, with a point for decimals and no unit.'
        if text[:1] in "<>≤≥~":
            do = "Values below a detection limit are not supported; see [[exclude]]."
        raise DiscrimError(error.says, place=place, do=do) from None


def _condition(d: Declaration, n: int, units: UnitSet) -> np.ndarray:
    assert d.value is not None
    value = d.value.internal(units.unit(d.value.unit))
    check_size(value, d.value.number, d.place)
    if d.role in NOT_NEGATIVE and value < 0:
        raise DiscrimError(_negative(d, d.value.number), place=d.place, do=_NEGATIVE_DO)
    return np.full(n, value)


def _labels(raw: RawTable, declared: Sequence[Declaration]) -> tuple[str, ...]:
    """What to call each run."""
    named = [d for d in declared if d.role is Role.RUN]
    if not named:
        return tuple(str(i + 1) for i in range(raw.n))
    labels = raw.column(named[0].name)
    seen: dict[Any, int] = {}
    for row, label in enumerate(labels):
        first = seen.setdefault(label_key(label), row)
        if first != row:
            raise DiscrimError(
                f'run "{label}" stands twice, first in {raw.row_words(first)}',
                place=raw.place(row, named[0].name),
                do="With rates each row is one run: give each its own name. Replicates are found "
                "by their conditions.",
            )
    return labels


def _excluded(
    raw: RawTable,
    declared: Sequence[Declaration],
    labels: tuple[str, ...],
    exclusions: Sequence[Exclusion],
) -> tuple[np.ndarray, tuple[str, ...]]:
    kept = np.ones(raw.n, dtype=bool)
    reasons = [""] * raw.n
    for exclusion in exclusions:
        hit = np.ones(raw.n, dtype=bool)
        for name, wanted in exclusion.where.items():
            if name == "run" and name not in raw.names:
                cells: Sequence[str] = labels
            elif name == "run" and any(d.role is Role.RUN for d in declared):
                cells = labels
            else:
                require_column(raw, name, exclusion.place)
                cells = raw.column(name)
            keys = {label_key(str(value)) for value in wanted}
            hit &= np.array([label_key(cell) in keys for cell in cells], dtype=bool)
        if not hit.any():
            raise DiscrimError(
                f"no run fits {exclusion.words}",
                place=exclusion.place,
                do=f"The runs are {listed(labels)}.",
            )
        kept &= ~hit
        for row in map(int, np.flatnonzero(hit)):
            reasons[row] = f"{reasons[row]}; {exclusion.reason}".removeprefix("; ")
    if not kept.any():
        raise DiscrimError(
            "every run is excluded",
            place=exclusions[-1].place,
            do="At least one run must stay.",
        )
    return kept, tuple(reasons)


def _replicates(
    raw: RawTable, declared: Sequence[Declaration], values: Mapping[str, np.ndarray]
) -> np.ndarray:
    """Integers, shape (N,), equal for runs at the same declared conditions."""
    rows: list[tuple[Any, ...]] = [() for _ in range(raw.n)]
    for d in declared:
        # a conversion comes out of a run: replicates need not agree in it
        if d.value is not None or d.role is Role.CONVERSION:
            continue
        if not (d.role in CONDITIONS or d.role is Role.GROUP):
            continue
        if d.role is Role.GROUP:
            cells: Sequence[Any] = same_label(raw.column(d.name)).tolist()
        else:
            cells = values[d.name].tolist()
        rows = [(*row, cell) for row, cell in zip(rows, cells, strict=True)]
    seen: dict[tuple[Any, ...], int] = {}
    return np.array([seen.setdefault(row, len(seen)) for row in rows], dtype=int)
