"""A law without one of its species, pathways or steps.

There are three ways to be in a law, each with its own knock-out: an additive pathway or adsorption
term (a constant to zero: nested, on the edge), an order (to zero: nested, inside), and a factor of
every pathway (its amount absorbed into the constants: not nested).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from enum import Enum
from typing import Any

import sympy

from discrim.ratelaw.implicit import named
from discrim.ratelaw.model import ConstantKind, RateLaw, amount
from discrim.ratelaw.settle import settled


class KnockOutKind(Enum):
    ZERO = "a constant set to zero"
    VANISH = "a constant set to zero, with which others vanish"
    SEVERAL = "several constants set to zero together"
    ORDER = "an order set to zero"
    FACTOR = "its amount absorbed into the constants"


@dataclass(frozen=True, slots=True, eq=False)
class KnockOut:
    """``law`` without ``about``.

    Attributes
    ----------
    rate, production : of the reduced law, in the constants of the full one
    psi : constants that are set to zero (for FACTOR none)
    vanish : other constants that no longer occur then
    """

    about: str
    kind: KnockOutKind
    rate: Any
    production: Mapping[str, Any]
    psi: tuple[str, ...]
    vanish: tuple[str, ...]

    def reduced(self, law: RateLaw) -> RateLaw:
        """The reduced law as a record of its own."""
        used: set[Any] = set(self.rate.free_symbols)
        for e in self.production.values():
            used |= e.free_symbols
        return replace(
            law,
            name=f"{law.name} without {self.about}",
            rate=self.rate,
            production=self.production,
            constants=tuple(c for c in law.constants if c.symbol in used),
            species=tuple(s for s in law.species if amount(s) in used),
            pathways=(),
        )


def contains(law: RateLaw, about: str) -> bool:
    """Whether the law depends on a species, or has a pathway or step, of this name."""
    if any(p.name == about for p in law.pathways) or about in law.steps:
        return True
    symbol = amount(about)
    return symbol in law.rate.free_symbols or any(
        symbol in e.free_symbols for e in law.production.values()
    )


def knock_out(law: RateLaw, about: str, typical: float) -> KnockOut | None:
    """The knock-out of a species or pathway, or None when the law does not contain it.

    ``typical`` is the amount at which a species that multiplies every pathway is absorbed into the
    constants (the geometric mean over the runs, in internal units).
    """
    if not contains(law, about):
        return None
    for pathway in law.pathways:
        if pathway.name == about:
            return by_constants(law, about, _owned(law, about))
    if about in law.steps:
        names = [
            c.name
            for c in law.constants
            if c.name in (f"k_{about}", f"k_rev_{about}", f"K_{about}")
        ]
        return by_constants(law, about, names) if names else None
    return _species(law, about, typical)


def _owned(law: RateLaw, name: str) -> list[str]:
    """Constants that occur in this pathway and in no other."""
    part = next(p.rate for p in law.pathways if p.name == name)
    elsewhere = set().union(*(p.rate.free_symbols for p in law.pathways if p.name != name))
    return [
        c.name for c in law.constants if c.symbol in part.free_symbols and c.symbol not in elsewhere
    ]


def by_constants(law: RateLaw, about: str, names: list[str]) -> KnockOut | None:
    """Set the constants ``names`` to zero; one of them alone where that is enough."""
    if not names:
        return None
    symbols = {c.name: c.symbol for c in law.constants}
    full = _set(law, {symbols[n]: 0 for n in names})
    if full is None:
        return None
    for n in names:
        one = _set(law, {symbols[n]: 0})
        if one is not None and _same(one, full):
            return _zeroed(law, about, (n,), one)
    return _zeroed(law, about, tuple(names), full)


def _species(law: RateLaw, about: str, typical: float) -> KnockOut | None:
    symbol = amount(about)
    orders = _orders_only(law, symbol)
    if orders:
        out = _set(law, dict.fromkeys(orders, 0))
        if out is not None:
            names = tuple(c.name for c in law.constants if c.symbol in orders)
            kind = KnockOutKind.ORDER if len(names) == 1 else KnockOutKind.SEVERAL
            return KnockOut(about, kind, out[0], out[1], names, ())
    gone = _set(law, {symbol: 0})
    if gone is not None and not _nothing(gone):
        left = gone[0].free_symbols.union(*(e.free_symbols for e in gone[1].values()))
        dropped = [
            c.name
            for c in law.constants
            if c.symbol not in left and c.kind is not ConstantKind.ORDER
        ]
        found = by_constants(law, about, dropped)
        if found is not None and _same((found.rate, found.production), gone):
            return found
        # an order belongs to a term that vanishes with its rate constant
    absorbed = _set(law, {symbol: sympy.Float(typical, 17)})
    if absorbed is None:
        return None
    return KnockOut(about, KnockOutKind.FACTOR, absorbed[0], absorbed[1], (), ())


def _zeroed(
    law: RateLaw, about: str, psi: tuple[str, ...], reduced: tuple[Any, Mapping[str, Any]]
) -> KnockOut:
    left = reduced[0].free_symbols.union(*(e.free_symbols for e in reduced[1].values()))
    vanish = tuple(c.name for c in law.constants if c.symbol not in left and c.name not in psi)
    kind = KnockOutKind.ZERO
    if len(psi) > 1:
        kind = KnockOutKind.SEVERAL
    elif vanish:
        kind = KnockOutKind.VANISH
    return KnockOut(about, kind, reduced[0], reduced[1], psi, vanish)


def _orders_only(law: RateLaw, symbol: Any) -> set[Any]:
    """The orders to which a species stands, if it stands in the law in no other way."""
    orders = {c.symbol for c in law.constants if c.kind is ConstantKind.ORDER}
    found: set[Any] = set()
    for e in (law.rate, *law.production.values()):
        if symbol not in e.free_symbols:
            continue
        stand_in: dict[Any, Any] = {}
        for k, power in enumerate(p for p in e.atoms(sympy.Pow) if symbol in p.base.free_symbols):
            if power.exp in orders and symbol not in power.exp.free_symbols:
                stand_in[power] = sympy.Symbol(f"_order{k}")
                found.add(power.exp)
            else:
                return set()
        if symbol in e.xreplace(stand_in).free_symbols:
            return set()
    return found


def _set(law: RateLaw, values: Mapping[Any, Any]) -> tuple[Any, dict[str, Any]] | None:
    """The law with symbols replaced; None when it is then not finite."""
    rate = settled(law.rate.subs(values))
    production = {k: settled(e.subs(values)) for k, e in law.production.items()}
    for e in (rate, *production.values()):
        if e.has(sympy.nan, sympy.zoo, sympy.oo, -sympy.oo):
            return None
    return rate, production


def _nothing(reduced: tuple[Any, Mapping[str, Any]]) -> bool:
    return reduced[0] == 0 and all(e == 0 for e in reduced[1].values())


def _same(a: tuple[Any, Mapping[str, Any]], b: tuple[Any, Mapping[str, Any]]) -> bool:
    def zero(e: Any) -> bool:
        return e == 0 or sympy.cancel(sympy.together(named(e)[0])) == 0

    return zero(a[0] - b[0]) and all(zero(a[1][k] - b[1][k]) for k in a[1])
