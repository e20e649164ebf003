"""Rate laws of the simulated studies, with the conditions of their runs. All numbers are invented.

Each law has one term in question. Conditions are drawn as true ones before errors: A over a factor of
four, B = 2.5 A (1 + spread N(0, 1)) unless it is said otherwise.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache, cached_property
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.compile import CompiledLaw
from discrim.reactor.knocked import KnockedOut
from discrim.reactor.rates import RatePredictor

a, b, c, d, t, inlet, tau = sympy.symbols("a b c d t inlet tau", positive=True)
k_a, k_b, k_c, k_d, k, K, K_b, m, n = sympy.symbols("k_a k_b k_c k_d k K K_b m n", positive=True)
Array = np.ndarray
LEAST = 0.02  # no amount is drawn below this part of its mean


@dataclass(frozen=True)
class Law:
    """A law, its term in question, and how its runs are drawn.

    Attributes
    ----------
    rate : expression; constants : symbols of its constants, the first of them the one in question
    conditions : symbols of the columns; errors : how far each has errors (1: as the cell says, 0: none)
    truth : values of the constants when the term carries a share of an average rate
    columns : rng, studies, runs, spread -> true conditions, shape (studies, runs, m)
    formula : how the observation is computed from the conditions, None where it is read by itself
    samples : of one run; errors of the conditions are shared by them
    free : constants that may be negative (orders)
    """

    rate: Any
    constants: tuple[Any, ...]
    conditions: tuple[Any, ...]
    errors: tuple[float, ...]
    truth: Callable[[float], list[float]]
    columns: Callable[[np.random.Generator, int, int, float], Array]
    formula: Any = None
    samples: int = 1
    free: tuple[str, ...] = ()

    @property
    def two_sided(self) -> bool:
        return str(self.constants[0]) in self.free

    @cached_property
    def without(self) -> Any:
        """The law without the term."""
        return self.rate.subs(self.constants[0], 0)

    def predictor(self, observations: int, *, with_term: bool = True) -> RatePredictor:
        """What is observed, less what is computed from the conditions where the law has `formula`."""
        return _predictor(self, observations, with_term)

    def _made(self, observations: int, with_term: bool) -> RatePredictor:
        expression = self.rate if with_term else self.without
        if self.formula is not None:
            expression = expression - self.formula
        constants = self.constants if with_term else self.constants[1:]
        linear = [sympy.diff(self.rate, x, 2) == 0 for x in constants]
        joint = all(sympy.diff(self.rate, x, y) == 0 for x in constants for y in constants)
        return RatePredictor(
            [CompiledLaw(expression, list(constants), list(self.conditions))],
            np.zeros(observations, int),
            names=tuple(map(str, constants)),
            lower=np.array([-np.inf if str(x) in self.free else 0.0 for x in constants]),
            upper=np.full(len(constants), np.inf),
            linear=np.array([x if joint else False for x in linear]),
            scale=np.ones(len(constants)),
            starts=np.zeros((0, len(constants))),
        )

    @cached_property
    def knocked(self) -> KnockedOut:
        """Rates with and without the term."""
        both = [
            CompiledLaw(x, list(self.constants), list(self.conditions))
            for x in (self.rate, self.without)
        ]
        return KnockedOut(both[0], both[1], np.arange(len(self.constants)))


@cache
def _predictor(law: Law, observations: int, with_term: bool) -> RatePredictor:
    return law._made(observations, with_term)


def _amount(rng: np.random.Generator, shape: tuple[int, int]) -> Array:
    return rng.uniform(0.5, 2.0, shape)


def _along(x: Array, spread: float, draw: Array) -> Array:
    return x * np.maximum(1 + spread * draw, LEAST)


def _pair(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    x = _amount(rng, (studies, runs))
    return np.stack([x, _along(2.5 * x, spread, rng.standard_normal(x.shape))], axis=2)


def _wide_pair(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """A over a factor of forty, so that its own adsorption shows."""
    x = 10 ** rng.uniform(-0.9, 0.7, (studies, runs))
    return np.stack([x, _along(2.5 * x, spread, rng.standard_normal(x.shape))], axis=2)


def _aligned(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """C is a mixture of A and B, so that three columns lie in one plane."""
    two = _pair(rng, studies, runs, 0.5)
    mixed = 0.6 * two[..., 0] + 0.2 * two[..., 1]
    third = _along(mixed, spread, rng.standard_normal(mixed.shape))
    return np.concatenate([two, third[..., None]], axis=2)


def _apart(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """C moves by itself."""
    two = _pair(rng, studies, runs, spread)
    return np.concatenate([two, _amount(rng, two.shape[:2])[..., None]], axis=2)


def _others(sign: int) -> Callable[[np.random.Generator, int, int, float], Array]:
    """C = 2 A (1 + spread d) and B = 2.5 A (1 + sign 0.3 d) with the same d."""

    def columns(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
        x = _amount(rng, (studies, runs))
        draw = rng.standard_normal(x.shape)
        return np.stack(
            [x, _along(2.5 * x, sign * 0.3, draw), _along(2.0 * x, spread, draw)], axis=2
        )

    return columns


def _three_others(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    x = _others(-1)(rng, studies, runs, spread)
    draw = rng.standard_normal(x.shape[:2])
    fourth = _along(1.5 * x[..., 0], spread, draw)
    x[..., 1] = np.maximum(x[..., 1] * (1 - 0.3 * draw), LEAST)
    return np.concatenate([x, fourth[..., None]], axis=2)


def _courses(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """Three samples of each run at 0.25, 0.7 and 1.4 times 1/k_a; A at the start, B kept in excess."""
    start = np.repeat(_amount(rng, (studies, runs)), 3, axis=1)
    excess = _along(np.ones((studies, runs)), spread, rng.standard_normal((studies, runs)))
    times = np.tile([0.25, 0.7, 1.4], (studies, runs))
    return np.stack([start, np.repeat(excess, 3, axis=1), times], axis=2)


def _maximum(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """A about 1/K, where the rate has its maximum and says least about A."""
    x = rng.uniform(0.5, 1.8, (studies, runs))
    return np.stack([x, _along(2.5 * x, spread, rng.standard_normal(x.shape))], axis=2)


def _tank(rng: np.random.Generator, studies: int, runs: int, spread: float) -> Array:
    """A at the outlet and B, the inlet amount that makes the rate that of A alone (k_a = 3; 20 to 60 %
    conversion), and the residence time."""
    two = _pair(rng, studies, runs, spread)
    residence = rng.uniform(0.25, 1.5, two.shape[:2]) / 3.0
    fed = two[..., 0] * (1 + 3.0 * residence)
    return np.concatenate([two, fed[..., None], residence[..., None]], axis=2)


def _carries(share: float, beside: float = 3.0, amount: float = 2.5) -> float:
    """The constant with which amount times it carries a share of the rate."""
    return beside * share / (1 - share) / amount


_LINEAR = k_a * a + k_b * b
LAWS: dict[str, Law] = {
    "two pathways": Law(_LINEAR, (k_b, k_a), (a, b), (1, 1), lambda s: [_carries(s), 3.0], _pair),
    "third column aligned": Law(
        _LINEAR + k_c * c,
        (k_b, k_a, k_c),
        (a, b, c),
        (1, 1, 1),
        lambda s: [_carries(s, 4.0), 3.0, 1.0],
        _aligned,
    ),
    "other at zero": Law(
        _LINEAR + k_c * c,
        (k_b, k_a, k_c),
        (a, b, c),
        (1, 1, 1),
        lambda s: [_carries(s), 3.0, 0.0],
        _apart,
    ),
    "others in lockstep, B with": Law(
        _LINEAR + k_c * c,
        (k_b, k_a, k_c),
        (a, b, c),
        (1, 1, 1),
        lambda s: [_carries(s), 3.0, 0.0],
        _others(1),
    ),
    "others in lockstep, B against": Law(
        _LINEAR + k_c * c,
        (k_b, k_a, k_c),
        (a, b, c),
        (1, 1, 1),
        lambda s: [_carries(s), 3.0, 0.0],
        _others(-1),
    ),
    "three others in lockstep": Law(
        _LINEAR + k_c * c + k_d * d,
        (k_b, k_a, k_c, k_d),
        (a, b, c, d),
        (1, 1, 1, 1),
        lambda s: [_carries(s), 3.0, 0.0, 0.0],
        _three_others,
    ),
    "adsorption": Law(
        k * a / (1 + K * a + K_b * b),
        (K_b, k, K),
        (a, b),
        (1, 1),
        lambda s: [_carries(s, 2.0), 4.0, 1.0],
        _wide_pair,
    ),
    "rate maximum": Law(
        k * a / (1 + K * a) ** 2 + k_b * b,
        (k_b, k, K),
        (a, b),
        (1, 1),
        lambda s: [_carries(s), 12.0, 1.0],
        _maximum,
    ),
    "time course": Law(
        a * sympy.exp(-(k_a + k_b * b) * t),
        (k_b, k_a),
        (a, b, t),
        (1, 1, 0),
        lambda s: [_carries(s, 1.0, 1.0), 1.0],
        _courses,
        samples=3,
    ),
    "stirred tank": Law(
        _LINEAR,
        (k_b, k_a),
        (a, b, inlet, tau),
        (1, 1, 1, 0),
        lambda s: [_carries(s), 3.0],
        _tank,
        formula=(inlet - a) / tau,
    ),
    "order": Law(
        k * a**m * b**n,
        (n, k, m),
        (a, b),
        (1, 1),
        lambda s: [s, 3.0, 1.0],
        _wide_pair,
        free=("n", "m"),
    ),
}
