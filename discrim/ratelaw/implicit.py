"""Values that a law holds only implicitly: unknowns fixed by balances without a closed form.

A rate law may depend on an amount (of a radical, of vacant sites) that is the solution of
polynomial balances of third degree or more. It then stands in the law as an
:class:`ImplicitValue`, an expression like any other: symbols in its equations can be replaced, it
has exact derivatives by the implicit function theorem, and :mod:`discrim.ratelaw.compile` solves
the equations numerically.
"""

from __future__ import annotations

from collections.abc import Sequence
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
