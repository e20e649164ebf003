"""Laws with long sums, such as the steady state of a large network, as fast array functions.

To differentiate a sum of a thousand products symbolically, and to compile all of it, is slow. A sum
of products of powers is a table of exponents instead: with t_k the k-th product and E_kj its power
of x_j, the sum is S = sum_k c_k t_k, dS/dx_j = sum_k c_k t_k E_kj/x_j, and for i != j
d2S/dx_i dx_j = sum_k c_k t_k E_ki E_kj/(x_i x_j): matrix products. The law around the sums is
differentiated symbolically, and the chain rule puts both together.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import sympy

MANY_TERMS = 120  # of a sum that is made a table

_TINY = 1e-100  # stands for zero: products of a few of them are still numbers
_CHUNK = 4_000_000  # products held at once

Make = Callable[[Sequence[Any], list[Any]], Callable[..., Any]]


def has_long_sums(expression: Any) -> bool:
    return bool(_long_sums(expression, frozenset(expression.free_symbols)))


class SumFunctions:
    """Functions of one expression in the symbols ``theta`` and ``cond`` with long sums.

    ``make`` turns (arguments, expressions) into an array function.
    """

    def __init__(
        self, expression: Any, theta: Sequence[Any], cond: Sequence[Any], make: Make
    ) -> None:
        self.theta, self.cond, self.make = list(theta), list(cond), make
        inputs = [*theta, *cond]
        swap: dict[Any, Any] = {}
        self.tables: list[tuple[np.ndarray, np.ndarray]] = []
        for e, table in _long_sums(expression, frozenset(inputs)).items():
            swap[e] = sympy.Symbol(f"s{len(swap)}", real=True)
            exponents = np.zeros((len(table), len(inputs)))
            for k, (_, powers) in enumerate(table):
                for symbol, power in powers.items():
                    exponents[k, inputs.index(symbol)] = float(power)
            self.tables.append((np.array([c for c, _ in table], float), exponents))
        self.sums = list(swap.values())
        self.outer = expression.xreplace(swap)
        self._made: dict[bool, Callable[..., Any]] = {}

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
        x = np.stack([np.broadcast_to(a, shape).reshape(-1) for a in args], axis=1)
        x = np.where(x == 0.0, _TINY, x)
        p, m, n = len(self.theta), len(self.cond), len(self.sums)
        tables = [self._sums(k, x, both=both) for k in range(n)]
        s = [t[0] for t in tables]
        out = self._outer(x, s, both=both)
        value = out["f"][:, 0].reshape(shape)
        slopes = np.stack([t[1] for t in tables], axis=1)  # (P, n, p + m)
        by_theta = by_cond = by_both = None
        if constants:
            chain = np.einsum("pk,pkx->px", out["f_s"], slopes[:, :, :p])
            by_theta = (out["f_t"] + chain).reshape(*shape, p)
        if conditions:
            chain = np.einsum("pk,pkx->px", out["f_s"], slopes[:, :, p:])
            by_cond = (out["f_c"] + chain).reshape(*shape, m)
        if both:
            s_t, s_c = slopes[:, :, :p], slopes[:, :, p:]
            mixed = np.stack([t[2] for t in tables], axis=1)  # (P, n, m, p)
            points = len(x)
            total = out["f_ct"].reshape(points, m, p)
            total = total + np.einsum("pck,pkt->pct", out["f_cs"].reshape(points, m, n), s_t)
            total = total + np.einsum("ptk,pkc->pct", out["f_ts"].reshape(points, p, n), s_c)
            total = total + np.einsum("pk,pkct->pct", out["f_s"], mixed)
            curved = out["f_ss"].reshape(points, n, n)
            total = total + np.einsum("pkc,pkl,plt->pct", s_c, curved, s_t)
            by_both = total.reshape(*shape, m, p)
        return value, by_theta, by_cond, by_both

    def _sums(self, k: int, x: np.ndarray, *, both: bool) -> tuple[np.ndarray, ...]:
        """One sum at all points, shape (P,), its slopes (P, p + m), and (P, m, p) if asked for."""
        c, exponents = self.tables[k]
        p = len(self.theta)
        value, slopes, mixed = [], [], []
        step = max(1, _CHUNK // len(c))
        for at in range(0, len(x), step):
            here = x[at : at + step]
            terms = np.exp(np.log(np.abs(here)) @ exponents.T) * c
            if (here < 0.0).any():
                odd = (here < 0.0).astype(float) @ (exponents % 2).T
                terms = terms * (1.0 - 2.0 * (odd % 2))
            value.append(terms.sum(axis=1))
            slopes.append(terms @ exponents / here)
            if both:
                rows = [
                    (terms * exponents[:, p + i]) @ exponents[:, :p] / here[:, p + i : p + i + 1]
                    for i in range(len(self.cond))
                ]
                mixed.append(np.stack(rows, axis=1) / here[:, None, :p])
        out = [np.concatenate(value), np.concatenate(slopes)]
        if both:
            out.append(np.concatenate(mixed))
        return tuple(out)

    def _outer(
        self, x: np.ndarray, s: Sequence[np.ndarray], *, both: bool
    ) -> dict[str, np.ndarray]:
        f, t, c, z = self.outer, self.theta, self.cond, self.sums
        parts = {
            "f": [f],
            "f_t": [f.diff(a) for a in t],
            "f_c": [f.diff(a) for a in c],
            "f_s": [f.diff(a) for a in z],
        }
        if both:
            parts["f_ct"] = [f.diff(a).diff(b) for a in c for b in t]
            parts["f_cs"] = [f.diff(a).diff(b) for a in c for b in z]
            parts["f_ts"] = [f.diff(a).diff(b) for a in t for b in z]
            parts["f_ss"] = [f.diff(a).diff(b) for a in z for b in z]
        flat = [e for group in parts.values() for e in group]
        if both not in self._made:
            self._made[both] = self.make([*t, *c, *z], flat)
        raw = self._made[both](*x.T, *s)
        out: dict[str, np.ndarray] = {}
        at = 0
        for name, group in parts.items():
            columns = [np.broadcast_to(raw[at + k], (len(x),)) for k in range(len(group))]
            out[name] = np.stack(columns, axis=1) if columns else np.zeros((len(x), 0))
            at += len(group)
        return out


_Term = tuple[int, dict[Any, Any]]  # number and powers


def _long_sums(expression: Any, inputs: frozenset[Any]) -> dict[Any, list[_Term]]:
    """Sums of many products of powers, each with its terms."""
    found: dict[Any, list[_Term]] = {}
    for e in sorted(expression.atoms(sympy.Add), key=lambda a: -len(a.args)):
        if len(e.args) < MANY_TERMS:
            break
        terms = [_term(a, inputs) for a in e.args]
        if all(t is not None for t in terms):
            found[e] = [t for t in terms if t is not None]
    return found


def _term(e: Any, inputs: frozenset[Any]) -> _Term | None:
    number, powers = 1, {}
    for factor in sympy.Mul.make_args(e):
        if factor.is_Integer:
            number *= int(factor)
            continue
        base, power = factor.as_base_exp()
        if base not in inputs or not power.is_Rational:
            return None
        powers[base] = power
    return number, powers
