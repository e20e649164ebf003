"""One law bound to a bench: its predictor, its free constants and their units."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from discrim.errors import DiscrimError
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.dimension import ConstantUnits, find_units
from discrim.ratelaw.linear import linear_constants
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw
from discrim.ratelaw.scale import typical_scale
from discrim.reactor.rates import RatePredictor
from discrim.study.model import ConstantSetting
from discrim.units import Unit
from discrim.weigh.bench import Bench, fixed_put_in, is_condition


@dataclass(frozen=True, slots=True, eq=False)
class Bound:
    """One law bound to a bench.

    Attributes
    ----------
    expressions : one for each response, in symbols of constants and conditions only
    constants : the free constants of the law, before one per group is made of them
    names : names of the p free constants of the predictor, ``k[label]`` where there is one a group
    column_of : shape (N, q) free constant of each law constant in each observation
    law_constants : symbols in the order of q
    unit_of : unit of each constant by its name; None where it is not settled or depends on an order
    """

    law: RateLaw
    predictor: RatePredictor
    expressions: tuple[Any, ...]
    constants: tuple[Constant, ...]
    names: tuple[str, ...]
    units: tuple[str, ...]
    column_of: np.ndarray
    compiled: tuple[CompiledLaw, ...]
    findings: tuple[str, ...] = ()
    unit_of: Mapping[str, Unit | None] = field(default_factory=dict)

    def base_constant(self, j: int) -> Constant:
        """The law's constant behind free constant j."""
        rows, cols = np.nonzero(self.column_of == j)
        return self.constants[int(cols[0])] if len(rows) else self.constants[0]


def bind(
    law: RateLaw, bench: Bench, expressions: Sequence[Any], *, with_units: bool = True
) -> Bound:
    """The predictor of a law whose expressions (one a response) have derived quantities put in.

    ``with_units`` is False for laws that were made by putting numbers into others.
    """
    study = bench.study
    found = _units(law, bench, expressions) if with_units else ConstantUnits({}, {}, ())
    words, findings = found.words, found.findings
    expressions = [fixed_put_in(e, study) for e in expressions]
    in_use = set().union(*(e.free_symbols for e in expressions))
    constants = tuple(
        c
        for c in _all_constants(law, expressions)
        if c.symbol in in_use and c.name not in bench.known
    )
    names, column_of = _grouped(constants, bench)
    compiled = tuple(
        CompiledLaw(e, [c.symbol for c in constants], list(bench.symbols)) for e in expressions
    )
    formulas = [
        None if h is None else CompiledLaw(h, [], list(bench.symbols)) for h in bench.computed
    ]
    typical_values = {
        s: _typical(bench.measurements.conditions[:, j]) for j, s in enumerate(bench.symbols)
    }
    sized = [
        (e, _typical(bench.measurements.y[bench.response == k])) for k, e in enumerate(expressions)
    ]
    scale_map = typical_scale(sized, typical_values)
    linear_names = set(linear_constants(list(expressions), constants))
    p = len(names)
    lower, upper, scale = np.zeros(p), np.full(p, np.inf), np.ones(p)
    linear = np.zeros(p, bool)
    start = np.full(p, np.nan)
    shown: list[str] = [""] * p
    for q, c in enumerate(constants):
        setting = study.constants.get(c.name)
        for j in np.unique(column_of[:, q]):
            lower[j] = c.lower
            scale[j] = scale_map.get(c.name, 1.0)
            linear[j] = c.name in linear_names
            shown[j] = words.get(c.name, "")
            if setting is not None:
                if setting.at_least is not None:
                    lower[j] = setting.at_least
                if setting.at_most is not None:
                    upper[j] = setting.at_most
                _check_bounds(setting, lower[j])
                if setting.start is not None:
                    start[j] = setting.start
    scale = np.where(np.isfinite(scale) & (scale > 0), scale, 1.0)
    starts = start[None] if np.isfinite(start).any() else np.zeros((0, p))
    simple = bool((column_of == np.arange(len(constants))).all()) and p == len(constants)
    predictor = RatePredictor(
        compiled,
        bench.response,
        names=names,
        lower=lower,
        upper=upper,
        linear=linear,
        scale=scale,
        starts=starts,
        index=None if simple else column_of,
        worked_out=formulas,
        readings=bench.measurements.y,
    )
    return Bound(
        law,
        predictor,
        tuple(expressions),
        constants,
        names,
        tuple(shown),
        column_of,
        compiled,
        findings,
        found.units,
    )


def _units(law: RateLaw, bench: Bench, expressions: Sequence[Any]) -> ConstantUnits:
    """Units of the constants, also as text, and what is odd about them."""
    given = dict(bench.units)
    for e in expressions:
        for s in e.free_symbols:
            setting = bench.study.constants.get(s.name)
            if setting is not None and setting.unit is not None:
                given[s] = setting.unit
    parts = [(e, bench.responses[k].unit) for k, e in enumerate(expressions)]
    try:
        return find_units(parts, given, place=law.place)
    except DiscrimError:
        stated = [s for s in given if s not in bench.units]
        for s in stated:  # is it the unit that the study states for one constant?
            without = {k: unit for k, unit in given.items() if k is not s}
            try:
                find_units(parts, without, place=law.place)
            except DiscrimError:
                continue
            setting = bench.study.constants[s.name]
            raise DiscrimError(
                f'the unit of "{s.name}", {setting.shown}, does not fit the law of "{law.name}"',
                place=setting.place,
                do="Check it against the law and the units of the columns.",
            ) from None
        raise


def _check_bounds(setting: ConstantSetting, least: float) -> None:
    """Refuse what is stated below the least value that the constant can have."""
    stated = {"at_most": setting.at_most, "start": setting.start}
    for key, value in stated.items():
        if value is not None and (value < least or (key == "at_most" and value == least)):
            raise DiscrimError(
                f'{key} of "{setting.name}" is {value:g}, but it is at least {least:g}',
                place=setting.place,
                do="Rate and equilibrium constants are 0 or more; only orders, in an exponent, "
                "can be negative. Where a term is to be subtracted, write the minus in the law.",
            )


def _all_constants(law: RateLaw, expressions: Sequence[Any]) -> tuple[Constant, ...]:
    """The law's constants, and any that came in with derived formulas."""
    have = {c.symbol for c in law.constants}
    new = sorted(
        {s for e in expressions for s in e.free_symbols if s not in have and not is_condition(s)},
        key=lambda s: s.name,
    )
    return law.constants + tuple(
        Constant(s.name, s, ConstantKind.OTHER if s.is_nonnegative else ConstantKind.ORDER)
        for s in new
    )


def _typical(x: np.ndarray) -> float:
    x = np.abs(x[np.isfinite(x) & (x != 0)])
    return float(np.exp(np.log(x).mean())) if len(x) else 1.0


def _grouped(constants: Sequence[Constant], bench: Bench) -> tuple[tuple[str, ...], np.ndarray]:
    """Free constants: one for each law constant, or one for each label of its ``per`` column."""
    n = len(bench.runs)
    names: list[str] = []
    column_of = np.zeros((n, len(constants)), int)
    for q, c in enumerate(constants):
        setting = bench.study.constants.get(c.name)
        per = setting.per if setting is not None else None
        if per is None:
            column_of[:, q] = len(names)
            names.append(c.name)
            continue
        labels = [bench.study.runs.find(per).labels[i] for i in bench.runs]
        for label in sorted(set(labels)):
            rows = [i for i, text in enumerate(labels) if text == label]
            column_of[rows, q] = len(names)
            names.append(f"{c.name}[{label}]")
    return tuple(names), column_of
