"""Is a quantity of the constants at a value: the facts about one law, errors read one way.

The law is written in terms of the quantity less the value (`quantity`), which makes the question one
about a coordinate at zero: every test of a term with its guards then applies as it stands.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from discrim.evidence.distributions import normal_quantile
from discrim.evidence.intervals import Side
from discrim.evidence.participation import participation
from discrim.evidence.quantity import turned
from discrim.evidence.quantity_intervals import QuantityFacts, quantity_facts
from discrim.evidence.term import Kind, Participation, Term
from discrim.evidence.term_tests import absence_test
from discrim.fit.fit import Fit, fit
from discrim.fit.problem import Problem
from discrim.reactor.model import Prediction, Predictor
from discrim.reactor.quantity import Quantity


class Held:
    """A predictor with some constants held at zero, which are no longer among its constants."""

    def __init__(self, inner: Predictor, held: Sequence[int]) -> None:
        self.inner = inner
        self.free = np.delete(np.arange(len(inner.names)), list(held))
        self.names = tuple(inner.names[j] for j in self.free)
        self.lower, self.upper = inner.lower[self.free], inner.upper[self.free]
        linear_when_held = bool(getattr(inner, "linear_when_held", False))
        self.linear = np.full(len(self.free), linear_when_held and len(held) == 1)
        self.scale = inner.scale[self.free]
        self.starts = np.zeros((0, len(self.free)))

    def __getattr__(self, name: str) -> Any:
        # what a reactor offers beyond a Predictor does not depend on the constants
        if name == "inner":
            raise AttributeError(name)
        return getattr(self.inner, name)

    def to_inner(self, theta: np.ndarray) -> np.ndarray:
        out = np.zeros((len(theta), len(self.inner.names)))
        out[:, self.free] = theta
        return out

    def predict(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool = True,
        conditions_too: bool = False,
        both: bool = False,
    ) -> Prediction:
        pred = self.inner.predict(
            self.to_inner(theta),
            conditions,
            constants=constants,
            conditions_too=conditions_too,
            both=both,
        )
        return Prediction(
            pred.values,
            None if pred.by_constants is None else pred.by_constants[..., self.free],
            pred.by_conditions,
            None if pred.by_both is None else pred.by_both[..., self.free],
        )


@dataclass(frozen=True, slots=True, eq=False)
class AtValue:
    """Facts about one hypothesis in one law.

    Attributes
    ----------
    test : the test that it holds, as of a term that is absent; None where it could not be made
    shown : what is printed of the quantities that say how far from it the law is, and their
        one-sided bounds, one for each
    within : whether all of them are surely within what matters; None when nothing is said to matter
    """

    origin: str
    test: Participation | None
    shown: tuple[QuantityFacts, ...]
    within: bool | None
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Hypothesis:
    """What is asked of the constants of one law.

    Attributes
    ----------
    zero : quantities that are all zero if it holds
    shown : quantities that say in the reader's terms how far from it the law is
    limits : for each of those, between which values the difference does not matter; empty if unknown
    ends : for each of those, quantities that are zero at its lower and at its upper limit
    edge : the value is the least that the constant can have, so only a rise speaks against it
    replaced : for each of ``zero`` the constant that it takes the place of, or empty: any
    """

    zero: tuple[Quantity, ...]
    shown: tuple[Quantity, ...]
    limits: tuple[tuple[float, float], ...] = ()
    ends: tuple[tuple[Quantity, Quantity], ...] = ()
    edge: bool = False
    replaced: tuple[int | None, ...] = ()


def at_value(
    full: Fit, hypothesis: Hypothesis, *, origin: str, level: float, seed: int, brief: bool
) -> AtValue:
    """Test and bounds; ``brief`` leaves out bounds and margins (a law that does not stand)."""
    test, note = _test(full, hypothesis, origin, level, seed, brief)
    shown = tuple(quantity_facts(full, q, level, brief=brief) for q in hypothesis.shown)
    within: bool | None = None
    if hypothesis.limits and not brief:
        within = all(
            _within(one, limits) and _rejected(full, ends, level, seed)
            for one, limits, ends in zip(shown, hypothesis.limits, hypothesis.ends, strict=True)
        )
    return AtValue(origin, test, shown, within, note)


def _test(
    full: Fit, hypothesis: Hypothesis, origin: str, level: float, seed: int, brief: bool
) -> tuple[Participation | None, str]:
    rewritten = full
    psi: list[int] = []
    replaced = hypothesis.replaced or (None,) * len(hypothesis.zero)
    for quantity, only in zip(hypothesis.zero, replaced, strict=True):
        again = turned(rewritten, quantity, only=only)
        if again is None:
            return None, "it cannot be tested: at the best fit the law does not move with it"
        psi.append(again.predictor.psi)  # type: ignore[attr-defined]
        rewritten = again
    kind = Kind.ZERO if hypothesis.edge else Kind.ORDER
    if len(psi) > 1:
        kind = Kind.SEVERAL
    held = Held(rewritten.predictor, psi)
    near = np.delete(rewritten.theta, psi)[None]
    reduced = fit(held, full.data, seed=seed, starts=8, near=near if len(held.names) else None)
    none = np.zeros((0, full.data.m))
    term = Term(kind, rewritten.predictor, held, tuple(psi), (), None, none, ())
    found = participation(
        term,
        full.data,
        rewritten,
        reduced,
        origin=origin,
        level=level,
        seed=seed,
        matters_above=None,
        brief=brief,
        flips=False,
    )
    return found, ""


def _within(one: QuantityFacts, limits: tuple[float, float]) -> bool:
    """Both one-sided bounds inside the limits: two one-sided tests (Schuirmann, J. Pharmacokinet.
    Biopharm. 15 (1987) 657, from memory)."""
    if one.result is None:
        return False
    low, high = one.result.lower_one_sided, one.result.upper_one_sided
    return _value(low, -np.inf) > limits[0] and _value(high, np.inf) < limits[1]


def _value(side: Side, otherwise: float) -> float:
    return side.value if np.isfinite(side.value) else otherwise


def _rejected(full: Fit, ends: tuple[Quantity, Quantity], level: float, seed: int) -> bool:
    """Whether both limits themselves are rejected with all guards of the test, from inside.

    The bounds rest on the plain curve; where other constants are in lockstep only the test at the
    value knows of it.
    """
    need = normal_quantile(level)
    for sign, quantity in zip((1.0, -1.0), ends, strict=True):
        there = turned(full, quantity)
        if there is None:
            return False
        psi = there.predictor.psi  # type: ignore[attr-defined]
        held = Held(there.predictor, [psi])
        none = np.zeros((0, full.data.m))
        term = Term(Kind.ORDER, there.predictor, held, (psi,), (), None, none, ())
        problem = Problem(there.predictor, full.data)
        z = absence_test(term, problem, there, there, seed, 1.0 - level)[0]
        if not sign * z > need:
            return False
    return True
