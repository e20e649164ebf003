"""Derived laws against the balances they come from, at random constants and amounts.

The balances are set up here from the steps alone and solved numerically (SciPy's Newton solver), so
nothing of the symbolic elimination is used in the check.
"""

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import root

from discrim.mechanism.check import species_of
from discrim.mechanism.library import load_mechanism
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.derive import derive
from discrim.ratelaw.model import amount

# Mechanisms with everything kinetic: steps, catalyst, intermediates with their starting amounts
KINETIC = {
    "three surface species": (
        {
            "ads_A": "A + * <=> A*",
            "turn": "A* <=> B*",
            "on": "B* + C -> D*",
            "des_D": "D* <=> D + *",
        },
        (),
        None,
    ),
    "a branched enzyme": (
        {
            "bind_A": "E + A <=> EA",
            "bind_B": "EA + B <=> EAB",
            "out_P": "EAB <=> EQ + P",
            "out_Q": "EQ <=> E + Q",
            "dead": "EQ + B <=> EQB",
        },
        ("E",),
        None,
    ),
    "radicals": (
        {
            "start": "A -> R",
            "grow": "R + B -> Q + S",
            "back": "S + A -> R + P",
            "stop_R": "R -> U",
            "stop_S": "S -> U",
        },
        (),
        ("R", "S"),
    ),
    "two paths through a complex": (
        {
            "bind": "A + B <=> AB",
            "react": "AB -> P",
            "assisted": "AB + C -> P + C",
            "alone": "A -> P",
        },
        (),
        ("AB",),
    ),
}


@pytest.mark.parametrize("name", KINETIC)
def test_steady_states_by_numbers(name):
    steps, catalyst, steady = KINETIC[name]
    mechanism = parse_mechanism(
        name=name,
        steps=steps,
        catalyst=catalyst,
        assume=None if steady is None else {"steady": list(steady)},
    )
    law = derive(mechanism)
    rng = np.random.default_rng(20)
    every = species_of(mechanism)
    fluid = set(law.production)
    inner = [s for s in every if s.name not in fluid]
    conserved = bool(mechanism.sites or mechanism.catalyst)
    for _ in range(3):
        values = {s.name: float(rng.uniform(0.3, 2)) for s in every if s.name in fluid}
        k = {}
        for step in mechanism.steps:
            k[f"k_{step.name}"] = float(rng.uniform(0.3, 2))
            if step.reversible:
                k[f"k_rev_{step.name}"] = float(rng.uniform(0.3, 2))

        def rates(x, values=values, k=k):
            here = values | {s.name: v for s, v in zip(inner, x, strict=True)}
            out = []
            for step in mechanism.steps:
                r = k[f"k_{step.name}"] * np.prod([here[s.name] ** n for s, n in step.left])
                if step.reversible:
                    back = np.prod([here[s.name] ** n for s, n in step.right])
                    r -= k[f"k_rev_{step.name}"] * back
                out.append(r)
            return out

        def made(species, r):
            return sum(
                (dict(s.right).get(species, 0) - dict(s.left).get(species, 0)) * x
                for s, x in zip(mechanism.steps, r, strict=True)
            )

        def balance(x):
            r = rates(x)
            out = [made(s, r) for s in inner]
            if conserved:
                out[0] = sum(x) - 1
            return out

        found = root(balance, np.full(len(inner), 1 / len(inner)), tol=1e-12)
        assert np.max(np.abs(found.fun)) < 1e-11
        r = rates(found.x)
        numbers = {amount(s): v for s, v in values.items()}
        numbers |= {c.symbol: k[c.name] for c in law.step_constants}
        for c in law.constants:
            if c.definition is not None:
                numbers[c.symbol] = float(c.definition.subs(numbers))
        by_name = {s.name: s for s in every}
        for species, expression in law.production.items():
            expected = made(by_name[species], r)
            assert float(expression.subs(numbers)) == pytest.approx(expected, rel=1e-8, abs=1e-10)


def test_equilibrium_is_the_limit_of_fast_steps():
    """Quasi-equilibrated adsorption against the same mechanism with all steps kinetic."""
    steps = {
        "ads_A": "A + * <=> A*",
        "surface": "A* -> B*",
        "des_B": "B* <=> B + *",
    }
    exact = derive(parse_mechanism(name="x", steps=steps))
    quasi = derive(
        parse_mechanism(
            name="x",
            steps=steps,
            assume={"equilibrated": ["ads_A", "des_B"], "limiting": "surface"},
        )
    )
    a, b = amount("A"), amount("B")
    fast = 1e9
    numbers = {a: 0.7, b: 0.4}
    kinetic = {"k_ads_A": 3 * fast, "k_rev_ads_A": fast, "k_surface": 2.0}
    kinetic |= {"k_des_B": 0.5 * fast, "k_rev_des_B": fast}
    full = exact.step_rate.subs(numbers | {c.symbol: kinetic[c.name] for c in exact.step_constants})
    at = {"K_ads_A": 3.0, "K_des_B": 0.5, "k_surface": 2.0}
    limit = quasi.step_rate.subs(numbers | {c.symbol: at[c.name] for c in quasi.step_constants})
    assert float(full) == pytest.approx(float(limit), rel=1e-6)


@pytest.mark.parametrize(
    ("name", "absent", "simpler"),
    [
        ("enzyme-competitive", "I", "enzyme-one-substrate"),
        ("enzyme-uncompetitive", "I", "enzyme-one-substrate"),
        ("enzyme-mixed", "I", "enzyme-one-substrate"),
        ("two-adsorbed-product-inhibits", "P", "surface-reaction-two-adsorbed"),
    ],
)
def test_without_the_inhibitor_the_law_is_the_simpler_one(name, absent, simpler):
    law = derive(load_mechanism(name, Path()))
    other = derive(load_mechanism(simpler, Path()))
    assert (law.step_rate.subs(amount(absent), 0) - other.step_rate).cancel() == 0
