"""Units and typical sizes of constants."""

import pytest

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.dimension import constant_units, find_units
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import amount, quantity
from discrim.ratelaw.scale import typical_scale
from discrim.units import Unit

CONCENTRATION = Unit.of({"amount": 1, "volume": -1})
PRESSURE = Unit.of({"pressure": 1})
TIME = Unit.of({"time": 1})
RATE = CONCENTRATION / TIME
BY_MASS = Unit.of({"amount": 1, "mass": -1, "time": -1})
KELVIN = Unit.of({"temperature": 1})
KNOWN = {
    amount("A"): CONCENTRATION,
    amount("B"): CONCENTRATION,
    amount("H2"): PRESSURE,
    amount("O2"): PRESSURE,
    quantity("T"): KELVIN,
}
QUANTITIES = {"T": quantity("T"), "pH": quantity("pH")}


def read(text):
    return parse_expression(text, Place(), QUANTITIES)


# Units by the rule that both sides of a law have one unit (IUPAC Green Book, 3rd ed., 1.1; the
# results are worked by hand).
@pytest.mark.parametrize(
    ("text", "rate", "expected"),
    [
        ("k_A*[A] + k_B*[B]^2", RATE, {"k_A": "s⁻¹", "k_B": "L mol⁻¹ s⁻¹"}),
        ("k*K_A*[A]/(1 + K_A*[A] + K_B*[B])^2", RATE,
         {"k": "mol L⁻¹ s⁻¹", "K_A": "L mol⁻¹", "K_B": "L mol⁻¹"}),
        ("Vm*[A]/(Km + [A])", RATE, {"Vm": "mol L⁻¹ s⁻¹", "Km": "mol L⁻¹"}),
        ("k*sqrt(K*[H2])*[O2]/(1 + sqrt(K*[H2]))", BY_MASS,
         {"k": "mol kg⁻¹ Pa⁻¹ s⁻¹", "K": "Pa⁻¹"}),
        ("k*([A] - [B]/K_eq)", RATE, {"k": "s⁻¹", "K_eq": ""}),
        ("k*[A]*([B]/B_ref)^n", RATE, {"k": "s⁻¹", "B_ref": "mol L⁻¹", "n": ""}),
        ("k*[A]*exp(-E/T)", RATE, {"k": "s⁻¹", "E": "K"}),
        ("k*10^(pKa - pH)*[A]", RATE, {"k": "s⁻¹", "pKa": ""}),
        ("k*[A]*[B]^n", RATE, {"k": None, "n": ""}),
        ("k_1*k_2*[A]", RATE, {"k_1": None, "k_2": None}),
        ("k*[A]*exp(-E/(R*T))", RATE, {"k": "s⁻¹", "E": None, "R": None}),
        ("k*[A] + q", None, {"k": None, "q": None}),
        ("k*[A]/(1 + K*[A])", None, {"k": None, "K": "L mol⁻¹"}),
    ],
)  # fmt: skip
def test_units(text, rate, expected):
    found = constant_units([(read(text), rate)], KNOWN)
    assert {n: u if u is None else u.text() for n, u in found.items()} == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("k*[A]*[B]^n", "s⁻¹ (mol L⁻¹)^(-n)"),
        ("k*[A]^n", "mol L⁻¹ s⁻¹ (mol L⁻¹)^(-n)"),
        ("k*[B]^(-n)", "mol L⁻¹ s⁻¹ (mol L⁻¹)^n"),
        ("k*[A]", "s⁻¹"),
        ("k*q*[A]", ""),
    ],
)
def test_words_where_an_order_is_free(text, expected):
    assert find_units([(read(text), RATE)], KNOWN).words["k"] == expected


def test_several_expressions_settle_more_than_one():
    both = [(read("k_1*k_2*[A]"), RATE), (read("k_2*[A]"), CONCENTRATION)]
    assert {n: u.text() for n, u in constant_units(both, KNOWN).items()} == {
        "k_1": "s⁻¹",
        "k_2": "",
    }


def test_a_constant_with_a_given_unit_helps():
    text = "k*[A]*exp(-E/(R*T))"
    expr = read(text)
    gas = next(s for s in expr.free_symbols if s.name == "R")
    unit = Unit.of({"energy": 1, "amount": -1, "temperature": -1})
    found = constant_units([(expr, RATE)], {**KNOWN, gas: unit})
    assert found["E"].text() == "J mol⁻¹"
    assert found["R"] == unit


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("k*([A] + [H2])", "terms of a sum have different units: [A] and [H2]"),
        ("[A]", "[A] cannot have the unit mol L⁻¹ s⁻¹"),
        ("k*exp([A])", "the argument of exp, [A], has a unit"),
        ("k*[A] + k*[B]^2", "terms of a sum have different units: k*[A] and k*[B]^2"),
        ("k*K*[A]/(1 + K*[A] + K*[H2])", "terms of a sum have different units"),
    ],
)
def test_contradictions(text, says):
    with pytest.raises(DiscrimError) as caught:
        find_units([(read(text), RATE)], KNOWN, place=Place(file="study.toml", line=4))
    assert says in caught.value.says
    assert str(caught.value).startswith("study.toml, line 4: ")


@pytest.mark.parametrize(
    ("text", "finding", "unit"),
    [
        ("k*[A]/(1 + 0.5*[A])", "A number in 1 + [A]/2 must carry a unit.", "mol L⁻¹ s⁻¹"),
        ("k*(1 + [A])", "A number in 1 + [A] must carry a unit.", "s⁻¹"),
        ("k*log([A])", "The argument of log([A]) has a unit.", "mol L⁻¹ s⁻¹"),
        ("2*k*[A] + 3*k*[B]", None, "s⁻¹"),
    ],
)
def test_numbers_that_stand_for_constants_are_a_finding(text, finding, unit):
    found = find_units([(read(text), RATE)], KNOWN)
    assert found.findings == ((finding,) if finding else ())
    assert found.units["k"].text() == unit


def test_typical_sizes_balance_the_terms():
    typical = {amount("A"): 20.0, amount("B"): 50.0, quantity("pH"): 5.0}
    scale = typical_scale([(read("k_A*[A] + k_B*[B]"), 1e-3)], typical)
    assert scale["k_A"] * 20 == pytest.approx(5e-4, rel=1e-3)
    assert scale["k_B"] * 50 == pytest.approx(5e-4, rel=1e-3)
    scale = typical_scale([(read("k*K_A*[A]/(1 + K_A*[A] + K_B*[B])^2"), 1e-3)], typical)
    assert scale["K_A"] * 20 == pytest.approx(1, rel=1e-3)
    assert scale["K_B"] * 50 == pytest.approx(1, rel=1e-3)
    assert scale["k"] / 9 == pytest.approx(1e-3, rel=1e-3)
    assert typical_scale([(read("k*10^(pKa - pH)*[A]^n"), 1.0)], typical) == pytest.approx(
        {"k": 1 / 20, "pKa": 5.0, "n": 1.0}, rel=1e-3
    )


@pytest.mark.parametrize("text", ["k*q*[A]", "exp(-E/(R*T))", "sqrt(k + [A]^2)/(1 + log(q))"])
@pytest.mark.parametrize("size", [0.0, 1e-300, 1e300, float("nan")])
def test_typical_sizes_are_always_positive_and_finite(text, size):
    scale = typical_scale([(read(text), size)], {amount("A"): 0.0})
    assert all(0 < v < float("inf") for v in scale.values())
