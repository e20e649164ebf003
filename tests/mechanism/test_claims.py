"""Each mistake in a mechanism has a message that points at its step and says what to do.

What counts as a mistake is common practice, no source, but for two: microscopic reversibility
(R. C. Tolman, Proc. Natl. Acad. Sci. 11 (1925) 436, from memory), by which a circle of steps
without net reaction is at equilibrium, and that no elementary step with more than three molecules
is known (K. J. Laidler, Chemical Kinetics, 3rd ed., 1987, from memory).
"""

import pytest

from discrim.errors import DiscrimError, Place
from discrim.mechanism.check import species_of
from discrim.mechanism.library import load_mechanism, names
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.routes import routes_of
from discrim.mechanism.unlikely import warnings_of
from discrim.ratelaw.derive import derive

ADSORBED = {"ads": "A + * <=> A*", "ads_P": "P + * <=> P*", "turn": "A* <=> P*"}

# what is wrong: (steps, keywords, step pointed at, says, part of what to do)
MISTAKES = {
    "sites do not balance": (
        {"ads": "A + * <=> A*", "go": "A* -> P"}, {}, "go",
        "sites do not balance", "A* -> P + *",
    ),
    "elements do not balance": (
        {"a": "A -> B", "b": "B -> C"},
        {"species": {"B": {"formula": "CH4"}, "C": {"formula": "CH3"}}}, "b",
        "elements do not balance", "H: 4 on the left, 3 on the right",
    ),
    "charge does not balance": (
        {"a": "A -> B", "b": "B -> C"},
        {"species": {"B": {"charge": 1}, "C": {"charge": 0}}}, "b",
        "charge does not balance", "charge: 1 on the left",
    ),
    "nothing changes": (
        {"a": "A -> P", "b": "A + B -> B + A"}, {}, "b", "nothing changes", "leave it out",
    ),
    "written twice": (
        {"a": "A + B -> P", "b": "B + A -> P"}, {}, "b",
        'step "b" is the same as step "a"', 'Leave "b" out',
    ),
    "written twice, once in one direction": (
        {"a": "A -> P", "b": "A <=> P"}, {}, "b",
        'step "b" is the same as step "a"', 'Leave "a" out',
    ),
    "written again backwards": (
        {"a": "A <=> P", "b": "P -> A"}, {}, "b",
        'step "b" is step "a" read backwards', '"a" is written with <=>',
    ),
    "backwards first": (
        {"a": "A -> P", "b": "P <=> A"}, {}, "b",
        'step "b" is step "a" read backwards', 'Leave "a" out',
    ),
    "never made": (
        {"ads": "A + * <=> A*", "go": "A* + B* -> P + 2 *"}, {}, "go",
        '"B*" is consumed but never made', "Write the missing step",
    ),
    "never consumed": (
        {"ads": "A + * <=> A*", "go": "A* -> P*"}, {}, "go",
        '"P*" is made but never consumed', "Write the missing step",
    ),
    "steady but only made": (
        {"a": "A -> X", "b": "A -> P"}, {"assume": {"steady": ["X"]}}, "a",
        '"X" is made but never consumed', "steady state",
    ),
    "a reactant named steady": (
        {"a": "A -> P"}, {"assume": {"steady": ["A"]}}, "a",
        '"A" is consumed but never made', "steady state",
    ),
    "made only from itself": (
        {"branch": "X + A -> 2 X", "end": "X -> P"}, {"assume": {"steady": ["X"]}}, "branch",
        '"X" is made only from itself', "such as an initiation",
    ),
    "two radicals that only make each other": (
        {"one": "X + A -> 2 Y", "two": "Y + B -> X + P", "end": "2 X -> Q"},
        {"assume": {"steady": ["X", "Y"]}}, "two",
        '"X" is made only from species that come from it', "initiation",
    ),
    "a reactant that a step gives back, guessed to be an intermediate": (
        {"i": "Br2 -> 2 Br", "t": "2 Br -> Br2", "p1": "Br + H2 -> HBr + H",
         "p2": "H + Br2 -> HBr + Br"}, {}, "t",
        '"Br2" is made only from species that come from it',
        "Taken as intermediates here: Br2, Br, H. If one of them is a reactant",
    ),
    "a surface species that vacant sites never lead to": (
        {"ads": "A + * <=> A*", "go": "A* -> P + *", "one": "C* <=> D*"}, {}, "one",
        '"C*" is made only from', "a vacant site",
    ),
    "limiting and equilibrated": (
        {"ads": "A + * <=> A*", "go": "A* -> P + *"},
        {"assume": {"equilibrated": ["ads"], "limiting": "ads"}}, "ads",
        "both limiting and equilibrated", "take it out of one of the two",
    ),
    "equilibrated but in one direction": (
        {"ads": "A + * <=> A*", "go": "A* -> P + *"}, {"assume": {"equilibrated": ["go"]}}, "go",
        "written in one direction", "A* <=> P + *",
    ),
    "limiting within an equilibrium": (
        {**ADSORBED, "direct": "A <=> P"},
        {"assume": {"limiting": "turn", "equilibrated": ["ads", "ads_P", "direct"]}}, "turn",
        'the limiting step "turn" is at equilibrium already, over ads, ads_P and direct',
        "out of equilibrated",
    ),
    "limiting within an equilibrium that was not meant": (
        {**ADSORBED, "direct": "A <=> P"}, {"assume": {"limiting": "turn"}}, "turn",
        "at equilibrium already", "name under equilibrated those that are",
    ),
    "limiting one way along an equilibrium": (
        {"a": "A <=> X", "b": "X <=> Y", "c": "Y -> A", "d": "Y -> P"},
        {"assume": {"limiting": "c", "equilibrated": ["a", "b"]}}, "c",
        "at equilibrium already, over a and b", "name another step as limiting",
    ),
    "limiting but leads nowhere": (
        {"ads": "A + * <=> A*", "go": "A* -> P + *", "hold": "I + * <=> I*"},
        {"assume": {"limiting": "hold", "equilibrated": ["ads"]}}, "hold",
        'the limiting step "hold" carries no net rate', "ads and go carry a net rate",
    ),
    "limiting after a step that sets the rate": (
        {"a": "A -> X", "b": "X -> P"},
        {"assume": {"limiting": "b"}}, "b",
        'step "b" is called limiting, but its constant is not in the law',
        "The rate is set by a.",
    ),
    "a catalyst that is not set free": (
        {"a": "E + S <=> ES", "b": "ES -> P"}, {"catalyst": ["E"]}, "a",
        'the catalyst "E" is not conserved', "sets it free",
    ),
    "constants of one name": (
        {"a": "A <=> B", "rev_a": "B -> C"}, {}, "a", "would share the constant", "Rename",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", MISTAKES)
def test_the_message_points_at_the_step(case):
    steps, keywords, at, says, do = MISTAKES[case]
    places = {
        name: Place("m.toml", 10 + i, 1, len(name), f'{name} = "{text}"')
        for i, (name, text) in enumerate(steps.items())
    }
    with pytest.raises(DiscrimError) as caught:
        derive(parse_mechanism(name="m", steps=steps, places=places, **keywords))
    assert says in caught.value.says
    assert do in caught.value.do
    place = caught.value.place
    assert place.line == 10 + list(steps).index(at)
    assert f"step {at}" in place.what
    assert steps[at] in place.text


RIGHT = {
    "each way with a name of its own": ({"a": "A -> P", "b": "P -> A"}, {}),
    "a circle of which one step is left to follow": (
        {"a": "E + A <=> EA", "b": "E + B <=> EB", "ab": "EA + B <=> EAB", "ba": "EB + A <=> EAB",
         "turn": "EAB -> E + P"},
        {"catalyst": ["E"], "assume": {"limiting": "turn"}},
    ),
    "no vacant site among the forms of a surface": (
        {"red": "A + O* -> AO + R*", "ox": "O2 + 2 R* -> 2 O*"}, {},
    ),
    "a radical that an initiator makes": (
        {"begin": "I -> 2 R", "branch": "R + A -> 2 R", "end": "R -> P"}, {},
    ),
    "a catalysed step beside the one without": (
        {"a": "A -> P", "b": "A + H+ -> P + H+"}, {},
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", RIGHT)
def test_what_is_right_is_not_refused(case):
    steps, keywords = RIGHT[case]
    parse_mechanism(name="m", steps=steps, **keywords)


# steps and the step warned of, what is said
WARNINGS = {
    "four molecules": (
        {"a": "A + B + C + D -> P"}, ["Step a", "4 molecules would have to meet at once"],
    ),
    "counted, not named": ({"a": "2 A + 2 B -> P"}, ["Step a", "4 molecules"]),
    "backwards": (
        {"a": "A <=> 2 B + 2 C"}, ["Step a", "backwards: 4 molecules"],
    ),
    "a molecule and three sites": (
        {"a": "A + 3 * <=> A***", "b": "A*** -> P + 3 *"}, ["Step a", "a molecule and 3 sites"],
    ),
    "one step of a circle in one direction": (
        {"a": "A + * <=> A*", "b": "A* <=> B*", "c": "B* -> C*", "d": "C* -> A*", "e": "B* -> P + *"},
        ["Step d", "with b and c it closes a circle", "<=>"],
    ),
}  # fmt: skip


def warned(mechanism):
    inner = [s for s in species_of(mechanism) if s.site]
    return warnings_of(mechanism, routes_of(mechanism, inner))


@pytest.mark.parametrize("case", WARNINGS)
def test_improbable_steps_are_warned_of(case):
    steps, words = WARNINGS[case]
    places = {n: Place("m.toml", 4 + i, 1, 1, t) for i, (n, t) in enumerate(steps.items())}
    said = warned(parse_mechanism(name="m", steps=steps, places=places))
    assert len(said) == 1
    assert all(w in said[0] for w in words)
    assert f"(m.toml, line {4 + list(steps).index(words[0].split()[1])})" in said[0]


@pytest.mark.parametrize(
    "steps",
    [
        {"a": "2 NO + O2 -> 2 NO2"},
        {"a": "A2 + 2 * <=> 2 A*", "b": "A* -> P + *"},
        {"a": "A -> 2 B + 2 C"},  # four leave, they need not meet
        {"a": "Br + H2 -> HBr + H", "b": "H + HBr -> H2 + Br"},  # each the way back of the other
    ],
)
def test_ordinary_steps_are_not_warned_of(steps):
    assert warned(parse_mechanism(name="m", steps=steps)) == ()


def test_the_library_is_free_of_warnings(tmp_path):
    derived = 0
    for name in names():
        try:
            mechanism = load_mechanism(name, tmp_path)
        except DiscrimError:
            continue  # it holds a law, not steps
        derived += 1
        assert warned(mechanism) == (), name
    assert derived > 40


def test_a_law_carries_pathways_and_warnings():
    law = derive(parse_mechanism(name="m", steps={"a": "2 A + 2 B -> P", "b": "A -> P"}))
    assert [(r.name, r.text) for r in law.routes] == [("a", "2 A + 2 B -> P"), ("b", "A -> P")]
    assert len(law.warnings) == 1


def test_a_measured_species_at_steady_state_is_a_finding():
    mechanism = parse_mechanism(
        name="m", steps={"a": "A <=> X", "b": "X -> P"}, assume={"steady": ["X"]}
    )
    law = derive(mechanism, measured=frozenset({"A", "X"}))
    assert any("X is measured, but taken at steady state" in f for f in law.findings)
