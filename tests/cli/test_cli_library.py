"""``discrim derive --library``: the list, the search, and what is said when nothing is found."""

import json
import subprocess
import sys

import pytest

from discrim import cli
from discrim.mechanism.catalogue import FIELDS
from discrim.mechanism.library import names


def printed(capsys, *arguments):
    assert cli.main(["derive", *arguments]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    return out


def test_the_list_holds_every_file_and_fits_80_columns(capsys):
    lines = printed(capsys, "--library").splitlines()
    assert max(map(len, lines)) <= 80
    first = {line.split()[0] for line in lines if line.startswith("  ") and line[2] != " "}
    assert first == set(names())
    assert [line.lower() for line in lines if line.lower() in FIELDS] == list(FIELDS)
    assert lines[-2].startswith(f"{len(names())} mechanisms. `discrim derive NAME` prints")


def test_search_by_words(capsys):
    out = printed(capsys, "--library", "uncompetitive")
    assert out.splitlines()[:2] == [
        "Enzymes",
        "  enzyme-uncompetitive  Inhibitor binds to the complex with substrate only",
    ]
    assert "1 mechanism for “uncompetitive”." in out


def test_quiet_prints_names_only(capsys):
    assert printed(capsys, "--library", "Ginstling", "--quiet") == "diffusion-through-shell\n"
    assert sorted(printed(capsys, "--library", "--quiet").split()) == list(names())
    assert printed(capsys, "--quiet", "--library", "nonesuch") == ""


def test_json_is_a_list_of_records(capsys):
    (one,) = json.loads(printed(capsys, "--library", "bromine", "collision", "--json")) or [None]
    assert one["name"] == "hydrogen-bromine-chain-by-collision"
    assert one["field"] == "chain reactions"
    assert one["holds"] == "steps"
    assert set(one["species"]) == {"Br2", "Br", "H2", "HBr", "H"}
    assert json.loads(printed(capsys, "--library", "nonesuch", "--json")) == []


def test_a_word_before_the_option_is_a_word_to_search(capsys):
    assert printed(capsys, "Ginstling", "--library", "--quiet") == "diffusion-through-shell\n"


def test_nothing_found(capsys):
    out = printed(capsys, "--library", "enzime")
    assert out.splitlines()[:2] == [
        "Nothing in the library matches “enzime”.",
        '  - "enzime" is in none. Did you mean "enzyme"?',
    ]
    assert "  - Fields: orders and simple schemes," in out


def test_without_a_study_it_says_what_can_be_named(capsys):
    assert cli.main(["derive"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith(
        "derive what?\nName a study, a mechanism file or a mechanism of the library"
    )
    assert "`discrim derive --library` lists the library" in err


def test_the_list_needs_no_numerical_library():
    code = (
        "import sys; from discrim.cli import main; main(['derive', '--library', '--quiet'])\n"
        "print([m for m in ('numpy', 'scipy', 'sympy', 'matplotlib') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


@pytest.mark.parametrize("name", ["contracting-volume", "enzyme-cooperative"])
def test_a_law_without_steps_is_printed(name, capsys):
    (law,) = json.loads(printed(capsys, name, "--json"))
    assert law["name"] == name
    assert law["steps"] == {}
    assert "was not derived from steps" in law["assumptions"][0]
    assert law["source"]
    text = printed(capsys, name)
    assert law["law"].split("*")[0] in text
    assert law["title"] in " ".join(text.split())


def test_a_law_file_of_ones_own(tmp_path, capsys):
    path = tmp_path / "own.toml"
    path.write_text('title = "Invented"\nlaw = "k*[A]^2*exp(-E/temperature)"\n')
    assert printed(capsys, str(path), "--quiet") == "own: k*exp(-E/temperature)*[A]^2\n"
