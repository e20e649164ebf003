"""Stand-ins: what moved in lockstep with a species and could be the real cause."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from itertools import combinations
from typing import TYPE_CHECKING, Any

import numpy as np
import sympy

from discrim.errors import DiscrimError
from discrim.evidence.rivals import standing
from discrim.evidence.term import Kind
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import Measurements
from discrim.ratelaw.knockout import KnockOutKind
from discrim.ratelaw.model import RateLaw, amount, quantity
from discrim.runs.model import Column, Role
from discrim.study.model import Study
from discrim.verdict import StandIn
from discrim.weigh.bench import Bench, build, fixed_put_in, observed_expression, put_in
from discrim.weigh.bind import Bound, bind
from discrim.weigh.laws import CandidateLaw

# A column whose logarithm follows that of the species this closely over the runs is tried in its
# place (squared correlation).
STAND_IN_CORRELATION = 0.9
MOST_STAND_INS = 8

_KIND = {
    KnockOutKind.ZERO: Kind.ZERO,
    KnockOutKind.VANISH: Kind.VANISH,
    KnockOutKind.SEVERAL: Kind.SEVERAL,
    KnockOutKind.ORDER: Kind.ORDER,
    KnockOutKind.FACTOR: Kind.FACTOR,
}

if TYPE_CHECKING:
    from discrim.weigh.asked import InCandidate


def stand_ins(
    about: str,
    study: Study,
    bench: Bench,
    laws: Sequence[CandidateLaw],
    bounds: Sequence[Bound],
    fits: Sequence[Mapping[str, Fit]],
    per: Sequence[InCandidate],
    stands: Sequence[bool],
    seed: int,
) -> list[tuple[StandIn, float]]:
    """Columns, products and squares that move with the species, put in its place.

    Tried in the standing candidate with the highest claim: the first that stands and contains it.
    """
    alpha = 1.0 - study.level
    asking = [k for k in per if stands[k.index] and k.contains and k.by_origin]
    if not asking:
        return []
    lead = asking[0]
    values = _values_of(about, study, bench)
    if values is None:
        return []
    own = next(iter(fits[lead.index].values()))
    used_here = set().union(*(e.free_symbols for e in laws[lead.index].bound))
    found: list[tuple[StandIn, float]] = []
    for name, symbol_expr, x, symbols in _proxies(about, study, bench, values):
        factor = float(np.median(values[values > 0]) / np.median(x[x > 0]))
        swapped = _swapped(laws[lead.index].law, about, symbol_expr * sympy.Float(factor, 17))
        extra = [s for s in symbols if s not in bench.symbols]
        if all(s in used_here for s in symbols) and _already(swapped, laws[lead.index].law):
            continue
        here = build(
            study,
            [e for c in laws for e in c.bound],
            extra=[*bench.symbols, *extra],
            errors=bench.errors,
        )
        try:
            rival = bind_law(swapped, study, here)
            host = bind_law(laws[lead.index].law, study, here)
        except (DiscrimError, ValueError):
            continue
        ok, chance = False, 0.0
        for origin in fits[lead.index]:
            # it stands if it does under any reading of the condition errors
            data = _same_errors(here.measurements, own.data, here, bench).as_origin(origin)
            f_own = fit(host.predictor, data, seed=seed, starts=4, near=own.theta[None])
            f_rival = fit(rival.predictor, data, seed=seed, starts=8)
            if not f_rival.ok or not f_own.ok or _adds_nothing(f_rival):
                break
            judged = standing([f_own, f_rival], {}, {}, alpha=alpha, seed=seed)[1]
            ok, chance = ok or judged.stands, max(chance, judged.p_joint)
        else:
            found.append(_told(name, about, ok, chance))
        if len(found) == MOST_STAND_INS:
            break
    return found


def _told(name: str, about: str, ok: bool, chance: float) -> tuple[StandIn, float]:
    verb = "explains these runs as well" if ok else "does not explain these runs"
    return StandIn(name, f"{name} in place of {about} {verb}", ok), chance


def _adds_nothing(f: Fit) -> bool:
    """True when the stand-in only repeats a term that the law has anyway."""
    jac = f.jacobian
    norms = np.sqrt((jac**2).sum(axis=0))
    moving = jac[:, norms > 0] / norms[norms > 0]
    if moving.shape[1] < 2:
        return False
    s = np.linalg.svd(moving, compute_uv=False)
    return bool(len(s) < moving.shape[1] or s[-1] <= 1e-9 * s[0])


def _values_of(about: str, study: Study, bench: Bench) -> np.ndarray | None:
    """Amounts of a species over the observations, derived ones included."""
    symbol = amount(about)
    if symbol in bench.symbols:
        return bench.measurements.conditions[:, bench.condition(symbol)]
    e = fixed_put_in(put_in(symbol, study), study)
    if e == symbol or not e.free_symbols <= set(bench.symbols):
        return None
    f = sympy.lambdify(list(bench.symbols), e, modules="numpy")
    return np.broadcast_to(
        np.asarray(f(*bench.measurements.conditions.T), float), (bench.measurements.n,)
    )


def _proxies(
    about: str, study: Study, bench: Bench, values: np.ndarray
) -> list[tuple[str, Any, np.ndarray, tuple[Any, ...]]]:
    """What moved with the species: (name, expression, values, symbols), closest first.

    Powers of the species itself are left out: where they explain the runs, it still takes part.
    """
    base: list[tuple[str, Any, np.ndarray]] = []
    for col in study.runs.columns:
        if col.role in (Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF, Role.RUN):
            continue
        if col.role is Role.CONVERSION:
            continue  # it comes out of a run: no cause of its rate
        if col.role is Role.SPECIES and col.about == about:
            continue
        x = col.values[bench.runs]
        if not np.isfinite(x).all() or (x < 0).any() or not (x > 0).any():
            continue
        label = col.about if col.role is Role.SPECIES else f"column “{col.name}”"
        base.append((label, symbol_of(col), x))
    for d in study.derived:
        if d.name == about:
            continue
        x = _values_of(d.name, study, bench)
        if x is not None and np.isfinite(x).all() and (x > 0).any():
            formula = fixed_put_in(put_in(amount(d.name), study), study)
            base.append((d.name, formula, np.asarray(x)))
    tries = list(base)
    species = [b for b in base if not b[0].startswith("column")]
    tries += [(f"{n} squared", e**2, x**2) for n, e, x in species]
    tries += [
        (f"{a[0]} times {b[0]}", a[1] * b[1], a[2] * b[2]) for a, b in combinations(species, 2)
    ]
    out = []
    for name, e, x in tries:
        r2 = _follows(x, values)
        if r2 >= STAND_IN_CORRELATION:
            out.append((r2, name, e, x, tuple(sorted(e.free_symbols, key=lambda s: s.name))))
    out.sort(key=lambda t: -t[0])
    return [(n, e, x, s) for _, n, e, x, s in out]


def _follows(x: np.ndarray, y: np.ndarray) -> float:
    """Squared correlation of logarithms (of the values themselves where there are zeros)."""
    if (x > 0).all() and (y > 0).all():
        x, y = np.log(x), np.log(y)
    elif ((x == 0) != (y == 0)).any():
        return 0.0
    if np.ptp(y) <= 1e-9 * max(np.abs(y).max(), 1e-300):
        return 1.0 if np.ptp(x) <= 1e-9 * max(np.abs(x).max(), 1e-300) else 0.0
    if np.ptp(x) == 0:
        return 0.0
    return float(np.corrcoef(x, y)[0, 1] ** 2)


def _swapped(law: RateLaw, about: str, by: Any) -> RateLaw:
    swap = {amount(about): by}
    return replace(
        law,
        name=f"{law.name}, stand-in",
        rate=law.rate.subs(swap),
        production={k: e.subs(swap) for k, e in law.production.items()},
        pathways=(),
    )


def _already(a: RateLaw, b: RateLaw) -> bool:
    return bool(a.rate == b.rate)


def _same_errors(new: Measurements, own: Measurements, here: Bench, bench: Bench) -> Measurements:
    """The wider table, its observations with the scale that the original fit had."""
    return replace(new, scale=own.scale, scale_df=own.scale_df)


def bind_law(law: RateLaw, study: Study, bench: Bench) -> Bound:
    seen = [observed_expression(col, law, study) for col in bench.responses]
    return bind(law, bench, [put_in(e, study) for e in seen], with_units=False)


def symbol_of(col: Column) -> Any:
    return amount(col.about) if col.role is Role.SPECIES else quantity(col.name)
