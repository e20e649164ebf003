"""Which species are forms of a catalyst, where other totals are conserved as well."""

import pytest
import sympy

from discrim.mechanism.check import catalyst_forms
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.derive import derive
from discrim.ratelaw.model import amount

# W. W. Cleland, Biochim. Biophys. Acta 67 (1963) 104-137: three substrates, a product leaves after
# each has bound (from memory). Invented letters.
SUBSTITUTED = {
    "a": "E + A <=> EA", "p": "EA <=> F + P", "b": "F + B <=> FB",
    "q": "FB <=> G + Q", "c": "G + C <=> GC", "r": "GC <=> E + R",
}  # fmt: skip
# Invented: each step exchanges.
RING = {f"s{i}": f"X{i} + A{i} <=> X{(i + 1) % 6} + B{i}" for i in range(6)}


@pytest.mark.parametrize(
    ("steps", "free", "forms"),
    [
        (SUBSTITUTED, "E", {"E", "EA", "F", "FB", "G", "GC"}),
        (RING, "X0", {f"X{i}" for i in range(6)}),
        # another start of the same circle
        (RING, "X3", {f"X{i}" for i in range(6)}),
        # a catalyst that only waits: nothing turns over, the smallest total counts
        ({"i": "E + I <=> EI", "t": "A -> P"}, "E", {"E", "EI"}),
    ],
)
def test_reactants_and_products_are_no_forms(steps, free, forms):
    # E, its first product and its last reactant have a constant total too, and are fewer
    mechanism = parse_mechanism(name="x", steps=steps, catalyst=[free])
    assert {s.name for s in catalyst_forms(mechanism, free)} == forms


@pytest.mark.parametrize(("steps", "free", "before", "after"), [
    (SUBSTITUTED, "E", "ABC", "PQR"),
    (RING, "X0", [f"A{i}" for i in range(6)], [f"B{i}" for i in range(6)]),
])  # fmt: skip
def test_the_rate_is_zero_at_equilibrium(steps, free, before, after):
    # all constants 1: the equilibrium constant of the overall reaction is 1 (law of mass action)
    mechanism = parse_mechanism(name="x", steps=steps, catalyst=[free])
    rate = derive(mechanism).step_rate
    rate = rate.subs({s: 1 for s in rate.free_symbols if s.name[0] == "k"})
    here = {amount(s): k + 2 for k, s in enumerate(before)}
    there = {amount(s): k + 2 for k, s in enumerate(reversed(after))}
    assert rate.subs({**here, **there}) == 0
    there[amount(after[0])] *= sympy.Rational(1, 2)
    assert rate.subs({**here, **there}) > 0
