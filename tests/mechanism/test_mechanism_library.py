"""The shipped mechanisms, files beside a study, and renaming."""

import pytest

from discrim.errors import DiscrimError, Place
from discrim.mechanism.catalogue import FIELDS, entries, search, suggestions
from discrim.mechanism.check import catalyst_forms
from discrim.mechanism.library import folder, load, load_mechanism, names
from discrim.mechanism.model import WrittenLaw
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.rename import bind
from discrim.mechanism.written import from_toml


def test_every_file_has_a_title_a_field_and_a_source():
    listed = (folder() / "README.md").read_text(encoding="utf-8")
    assert len(entries()) == len(names()) >= 40
    for entry in entries():
        assert 10 < len(entry.title) <= 95, entry.name
        assert "\n" not in entry.title
        assert entry.field in FIELDS, entry.name
        assert len(entry.source) > 20, entry.name
        assert "memory" in entry.source, entry.name
        assert f"| `{entry.name}`" in listed, entry.name
        assert f"| {entry.title} |" in listed, entry.name
    assert listed.count("\n| `") == len(names())  # none that is not there
    assert {e.field for e in entries()} == set(FIELDS)
    assert {e.holds for e in entries()} == {"steps", "law"}


def test_fields_stand_together_in_their_order():
    fields = [e.field for e in entries()]
    assert list(dict.fromkeys(fields)) == list(FIELDS)
    assert fields == sorted(fields, key=FIELDS.index)


@pytest.mark.parametrize(
    ("words", "found", "not_found"),
    [
        (["enzyme", "inhibitor"], "enzyme-two-inhibitors", "enzyme-one-substrate"),
        (["Inhibitor", "ENZYME"], "enzyme-competitive", "enzyme-ordered-two-substrates"),
        (["HBr"], "hydrogen-bromine-chain", "hydrogen-chlorine-chain"),
        (["solid-state", "diffusion"], "diffusion-through-shell", "contracting-area"),
        (["Michaelis"], "enzyme-one-substrate", "enzyme-cooperative"),
        (["C2H6"], "ethane-chain", "first-order"),
        (["J"], "enzyme-two-inhibitors", "enzyme-competitive"),
        ([], "first-order", ""),
    ],
)
def test_search(words, found, not_found):
    hits = [e.name for e in search(words, entries())]
    assert found in hits
    assert not_found not in hits


def test_a_species_is_matched_as_written():
    """CO is carbon monoxide, not the beginning of a word."""
    assert all(
        "CO" in e.species for e in search(["CO"], entries()) if "co" not in " ".join(e.texts)
    )
    assert search(["rh"], entries()) == ()  # RH is a species, rh is nothing


def test_nothing_found_says_what_to_try():
    every = entries()
    assert search(["enzime"], every) == ()
    assert suggestions(["enzime"], every)[0] == '"enzime" is in none. Did you mean "enzyme"?'
    hints = suggestions(["bromine", "enzyme"], every)
    assert hints[0].startswith('"bromine" alone is in ')
    assert hints[-1].startswith("Fields: ")


def test_unknown_name_gets_the_nearest(tmp_path):
    with pytest.raises(DiscrimError) as caught:
        load_mechanism("complex-then-produce", tmp_path, place=Place(file="study.toml", line=3))
    assert 'Did you mean "complex-then-product"?' in str(caught.value)
    assert str(caught.value).startswith("study.toml, line 3")


TEXT = 'title = "t"\n[steps]\nads = "A + * <=> A*"\ngo = "A* -> P"\n'


@pytest.mark.parametrize(
    ("name", "says"),
    [
        ("../m.toml", "leads outside the folder"),
        ("sub/../../m.toml", "leads outside the folder"),
        ("/etc/passwd", "leads outside the folder"),
        ("..\\m.toml", "leads outside the folder"),
        ("C:/m.toml", "leads outside the folder"),
        ("missing.toml", "cannot be read"),
        ("bytes.toml", "is not text in UTF-8"),
        ("big.toml", "is larger than"),
        ("link.toml", "leads outside the folder"),
    ],
)
def test_paths_stay_below_the_study(tmp_path, name, says):
    base = tmp_path / "study"
    base.mkdir()
    (tmp_path / "m.toml").write_text(TEXT)
    (base / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    (base / "big.toml").write_text("#" * 1_100_000)
    (base / "link.toml").symlink_to(tmp_path / "m.toml")
    with pytest.raises(DiscrimError, match=says):
        load_mechanism(name, base)


def test_a_step_of_a_file_is_pointed_at(tmp_path):
    (tmp_path / "m.toml").write_text(TEXT)
    with pytest.raises(DiscrimError) as caught:
        load_mechanism("m.toml", tmp_path)
    assert str(caught.value) == (
        "m.toml, line 4, step go: sites do not balance\n"
        '    go = "A* -> P"\n'
        "                ^\n"
        "1 site on the left, 0 on the right. Write the freed site too: A* -> P + *"
    )


@pytest.mark.parametrize(
    ("text", "says", "line"),
    [
        ("law = 3", "law is not text", 1),
        ("field = 3\n[steps]\na = 'A -> B'", "field is not text", 1),
        ("law = 'k*[A]'\n[steps]\na = 'A -> B'", '"steps" belongs to a mechanism with steps', 2),
        ("law = 'k*[A]'\nsites = ['*']", '"sites" belongs to a mechanism with steps', 2),
        ("overall = 'A -> B'\n[steps]\na = 'A -> B'", '"overall" belongs to a law', 1),
        ("law = 'k*[A]'\noverall = 'A, B'", "no arrow", 2),
        ("title = 3\n[steps]\na = 'A -> B'", "title is not text", 1),
        ("steps = 3", "steps is not a table", 1),
        ("\ntilte = 'x'\n[steps]\na = 'A -> B'", 'unknown key "tilte"', 2),
        ("[steps]\na = 'A -> B'\n[asume]\nlimiting = 'a'", 'unknown key "asume"', 3),
        ("overall_equilibrium = 'K'\n[steps]\na = 'A <=> B'", "unknown key", 1),
        ("[steps]\na = A -> B", "no valid TOML", 2),
        ("[steps]\na = 'A -> B'\na = 'B -> C'", "no valid TOML", 3),
    ],
)
def test_files_that_are_wrong(text, says, line):
    with pytest.raises(DiscrimError, match=says) as caught:
        from_toml(text, file="m.toml", name="m")
    assert caught.value.place.file == "m.toml"
    assert caught.value.place.line == line


def test_an_assumption_outside_its_table_is_sent_there():
    with pytest.raises(DiscrimError) as caught:
        from_toml("limiting = 'a'\n[steps]\na = 'A -> B'", file="m.toml", name="m")
    assert caught.value.do == "Write it under [assume]."


def test_bind_renames_everywhere(tmp_path):
    mechanism = load_mechanism("surface-reaction-two-adsorbed", tmp_path)
    bound = bind(mechanism, {"A": "H2", "B": "C2H4"})
    assert [s.text for s in bound.steps] == [
        "H2 + * <=> H2*",
        "C2H4 + * <=> C2H4*",
        "H2* + C2H4* -> P + 2 *",
    ]
    swapped = bind(mechanism, {"A": "B", "B": "A"})
    assert swapped.steps[0].text == "B + * <=> B*"
    enzyme = bind(load_mechanism("enzyme-one-substrate", tmp_path), {"E": "urease", "S": "urea"})
    assert enzyme.catalyst == ("urease",)


@pytest.mark.parametrize(
    ("names_of", "says"),
    [
        ({"Q": "X"}, "no species of the mechanism"),
        ({"A": "B"}, "one species"),
        ({"A": "P"}, "one species"),
        ({"A": "a b"}, "no name of a species"),
        ({"A": "A*"}, "no name of a species"),
        ({"A": "[A]"}, "no name of a species"),
        ({"A": ""}, "no name of a species"),
        ({"A": 3}, "no name of a species"),
    ],
)
def test_bind_refuses(tmp_path, names_of, says):
    mechanism = load_mechanism("surface-reaction-two-adsorbed", tmp_path)
    with pytest.raises(DiscrimError, match=says):
        bind(mechanism, names_of)


@pytest.mark.parametrize(
    ("steps", "forms"),
    [
        ({"b": "E + S <=> ES", "t": "ES -> E + P", "i": "E + I <=> EI"}, {"E", "ES", "EI"}),
        (
            {"a": "E + A <=> EA", "p": "EA <=> F + P", "b": "F + B <=> FB", "q": "FB <=> E + Q"},
            {"E", "EA", "F", "FB"},
        ),
        ({"d": "E + I <=> EI", "f": "EI + I <=> EI2", "t": "E + S -> E + P"}, {"E", "EI", "EI2"}),
    ],
)
def test_forms_of_a_catalyst(steps, forms):
    mechanism = parse_mechanism(name="x", steps=steps, catalyst=["E"])
    assert {s.name for s in catalyst_forms(mechanism, "E")} == forms


def test_a_file_with_a_law(tmp_path):
    (tmp_path / "m.toml").write_text(
        "title = 't'\nlaw = 'k*[A]*[ B- ]/(1 + a*[A])'\noverall = '2 A + B- -> P'\n"
    )
    law = load("m.toml", tmp_path)
    assert isinstance(law, WrittenLaw)
    assert law.place.line == 2
    bound = bind(law, {"A": "H2", "B-": "A", "P": "Q"})
    assert bound.text == "k*[H2]*[A]/(1 + a*[H2])"
    assert bound.overall.text == "2 H2 + A -> Q"
    with pytest.raises(DiscrimError, match=r'renames "a", which is no species'):
        bind(law, {"a": "X"})
    with pytest.raises(DiscrimError, match="one species"):
        bind(law, {"A": "P"})
    with pytest.raises(DiscrimError, match="holds a law, not steps"):
        load_mechanism("m.toml", tmp_path)


def test_a_law_without_its_reaction(tmp_path):
    (tmp_path / "m.toml").write_text("law = 'k*[A]'\n")
    law = load("m.toml", tmp_path)
    assert law.overall is None
    assert bind(law, {"A": "H2"}).text == "k*[H2]"


def test_hostile_law_files():
    """Brackets without end are read in no time, and a law whose line is not found has a place."""
    law = from_toml(f"law = '{'[' + ' ' * 400_000}'", file="m.toml", name="m")
    assert bind(law, {}).text == law.text
    hidden = 'note = """\n[steps]\n"""\nlaw = "k*[A]"\noverall = "A -> B"\n'
    found = from_toml(hidden, file="m.toml", name="m")
    assert found.place.file == "m.toml"
    assert bind(found, {"A": "C"}).overall.text == "C -> B"
