"""Whether one rate law is a case of another, or the same law in other constants: proofs.

Laws that are ratios of sums of products of powers are decided by linear algebra on exponents
(`exponents`): constants may be zero, infinite or finite there, and "neither" can be proven. What
that leaves open goes to exact polynomial equations at finite constants (`equations`). Orders, which
no polynomial holds, are tried at the values with which the species stand in the smaller law, then
at 0, 1/2, 1, 2 and -1. What neither route decides is `NotProven`, never guessed.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any

import sympy

from discrim.ratelaw import equations
from discrim.ratelaw.adjoined import same_root
from discrim.ratelaw.case import Case, Prepared
from discrim.ratelaw.counting import ruled_out
from discrim.ratelaw.exponents import Outcome, Solution, match
from discrim.ratelaw.frozen import frozen
from discrim.ratelaw.model import Constant
from discrim.ratelaw.relation import Neither, Nesting, NotProven, Substitution
from discrim.ratelaw.solve import Progress
from discrim.ratelaw.terms import expression_of

__all__ = ["Neither", "Nesting", "NotProven", "Substitution", "examine", "nested", "same_law"]

_MOST_OPERATIONS = 4000  # of the two laws; beyond it a proof takes too long


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
    if there is None or there.infinite:
        return None
    back = nested(b, a, constants_b, constants_a)
    if back is None or back.infinite:
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
) -> Nesting | Neither | NotProven:
    """How ``smaller`` is a case of ``larger``, that it is none, or why neither is proven.

    Parameters
    ----------
    smaller, larger : the observed expressions of each law (one rate, or one for each observed
        species), in the same order and in the same symbols of species
    constants_smaller, constants_larger : the adjustable constants of each. The two laws may use
        one name for different things. A symbol that is neither here nor a species or measured
        quantity is a known number, shared by both laws.

    Returns
    -------
    Of several nestings, the one with the fewest constants that are infinite, then at zero, then
    that vanish, then with the constants at zero that come first in ``constants_larger``.
    `Neither` holds for generic values of the constants of the smaller law and of known numbers
    that are symbols.
    """
    if len(smaller) != len(larger):
        raise ValueError("the two laws must have the same number of expressions")
    case = Case(smaller, larger, constants_smaller, constants_larger)
    alike = case.by_name()
    if alike is not None and not any(v == 0 for v in alike.values()):
        return _plainly(case, alike)
    if sum(sympy.count_ops(e) for e in (*smaller, *larger)) > _MOST_OPERATIONS:
        return NotProven("the laws are too large to compare", exhaustive=False)
    progress = Progress()
    disproven = ""
    for choices in case.choices():
        best: Nesting | None = None
        for choice in choices:
            prepared = case.prepare(choice, progress)
            if prepared is None:
                continue
            outcome = match(prepared.larger, prepared.smaller, prepared.layout)
            if not outcome.solutions and outcome.complete and prepared.independent:
                disproven = outcome.reason
                continue
            for found in _found(case, prepared, outcome, progress):
                if best is None or case.rank(found) < case.rank(best):
                    best = found
            if best is not None and best.inside:
                return best
        if best is not None:
            return _plainest(case, best, alike)
    if disproven and not case.held:
        return Neither(disproven)
    if alike is not None:
        return _plainly(case, alike)
    if case.held:
        reason = ruled_out(case) or _ruled_out_where_fixed(case, constants_smaller)
        if reason:
            return Neither(reason)
    if progress.dropped:
        return NotProven(progress.dropped[0], exhaustive=False)
    said = "no finite values >= 0 of the constants of the larger law give the smaller one"
    return NotProven(said, exhaustive=not case.held)


def _ruled_out_where_fixed(case: Case, constants_smaller: Sequence[Constant]) -> str:
    """Why the laws differ even where what their orders act on is fixed, or ""."""
    found = frozen(case)
    if found is None:
        return ""
    smaller, larger, constants, what = found
    left = set().union(*(e.free_symbols for e in smaller))
    kept = [c for c in constants_smaller if c.symbol in left]
    answer = examine(smaller, larger, kept, constants)
    return f"at fixed {what}: {answer.reason}" if isinstance(answer, Neither) else ""


def _plainly(case: Case, values: dict[str, sympy.Expr]) -> Nesting:
    """The laws are written alike, apart from terms whose constants are zero."""
    zero = tuple(n for n, v in values.items() if v == 0)
    return Nesting(values, zero, {}, (), case.n_restrictions, edge=bool(zero))


def _plainest(case: Case, found: Nesting, alike: dict[str, sympy.Expr] | None) -> Nesting:
    """Where constants are redundant, the choice that leaves every other one as it is."""
    if alike is None or not found.redundant or found.vanish or found.infinite:
        return found
    plainly = _plainly(case, alike)
    if set(plainly.zero) != set(found.zero):
        return found
    return replace(plainly, redundant=found.redundant)


def _found(
    case: Case, prepared: Prepared, outcome: Outcome, progress: Progress
) -> Iterator[Nesting]:
    """What either route finds; the second one only where the first leaves a question."""
    settled = False
    for solution in outcome.solutions:
        nesting = _read(case, prepared, solution)
        if nesting is not None and _confirmed(case, prepared, nesting):
            settled = settled or not (nesting.vanish or nesting.infinite)
            yield nesting
    if not prepared.rational:
        if not outcome.solutions:
            progress.dropped.append("roots or balances without a closed form")
    elif not settled or not outcome.complete:
        yield from equations.solve(case, prepared, progress)


def _chosen_zero(symbol: Any, prepared: Prepared, vanish: Sequence[str], name: str) -> bool:
    zero = prepared.choice.get(symbol) == 0 and symbol.is_nonnegative
    return bool(zero) and name not in vanish


def _confirmed(case: Case, prepared: Prepared, nesting: Nesting) -> bool:
    """Where polynomials leave open which root is meant, numbers must agree as well."""
    if prepared.rational:
        return True
    if case.n_balances:
        return not nesting.along  # the balances themselves agree, with no limit to take
    values = {}
    for symbol, name in case.names.items():
        base, power = nesting.along.get(name, (nesting.values.get(name, sympy.Integer(1)), 0))
        if base is sympy.oo:
            base, power = sympy.Integer(1), 1
        values[symbol] = base, power
    return same_root(*case.as_given, values)


def _read(case: Case, prepared: Prepared, solution: Solution) -> Nesting | None:
    """A solution in logarithms of the ring's generators, as constants of the laws."""
    variables, unknown = prepared.variables, prepared.unknown
    powers = [sympy.Integer(variables.roots[k]) / k[1] for k in variables.keys]
    symbols = [b ** (p / sympy.Integer(variables.roots[b, p])) for b, p in variables.keys]

    def as_expr(poly: Any) -> sympy.Expr:
        return sympy.Add(*(
            sympy.Integer(int(c)) * sympy.Mul(*(s**e for s, e in zip(symbols, m, strict=True) if e))
            for m, c in poly.terms()
        ))  # fmt: skip

    def value(log: Any) -> sympy.Expr:
        return expression_of(log, symbols, as_expr)

    names = case.names
    column = {s: i for i, s in enumerate(unknown)}
    if any(solution.along.get(i) for i, s in enumerate(unknown) if s in case.scales):
        return None  # an unknown of a balance would go to zero with its scale
    redundant = [names[unknown[i]] for i in solution.redundant if unknown[i] in names]
    limit = bool(solution.combinations) or any(e > 0 for e in solution.along.values())
    values: dict[str, sympy.Expr] = {}
    along: dict[str, tuple[sympy.Expr, sympy.Rational]] = {}
    zero: list[str] = []
    infinite: list[str] = []
    for symbol, name in names.items():
        i = column.get(symbol)
        if symbol in prepared.choice:
            values[name] = prepared.choice[symbol]
        elif i is not None and i in solution.logs:
            values[name] = value(solution.logs[i]) ** powers[i]
            rate = solution.along.get(i, 0)
            if not rate:
                continue
            if powers[i].is_Rational is not True:
                return None  # zero or infinite, by the sign of an order
            if limit:
                along[name] = values[name], rate * powers[i]
            values[name] = sympy.Integer(0) if rate < 0 else sympy.oo
            (zero if rate < 0 else infinite).append(name)
    vanish = [names[unknown[i]] for i in solution.vanish if unknown[i] in names]
    vanish += [names[s] for s in prepared.open_ if s not in column and s in names]
    for symbol in case.without_effect(prepared.choice, zero):
        vanish.append(names[symbol])
        values.pop(names[symbol])
    zero = [n for s, n in names.items() if n in zero or _chosen_zero(s, prepared, vanish, n)]
    plain_names = {s: sympy.Symbol(n, nonnegative=True) for s, n in names.items()}
    kept = []
    for row, log in solution.combinations:
        product = sympy.Mul(*(plain_names[unknown[i]] ** (e / powers[i]) for i, e in row.items()
                              if i in solution.along))  # fmt: skip
        top, bottom = product.as_numer_denom()
        kept.append((product, value(log)) if bottom == 1 or top != 1 else (bottom, 1 / value(log)))
    skip = {*zero, *infinite, *redundant}
    return Nesting(
        values=values,
        zero=tuple(zero),
        fixed={n: v for n, v in values.items() if v.is_number and n not in skip},
        vanish=tuple(vanish),
        n_restrictions=case.n_restrictions,
        edge=bool(zero or infinite),
        redundant=tuple(redundant),
        infinite=tuple(infinite),
        kept=tuple(kept),
        along=along,
    )
