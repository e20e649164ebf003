"""A term of a law whose absence is tested, and the facts that are found about it."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np

from discrim.reactor.knocked import KnockedOut
from discrim.reactor.model import Predictor


class Kind(Enum):
    """How the term is in the law, which decides the test (see `ratelaw.knockout`)."""

    ZERO = "zero"
    VANISH = "vanish"
    SEVERAL = "several"
    ORDER = "order"
    FACTOR = "factor"


@dataclass(frozen=True, slots=True, eq=False)
class Term:
    """A term of a law, as the statistics see it.

    Attributes
    ----------
    full, reduced : predictors of the law with and without the term
    psi : indices, in ``full``, of the constants that are zero without it (empty for FACTOR)
    vanish : indices, in ``full``, of the constants that then no longer occur
    knocked : rates with and without at named conditions; None for FACTOR
    points : shape (K, m) named conditions; labels : K names (of runs, or "as asked")
    """

    kind: Kind
    full: Predictor
    reduced: Predictor
    psi: tuple[int, ...]
    vanish: tuple[int, ...]
    knocked: KnockedOut | None
    points: np.ndarray
    labels: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class NestedF:
    """Extra sum of squares with conditions taken as exact (Bates & Watts 1988, sec. 3.10)."""

    statistic: float
    df: tuple[int, int]
    p: float
    p_one_sided: float
    edge: bool


@dataclass(frozen=True, slots=True)
class Effect:
    """Effect at one named condition, with its reconciled two-sided interval and one-sided bound.

    ``bound``: one-sided 1 - alpha bound of the size of the effect (1 when it is open).
    """

    value: float
    low: float
    high: float
    bound: float
    label: str
    open_ended: bool


@dataclass(frozen=True, slots=True, eq=False)
class Participation:
    """All facts about one term in one law, errors read one way.

    Attributes
    ----------
    z : equivalent normal of the test that the term is absent, positive towards presence; nan where
        it cannot be tested; p : its p-value, one-sided unless ``two_sided``
    information : fraction of the sensitivity to the term that is not in lockstep with the rest
    detectable : effect that the test would have found with probability 0.8; nan if not known
    error_margin : factor on all condition errors at which the test stops rejecting; inf when it
    still
        rejects at the largest factor tried, nan when it never rejected or conditions are exact
    flip, flip_typical : smallest m such that all measurements moved by m stated errors are
    reproduced
        exactly without the term; its median when the term is absent
    flip_matters : the same for an effect of ``matters_above``
    weak : combinations of the *other* constants that the runs do not tell apart from the errors of the
        conditions; with one to three the test is the projected one, with more it need not hold its level
    """

    kind: Kind
    origin: str
    z: float
    p: float
    two_sided: bool
    information: float
    nested: NestedF | None
    effect: Effect | None
    detectable: float
    error_margin: float
    flip: float
    flip_typical: float
    flip_matters: float
    words: str
    weak: int = 0
