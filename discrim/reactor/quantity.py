"""A quantity of the constants of a law, such as a ratio of two or the rate at named conditions.

It can stand in place of one of the constants: for given values of the quantity and of the others,
the constant that it replaces is found, in closed form where there is one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.expression import size_of
from discrim.ratelaw.implicit import ImplicitValue

# signs and symbols of an expression beyond which no closed form is looked for
MOST_SIZE = 400
# a constant without a closed form is looked for over these decades about its typical size
DECADES = 12.0
_STEPS = 60


@dataclass(frozen=True, slots=True, eq=False)
class Inverse:
    """One constant from the quantity and the other constants.

    Attributes
    ----------
    psi : index of the constant
    closed : value over (quantity, constants), None where it is found by iteration
    affine : whether, the quantity held, it is linear in the other constants
    everywhere : whether it cannot be negative for constants and quantities that are not
    """

    psi: int
    closed: CompiledLaw | None
    affine: bool
    everywhere: bool


class Quantity:
    """g(constants) at one condition taken as exact.

    Parameters
    ----------
    expression : sympy expression in ``symbols`` and ``conditions``
    symbols : symbols of all p free constants, in order
    conditions : symbols of conditions, m of them; at : shape (m,) their values
    scale : shape (p,) typical sizes of the constants
    """

    def __init__(
        self,
        expression: Any,
        symbols: Sequence[Any],
        conditions: Sequence[Any],
        at: np.ndarray,
        scale: np.ndarray,
    ) -> None:
        self.expression = expression
        self.symbols = tuple(symbols)
        self.conditions = tuple(conditions)
        self.at = np.asarray(at, float)
        self.scale = np.asarray(scale, float)
        self.law = CompiledLaw(expression, self.symbols, self.conditions)

    @property
    def involved(self) -> tuple[int, ...]:
        """Indices of the constants that it depends on."""
        free = self.expression.free_symbols
        return tuple(j for j, s in enumerate(self.symbols) if s in free)

    @property
    def nonnegative(self) -> bool:
        """Whether it is 0 or more for every value that the constants can have."""
        return bool(self.expression.is_nonnegative) or _no_minus(self.expression)

    def value(self, theta: np.ndarray) -> np.ndarray:
        """Shape (S,) for ``theta`` of shape (S, p)."""
        return self.law(
            theta[:, None, :], self.at[None], constants=False, conditions_too=False, both=False
        )[0][:, 0]

    def with_gradient(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Value, shape (S,), and derivatives by the constants, shape (S, p)."""
        v, g, _, _ = self.law(
            theta[:, None, :], self.at[None], constants=True, conditions_too=False, both=False
        )
        assert g is not None
        return v[:, 0], g[:, 0]

    @cached_property
    def inverses(self) -> tuple[Inverse, ...]:
        """The constants that it can stand in place of, the most convenient first."""
        found = [self._inverse(j) for j in self.involved]

        def rank(i: Inverse) -> tuple[bool, bool, bool, int]:
            order = not self.symbols[i.psi].is_nonnegative  # an order may have any sign
            return (i.closed is None, order, not (i.everywhere and i.affine), i.psi)

        return tuple(sorted(found, key=rank))

    def _inverse(self, j: int) -> Inverse:
        q = sympy.Symbol("_quantity", nonnegative=True)
        root = _solved(self.expression, self.symbols[j], q)
        if root is None:
            return Inverse(j, None, False, False)
        others = [s for k, s in enumerate(self.symbols) if k != j]
        closed = CompiledLaw(root, [q, *others], self.conditions)
        return Inverse(j, closed, _affine(root, others), _no_minus(root))

    def solve(self, inverse: Inverse, theta: np.ndarray) -> np.ndarray:
        """The constant ``inverse.psi``, shape (S,), where its column of ``theta`` holds the quantity.

        nan where no value of it gives the quantity.
        """
        j = inverse.psi
        if inverse.closed is None:
            return self._iterated(j, theta)
        order = [j, *(k for k in range(theta.shape[1]) if k != j)]
        with np.errstate(all="ignore"):
            return inverse.closed(
                theta[:, None, order],
                self.at[None],
                constants=False,
                conditions_too=False,
                both=False,
            )[0][:, 0]

    def _iterated(self, j: int, theta: np.ndarray) -> np.ndarray:
        """Bracketed on a grid of decades, then Newton steps that stay inside the bracket."""
        target = theta[:, j]
        trial = np.array(theta)
        free_sign = not self.symbols[j].is_nonnegative
        grid = self.scale[j] * np.logspace(-DECADES, DECADES, 2 * int(DECADES) + 1)
        grid = np.r_[-grid[::-1], 0.0, grid] if free_sign else np.r_[0.0, grid]
        with np.errstate(all="ignore"):
            every = np.tile(theta, (len(grid), 1))
            every[:, j] = np.repeat(grid, len(theta))
            gaps = self.value(every).reshape(len(grid), len(theta)) - target
            change = (np.sign(gaps[1:]) != np.sign(gaps[:-1])) & np.isfinite(gaps[1:] + gaps[:-1])
            first = change.argmax(axis=0)
            rows = np.arange(len(theta))
            low, high = grid[first], grid[first + 1]
            rising = gaps[first + 1, rows] > gaps[first, rows]
            x = 0.5 * (low + high)
            for _ in range(_STEPS):
                trial[:, j] = x
                v, g = self.with_gradient(trial)
                gap = v - target
                above = (gap > 0) == rising
                high, low = np.where(above, x, high), np.where(above, low, x)
                new = x - gap / g[:, j]
                inside = (new >= low) & (new <= high) & np.isfinite(new)
                new = np.where(inside, new, 0.5 * (low + high))
                done = np.abs(new - x) <= 1e-15 * np.abs(new)
                x = np.where(gap == 0, x, new)
                if (done | (gap == 0)).all():
                    break
        return np.where(change.any(axis=0), x, np.nan)


def _solved(expression: Any, symbol: Any, q: Any) -> Any | None:
    """The symbol from expression = q: a quotient of forms linear in it, or a power of it."""
    balances = expression.atoms(ImplicitValue)
    if any(symbol in b.free_symbols for b in balances):
        return None
    if balances:  # values that do not depend on the constant are numbers to it
        names = {b: sympy.Dummy(nonnegative=True) for b in balances}
        root = _solved(expression.xreplace(names), symbol, q)
        return None if root is None else root.xreplace({d: b for b, d in names.items()})
    if size_of(expression)[0] > MOST_SIZE:
        return None
    rest, power = expression.as_independent(symbol, as_Add=False)
    base, exponent = power.as_base_exp()
    if base == symbol and symbol not in exponent.free_symbols and exponent != 1:
        return (q / rest) ** (1 / exponent)
    top, bottom = sympy.fraction(sympy.together(expression))
    parts = []
    for part in (top, bottom):
        if not part.is_polynomial(symbol):
            return None
        poly = sympy.Poly(part, symbol)
        if poly.degree() > 1:
            return None
        parts += [poly.coeff_monomial(1), poly.coeff_monomial(symbol)]
    a0, a1, c0, c1 = parts
    slope = sympy.expand(q * c1 - a1)
    return None if slope == 0 else sympy.factor_terms((a0 - q * c0) / slope)


def _affine(root: Any, others: Sequence[Any]) -> bool:
    """Whether it is linear in the other constants together."""
    inside = [s for s in others if s in root.free_symbols]
    if not inside:
        return True
    if not root.is_polynomial(*inside):
        return False
    return bool(sympy.Poly(root, *inside).total_degree() <= 1)


def _no_minus(e: Any) -> bool:
    """Whether it is built from what is not negative by adding, multiplying and powers."""
    if e.is_Symbol:
        return bool(e.is_nonnegative) or e.name.startswith("[")
    if e.is_Number:
        return bool(e >= 0)
    if e.is_Add or e.is_Mul:
        return all(_no_minus(a) for a in e.args)
    if e.is_Pow:
        return _no_minus(e.base)
    return isinstance(e, sympy.exp)
