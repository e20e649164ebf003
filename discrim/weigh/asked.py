"""Answers to the questions of a study: terms knocked out, stand-ins tried, verdicts judged."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Any

import numpy as np
import sympy

from discrim.errors import DiscrimError, nearest
from discrim.evidence.participation import Kind, Participation, Term, participation
from discrim.evidence.rivals import standing
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.knockout import KnockOut, KnockOutKind, contains, knock_out
from discrim.ratelaw.lump import lump
from discrim.ratelaw.model import RateLaw, amount, quantity
from discrim.reactor.knocked import KnockedOut
from discrim.runs.model import Column, ErrorBasis, Role
from discrim.study.model import Question, Study
from discrim.verdict import CandidateFacts, Reading, StandIn, Verdict, judge_participation
from discrim.weigh.bench import Bench, Bound, bind, build, fixed_put_in, observed_expression, put_in
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


@dataclass(frozen=True, slots=True, eq=False)
class InCandidate:
    """One candidate in a participation question; ``by_origin`` empty when it does not contain it."""

    index: int
    contains: bool
    knock_out: KnockOut | None
    by_origin: Mapping[str, Participation]
    reduced: Bound | None
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Answer:
    """A participation question with everything behind its verdict."""

    question: Question
    what: str
    verdict: Verdict
    per_candidate: tuple[InCandidate, ...]
    stand_ins: tuple[tuple[StandIn, float], ...]


def check_questions(study: Study, laws: Sequence[CandidateLaw]) -> None:
    """Raise for a question about something that no candidate contains."""
    for q in study.questions:
        if q.asks != "participates":
            continue
        if any(contains(c.law, q.about) for c in laws):
            continue
        known = sorted(
            {s for c in laws for s in c.law.species}
            | {p.name for c in laws for p in c.law.pathways}
            | {s for c in laws for s in c.law.steps}
        )
        raise DiscrimError(
            f'the question is about "{q.about}", which no rate law of a candidate contains',
            place=q.place,
            do=f"{nearest(q.about, known)} The laws contain: {', '.join(known)}. A species that "
            "stands in the steps but not in the law cannot be asked about with rates.".strip(),
        )


def answer(
    question: Question,
    study: Study,
    bench: Bench,
    laws: Sequence[CandidateLaw],
    bounds: Sequence[Bound],
    fits: Sequence[Mapping[str, Fit]],
    stands: Sequence[bool],
    *,
    seed: int,
) -> Answer:
    """One participation question."""
    level = study.level
    about = question.about
    is_pathway = any(about == p.name for c in laws for p in c.law.pathways) or any(
        about in c.law.steps for c in laws
    )
    what = "pathway" if is_pathway and amount(about) not in _all_symbols(laws) else "species"
    per: list[InCandidate] = []
    for i, c in enumerate(laws):
        per.append(
            _in_candidate(
                question, study, bench, c, bounds[i], fits[i], i, seed, brief=not stands[i]
            )
        )
    tried = (
        _stand_ins(about, study, bench, laws, bounds, fits, per, stands, seed)
        if what == "species"
        else []
    )
    facts = [_facts(study, bench, laws[k.index], k, stands[k.index]) for k in per]
    detect = [
        p.detectable
        for k in per
        if stands[k.index]
        for p in k.by_origin.values()
        if p.detectable == p.detectable
    ]
    verdict = judge_participation(
        about,
        what=what,
        candidates=facts,
        stand_ins=[s for s, _ in tried],
        level=level,
        matters_above=question.matters_above,
        n_runs=bench.measurements.n,
        n_constants=max(
            (len(b.names) for b, ok in zip(bounds, stands, strict=True) if ok), default=0
        ),
        detectable=max(detect, default=float("nan")),
        is_reactant=_is_reactant(about, laws),
    )
    return Answer(question, what, verdict, tuple(per), tuple(tried))


def _all_symbols(laws: Sequence[CandidateLaw]) -> set[Any]:
    return set().union(*(c.law.rate.free_symbols for c in laws))


def _is_reactant(about: str, laws: Sequence[CandidateLaw]) -> bool:
    return any(
        c.law.stoichiometry is not None and c.law.stoichiometry.get(about, 0) < 0 for c in laws
    )


def _in_candidate(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    fits: Mapping[str, Fit],
    index: int,
    seed: int,
    *,
    brief: bool,
) -> InCandidate:
    ko = knock_out(c.law, question.about, bench.typical(question.about))
    if ko is None:
        inside = contains(c.law, question.about)
        note = (
            f"“{c.law.name}”: the step {question.about} cannot be taken out of its law"
            if inside
            else ""
        )
        return InCandidate(index, inside, None, {}, None, note)
    if not all(f.ok for f in fits.values()):
        return InCandidate(
            index, True, ko, {}, None, f"“{c.law.name}”: the fit failed, so it cannot be tested"
        )
    reduced_law = ko.reduced(c.law)
    if ko.kind is KnockOutKind.FACTOR:
        reduced_law = _lumped(reduced_law)
    reduced = _bind_law(reduced_law, study, bench)
    term = _term(question, study, bench, c, bound, ko, reduced)
    by_origin = {}
    for origin, full in fits.items():
        data = full.data
        small = fit(
            reduced.predictor, data, seed=seed, starts=8, near=_inherited(reduced, bound, full)
        )
        by_origin[origin] = participation(
            term,
            data,
            full,
            small,
            origin=origin,
            level=study.level,
            seed=seed,
            matters_above=question.matters_above,
            brief=brief,
        )
    return InCandidate(index, True, ko, by_origin, reduced)


def _lumped(law: RateLaw) -> RateLaw:
    """Identifiable form of a law with an amount absorbed, where the algebra can give it."""
    try:
        return lump(law)
    except (DiscrimError, ValueError, NotImplementedError, ArithmeticError):
        return law


def _bind_law(law: RateLaw, study: Study, bench: Bench) -> Bound:
    seen = [observed_expression(col, law, study) for col in bench.responses]
    return bind(law, bench, [put_in(e, study) for e in seen], with_units=False)


def _inherited(reduced: Bound, bound: Bound, full: Fit) -> np.ndarray | None:
    """The full law's constants as a start for the reduced one."""
    at = {n: k for k, n in enumerate(bound.names)}
    if not reduced.names or not all(n in at for n in reduced.names):
        return None
    return np.array([[full.theta[at[n]] for n in reduced.names]])


def _term(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    ko: KnockOut,
    reduced: Bound,
) -> Term:
    kind = _KIND[ko.kind]
    psi = tuple(j for j in range(len(bound.names)) if bound.base_constant(j).name in ko.psi)
    vanish = tuple(j for j in range(len(bound.names)) if bound.base_constant(j).name in ko.vanish)
    if len(psi) > 1 and kind in (Kind.ZERO, Kind.ORDER, Kind.VANISH):
        kind = Kind.SEVERAL
    knocked = None
    if kind is not Kind.FACTOR:
        knocked = _knocked(study, bench, c, bound, ko)
    points, labels = _points(question, study, bench)
    return Term(kind, bound.predictor, reduced.predictor, psi, vanish, knocked, points, labels)


def _knocked(study: Study, bench: Bench, c: CandidateLaw, bound: Bound, ko: KnockOut) -> KnockedOut:
    """Rates of the first response with and without the term."""
    reduced_law = replace(c.law, rate=ko.rate, production=ko.production)
    column = bench.responses[0]
    with_it = put_in(observed_expression(column, c.law, study), study)
    without = put_in(observed_expression(column, reduced_law, study), study)
    symbols = [k.symbol for k in bound.constants]
    compiled = [
        CompiledLaw(_gross(fixed_put_in(e, study)), symbols, list(bench.symbols))
        for e in (with_it, without)
    ]
    return KnockedOut(compiled[0], compiled[1], bound.column_of[0])


def _gross(e: Any) -> Any:
    """A law as compiled needs a sympy expression; numbers are made one."""
    return sympy.Integer(e) if isinstance(e, int) else e


def _points(question: Question, study: Study, bench: Bench) -> tuple[np.ndarray, tuple[str, ...]]:
    """Named conditions: those asked for, else each distinct run as printed."""
    table = bench.measurements.conditions
    if question.at:
        row = np.array(
            [np.exp(np.log(x[x > 0]).mean()) if (x > 0).any() else x.mean() for x in table.T]
        )
        for species, value in question.at.items():
            symbol = amount(species)
            if symbol in bench.symbols:
                row[bench.condition(symbol)] = value
        return row[None], ("the conditions asked about",)
    rows = np.flatnonzero(bench.response == 0)
    _, first = np.unique(table[rows], axis=0, return_index=True)
    pick = rows[np.sort(first)]
    return table[pick], tuple(f"run {study.runs.labels[bench.runs[i]]}" for i in pick)


def _facts(
    study: Study, bench: Bench, c: CandidateLaw, k: InCandidate, stands: bool
) -> CandidateFacts:
    readings = []
    for origin, p in k.by_origin.items():
        bound = p.effect.bound if p.effect is not None else 1.0
        readings.append(Reading(origin, p.p, bound, p.information, p.error_margin))
    untestable = k.note
    if any(r.p != r.p for r in readings):
        untestable = (
            f"with “{c.law.name}” a rate without it cannot be tested: as many constants as runs, and "
            "no error of the rate is stated"
        )
        readings = []
    exact = all(s.target == OBSERVATION for s in bench.measurements.sources)
    return CandidateFacts(
        c.law.name,
        stands,
        k.contains,
        tuple(readings),
        exact,
        tuple(_assumed(study, c, k)),
        k.knock_out is not None and k.knock_out.kind is KnockOutKind.FACTOR,
        untestable,
    )


def _assumed(study: Study, c: CandidateLaw, k: InCandidate) -> list[str]:
    """Columns in the law whose error was only assumed."""
    used = set().union(*(e.free_symbols for e in c.bound))
    return [
        f"“{col.name}”"
        for col in study.runs.columns
        if col.basis is ErrorBasis.ASSUMED and _symbol_of(col) in used
    ]


def _symbol_of(col: Column) -> Any:
    return amount(col.about) if col.role is Role.SPECIES else quantity(col.name)


# ---- stand-ins -------------------------------------------------------------------------------


def _stand_ins(
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
        here = build(study, [e for c in laws for e in c.bound], extra=[*bench.symbols, *extra])
        try:
            rival = _bind_law(swapped, study, here)
            host = _bind_law(laws[lead.index].law, study, here)
        except (DiscrimError, ValueError):
            continue
        origin = next(iter(fits[lead.index]))
        data = _same_errors(here.measurements, own.data, here, bench).as_origin(origin)
        f_own = fit(host.predictor, data, seed=seed, starts=4, near=own.theta[None])
        f_rival = fit(rival.predictor, data, seed=seed, starts=8)
        if not f_rival.ok or not f_own.ok or _adds_nothing(f_rival):
            continue
        judged = standing([f_own, f_rival], {}, {}, alpha=alpha, seed=seed)
        ok = judged[1].stands
        words = f"{name} in place of {about} explains these runs as well"
        if not ok:
            words = f"{name} in place of {about} does not explain these runs"
        found.append((StandIn(name, words, ok), judged[1].p_joint))
        if len(found) == MOST_STAND_INS:
            break
    return found


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
        if col.role is Role.SPECIES and col.about == about:
            continue
        x = col.values[bench.runs]
        if not np.isfinite(x).all() or (x < 0).any() or not (x > 0).any():
            continue
        label = col.about if col.role is Role.SPECIES else f"column “{col.name}”"
        base.append((label, _symbol_of(col), x))
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
