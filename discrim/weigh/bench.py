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
from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements
from discrim.fit.responses import Estimate, Unknown
from discrim.ratelaw.model import RateLaw, amount, quantity
from discrim.runs.model import Column, ErrorBasis, Role
from discrim.study.model import Study
from discrim.units import Unit
from discrim.weigh.errors_of import scale_of, unknown_of, with_errors


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
    computed : for each response the formula, in symbols of conditions, that its values were worked out
        by, or None
    unknown : what of the errors of several responses has to be estimated from the fits, or None;
        stated : then the measurements with the stated errors only, errors : the estimate that
        ``measurements`` hold (None before it is made: a rough guess is held), errors_from : the
        candidate whose law it was made with
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
    computed: tuple[Any, ...] = ()
    unknown: Unknown | None = None
    stated: Measurements | None = None
    errors: Estimate | None = None
    errors_from: str = ""

    def condition(self, symbol: Any) -> int:
        return self.symbols.index(symbol)

    def typical(self, species: str) -> float:
        """Geometric mean of the nonzero amounts of a species over the runs (1 if none)."""
        if amount(species) not in self.symbols:
            return 1.0
        x = self.measurements.conditions[:, self.condition(amount(species))]
        x = x[x > 0]
        return float(np.exp(np.log(x).mean())) if len(x) else 1.0


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
        and not is_condition(s)
    }
    return expr.xreplace(fixed) if fixed else expr


def is_condition(symbol: Any) -> bool:
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


def known_constants(study: Study) -> dict[str, tuple[float, float, float | None]]:
    """Constants known with an uncertainty: name -> (value, sd, hard bound or None)."""
    return {
        n: (s.value, s.sd, s.bound)
        for n, s in study.constants.items()
        if s.value is not None and s.sd > 0
    }


def build(
    study: Study,
    expressions: Iterable[Any],
    *,
    extra: Sequence[Any] = (),
    planned: bool = False,
    errors: Estimate | None = None,
) -> Bench:
    """The bench for laws whose bound expressions are ``expressions``.

    ``extra`` symbols become conditions even if no law holds them (stand-ins). With ``planned`` runs
    without an observed value are kept, with nan. ``errors``: of several responses, as estimated before.
    """
    responses = study.runs.observations()
    if not responses:
        raise DiscrimError(
            "no column is observed",
            do='Say which column is the rate: [columns.NAME] with is = "rate of P".',
        )
    known = known_constants(study)
    computed = tuple(_formula_of(column, study) for column in responses)
    symbols: set[Any] = set(extra)
    for e in [*expressions, *(e for e in computed if e is not None)]:
        for s in e.free_symbols:
            if is_condition(s) or s.name in known:
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
        if s.name in known and not is_condition(s):
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
    scale, scale_df = scale_of(
        responses, [c.name for c in responses if c.name in study.computed], study.responses_together
    )
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
    _check_some_error(responses, computed, ordered, sources)
    measurements = Measurements(
        y,
        conditions,
        tuple(sources),
        scale,
        tuple(s.name for s in ordered),
        scale_df,
        None
        if study.responses_together
        else study.runs.replicate_of[runs] * len(responses) + response,
    )
    unknown = unknown_of(responses, response, runs, y, study.responses_together)
    stated = None
    if unknown is not None:
        stated = measurements
        measurements = with_errors(stated, unknown, errors)
    return Bench(
        study,
        measurements,
        ordered,
        responses,
        response,
        runs,
        units,
        tuple(known),
        planned,
        computed,
        unknown,
        stated,
        errors,
    )


def _check_some_error(
    responses: Sequence[Column],
    computed: Sequence[Any],
    symbols: Sequence[Any],
    sources: Sequence[ErrorSource],
) -> None:
    """A rate without an error of its own has those of what it was worked out from, or none at all."""
    uncertain = {symbols[s.target] for s in sources if s.target != OBSERVATION}
    for column, formula in zip(responses, computed, strict=True):
        if formula is None or column.basis is not ErrorBasis.EXACT:
            continue
        if not formula.free_symbols & uncertain:
            raise DiscrimError(
                f'"{column.name}" has no error, and nothing that it was worked out from has one',
                place=column.place,
                do="Every measured rate has an error: state those of the columns in its formula, "
                f'or one of "{column.name}" itself.',
            )


def _formula_of(column: Column, study: Study) -> Any:
    """The formula of a column that was worked out from others, as a law is; None for any other."""
    one = study.computed.get(column.name)
    return None if one is None else fixed_put_in(put_in(one.formula, study), study)


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
