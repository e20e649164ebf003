"""The effect of a species or pathway at named conditions, and the law written in terms of it.

effect = (f - f0)/max(f, f0), with f0 the rate when the pathway or species is knocked out: -1 to 1.
Replacing the constant of the knocked-out term by the effect itself turns every test and interval
for a constant into one for the effect, with the other constants still nuisances: no ends of
intervals are ever plugged into one another. The working coordinate is

    T = log(f/f0),   effect = 1 - exp(-T) for T >= 0,   exp(T) - 1 for T < 0,

monotone in the effect and unbounded.
"""

from __future__ import annotations

import numpy as np

from discrim.reactor.knocked import KnockedOut
from discrim.reactor.model import Prediction, Predictor


def effect_of(t: np.ndarray | float) -> np.ndarray:
    """Effect from T = log(f/f0)."""
    t = np.asarray(t, float)
    with np.errstate(over="ignore"):
        return np.where(t >= 0, -np.expm1(-np.abs(t)), np.expm1(-np.abs(t)))


def t_of(effect: np.ndarray | float) -> np.ndarray:
    """T from the effect."""
    e = np.asarray(effect, float)
    with np.errstate(divide="ignore"):
        return np.where(e >= 0, -np.log1p(-np.abs(e)), np.log1p(-np.abs(e)))


# |T| beyond which the sensitivities to the effect and to the rest agree to rounding: the score
# would see nothing there and accept every value. It is an effect of 1 - 1e-7.
FARTHEST = 16.0


class InEffect:
    """The same predictor with constant ``psi`` replaced by T, the log of f/f0 at one condition.

    ``sign`` is 1 when the term can only add to the rate, -1 when it can only lower it, 0 when both.
    """

    def __init__(
        self,
        inner: Predictor,
        psi: int,
        knocked: KnockedOut,
        condition: np.ndarray,
        sign: int,
        logarithmic: bool,
    ) -> None:
        self.inner, self.psi, self.knocked = inner, psi, knocked
        self.condition, self.sign, self.logarithmic = condition, sign, logarithmic
        self.names = tuple("effect" if j == psi else n for j, n in enumerate(inner.names))
        self.lower = inner.lower.copy()
        self.upper = inner.upper.copy()
        self.lower[psi] = 0.0 if sign > 0 else -FARTHEST
        self.upper[psi] = 0.0 if sign < 0 else FARTHEST
        self.linear = np.zeros(len(inner.names), bool)
        # with T held, psi is proportional to a linear form of the others: they stay linear
        self.linear_when_held = bool(inner.linear.all()) and not logarithmic
        self.scale = inner.scale.copy()
        self.scale[psi] = 0.1
        self.starts = np.zeros((0, len(inner.names)))

    def to_inner(self, theta: np.ndarray) -> np.ndarray:
        """Constants of the inner predictor, shape (S, p): solves f = exp(T) f0 for psi."""
        return self._solved(theta)[0]

    def _solved(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Inner constants and the derivatives of psi by (T, others), both shape (S, p)."""
        psi = self.psi
        out = theta.copy()
        t = theta[:, psi]
        out[:, psi] = 1.0 if self.logarithmic else 0.0
        f0, g0 = self.knocked.with_gradient(out, self.condition, knocked_out=True)
        f, g = self.knocked.with_gradient(out, self.condition, knocked_out=False)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = np.exp(t)
            target = ratio * f0
            if self.logarithmic:  # an order: log f is linear in psi, one step is exact
                out[:, psi] = t / np.log(f / f0)
                f, g = self.knocked.with_gradient(out, self.condition, knocked_out=False)
            else:
                for _ in range(60):
                    slope = g[:, psi]
                    # what adds is close to linear in psi, what inhibits has 1/f close to linear
                    up = (target - f) / slope
                    down = (1.0 / target - 1.0 / f) * (-(f**2) / slope)
                    step = np.where(t >= 0, up, down)
                    # what is subtracted is linear too: there the other step runs past f = 0
                    past = self._value(out, psi, step) <= 0
                    step = np.where(past & (t < 0), up, step)
                    step = np.where(np.isfinite(step), step, 0.0)
                    new = np.maximum(out[:, psi] + step, 0.0)
                    moved = np.abs(new - out[:, psi]) > 1e-13 * np.abs(new)
                    if not moved.any():
                        break
                    out[:, psi] = new
                    f, g = self.knocked.with_gradient(out, self.condition, knocked_out=False)
                    if (np.abs(f - target) <= 1e-13 * np.abs(target)).all():
                        break
            slope = g[:, psi]
            row = -(g - ratio[:, None] * g0) / slope[:, None]
            row[:, psi] = target / slope
        return out, np.where(np.isfinite(row), row, 0.0)

    def _value(self, inner: np.ndarray, psi: int, step: np.ndarray) -> np.ndarray:
        """f where psi is moved by ``step``."""
        if not (step != 0).any() or self.sign > 0:
            return np.ones(len(inner))
        moved = inner.copy()
        moved[:, psi] += np.where(np.isfinite(step), step, 0.0)
        return self.knocked.rates(moved, self.condition[None])[0][:, 0]

    def from_inner(self, theta: np.ndarray) -> np.ndarray:
        """The other way, shape (S, p)."""
        out = theta.copy()
        e = self.knocked.effect(theta, self.condition[None])[:, 0]
        out[:, self.psi] = np.clip(t_of(e), self.lower[self.psi], self.upper[self.psi])
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
        inner, row = self._solved(theta)
        pred = self.inner.predict(
            inner, conditions, constants=constants, conditions_too=conditions_too, both=both
        )
        if not (constants or both):
            return pred
        by_constants, by_both = pred.by_constants, pred.by_both
        if by_constants is not None:
            own = by_constants[:, :, self.psi].copy()
            by_constants = by_constants + own[..., None] * row[:, None, :]
            by_constants[:, :, self.psi] = own * row[:, None, self.psi]
        if by_both is not None:
            own_b = by_both[..., self.psi].copy()
            by_both = by_both + own_b[..., None] * row[:, None, None, :]
            by_both[..., self.psi] = own_b * row[:, None, None, self.psi]
        return Prediction(pred.values, by_constants, pred.by_conditions, by_both)
