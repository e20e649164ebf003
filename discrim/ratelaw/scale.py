"""A typical size for each constant of a law, from the sizes of what is measured."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.implicit import ImplicitValue

_Row = tuple[dict[sympy.Symbol, float], float]  # logarithm: powers of constants, and a number
_WEAK = 1e-3  # weight of "of size one", which decides only what nothing else does


def typical_scale(
    expressions: Sequence[tuple[sympy.Expr, float]],
    typical: Mapping[sympy.Symbol, float],
) -> dict[str, float]:
    """Positive sizes of the constants at which no term of the law drowns another.

    The terms of each sum are made equal in size, and each expression as large as what was
    measured: linear equations in the logarithms of the constants, solved by least squares since
    they are often more than the constants. For the start of a fit; needs no units. Unknowns of
    balances without a closed form count like constants.

    Parameters
    ----------
    expressions : each with a typical size of its measured values (absolute; 0 if not known)
    typical : a typical size of each species and quantity, and of constants that are known; what
        is missing or zero counts as 1

    Returns
    -------
    By name, for every constant that is not in ``typical``. Orders get 1, unless they stand in a
    sum with a quantity (pKa - pH): then the size of that.
    """
    walk = _Walk(typical)
    for expr, size in expressions:
        powers, log_size = walk.log(expr)
        if size and math.isfinite(size):
            walk.rows.append((powers, math.log(abs(size)) - log_size))
    constants = sorted(
        {
            s
            for e, _ in expressions
            for s in e.free_symbols
            if s.name[0] not in "[{" and s not in typical
        },
        key=lambda s: s.name,
    )
    out = {s.name: walk.orders.get(s, 1.0) for s in constants}
    named = [s for s in constants if s.is_nonnegative]
    if not named:
        return out
    found = [*named, *walk.unknowns]
    matrix = np.zeros((len(walk.rows) + len(found), len(found)))
    right = np.zeros(len(matrix))
    for i, (powers, value) in enumerate(walk.rows):
        right[i] = value
        for j, s in enumerate(found):
            matrix[i, j] = powers.get(s, 0.0)
    matrix[len(walk.rows) :] = _WEAK * np.eye(len(found))
    logs = np.linalg.lstsq(matrix, right, rcond=None)[0]
    for s, value in zip(named, np.clip(logs, -600.0, 600.0), strict=False):
        out[s.name] = math.exp(value)
    return out


class _Walk:
    """Logarithms of sizes, linear in the logarithms of the constants."""

    def __init__(self, typical: Mapping[sympy.Symbol, float]) -> None:
        self.typical = typical
        self.rows: list[_Row] = []
        self.orders: dict[sympy.Symbol, float] = {}
        self.unknowns: list[sympy.Symbol] = []
        self.systems: list[Any] = []

    def log(self, expr: sympy.Expr) -> _Row:
        if isinstance(expr, ImplicitValue):
            return self.implicit(expr)
        if expr in self.unknowns:
            return {expr: 1.0}, 0.0
        if expr.is_number:
            size = abs(float(expr))
            return {}, math.log(size) if size > 0 and math.isfinite(size) else 0.0
        if expr.is_Symbol:
            if expr.name[0] in "[{" or expr in self.typical:
                size = abs(self.typical.get(expr, 1.0))
                return {}, math.log(size) if size > 0 and math.isfinite(size) else 0.0
            return ({expr: 1.0}, 0.0) if expr.is_nonnegative else ({}, 0.0)
        if expr.is_Mul:
            powers: dict[sympy.Symbol, float] = {}
            total = 0.0
            for factor in expr.args:
                more, log_size = self.log(factor)
                total += log_size
                for s, p in more.items():
                    powers[s] = powers.get(s, 0.0) + p
            return powers, total
        if expr.is_Add:
            return self.sum(expr)
        if isinstance(expr, sympy.exp):
            return self.function(expr.args[0])
        if expr.is_Pow:
            return self.power(expr.base, expr.exp)
        return self.function(expr.args[0]) if expr.args else ({}, 0.0)

    def sum(self, expr: sympy.Expr) -> _Row:
        rows = [self.log(term) for term in expr.args]
        n = len(rows)
        mean: dict[sympy.Symbol, float] = {}
        for powers, _ in rows:
            for s, p in powers.items():
                mean[s] = mean.get(s, 0.0) + p / n
        middle = sum(log_size for _, log_size in rows) / n
        for powers, log_size in rows:
            apart = {s: powers.get(s, 0.0) - mean[s] for s in mean}
            self.rows.append((apart, middle - log_size))
        return mean, middle + math.log(n)

    def implicit(self, value: ImplicitValue) -> _Row:
        """Its unknown, of the size at which the terms of its balances are equal."""
        if value.system not in self.systems:
            self.systems.append(value.system)
            self.unknowns += value.unknowns
            for equation in value.equations:
                self.log(equation)
        return {value.unknown: 1.0}, 0.0

    def function(self, argument: sympy.Expr) -> _Row:
        """An argument of size one; the value, then, as well."""
        powers, log_size = self.log(argument)
        if powers:
            self.rows.append((powers, -log_size))
        return {}, 0.0

    def power(self, base: sympy.Expr, exponent: sympy.Expr) -> _Row:
        if exponent.is_Rational:
            size = float(exponent)
        else:
            size = self.exponent(exponent)
        if base.is_number and not exponent.is_number:
            return {}, 0.0  # 10^(pKa - pH): near one where its parts balance
        powers, log_size = self.log(base)
        return {s: p * size for s, p in powers.items()}, log_size * size

    def exponent(self, exponent: sympy.Expr) -> float:
        """Its value with every order at 1; orders beside a quantity take its size."""
        for part in exponent.atoms(sympy.Add) or {exponent}:
            measured = [
                abs(self.typical.get(s, 1.0)) for s in part.free_symbols if s.name[0] in "[{"
            ]
            for s in part.free_symbols:
                if s.name[0] not in "[{" and s not in self.typical and not s.is_nonnegative:
                    self.orders[s] = max(measured, default=self.orders.get(s, 1.0))
        values = {s: self.typical.get(s, self.orders.get(s, 1.0)) for s in exponent.free_symbols}
        size = float(exponent.subs(values))
        return size if math.isfinite(size) else 1.0
