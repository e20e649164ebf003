"""Text of steps -> records, and what is said about text that is no step."""

import pytest

from discrim.errors import DiscrimError, Place
from discrim.mechanism.formula import elements
from discrim.mechanism.model import Species
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.step import parse_step

A, B, C = Species("A"), Species("B"), Species("C")
SITE = Species("*", "*", 1)

GOOD = {
    "A -> B": ([(A, 1)], [(B, 1)], False),
    "A + 2 B -> C": ([(A, 1), (B, 2)], [(C, 1)], False),
    "A <=> B": ([(A, 1)], [(B, 1)], True),
    "A + A -> B": ([(A, 2)], [(B, 1)], False),
    "  A   +  B  ->  C ": ([(A, 1), (B, 1)], [(C, 1)], False),
    "H+ + OH- <=> H2O": (
        [(Species("H+"), 1), (Species("OH-"), 1)],
        [(Species("H2O"), 1)],
        True,
    ),
    "SO4^2- + H+ <=> HSO4-": (
        [(Species("SO4^2-"), 1), (Species("H+"), 1)],
        [(Species("HSO4-"), 1)],
        True,
    ),
    "A + * <=> A*": ([(A, 1), (SITE, 1)], [(Species("A*", "*", 1), 1)], True),
    "A2 + 2 * <=> 2 A*": (
        [(Species("A2"), 1), (SITE, 2)],
        [(Species("A*", "*", 1), 2)],
        True,
    ),
    "A + 2 * <=> A**": ([(A, 1), (SITE, 2)], [(Species("A**", "*", 2), 1)], True),
    "2-butanol -> 1,3-butadiene": (
        [(Species("2-butanol"), 1)],
        [(Species("1,3-butadiene"), 1)],
        False,
    ),
    "Fe(CN)6^3- + e- -> Fe(CN)6^4-": (
        [(Species("Fe(CN)6^3-"), 1), (Species("e-"), 1)],
        [(Species("Fe(CN)6^4-"), 1)],
        False,
    ),
    "N(CH3)4+ -> B": ([(Species("N(CH3)4+"), 1)], [(B, 1)], False),
    "β-pinene -> B": ([(Species("β-pinene"), 1)], [(B, 1)], False),
}


@pytest.mark.parametrize("text", GOOD)
def test_steps(text):
    left, right, reversible = GOOD[text]
    step = parse_step("s", text)
    assert list(step.left) == left
    assert list(step.right) == right
    assert step.reversible is reversible
    assert step.text == text


# text -> (says, underlined, part of what to do)
BAD = {
    "2O* -> O2": ('"2O*" begins with a number', "2O*", "write 2 O*"),
    "O2 + 2* <=> 2 O*": ('"2*" is a number on a site', "2*", "write 2 *"),
    "E+ B -> C": ('"E+ B" has no + with a space', "E+ B", "write E + B"),
    "E +B -> C": ('"E +B" has no + with a space', "+B", "write E + B"),
    "E+B -> C": ('"E+B" has a + inside', "E+B", "E + B"),
    "A B -> C": ('"A B" has no + with a space', "B", "write A + B"),
    "A + B": ("no arrow", "A + B", "->"),
    "A = B": ('"=" is no arrow here', "=", "<=>"),
    "A → B": ('"→" is no arrow here', "→", "->"),
    "A <-> B": ('"<->" is no arrow here', "<->", "<=>"),
    "A --> B": ('"-->" is no arrow here', "-->", "->"),
    "A <- B": ('"<-" is no arrow here', "<-", "->"),
    "A -> B -> C": ("more than one arrow", "->", "on its own"),
    "A->B": ("no space beside the arrow", "->", "A -> B"),
    "-> B": ("the left side is empty", "-", "at least one species"),
    "A ->": ("the right side is empty", ">", "at least one species"),
    "A + -> B": ("a species is missing after this +", "+", "A + B"),
    "+ A -> B": ("a species is missing before this +", "+", "A + B"),
    "2 -> B": ("a coefficient without a species", "2", "2 A"),
    "10 A -> B": ("a coefficient above 9", "10", "1 to 9"),
    "0 A -> B": ("a coefficient of 0", "0", "whole coefficients"),
    "0.5 A -> B": ("a coefficient of 0.5", "0.5", "multiply the step"),
    "1/2 A -> B": ("a coefficient of 1/2", "1/2", "multiply the step"),
    "A -> A": ("nothing changes in this step", "A -> A", "leave it out"),
    "A# -> B": ('"A#" uses the site sign #', "A#", 'sites = ["*", "#"]'),
    "*A -> B": ('"*A" begins with the sign of a site', "*A", "A*"),
    "A + ** -> B": ('"**" is no species', "**", "2 *"),
    "[A] -> B": ('"[A]" is no name of a species', "[A]", "letters, digits"),
    '__import__("os") -> B': ("is no name of a species", '__import__("os")', "letters, digits"),
    "<b>A</b> -> B": ("is no name of a species", "<b>A</b>", "letters, digits"),
}


@pytest.mark.parametrize("text", BAD)
def test_bad_steps_say_what_is_wrong_and_where(text):
    says, underlined, do = BAD[text]
    with pytest.raises(DiscrimError) as caught:
        parse_step("s", text)
    assert says in caught.value.says
    place = caught.value.place
    found = place.text[place.column - 1 : place.column - 1 + place.length]
    assert found == underlined
    assert do in caught.value.do


def test_the_whole_message_points_into_the_file():
    line = 'surface = "A* + B* -> C*"'
    place = Place(file="study.toml", line=7, text=line)
    with pytest.raises(DiscrimError) as caught:
        parse_mechanism(
            name="dual-site", steps={"surface": line.split('"')[1]}, places={"surface": place}
        )
    assert str(caught.value) == (
        'study.toml, line 7, mechanism "dual-site", step surface: sites do not balance\n'
        '    surface = "A* + B* -> C*"\n'
        "                          ^^\n"
        "2 sites on the left, 1 on the right. Write the freed site too: A* + B* -> C* + *"
    )


BALANCE = {
    "A* -> B": "Write the freed site too: A* -> B + *",
    "A -> B*": "Write the vacant site too: A + * -> B*",
    "A2 + * <=> 2 A*": "Write the vacant site too: A2 + 2 * <=> 2 A*",
    "A** -> B": "Write the freed sites too: A** -> B + 2 *",
}


@pytest.mark.parametrize("text", BALANCE)
def test_sites_balance(text):
    with pytest.raises(DiscrimError, match="sites do not balance") as caught:
        parse_mechanism(name="x", steps={"s": text})
    assert BALANCE[text] in caught.value.do


def test_hostile_text_is_refused_quickly():
    for text in ("A" * 10_000_000 + " -> B", "A -> B" * 1000, "A\n-> B", "A\x1b[31m -> B"):
        with pytest.raises(DiscrimError) as caught:
            parse_step("s", text)
        assert len(str(caught.value)) < 500
    with pytest.raises(DiscrimError, match="at most 60"):
        parse_mechanism(name="x", steps={f"s{i}": "A -> B" for i in range(61)})


def assume(**kw):
    return {
        "name": "x",
        "steps": {"ads": "A + * <=> A*", "go": "A* -> P + *"},
        "assume": kw,
    }


ASSUMPTIONS = [
    (assume(equilibrated=["asd"]), 'no step is called "asd"', 'Did you mean "ads"?'),
    (assume(limiting="gone"), 'no step is called "gone"', 'Did you mean "go"?'),
    (assume(equilibrated=["ads"], limiting="ads"), "both limiting and equilibrated", "take it out"),
    (assume(equilibrated=["go"]), "written in one direction", "A* <=> P + *"),
    (assume(equilbrated=["ads"]), 'unknown key "equilbrated"', 'Did you mean "equilibrated"?'),
    (assume(limiting=["ads", "go"]), "more than one step", "Name one limiting step"),
    (assume(steady=["Q"]), 'species "Q" stands in no step', "Species: A, *, A*, P"),
    (assume(equilibrated=["ads", "ads"]), "twice", "once"),
    (assume(overall_equilibrium="1/K"), "no name for a constant", "K_eq"),
    ({"name": "x", "steps": {}}, "no steps", "at least one step"),
    ({"name": "x", "steps": {"1st": "A -> B"}}, "is no name for a step", "letters, digits"),
    ({"name": "x", "steps": {"s": 3}}, "found int", "in quotes"),
    (
        {"name": "x", "steps": {"a": "A <=> B", "rev_a": "B -> C"}},
        "would share the constant k_rev_a",
        "Rename",
    ),
    (
        {"name": "x", "steps": {"a": "A -> B"}, "sites": ["s"]},
        '"s" cannot be the sign of a site',
        "* #",
    ),
    (
        {"name": "x", "steps": {"b": "E + S -> ES"}, "catalyst": ["E"]},
        'the catalyst "E" is not conserved',
        "sets it free",
    ),
    (
        {"name": "x", "steps": {"ads": "A + * -> A*"}},
        '"*" is consumed but never made',
        "steady state",
    ),
    (
        {"name": "x", "steps": {"a": "A -> B"}, "species": {"C": {"charge": 0}}},
        'species "C" is described but stands in no step',
        "Species: A, B",
    ),
    (
        {
            "name": "x",
            "steps": {"a": "A -> B"},
            "species": {"A": {"formula": "CH4"}, "B": {"formula": "CH3"}},
        },
        "elements do not balance",
        "H: 4 on the left, 3 on the right",
    ),
    (
        {
            "name": "x",
            "steps": {"a": "A -> B"},
            "species": {"A": {"charge": 1}, "B": {"charge": 0}},
        },
        "charge does not balance",
        "charge: 1 on the left, 0 on the right",
    ),
    (
        {"name": "x", "steps": {"a": "A -> B"}, "species": {"A": {"formla": "CH4"}}},
        'unknown key "formla"',
        'Did you mean "formula"?',
    ),
]


@pytest.mark.parametrize("case", range(len(ASSUMPTIONS)))
def test_what_cannot_be_is_refused(case):
    given, says, do = ASSUMPTIONS[case]
    with pytest.raises(DiscrimError) as caught:
        parse_mechanism(**given)
    assert says in caught.value.says
    assert do in caught.value.do


FORMULAS = {
    "C4H8O2": {"C": 4, "H": 8, "O": 2},
    "H2O": {"H": 2, "O": 1},
    "Ca(OH)2": {"Ca": 1, "O": 2, "H": 2},
    "Al2(SO4)3.18H2O": {"Al": 2, "S": 3, "O": 30, "H": 36},
    "[Co(NH3)6]Cl3": {"Co": 1, "N": 6, "H": 18, "Cl": 3},
    "CO": {"C": 1, "O": 1},
    "Co": {"Co": 1},
}


@pytest.mark.parametrize("text", FORMULAS)
def test_formulas(text):
    assert elements(text) == FORMULAS[text]


@pytest.mark.parametrize(
    "text", ["", "Xx2", "C4H8O2)", "(CH3", "c6h6", "H2O+", "(" * 30, "C" * 999]
)
def test_bad_formulas(text):
    with pytest.raises(DiscrimError, match="the formula"):
        elements(text)


def test_dissociation_balances_where_formulas_are_given():
    mechanism = parse_mechanism(
        name="x",
        steps={"d": "HA <=> H+ + A-"},
        species={
            "HA": {"formula": "C2H4O2", "charge": 0},
            "H+": {"formula": "H", "charge": 1},
            "A-": {"formula": "C2H3O2", "charge": -1},
        },
    )
    assert mechanism.charges["A-"] == -1
