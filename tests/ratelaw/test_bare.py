"""Laws given as formulas."""

import pytest
import sympy

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol

RATE, OTHER, ORDER = ConstantKind.RATE, ConstantKind.OTHER, ConstantKind.ORDER


def law(text, overall=None):
    expr = parse_expression(text, Place())
    return law_from_expression("x", expr, overall=overall, place=None, text=text)


@pytest.mark.parametrize(
    ("text", "kinds", "species", "pathways"),
    [
        ("k*[A]*([B]/B_ref)^order_B", {"k": RATE, "B_ref": OTHER, "order_B": ORDER}, "AB", []),
        ("k_a*[A] + k_b*[B]", {"k_a": RATE, "k_b": RATE}, "AB", ["k_a", "k_b"]),
        ("k2*[B] + k10*[A] + k0", {"k2": RATE, "k10": RATE, "k0": RATE}, "BA",
         ["k0", "k2", "k10"]),
        ("(k_a*[A] + k_b*[B])/(1 + K*[C])", {"k_a": RATE, "k_b": RATE, "K": OTHER}, "ABC",
         ["k_a", "k_b"]),
        ("Vm*[S]/(Km + [S])", {"Vm": RATE, "Km": OTHER}, "S", []),
        ("k*K_A*[A]/(1 + K_A*[A])", {"k": RATE, "K_A": OTHER}, "A", []),
        ("k_f*[A] - k_r*[B]", {"k_f": RATE, "k_r": RATE}, "AB", []),
        ("k*([A] + [B])", {"k": RATE}, "AB", []),
        ("k*[A] + 0.1*[B]", {"k": RATE}, "AB", []),
        ("k*10^(pKa - 7)", {"k": RATE, "pKa": ORDER}, "", []),
    ],
)  # fmt: skip
def test_kinds_species_pathways(text, kinds, species, pathways):
    found = law(text)
    assert {c.name: c.kind for c in found.constants} == kinds
    assert set(found.species) == set(species)
    assert {p.name for p in found.pathways} == set(pathways)
    if pathways:
        assert sympy.simplify(sum(p.rate for p in found.pathways) - found.rate) == 0


def test_production_follows_the_overall_equation():
    found = law("k*[A]^2", {"A": -2, "P": 1, "I": 0})
    rate = constant_symbol("k") * amount("A") ** 2
    assert dict(found.production) == {"A": -2 * rate, "P": rate}
    assert found.conventions == (
        "The law is the rate r of 2 A -> P as written: each species is produced at r times its "
        "coefficient, reactants negative.",
    )
    assert found.stoichiometry == {"A": -2, "P": 1}


def test_without_an_overall_equation_nothing_is_produced():
    assert law("k*[A]").production == {}


def test_a_reactant_that_the_law_ignores_is_found():
    assert law("k*[B]", {"A": -1, "P": 1}).findings == (
        "The law does not depend on its reactant A (zero order in it).",
    )


@pytest.mark.parametrize(
    ("text", "overall", "says"),
    [
        ("2*3", None, "the law is the number 6"),
        ("k*[A]", {"A": 0}, "the overall equation changes no species"),
    ],
)
def test_wrong_laws(text, overall, says):
    with pytest.raises(DiscrimError, match=says):
        law(text, overall)
