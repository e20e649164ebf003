"""Answers to questions about constants: are some equal, is one at a value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
import sympy

from discrim.errors import DiscrimError, nearest
from discrim.evidence.at_value import AtValue, Hypothesis, at_value
from discrim.evidence.intervals import Interval, united
from discrim.fit.fit import Fit
from discrim.fit.measurements import OBSERVATION
from discrim.ratelaw.dimension import find_units
from discrim.ratelaw.model import ConstantKind, constant_symbol
from discrim.reactor.quantity import Quantity
from discrim.runs.build import listed
from discrim.runs.model import ErrorBasis
from discrim.study.model import Question, Study
from discrim.units import Unit
from discrim.verdict import ConstantVerdict, ValueFacts, ValueReading, judge_value
from discrim.verdict.words import listed as named
from discrim.verdict.words import percent, power_of, scaled, times
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.laws import CandidateLaw
from discrim.weigh.stand_ins import symbol_of

ASKED = ("equal", "constant")


@dataclass(frozen=True, slots=True, eq=False)
class Measure:
    """How far a law is from what is asked: a ratio, a difference or the constant itself.

    ``name`` as printed; ``interval``: two-sided, what holds whichever way the errors are read.
    """

    name: str
    units: str
    value: float
    interval: Interval


@dataclass(frozen=True, slots=True, eq=False)
class ConstantInCandidate:
    """One candidate in the question; ``by_origin`` empty where it has no such constants."""

    index: int
    has_them: bool
    by_origin: Mapping[str, AtValue]
    measures: tuple[Measure, ...]
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class ConstantAnswer:
    """A question about constants with everything behind its verdict."""

    question: Question
    verdict: ConstantVerdict
    per_candidate: tuple[ConstantInCandidate, ...]


def names_asked(question: Question) -> tuple[str, ...]:
    return question.names if question.asks == "equal" else (question.about,)


def check_constant_questions(
    study: Study, bench: Bench, laws: Sequence[CandidateLaw], bounds: Sequence[Bound]
) -> None:
    """Raise for constants that no candidate has, that are given, or whose units do not fit."""
    known = sorted({n for b in bounds for n in b.names})
    for q in study.questions:
        if q.asks not in ASKED:
            continue
        names = names_asked(q)
        for name in names:
            if name in known:
                continue
            setting = study.constants.get(name)
            grouped = [n for n in known if n.partition("[")[0] == name]
            says = f'no candidate has a constant "{name}"'
            do = f"{nearest(name, known)} The laws hold {listed(known)}.".lstrip()
            if setting is not None and setting.value is not None:
                says = f'"{name}" is given in the study, so these runs are not asked about it'
                do = "Take out its value under [constants], or the question."
            elif grouped:
                says = f'"{name}" has one value for each group'
                do = f"Say which: {listed(grouped)}."
            raise DiscrimError(says, place=q.place, do=do)
        with_all = [b for b in bounds if all(n in b.names for n in names)]
        if not with_all:
            raise DiscrimError(
                f"no candidate has {listed(list(names))} together",
                place=q.place,
                do="Ask about constants that stand in one law.",
            )
        for c, b in zip(laws, bounds, strict=True):
            if all(n in b.names for n in names):
                _check_units(q, study, bench, c, b)


def _check_units(q: Question, study: Study, bench: Bench, c: CandidateLaw, bound: Bound) -> None:
    names = names_asked(q)
    if q.asks == "equal":
        units = {n: bound.units[bound.names.index(n)] for n in names}
        first = names[0]
        for n in names[1:]:
            if units[n] != units[first] and units[n] and units[first]:
                raise DiscrimError(
                    f"{first} is in {units[first]}, {n} in {units[n]}: they cannot be equal",
                    place=q.place,
                    do="Ask about constants of one kind, or report their ratio "
                    "under [report_constants].",
                )
        kinds = {_is_order(bound, n) for n in names}
        if len(kinds) > 1:
            raise DiscrimError(
                "an order and a rate constant cannot be equal",
                place=q.place,
                do="Ask about constants of one kind.",
            )
        return
    value = value_of(q, study, bench, c, bound)
    j = bound.names.index(q.about)
    if value < bound.predictor.lower[j] or value > bound.predictor.upper[j]:
        low, high = bound.predictor.lower[j], bound.predictor.upper[j]
        shown = f" {bound.units[j]}" if bound.units[j] else ""
        raise DiscrimError(
            f"{q.about} cannot be {q.value_text}: it "
            + (
                f"lies between {low:g} and {high:g}"
                if np.isfinite(high)
                else f"is at least {low:g}"
            )
            + shown,
            place=q.value_place or q.place,
            do="Ask about a value that it can have.",
        )
    if value == 0 and q.matters_above is not None and not _is_order(bound, q.about):
        raise DiscrimError(
            "nothing can be said in percent of a value of 0",
            place=q.place,
            do='Take out matters_above, or ask "participates" with the step or species: that says '
            "how much of the rate the constant is worth.",
        )


def value_of(q: Question, study: Study, bench: Bench, c: CandidateLaw, bound: Bound) -> float:
    """The value asked about, in internal units."""
    assert q.value is not None
    unit = _unit(q.about, study, bench, c, bound)
    place = q.value_place or q.place
    if q.value_units is None or not q.value_units.text:
        if q.value != 0 and unit is not None and not unit.is_dimensionless:
            raise DiscrimError(
                f'{q.about} = "{q.value_text}" of what?',
                place=place,
                do=f'Write the unit: value = "{q.value_text} {unit.ascii()}".',
            )
        return q.value
    if unit is None:
        raise DiscrimError(
            f"the unit of {q.about} does not follow from the law and the columns",
            place=place,
            do="Write the value without a unit.",
        )
    if not q.value_units.fits(unit):
        raise DiscrimError(
            f"{q.about} is in {unit.text() or '1 (no unit)'}, not {q.value_units.text}",
            place=place,
            do="Write a unit of the same kind.",
        )
    return q.value * q.value_units.factor(unit)


def _unit(name: str, study: Study, bench: Bench, c: CandidateLaw, bound: Bound) -> Unit | None:
    base = name.partition("[")[0]
    setting = study.constants.get(base)
    if setting is not None and setting.unit is not None:
        return setting.unit
    given = dict(bench.units)
    for e in bound.expressions:
        for s in e.free_symbols:
            other = study.constants.get(s.name)
            if other is not None and other.unit is not None:
                given[s] = other.unit
    parts = [(e, bench.responses[k].unit) for k, e in enumerate(bound.expressions)]
    return find_units(parts, given, place=c.law.place).units.get(base)


def _is_order(bound: Bound, name: str) -> bool:
    return bound.base_constant(bound.names.index(name)).kind is ConstantKind.ORDER


def answer_constants(
    question: Question,
    study: Study,
    bench: Bench,
    laws: Sequence[CandidateLaw],
    bounds: Sequence[Bound],
    fits: Sequence[Mapping[str, Fit]],
    stands: Sequence[bool],
    *,
    seed: int,
) -> ConstantAnswer:
    """One question about constants."""
    names = names_asked(question)
    per = []
    for i, (c, b) in enumerate(zip(laws, bounds, strict=True)):
        if not all(n in b.names for n in names):
            per.append(ConstantInCandidate(i, False, {}, ()))
            continue
        if not all(f.ok for f in fits[i].values()):
            note = f"“{c.law.name}”: the fit failed, so it cannot be tested"
            per.append(ConstantInCandidate(i, True, {}, (), note))
            continue
        per.append(_in_candidate(question, study, bench, c, b, fits[i], i, stands[i], seed))
    facts = [_facts(study, bench, laws[k.index], k, stands[k.index]) for k in per]
    first = next(b for b in bounds if all(n in b.names for n in names))
    claim, denial, whether = _words(question)
    verdict = judge_value(
        about=named(list(names)),
        claim=claim,
        denial=denial,
        question=whether,
        matters=_matters(question, _is_order(first, names[0])),
        candidates=facts,
        level=study.level,
        n_runs=bench.measurements.n,
        n_constants=max(
            (len(b.names) for b, ok in zip(bounds, stands, strict=True) if ok), default=0
        ),
    )
    return ConstantAnswer(question, verdict, tuple(per))


def _words(q: Question) -> tuple[str, str, str]:
    """Claim, denial, and what it is that is undecided."""
    if q.asks == "constant":
        return (
            f"{q.about} agrees with {q.value_text}",
            f"{q.about} differs from {q.value_text}",
            f"{q.about} is {q.value_text}",
        )
    names = named(list(q.names))
    if len(q.names) == 2:
        return f"{names} agree", f"{names} differ", f"{names} are equal"
    return f"{names} agree", f"{names} are not all equal", f"{names} are equal"


def _matters(q: Question, order: bool) -> str:
    """Of an order the difference itself counts: 0.05 of an order, not 5 % of it."""
    if q.matters_above is None:
        return ""
    return f"{q.matters_above:g}" if order else percent(q.matters_above)


def _hypothesis(
    q: Question, study: Study, bench: Bench, c: CandidateLaw, bound: Bound
) -> tuple[Hypothesis, list[tuple[str, str]]]:
    """What is asked of the constants of one law, and the names and units of what is shown."""
    symbols = [_symbol(bound, j) for j in range(len(bound.names))]
    at = {n: j for j, n in enumerate(bound.names)}

    def quantity(e: Any) -> Quantity:
        return Quantity(e, symbols, (), np.zeros(0), bound.predictor.scale)

    m = q.matters_above
    exact = None if m is None else sympy.Rational(repr(m))
    if q.asks == "constant":
        j = at[q.about]
        own = symbols[j]
        value = value_of(q, study, bench, c, bound)
        v = sympy.Float(repr(value), 17)
        limits: tuple[tuple[float, float], ...] = ()
        ends: tuple[tuple[Quantity, Quantity], ...] = ()
        if m is not None:
            half = m if _is_order(bound, q.about) else m * abs(value)
            limits = ((value - half, value + half),)
            ends = ((quantity(own - v + half), quantity(own - v - half)),)
        edge = value <= bound.predictor.lower[j]
        zero = quantity(own - v if value != 0 else own)
        hypothesis = Hypothesis((zero,), (quantity(own),), limits, ends, edge)
        return hypothesis, [(q.about, bound.units[j])]
    first, *rest = (at[n] for n in q.names)
    order = _is_order(bound, q.names[0])
    zeros = tuple(quantity(symbols[j] - symbols[first]) for j in rest)
    shown, words, limit, ends_of = [], [], [], []
    for a, b in combinations([first, *rest], 2):
        x, y = symbols[a], symbols[b]
        shown.append(quantity(x - y if order else x / y))
        sign = "-" if order else "/"
        words.append((f"{bound.names[a]} {sign} {bound.names[b]}", ""))
        if exact is not None and m is not None:
            if order:
                limit.append((-m, m))
                ends_of.append((quantity(x - y + exact), quantity(x - y - exact)))
            else:
                limit.append((1 - m, 1 / (1 - m)))
                ends_of.append((quantity(x - (1 - exact) * y), quantity(x - y / (1 - exact))))
    replaced = tuple(rest) if len(rest) > 1 else (None,)
    return (
        Hypothesis(zeros, tuple(shown), tuple(limit), tuple(ends_of), replaced=replaced),
        words,
    )


def _symbol(bound: Bound, j: int) -> Any:
    base = bound.base_constant(j)
    if bound.names[j] == base.name:
        return base.symbol
    kind = ConstantKind.ORDER if base.kind is ConstantKind.ORDER else ConstantKind.RATE
    return constant_symbol(bound.names[j], kind)


def _in_candidate(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    fits: Mapping[str, Fit],
    index: int,
    stands: bool,
    seed: int,
) -> ConstantInCandidate:
    hypothesis, words = _hypothesis(question, study, bench, c, bound)
    by_origin = {
        origin: at_value(
            f, hypothesis, origin=origin, level=study.level, seed=seed, brief=not stands
        )
        for origin, f in fits.items()
    }
    readings = list(by_origin.values())
    measures = []
    for k, (name, units) in enumerate(words):
        every = [r.shown[k] for r in readings]
        interval = every[0].reconciled
        for other in every[1:]:
            interval = united(interval, other.reconciled)
        measures.append(Measure(name, units, every[0].value, interval))
    return ConstantInCandidate(index, True, by_origin, tuple(measures))


def _facts(
    study: Study, bench: Bench, c: CandidateLaw, k: ConstantInCandidate, stands: bool
) -> ValueFacts:
    readings = []
    untestable = k.note
    for r in k.by_origin.values():
        if r.test is None or r.test.p != r.test.p:
            untestable = r.note or (
                f"with “{c.law.name}” it cannot be tested: as many constants as runs, and no error of "
                "the rate is stated"
            )
            continue
        readings.append(
            ValueReading(r.test.p, r.within, r.test.information, r.test.error_margin, r.test.weak)
        )
    used = set().union(*(e.free_symbols for e in c.bound))
    assumed = tuple(
        f"“{col.name}”"
        for col in study.runs.columns
        if col.basis is ErrorBasis.ASSUMED and symbol_of(col) in used
    )
    return ValueFacts(
        c.law.name,
        stands,
        k.has_them,
        () if untestable else tuple(readings),
        all(s.target == OBSERVATION for s in bench.measurements.sources),
        assumed,
        tuple(measure_words(m) for m in k.measures) if stands else (),
        untestable,
    )


def measure_words(m: Measure) -> str:
    """``k_1 / k_2 is 2.59 (2.40 to 2.80)``, ``k is 1.913 (1.867 to 1.959) × 10⁻⁵ s⁻¹``."""
    low, high = m.interval.low.value, m.interval.high.value
    power = power_of(m.value, low, high)
    value, behind = scaled(m.value, power), times(power, m.units)
    known = [not m.interval.empty and bool(np.isfinite(x)) for x in (low, high)]
    if all(known):
        return f"{m.name} is {value} ({scaled(low, power)} to {scaled(high, power)}){behind}"
    if known[0]:
        return f"{m.name} is {value} (at least {scaled(low, power)}){behind}"
    if known[1]:
        return f"{m.name} is {value} (at most {scaled(high, power)}){behind}"
    return f"{m.name} is {value}{behind}, and these runs set it no limits"
