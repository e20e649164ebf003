"""Quantities of the constants that the study wants reported, in each candidate that has them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from discrim.errors import DiscrimError, nearest
from discrim.evidence.intervals import Interval, Side, united
from discrim.evidence.quantity_intervals import guaranteed_quantity, quantity_facts
from discrim.ratelaw.dimension import find_units
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol, quantity
from discrim.reactor.quantity import Quantity
from discrim.runs.build import listed
from discrim.study.formulas import unit_of
from discrim.study.model import Reported, Study
from discrim.study.reported import observed_symbol
from discrim.units import Unit
from discrim.weigh.assess import Assessment
from discrim.weigh.bench import (
    Bench,
    column_of_symbol,
    fixed_put_in,
    is_condition,
    known_constants,
    put_in,
)
from discrim.weigh.bind import Bound
from discrim.weigh.laws import CandidateLaw


@dataclass(frozen=True, slots=True, eq=False)
class Formula:
    """One quantity in one candidate, ready for its constants; ``reason`` says why there is none.

    ``factor``: internal units in one of ``units``.
    """

    name: str
    text: str
    written: Mapping[str, str]
    quantity: Quantity | None
    units: str
    factor: float
    reason: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class ReportedValue:
    """A quantity in a fitted candidate, numbers in ``formula.units``; nan where there is none."""

    formula: Formula
    value: float
    standard_error: float
    intervals: Mapping[str, Interval]


def check_reported(
    study: Study, bench: Bench, laws: Sequence[CandidateLaw], bounds: Sequence[Bound]
) -> None:
    """Raise for a quantity that no candidate has, and for conditions that are missing."""
    for one in study.reported:
        found = [
            f
            for c, b in zip(laws, bounds, strict=True)
            for f in formulas_of(one, study, bench, c, b)
        ]
        if all(f.reason for f in found):
            known = sorted({n for b in bounds for n in _names(b)} | set(study.constants))
            wanted = sorted(s.name for s in one.formula.free_symbols if not is_condition(s))
            unknown = [n for n in wanted if n not in known]
            hint = nearest(unknown[0], known) if unknown else ""
            raise DiscrimError(
                f'no candidate has "{one.name}" = {one.text}: {found[0].reason}',
                place=one.place,
                do=f"{hint} The laws hold {listed(known)}.".lstrip(),
            )


def _names(bound: Bound) -> set[str]:
    return set(bound.names) | {c.name for c in bound.constants}


def formulas_of(
    one: Reported, study: Study, bench: Bench, c: CandidateLaw, bound: Bound
) -> list[Formula]:
    """A quantity in one candidate: one for each group where its constants have one value a group.

    Raises ``DiscrimError`` where a condition is missing or units contradict one another.
    """
    placeholders = {observed_symbol(col.name): k for k, col in enumerate(bench.responses)}
    absent = [
        s.name[1:-1].removeprefix("observed ")
        for s in one.formula.free_symbols
        if s.name.startswith("{observed ") and s not in placeholders
    ]
    if absent:
        why = f"the column “{absent[0]}” is not among those that are fitted"
        return [Formula(one.name, one.text, one.written, None, "", 1.0, why)]
    expression = one.formula.xreplace({s: c.bound[k] for s, k in placeholders.items()})
    expression = fixed_put_in(put_in(expression, study), study)
    own = {k.name: k.symbol for k in bound.constants}
    grouped = _grouped(bound)
    swap = {}
    for s in expression.free_symbols:
        if is_condition(s):
            continue
        base = s.name.split("[")[0]
        if s.name in own:
            swap[s] = own[s.name]
        elif s.name in bound.names:
            swap[s] = _free_symbol(s.name, own[base])
    expression = expression.xreplace(swap)
    missing = _missing(expression, c, bound, study)
    if missing:
        return [Formula(one.name, one.text, one.written, None, "", 1.0, missing)]
    units, factor = _units(one, study, bench, c, bound)
    at, note = _conditions(one, expression, study, bench, c)
    per = {str(s): labels for s in expression.free_symbols if (labels := grouped.get(s.name))}
    if not per:
        q = _quantity(expression, bound, own, at)
        return [Formula(one.name, one.text, one.written, q, units, factor, "", note)]
    every = next(iter(per.values()))
    if any(labels != every for labels in per.values()):
        why = f"say which value is meant: {listed(sorted(per))} have one for each of several groups"
        return [Formula(one.name, one.text, one.written, None, units, factor, why)]
    out = []
    for label in every:
        chosen = {own[n]: _free_symbol(f"{n}[{label}]", own[n]) for n in per}
        q = _quantity(expression.xreplace(chosen), bound, own, at)
        out.append(
            Formula(f"{one.name}[{label}]", one.text, one.written, q, units, factor, "", note)
        )
    return out


def _free_symbol(name: str, like: Any) -> Any:
    kind = ConstantKind.RATE if like.is_nonnegative else ConstantKind.ORDER
    return constant_symbol(name, kind)


def _grouped(bound: Bound) -> dict[str, tuple[str, ...]]:
    """Labels of the groups of each law constant that has one value a group."""
    out: dict[str, tuple[str, ...]] = {}
    for name in bound.names:
        base, bracket, rest = name.partition("[")
        if bracket:
            out[base] = (*out.get(base, ()), rest[:-1])
    return out


def _quantity(
    expression: Any, bound: Bound, own: Mapping[str, Any], at: Mapping[Any, float]
) -> Quantity:
    symbols = [own[n] if n in own else _free_symbol(n, own[n.split("[")[0]]) for n in bound.names]
    conditions = [s for s in at if s in expression.free_symbols]
    return Quantity(
        expression,
        symbols,
        conditions,
        np.array([at[s] for s in conditions]),
        bound.predictor.scale,
    )


def _missing(expression: Any, c: CandidateLaw, bound: Bound, study: Study) -> str:
    """Why a candidate has no such quantity, or "" when it has."""
    known = set(known_constants(study))
    have = _names(bound) | known
    lacking = sorted(
        s.name for s in expression.free_symbols if not is_condition(s) and s.name not in have
    )
    if not lacking:
        return ""
    name = lacking[0]
    for k in c.law.constants:
        if k.definition is not None and any(s.name == name for s in k.definition.free_symbols):
            return f"{name} is in the law only together with others, as {k.name} = {k.definition}"
    grouped = _grouped(bound)
    base = name.split("[")[0]
    if base in grouped:
        return f"{base} has the values {listed([f'{base}[{g}]' for g in grouped[base]])}"
    return f"the law does not hold {name}"


def _conditions(
    one: Reported, expression: Any, study: Study, bench: Bench, c: CandidateLaw
) -> tuple[dict[Any, float], str]:
    """Values of the conditions in an expression, and what there is to say about them."""
    out: dict[Any, float] = {}
    known = known_constants(study)
    taken = []
    for s in sorted(expression.free_symbols, key=str):
        if not is_condition(s):
            if s.name in known:
                out[s] = known[s.name][0]
                taken.append(s.name)
            continue
        name = s.name[1:-1]
        if name in one.at and s in (amount(name), quantity(name)):
            out[s] = one.at[name]
            continue
        column = column_of_symbol(s, study)
        values = column.values[study.kept()] if column is not None else np.empty(0)
        values = values[np.isfinite(values)]
        if len(values) and (values == values[0]).all():
            out[s] = float(values[0])
            continue
        shown = name if s.name.startswith("{") else s.name
        raise DiscrimError(
            f'"{one.name}" needs {shown} in “{c.law.name}”, which "at" does not give',
            place=one.at_place,
            do=f'Write its value: at = {{ {_key(name)} = "..." }}.',
        )
    words = f"{listed(taken)} taken at the value that the study gives" if taken else ""
    return out, words


def _key(name: str) -> str:
    return name if name.replace("_", "a").isalnum() and name.isascii() else f'"{name}"'


def _units(
    one: Reported, study: Study, bench: Bench, c: CandidateLaw, bound: Bound
) -> tuple[str, float]:
    """Units of the quantity as shown, and internal units in one of them."""
    parts = [(e, bench.responses[k].unit) for k, e in enumerate(bound.expressions)]
    given = dict(bench.units)
    for e in [*bound.expressions, one.formula]:
        for s in e.free_symbols:
            setting = study.constants.get(s.name)
            column = column_of_symbol(s, study) if is_condition(s) else None
            if setting is not None and setting.unit is not None:
                given[s] = setting.unit
            elif column is not None:
                given[s] = column.unit
    found = find_units(parts, given, place=c.law.place).units
    known: dict[Any, Unit | None] = dict(given)
    for k, column in enumerate(bench.responses):
        known[observed_symbol(column.name)] = bench.responses[k].unit
    for s in one.formula.free_symbols:
        if s not in known:
            known[s] = found.get(s.name.split("[")[0])
    certain = {s: u for s, u in known.items() if u is not None}
    # terms of a sum that do not fit one another are pointed out
    find_units([(one.formula, None)], certain, place=one.place)
    computed = unit_of(one.formula, known)
    if one.units is None:
        return (computed.text() if computed is not None else ""), 1.0
    wanted = study.units.unit(one.units)
    if computed is not None and computed != wanted:
        raise DiscrimError(
            f'"{one.name}" is in {computed.text() or "1 (no unit)"}, "units" says {one.units.text}',
            place=one.units_place,
            do="Mend the formula or its units.",
        )
    return one.units.text, one.units.factor(wanted)


def reported_of(
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    assessment: Assessment,
    *,
    stands: bool,
) -> tuple[ReportedValue, ...]:
    """All quantities that the study asks for, in one fitted candidate."""
    out = []
    for one in study.reported:
        for formula in formulas_of(one, study, bench, c, bound):
            out.append(_value(formula, study, assessment, stands))
    return tuple(out)


def _value(formula: Formula, study: Study, assessment: Assessment, stands: bool) -> ReportedValue:
    nan = float("nan")
    if formula.quantity is None:
        return ReportedValue(formula, nan, nan, {})
    if not assessment.fit.ok:
        return ReportedValue(replace(formula, reason="the fit failed"), nan, nan, {})
    facts = [
        quantity_facts(f, formula.quantity, study.level, brief=not stands)
        for f in assessment.fits.values()
    ]
    first = facts[0]
    reconciled = first.reconciled
    for other in facts[1:]:  # what holds whichever way the errors of the conditions are read
        reconciled = united(reconciled, other.reconciled)
    every = {"linearised": first.linearised, "profile": first.profile, "reconciled": reconciled}
    if stands:
        own = [kinds["guaranteed"] for kinds in assessment.intervals]
        sure = guaranteed_quantity(assessment.fit, formula.quantity, 1.0 - study.level, own)
        every["guaranteed"] = sure
    shown = {kind: _scaled(i, formula.factor) for kind, i in every.items()}
    return ReportedValue(
        formula, first.value / formula.factor, first.standard_error / formula.factor, shown
    )


def _scaled(interval: Interval, factor: float) -> Interval:
    if factor == 1.0:
        return interval
    low, high = (Side(s.value / factor, s.end) for s in (interval.low, interval.high))
    pieces = tuple((a / factor, b / factor) for a, b in interval.pieces)
    return replace(interval, low=low, high=high, pieces=pieces)
