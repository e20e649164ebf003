"""A law that holds solutions of balances, as fast array functions with exact derivatives.

The unknowns Z of all balances G(theta, c, Z) = 0 become plain inputs of the law f(theta, c, Z).
They are found numerically at each point; derivatives then follow from the implicit function
theorem, dZ/dx = -G_Z^-1 G_x. With the multipliers lambda that solve G_Z' lambda = f_Z and
L = f - lambda'G, the derivatives of the law are L_x, and its second derivatives

    L_xy + L_xZ Z_y + Z_x' L_Zy + Z_x' L_ZZ Z_y,

the usual adjoint formulas (differentiate f and G = 0 twice and eliminate the second derivatives of
Z).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.balances import Balances, solved
from discrim.ratelaw.implicit import ImplicitValue, systems, terms_in

# Where an amount or a constant is zero an unknown may vanish, or may not: it does if it follows
# these two stand-ins for zero. Products of two of them are still numbers.
_NEAR_ZERO = (1e-110, 1e-100)
_FOLLOWS = 0.02  # least power of the stand-in; the powers themselves are fractions like 1/2

Make = Callable[[Sequence[Any], list[Any]], Callable[..., Any]]


class ImplicitFunctions:
    """Functions of one expression in the symbols ``theta`` and ``cond`` with implicit values.

    ``make`` turns (arguments, expressions) into an array function.
    """

    def __init__(
        self, expression: Any, theta: Sequence[Any], cond: Sequence[Any], make: Make
    ) -> None:
        self.theta, self.cond, self.make = list(theta), list(cond), make
        self.unknowns: list[Any] = []
        self.equations: list[Any] = []
        self.solvers: list[tuple[Balances, Callable[..., Any], int, slice]] = []
        swap: dict[Any, Any] = {}
        for unknowns, equations in systems(expression):
            first = len(self.unknowns)
            new = [sympy.Symbol(f"z{first + k}", nonnegative=True) for k in range(len(unknowns))]
            names = dict(zip(unknowns, new, strict=True))
            known = list(self.unknowns)
            inside = [e.xreplace({**swap, **names}) for e in equations]
            polynomials = [terms_in(e, new) for e in inside]
            coefficients = [c for terms in polynomials for c in terms.values()]
            self.solvers.append(
                (
                    Balances([np.array(list(terms), float) for terms in polynomials]),
                    make([*self.theta, *self.cond, *known], coefficients),
                    len(coefficients),
                    slice(first, first + len(new)),
                )
            )
            self.unknowns += new
            self.equations += inside
            swap |= {ImplicitValue(k, unknowns, equations): z for k, z in enumerate(new)}
        self.expression = expression.xreplace(swap)
        self.multipliers = [sympy.Symbol(f"l{k}", real=True) for k in range(len(self.unknowns))]
        self._first: dict[tuple[bool, bool], _Table] = {}
        self._second: _Table | None = None

    # ---- the unknowns ---------------------------------------------------------------------

    def solve(self, args: Sequence[np.ndarray], shape: tuple[int, int]) -> list[np.ndarray]:
        """Every unknown at every point, shapes ``shape``; NaN where there is no solution."""
        found: list[np.ndarray] = []
        for balances, function, count, _ in self.solvers:
            inputs = [*args, *found]
            c = _stacked(function(*inputs), count, shape)
            zero = balances.delicate(c)
            if zero.any():
                z = np.empty((balances.n, c.shape[1]))
                z[:, ~zero] = balances.solve(c[:, ~zero])
                z[:, zero] = balances.without(c[:, zero])
                open_ = np.flatnonzero(zero)[np.isnan(z[:, zero]).any(axis=0)]
                if len(open_):
                    z[:, open_] = _beside_zero(
                        balances,
                        function,
                        count,
                        [np.broadcast_to(a, shape).reshape(-1)[open_] for a in inputs],
                    )
            else:
                z = balances.solve(c)
            found += [x.reshape(shape) for x in z]
        return found

    # ---- values and derivatives -----------------------------------------------------------

    def __call__(
        self,
        args: Sequence[np.ndarray],
        shape: tuple[int, int],
        *,
        constants: bool,
        conditions: bool,
        both: bool,
    ) -> tuple[np.ndarray, np.ndarray | None, np.ndarray | None, np.ndarray | None]:
        """Value and derivatives, shapes as in :class:`discrim.ratelaw.compile.CompiledLaw`."""
        z = self.solve(args, shape)
        key = (constants or both, conditions or both)
        table = self._first_table(key)
        out = table(args, z, shape)
        value = out["f"][:, 0, 0].reshape(shape)
        if not any(key):
            return value, None, None, None
        n = len(z)
        flat = np.stack([x.reshape(-1) for x in z], axis=1)
        size = np.where(flat > 0.0, flat, 1.0)  # (P, n)
        a = out["G_z"] * size[:, None, :]
        row = np.abs(a).max(axis=2)
        row = 1.0 / np.where(row > 0.0, row, 1.0)
        a = a * row[:, :, None]
        right = (out["f_z"][:, 0] * size)[:, :, None]
        multipliers = solved(a.transpose(0, 2, 1), right)[:, :, 0] * row
        slopes: dict[str, np.ndarray] = {}
        for x in ("t", "c"):
            if f"f_{x}" in out:
                slopes[x] = out[f"f_{x}"][:, 0] - np.einsum(
                    "pk,pkx->px", multipliers, out[f"G_{x}"]
                )
        by_t = slopes["t"].reshape(*shape, -1) if constants else None
        by_c = slopes["c"].reshape(*shape, -1) if conditions else None
        if not both:
            return value, by_t, by_c, None
        z_t = -size[:, :, None] * solved(a, out["G_t"] * row[:, :, None])
        z_c = -size[:, :, None] * solved(a, out["G_c"] * row[:, :, None])
        lagrange = [multipliers[:, k].reshape(shape) for k in range(n)]
        second = self._second_table()(args, [*z, *lagrange], shape)
        by_both = second["ct"]
        by_both = by_both + np.einsum("pcz,pzt->pct", second["cz"], z_t)
        by_both += np.einsum("pzc,ptz->pct", z_c, second["tz"])
        by_both += np.einsum("pzc,pzy,pyt->pct", z_c, second["zz"], z_t, optimize=True)
        return value, by_t, by_c, by_both.reshape(*shape, *by_both.shape[1:])

    def _first_table(self, key: tuple[bool, bool]) -> _Table:
        if key not in self._first:
            blocks: dict[str, list[list[Any]]] = {"f": [[self.expression]]}
            f, g = [self.expression], self.equations
            if any(key):
                blocks["f_z"], blocks["G_z"] = (
                    _jacobian(f, self.unknowns),
                    _jacobian(g, self.unknowns),
                )
            if key[0]:
                blocks["f_t"], blocks["G_t"] = _jacobian(f, self.theta), _jacobian(g, self.theta)
            if key[1]:
                blocks["f_c"], blocks["G_c"] = _jacobian(f, self.cond), _jacobian(g, self.cond)
            self._first[key] = _Table(blocks, [*self.theta, *self.cond, *self.unknowns], self.make)
        return self._first[key]

    def _second_table(self) -> _Table:
        if self._second is None:
            terms = [m * e for m, e in zip(self.multipliers, self.equations, strict=True)]
            lagrange = self.expression - sympy.Add(*terms)
            by_c = [lagrange.diff(c) for c in self.cond]
            by_t = [lagrange.diff(t) for t in self.theta]
            by_z = [lagrange.diff(z) for z in self.unknowns]
            blocks = {
                "ct": _jacobian(by_c, self.theta),
                "cz": _jacobian(by_c, self.unknowns),
                "tz": _jacobian(by_t, self.unknowns),
                "zz": _jacobian(by_z, self.unknowns),
            }
            inputs = [*self.theta, *self.cond, *self.unknowns, *self.multipliers]
            self._second = _Table(blocks, inputs, self.make)
        return self._second


class _Table:
    """Named blocks of expressions as one array function that leaves out what is zero."""

    def __init__(
        self, blocks: dict[str, list[list[Any]]], inputs: Sequence[Any], make: Make
    ) -> None:
        self.shapes = {k: (len(b), len(b[0]) if b else 0) for k, b in blocks.items()}
        self.places: list[tuple[str, int, int]] = []
        used = []
        for name, block in blocks.items():
            for i, line in enumerate(block):
                for j, e in enumerate(line):
                    if e != 0:
                        self.places.append((name, i, j))
                        used.append(e)
        self.function = make(inputs, used)

    def __call__(
        self, args: Sequence[np.ndarray], more: Sequence[np.ndarray], shape: tuple[int, int]
    ) -> dict[str, np.ndarray]:
        """Each block at each point, shape (P, rows, columns)."""
        raw = self.function(*args, *more)
        points = shape[0] * shape[1]
        out = {k: np.zeros((*s, points)) for k, s in self.shapes.items()}
        for (name, i, j), value in zip(self.places, raw, strict=True):
            out[name][i, j].reshape(shape)[...] = value
        return {k: np.moveaxis(b, 2, 0) for k, b in out.items()}


def _jacobian(expressions: Sequence[Any], symbols: Sequence[Any]) -> list[list[Any]]:
    return [[e.diff(s) for s in symbols] for e in expressions]


def _stacked(raw: Sequence[Any], count: int, shape: tuple[int, int]) -> np.ndarray:
    out = np.empty((count, *shape))
    for k in range(count):
        out[k] = raw[k]
    return out.reshape(count, -1)


def _beside_zero(
    balances: Balances, function: Callable[..., Any], count: int, inputs: Sequence[np.ndarray]
) -> np.ndarray:
    """Limits of the unknowns as the inputs that are zero go there from above, shape (n, P)."""
    found = []
    for near in _NEAR_ZERO:
        moved = [np.where(a == 0.0, near, a) for a in inputs]
        points = len(moved[0]) if moved else 1
        c = _stacked(function(*moved), count, (1, points))
        found.append(balances.solve(c, thorough=False))  # too far out for a grid
    with np.errstate(all="ignore"):
        power = np.log(found[1] / found[0]) / np.log(_NEAR_ZERO[1] / _NEAR_ZERO[0])
        gone = (power > _FOLLOWS) | (found[0] == 0.0)
        endless = (power < -_FOLLOWS).any(axis=0)
    return np.where(endless, np.nan, np.where(gone, 0.0, found[0]))
