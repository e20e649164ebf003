"""Kinds of mechanism: which rate, which intermediates, which parts, and what is refused."""

import time

import numpy as np
import pytest
import sympy

from discrim.errors import DiscrimError
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.model import ConstantKind, amount


def law_of(steps, measured=None, **kw):
    mechanism = parse_mechanism(name="x", steps=steps, **kw)
    return derive(mechanism, measured=None if measured is None else frozenset(measured))


# steps, keywords -> text of the rate, stoichiometry
RATES = [
    ({"a": "A -> P"}, {}, "[A]*k_a", {"A": -1, "P": 1}),
    ({"a": "2 A -> B"}, {}, "[A]**2*k_a", {"A": -2, "B": 1}),
    ({"a": "A -> B", "b": "A -> C"}, {}, "[A]*(k_a + k_b)", None),
    ({"a": "A -> B", "b": "B -> C"}, {}, "[A]*k_a", {"A": -1, "C": 1}),
    ({"a": "A -> B", "b": "B -> C"}, {"measured": "ABC"}, "[A]*k_a", None),
    (
        {"a": "A <=> B"},
        {"assume": {"overall_equilibrium": "K_eq"}},
        "k_a*([A] - [B]/K_eq)",
        {"A": -1, "B": 1},
    ),
    (
        {"ads": "O2 + 2 * <=> 2 O*", "red": "CO + O* -> CO2 + *"},
        {"assume": {"equilibrated": ["ads"]}},
        "sqrt(K_ads)*[CO]*sqrt([O2])*k_red/(2*(sqrt(K_ads)*sqrt([O2]) + 1))",
        {"O2": -1, "CO": -2, "CO2": 2},
    ),
    (
        {"b": "E + S <=> ES", "t": "ES -> E + P"},
        {"catalyst": ["E"], "assume": {"equilibrated": ["b"]}},
        "[S]*k_t/(K_m_S + [S])",
        {"S": -1, "P": 1},
    ),
    (
        # a fast step after the limiting one leaves no trace
        {"slow": "A -> X", "fast": "X + B -> P"},
        {"assume": {"limiting": "slow"}},
        "[A]*k_slow",
        {"A": -1, "B": -1, "P": 1},
    ),
    (
        # the law only ever divides by K_des_P: turned round, so that zero means "absent"
        {"ads": "A + * <=> A*", "go": "A* -> P*", "des_P": "P* <=> P + *"},
        {"assume": {"limiting": "go"}},
        "K_ads*[A]*k_go/(K_ads*[A] + K_rev_des_P*[P] + 1)",
        {"A": -1, "P": 1},
    ),
]


@pytest.mark.parametrize("case", range(len(RATES)))
def test_rates(case):
    steps, keywords, text, stoichiometry = RATES[case]
    law = law_of(steps, **keywords)
    assert str(law.rate) == text
    assert law.stoichiometry == stoichiometry


def test_parallel_steps_are_pathways():
    law = law_of({"by_a": "A -> P", "by_b": "B -> P"})
    assert [(p.name, p.steps) for p in law.pathways] == [
        ("by_a", ("by_a",)),
        ("by_b", ("by_b",)),
    ]
    assert sympy.Add(*(p.rate for p in law.pathways)) == law.rate
    assert law.production["P"] == law.rate
    assert law.production["B"] == -law.pathways[1].rate
    assert [c.kind for c in law.constants] == [ConstantKind.RATE] * 2


def test_parallel_steps_on_a_surface_are_pathways():
    law = law_of(
        {
            "ads_A": "A + * <=> A*",
            "ads_B": "B + * <=> B*",
            "both": "A* + B* -> P + 2 *",
            "free": "A* + B -> P + *",
        },
        assume={"equilibrated": ["ads_A", "ads_B"]},
    )
    assert [p.name for p in law.pathways] == ["both", "free"]
    assert (sympy.Add(*(p.rate for p in law.pathways)) - law.rate).cancel() == 0


def test_equal_pathways_are_written_as_one():
    steps = {"one": "A -> P", "e": "A <=> X", "two": "X -> P"}
    law = law_of(steps, assume={"equilibrated": ["e"]})
    assert law.pathways == ()
    assert len(law.constants) == 1
    k = {c.name: c.symbol for c in law.step_constants}
    assert law.constants[0].definition == k["k_one"] + k["K_e"] * k["k_two"]
    assert "same form" in law.findings[0]


def test_production_of_several_products():
    law = law_of(
        {"ads": "A + * <=> A*", "b": "A* -> B + *", "c": "2 A* -> C + 2 *"},
        assume={"equilibrated": ["ads"]},
    )
    assert law.stoichiometry is None
    a = law.production
    assert (a["A"] + a["B"] + 2 * a["C"]).cancel() == 0
    assert (law.rate + a["A"]).cancel() == 0


def test_measured_species_are_no_intermediates():
    steps = {"dis": "Br2 <=> 2 Br", "a": "Br + H2 -> HBr + H", "b": "H + Br2 -> HBr + Br"}
    law = law_of(steps, measured={"Br", "H2", "Br2", "HBr"})
    assert amount("Br") in law.rate.free_symbols | law.production["Br"].free_symbols


def test_a_closed_cycle_of_equilibria_has_one_constant_less():
    law = law_of(
        {
            "a": "E + A <=> EA",
            "b": "E + B <=> EB",
            "c": "EA + B <=> EAB",
            "d": "EB + A <=> EAB",
            "turn": "EAB -> E + P",
        },
        catalyst=["E"],
        assume={"limiting": "turn"},
    )
    assert len(law.step_constants) == 4
    assert any("close a cycle, so that K_d = K_a*K_c/K_b" in s for s in law.assumptions)


def test_catalyst_not_named_is_pointed_out():
    law = law_of({"b": "E + S <=> ES", "t": "ES -> E + P"})
    assert 'catalyst = ["E"]' in law.findings[0]


REFUSED = [
    (
        {"e": "HA <=> H+ + A-", "p": "HA -> P"},
        {"assume": {"equilibrated": ["e"]}, "measured": {"HA", "H+", "A-"}},
        "at equilibrium with each other",
        "[derived]",
    ),
    ({"a": "A <=> P"}, {"assume": {"equilibrated": ["a"]}}, "none sets the rate", "slow step"),
    (
        {"b": "ES + B -> EP", "t": "EP -> ES + P"},
        {"assume": {"steady": ["ES", "EP"]}},
        "no step changes the total of ES, EP",
        'catalyst = ["ES"]',
    ),
    (
        {"a": "A -> P"},
        {"assume": {"overall_equilibrium": "K_eq"}},
        "cannot be written with the overall equilibrium",
        "<=>",
    ),
    (
        {"a": "A <=> X", "b": "X <=> Y", "c": "Y -> P", "e": "X <=> Z"},
        {"assume": {"limiting": "e", "equilibrated": ["a"], "steady": ["X", "Y", "Z"]}},
        'the limiting step "e" carries no net rate',
        "another step",
    ),
]


@pytest.mark.parametrize("case", range(len(REFUSED)))
def test_what_is_not_supported_says_so(case):
    steps, keywords, says, do = REFUSED[case]
    with pytest.raises(DiscrimError) as caught:
        law_of(steps, **keywords)
    assert says in caught.value.says
    assert do in caught.value.do


def test_renaming_species_renames_the_law():
    steps = {"ads_A": "A + * <=> A*", "go": "A* + B -> P + *"}
    other = {"ads_A": "H2 + * <=> H2*", "go": "H2* + H+ -> P + *"}
    one, two = law_of(steps), law_of(other)
    swap = {amount("A"): amount("H2"), amount("B"): amount("H+")}
    assert one.rate.xreplace(swap) == two.rate


def test_order_of_the_steps_does_not_matter():
    steps = {
        "bind": "E + S <=> ES",
        "turn": "ES <=> EP",
        "out": "EP -> E + P",
        "stop": "E + I <=> EI",
    }
    back = dict(reversed(steps.items()))
    one, two = law_of(steps, catalyst=["E"]), law_of(back, catalyst=["E"])
    assert (one.step_rate - two.step_rate).cancel() == 0
    assert {c.name: c.definition for c in one.constants} == {
        c.name: c.definition for c in two.constants
    }


def test_lines_of_the_derivation():
    law = law_of(
        {"ads_A": "A + * <=> A*", "go": "A* -> P + *"},
        assume={"equilibrated": ["ads_A"], "limiting": "go"},
    )
    assert [words for words, _ in law.derivation] == [
        "Net rate of step go: A* -> P + *",
        "Sites *: vacant and covered fractions sum to 1",
        "Step ads_A at equilibrium",
        "So for A*",
        "Vacant sites * from the sum",
        "Rate law in the constants of the steps",
    ]
    assert "Step go is limiting." in law.assumptions
    assert "The rate is that of the step go as written." in law.conventions


def test_a_typical_mechanism_takes_little_time():
    steps = {
        "ads_A": "A + * <=> A*",
        "ads_B": "B + * <=> B*",
        "ads_P": "P + * <=> P*",
        "surface": "A* + B* <=> P* + *",
    }
    mechanism = parse_mechanism(name="x", steps=steps, assume={"limiting": "surface"})
    derive(mechanism)
    best = min(_timed(mechanism) for _ in range(5))
    assert best < 0.1  # about 10 ms on an idle machine


def _timed(mechanism):
    start = time.perf_counter()
    derive(mechanism)
    return time.perf_counter() - start


def test_a_law_with_too_many_terms_is_kept_implicit():
    """Against the linear steady state of the whole network (NumPy's solver)."""
    steps = {"ads": "A + * <=> X0*", "des": "X6* -> P + *"}
    steps |= {f"s{i}_{j}": f"X{i}* <=> X{j}*" for i in range(7) for j in range(i + 1, 7)}
    start = time.perf_counter()
    law = law_of(steps)
    assert time.perf_counter() - start < 10
    assert any("too many terms" in f for f in law.findings)
    rng = np.random.default_rng(3)
    energy = rng.normal(size=7)
    k = {"k_ads": 1.3, "k_rev_ads": 0.4, "k_des": 0.7}
    flow = np.zeros((8, 8))  # from, to; the last is the vacant site
    flow[7, 0], flow[0, 7], flow[6, 7] = 1.3 * 2.0, 0.4, 0.7
    for i in range(7):
        for j in range(i + 1, 7):
            flow[i, j] = k[f"k_s{i}_{j}"] = float(np.exp(rng.normal()))
            flow[j, i] = k[f"k_rev_s{i}_{j}"] = flow[i, j] * np.exp(energy[i] - energy[j])
    matrix = flow.T - np.diag(flow.sum(axis=1))
    matrix[7] = 1.0
    coverage = np.linalg.solve(matrix, np.r_[np.zeros(7), 1.0])
    values = []
    for c in law.constants:
        symbolic = c.symbol if c.definition is None else c.definition
        at = {x: k[x.name] for x in symbolic.free_symbols}
        values.append(float(symbolic.subs(at)))
    compiled = CompiledLaw(law.rate, [c.symbol for c in law.constants], [amount("A")])
    rate = compiled(
        np.array([[values]]), np.array([[2.0]]), constants=False, conditions_too=False, both=False
    )[0]
    assert rate[0, 0] == pytest.approx(0.7 * coverage[6], rel=1e-10)
