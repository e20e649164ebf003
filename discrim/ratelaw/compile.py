"""A law made into fast array functions with exact derivatives.

The expressions are differentiated symbolically and common subexpressions are shared between the
value and all derivatives. What only balances fix is solved for numerically, see
:mod:`discrim.ratelaw.compile_implicit`. Symbols are renamed to neutral ones first, so no text of
the user's ever becomes part of generated code.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache
from typing import Any

import numpy as np
import sympy

from discrim.ratelaw.compile_implicit import ImplicitFunctions
from discrim.ratelaw.compile_sums import SumFunctions, has_long_sums
from discrim.ratelaw.implicit import ImplicitValue

# Smallest amount at which logs and fractional powers are evaluated: [A]^n and its derivatives have
# finite limits at zero for n > 0 that floating point would otherwise spoil with 0*inf.
_TINY = 1e-200
_MANY_TERMS = 100  # of a sum that is written in halves


@lru_cache(maxsize=1)
def _printer() -> Any:
    """Small integer powers as products: numpy's general power costs ten multiplications."""
    from sympy.printing.numpy import NumPyPrinter

    class Products(NumPyPrinter):
        def _print_Pow(self, expr: Any, rational: bool = False) -> str:
            base, n = expr.base, expr.exp
            if base.is_Symbol and n.is_Integer and 2 <= abs(int(n)) <= 6:
                product = "*".join([self._print(base)] * abs(int(n)))
                return f"({product})" if n > 0 else f"(1.0/({product}))"
            return str(super()._print_Pow(expr, rational=rational))

        def _print_Add(self, expr: Any, order: Any = None) -> str:
            terms = list(expr.args)
            if len(terms) <= _MANY_TERMS:
                return str(super()._print_Add(expr, order=order))
            # Python reads a long sum by recursion, one level a term
            half = len(terms) // 2
            parts = (sympy.Add._from_args(t) for t in (terms[:half], terms[half:]))
            return "+".join(f"({self._print(p)})" for p in parts)

    return Products(
        {"fully_qualified_modules": False, "inline": True, "allow_unknown_functions": True}
    )


@lru_cache(maxsize=512)
def _function_of(
    neutral: Any, n_theta: int, n_cond: int, key: tuple[bool, bool, bool]
) -> Callable[..., Any]:
    """The array function of an expression in t0, t1, ..., c0, c1, ... with its derivatives.

    Kept by expression: the same law is bound many times in one study.
    """
    constants, conditions, both = key
    theta = [sympy.Symbol(f"t{i}", real=True) for i in range(n_theta)]
    cond = [sympy.Symbol(f"c{i}", real=True) for i in range(n_cond)]
    outputs = [neutral]
    if constants:
        # one fraction each: a third less arithmetic than sums of fractions
        small = neutral.is_rational_function(*theta, *cond) and neutral.count_ops() < 100
        slopes = [neutral.diff(t) for t in theta]
        outputs += [sympy.gcd_terms(e) for e in slopes] if small else slopes
    if conditions:
        outputs += [neutral.diff(c) for c in cond]
    if both:
        outputs += [neutral.diff(c).diff(t) for c in cond for t in theta]
    return _array_function([*theta, *cond], outputs)


def _array_function(inputs: Sequence[Any], outputs: list[Any]) -> Callable[..., Any]:
    made: Callable[..., Any] = sympy.lambdify(
        inputs,
        outputs,
        modules="numpy",
        printer=_printer(),
        cse=True,
        docstring_limit=-1,
    )
    return made


@lru_cache(maxsize=128)
def _implicit_functions_of(neutral: Any, n_theta: int, n_cond: int) -> ImplicitFunctions:
    """The same for an expression that holds implicit values."""
    theta = [sympy.Symbol(f"t{i}", real=True) for i in range(n_theta)]
    cond = [sympy.Symbol(f"c{i}", real=True) for i in range(n_cond)]
    return ImplicitFunctions(neutral, theta, cond, _array_function)


@lru_cache(maxsize=32)
def _sum_functions_of(neutral: Any, n_theta: int, n_cond: int) -> SumFunctions:
    """The same for an expression with long sums."""
    theta = [sympy.Symbol(f"t{i}", real=True) for i in range(n_theta)]
    cond = [sympy.Symbol(f"c{i}", real=True) for i in range(n_cond)]
    return SumFunctions(neutral, theta, cond, _array_function)


class CompiledLaw:
    """Value and exact derivatives of one expression, as functions of arrays.

    Parameters
    ----------
    expression : sympy expression
    constants, conditions : the symbols to differentiate by; they must cover all free symbols

    The functions are made on first use, one for each set of derivatives that is asked for.
    """

    def __init__(
        self,
        expression: Any,
        constants: Sequence[sympy.Symbol],
        conditions: Sequence[sympy.Symbol],
    ) -> None:
        self.expression = sympy.Integer(expression) if isinstance(expression, int) else expression
        self.constants = tuple(constants)
        self.conditions = tuple(conditions)
        unknown = self.expression.free_symbols - set(self.constants) - set(self.conditions)
        if unknown:
            raise ValueError(f"symbols without a value: {sorted(map(str, unknown))}")
        self._theta = [sympy.Symbol(f"t{i}", real=True) for i in range(len(self.constants))]
        self._cond = [sympy.Symbol(f"c{i}", real=True) for i in range(len(self.conditions))]
        swap = dict(zip(self.constants, self._theta, strict=True))
        swap |= dict(zip(self.conditions, self._cond, strict=True))
        self._neutral = self.expression.xreplace(swap)
        delicate = [a.args[0] for a in self._neutral.atoms(sympy.log)]
        delicate += [p for p in self._neutral.atoms(sympy.Pow) if not p.exp.is_Integer]
        inside: set[Any] = set().union(*(e.free_symbols for e in delicate))
        self._positive = np.array([c in inside for c in self._cond], dtype=bool)
        self._any_positive = bool(self._positive.any())
        self._made: dict[tuple[bool, bool, bool], Callable[..., Any]] = {}
        self._apart: ImplicitFunctions | SumFunctions | None = None
        if self._neutral.has(ImplicitValue):
            self._apart = _implicit_functions_of(self._neutral, len(self._theta), len(self._cond))
        elif has_long_sums(self._neutral):
            self._apart = _sum_functions_of(self._neutral, len(self._theta), len(self._cond))

    def _function(self, key: tuple[bool, bool, bool]) -> Callable[..., Any]:
        if key not in self._made:
            self._made[key] = _function_of(self._neutral, len(self._theta), len(self._cond), key)
        return self._made[key]

    def __call__(
        self,
        theta: np.ndarray,
        conditions: np.ndarray,
        *,
        constants: bool,
        conditions_too: bool,
        both: bool,
    ) -> tuple[np.ndarray, np.ndarray | None, np.ndarray | None, np.ndarray | None]:
        """Evaluate.

        ``theta`` shape (S, 1, p) or (S, N, p); ``conditions`` shape (N, m) or (S, N, m).
        Returns the value (S, N) and the derivatives asked for, (S, N, p), (S, N, m), (S, N, m, p).
        Not a number where an implicit value has no positive solution.
        """
        if self._any_positive:
            conditions = np.where((conditions == 0.0) & self._positive, _TINY, conditions)
        p, m = len(self.constants), len(self.conditions)
        batch = theta.shape[0]
        if conditions.ndim == 3 and batch == 1:
            batch = conditions.shape[0]
        shape = (batch, conditions.shape[-2])
        args = [theta[..., j] for j in range(p)] + [conditions[..., j] for j in range(m)]
        if self._apart is not None:
            with np.errstate(all="ignore"):
                return self._apart(
                    args, shape, constants=constants, conditions=conditions_too, both=both
                )
        function = self._function((constants, conditions_too, both))
        with np.errstate(all="ignore"):
            raw = function(*args)
        value = raw[0]
        if not (isinstance(value, np.ndarray) and value.shape == shape and value.base is None):
            value = np.empty(shape)
            value[...] = raw[0]
        at = 1
        by_theta = by_cond = by_both = None
        if constants:
            by_theta = np.empty((*shape, p))
            for j in range(p):
                by_theta[..., j] = raw[at + j]
            at += p
        if conditions_too:
            by_cond = np.empty((*shape, m))
            for j in range(m):
                by_cond[..., j] = raw[at + j]
            at += m
        if both:
            by_both = np.empty((*shape, m, p))
            for i in range(m):
                for j in range(p):
                    by_both[..., i, j] = raw[at + i * p + j]
        return value, by_theta, by_cond, by_both
