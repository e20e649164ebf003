"""The laws of a mechanism with some of its pathways: how many, which, and how they nest.

Counts are those of the sets of n things (closed forms). Laws of adsorption without one of their
terms are common practice, no source.
"""

import time
from itertools import combinations

import pytest
import sympy

from discrim.mechanism.library import load_mechanism
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.lattice import lattice
from discrim.ratelaw.model import amount
from discrim.ratelaw.nesting import same_law

BUFFER = {
    "water": "S -> P",
    "proton": "S + H+ -> P + H+",
    "hydroxide": "S + OH- -> P + OH-",
    "acid": "S + HA -> P + HA",
    "base": "S + A- -> P + A-",
}
SURFACE = {
    "ads_A": "A + * <=> A*",
    "ads_B": "B + * <=> B*",
    "hold": "I + * <=> I*",
    "both": "A* + B* -> P + 2 *",
    "gas": "A* + B -> P + *",
    "aside": "A -> Q",
}


def of(steps, **keywords):
    return lattice(parse_mechanism(name="x", steps=steps, **keywords))


@pytest.mark.parametrize("n", [2, 3, 4])
def test_every_set_of_parallel_steps(n):
    g = of(dict(list(BUFFER.items())[:n]))
    names = list(BUFFER)[:n]
    every = [s for k in range(1, n + 1) for s in combinations(names, k)]
    assert [node.pathways for node in g.nodes] == every
    assert len(g.edges) == n * 2 ** (n - 1) - n  # sets and one thing more, without the empty set
    assert g.nodes[g.full].pathways == tuple(names)
    for e in g.edges:
        small, large = g.nodes[e.smaller], g.nodes[e.larger]
        (gone,) = set(large.pathways) - set(small.pathways)
        assert e.nesting.words() == f"k_{gone} = 0"
        assert e.nesting.edge
        assert e.nesting.n_restrictions == 1
        k = large.law.constant(f"k_{gone}").symbol
        assert sympy.expand(large.law.rate.subs(k, 0) - small.law.rate) == 0
    assert g.complete
    assert g.left_out == ()


def test_four_pathways_in_a_second():
    of(dict(list(BUFFER.items())[:2]))
    start = time.process_time()
    g = of(dict(list(BUFFER.items())[:4]))
    assert len(g.nodes) == 15
    assert time.process_time() - start < 1.0


def test_what_holds_sites_stays():
    g = of(SURFACE, assume={"equilibrated": ["ads_A", "ads_B", "hold"]})
    laws = {node.pathways: node for node in g.nodes}
    assert len(laws) == 7
    gas = laws[("gas",)]
    # B lost its own event, and still takes up sites; so does what never reacts
    assert [s.name for s in gas.mechanism.steps] == ["ads_A", "ads_B", "hold", "gas"]
    a, b, i = amount("A"), amount("B"), amount("I")
    k, ka, kb, ki = (gas.law.constant(n).symbol for n in ("k_gas", "K_ads_A", "K_ads_B", "K_hold"))
    assert sympy.cancel(gas.law.rate - k * ka * a * b / (1 + ka * a + kb * b + ki * i)) == 0
    # without any site at work nothing is adsorbed
    assert [s.name for s in laws[("aside",)].mechanism.steps] == ["aside"]
    at = {node.pathways: k for k, node in enumerate(g.nodes)}
    words = {(e.smaller, e.larger): e for e in g.edges}
    assert words[at["both",], at["both", "gas"]].nesting.words() == "k_gas = 0"
    gone = words[at["aside",], at["both", "aside"]].nesting
    assert gone.zero == ("k_both",)
    assert gone.vanish == ("K_ads_A", "K_ads_B", "K_hold")


def test_either_order_without_one(tmp_path):
    """Binding in one order only: K_m of the other is zero there (W. W. Cleland, Biochim. Biophys.
    Acta 67 (1963) 104: equilibrium ordered within random; from memory)."""
    g = lattice(load_mechanism("enzyme-random-two-substrates", tmp_path))
    assert [n.pathways for n in g.nodes] == [("bind_A",), ("bind_B",), ("bind_A", "bind_B")]
    first = g.nodes[0].law
    a, b = amount("A"), amount("B")
    v, kia, kb = sympy.symbols("v kia kb", nonnegative=True)
    ordered = v * a * b / (kia * kb + kb * a + a * b)
    own = derive(
        parse_mechanism(
            name="o",
            steps={"a": "E + A <=> EA", "b": "EA + B <=> EAB", "t": "EAB -> E + P"},
            catalyst=["E"],
            assume={"limiting": "t"},
        )
    )
    assert same_law([first.rate], [own.rate], first.constants, own.constants) is not None
    values = {c.symbol: s for c, s in zip(first.constants, (v, kia, kb), strict=True)}
    swapped = {c.symbol: s for c, s in zip(first.constants, (v, kb, kia), strict=True)}
    assert 0 in {sympy.cancel(first.rate.xreplace(m) - ordered) for m in (values, swapped)}
    assert {(e.smaller, e.larger) for e in g.edges} == {(0, 2), (1, 2)}


def test_sets_with_one_law_are_one_node():
    g = of(
        {"one": "A -> P", "e": "A <=> X", "two": "X -> P"},
        assume={"equilibrated": ["e"]},
    )
    assert len(g.nodes) == 1
    assert g.nodes[0].sets == (("one",), ("two",), ("one", "two"))
    assert g.full == 0
    assert g.edges == ()


def test_a_single_pathway_has_no_lattice():
    g = of({"ads": "A + * <=> A*", "go": "A* -> P + *"})
    assert len(g.routes) == 1
    assert g.nodes == ()
    assert g.full == -1


def test_a_set_without_a_law_is_left_out_with_the_reason():
    g = of({"begin": "I -> 2 R", "carry": "R + M -> Q + R", "end": "2 R -> T", "direct": "M -> Q"},
           assume={"steady": ["R"]})  # fmt: skip
    assert [r.name for r in g.routes] == ["begin", "carry", "direct"]
    without = {names for names, _ in g.left_out}
    # the chain cannot run where nothing begins it
    assert ("carry",) in without
    assert ("carry", "direct") in without
    assert all(why for _, why in g.left_out)
    assert g.nodes[g.full].pathways == ("begin", "carry", "direct")


def test_beyond_six_only_one_or_two_are_taken_out():
    g = of({f"by_{x}": f"{x} -> P" for x in "ABCDEFG"})
    assert len(g.nodes) == 1 + 7 + 21
    assert min(len(n.pathways) for n in g.nodes) == 5
    assert not g.complete


def test_chains_of_edges_lead_to_the_full_law():
    g = of(dict(list(BUFFER.items())[:3]))
    chain = g.chain(0, g.full)
    assert chain is not None
    assert len(chain) == 2
    assert g.chain(g.full, g.full) == ()
    assert g.chain(g.full, 0) is None


def test_an_edge_holds_at_numbers():
    """Each smaller law is met by the larger one with its restriction, at points picked by hand."""
    g = of(SURFACE, assume={"equilibrated": ["ads_A", "ads_B", "hold"]})
    species = [amount(s) for s in ("A", "B", "I")]
    points = [[0.3, 1.7, 0.4], [2.0, 0.2, 1.1], [5.0, 4.0, 0.0]]
    numbers = {"k_both": 1.3, "k_gas": 0.7, "k_aside": 0.2, "K_ads_A": 2.1, "K_ads_B": 0.6,
               "K_hold": 3.2}  # fmt: skip
    for e in g.edges:
        found = []
        for at, zero in ((e.smaller, ()), (e.larger, e.nesting.zero)):
            law = g.nodes[at].law
            compiled = CompiledLaw(law.production["A"], [c.symbol for c in law.constants], species)
            theta = [[0.0 if c.name in zero else numbers[c.name] for c in law.constants]]
            found.append([_value(compiled, theta, p) for p in points])
        assert found[0] == pytest.approx(found[1], rel=1e-12)


def _value(compiled, theta, point):
    import numpy as np

    out = compiled(np.array([theta]), np.array([point]), constants=False, conditions_too=False,
                   both=False)  # fmt: skip
    return float(out[0][0][0])
