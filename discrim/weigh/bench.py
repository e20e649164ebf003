"""Laws bound to the runs of a study: the one place where chemistry is handed to statistics.

`Bench` holds what is the same for all candidates (observations, conditions, errors); `bind` makes
the predictor of one law over it.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import sympy

from discrim.errors import DiscrimError
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.dimension import find_units
from discrim.ratelaw.linear import linear_constants
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw, amount, quantity
from discrim.ratelaw.scale import typical_scale
from discrim.reactor.rates import RatePredictor
from discrim.runs.model import Column, ErrorBasis, Role
from discrim.study.model import ConstantSetting, Study
from discrim.units import Unit


@dataclass(frozen=True, slots=True, eq=False)
class Bench:
    """The runs of a study as every candidate sees them.

    Attributes
    ----------
    measurements : N observations; ``conditions`` columns follow ``symbols``
    symbols : sympy symbols of the m conditions
    responses : observed columns; response : shape (N,) index into them
    runs : shape (N,) index of the run of each observation
    units : unit of each condition symbol
    """

    study: Study
    measurements: Measurements
    symbols: tuple[Any, ...]
    responses: tuple[Column, ...]
    response: np.ndarray
    runs: np.ndarray
    units: Mapping[Any, Unit]
    known: tuple[str, ...]
    planned: bool = False

    def condition(self, symbol: Any) -> int:
        return self.symbols.index(symbol)

    def typical(self, species: str) -> float:
        """Geometric mean of the nonzero amounts of a species over the runs (1 if none)."""
        if amount(species) not in self.symbols:
            return 1.0
        x = self.measurements.conditions[:, self.condition(amount(species))]
        x = x[x > 0]
        return float(np.exp(np.log(x).mean())) if len(x) else 1.0


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

    def base_constant(self, j: int) -> Constant:
        """The law's constant behind free constant j."""
        rows, cols = np.nonzero(self.column_of == j)
        return self.constants[int(cols[0])] if len(rows) else self.constants[0]


def observed_expression(column: Column, law: RateLaw, study: Study) -> Any:
    """What a law says of one observed column, in symbols of species and constants."""
    about = column.about
    if law.production:
        if about not in law.production:
            made = ", ".join(sorted(law.production))
            raise DiscrimError(
                f'candidate "{law.name}" does not make or consume {about}, which column '
                f'"{column.name}" measures',
                place=column.place,
                do=f"It changes {made}. Correct the steps, the overall reaction, or `is`.",
            )
        made_rate = law.production[about]
    else:
        made_rate = law.rate if column.role is Role.RATE_OF else -law.rate
    if column.role is Role.RATE_OF:
        expr = made_rate
    else:
        expr = -made_rate
        if column.role is Role.K_OBS_OF:
            expr = (
                sympy.cancel(expr / amount(about))
                if expr.is_rational_function()
                else (expr / amount(about))
            )
    return expr


def put_in(expr: Any, study: Study) -> Any:
    """Derived quantities put into an expression, symbolically; one may use another."""
    swap = {}
    for d in study.derived:
        swap[amount(d.name)] = d.formula
        swap[quantity(d.name)] = d.formula
    for _ in range(len(study.derived) + 1):
        new = expr.xreplace(swap)
        if new == expr:
            break
        expr = new
    return expr


def fixed_put_in(expr: Any, study: Study) -> Any:
    """Constants that the study holds fixed, as numbers."""
    fixed = {
        s: sympy.Float(repr(setting.value), 17)
        for s in expr.free_symbols
        if (setting := study.constants.get(s.name)) is not None
        and setting.value is not None
        and setting.sd == 0
        and not _is_condition(s)
    }
    return expr.xreplace(fixed) if fixed else expr


def _is_condition(symbol: Any) -> bool:
    return symbol.name.startswith(("[", "{"))


def column_of_symbol(symbol: Any, study: Study) -> Column | None:
    """The column or condition that gives the values of a symbol, or None."""
    name = symbol.name[1:-1]
    if symbol.name.startswith("["):
        return study.runs.species().get(name)
    for c in study.runs.columns:
        if c.name == name:
            return c
    return None


def catalyst_column(law_catalysts: Sequence[str], study: Study) -> Column | None:
    """The column that a law per total catalyst is to be multiplied with."""
    for c in study.runs.columns:
        if c.role is Role.CATALYST or (c.role is Role.TOTAL and c.about in law_catalysts):
            return c
    return None


def known_constants(study: Study) -> dict[str, tuple[float, float, float | None]]:
    """Constants known with an uncertainty: name -> (value, sd, hard bound or None)."""
    return {
        n: (s.value, s.sd, s.bound)
        for n, s in study.constants.items()
        if s.value is not None and s.sd > 0
    }


def build(
    study: Study, expressions: Iterable[Any], *, extra: Sequence[Any] = (), planned: bool = False
) -> Bench:
    """The bench for laws whose bound expressions are ``expressions``.

    ``extra`` symbols become conditions even if no law holds them (stand-ins). With ``planned`` runs
    without an observed value are kept, with nan.
    """
    responses = study.runs.observations()
    if not responses:
        raise DiscrimError(
            "no column is observed",
            do='Say which column is the rate: [columns.NAME] with is = "rate of P".',
        )
    known = known_constants(study)
    symbols: set[Any] = set(extra)
    for e in expressions:
        for s in e.free_symbols:
            if _is_condition(s) or s.name in known:
                symbols.add(s)
    ordered = tuple(sorted(symbols, key=lambda s: s.name))
    kept = study.kept()
    runs_list, response_list, y_list = [], [], []
    for k, column in enumerate(responses):
        values = column.values[kept]
        use = kept if planned else kept[np.isfinite(values)]
        runs_list.append(use)
        response_list.append(np.full(len(use), k))
        y_list.append(column.values[use])
    runs = np.concatenate(runs_list)
    response = np.concatenate(response_list).astype(int)
    y = np.concatenate(y_list)
    n = len(y)
    conditions = np.empty((n, len(ordered)))
    units: dict[Any, Unit] = {}
    sources: list[ErrorSource] = []
    for j, s in enumerate(ordered):
        if s.name in known and not _is_condition(s):
            value, sd, bound = known[s.name]
            conditions[:, j] = value
            units[s] = study.constants[s.name].unit or Unit()
            sources.append(
                ErrorSource(
                    j,
                    np.zeros(n),
                    np.full(n, sd),
                    None if bound is None else np.full(n, bound),
                    "measured",
                    np.zeros(n, int),
                    n == 1,
                )
            )
            continue
        given = column_of_symbol(s, study)
        if given is None:
            raise _unmeasured(s, study)
        column = given
        conditions[:, j] = column.values[runs]
        if not np.isfinite(conditions[:, j]).all():
            row = runs[int(np.flatnonzero(~np.isfinite(conditions[:, j]))[0])]
            raise DiscrimError(
                f'column "{column.name}" has no number in run {study.runs.labels[row]}',
                place=column.place,
                do="A law needs it in every run; fill it in or exclude the run.",
            )
        units[s] = column.unit
        sources += _sources(column, j, runs, n, 0)
    scale, scale_df = _scale(responses)
    for k, column in enumerate(responses):
        mine = response == k
        for src in _sources(column, OBSERVATION, runs, n, k):
            # this response only: others get no error from it
            sources.append(
                ErrorSource(
                    OBSERVATION,
                    np.where(mine, src.relative, 0.0),
                    np.where(mine, src.absolute, 0.0),
                    None if src.bound is None else np.where(mine, src.bound, 0.0),
                    src.origin,
                    np.where(mine, src.groups, -1 - np.arange(n)),
                    src.individual,
                )
            )
    measurements = Measurements(
        y,
        conditions,
        tuple(sources),
        scale,
        tuple(s.name for s in ordered),
        scale_df,
        study.runs.replicate_of[runs] if len(responses) == 1 else None,
    )
    return Bench(
        study, measurements, ordered, responses, response, runs, units, tuple(known), planned
    )


def _sources(column: Column, target: int, runs: np.ndarray, n: int, k: int) -> list[ErrorSource]:
    out = []
    for part in column.errors:
        groups = part.groups[runs]
        out.append(
            ErrorSource(
                target,
                np.full(n, float(part.relative)),
                np.asarray(part.absolute, float)[runs],
                None if part.bound is None else np.asarray(part.bound, float)[runs],
                part.origin,
                groups,
                len(np.unique(groups)) == n,
            )
        )
    return out


def _scale(responses: Sequence[Column]) -> tuple[Scale, int]:
    bases = {c.basis for c in responses}
    if bases == {ErrorBasis.ESTIMATED}:
        if len(responses) > 1:
            raise DiscrimError(
                "several observed columns, none with an error",
                place=responses[0].place,
                do="State `error` for each: their variances cannot yet be estimated together.",
            )
        return Scale.ESTIMATED, 0
    if ErrorBasis.ESTIMATED in bases:
        missing = next(c for c in responses if c.basis is ErrorBasis.ESTIMATED)
        raise DiscrimError(
            f'column "{missing.name}" has no error while other observed columns have one',
            place=missing.place,
            do="State `error` for it as well.",
        )
    if ErrorBasis.REPLICATES in bases:
        return Scale.REPLICATES, min(c.replicate_df for c in responses if c.replicate_df)
    if ErrorBasis.EXACT in bases:
        exact = next(c for c in responses if c.basis is ErrorBasis.EXACT)
        raise DiscrimError(
            f'column "{exact.name}" is observed and said to have no error',
            place=exact.place,
            do="Every measured rate has one; state it, or leave `error` out to have it estimated.",
        )
    return Scale.STATED, 0


def _unmeasured(symbol: Any, study: Study) -> DiscrimError:
    have = [c.about for c in study.runs.columns if c.role is Role.SPECIES]
    have += [f"{d.name} (derived)" for d in study.derived]
    name = symbol.name[1:-1]
    what = f"species {name}" if symbol.name.startswith("[") else f'quantity "{name}"'
    return DiscrimError(
        f"{what} stands in a rate law, but nothing measures it",
        do=f"Measured or derived are: {', '.join(have) or 'none'}. Add a column, "
        f"[conditions.{name}], or a [derived] formula.",
    )


def bind(
    law: RateLaw, bench: Bench, expressions: Sequence[Any], *, with_units: bool = True
) -> Bound:
    """The predictor of a law whose expressions (one a response) have derived quantities put in.

    ``with_units`` is False for laws that were made by putting numbers into others.
    """
    study = bench.study
    words, findings = _unit_words(law, bench, expressions) if with_units else ({}, ())
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
    )


def _unit_words(
    law: RateLaw, bench: Bench, expressions: Sequence[Any]
) -> tuple[Mapping[str, str], tuple[str, ...]]:
    """Units of the constants as text, and what is odd about them."""
    given = dict(bench.units)
    for e in expressions:
        for s in e.free_symbols:
            setting = bench.study.constants.get(s.name)
            if setting is not None and setting.unit is not None:
                given[s] = setting.unit
    parts = [(e, bench.responses[k].unit) for k, e in enumerate(expressions)]
    try:
        found = find_units(parts, given, place=law.place)
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
    return found.words, found.findings


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
        {s for e in expressions for s in e.free_symbols if s not in have and not _is_condition(s)},
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
