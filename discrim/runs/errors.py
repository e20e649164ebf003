"""Errors of measurement: how a study states them, and the independent parts that they make.

One standard deviation (JCGM 100:2008): a stated sd as it is; a rectangular half-width a counts as
a/sqrt(3) (4.3.7); an expanded uncertainty is divided by its k (6.2); parts that are independent add
in quadrature, which the consumer does, since each is kept apart here.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np

from discrim.errors import DiscrimError, Place, nearest
from discrim.runs.columns import OBSERVATIONS, Declaration
from discrim.runs.model import ErrorBasis, ErrorPart, Origin, Role, frozen
from discrim.units import ParsedUnit, Quantity, Unit, check_size, parse_sum

How = Literal["sd", "limits", "expanded", "digits", "replicates", "column", "exact"]
KEYS = ("sd", "limits", "expanded", "k", "column", "origin", "shared_by")
ASSUMED_RELATIVE = 0.01  # of a condition without a stated error (design: smaller of digits and 1 %)
MOST_MEASURED_DIGITS = 6  # more digits than an instrument shows: the value was calculated
_SIZES = ("sd", "limits", "expanded", "column")


@dataclass(frozen=True, slots=True)
class Piece:
    """One part of an ``error`` as the user wrote it."""

    how: How
    terms: tuple[Quantity, ...] = ()
    column: str = ""
    origin: Origin | None = None
    shared_by: str = ""
    words: str = ""
    place: Place | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Cells:
    """The column whose error is wanted: N values in internal units, with their text."""

    values: np.ndarray
    texts: tuple[str, ...]
    unit: Unit
    written: ParsedUnit
    replicate_of: np.ndarray
    kept: np.ndarray


def parse_error(
    written: Any, place: Place | None, locate: Callable[[tuple[str | int, ...]], Place | None]
) -> tuple[Piece, ...]:
    """Read an ``error``: text, a number, a table, or a list of tables.

    Parameters
    ----------
    written : as tomllib gives it
    place : of the whole
    locate : the place of a part, by its path inside ``written``
    """
    if isinstance(written, list):
        if not written:
            raise DiscrimError("an empty list of errors", place=place, do='Write "exact" if it is.')
        pieces: list[Piece] = []
        for index, part in enumerate(written):
            where = locate((index,)) or place

            def inner(path: tuple[str | int, ...], at: int = index) -> Place | None:
                return locate((at, *path))

            pieces.extend(parse_error(part, where, inner))
        return tuple(pieces)
    if isinstance(written, dict):
        return (_parse_table(written, place, locate),)
    return (_parse_size(written, "sd", place),)


def _parse_table(
    table: Mapping[str, Any],
    place: Place | None,
    locate: Callable[[tuple[str | int, ...]], Place | None],
) -> Piece:
    for key in table:
        if key not in KEYS:
            raise DiscrimError(
                f'an error has no key "{key}"',
                place=locate((key,)) or place,
                do=f"{nearest(key, KEYS)} Known are {', '.join(KEYS)}.".lstrip(),
            )
    sizes = [key for key in _SIZES if key in table]
    if len(sizes) != 1:
        found = "none of them" if not sizes else " and ".join(sizes)
        raise DiscrimError(
            f"an error needs exactly one of sd, limits, expanded, column; found {found}",
            place=place,
            do='For example { sd = "0.5 %", origin = "set" }. Independent parts go into a list.',
        )
    size = sizes[0]
    where = locate((size,)) or place
    if size == "column":
        name = table["column"]
        if not isinstance(name, str) or not name:
            raise DiscrimError("the name of a column is needed", place=where)
        piece = Piece("column", column=name, words=f'column "{name}"', place=where)
    else:
        piece = _parse_size(table[size], "limits" if size == "limits" else "sd", where)
    if size == "expanded":
        piece = _expanded(piece, table, place, where)
    elif "k" in table:
        raise DiscrimError(
            '"k" belongs to an expanded uncertainty',
            place=locate(("k",)) or place,
            do='Write { expanded = "0.2 mmol/L", k = 2 }.',
        )
    origin = table.get("origin")
    if origin not in (None, "set", "measured"):
        raise DiscrimError(
            f"origin is {origin!r}",
            place=locate(("origin",)) or place,
            do='It is "set" (weighed, pipetted: true = nominal + error) or "measured" '
            "(reading = true + error).",
        )
    shared = table.get("shared_by", "")
    if not isinstance(shared, str):
        raise DiscrimError(
            "shared_by is no text",
            place=locate(("shared_by",)) or place,
            do='Name a column, or write "all".',
        )
    where = (locate(("shared_by",)) or place) if shared else where
    return replace(piece, origin=origin, shared_by=shared, place=where)


def _expanded(
    piece: Piece, table: Mapping[str, Any], place: Place | None, where: Place | None
) -> Piece:
    k = table.get("k")
    if isinstance(k, bool) or not isinstance(k, int | float) or not 0 < k < 100:
        raise DiscrimError(
            "an expanded uncertainty needs its coverage factor",
            place=place,
            do='Write for example { expanded = "0.2 mmol/L", k = 2 }.',
        )
    if piece.how != "sd":
        raise DiscrimError("an expanded uncertainty needs a size", place=where)
    terms = tuple(replace(t, value=t.value / k) for t in piece.terms)
    return replace(piece, terms=terms, words=f"expanded {piece.words}, k = {k:g}")


def _parse_size(written: Any, how: How, place: Place | None) -> Piece:
    if isinstance(written, int | float) and not isinstance(written, bool):
        written = repr(written)
    if not isinstance(written, str):
        raise DiscrimError(
            "an error is a text or a table",
            place=place,
            do='For example "1 %", "0.02 umol/L/s", "1 % + 0.02 umol/L/s", "digits", "replicates".',
        )
    text = " ".join(written.split())
    if text in ("digits", "replicates") and how == "sd":
        return Piece("digits" if text == "digits" else "replicates", words=text, place=place)
    if text == "exact":
        return Piece("exact", words="exact", place=place)
    if text.isalpha():
        hint = nearest(text, ("digits", "replicates", "exact"))
        raise DiscrimError(
            f'"{text}" is no error',
            place=place,
            do=f'{hint} Write "1 %", "0.1 mmol/L", "digits", "replicates" or "exact".'.lstrip(),
        )
    terms = parse_sum(text, place)
    for term in terms:
        if term.value < 0:
            raise DiscrimError(f'"{text}" is negative', place=place, do="An error is 0 or more.")
        check_size(term.value, term.number, place)
    if all(term.value == 0 for term in terms):
        return Piece("exact", words="exact", place=place)
    words = f"limits ± {text}" if how == "limits" else text
    return Piece(how, terms, words=words, place=place)


# --- digits --------------------------------------------------------------------------------------


def decimals(text: str) -> int:
    """Decimal places of a number as written: 3 of ``0.600``, 0 of ``100``, 4 of ``1.5e-3``."""
    mantissa, _, exponent = text.strip().lower().replace("−", "-").partition("e")
    _, _, after = mantissa.partition(".")
    return len(after) - (int(exponent) if exponent else 0)


def significant_digits(text: str) -> int:
    """Significant digits as written; zeros at the end of a whole number do not count."""
    mantissa = text.strip().lower().partition("e")[0]
    digits = "".join(ch for ch in mantissa if ch.isdigit()).lstrip("0")
    return len(digits) if "." in mantissa else len(digits.rstrip("0"))


def half_a_digit(texts: Sequence[str]) -> float:
    """Half a unit in the finest last place of a column, in the unit of the column."""
    return 0.5 * 10.0 ** -max(decimals(text) for text in texts if text)


def _refuse_calculated(texts: Sequence[str], name: str, place: Place | None) -> None:
    for text in texts:
        if significant_digits(text) > MOST_MEASURED_DIGITS:
            raise DiscrimError(
                f'"{text}" in column "{name}" has more than {MOST_MEASURED_DIGITS} digits, so it '
                "was calculated, and its digits say nothing about its error",
                place=place,
                do=f'State the error of "{name}", for example error = "1 %".',
            )


# --- from pieces to parts ------------------------------------------------------------------------


def error_parts(
    declared: Declaration,
    pieces: tuple[Piece, ...] | None,
    cells: Cells,
    *,
    labels_of: Callable[[str, Place | None], Sequence[str]],
    sd_of: Callable[[str, Place | None], np.ndarray],
) -> tuple[tuple[ErrorPart, ...], ErrorBasis, int]:
    """Parts of the error of one column, where their size comes from, and replicate freedom.

    Parameters
    ----------
    pieces : from :func:`parse_error`; None when the study states nothing
    labels_of : cells of the column that a shared error is shared by
    sd_of : standard deviations, internal units, from the cells of another column
    """
    n = len(cells.values)
    planned = declared.role in OBSERVATIONS and not any(cells.texts)
    if planned and pieces is not None and any(p.how in ("digits", "replicates") for p in pieces):
        pieces = None  # nothing is measured yet, so there is nothing to take an error from
    if pieces is None:
        if declared.role in OBSERVATIONS:
            return (), ErrorBasis.ESTIMATED, 0
        return (_assumed(declared, cells),), ErrorBasis.ASSUMED, 0
    parts: list[ErrorPart] = []
    basis, df = ErrorBasis.EXACT, 0
    for piece in pieces:
        if piece.how == "exact":
            continue
        groups = _groups(piece, declared, n, labels_of)
        if piece.how == "replicates":
            part, df = _pooled(declared, piece, cells, groups)
            parts.append(part)
            basis = ErrorBasis.REPLICATES
            continue
        if basis is not ErrorBasis.REPLICATES:
            basis = ErrorBasis.STATED
        if piece.how == "digits":
            _refuse_calculated(cells.texts, declared.name, piece.place)
            half = half_a_digit(cells.texts) * cells.written.factor(cells.unit)
            parts.append(_rectangular(np.full(n, half), piece, groups))
        elif piece.how == "column":
            parts.append(_part(0.0, sd_of(piece.column, piece.place), None, piece, groups))
        else:
            parts.extend(_from_terms(declared, piece, cells, groups))
    return tuple(parts), basis, df


def _from_terms(
    declared: Declaration, piece: Piece, cells: Cells, groups: np.ndarray
) -> list[ErrorPart]:
    n = len(cells.values)
    relative = [t.value for t in piece.terms if t.percent]
    absolute = [_absolute(t, declared, cells, piece) for t in piece.terms if not t.percent]
    if relative and declared.role in (Role.TEMPERATURE, Role.PH):
        raise DiscrimError(
            f"a percentage of {'a temperature' if declared.role is Role.TEMPERATURE else 'a pH'}",
            place=piece.place,
            do='State the error in its own units, for example "0.5 K" or "0.02".',
        )
    if piece.how == "limits":
        # Hard bounds add up; they do not add in quadrature.
        half = sum(absolute) + sum(relative) * np.abs(np.nan_to_num(cells.values))
        return [_rectangular(np.broadcast_to(half, (n,)), piece, groups)]
    if len(np.unique(groups)) == n:
        return [
            _part(math.hypot(*relative), np.full(n, math.hypot(*absolute)), None, piece, groups)
        ]
    # Shared errors of different kinds are independent of one another, so they stay apart.
    parts = [_part(r, np.zeros(n), None, piece, groups) for r in relative]
    return parts + [_part(0.0, np.full(n, a), None, piece, groups) for a in absolute]


def _absolute(term: Quantity, declared: Declaration, cells: Cells, piece: Piece) -> float:
    if not term.unit.text and cells.written.text:
        raise DiscrimError(
            f'"{term.number}" of what?',
            place=piece.place,
            do=f'Write "{term.number} {cells.written.text}" or "{term.number} %".',
        )
    if not term.unit.fits(cells.unit):
        raise DiscrimError(
            f'the error of "{declared.name}" is in {term.unit.text or "no unit"}, its values are '
            f"in {cells.written.text or 'no unit'}",
            place=piece.place,
            do="Units of the same kind, or a percentage, are needed.",
        )
    return term.value * term.unit.factor(cells.unit)


def _part(
    relative: float,
    absolute: np.ndarray,
    bound: np.ndarray | None,
    piece: Piece,
    groups: np.ndarray,
) -> ErrorPart:
    words = piece.words
    if piece.shared_by:
        by = "all runs" if piece.shared_by == "all" else f"runs of the same {piece.shared_by}"
        words += f", shared by {by}"
    return ErrorPart(
        relative,
        frozen(absolute),
        None if bound is None else frozen(bound),
        piece.origin,
        frozen(groups, int),
        words,
    )


def _rectangular(half: np.ndarray, piece: Piece, groups: np.ndarray) -> ErrorPart:
    return _part(0.0, half / math.sqrt(3.0), half, piece, groups)


def _groups(
    piece: Piece,
    declared: Declaration,
    n: int,
    labels_of: Callable[[str, Place | None], Sequence[str]],
) -> np.ndarray:
    if piece.shared_by == "all":
        return np.zeros(n, dtype=int)
    if piece.shared_by:
        return same_label(labels_of(piece.shared_by, piece.place))
    if declared.value is not None:
        # One value stated once for all runs has one error.
        return np.zeros(n, dtype=int)
    return np.arange(n)


def _assumed(declared: Declaration, cells: Cells) -> ErrorPart:
    """The smaller of the digits and 1 %, value by value."""
    _refuse_calculated(cells.texts, declared.name, declared.place)
    half = half_a_digit(cells.texts) * cells.written.factor(cells.unit)
    digits = half / math.sqrt(3.0)
    if declared.role in (Role.TEMPERATURE, Role.PH):
        sd = np.full(len(cells.values), digits)
    else:
        sd = np.minimum(digits, ASSUMED_RELATIVE * np.abs(cells.values))
    n = len(cells.values)
    groups = np.zeros(n, dtype=int) if declared.value is not None else np.arange(n)
    return ErrorPart(
        0.0,
        frozen(sd),
        None,
        None,
        frozen(groups, int),
        "assumed: the smaller of its digits and 1 %",
    )


def _pooled(
    declared: Declaration, piece: Piece, cells: Cells, groups: np.ndarray
) -> tuple[ErrorPart, int]:
    """Standard deviation pooled over the groups of replicates, with its degrees of freedom."""
    if declared.role not in OBSERVATIONS:
        raise DiscrimError(
            f'"replicates" cannot give the error of "{declared.name}"',
            place=piece.place,
            do="Replicates are runs at the same conditions, so they show the error of what is "
            "observed, not of the conditions.",
        )
    squares, df = scatter(cells.values, cells.replicate_of, cells.kept)
    if df == 0:
        raise DiscrimError(
            "there are no replicates: no two runs have the same conditions",
            place=piece.place,
            do="State the error of the rate, or leave it out to have it estimated from the fit.",
        )
    if squares == 0.0:
        raise DiscrimError(
            "all replicates agree to the last digit",
            place=piece.place,
            do='Their error cannot be estimated; write "digits" or state it.',
        )
    sd = math.sqrt(squares / df)
    return _part(0.0, np.full(len(cells.values), sd), None, piece, groups), df


def scatter(values: np.ndarray, replicate_of: np.ndarray, kept: np.ndarray) -> tuple[float, int]:
    """Sum of squares within groups of replicates among the runs kept, and its degrees of freedom."""
    squares, df = 0.0, 0
    usable = kept & np.isfinite(values)
    for group in np.unique(replicate_of[usable]):
        own = values[usable & (replicate_of == group)]
        squares += float(np.sum((own - own.mean()) ** 2))
        df += len(own) - 1
    return squares, df


def same_label(labels: Sequence[str]) -> np.ndarray:
    """Integers, shape (N,): equal where the cells say the same (``2`` and ``2.0`` do)."""
    seen: dict[Any, int] = {}
    out = []
    for label in labels:
        out.append(seen.setdefault(label_key(label), len(seen)))
    return np.array(out, dtype=int)


def label_key(label: str) -> Any:
    """What a cell is compared by: its number if it is one, else its text."""
    try:
        value = float(label)
    except ValueError:
        return label
    return value if math.isfinite(value) and "_" not in label else label
