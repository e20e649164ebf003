"""Whether one rate law is a case of another, or the same law in other constants: proofs.

Laws N_s/D_s (smaller) and N_l/D_l (larger) agree for all amounts of the species if and only if
N_l*D_s - N_s*D_l vanishes as a polynomial in the species. Its coefficients are equations for the
constants of the larger law; a solution that is zero or positive for all positive constants of the
smaller law is a nesting, and it is put back and checked exactly. Orders, which no polynomial
holds, are tried at the values with which the species stand in the smaller law, then at 0, 1/2, 1,
2 and -1. ``None`` means "not proven", never "proven not nested"; a relation that needs a constant
to be infinite, or negative, is not counted.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from math import prod
from typing import Any

import sympy
from sympy.polys.domains import ZZ
from sympy.polys.rings import PolyRing

from discrim.ratelaw.model import Constant
from discrim.ratelaw.polynomials import (
    Key,
    NotRational,
    Variables,
    as_trees,
    collect,
    evaluate,
    n_terms,
)
from discrim.ratelaw.printing import plain
from discrim.ratelaw.solve import Progress, one_sign, put, put_fraction, solutions

_USUAL_ORDERS = tuple(sympy.Rational(p, q) for p, q in ((0, 1), (1, 2), (1, 1), (2, 1), (-1, 1)))
_MOST_CHOICES = 64  # combinations of values of orders that are tried
_MOST_OPERATIONS = 1200  # of the two laws; beyond it a proof takes too long
_MOST_PRODUCTS = 20_000  # terms multiplied to form one difference of two laws
_MOST_EXPONENTS = 60_000  # terms of a law times variables; about a second of work


@dataclass(frozen=True, slots=True, eq=False)
class Nesting:
    """The smaller law is the larger one at certain values of its constants.

    Attributes
    ----------
    values : for each constant of the larger law that is determined, its value, an expression in
        the constants of the smaller law
    zero : constants of the larger law that are zero there (orders not counted)
    fixed : constants that have a fixed number there (orders at a number, zero included)
    vanish : constants of the larger law that then no longer occur in it. Where there are any, the
        usual reference distributions of nested tests do not hold.
    redundant : constants that no data could tell from others in the larger law; ``values`` holds
        one choice for them
    n_restrictions : q, constants of the larger law less those of the smaller
    edge : a nonnegative constant is at zero, the edge of its range
    """

    values: Mapping[str, sympy.Expr]
    zero: tuple[str, ...]
    fixed: Mapping[str, sympy.Expr]
    vanish: tuple[str, ...]
    n_restrictions: int
    edge: bool
    redundant: tuple[str, ...] = ()

    @property
    def inside(self) -> bool:
        """Reached at interior values of all constants, none of which vanishes."""
        return not self.edge and not self.vanish

    def words(self) -> str:
        """The restriction, such as ``K_B = 0`` or ``a = 1/Ki, b = 1/Ki``."""
        renamed = [v for v in self.values.values() if v.is_Symbol]
        said = []
        for name, value in self.values.items():
            if value.is_Symbol and renamed.count(value) == 1:
                continue
            if name in self.redundant:
                continue
            said.append(f"{name} = {plain(value)}")
        if self.vanish:
            said.append(f"{', '.join(self.vanish)} without effect")
        return ", ".join(said) + _other_side(self.values)


@dataclass(frozen=True, slots=True)
class NotProven:
    """No nesting was found; ``exhaustive`` where every case was followed to its end."""

    reason: str
    exhaustive: bool


@dataclass(frozen=True, slots=True, eq=False)
class Substitution:
    """Two laws are the same: constants of each in terms of those of the other."""

    a_from_b: Mapping[str, sympy.Expr]
    b_from_a: Mapping[str, sympy.Expr]

    def words(self) -> str:
        """Such as ``k = Vm, K_A = 1/Km``."""
        said = [f"{n} = {plain(v)}" for n, v in self.a_from_b.items() if plain(v) != n]
        return ", ".join(said) + _other_side(self.a_from_b)


def _other_side(values: Mapping[str, sympy.Expr]) -> str:
    """A note where one name stands for a constant of each law."""
    renamed = {n for n, v in values.items() if plain(v) != n}
    related = {s.name for n in renamed for s in values[n].free_symbols}
    if related & renamed:
        return " (right of =: constants of the other law)"
    return ""


def same_law(
    a: Sequence[sympy.Expr],
    b: Sequence[sympy.Expr],
    constants_a: Sequence[Constant],
    constants_b: Sequence[Constant],
) -> Substitution | None:
    """The change of constants that turns law ``a`` into law ``b``, or None if not proven.

    The laws are the same when each is a case of the other. Arguments as for `examine`.
    """
    there = nested(a, b, constants_a, constants_b)
    if there is None:
        return None
    back = nested(b, a, constants_b, constants_a)
    if back is None:
        return None
    return Substitution(a_from_b=back.values, b_from_a=there.values)


def nested(
    smaller: Sequence[sympy.Expr],
    larger: Sequence[sympy.Expr],
    constants_smaller: Sequence[Constant],
    constants_larger: Sequence[Constant],
) -> Nesting | None:
    """How ``smaller`` is a case of ``larger``, or None if that is not proven. See `examine`."""
    found = examine(smaller, larger, constants_smaller, constants_larger)
    return found if isinstance(found, Nesting) else None


def examine(
    smaller: Sequence[sympy.Expr],
    larger: Sequence[sympy.Expr],
    constants_smaller: Sequence[Constant],
    constants_larger: Sequence[Constant],
) -> Nesting | NotProven:
    """How ``smaller`` is a case of ``larger``, or why that is not proven.

    Parameters
    ----------
    smaller, larger : the observed expressions of each law (one rate, or one for each observed
        species), in the same order and in the same symbols of species
    constants_smaller, constants_larger : the adjustable constants of each. The two laws may use
        one name for different things. A symbol that is neither here nor a species or measured
        quantity is a known number, shared by both laws.

    Returns
    -------
    Of several nestings, the one with the fewest constants that vanish, then with the fewest at
    zero, then with the constants at zero that come first in ``constants_larger``.
    """
    if len(smaller) != len(larger):
        raise ValueError("the two laws must have the same number of expressions")
    if sum(sympy.count_ops(e) for e in (*smaller, *larger)) > _MOST_OPERATIONS:
        return NotProven("the laws are too large to compare", exhaustive=False)
    case = _Case(smaller, larger, constants_smaller, constants_larger)
    progress = Progress()
    for choices in case.choices():
        best: Nesting | None = None
        for choice in choices:
            for found in case.solve(choice, progress):
                if best is None or case.rank(found) < case.rank(best):
                    best = found
            if best is not None and best.inside:
                return best
        if best is not None:
            return best
    if progress.dropped:
        return NotProven(progress.dropped[0], exhaustive=False)
    said = "no finite values >= 0 of the constants of the larger law give the smaller one"
    return NotProven(said, exhaustive=not case.held)


Choice = dict[sympy.Symbol, sympy.Expr]


class _Case:
    """Two laws being compared; the larger law's constants made unlike any other symbol."""

    def __init__(
        self,
        smaller: Sequence[sympy.Expr],
        larger: Sequence[sympy.Expr],
        constants_smaller: Sequence[Constant],
        constants_larger: Sequence[Constant],
    ) -> None:
        self.smaller = list(smaller)
        self.small = {c.symbol for c in constants_smaller}
        self.names = {}  # the unlike symbol -> the constant's name
        rename = {}
        for c in constants_larger:
            positive = bool(c.symbol.is_nonnegative)
            unlike = sympy.Dummy(c.name, **({"nonnegative": True} if positive else {"real": True}))
            rename[c.symbol] = unlike
            self.names[unlike] = c.name
        self.larger = [e.xreplace(rename) for e in larger]
        occurring = frozenset().union(*(e.free_symbols for e in self.larger))
        self.unknown = [s for s in rename.values() if s in occurring]
        self.n_restrictions = len(constants_larger) - len(constants_smaller)
        self.held = self._held()

    def _held(self) -> list[sympy.Symbol]:
        """Unknowns that stand in exponents or functions, where their values must be tried."""
        found: set[sympy.Symbol] = set()
        for e in self.larger:
            for piece in e.atoms(sympy.Pow, sympy.Function):
                if piece.is_Pow and piece.exp.is_Integer and piece.base is not sympy.E:
                    continue
                if piece.is_Pow and piece.exp.is_Rational and piece.base.is_Symbol:
                    continue
                inside = piece.exp if piece.is_Pow and not piece.exp.is_Rational else piece
                found |= inside.free_symbols
        return [s for s in self.unknown if s in found]

    def choices(self) -> Iterator[list[Choice]]:
        """Lists of values to try for the held unknowns, the likely ones first."""
        if not self.held:
            yield [{}]
            return
        likely = [self._likely(s) for s in self.held]
        for options in (
            likely,
            [self._wider(s, o) for s, o in zip(self.held, likely, strict=True)],
        ):
            if prod(len(o) for o in options) <= _MOST_CHOICES:
                yield [dict(zip(self.held, values, strict=True)) for values in product(*options)]

    def _likely(self, symbol: sympy.Symbol) -> list[sympy.Expr]:
        own = [s for s in self.small if s.name == symbol.name]
        if symbol.is_nonnegative:
            return [*own, *(s for s in self._held_small() if s not in own), sympy.Integer(0)]
        bases: set[sympy.Symbol] = set()
        for e in self.larger:
            for power in e.atoms(sympy.Pow):
                if symbol in power.exp.free_symbols:
                    bases |= power.base.free_symbols
        out: dict[sympy.Expr, None] = dict.fromkeys(own)
        for e in self.smaller:
            if e.free_symbols & bases:
                out[sympy.Integer(1)] = None
            for power in e.atoms(sympy.Pow):
                if power.base.free_symbols & bases:
                    for part in (power.exp, *power.exp.free_symbols):
                        if part.is_Rational or (part in self.small and not part.is_nonnegative):
                            out[part] = None
        out[sympy.Integer(0)] = None
        return list(out)

    def _wider(self, symbol: sympy.Symbol, likely: list[sympy.Expr]) -> list[sympy.Expr]:
        more = () if symbol.is_nonnegative else _USUAL_ORDERS
        return list(dict.fromkeys([*likely, *more]))

    def _held_small(self) -> list[sympy.Symbol]:
        found: set[sympy.Symbol] = set()
        for e in self.smaller:
            for piece in e.atoms(sympy.exp, sympy.log):
                found |= piece.free_symbols
            for piece in e.atoms(sympy.Pow):
                if piece.exp.is_Rational and not piece.exp.is_Integer and piece.base.is_Add:
                    found |= piece.free_symbols
        return sorted((s for s in found if s in self.small and s.is_nonnegative), key=str)

    def rank(self, found: Nesting) -> tuple[int, int, list[int]]:
        order = list(self.names.values())
        return len(found.vanish), len(found.zero), [order.index(n) for n in found.zero]

    def solve(self, choice: Choice, progress: Progress) -> Iterator[Nesting]:
        larger = [e.xreplace(choice) for e in self.larger]
        if any(e.has(sympy.zoo, sympy.nan, sympy.oo) for e in larger):
            return
        open_ = [s for s in self.unknown if s not in choice]
        try:
            trees = as_trees((*larger, *self.smaller), frozenset(open_))
        except NotRational as reason:
            progress.dropped.append(f"the larger law holds {reason}")
            return
        left = {s: i for i, s in enumerate(open_)}

        def ordering(key: Key) -> tuple[int, int, str]:
            if key[0] in left:
                return 0, left[key[0]], ""
            return (2 if self._varies(key) else 1), 0, str(key)

        variables = collect(trees, ordering)
        if max(n_terms(t) for t in trees) * len(variables.keys) > _MOST_EXPONENTS:
            progress.dropped.append("the laws are too large to compare")
            return
        try:
            fractions = [evaluate(t, variables) for t in trees]
        except ZeroDivisionError:
            return
        unknown = [base for base, _ in variables.keys if base in left]
        if len(set(unknown)) < len(unknown):
            progress.dropped.append("a constant stands with two different symbolic powers")
            return
        n = len(larger)
        system = _System(self, choice, variables, open_)
        yield from system.solve(fractions[:n], fractions[n:], progress)

    def without_effect(self, choice: Choice, zero: Sequence[str]) -> list[sympy.Symbol]:
        """Held unknowns that no longer occur once the constants in ``zero`` are zero."""
        if not choice or not zero:
            return []
        gone = {s: sympy.Integer(0) for s, name in self.names.items() if name in zero}
        left = frozenset().union(*(e.xreplace(gone).free_symbols for e in self.larger))
        return [s for s in choice if s not in left and s not in gone]

    def _varies(self, key: Key) -> bool:
        """Whether a variable changes from run to run: it holds a species or a quantity."""
        return any(s.name[0] in "[{" for s in key[0].free_symbols | key[1].free_symbols)


class _System:
    """The equations of one choice of orders, and the reading of their solutions."""

    def __init__(
        self, case: _Case, choice: Choice, variables: Variables, open_: list[sympy.Symbol]
    ) -> None:
        self.case = case
        self.choice = choice
        self.variables = variables
        self.unknown = [k[0] for k in variables.keys if k[0] in set(open_)]
        self.gone = [s for s in open_ if s not in self.unknown]
        constant = [k for k in variables.keys if not case._varies(k)]
        self.keys = constant  # unknowns first, then parameters
        self.signed = frozenset(
            i for i, (base, power) in enumerate(constant) if power == 1 and not base.is_nonnegative
        )
        self.ring = PolyRing([f"w{i}" for i in range(len(constant))] or ["w0"], ZZ, "lex")

    def by_species(self, poly: Any) -> list[Any]:
        """The coefficients of a polynomial in what varies, in the ring of the constants."""
        n = len(self.keys)
        found: dict[Any, dict[Any, Any]] = {}
        for monomial, c in poly.items():
            constant = monomial[:n] if n else (0,)
            found.setdefault(monomial[n:], {})[constant] = c
        return [self.ring.from_dict(terms) for terms in found.values()]

    def solve(self, larger: list[Any], smaller: list[Any], progress: Progress) -> Iterator[Nesting]:
        equations = []
        for one, other in zip(larger, smaller, strict=True):
            work = len(one.numer) * len(other.denom) + len(one.denom) * len(other.numer)
            if work > _MOST_PRODUCTS:
                progress.dropped.append("the laws are too large to compare")
                return
            equations += self.by_species(one.numer * other.denom - other.numer * one.denom)
        bottoms = [self.by_species(one.denom) for one in larger]
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
            if out[name] == 0 and symbol.is_nonnegative and name not in redundant:
                zero.append(name)
        vanish = [case.names[self.unknown[i]] for i in free if i not in tied]
        vanish += [case.names[s] for s in self.gone]
        for symbol in case.without_effect(self.choice, zero):
            vanish.append(case.names[symbol])
            out.pop(case.names[symbol])
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
