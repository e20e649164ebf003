"""A rate law given as a formula, without a mechanism behind it -> the record of a rate law."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import sympy

from discrim.errors import DiscrimError, Place
from discrim.mechanism.check import net
from discrim.mechanism.model import WrittenLaw
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import Constant, ConstantKind, Pathway, RateLaw, amount, quantity
from discrim.ratelaw.printing import plain

#: Conditions that a law in a file can hold; every other name in it is a constant of its own.
CONDITIONS = ("pH", "temperature", "catalyst")


def law_as_written(written: WrittenLaw) -> RateLaw:
    """The record of a law from a file, read without a study."""
    law = law_from_expression(
        written.name,
        written_expression(written, {word: quantity(word) for word in CONDITIONS}),
        overall=written_overall(written),
        place=written.place,
        text=written.text,
    )
    return replace(law, source=written.source)


def written_expression(written: WrittenLaw, conditions: Mapping[str, Any]) -> Any:
    """The expression of a law from a file; ``conditions`` are symbols for :data:`CONDITIONS`."""
    known = {word: conditions[word] for word in CONDITIONS if word in conditions}
    return parse_expression(written.text, written.place or Place(text=written.text), known)


def written_overall(written: WrittenLaw) -> dict[str, int] | None:
    """Net coefficient of each species in the reaction that the law is the rate of."""
    if written.overall is None:
        return None
    return {species.name: n for species, n in net(written.overall).items()}


def law_from_expression(
    name: str,
    expr: sympy.Expr,
    *,
    overall: Mapping[str, int] | None,
    place: Place | None,
    text: str = "",
) -> RateLaw:
    """The record of the law ``expr``.

    Parameters
    ----------
    name : name of the candidate
    expr : from :func:`discrim.ratelaw.expression.parse_expression`, derived quantities put in
    overall : net coefficient of each species in the overall equation, products positive; None
        where only the rate itself is observed, and then no production is given
    place, text : where and how the user wrote the law

    Returns
    -------
    Its constants in reading order: a constant is an order if its symbol may be negative (it stands
    in an exponent), a rate constant if every additive term that holds it is proportional to it,
    otherwise just a constant. Its pathways are the additive terms, named by their rate constant,
    if there are several and none is subtracted.

    Raises
    ------
    DiscrimError
        If nothing adjustable and no species stands in the law, or the overall equation is empty.
    """
    if not expr.free_symbols:
        raise DiscrimError(
            f"the law is the number {plain(expr)}",
            place=place,
            do="A rate law needs a constant, such as k in k*[A].",
        )
    changes = {s: n for s, n in (overall or {}).items() if n}
    if overall is not None and not changes:
        raise DiscrimError(
            "the overall equation changes no species",
            place=place,
            do='Write the reaction that the law is the rate of, as in "A -> P".',
        )
    constants = _constants(expr)
    species = [s.name[1:-1] for s in _in_reading_order(expr) if s.name.startswith("[")]
    conventions = ["The law is the rate of the reaction as a whole."]
    if changes:
        equation = _equation(changes)
        conventions = [
            f"The law is the rate r of {equation} as written: each species is produced at "
            "r times its coefficient, reactants negative."
        ]
    return RateLaw(
        name=name,
        rate=expr,
        production={s: n * expr for s, n in changes.items()},
        constants=constants,
        species=tuple(species),
        step_rate=expr,
        step_constants=constants,
        pathways=_pathways(expr, constants),
        assumptions=("The law is taken as given; it was not derived from steps.",),
        conventions=tuple(conventions),
        derivation=((f"The law as given: {text}" if text else "The law as given", expr),),
        stoichiometry=dict(changes) if overall is not None else None,
        source="",
        place=place,
        findings=_findings(expr, changes),
    )


def _in_reading_order(expr: sympy.Expr) -> list[sympy.Symbol]:
    text = plain(expr)

    def first(symbol: sympy.Symbol) -> tuple[int, str]:
        shown = symbol.name[1:-1] if symbol.name.startswith("{") else symbol.name
        found = re.search(rf"(?<!\w){re.escape(shown)}(?!\w)", text)
        return (found.start() if found else len(text)), symbol.name

    return sorted(expr.free_symbols, key=first)


def _constants(expr: sympy.Expr) -> tuple[Constant, ...]:
    terms = _terms(expr)
    out = []
    for symbol in _in_reading_order(expr):
        if symbol.name[0] in "[{":
            continue
        if not symbol.is_nonnegative:
            kind = ConstantKind.ORDER
        elif all(_multiplies(symbol, t) for t in terms if symbol in t.free_symbols):
            kind = ConstantKind.RATE
        else:
            kind = ConstantKind.OTHER
        out.append(Constant(symbol.name, symbol, kind))
    return tuple(out)


def _multiplies(symbol: sympy.Symbol, term: sympy.Expr) -> bool:
    rest = [f for f in sympy.Mul.make_args(term) if f != symbol]
    factors = len(sympy.Mul.make_args(term))
    return len(rest) == factors - 1 and all(symbol not in f.free_symbols for f in rest)


def _terms(expr: sympy.Expr) -> list[sympy.Expr]:
    """The additive terms; a sum that is the only one in a product is multiplied out."""
    if expr.is_Mul:
        sums = [f for f in expr.args if f.is_Add]
        if len(sums) == 1:
            rest = sympy.Mul(*[f for f in expr.args if f is not sums[0]])
            return [t * rest for t in sums[0].args]
    return list(sympy.Add.make_args(expr))


def _pathways(expr: sympy.Expr, constants: tuple[Constant, ...]) -> tuple[Pathway, ...]:
    rates = [c for c in constants if c.kind is ConstantKind.RATE]
    owned: dict[str, list[sympy.Expr]] = {}
    for term in _terms(expr):
        if term.as_coeff_Mul()[0].is_negative:
            return ()  # a reverse direction is not a pathway beside the forward one
        owner = next((c.name for c in rates if c.symbol in term.free_symbols), None)
        if owner is None:
            return ()
        owned.setdefault(owner, []).append(term)
    if len(owned) < 2:
        return ()
    names = [c.name for c in rates if c.name in owned]
    return tuple(Pathway(name, (), sympy.Add(*owned[name])) for name in names)


def _equation(changes: Mapping[str, int]) -> str:
    def side(sign: int) -> str:
        parts = [(s, sign * n) for s, n in changes.items() if sign * n > 0]
        return " + ".join(s if n == 1 else f"{n} {s}" for s, n in parts) or "(nothing)"

    return f"{side(-1)} -> {side(1)}"


def _findings(expr: sympy.Expr, changes: Mapping[str, int]) -> tuple[str, ...]:
    """A reactant that the law does not hold will be consumed at a rate that ignores it."""
    out = []
    for species, n in changes.items():
        if n < 0 and amount(species) not in expr.free_symbols:
            out.append(f"The law does not depend on its reactant {species} (zero order in it).")
    return tuple(out)
