"""Records of how two rate laws are related, and the words for it."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import sympy

from discrim.ratelaw.printing import plain


@dataclass(frozen=True, slots=True, eq=False)
class Nesting:
    """The smaller law is the larger one at certain values of its constants, or a limit of it.

    Attributes
    ----------
    values : for each constant of the larger law that is determined, its value, an expression in
        the constants of the smaller law (``oo`` where it is infinite)
    zero : constants of the larger law that are zero there (orders not counted)
    fixed : constants that have a fixed number there (orders at a number, zero included)
    vanish : constants of the larger law that then no longer occur in it. Where there are any, the
        usual reference distributions of nested tests do not hold.
    redundant : constants that no data could tell from others in the larger law; ``values`` holds
        one choice for them
    n_restrictions : q, constants of the larger law less those of the smaller
    edge : a nonnegative constant is at an end of its range: zero or infinite
    infinite : constants of the larger law that are infinite there
    kept : products of powers of constants at zero or infinity that keep a finite value:
        (product in constants of the larger law, value in those of the smaller)
    along : for a limit, the way there: (b, p) for each constant that is b*t^p, t -> infinity; b in
        constants of the smaller law. Empty where plain values do.
    """

    values: Mapping[str, sympy.Expr]
    zero: tuple[str, ...]
    fixed: Mapping[str, sympy.Expr]
    vanish: tuple[str, ...]
    n_restrictions: int
    edge: bool
    redundant: tuple[str, ...] = ()
    infinite: tuple[str, ...] = ()
    kept: tuple[tuple[sympy.Expr, sympy.Expr], ...] = ()
    along: Mapping[str, tuple[sympy.Expr, sympy.Rational]] = field(default_factory=dict)

    @property
    def inside(self) -> bool:
        """Reached at interior values of all constants, none of which vanishes."""
        return not self.edge and not self.vanish

    def words(self) -> str:
        """The restriction: ``K_B = 0``, ``a = 1/Ki, b = 1/Ki``, ``k = infinite, K = 0 with
        K*k = k_1``."""
        said = []
        for name, value in self.values.items():
            if value.is_Symbol and self._only(value):
                continue
            if name in self.redundant:
                continue
            said.append(f"{name} = {'infinite' if value is sympy.oo else plain(value)}")
        out = ", ".join(said)
        if self.kept:
            out += " with " + ", ".join(f"{plain(a)} = {plain(b)}" for a, b in self.kept)
        if self.vanish:
            out += f"{', ' if out else ''}{', '.join(self.vanish)} without effect"
        return out + _other_side(self.values, self.kept)

    def _only(self, symbol: sympy.Symbol) -> bool:
        """A constant that merely has another name in the other law."""
        return list(self.values.values()).count(symbol) == 1


@dataclass(frozen=True, slots=True)
class Neither:
    """It is proven that the smaller law is no case of the larger one: at no values of its
    constants, zero and infinity included. ``reason`` speaks of the smaller law as "it"."""

    reason: str


@dataclass(frozen=True, slots=True)
class NotProven:
    """No nesting was found; ``exhaustive`` where every case of finite constants was followed to
    its end."""

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


def _other_side(
    values: Mapping[str, sympy.Expr], kept: Iterable[tuple[sympy.Expr, sympy.Expr]] = ()
) -> str:
    """A note where one name stands for a constant of each law."""
    renamed = {n for n, v in values.items() if plain(v) != n}
    renamed |= {s.name for a, _ in kept for s in a.free_symbols}
    related = {s.name for n in renamed if n in values for s in values[n].free_symbols}
    related |= {s.name for _, b in kept for s in b.free_symbols}
    if related & renamed:
        return " (right of =: constants of the other law)"
    return ""
