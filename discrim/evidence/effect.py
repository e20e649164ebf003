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
        # the constants solved last: each step asks for the same ones several times over
        self._last: tuple[np.ndarray, np.ndarray, np.ndarray] | None = None

    def to_inner(self, theta: np.ndarray) -> np.ndarray:
        """Constants of the inner predictor, shape (S, p): solves f = exp(T) f0 for psi."""
        return self._solved(theta)[0]

    def _solved(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Inner constants and the derivatives of psi by (T, others), both shape (S, p)."""
        last = self._last
        if last is None or not np.array_equal(last[0], theta):
            self._last = last = (theta.copy(), *self._solve(theta))
        return last[1].copy(), last[2]

    def _solve(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        psi = self.psi
        out = theta.copy()
        t = theta[:, psi]

        def full(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
            out[:, psi] = values
            return self.knocked.with_gradient(out, self.condition, knocked_out=False)

        out[:, psi] = 1.0 if self.logarithmic else 0.0
        f0, g0 = self.knocked.with_gradient(out, self.condition, knocked_out=True)
        now = out[:, psi].copy()
        f, g = full(now)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = np.exp(t)
            target = ratio * f0
            if self.logarithmic:  # an order: log f is linear in psi, one step is exact
                f, g = full(t / np.log(f / f0))
            else:
                for _ in range(60):
                    slope = g[:, psi]
                    # what adds is close to linear in psi, what inhibits has 1/f close to linear
                    up = _finite((target - f) / slope)
                    down = _finite((1.0 / target - 1.0 / f) * (-(f**2) / slope))
                    new = np.maximum(now + np.where(t >= 0, up, down), 0.0)
                    moved = np.abs(new - now) > 1e-13 * np.abs(new)
                    if not moved.any():
                        break
                    f, g = full(new)
                    # what is subtracted is linear too: there the other step runs past f = 0
                    past = (f <= 0) & (t < 0) & moved
                    if past.any():
                        new = np.where(past, np.maximum(now + up, 0.0), new)
                        f, g = full(new)
                    now = new
                    if (np.abs(f - target) <= 1e-13 * np.abs(target)).all():
                        break
            slope = g[:, psi]
            row = -(g - ratio[:, None] * g0) / slope[:, None]
            row[:, psi] = target / slope
        return out, _finite(row)

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


def _finite(x: np.ndarray) -> np.ndarray:
    return np.where(np.isfinite(x), x, 0.0)
