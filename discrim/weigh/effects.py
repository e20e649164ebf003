"""Which rate an effect is about: one law with and without a term, at named conditions, for one response."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.knockout import KnockOut, KnockOutKind
from discrim.ratelaw.model import amount
from discrim.reactor.knocked import KnockedOut
from discrim.runs.model import Role
from discrim.study.model import Question, Study
from discrim.weigh.bench import Bench, fixed_put_in, observed_expression, put_in
from discrim.weigh.bind import Bound
from discrim.weigh.document_values import is_words
from discrim.weigh.laws import CandidateLaw

Named = tuple[KnockedOut, np.ndarray, tuple[str, ...]]


def knocked_out(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    ko: KnockOut,
    theta: np.ndarray,
    psi: Sequence[int],
) -> Named:
    """Rates with and without a term, at K named conditions, shape (K, m), with their K labels.

    Of several responses the one in which the term shows most, were it of a typical size (``theta``, the
    constants ``psi`` of the term raised to it): a term that one response does not hold at all may
    be all of another.
    """
    choices = [
        (_pair(study, bench, c, bound, ko, r), *named_conditions(question, study, bench, r))
        for r in range(len(bench.responses))
    ]
    if len(choices) == 1:
        return choices[0]
    trial = theta.copy()[None]
    for j in psi:
        if ko.kind is KnockOutKind.ORDER:
            trial[0, j] = 1.0 if abs(theta[j]) < 1e-6 else theta[j]
        else:
            trial[0, j] = max(theta[j], 0.1 * bound.predictor.scale[j])
    size = [_largest(pair, trial, points) for pair, points, _ in choices]
    best = int(np.argmax(size))
    pair, points, labels = choices[best]
    words = is_words(bench.responses[best])
    return pair, points, tuple(f"{label} ({words})" for label in labels)


def _largest(pair: KnockedOut, theta: np.ndarray, points: np.ndarray) -> float:
    e = np.abs(pair.effect(theta, points))
    e = e[np.isfinite(e)]
    return float(e.max()) if e.size else 0.0


def _pair(
    study: Study, bench: Bench, c: CandidateLaw, bound: Bound, ko: KnockOut, r: int
) -> KnockedOut:
    """Rates of response r with and without the term; those of what is used up, as consumption."""
    reduced_law = replace(c.law, rate=ko.rate, production=ko.production)
    column = bench.responses[r]
    with_it = put_in(observed_expression(column, c.law, study), study)
    without = put_in(observed_expression(column, reduced_law, study), study)
    if column.role is Role.RATE_OF and _falls(bench, r):
        with_it, without = -with_it, -without
    symbols = [k.symbol for k in bound.constants]
    compiled = [
        CompiledLaw(_as_expression(fixed_put_in(e, study)), symbols, list(bench.symbols))
        for e in (with_it, without)
    ]
    first = int(np.flatnonzero(bench.response == r)[0]) if (bench.response == r).any() else 0
    return KnockedOut(compiled[0], compiled[1], bound.column_of[first])


def _falls(bench: Bench, r: int) -> bool:
    """Whether a rate is negative in most runs: the species is used up."""
    y = bench.measurements.y[bench.response == r]
    y = y[np.isfinite(y)]
    return bool(len(y)) and bool(np.median(y) < 0)


def _as_expression(e: Any) -> Any:
    """A law as compiled needs a sympy expression; numbers are made one."""
    return sympy.Integer(e) if isinstance(e, int) else e


def named_conditions(
    question: Question, study: Study, bench: Bench, r: int = 0
) -> tuple[np.ndarray, tuple[str, ...]]:
    """Named conditions: those asked for, else each distinct run of response r as printed."""
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
    rows = np.flatnonzero(bench.response == r)
    _, first = np.unique(table[rows], axis=0, return_index=True)
    pick = rows[np.sort(first)]
    return table[pick], tuple(f"run {study.runs.labels[bench.runs[i]]}" for i in pick)
