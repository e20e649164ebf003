"""No law keeps a combination of constants that data could not separate; nothing is lost either."""

from pathlib import Path

import numpy as np
import pytest
import sympy

from discrim.mechanism.library import load, names
from discrim.mechanism.model import Mechanism
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.lump import lump
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw, amount, constant_symbol

MORE = {
    "reversible enzyme through two complexes": {
        "steps": {"bind": "E + S <=> ES", "turn": "ES <=> EP", "out": "EP <=> E + P"},
        "catalyst": ["E"],
    },
    "dead end at steady state": {
        "steps": {"bind": "E + S <=> ES", "turn": "ES -> E + P", "stop": "E + I <=> EI"},
        "catalyst": ["E"],
    },
    "oxidation and reduction of one site": {
        "steps": {"ox": "O2 + * -> O2*", "one": "O2* + R -> Q + O*", "two": "O* + R -> Q + *"},
    },
    "all surface steps kinetic": {
        "steps": {"ads_A": "A + * <=> A*", "turn": "A* -> B*", "des_B": "B* -> B + *"},
    },
    "complex beside a direct way": {
        "steps": {"bind": "A + B <=> AB", "react": "AB -> P", "alone": "A -> P"},
        "assume": {"steady": ["AB"]},
    },
    "two adsorbed, second step at steady state": {
        "steps": {
            "h": "H2 + 2 * <=> 2 H*",
            "ads_A": "A + * <=> A*",
            "first": "A* + H* -> AH* + *",
            "second": "AH* + H* -> P + 2 *",
        },
        "assume": {"equilibrated": ["h", "ads_A"], "limiting": "first"},
    },
    "consecutive, all measured": {
        "steps": {"a": "A -> B", "b": "B -> C"},
        "measured": frozenset("ABC"),
    },
}


def all_laws():
    laws = {name: derive(m) for name in names() if isinstance(m := load(name, Path()), Mechanism)}
    for name, given in MORE.items():
        given = dict(given)
        measured = given.pop("measured", None)
        laws[name] = derive(parse_mechanism(name=name, **given), measured=measured)
    return laws


LAWS = all_laws()


@pytest.mark.parametrize("name", LAWS)
def test_all_constants_can_be_told_apart(name):
    """Singular values of the sensitivities over widely spread amounts (NumPy's SVD)."""
    law = LAWS[name]
    symbols = [c.symbol for c in law.constants]
    species = [amount(s) for s in law.species]
    rng = np.random.default_rng(5)
    point = np.array([float(rng.uniform(0.5, 2)) for _ in symbols])
    amounts = 10 ** rng.uniform(-1.5, 1.5, size=(40, len(species)))
    rows = []
    for e in dict.fromkeys([law.rate, *law.production.values()]):
        slopes = CompiledLaw(e, symbols, species)(
            point[None, None], amounts, constants=True, conditions_too=False, both=False
        )[1]
        rows.append(slopes[0] * point)
    matrix = np.concatenate(rows)
    matrix = matrix / np.linalg.norm(matrix, axis=0)
    values = np.linalg.svd(matrix, compute_uv=False)
    assert values[-1] > 1e-6 * values[0]


def _agree(a, b):
    """Whether two laws with implicit values agree at points drawn at random."""
    symbols = sorted(a.free_symbols | b.free_symbols, key=str)
    points = np.exp(np.random.default_rng(8).normal(size=(20, len(symbols))))
    one, two = (
        CompiledLaw(e, [], symbols)(
            np.zeros((1, 1, 0)), points, constants=False, conditions_too=False, both=False
        )[0]
        for e in (a, b)
    )
    return np.allclose(one, two, rtol=1e-10, atol=0)


@pytest.mark.parametrize("name", LAWS)
def test_the_combinations_give_the_law_back(name):
    law = LAWS[name]
    known = {c.symbol: c.definition for c in law.constants if c.definition is not None}
    given_back = law.rate.xreplace(known)
    rooted = any(p.base.is_Add and not p.exp.is_Integer for p in law.step_rate.atoms(sympy.Pow))
    if rooted or law.rate.has(ImplicitValue):
        assert _agree(given_back, law.step_rate)
    else:
        assert sympy.cancel(sympy.together(given_back - law.step_rate)) == 0
    steps = {c.symbol for c in law.step_constants}
    for c in law.constants:
        assert (c.definition is None) == (c.symbol in steps)
        assert c.lower == 0
        assert c.meaning
        if c.definition is not None:
            assert c.definition.free_symbols <= steps
            # positive for positive constants: no minus sign anywhere
            assert c.definition.subs(dict.fromkeys(steps, 1)) > 0
            assert "- " not in str(c.definition)


@pytest.mark.parametrize("name", LAWS)
def test_lumping_twice_changes_nothing(name):
    law = LAWS[name]
    again = lump(law)
    assert [c.name for c in again.constants] == [c.name for c in law.constants]
    assert sympy.cancel(sympy.together(again.rate - law.rate)) == 0


NAMES = {
    "enzyme-one-substrate": ["k_turn", "K_m_S"],
    "enzyme-mixed": ["k_turn", "K_inhibit_E", "K_inhibit_ES", "K_m_S"],
    "enzyme-ordered-two-substrates": ["k_cat", "K_m_A", "K_m_B", "K_i_A"],
    "enzyme-substituted-two-substrates": ["k_cat", "K_m_A", "K_m_B"],
    "surface-reaction-two-adsorbed": ["k_surface", "K_ads_A", "K_ads_B"],
    "nitric-oxide-dimer-then-oxygen": ["kK_oxidation_dimer"],
    "activation-by-collision": ["k_activate", "b_M"],
    "ionisation-then-capture": ["k_ionise", "b_Xminus"],
    "complex-then-product": ["a_A_B"],
    "dead end at steady state": ["k_turn", "K_m_S", "K_stop"],
    "one-adsorbed-reversible": ["k_surface", "K_ads_A", "K_ads_P", "K_eq"],
}


@pytest.mark.parametrize("name", NAMES)
def test_names(name):
    assert [c.name for c in LAWS[name].constants] == NAMES[name]


def test_a_combination_never_takes_the_name_of_a_constant():
    law = derive(
        parse_mechanism(
            name="x",
            steps={"cat": "E + S <=> ES", "b": "ES <=> F", "t": "F -> E + P"},
            catalyst=["E"],
        )
    )
    assert "k_cat_2" in [c.name for c in law.constants]
    assert "k_cat" in [c.name for c in law.step_constants]


def test_a_law_that_is_no_quotient_is_left_alone():
    n = constant_symbol("n", ConstantKind.ORDER)
    k = constant_symbol("k")
    law = RateLaw(
        name="x",
        rate=k * amount("A") ** n,
        production={},
        constants=(
            Constant("k", k, ConstantKind.RATE),
            Constant("n", n, ConstantKind.ORDER),
        ),
        species=("A",),
    )
    assert lump(law) is law


def test_an_absorbed_amount_joins_its_constant():
    """As after an amount has been put in as a number: k1 k2/(k3 + k4 [A]) has two constants."""
    k = [constant_symbol(f"k{i}") for i in range(1, 5)]
    a = amount("A")
    law = RateLaw(
        name="x",
        rate=k[0] * k[1] * a / (k[2] + k[3] * a),
        production={},
        constants=tuple(Constant(s.name, s, ConstantKind.RATE) for s in k),
        species=("A",),
    )
    made = lump(law)
    assert {c.name: c.definition for c in made.constants} == {
        "a_A": k[0] * k[1] / k[2],
        "b_A": k[3] / k[2],
    }


def test_relations_that_are_not_imposed_are_told():
    """Ordered addition with all products: 9 combinations of 10 constants, of which 8 are free."""
    steps = {
        "bind_A": "E + A <=> EA",
        "bind_B": "EA + B <=> EAB",
        "turn": "EAB <=> EPQ",
        "out_P": "EPQ <=> EQ + P",
        "out_Q": "EQ <=> E + Q",
    }
    law = derive(parse_mechanism(name="x", steps=steps, catalyst=["E"]))
    assert len(law.step_constants) == 10
    assert len(law.constants) == 9
    assert "wider than the mechanism" in law.findings[-1]
