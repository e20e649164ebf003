"""A law without its reverse reaction, or without the reverse of one of its steps.

The reverse reaction is what is subtracted. Where constants belong to it alone, the law without it
is the case in which they are zero; an equilibrium constant that divides it is put as its inverse, so
that the case is at zero too. Where no free constant belongs to it alone (its equilibrium constant is
known), the law without it is another law, not a case.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from typing import Any

import sympy

from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.knockout import KnockOut, KnockOutKind, by_constants
from discrim.ratelaw.limits import forward_part, is_difference
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw, constant_symbol


@dataclass(frozen=True, slots=True, eq=False)
class Reverse:
    """A law and its reverse part.

    ``law``: the same law, constants in ``inverted`` (old name -> new name) put as their inverses;
    ``knock_out`` None where the reverse part cannot be taken out, ``note`` then says why.
    """

    law: RateLaw
    inverted: Mapping[str, str]
    knock_out: KnockOut | None
    note: str = ""


def reverse_of(law: RateLaw, step: str, about: str, given: Collection[str] = ()) -> Reverse | None:
    """The reverse part of a law (or of ``step`` in it), None where the law has none.

    ``about`` names it in the knock-out; ``given`` are constants that the study gives the value of.
    """
    return _of_step(law, step, about, given) if step else _overall(law, about, given)


def _overall(law: RateLaw, about: str, given: Collection[str]) -> Reverse | None:
    if not is_difference(law.rate) and not law.rate.has(ImplicitValue):
        return None
    forward = forward_part(law.rate)
    if forward is None:
        if not is_difference(law.rate):
            return None
        words = "the reverse reaction cannot be told apart from the form of its law"
        return Reverse(law, {}, None, words)
    names = [
        c.name
        for c in law.constants
        if c.symbol in law.rate.free_symbols
        and c.symbol not in forward.free_symbols
        and c.name not in given
    ]
    found = _zero(law, names, about)
    if found is not None and found.knock_out is not None and _same(found.knock_out.rate, forward):
        return found
    production = {}
    for species, made in law.production.items():
        times = sympy.cancel(made / law.rate)
        if not times.is_number:
            words = "the reverse reaction has not the same part in what is made of each species"
            return Reverse(law, {}, None, words)
        production[species] = times * forward
    ko = KnockOut(about, KnockOutKind.FACTOR, forward, production, (), ())
    return Reverse(law, {}, ko)


def _of_step(law: RateLaw, step: str, about: str, given: Collection[str]) -> Reverse | None:
    if step not in law.steps:
        return None
    own = constant_symbol(f"k_rev_{step}")
    names: list[str] = []
    together: list[str] = []
    for c in law.constants:
        if c.name == own.name:
            names.append(c.name)
        elif c.definition is not None and own in c.definition.free_symbols:
            gone = c.definition.subs(own, 0)
            (names if gone == 0 or gone.is_infinite else together).append(c.name)
    if not names:
        words = f"the step {step} is at equilibrium in it, so both directions are in one constant"
        if together:
            words = (
                f"the reverse of {step} is in it only together with other steps, in "
                f"{', '.join(together)}: no rate tells it apart"
            )
        return Reverse(law, {}, None, words)
    free = [n for n in names if n not in given]
    if not free:
        words = f"{', '.join(names)} is given in the study, so these runs are not asked about it"
        return Reverse(law, {}, None, words)
    found = _zero(law, free, about)
    return found or Reverse(law, {}, None, f"the reverse of {step} cannot be taken out of its law")


def _zero(law: RateLaw, names: list[str], about: str) -> Reverse | None:
    """Constants set to zero, put as their inverses where they divide."""
    if not names:
        return None
    ko = by_constants(law, about, names)
    if ko is not None:
        return Reverse(law, {}, ko)
    inverted = {}
    for name in names:
        symbol = law.constant(name).symbol
        gone = law.rate.subs(symbol, 0)
        if gone.has(sympy.zoo, sympy.oo, -sympy.oo, sympy.nan):
            inverted[name] = f"1/{name}"
    again = _inverted(law, inverted)
    ko = by_constants(again, about, [inverted.get(n, n) for n in names])
    return None if ko is None else Reverse(again, inverted, ko)


def _inverted(law: RateLaw, inverted: Mapping[str, str]) -> RateLaw:
    swap = {}
    constants = []
    for c in law.constants:
        if c.name not in inverted:
            constants.append(c)
            continue
        new = constant_symbol(inverted[c.name])
        swap[c.symbol] = 1 / new
        constants.append(Constant(inverted[c.name], new, ConstantKind.EQUILIBRIUM))
    return replace(
        law,
        rate=law.rate.subs(swap),
        production={k: e.subs(swap) for k, e in law.production.items()},
        constants=tuple(constants),
        pathways=(),
    )


def _same(a: Any, b: Any) -> bool:
    return bool(a == b or sympy.cancel(sympy.together(a - b)) == 0)
