"""Balances of second and higher degree: the law against the balances themselves."""

import numpy as np
import pytest
import sympy
from sympy import Rational, sqrt

from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.model import amount


def law_of(steps, **kw):
    return derive(parse_mechanism(name="x", steps=steps, **kw))


def symbols(text):
    return sympy.symbols(text, nonnegative=True)


A, A2, B, X2, CO, O2 = map(amount, ("A", "A2", "B", "X2", "CO", "O2"))


def test_radicals_that_meet_give_a_square_root():
    # Bodenstein's steady state for a chain that two radicals end: order 1/2 in what starts it
    law = law_of({"d": "X2 <=> 2 X", "x": "X + A -> P + X"}, assume={"steady": ["X"]})
    k_d, k_rev_d, k_x = symbols("k_d k_rev_d k_x")
    assert sympy.simplify(law.step_rate - k_x * A * sqrt(k_d * X2 / k_rev_d)) == 0
    assert len(law.constants) == 1


def test_dissociation_that_is_not_equilibrated():
    """2 k_d [A2] v^2 = k_p (1 - v), the balance of adsorbed atoms (by hand)."""
    law = law_of({"d": "A2 + 2 * -> 2 A*", "p": "A* -> P + *"})
    k_d, k_p = symbols("k_d k_p")
    for a, b, c in ((1, 2, 3), (Rational(1, 7), 5, 11)):
        at = {k_d: sympy.Integer(1) * a, k_p: sympy.Integer(1) * b, A2: sympy.Integer(1) * c}
        v = (-at[k_p] + sqrt(at[k_p] ** 2 + 8 * at[k_d] * at[A2] * at[k_p])) / (
            4 * at[k_d] * at[A2]
        )
        rate = law.step_rate.xreplace(at)
        assert sympy.simplify(rate - at[k_d] * at[A2] * v**2) == 0


def test_one_species_on_two_sites():
    """v + 2 K [A] v^2 = 1 (by hand); both sites count in the sum."""
    law = law_of({"d": "A + 2 * <=> A**", "p": "A** -> P + 2 *"}, assume={"limiting": "p"})
    K, k = symbols("K_d k_p")
    v = 2 / (1 + sqrt(1 + 8 * K * A))
    assert sympy.simplify(law.rate - k * K * A * v**2) == 0


def test_two_kinds_of_radical_are_kept_implicit_where_three_terminations_compete():
    """The steady state found from the balances with SciPy's root."""
    from scipy.optimize import root

    steps = {
        "start": "I -> 2 R",
        "prop": "R + A -> S + P",
        "back": "S + B -> R + Q",
        "rr": "2 R -> T",
        "rs": "R + S -> U",
        "ss": "2 S -> V",
    }
    law = law_of(steps, assume={"steady": ["R", "S"]})
    assert law.production["V"].has(ImplicitValue)
    assert any("no closed form" in f for f in law.findings)
    k = dict(zip(steps, (0.3, 2.0, 0.8, 1.1, 0.6, 1.7), strict=True))
    c = {"I": 0.9, "A": 1.4, "B": 0.5}

    def balances(z):
        r, s = np.exp(z)
        exchange = k["prop"] * r * c["A"] - k["back"] * s * c["B"]
        return [
            2 * k["start"] * c["I"] - exchange - 2 * k["rr"] * r**2 - k["rs"] * r * s,
            exchange - 2 * k["ss"] * s**2 - k["rs"] * r * s,
        ]

    found = root(balances, [-1.0, -1.0], tol=1e-13)
    s = np.exp(found.x[1])
    values = []
    for x in law.constants:
        e = x.symbol if x.definition is None else x.definition
        values.append(float(e.subs({t: k[t.name.removeprefix("k_")] for t in e.free_symbols})))
    compiled = CompiledLaw(
        law.production["V"], [x.symbol for x in law.constants], [amount(n) for n in c]
    )
    rate = compiled(
        np.array([[values]]),
        np.array([list(c.values())]),
        constants=False,
        conditions_too=False,
        both=False,
    )[0]
    assert rate[0, 0] == pytest.approx(k["ss"] * s**2, rel=1e-9)


def test_a_closed_cycle_takes_one_constant_away():
    """Wegscheider's condition: A -> B -> C -> A, the constants around multiply to the same."""
    steps = {"ab": "A <=> B", "bc": "B <=> C", "ca": "C <=> A"}
    law = derive(parse_mechanism(name="x", steps=steps), measured=frozenset("ABC"))
    names = {c.name for c in law.constants}
    assert len(names) == 5
    assert "k_rev_ca" not in names
    assert any("microscopic reversibility" in a for a in law.assumptions)
    # at equilibrium of the first two steps the third one stands still, too
    k_ab, k_rev_ab, k_bc, k_rev_bc = symbols("k_ab k_rev_ab k_bc k_rev_bc")
    rest = {amount("B"): A * k_ab / k_rev_ab, amount("C"): A * k_ab * k_bc / k_rev_ab / k_rev_bc}
    assert sympy.simplify(law.production["A"].subs(rest)) == 0


def test_the_total_of_a_catalyst_stands_in_a_law_that_is_not_first_order_in_it():
    """Shares of the catalyst by hand; a path without it is not per catalyst, either."""
    M = amount("total M")
    k_b, k_rev_b, k_go, k_u = symbols("k_b k_rev_b k_go k_u")
    K = symbols("K_b")
    meet = law_of(
        {"b": "M + A <=> MA", "go": "2 MA -> 2 M + P"},
        catalyst=["M"],
        assume={"equilibrated": ["b"]},
    )
    assert sympy.simplify(meet.rate - k_go * (M * K * A / (1 + K * A)) ** 2) == 0
    beside = law_of({"b": "M + A <=> MA", "go": "MA -> M + P", "u": "A -> P"}, catalyst=["M"])
    catalysed = k_go * k_b * A * M / (k_rev_b + k_go + k_b * A)
    assert sympy.simplify(beside.step_rate - catalysed - k_u * A) == 0
    assert "total M" in beside.species
    alone = law_of({"b": "M + A <=> MA", "go": "MA -> M + P"}, catalyst=["M"])
    assert "total M" not in alone.species
    assert "The rate is per total M." in alone.conventions
