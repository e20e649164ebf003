"""What moved with a species over the runs: columns, orders and products of them, labels of groups.

Powers of the species itself are no proxies: where they explain the runs, it still takes part.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
import sympy

from discrim.evidence.distributions import chi2_quantile_upper
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.model import amount, quantity
from discrim.runs.errors import ASSUMED_RELATIVE, same_label
from discrim.runs.model import Column, Role
from discrim.study.model import Study
from discrim.weigh.bench import Bench, fixed_put_in, put_in

# A column whose logarithm follows that of the species this closely over the runs is tried in its
# place (squared correlation).
STAND_IN_CORRELATION = 0.9
# ... and so is one that is in proportion to it within the errors of both, however narrow their range;
# chance that one that is so passes for one that is not
OUT_OF_PROPORTION = 0.01
# orders of one column that are tried; of -1 and 1/2 only where they come closer than the column itself
ORDERS: tuple[Any, ...] = (1, 2, sympy.Rational(1, 2), -1)
NO_STAND_IN = (Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF, Role.RUN)


@dataclass(frozen=True, slots=True, eq=False)
class Base:
    """Something measured or derived that could move with a species.

    ``expression`` in symbols of conditions; ``values`` shape (N,) over the observations; ``relative``
    its relative error there; ``column`` the column it is, None for what is derived.
    """

    name: str
    expression: Any
    values: np.ndarray
    relative: np.ndarray
    column: Column | None

    @property
    def is_group(self) -> bool:
        return self.column is not None and self.column.role is Role.GROUP


@dataclass(frozen=True, slots=True, eq=False)
class Proxy:
    """What is put in the place of a species: ``expression`` of the size of its amounts.

    ``gap``: standard deviation of the logarithm of the ratio of both, the closest first.
    """

    name: str
    expression: Any
    values: np.ndarray
    bases: tuple[Base, ...]
    gap: float


def proxies(about: str, study: Study, bench: Bench) -> list[Proxy]:
    """What moved with species ``about``, closest first."""
    values = values_of(about, study, bench)
    if values is None or not (values > 0).any():
        return []
    own = relative_error(about, study, bench, values)
    bases = _bases(about, study, bench)
    found: list[Proxy] = []
    reached: dict[str, float] = {}
    for b in bases:
        closest = np.inf
        for order in ORDERS if not b.is_group else (1,):
            x = _power(b.values, order)
            if x is None:
                continue
            follows, gap = _follows(x, values, np.hypot(own, abs(float(order)) * b.relative))
            if not follows or (order not in (1, 2) and gap >= closest):
                continue
            closest = min(closest, gap)
            name = {1: b.name, 2: f"{b.name} squared", -1: f"1/{b.name}"}.get(
                order, f"the square root of {b.name}"
            )
            found.append(Proxy(name, b.expression**order, x, (b,), gap))
        reached[b.name] = closest
    # a group takes its values from the species: times another column they would be its amounts again
    for a, b in combinations([b for b in bases if not b.is_group], 2):
        x = a.values * b.values
        follows, gap = _follows(x, values, np.sqrt(own**2 + a.relative**2 + b.relative**2))
        # where one of them alone comes closer, the other adds nothing
        if follows and gap < min(reached[a.name], reached[b.name]):
            name = f"{a.name} times {b.name}"
            found.append(Proxy(name, a.expression * b.expression, x, (a, b), gap))
    found.sort(key=lambda f: f.gap)
    return _distinct(found)


def alike_labels(about: str, study: Study, bench: Bench) -> list[str]:
    """Undeclared text columns whose labels split the runs as the amounts of a species do."""
    values = values_of(about, study, bench)
    if values is None or not (values > 0).any():
        return []
    own = relative_error(about, study, bench, values)
    out = []
    for col in study.runs.columns:
        means = _group_means(col, bench, values)
        if col.role is Role.IGNORED and means is not None and _follows(means, values, own)[0]:
            out.append(col.name)
    return out


def values_of(about: str, study: Study, bench: Bench) -> np.ndarray | None:
    """Amounts of a species over the observations, derived ones included."""
    symbol = amount(about)
    if symbol in bench.symbols:
        return bench.measurements.conditions[:, bench.condition(symbol)]
    e = fixed_put_in(put_in(symbol, study), study)
    if e == symbol or not e.free_symbols <= set(bench.symbols):
        return None
    law = CompiledLaw(e, [], list(bench.symbols))
    out = law(
        np.zeros((1, 1, 0)),
        bench.measurements.conditions,
        constants=False,
        conditions_too=False,
        both=False,
    )[0]
    return np.array(np.broadcast_to(out[0], (bench.measurements.n,)))


def relative_error(about: str, study: Study, bench: Bench, values: np.ndarray) -> np.ndarray:
    """Relative error of the amounts of a species, shape (N,): of a derived one the largest of those
    that it is derived from."""
    symbols = fixed_put_in(put_in(amount(about), study), study).free_symbols
    total = np.zeros(len(values))
    for s in symbols:
        if s not in bench.symbols:
            continue
        j = bench.condition(s)
        x = bench.measurements.conditions[:, j]
        var = np.zeros(len(values))
        for src in bench.measurements.of_conditions:
            if src.target == j:
                var = var + src.sd(x) ** 2
        with np.errstate(divide="ignore", invalid="ignore"):
            one = np.where(x > 0, np.sqrt(var) / x, 0.0)
        total = np.maximum(total, one)
    return total


def symbol_of(col: Column) -> Any:
    return amount(col.about) if col.role is Role.SPECIES else quantity(col.name)


def _bases(about: str, study: Study, bench: Bench) -> list[Base]:
    out: list[Base] = []
    values = values_of(about, study, bench)
    assert values is not None
    for col in study.runs.columns:
        if col.role in NO_STAND_IN or (col.role is Role.SPECIES and col.about == about):
            continue
        x = col.values[bench.runs]
        if col.role is Role.GROUP:
            means = _group_means(col, bench, values)
            if means is not None:
                label = f"the group in column “{col.name}”"
                relative = np.full(len(means), ASSUMED_RELATIVE)
                out.append(Base(label, quantity(col.name), means, relative, col))
            continue
        if not np.isfinite(x).all() or (x < 0).any() or not (x > 0).any():
            continue
        name = col.about if col.role is Role.SPECIES else f"column “{col.name}”"
        out.append(Base(name, symbol_of(col), x, _of_column(col, bench, x), col))
    for d in study.derived:
        if d.name == about:
            continue
        found = values_of(d.name, study, bench)
        if found is not None and np.isfinite(found).all() and (found > 0).any():
            formula = fixed_put_in(put_in(amount(d.name), study), study)
            relative = relative_error(d.name, study, bench, found)
            out.append(Base(d.name, formula, found, relative, None))
    return out


def _of_column(col: Column, bench: Bench, x: np.ndarray) -> np.ndarray:
    """Relative error of a column; of one without a stated error what is assumed of a condition."""
    var = np.zeros(len(x))
    for part in col.errors:
        var = var + np.asarray(part.absolute, float)[bench.runs] ** 2 + (part.relative * x) ** 2
    with np.errstate(divide="ignore", invalid="ignore"):
        relative = np.where(x > 0, np.sqrt(var) / x, 0.0)
    return relative if col.errors else np.full(len(x), ASSUMED_RELATIVE)


def _group_means(col: Column, bench: Bench, values: np.ndarray) -> np.ndarray | None:
    """Each observation's mean of ``values`` over its group; None where labels hardly group the runs."""
    if np.isfinite(col.values).any() and col.role is not Role.GROUP:
        return None
    groups = same_label([col.labels[i] for i in bench.runs])
    k = len(np.unique(groups))
    if k < 2 or k > len(groups) // 2:
        return None
    means = np.bincount(groups, values) / np.bincount(groups)
    return np.asarray(means[groups])


def _power(x: np.ndarray, order: Any) -> np.ndarray | None:
    if order < 0 and not (x > 0).all():
        return None
    return np.asarray(x ** float(order))


def _follows(x: np.ndarray, y: np.ndarray, error: np.ndarray) -> tuple[bool, float]:
    """Whether x moves with y, and the standard deviation of the logarithm of their ratio.

    ``error``: relative error of the ratio, shape (N,). Runs where both are zero say nothing; where only
    one is, x does not follow.
    """
    if not (np.isfinite(x).all() and ((x == 0) == (y == 0)).all()):
        return False, np.inf
    use = x > 0
    if use.sum() < 2:
        return False, np.inf
    u, v = np.log(x[use]), np.log(y[use])
    d = (v - u) - (v - u).mean()
    gap = float(np.sqrt(np.mean(d**2)))
    spread_u, spread_v = float(u.std()), float(v.std())
    zeros = not use.all()
    if spread_v <= 1e-9:  # the amounts are one and the same wherever there are any
        return spread_u <= 1e-9, gap
    if spread_u > 1e-9 and float(np.corrcoef(u, v)[0, 1]) >= np.sqrt(STAND_IN_CORRELATION):
        return True, gap
    e = np.maximum(error[use], 1e-12)
    close = float(((d / e) ** 2).sum()) < chi2_quantile_upper(OUT_OF_PROPORTION, use.sum() - 1)
    # a column that does not vary is none, unless it is zero in the same runs
    return close and (spread_u > 1e-9 or zeros), gap


def _distinct(found: Sequence[Proxy]) -> list[Proxy]:
    """Without those that are proportional to one named before with fewer columns or a lower order."""
    out: list[Proxy] = []
    simple = sorted(found, key=lambda f: (len(f.bases), f.name.count(" "), f.gap))
    kept: list[Proxy] = []
    for f in simple:
        if not any(_proportional(f.values, k.values) and len(f.bases) > 1 for k in kept):
            kept.append(f)
    for f in found:
        if f in kept:
            out.append(f)
    return out


def _proportional(a: np.ndarray, b: np.ndarray) -> bool:
    use = a > 0
    if not (use == (b > 0)).all() or not use.any():
        return False
    ratio = a[use] / b[use]
    return bool(np.ptp(ratio) <= 1e-9 * ratio.max())
