"""The combinations of constants that a law is fitted with are those that rates can show."""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np
import pytest
import sympy

from discrim.errors import Place
from discrim.mechanism.model import Mechanism
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import RateLaw, constant_symbol
from tests.ratelaw_derive.known_combinations import KNOWN, Known
from tests.ratelaw_derive.random_mechanisms import Case, cases, equilibrated_steps
from tests.ratelaw_derive.sensitivity import rank_of_rates

DRAWN_SEED, DRAWN = 3, 39


def fluid(known: Known, mechanism: Mechanism) -> frozenset[str]:
    inner = {name for family in known.families for name in family} | set(known.free)
    every = {s.name for step in mechanism.steps for s, _ in (*step.left, *step.right)}
    return frozenset(every - inner)


@lru_cache(maxsize=64)
def law_of(name: str) -> tuple[Mechanism, RateLaw]:
    mechanism = parse_mechanism(name=name, **KNOWN[name].keywords())
    return mechanism, derive(mechanism, measured=fluid(KNOWN[name], mechanism))


def read(text: str) -> Any:
    expression = parse_expression(text, Place(text=text))
    return expression.xreplace({s: constant_symbol(s.name) for s in expression.free_symbols})


class Directions:
    """Exact slopes of logarithms along everything that can vary, at a point of whole numbers.

    What can vary: log k of each kinetic step, and a potential for each species, which gives the K
    of every step, so that closed cycles stay consistent. Constants are sixth powers of whole
    numbers or their ratios, so that square and cube roots stay rational.
    """

    def __init__(self, mechanism: Mechanism, equilibrated: frozenset[str], seed: int) -> None:
        rng = np.random.default_rng(seed)

        def drawn() -> sympy.Rational:
            return sympy.Integer(int(rng.integers(2, 60))) ** 6

        species = sorted({s.name for t in mechanism.steps for s, _ in (*t.left, *t.right)})
        kinetic = [s.name for s in mechanism.steps if s.name not in equilibrated]
        weight = {name: drawn() for name in species}
        names = [*kinetic, *species]
        self.values: dict[str, sympy.Rational] = {}
        self.slopes: dict[str, list[Fraction]] = {}
        for step in mechanism.steps:
            ahead = [Fraction(int(n == step.name)) for n in names]
            if step.name in kinetic:
                self.values[f"k_{step.name}"] = drawn()
                self.slopes[f"k_{step.name}"] = ahead
            if not step.reversible:
                continue
            big_k = sympy.Integer(1)
            of_k = [Fraction(0)] * len(names)
            for sign, side in ((1, step.left), (-1, step.right)):
                for s, n in side:
                    big_k *= weight[s.name] ** (sign * n)
                    of_k[len(kinetic) + species.index(s.name)] += sign * n
            self.values[f"K_{step.name}"] = big_k
            self.slopes[f"K_{step.name}"] = of_k
            if step.name in kinetic:
                self.values[f"k_rev_{step.name}"] = self.values[f"k_{step.name}"] / big_k
                self.slopes[f"k_rev_{step.name}"] = [
                    x - y for x, y in zip(ahead, of_k, strict=True)
                ]

    def slope(self, expression: Any) -> list[Fraction]:
        """d log(expression), exact."""
        at = {s: self.values[s.name] for s in expression.free_symbols}
        total = [Fraction(0)] * len(next(iter(self.slopes.values())))
        value = expression.xreplace(at)
        for symbol, x in at.items():
            part = expression.diff(symbol).xreplace(at) * x / value
            assert part.is_Rational
            f = Fraction(int(part.p), int(part.q))
            total = [t + f * y for t, y in zip(total, self.slopes[symbol.name], strict=True)]
        return total


def rank(rows: list[list[Fraction]]) -> int:
    return int(sympy.Matrix([[sympy.Rational(x) for x in row] for row in rows]).rank())


def test_there_are_enough():
    assert len(KNOWN) >= 20


@pytest.mark.parametrize("name", KNOWN)
def test_as_many_constants_as_known(name):
    _, law = law_of(name)
    assert len(law.constants) == len(KNOWN[name].combinations), [
        (c.name, c.definition) for c in law.constants
    ]


@pytest.mark.parametrize("seed", [1, 2])
@pytest.mark.parametrize("name", KNOWN)
def test_constants_are_functions_of_the_known_combinations_and_the_other_way_round(name, seed):
    """Ranks of slopes in exact arithmetic.

    A constant of a step that the law is fitted with and that the known combinations do not fix
    would raise the rank, and so would a known combination that the law has lost.
    """
    mechanism, law = law_of(name)
    known = KNOWN[name]
    at = Directions(mechanism, frozenset(known.equilibrated), seed)
    published = [at.slope(read(text)) for text in known.combinations]
    ours = [at.slope(c.symbol if c.definition is None else c.definition) for c in law.constants]
    assert rank(published) == len(published)
    assert rank(ours) == len(ours)
    assert rank([*published, *ours]) == len(published)


@pytest.mark.parametrize("name", KNOWN)
def test_rank_of_the_full_equations(name):
    """How many constants rates show, without any law."""
    mechanism, _ = law_of(name)
    known = KNOWN[name]
    count = rank_of_rates(
        mechanism,
        families=[dict.fromkeys(family, 1) for family in known.families],
        steady=known.free,
        equilibrated=known.equilibrated,
        conditions=2 * len(known.combinations) + 4,
    )
    assert count == len(known.combinations)


@lru_cache(maxsize=1)
def drawn() -> list[Case]:
    return cases(DRAWN_SEED, DRAWN)


@pytest.mark.parametrize("number", range(DRAWN))
def test_drawn_laws_have_no_constant_that_rates_cannot_show(number):
    """As many constants as the rank of the full equations, or a finding says how many more."""
    case = drawn()[number]
    law = derive(case.mechanism, measured=frozenset(case.fluid))
    count = rank_of_rates(
        case.mechanism,
        families=case.draft.families,
        steady=case.draft.steady,
        equilibrated=equilibrated_steps(case.draft, case.mechanism),
        conditions=len(law.constants) + 6,
    )
    said = [f for f in law.findings if "also implies" in f or "Rates can tell apart only" in f]
    if not said:
        assert len(law.constants) == count, f"{case.text()}\n{law.rate}"
        return
    more = "a relation" in said[0] or str(len(law.constants) - count) in said[0].split()
    fewer = f"only {count} combinations of the {len(law.constants)} constants" in said[0]
    assert len(law.constants) > count
    assert more or fewer, f"rank {count}\n{said}\n{case.text()}"


@pytest.mark.parametrize("name", KNOWN)
def test_constants_of_the_steps_that_do_not_show_are_noticed(name):
    """The comparison of ranks can fail: it does for the constants of the steps as they are."""
    mechanism, law = law_of(name)
    known = KNOWN[name]
    at = Directions(mechanism, frozenset(known.equilibrated), 1)
    published = [at.slope(read(text)) for text in known.combinations]
    steps = [at.slope(c.symbol) for c in law.step_constants]
    if rank(steps) > len(published):
        assert rank([*published, *steps]) > len(published)
        kept = {c.name for c in law.constants if c.definition is None}
        alone = {
            c.name
            for c in law.step_constants
            if rank([*published, at.slope(c.symbol)]) == len(published)
        }
        assert kept <= alone
    else:
        assert rank([*published, *steps]) == len(published)
