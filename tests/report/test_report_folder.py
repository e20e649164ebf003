"""The results folder: moved into place whole, never over others' files, safe in a spreadsheet."""

import csv
import json

import pytest

from discrim.errors import DiscrimError
from discrim.report import figures, folder
from discrim.report.folder import as_json, cell, load_evidence, run_rows, write_report
from tests.report import sample


@pytest.fixture
def quick(monkeypatch):
    """No figures: they have their own tests and take the time."""
    monkeypatch.setattr(figures, "draw", lambda document: [])


def everything_in(path):
    return {str(p.relative_to(path)): p.read_bytes() for p in path.rglob("*") if p.is_file()}


def test_what_is_written(tmp_path):
    out = write_report(sample.two_amines(), tmp_path / "results" / "amines")
    names = set(everything_in(out))
    assert {"report.html", "evidence.json", "candidates.csv", "constants.csv", "runs.csv"} < names
    assert {"figures/effects.svg", "figures/effects.png", "figures/plane-1.svg"} < names
    assert [p.name for p in out.parent.iterdir()] == ["amines"]
    png = (out / "figures" / "effects.png").read_bytes()
    assert png.startswith(b"\x89PNG")
    assert b"Software" not in png
    svg = (out / "figures" / "effects.svg").read_text()
    assert svg.startswith("<svg")
    assert "<dc:date>" not in svg


def test_same_document_same_files(tmp_path):
    for name in ("a", "b"):
        write_report(sample.two_amines(decided=True), tmp_path / name)
    assert everything_in(tmp_path / "a") == everything_in(tmp_path / "b")


@pytest.mark.parametrize("name", sample.ALL)
def test_the_saved_document_comes_back(name, tmp_path, quick):
    document = sample.ALL[name]()
    out = write_report(document, tmp_path / "r")
    assert load_evidence(out) == load_evidence(out / "evidence.json") == document


def test_json_is_strict():
    assert json.loads(as_json({"a": [1, 2.5, None], "b": [{"c": []}], "d": {}})) == {
        "a": [1, 2.5, None],
        "b": [{"c": []}],
        "d": {},
    }
    with pytest.raises(ValueError, match="not JSON compliant"):
        as_json({"a": float("nan")})


def test_own_results_are_replaced_and_the_users_files_kept(tmp_path, quick):
    out = write_report(sample.two_amines(), tmp_path / "r")
    (out / "my notes.txt").write_text("do not lose me")
    write_report(sample.catalyst(), out)
    assert load_evidence(out)["title"] == "Which species must be adsorbed?"
    assert (out / "my notes.txt").read_text() == "do not lose me"
    assert [p.name for p in tmp_path.iterdir()] == ["r"]


def test_what_others_made_is_left_alone(tmp_path, quick):
    theirs = tmp_path / "thesis"
    theirs.mkdir()
    (theirs / "chapter.tex").write_text("years of work")
    with pytest.raises(DiscrimError) as problem:
        write_report(sample.two_amines(), theirs)
    assert str(problem.value) == (
        f"{theirs}: this folder holds files that discrim did not make, and is left alone\n"
        "Choose a new or empty folder with --out."
    )
    assert everything_in(theirs) == {"chapter.tex": b"years of work"}
    # A file that only has the name of ours does not make the folder ours.
    (theirs / "evidence.json").write_text("[]")
    with pytest.raises(DiscrimError, match="is left alone"):
        write_report(sample.two_amines(), theirs)
    with pytest.raises(DiscrimError, match="a file stands where the results folder should be"):
        write_report(sample.two_amines(), theirs / "chapter.tex")


def test_an_empty_folder_may_be_used(tmp_path, quick):
    (tmp_path / "r").mkdir()
    write_report(sample.two_amines(), tmp_path / "r")
    assert load_evidence(tmp_path / "r")


@pytest.mark.parametrize("problem", [KeyboardInterrupt, RuntimeError, ValueError])
def test_a_crash_leaves_the_old_results(tmp_path, quick, monkeypatch, problem):
    out = write_report(sample.two_amines(), tmp_path / "r")
    before = everything_in(out)

    def crash(*_):
        raise problem("in the middle")

    monkeypatch.setattr(folder, "_write_csv", crash)
    with pytest.raises(problem):
        write_report(sample.catalyst(), out)
    assert everything_in(out) == before
    assert [p.name for p in tmp_path.iterdir()] == ["r"]


def test_a_full_disk_is_said_plainly(tmp_path, quick, monkeypatch):
    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(folder, "_move_into_place", full)
    with pytest.raises(DiscrimError) as problem:
        write_report(sample.two_amines(), tmp_path / "r")
    assert "the results cannot be written: No space left on device" in str(problem.value)
    assert "Nothing was overwritten." in str(problem.value)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (None, "there is no saved evidence here"),
        ("{", "this is not a file of saved evidence"),
        ("[" * 100_000, "this is not a file of saved evidence"),
        ("[]", 'it has no "format"'),
        ('{"title": 1}', 'it has no "format"'),
        ('{"format": 7}', "has format 7; this version of discrim reads format 1"),
    ],
)
def test_saved_evidence_that_cannot_be_used(tmp_path, text, expected):
    if text is not None:
        (tmp_path / "evidence.json").write_text(text)
    with pytest.raises(DiscrimError) as problem:
        load_evidence(tmp_path)
    assert expected in str(problem.value)
    assert str(tmp_path / "evidence.json") in str(problem.value)
    assert "discrim weigh" in str(problem.value)


@pytest.mark.parametrize(
    ("item", "expected"),
    [
        ("=1+1", "'=1+1"),
        ("+cmd|' /C calc'!A0", "'+cmd|' /C calc'!A0"),
        ("-x", "'-x"),
        ("@sum", "'@sum"),
        ("\t=1", "'=1"),
        ("-5", "-5"),
        ("A-", "A-"),
        (-1.5, "-1.5"),
        (1.5e-7, "1.5e-07"),
        (True, "true"),
        (None, ""),
        (["=a", "b"], "'=a; b"),
        ({"a": 1}, ""),
    ],
)
def test_a_spreadsheet_runs_nothing(item, expected):
    assert cell(item) == expected


def test_csv_files_hold_the_fits(tmp_path, quick):
    document = sample.two_amines()
    out = write_report(document, tmp_path / "r")
    with (out / "runs.csv").open(newline="", encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert len(rows) == 8
    fitted = document["candidates"][0]["fitted"][3]
    assert float(rows[3]["predicted rate, two pathways [umol/L/s]"]) == fitted["predicted"]
    assert float(rows[3]["residual rate, two pathways [umol/L/s]"]) == fitted["residual"]
    assert rows[3]["operator"] == "south"
    with (out / "constants.csv").open(newline="", encoding="utf-8") as stream:
        first = next(csv.DictReader(stream))
    assert first["reconciled_low_end"] == "bound"
    assert first["reconciled_high"] == ""
    assert first["reconciled_high_end"] == "open"


def test_an_excluded_run_has_no_prediction():
    document = sample.two_amines()
    del document["candidates"][0]["fitted"][2]
    head, *rows = run_rows(document)
    at = head.index("predicted rate, two pathways [umol/L/s]")
    assert rows[2][at] is None
    assert rows[3][at] is not None
