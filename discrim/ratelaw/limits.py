"""Limiting cases of a rate law: what it becomes at low and high amounts, and apparent orders.

At low [A] a law r tends to c*[A]^n, at high [A] to another; n is the apparent order there and
d ln r / d ln [A] in between. Both are exact. Limits hold the other amounts fixed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import sympy

from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.leading import NoLeadingTerm, leading, sign_of, tidy
from discrim.ratelaw.model import RateLaw, amount

LOW, HIGH = "low", "high"
_LONG = 14  # terms of an apparent order that is still read at a glance
_MOST_OPERATIONS = 250_000  # of a law times its limits; a few seconds of work


@dataclass(frozen=True, slots=True, eq=False)
class Limit:
    """What a law becomes at the end of the range of one amount.

    Attributes
    ----------
    species : whose amount goes to zero or to infinity
    where : "low" or "high"
    order : the apparent order there (a rational number, or a sympy expression of orders); None
        where it is not given
    law : the leading law, a sympy expression; None where it is not given
    forward : whether it is the limit of the forward part of a reversible law
    words : "first order in A", or why there is no limit
    reverse : whether the rate is negative there, so that the reverse reaction is what is left
    exact : whether the limit is the law itself, so that it holds at any amount
    """

    species: str
    where: str
    order: Any
    law: Any
    forward: bool
    words: str
    reverse: bool = False
    exact: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class ApparentOrder:
    """d ln r / d ln [species] at any amounts, of the forward part of a reversible law."""

    species: str
    order: Any
    forward: bool


def limits_of(law: RateLaw) -> tuple[Limit, ...]:
    """Low and high limits for each species of the law, in its order.

    A reversible law, whose rate is a difference, gets the limits of its forward part first and
    then those of the net rate.
    """
    ahead = _ahead(law)
    out: list[Limit] = []
    for rate, forward in ((ahead, True), (law.rate, False)):
        if rate is None:
            continue
        held = rate.free_symbols
        species_of = [s for s in law.species if amount(s) in held]
        if 2 * len(species_of) * rate.count_ops() > _MOST_OPERATIONS:
            why = "not given: the law is too long"
            ends = [(s, where) for s in species_of for where in (LOW, HIGH)]
            out += [Limit(s, where, None, None, forward, why) for s, where in ends]
            continue
        for species in species_of:
            out += [limit(rate, species, where, forward=forward) for where in (LOW, HIGH)]
    return tuple(out)


def apparent_orders(law: RateLaw) -> tuple[ApparentOrder, ...]:
    """The apparent order in each species where it is short and no plain number.

    A reversible law gets those of its forward part: near equilibrium the net rate has none.
    """
    ahead = _ahead(law)
    rate = law.rate if ahead is None else ahead
    if is_difference(rate):
        return ()
    out = []
    for species in law.species:
        order = apparent_order(rate, species)
        if order is not None and order.free_symbols:
            out.append(ApparentOrder(species, order, ahead is not None))
    return tuple(out)


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """One limit, or both ends where the law is the same there."""

    limits: tuple[Limit, ...]


def told(limits: Sequence[Limit]) -> tuple[Case, ...]:
    """The limits that are worth a line each: none twice, ends that are the same together.

    Of the net rate of a reversible law only those that differ from its forward part.
    """
    ahead = {(x.species, x.where): x for x in limits if x.forward}
    out: list[Case] = []
    for x in limits:
        if x.law is None:
            continue
        if not x.forward and (x.species, x.where) in ahead:
            other = ahead[x.species, x.where]
            if x.law == other.law:
                continue
        last = out[-1].limits[0] if out else None
        same = last is not None and (last.species, last.forward) == (x.species, x.forward)
        if same and last is not None and last.law == x.law:
            out[-1] = Case((last, x))
        else:
            out.append(Case((x,)))
    return tuple(out)


def _ahead(law: RateLaw) -> Any | None:
    return forward_part(law.rate) if law.steps else None


def limit(rate: Any, species: str, where: str, *, forward: bool = False) -> Limit:
    """The limit of ``rate`` as the amount of ``species`` goes to zero ("low") or infinity ("high").

    Never raises for a law: where there is no leading power, ``words`` say why.
    """
    x = amount(species)
    try:
        lead = leading(rate, x, high=where == HIGH)
    except NoLeadingTerm as why:
        return Limit(species, where, None, None, forward, f"not given: {why}")
    reduced = rate if lead.exact else tidy(lead.coefficient * x**lead.order)
    words, reverse = order_words(lead.order, species), sign_of(lead.coefficient) < 0
    if lead.positive:
        words += f" for {' and '.join(f'{s} > 0' for s in lead.positive)}"
    inner = sorted({v.unknown.name for v in reduced.atoms(ImplicitValue)})
    if inner and not lead.exact:
        words += f", {' and '.join(inner)} at the limit too"
    if reverse:
        words += ", net rate negative"
    return Limit(species, where, lead.order, reduced, forward, words, reverse, lead.exact)


def order_words(order: Any, species: str) -> str:
    """An order as it is said: "zero order in A", "first order in A", "order 1/2 in A"."""
    named = {0: "zero order", 1: "first order", 2: "second order", 3: "third order"}
    if order.is_Integer and int(order) in named:
        return f"{named[int(order)]} in {species}"
    return f"order {order_text(order)} in {species}"


def order_text(order: Any) -> str:
    """An order as text: 1, -1/2, n; fractions, as orders are written."""
    if order.is_Rational:
        return str(order)
    from discrim.ratelaw.printing import plain

    return plain(order)


def forward_part(rate: Any) -> Any | None:
    """The law with the terms of the reverse reaction left out, or None when nothing is subtracted.

    None also where the law is no sum of products with one difference each, so that what belongs to
    the forward reaction cannot be told from the form.
    """
    parts, changed = [], False
    for term in sympy.Add.make_args(rate):
        number, rest = term.as_coeff_Mul()
        factors = list(sympy.Mul.make_args(rest))
        mixed = [i for i, f in enumerate(factors) if _is_mixed(f)]
        if any(_has_difference(f) for i, f in enumerate(factors) if i not in mixed):
            return None
        if len(mixed) > 1:
            return None
        if mixed:
            (i,) = mixed
            keep = 1 if number > 0 else -1
            terms = [t for t in factors[i].args if _minus(t) == (keep < 0)]
            if not terms:
                continue
            factors[i] = sympy.Add(*terms)
            parts.append(sympy.Mul(number, *factors))
            changed = True
        elif number < 0:
            changed = True
        else:
            parts.append(term)
    return sympy.Add(*parts) if changed and parts else None


def _minus(term: Any) -> bool:
    return bool(term.as_coeff_Mul()[0] < 0)


def _is_mixed(e: Any) -> bool:
    return bool(e.is_Add) and len({_minus(t) for t in e.args}) == 2


def is_difference(rate: Any) -> bool:
    """Whether something is subtracted anywhere in a law."""
    return any(_minus(t) or _has_difference(t) for t in sympy.Add.make_args(rate))


def _has_difference(e: Any) -> bool:
    return any(_is_mixed(a) for a in sympy.preorder_traversal(e) if a.is_Add)


def apparent_order(rate: Any, species: str) -> Any | None:
    """d ln r / d ln [X] as an expression, or None where it is not short.

    For a rate c * X^a * S1^p1 * S2^p2 ... with sums S of monomials: a + sum p X S'/S, over one
    denominator when there is one sum.
    """
    x = amount(species)
    order: Any = sympy.Integer(0)
    sums: list[tuple[Any, Any]] = []
    for factor in sympy.Mul.make_args(rate):
        base, power = (factor.base, factor.exp) if factor.is_Pow else (factor, sympy.Integer(1))
        if x not in factor.free_symbols:
            continue
        if base == x and x not in power.free_symbols:
            order += power
        elif base.is_Add and x not in power.free_symbols:
            sums.append((base, power))
        else:
            return None
    if sum(len(s.args) for s, _ in sums) > _LONG:
        return None
    if not sums:
        return order
    parts = []
    for s, p in sums:
        weights = _weights(s, x)
        if weights is None:
            return None
        over = order if len(sums) == 1 else sympy.Integer(0)
        top = sympy.Add(*((over + p * n) * t for t, n in weights.items()))
        parts.append(tidy(top / s))
    return parts[0] if len(sums) == 1 else sympy.Add(order, *parts)


def _weights(total: Any, x: sympy.Symbol) -> Mapping[Any, Any] | None:
    """Each term of a sum of monomials with its power of x."""
    out = {}
    for term in total.args:
        n: Any = sympy.Integer(0)
        for factor in sympy.Mul.make_args(term):
            base, power = factor.as_base_exp()
            if base == x:
                n += power
            elif x in factor.free_symbols:
                return None
        if x in n.free_symbols:
            return None
        out[term] = n
    return out
