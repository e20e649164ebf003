"""Stand-ins: what moved in lockstep with a species and could be the real cause.

Each is put in the place of the species in every candidate that stands and contains it, scaled to the
species' typical amount, and stands or falls as any rival does: by its own fit and along the direction
of the law with the species (`evidence.rivals`), under any reading of the errors.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import sympy

from discrim.errors import DiscrimError
from discrim.evidence.rivals import Standing, standing
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import ErrorSource, Measurements, source
from discrim.ratelaw.model import RateLaw, amount
from discrim.runs.model import Role
from discrim.study.model import Study
from discrim.verdict import StandIn
from discrim.weigh.bench import Bench, observed_expression, put_in
from discrim.weigh.bind import Bound, bind
from discrim.weigh.laws import CandidateLaw
from discrim.weigh.proxies import Base, Proxy, proxies, symbol_of, values_of

__all__ = ["bind_law", "stand_ins", "symbol_of"]

# the closest are tried; one that comes as close as these and stands is reason enough
MOST_STAND_INS = 8

if TYPE_CHECKING:
    from discrim.weigh.asked import InCandidate


@dataclass(frozen=True, slots=True, eq=False)
class Tried:
    """A stand-in with the chance of its largest score; ``judged``: of one that fell, its fit and how it
    was rejected, in each candidate and under each reading of the errors."""

    stand_in: StandIn
    chance: float
    judged: tuple[tuple[Fit, Standing], ...]


def stand_ins(
    about: str,
    study: Study,
    bench: Bench,
    laws: Sequence[CandidateLaw],
    fits: Sequence[Mapping[str, Fit]],
    per: Sequence[InCandidate],
    stands: Sequence[bool],
    seed: int,
    *,
    every: bool,
) -> list[Tried]:
    """Columns, orders and products that move with the species, put in its place, closest first.

    ``every``: in every candidate that stands and contains it until one stands, which a verdict that the
    species takes part needs; else in the first of them only.
    """
    asking = [k for k in per if stands[k.index] and k.contains and k.by_origin]
    values = values_of(about, study, bench) if asking else None
    if values is None:
        return []
    found: dict[str, Tried] = {}
    tries = proxies(about, study, bench)[: 2 * MOST_STAND_INS]
    for k in asking if every else asking[:1]:
        left = [p for p in tries if p.name not in found or not found[p.name].stand_in.stands]
        if not left:
            break
        for p, ok, chance, judged in _in_law(
            about, study, bench, laws[k.index], fits[k.index], left, seed
        ):
            before = found.get(p.name)
            if before is None or ok:
                found[p.name] = _told(p.name, about, ok, chance, judged)
            else:
                found[p.name] = replace(before, judged=(*before.judged, *judged))
    order = [p.name for p in tries]
    return [found[name] for name in sorted(found, key=order.index)]


def _in_law(
    about: str,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    fits: Mapping[str, Fit],
    tries: Sequence[Proxy],
    seed: int,
) -> list[tuple[Proxy, bool, float, list[tuple[Fit, Standing]]]]:
    """Each proxy in the place of the species in one candidate: whether it stands, p, and by what."""
    values = values_of(about, study, bench)
    assert values is not None
    used_here = set().union(*(e.free_symbols for e in c.bound))
    wide = _widened(bench, tries)
    host = bind_law(c.law, study, wide)
    out: list[tuple[Proxy, bool, float, list[tuple[Fit, Standing]]]] = []
    own: dict[str, Fit] = {}
    for p in tries:
        if len(out) == MOST_STAND_INS:
            break
        factor = float(np.median(values[values > 0]) / np.median(p.values[p.values > 0]))
        swapped = _swapped(c.law, about, p.expression * sympy.Float(factor, 17))
        if p.expression.free_symbols <= used_here and bool(swapped.rate == c.law.rate):
            continue
        try:
            rival = bind_law(swapped, study, wide)
        except (DiscrimError, ValueError):
            continue
        ok, chance, fitted = False, 0.0, True
        by: list[tuple[Fit, Standing]] = []
        for origin, first in fits.items():
            data = _wider(first.data, bench, wide, tries, about)
            if origin not in own:
                own[origin] = fit(host.predictor, data, seed=seed, starts=1, near=first.theta[None])
            near = first.theta[None] if rival.names == host.names else None
            few = 4 if near is None else 2
            f_rival = fit(rival.predictor, data, seed=seed, starts=few, near=near)
            fitted = f_rival.ok and own[origin].ok and not _adds_nothing(f_rival)
            if not fitted:
                break
            both = [own[origin], f_rival]
            judged = standing(both, {}, {}, alpha=1.0 - study.level, seed=seed, only=[1])[0]
            ok, chance = judged.stands, max(chance, judged.p_joint)
            by.append((f_rival, judged))
            if ok:  # under one reading of the errors is enough
                break
        if fitted:
            out.append((p, ok, chance, [] if ok else by))
    return out


def _told(
    name: str, about: str, ok: bool, chance: float, judged: Sequence[tuple[Fit, Standing]]
) -> Tried:
    verb = "explains these runs as well" if ok else "does not explain these runs"
    return Tried(StandIn(name, f"{name} in place of {about} {verb}", ok), chance, tuple(judged))


def _adds_nothing(f: Fit) -> bool:
    """True when the stand-in only repeats a term that the law has anyway."""
    jac = f.jacobian
    norms = np.sqrt((jac**2).sum(axis=0))
    moving = jac[:, norms > 0] / norms[norms > 0]
    if moving.shape[1] < 2:
        return False
    s = np.linalg.svd(moving, compute_uv=False)
    return bool(len(s) < moving.shape[1] or s[-1] <= 1e-9 * s[0])


# ---- a bench that holds what the laws do not ---------------------------------------------------


def _new_bases(bench: Bench, tries: Sequence[Proxy]) -> list[Base]:
    out: dict[Any, Base] = {}
    for p in tries:
        for b in p.bases:
            if b.column is not None and b.expression not in bench.symbols:
                out.setdefault(b.expression, b)
    return list(out.values())


def _widened(bench: Bench, tries: Sequence[Proxy]) -> Bench:
    """The bench with the columns of the proxies as further conditions, without errors yet."""
    new = _new_bases(bench, tries)
    if not new:
        return bench
    data = bench.measurements
    conditions = np.column_stack([data.conditions, *(b.values for b in new)])
    symbols = (*bench.symbols, *(b.expression for b in new))
    units = dict(bench.units)
    for b in new:
        assert b.column is not None
        units[b.expression] = b.column.unit
    wide = replace(data, conditions=conditions, condition_names=tuple(s.name for s in symbols))
    return replace(bench, measurements=wide, symbols=symbols, units=units)


def _wider(
    own: Measurements, bench: Bench, wide: Bench, tries: Sequence[Proxy], about: str
) -> Measurements:
    """The measurements that the candidate was fitted to, with the conditions of the proxies.

    A column without a stated error has that of the species in whose place it is put: taken as exact it
    would be ruled out by its own scatter.
    """
    new = _new_bases(bench, tries)
    if not new:
        return own
    n, m = own.n, own.m
    sources: list[ErrorSource] = []
    theirs = []
    if amount(about) in bench.symbols:
        j = bench.condition(amount(about))
        theirs = [s for s in own.of_conditions if s.target == j]
        value = own.conditions[..., j]
    origin = next((s.origin for s in theirs), "measured")
    for k, b in enumerate(new):
        assert b.column is not None
        if b.column.errors and b.column.role is not Role.GROUP:
            for part in b.column.errors:
                groups = part.groups[bench.runs]
                sources.append(
                    ErrorSource(
                        m + k,
                        np.full(n, float(part.relative)),
                        np.asarray(part.absolute, float)[bench.runs],
                        None,
                        part.origin or origin,
                        groups,
                        len(np.unique(groups)) == n,
                    )
                )
        elif theirs:
            for s in theirs:
                with np.errstate(divide="ignore", invalid="ignore"):
                    relative = np.where(value > 0, s.sd(value) / value, 0.0)
                sources.append(
                    replace(s, target=m + k, relative=relative, absolute=np.zeros(n), bound=None)
                )
        else:
            sources.append(source(m + k, n, relative=b.relative, origin=origin))
    conditions = np.column_stack([own.conditions, *(b.values for b in new)])
    return replace(
        own,
        conditions=conditions,
        sources=(*own.of_conditions, *sources, *own.of_observations),
        condition_names=wide.measurements.condition_names,
    )


# ---- laws --------------------------------------------------------------------------------------


def _swapped(law: RateLaw, about: str, by: Any) -> RateLaw:
    swap = {amount(about): by}
    return replace(
        law,
        name=f"{law.name}, stand-in",
        rate=law.rate.subs(swap),
        production={k: e.subs(swap) for k, e in law.production.items()},
        pathways=(),
    )


def bind_law(law: RateLaw, study: Study, bench: Bench) -> Bound:
    seen = [observed_expression(col, law, study) for col in bench.responses]
    return bind(law, bench, [put_in(e, study) for e in seen], with_units=False)
