"""Values that a law holds only implicitly: unknowns fixed by balances without a closed form.

A rate law may depend on an amount (of a radical, of vacant sites) that is the solution of
polynomial balances of third degree or more. It then stands in the law as an
:class:`ImplicitValue`, an expression like any other: symbols in its equations can be replaced, it
has exact derivatives by the implicit function theorem, and :mod:`discrim.ratelaw.compile` solves
the equations numerically.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import sympy


class ImplicitValue(sympy.Expr):
    """Unknown ``index`` of the positive solution z of the equations G(z) = 0.

    Built as ``ImplicitValue(index, unknowns, equations)``; ``unknowns`` are positive dummy symbols
    (named like the amounts they stand for), bound within the expression; ``equations`` as many
    expressions, polynomial in the unknowns. Values with the same unknowns and equations belong to
    one system, which is solved once.
    """

    is_commutative = True

    def __new__(
        cls, index: Any, unknowns: Sequence[sympy.Symbol], equations: Sequence[Any]
    ) -> ImplicitValue:
        return super().__new__(
            cls, sympy.Integer(index), sympy.Tuple(*unknowns), sympy.Tuple(*equations)
        )

    @property
    def index(self) -> int:
        return int(self.args[0])

    @property
    def unknowns(self) -> tuple[sympy.Symbol, ...]:
        return tuple(self.args[1])

    @property
    def equations(self) -> tuple[Any, ...]:
        return tuple(self.args[2])

    @property
    def unknown(self) -> sympy.Symbol:
        """The symbol that this value solves for."""
        return self.unknowns[self.index]

    @property
    def system(self) -> tuple[Any, Any]:
        """What all values of one system share."""
        return self.args[1], self.args[2]

    @property
    def free_symbols(self) -> set[sympy.Symbol]:
        inside: set[sympy.Symbol] = set()
        for e in self.equations:
            inside |= e.free_symbols
        return inside - set(self.unknowns)

    @property
    def bound_symbols(self) -> list[sympy.Symbol]:
        return list(self.unknowns)

    def _eval_is_nonnegative(self) -> bool:
        return True

    def _eval_is_real(self) -> bool:
        return True

    def _eval_derivative(self, symbol: sympy.Symbol) -> Any:
        """-(dG/dz)^-1 dG/dsymbol, the implicit function theorem."""
        if symbol not in self.free_symbols:
            return sympy.Integer(0)
        n = len(self.unknowns)
        jacobian = sympy.Matrix(n, n, lambda i, j: self.equations[i].diff(self.unknowns[j]))
        right = sympy.Matrix(n, 1, lambda i, _: -self.equations[i].diff(symbol))
        slope = jacobian.adjugate().row(self.index).dot(right) / jacobian.det()
        values = {z: ImplicitValue(k, *self.system) for k, z in enumerate(self.unknowns)}
        return slope.xreplace(values)


def systems(expr: Any) -> list[tuple[Any, Any]]:
    """The systems (unknowns, equations) that an expression needs, inner ones first, each once."""
    out: list[tuple[Any, Any]] = []

    def visit(inside: Any) -> None:
        values = inside.atoms(ImplicitValue)
        for value in sorted(values, key=str) if len(values) > 1 else values:
            if value.system not in out:
                visit(value.args[2])
                if value.system not in out:
                    out.append(value.system)

    visit(expr)
    return out


def balances_of(expr: Any) -> list[tuple[sympy.Symbol, Any]]:
    """Unknowns with the equation that is printed beside each: "[R] solves 0 = ...".

    The unknowns of one system follow one another; together they solve all of its equations.
    """
    return [
        (unknown, equation)
        for unknowns, equations in systems(expr)
        for unknown, equation in zip(unknowns, equations, strict=True)
    ]


def named(expr: Any) -> tuple[Any, Mapping[sympy.Symbol, ImplicitValue]]:
    """The expression with a symbol for each implicit value, and what the symbols stand for.

    For algebra that must take implicit values as they are.
    """
    values: dict[ImplicitValue, sympy.Symbol] = {}
    for unknowns, equations in systems(expr):
        for k, unknown in enumerate(unknowns):
            values[ImplicitValue(k, unknowns, equations)] = sympy.Dummy(
                unknown.name, nonnegative=True
            )
    return expr.xreplace(values), {symbol: value for value, symbol in values.items()}


Terms = dict[tuple[Any, ...], Any]  # coefficient by the powers of the unknowns


def terms_in(equation: Any, unknowns: Sequence[sympy.Symbol]) -> Terms:
    """A polynomial as its terms in the unknowns, with coefficients as they are written.

    Fractions are cleared first where an unknown stands below. Powers of an unknown may be broken.
    Raises ValueError where the equation is no polynomial in the unknowns.
    """
    try:
        terms = _terms(equation, tuple(unknowns))
    except _Below:
        above = sympy.fraction(sympy.together(equation))[0]
        terms = _terms(above, tuple(unknowns))
    return {powers: c for powers, c in terms.items() if c != 0}


class _Below(ValueError):
    """An unknown in a denominator."""


def _terms(e: Any, unknowns: tuple[sympy.Symbol, ...]) -> Terms:
    none = (sympy.Integer(0),) * len(unknowns)
    if not e.free_symbols & set(unknowns):
        return {none: e}
    if e in unknowns:
        k = unknowns.index(e)
        return {(*none[:k], sympy.Integer(1), *none[k + 1 :]): sympy.Integer(1)}
    if e.is_Add:
        out: Terms = {}
        for part in e.args:
            for powers, c in _terms(part, unknowns).items():
                out[powers] = out.get(powers, sympy.Integer(0)) + c
        return out
    if e.is_Mul:
        product: Terms = {none: sympy.Integer(1)}
        for part in e.args:
            product = _times(product, _terms(part, unknowns))
        return product
    if e.is_Pow and e.exp.is_Rational:
        if e.exp.is_negative:
            raise _Below(f"an unknown in a denominator: {e}")
        if e.base in unknowns:
            k = unknowns.index(e.base)
            return {(*none[:k], e.exp, *none[k + 1 :]): sympy.Integer(1)}
        if e.exp.is_Integer:
            base, power = _terms(e.base, unknowns), {none: sympy.Integer(1)}
            for _ in range(int(e.exp)):
                power = _times(power, base)
            return power
    raise ValueError(f"no polynomial in the unknowns: {e}")


def _times(a: Terms, b: Terms) -> Terms:
    out: Terms = {}
    for powers, c in a.items():
        for others, d in b.items():
            key = tuple(p + q for p, q in zip(powers, others, strict=True))
            out[key] = out.get(key, sympy.Integer(0)) + c * d
    return out
