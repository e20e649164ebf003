"""Two laws made comparable: one ring for both, and values to try for constants in exponents."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import prod
from typing import Any

import sympy

from discrim.ratelaw.adjoined import (
    Root,
    TooManyRoots,
    implicit_system,
    irreducible,
    quadratic,
    with_balances,
    without_roots,
)
from discrim.ratelaw.loglinear import Log
from discrim.ratelaw.model import Constant
from discrim.ratelaw.polynomials import (
    Key,
    NotRational,
    Variables,
    as_trees,
    collect,
    n_terms,
    ratio,
    reduced,
)
from discrim.ratelaw.relation import Nesting
from discrim.ratelaw.shifts import factors_that_fit
from discrim.ratelaw.solve import Progress
from discrim.ratelaw.terms import Layout, log_of_number

_USUAL_ORDERS = tuple(sympy.Rational(p, q) for p, q in ((0, 1), (1, 2), (1, 1), (2, 1), (-1, 1)))
_MOST_CHOICES = 64  # combinations of values of orders that are tried
_MOST_OF_A_ROOT = 80  # terms of a law that is squared
_MOST_EXPONENTS = 60_000  # terms of a law times variables; about a second of work

Choice = dict[sympy.Symbol, sympy.Expr]


@dataclass(frozen=True, slots=True, eq=False)
class Prepared:
    """Both laws as polynomials for one choice of the constants in exponents.

    Attributes
    ----------
    open_ : unknowns without a chosen value
    unknown : those that occur, in the order of the first generators of the ring
    larger, smaller : for each expression a tuple of polynomials: (numerator, denominator); the
        coefficients of an equation of second degree; or a balance, alone
    rational : all tuples are (numerator, denominator)
    independent : no product of powers or sum relates the variables, for generic values of the
        constants of the smaller law, so that comparing coefficients loses nothing
    """

    choice: Choice
    variables: Variables
    open_: list[sympy.Symbol]
    unknown: list[sympy.Symbol]
    larger: list[tuple[Any, ...]]
    smaller: list[tuple[Any, ...]]
    layout: Layout
    rational: bool
    independent: bool


class Case:
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
        self.as_given = list(self.larger), list(self.smaller)
        self.trouble = ""
        self.n_balances = 0
        self.scales: list[sympy.Symbol] = []  # of the unknowns of balances; no constants
        self.roots_larger: list[Root | None] = [None] * len(self.larger)
        self.roots_smaller: list[Root | None] = [None] * len(self.smaller)
        try:
            self._adjoin()
        except TooManyRoots as reason:
            self.trouble = f"the laws hold {reason}"
        occurring = frozenset().union(*(e.free_symbols for e in self._whole_larger()))
        self.unknown = [*self.scales, *(s for s in rename.values() if s in occurring)]
        self.n_restrictions = len(constants_larger) - len(constants_smaller)
        self.held = self._held()

    def _adjoin(self) -> None:
        """Roots of sums, and values that only balances fix, replaced by symbols."""
        ours, theirs = implicit_system(self.larger), implicit_system(self.smaller)
        if (ours is None) != (theirs is None):
            raise TooManyRoots("balances without a closed form in one law only")
        if ours is not None and theirs is not None:
            if len(ours[0]) != len(theirs[0]):
                raise TooManyRoots("balances in different numbers")
            names = [z.name for z in theirs[0]]
            here = [z.name for z in ours[0]]
            by_name = len(set(names)) == len(names) and sorted(names) == sorted(here)
            order = [names.index(n) for n in here] if by_name else list(range(len(here)))
            self.n_balances = len(here)
            self.scales = [sympy.Dummy(f"scale {n}", nonnegative=True) for n in here]
            self.larger = with_balances(self.larger, ours, order, self.scales)
            self.smaller = with_balances(self.smaller, theirs, list(range(len(here))))
        for exprs, roots, side in (
            (self.larger, "roots_larger", "l"),
            (self.smaller, "roots_smaller", "s"),
        ):
            found = [without_roots(e, f"{side}{i}") for i, e in enumerate(exprs)]
            exprs[:] = [e for e, _ in found]
            setattr(self, roots, [r for _, r in found])

    def _whole_larger(self) -> list[sympy.Expr]:
        return [*self.larger, *(r.radicand for r in self.roots_larger if r is not None)]

    def _held(self) -> list[sympy.Symbol]:
        """Unknowns that stand in exponents or functions, where their values must be tried."""
        found: set[sympy.Symbol] = set()
        for e in self._whole_larger():
            for piece in e.atoms(sympy.Pow, sympy.Function):
                if piece.is_Pow and piece.exp.is_Integer and piece.base is not sympy.E:
                    continue
                if piece.is_Pow and piece.exp.is_Rational and piece.base.is_Symbol:
                    continue
                inside = piece.exp if piece.is_Pow and not piece.exp.is_Rational else piece
                found |= inside.free_symbols
        return [s for s in self.unknown if s in found]

    def by_name(self) -> dict[str, sympy.Expr] | None:
        """Values, if the laws are written alike with constants of the same names, others at zero.

        For laws that are too large or too involved for anything else.
        """
        own = {s.name: s for s in self.small}
        values = {s: own.get(name, sympy.Integer(0)) for s, name in self.names.items()}
        values |= dict.fromkeys(self.scales, sympy.Integer(1))
        if any(v == 0 and not s.is_nonnegative for s, v in values.items()):
            return None
        for one, other, root, other_root in zip(
            self.larger, self.smaller, self.roots_larger, self.roots_smaller, strict=True
        ):
            if (root is None) != (other_root is None):
                return None
            here = one.xreplace(values)
            if root is not None and other_root is not None:
                if root.radicand.xreplace(values) != other_root.radicand:
                    return None
                here = here.xreplace({root.symbol: other_root.symbol})
            if here != other:
                return None
        return {name: values[s] for s, name in self.names.items() if s in self.unknown}

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

    def rank(self, found: Nesting) -> tuple[int, int, int, list[int]]:
        order = list(self.names.values())
        zero = [order.index(n) for n in found.zero]
        return len(found.infinite), len(found.zero), len(found.vanish), zero

    def prepare(self, choice: Choice, progress: Progress) -> Prepared | None:
        """The laws as polynomials; None, with the reason in ``progress``, where they are not."""
        if self.trouble:
            progress.dropped.append(self.trouble)
            return None
        larger = [e.xreplace(choice) for e in self.larger]
        roots = [*self.roots_larger, *self.roots_smaller]
        inside = [r.radicand.xreplace(choice) for r in roots if r is not None]
        if any(e.has(sympy.zoo, sympy.nan, sympy.oo) for e in (*larger, *inside)):
            return None
        open_ = [s for s in self.unknown if s not in choice]
        try:
            trees = as_trees((*larger, *self.smaller, *inside), frozenset(open_))
        except NotRational as reason:
            progress.dropped.append(f"the larger law holds {reason}")
            return None
        left = {s: i for i, s in enumerate(open_)}

        def ordering(key: Key) -> tuple[int, int, str]:
            if key[0] in left:
                return 0, left[key[0]], ""
            return (2 if varies(key) else 1), 0, str(key)

        variables = collect(trees, ordering)
        if max(n_terms(t) for t in trees) * len(variables.keys) > _MOST_EXPONENTS:
            progress.dropped.append("the laws are too large to compare")
            return None
        try:
            pairs = [reduced(*ratio(t, variables)) for t in trees]
        except ZeroDivisionError:
            return None
        unknown = [base for base, _ in variables.keys if base in left]
        if len(set(unknown)) < len(unknown):
            progress.dropped.append("a constant stands with two different symbolic powers")
            return None
        keys = variables.keys
        layout = Layout(
            n_unknown=len(unknown),
            n_parameter=sum(not varies(k) for k in keys) - len(unknown),
            n=max(len(keys), 1),
            signed=frozenset(
                i for i, (base, power) in enumerate(keys) if power == 1 and not base.is_nonnegative
            ),
            numbers={
                i: _log_of_power(key, variables.roots[key])
                for i, key in enumerate(keys)
                if _is_number(key)
            },
        )
        independent = (
            _independent([k for k in keys[len(unknown) :] if not _is_number(k)])
            and not self.n_balances
        )
        tuples = self._tuples(pairs, roots, keys, progress)
        if tuples is None:
            return None
        ours, theirs = tuples
        rational = not any(roots) and not self.n_balances
        for i, (one, other) in enumerate(zip(ours, theirs, strict=True)):
            if len(one) == 3 and len(other) == 2:
                # a limit in which the equation is of first degree; others are not looked for
                theirs[i] = (other[1].ring.zero, other[1], -other[0])
                independent = independent and not _could_divide(other[1], one[0], layout)
            elif len(one) == 2 and len(other) == 3:
                amounts = range(layout.n_constant, layout.n)
                if not irreducible((other[0], other[1], other[2]), amounts):
                    progress.dropped.append("a root in the smaller law only")
                    return None
                ours[i] = (one[1].ring.zero, one[1], -one[0])
            elif len(other) == 3:
                amounts = range(layout.n_constant, layout.n)
                independent = independent and irreducible((other[0], other[1], other[2]), amounts)
        return Prepared(
            choice, variables, open_, unknown, ours, theirs, layout, rational, independent
        )

    def _tuples(
        self,
        pairs: list[tuple[Any, Any]],
        roots: list[Root | None],
        keys: tuple[Key, ...],
        progress: Progress,
    ) -> tuple[list[tuple[Any, ...]], list[tuple[Any, ...]]] | None:
        """Each expression as a tuple of polynomials; radicands come last in ``pairs``."""
        n = len(self.larger)
        radicands = iter(pairs[2 * n :])
        out: list[tuple[Any, ...]] = []
        for k, (pair, root) in enumerate(zip(pairs[: 2 * n], roots, strict=True)):
            if k % n >= n - self.n_balances:
                if root is not None:
                    progress.dropped.append("a root in a balance")
                    return None
                out.append((pair[0],))
                continue
            if root is None:
                out.append(pair)
                continue
            if len(pair[0]) + len(pair[1]) > _MOST_OF_A_ROOT:
                progress.dropped.append("the laws are too large to compare")
                return None
            generator = keys.index((root.symbol, sympy.Integer(1)))
            out.append(quadratic(*pair, next(radicands), generator))
        return out[:n], out[n:]

    def without_effect(self, choice: Choice, zero: Sequence[str]) -> list[sympy.Symbol]:
        """Held unknowns that no longer occur once the constants in ``zero`` are zero."""
        if not choice or not zero:
            return []
        gone = {s: sympy.Integer(0) for s, name in self.names.items() if name in zero}
        left = frozenset().union(*(e.xreplace(gone).free_symbols for e in self._whole_larger()))
        return [s for s in choice if s not in left and s not in gone]


def varies(key: Key) -> bool:
    """Whether a variable changes from run to run: it holds a species or a quantity."""
    return any(s.name[0] in "[{" for s in key[0].free_symbols | key[1].free_symbols)


def shown(symbol: Any) -> str:
    """An amount or quantity as users write it: [A], T."""
    return str(symbol.name).strip("{}")


def _is_number(key: Key) -> bool:
    """A power of a whole number, such as 10^(1/2) or 10^4.62."""
    base, power = key
    return bool(base.is_Integer and base > 0 and (power.is_Rational or power.is_Float))


def _log_of_power(key: Key, root: int) -> Log:
    power = Fraction(str(key[1])) / root
    return {atom: e * power for atom, e in log_of_number(int(key[0])).items()}


def _could_divide(poly: Any, by_terms_of: Any, layout: Layout) -> bool:
    """Whether a multiple of ``poly`` might have only monomials in the amounts of the other."""
    split = layout.n_constant
    sets, complete, _ = factors_that_fit(
        [{m[split:] for m in by_terms_of}], [{m[split:] for m in poly}]
    )
    return bool(sets) or not complete


def _independent(keys: Sequence[Key]) -> bool:
    """Whether the variables are algebraically independent, for generic constants.

    Symbols are; so are symbols, or one number, to different symbolic orders; so is a function of
    symbols that stand nowhere else.
    """
    for key in keys:
        base, power = key
        if base.is_Symbol and (power == 1 or (power.is_Symbol and not varies((power, power)))):
            continue
        others = [k for k in keys if k != key]
        alone = not any(b.is_number and p == power for b, p in others)
        if base.is_positive and base.is_number and power.is_Symbol and alone:
            continue
        own = base.free_symbols | power.free_symbols
        if not own or own & set().union(*(b.free_symbols | p.free_symbols for b, p in others)):
            return False
    return True
