"""The reverse reaction of a candidate, taken out of its law."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import sympy

from discrim.errors import DiscrimError
from discrim.evidence.term import Effect
from discrim.fit.fit import Fit
from discrim.ratelaw.knockout import KnockOut
from discrim.ratelaw.reverse import reverse_of
from discrim.study.model import Question, Study
from discrim.weigh.bench import Bench, fixed_put_in, put_in
from discrim.weigh.bind import Bound, bind
from discrim.weigh.effects import knocked_out
from discrim.weigh.fitted import fits_of
from discrim.weigh.laws import CandidateLaw, observed

Taken = tuple[CandidateLaw, Bound, Mapping[str, Fit], KnockOut | None, bool, str]


def reverse_words(question: Question) -> str:
    """What a question of the kind `reversible` is about."""
    return f"the reverse of {question.about}" if question.about else "the reverse reaction"


def check_reversible(study: Study, laws: Sequence[CandidateLaw]) -> None:
    """Raise for a question about a reverse reaction that no candidate has."""
    for q in study.questions:
        if q.asks != "reversible":
            continue
        if any(reverse_of(c.law, q.about, reverse_words(q)) is not None for c in laws):
            continue
        raise DiscrimError(
            f"no rate law of a candidate holds {reverse_words(q)}",
            place=q.place,
            do="Write <=> for a step that goes both ways, or a law with a term for the reverse "
            "reaction, such as k*([A] - [B]/K_eq).",
        )


def reverse_in(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    fits: Mapping[str, Fit],
    seed: int,
) -> Taken:
    """The law, bound and fitted so that its reverse part is a case at zero; its knock-out, whether it
    has a reverse part, and why that cannot be taken out.

    A law whose equilibrium constant divides the reverse part is put in its inverse and fitted again.
    """
    given = [n for n, s in study.constants.items() if s.value is not None]
    found = reverse_of(c.law, question.about, reverse_words(question), given)
    if found is None:
        return c, bound, fits, None, False, ""
    if found.knock_out is None:
        return c, bound, fits, None, True, f"“{c.law.name}”: {found.note}"
    if not found.inverted or not all(f.ok for f in fits.values()):
        return c, bound, fits, found.knock_out, True, ""
    again = observed(c.candidate, found.law, study)
    rebound = bind(found.law, bench, again.bound, with_units=False)
    near = np.array([_inverted(f.theta, bound, rebound, found.inverted) for f in fits.values()])
    return (
        again,
        rebound,
        fits_of(rebound, bench.measurements, seed=seed, near=near),
        found.knock_out,
        True,
        "",
    )


def known_effect(
    question: Question,
    study: Study,
    bench: Bench,
    c: CandidateLaw,
    bound: Bound,
    ko: KnockOut,
    theta: np.ndarray,
) -> Effect | None:
    """The effect of a reverse reaction whose equilibrium constant is given, Q/K, the largest over the
    named conditions; None where it depends on constants that these runs estimate."""
    share = fixed_put_in(put_in(sympy.cancel(c.law.rate / ko.rate), study), study)
    if share.free_symbols & {k.symbol for k in bound.constants}:
        return None
    knocked, points, labels = knocked_out(question, study, bench, c, bound, ko, theta, ())
    e = knocked.effect(theta[None], points)[0]
    if not np.isfinite(e).any():
        return None
    k = int(np.nanargmax(np.abs(e)))
    value = float(e[k])
    return Effect(value, value, value, abs(value), labels[k], False)


def _inverted(
    theta: np.ndarray, bound: Bound, rebound: Bound, inverted: Mapping[str, str]
) -> np.ndarray:
    """The same constants, those in ``inverted`` as their inverses."""
    back = {new: old for old, new in inverted.items()}
    at = {n: float(x) for n, x in zip(bound.names, theta, strict=True)}
    out = rebound.predictor.scale.copy()
    for k, name in enumerate(rebound.names):
        base, bracket, rest = name.partition("[")
        if base in back:
            old = at.get(back[base] + bracket + rest, 0.0)
            out[k] = 1.0 / old if old > 0 else out[k]
        elif name in at:
            out[k] = at[name]
    return out
