"""Special cases made by putting values, zero and infinity into random laws: their answer is known.

"Neither" would be wrong for every one of them; what is found is checked by putting it back. The
laws are sums and ratios as in kinetics, without any meaning.
"""

from __future__ import annotations

import random
from typing import Any

import mpmath
import pytest
import sympy

from discrim.ratelaw.model import Constant, ConstantKind, amount
from discrim.ratelaw.nesting import Neither, Nesting, examine

AMOUNTS = [amount(x) for x in "ABC"]
FAR = sympy.Symbol("t", positive=True)  # goes to infinity


def constants(letter: str, n: int) -> list[Constant]:
    symbols = [sympy.Symbol(f"{letter}{i}", nonnegative=True) for i in range(n)]
    return [Constant(s.name, s, ConstantKind.OTHER) for s in symbols]


def terms(rng: random.Random, own: list[Any], n: int, *, one: bool) -> Any:
    """A sum of n terms, each a constant or two times amounts; after 1 if it is a denominator."""
    out = sympy.Integer(int(one))
    for _ in range(n):
        factors = [rng.choice(own) for _ in range(rng.randint(1, 2))]
        factors += [rng.choice(AMOUNTS) for _ in range(rng.randint(int(one), 2))]
        out += rng.choice([1, 1, 2, sympy.Rational(1, 2)]) * sympy.Mul(*factors)
    return out


def random_law(rng: random.Random, own: list[Any]) -> Any:
    kind = rng.choice(["ratio", "ratio", "square", "sum", "difference"])
    top, bottom = terms(rng, own, 1, one=False), terms(rng, own, rng.randint(0, 3), one=True)
    if kind == "ratio":
        return (top + rng.choice([0, terms(rng, own, 1, one=False)])) / bottom
    if kind == "square":
        return top / bottom**2
    other = terms(rng, own, 1, one=False) / terms(rng, own, 1, one=True)
    return top / bottom + other if kind == "sum" else top - other


def random_case(rng: random.Random, larger: Any, theirs: list[Any], own: list[Any]) -> Any:
    """The larger law at values of its constants, or in a limit; None if there is no limit."""
    values = {}
    for k in theirs:
        kind = rng.random()
        if kind < 0.2:
            values[k] = sympy.Integer(0)
        elif kind < 0.4:
            values[k] = FAR ** rng.choice([1, -1]) * rng.choice(own)
        elif kind < 0.5:
            values[k] = own[0] + rng.choice(own)
        else:
            values[k] = rng.choice([1, 2]) * rng.choice(own) * rng.choice([1, rng.choice(own)])
    out = sympy.cancel(sympy.together(larger.subs(values)))
    if out.has(sympy.nan, sympy.zoo):
        return None
    if out.has(FAR):
        top, bottom = (sympy.Poly(p, FAR) for p in sympy.fraction(out))
        if top.degree() != bottom.degree():
            return None
        out = sympy.cancel(top.LC() / bottom.LC())
    return out if out.free_symbols & set(AMOUNTS) and out.free_symbols & set(own) else None


@pytest.mark.parametrize("seed", range(12))
def test_random_special_cases(seed: int) -> None:
    rng = random.Random(seed)
    made = proven = 0
    while made < 15:
        theirs = constants("k", rng.randint(2, 4))
        mine = constants("q", rng.randint(1, 3))
        larger = random_law(rng, [c.symbol for c in theirs])
        smaller = random_case(rng, larger, [c.symbol for c in theirs], [c.symbol for c in mine])
        if smaller is None:
            continue
        made += 1
        mine = [c for c in mine if c.symbol in smaller.free_symbols]
        found = examine([smaller], [larger], mine, theirs)
        assert not isinstance(found, Neither), (smaller, larger)
        if isinstance(found, Nesting):
            proven += 1
            put_back(found, smaller, larger, theirs, rng)
    assert proven >= 14  # of 2500 such cases all but one are proven


def put_back(
    found: Nesting, smaller: Any, larger: Any, theirs: list[Constant], rng: random.Random
) -> None:
    with mpmath.workdps(60):
        numbers = {
            s: sympy.Rational(rng.randint(20, 90), 37)
            for s in sorted(smaller.free_symbols | larger.free_symbols, key=str)
        }
        at = {}
        for c in theirs:
            value, power = found.along.get(c.name, (found.values.get(c.name), 0))
            if value is None:
                value = sympy.Rational(rng.randint(20, 90), 41)
            at[c.symbol] = value.subs(numbers) * sympy.Integer(10) ** (16 * power)
            assert at[c.symbol] >= 0
        amounts = {s: numbers[s] for s in AMOUNTS if s in numbers}
        large = sympy.N(larger.subs({**amounts, **at}), 60)
        exact = sympy.N(smaller.subs(numbers), 60)
        assert abs(large - exact) <= 1e-12 * (abs(exact) + 1e-9)
