"""The residuals of each candidate held against the columns of the study, its order and one another."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from discrim.evidence.adequacy import ReplicateScatter, replicate_scatter
from discrim.evidence.patterns import (
    Pattern,
    draws,
    equal_variance,
    normality,
    projected,
    runs_of_signs,
)
from discrim.evidence.residuals import Influence, Residuals, influence, residuals_of
from discrim.evidence.trends import Added, groups, holm, scores, trend
from discrim.fit.fit import Fit
from discrim.ratelaw.model import amount, quantity
from discrim.runs.model import Column, Role
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound

# with more candidates only those that stand are looked at
MOST = 40
# readings that vary by less than ten times their error: a correlation of a tenth with it at most
OWN_ERROR = 0.1
TABLE_ORDER = "the order of the table"


@dataclass(frozen=True, slots=True, eq=False)
class Followed:
    """Something that residuals could follow.

    ``names`` : columns that rank the observations alike; ``words`` when labels make groups of them
    """

    names: tuple[str, ...]
    values: np.ndarray
    words: bool
    role: Role
    symbols: tuple[Any, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Trend:
    """Residuals of one candidate against one column; ``p`` of this test, ``p_all`` after Holm."""

    follows: Followed
    in_law: bool
    test: Added
    p_all: float


@dataclass(frozen=True, slots=True, eq=False)
class Adequacy:
    """What the residuals of one candidate show; None where too few runs are left to tell."""

    trends: tuple[Trend, ...]
    order: str
    runs_in_order: Pattern | None
    runs_by_prediction: Pattern | None
    equal_variance: Pattern | None
    normality: Pattern | None
    influence: Influence
    replicates: ReplicateScatter | None


def adequacies(
    bench: Bench,
    bounds: Sequence[Bound],
    fits: Sequence[Fit],
    stands: Sequence[bool],
    seed: int,
) -> tuple[Adequacy | None, ...]:
    """For each candidate; None where it did not fit, or no degrees of freedom are left."""
    columns = followed(bench)
    order, name = run_order(bench)
    normal = draws(bench.measurements.n, seed)[:, places(bench)]
    out: list[Adequacy | None] = []
    for bound, fit, ok in zip(bounds, fits, stands, strict=True):
        of = residuals_of(fit) if ok or len(fits) <= MOST else None
        out.append(None if of is None else _adequacy(of, bound, fit, columns, order, name, normal))
    return tuple(out)


def _adequacy(
    of: Residuals,
    bound: Bound,
    fit: Fit,
    columns: Sequence[Followed],
    order: np.ndarray,
    name: str,
    normal: np.ndarray,
) -> Adequacy:
    used = set().union(*(e.free_symbols for e in bound.expressions))
    tried = [(c, groups(of, c.values) if c.words else trend(of, c.values)) for c in columns]
    tested = [(c, t) for c, t in tried if t is not None]
    null = projected(of, normal)
    # observations of one response stay together, in the order of their predictions
    level = scores(of.values)
    return Adequacy(
        tuple(
            Trend(c, bool(used.intersection(c.symbols)), t, p)
            for (c, t), p in zip(tested, holm([t.p for _, t in tested]), strict=True)
        ),
        name,
        runs_of_signs(of, order, null),
        runs_of_signs(of, np.lexsort((level, _response(fit, bound))), null),
        equal_variance(of, level, null),
        normality(of, null),
        influence(of),
        replicate_scatter(fit),
    )


def _response(fit: Fit, bound: Bound) -> np.ndarray:
    return np.asarray(bound.predictor.response) if fit.n else np.zeros(0)


def places(bench: Bench) -> np.ndarray:
    """Where each observation stands when they are sorted by what was read, shape (N,): drawn numbers
    then belong to runs, whatever the order of the table and of its columns."""
    data = bench.measurements
    alike = sum((scores(data.conditions[:, j]) for j in range(data.m)), np.zeros(data.n))
    return np.argsort(np.lexsort((np.round(alike, 9), data.y, bench.response)))


def run_order(bench: Bench) -> tuple[np.ndarray, str]:
    """The observations as they were made, response by response, and what says so."""
    runs = bench.study.runs
    for role in (Role.RUN_ORDER, Role.TIME_ON_STREAM):
        for c in runs.columns:
            x = c.values[bench.runs]
            if c.role is role and np.isfinite(x).all():
                return np.lexsort((x, bench.response)), f"column “{c.name}”"
    return np.lexsort((bench.runs, bench.response)), TABLE_ORDER


def followed(bench: Bench) -> list[Followed]:
    """All columns that vary, each ordering of the observations once."""
    observed = {c.name for c in bench.responses}
    out: list[Followed] = []
    seen: dict[tuple[Any, ...], int] = {}
    for c in bench.study.runs.columns:
        if c.name in observed or not c.in_table or _moves_with_error(c, bench):
            continue
        one = _one(c, bench)
        if one is None:
            continue
        key = (one.words, *_key(one))
        if key in seen:
            k = seen[key]
            old = out[k]
            out[k] = Followed(
                old.names + one.names,
                old.values,
                old.words,
                _telling(old.role, one.role),
                old.symbols + one.symbols,
            )
            continue
        seen[key] = len(out)
        out.append(one)
    return out


def _moves_with_error(c: Column, bench: Bench) -> bool:
    """Whether residuals follow the column by themselves: it comes out of the run, or what is read in
    it is to a good part its own error, which is in the residual too."""
    if c.role is Role.CONVERSION:
        return True
    x = c.values[bench.runs]
    variance = np.zeros(len(x))
    for e in c.errors:
        if e.origin != "set":
            variance += np.asarray(e.absolute)[bench.runs] ** 2 + (e.relative * x) ** 2
    return bool(np.sqrt(variance.mean()) > OWN_ERROR * float(np.std(x)))


def _one(c: Column, bench: Bench) -> Followed | None:
    n = len(np.unique(bench.runs))
    if c.role is Role.RUN and not _numbers_in_order(c):
        return None
    x = c.values[bench.runs]
    numeric = bool(np.isfinite(x).all()) and c.role is not Role.GROUP
    symbols = (amount(c.about),) if c.role is Role.SPECIES else ()
    symbols = (*symbols, quantity(c.name))
    if numeric:
        return None if float(np.ptp(x)) == 0.0 else Followed((c.name,), x, False, c.role, symbols)
    if np.isfinite(c.values).any() and c.role is not Role.GROUP:
        return None  # numbers with gaps
    of = np.unique([c.labels[i] for i in bench.runs], return_inverse=True)[1].reshape(-1)
    if not 2 <= int(of.max()) + 1 <= n // 2:
        return None  # one label for all, or nearly one for each
    return Followed((c.name,), of, True, c.role, symbols)


def _numbers_in_order(c: Column) -> bool:
    """Numbers of runs are an order; other labels of runs are only names."""
    return bool(np.isfinite(c.values).all())


def _key(one: Followed) -> tuple[Any, ...]:
    """The same for columns that sort the observations into the same order, or its reverse, or into
    the same groups."""
    if one.words:
        first = {g: i for i, g in reversed(list(enumerate(one.values.tolist())))}
        return tuple(first[g] for g in one.values.tolist())
    s = scores(one.values)
    first = s[np.flatnonzero(s)[0]]
    return tuple((s if first < 0 else -s).tolist())


def _telling(a: Role, b: Role) -> Role:
    """The role of columns in one order that says most of what the trend can mean."""
    for role in (Role.TIME_ON_STREAM, Role.RUN_ORDER, Role.TEMPERATURE, Role.SPECIES):
        if role in (a, b):
            return role
    return a
