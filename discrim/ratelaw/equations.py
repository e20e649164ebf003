"""Whether one law is a case of another: polynomial equations for the constants, solved.

Laws N_s/D_s (smaller) and N_l/D_l (larger) agree for all amounts of the species if and only if
N_l*D_s - N_s*D_l vanishes as a polynomial in the species. Its coefficients are equations for the
constants of the larger law; a solution that is zero or positive for all positive constants of the
smaller law is a nesting, and it is put back and checked exactly. Infinite constants are not seen
here.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import sympy
from sympy.polys.domains import ZZ
from sympy.polys.rings import PolyRing

from discrim.ratelaw.case import Case, Prepared, varies
from discrim.ratelaw.relation import Nesting
from discrim.ratelaw.solve import Progress, one_sign, put, put_fraction, solutions

_MOST_PRODUCTS = 20_000  # terms multiplied to form one difference of two laws


def solve(case: Case, prepared: Prepared, progress: Progress) -> Iterator[Nesting]:
    """Nestings at finite constants; ``progress`` says what could not be followed to its end."""
    yield from _System(case, prepared).solve(prepared.larger, prepared.smaller, progress)


class _System:
    """The equations of one choice of orders, and the reading of their solutions."""

    def __init__(self, case: Case, prepared: Prepared) -> None:
        self.case = case
        self.choice = prepared.choice
        self.variables = prepared.variables
        self.unknown = prepared.unknown
        self.gone = [s for s in prepared.open_ if s not in self.unknown]
        constant = [k for k in self.variables.keys if not varies(k)]
        self.keys = constant  # unknowns first, then parameters
        self.signed = frozenset(i for i in prepared.layout.signed if i < len(constant))
        self.ring = PolyRing([f"w{i}" for i in range(len(constant))] or ["w0"], ZZ, "lex")

    def by_species(self, poly: Any) -> list[Any]:
        """The coefficients of a polynomial in what varies, in the ring of the constants."""
        n = len(self.keys)
        found: dict[Any, dict[Any, Any]] = {}
        for monomial, c in poly.items():
            constant = monomial[:n] if n else (0,)
            found.setdefault(monomial[n:], {})[constant] = c
        return [self.ring.from_dict(terms) for terms in found.values()]

    def solve(
        self,
        larger: Sequence[tuple[Any, Any]],
        smaller: Sequence[tuple[Any, Any]],
        progress: Progress,
    ) -> Iterator[Nesting]:
        equations = []
        for (top, bottom), (small_top, small_bottom) in zip(larger, smaller, strict=True):
            work = len(top) * len(small_bottom) + len(bottom) * len(small_top)
            if work > _MOST_PRODUCTS:
                progress.dropped.append("the laws are too large to compare")
                return
            equations += self.by_species(top * small_bottom - small_top * bottom)
        bottoms = [self.by_species(bottom) for _, bottom in larger]
        for values in solutions(equations, len(self.unknown), self.signed, progress):
            read = self.read(values, equations, bottoms)
            if read is not None:
                yield read

    def read(
        self, values: dict[int, Any], equations: list[Any], bottoms: list[list[Any]]
    ) -> Nesting | None:
        free = [i for i in range(len(self.unknown)) if i not in values]
        tied = [i for i in free if any(_holds(v, i) for v in values.values())]
        settled = self.settle(values, tied)
        if settled is None or not self.holds(settled, equations, bottoms):
            return None
        case = self.case
        redundant = [case.names[self.unknown[i]] for i in tied]
        out: dict[str, sympy.Expr] = {}
        zero: list[str] = []
        for symbol, name in case.names.items():
            if symbol in self.choice:
                out[name] = self.choice[symbol]
            elif symbol in self.unknown and self.unknown.index(symbol) in settled:
                i = self.unknown.index(symbol)
                value, power = self.expression(settled[i]), self.keys[i][1]
                if value == 0 and power != 1:
                    return None  # zero or infinite, by the sign of an order
                out[name] = value ** (self.variables.roots[self.keys[i]] / power)
            else:
                continue
            if symbol in self.choice:
                continue
            if out[name] == 0 and symbol.is_nonnegative and name not in redundant:
                zero.append(name)
        vanish = [case.names[self.unknown[i]] for i in free if i not in tied]
        vanish += [case.names[s] for s in self.gone]
        for symbol in case.without_effect(self.choice, zero):
            vanish.append(case.names[symbol])
            out.pop(case.names[symbol])
        chosen = {case.names[s] for s, v in self.choice.items() if v == 0 and s.is_nonnegative}
        zero = [n for n in case.names.values() if n in zero or (n in chosen and n in out)]
        fixed = {
            n: v for n, v in out.items() if v.is_number and n not in zero and n not in redundant
        }
        return Nesting(
            values=out,
            zero=tuple(zero),
            fixed=fixed,
            vanish=tuple(vanish),
            n_restrictions=case.n_restrictions,
            edge=bool(zero),
            redundant=tuple(redundant),
        )

    def settle(self, values: dict[int, Any], tied: list[int]) -> dict[int, Any] | None:
        """A choice of redundant unknowns for which every value is nonnegative."""
        to_field = self.ring.to_field()
        for choice in (to_field.one, to_field.zero) if tied else (to_field.one,):
            settled = dict(values)
            try:
                for i in tied:
                    settled = {j: put_fraction(v, i, choice) for j, v in settled.items()}
                    settled[i] = choice
            except ZeroDivisionError:
                continue
            if all(self.allowed(i, v) for i, v in settled.items()):
                return settled
        return None

    def allowed(self, i: int, value: Any) -> bool:
        if i in self.signed or not value:
            return True
        top, bottom = one_sign(value.numer, self.signed), one_sign(value.denom, self.signed)
        return top is not None and top == bottom

    def holds(self, values: dict[int, Any], equations: list[Any], bottoms: list[list[Any]]) -> bool:
        """Whether the laws agree exactly, and the larger one still has a denominator."""

        def at(poly: Any) -> Any:
            for i, value in values.items():
                poly = put(poly, i, value.numer, value.denom)
            return poly

        return not any(at(e) for e in equations) and all(any(at(c) for c in b) for b in bottoms)

    def expression(self, value: Any) -> sympy.Expr:
        symbols = [
            base ** (power / sympy.Integer(self.variables.roots[base, power]))
            for base, power in self.keys
        ] or [sympy.Integer(1)]

        def polynomial(poly: Any) -> sympy.Expr:
            return sympy.Add(
                *(
                    sympy.Integer(int(c))
                    * sympy.Mul(*(s**e for s, e in zip(symbols, monomial, strict=True) if e))
                    for monomial, c in poly.terms()
                )
            )

        return polynomial(value.numer) / polynomial(value.denom)


def _holds(value: Any, i: int) -> bool:
    return any(m[i] for m in value.numer) or any(m[i] for m in value.denom)
