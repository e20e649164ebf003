"""Every kind of wrong table of runs, through the command, as its user reads it."""

from __future__ import annotations

import re
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.bad_input.sample import STUDY, TABLE, Desk, underlined

HEAD = TABLE.splitlines()[0] + "\n"
NUMBER = 'Every cell of "a" must hold a number, with a point for decimals and no unit.'

# what to replace in the table, by what, what the message says, underlines, and tells to do
CASES: dict[str, tuple[str, str, str, str, str]] = {
    "word": ("2,10.0", "2,ten", 'line 3, column "a": "ten" stands where', "ten", NUMBER),
    "unit in a cell": ("2,10.0", "2,10.0 mM", "stands where a number", "10.0 mM", NUMBER),
    "spreadsheet error": ("2,10.0", "2,#DIV/0!", "stands where a number", "#DIV/0!", NUMBER),
    "hexadecimal": ("2,10.0", "2,0x10", "stands where a number", "0x10", NUMBER),
    "underscore": ("2,10.0", "2,1_0", "stands where a number", "1_0", NUMBER),
    "wide digits": ("2,10.0", "2,１０", "stands where a number", "１０", NUMBER),
    "decimal comma": ("2,10.0", '2,"10,0"', "a comma in a number", '"10,0"', "with a point"),
    "bare decimal comma": ("2,10.0", "2,10,0", "line 3: 6 cells, but 5 columns", "2.22", "commas"),
    "nan": ("2,10.0", "2,NaN", '"NaN" is not a measured value', "NaN", "Leave the cell empty"),
    "infinite": ("2,10.0", "2,-inf", '"-inf" is not a measured value', "-inf", "Leave the cell"),
    "detection limit": ("2,10.0", "2,<0.1", '"<0.1" stands where', "<0.1", "detection limit"),
    "too large": ("2,10.0", "2,1e400", "too large for a number", "1e400", "Use other units"),
    "too small": ("2,10.0", "2,1e-400", "too small for a number", "1e-400", "Write 0 if"),
    "huge": ("2,10.0", "2,1e300", "too large to compute with", "1e300", "between 1e-60 and 1e60"),
    "tiny": ("2,10.0", "2,1e-300", "too small to compute with", "1e-300", "between 1e-60 and"),
    "huge rate": ("2.22", "-1e300", "too large to compute with", "-1e300", "1e60"),
    "negative": ("2,10.0", "2,-10.0", "a negative concentration: -10.0", "-10.0", "Check the sign"),
    "empty condition": ("2,10.0", "2,", "an empty cell among the conditions", "8.0", "Only rates"),
    "short row": ("2,10.0,8.0,x,2.22", "2,10.0", "line 3: 2 cells, but 5", "", "Each line needs 5"),
    "long row": ("x,2.22", "x,2.22,9,9", "line 3: 7 cells, but 5 columns", "9,9", "needs 5 cells"),
    "same column": ("run,a,b", "run,a,a", 'two columns are called "a"', "a", "its own name"),
    "nameless column": ("run,a,b", "run,a,", "column 3 has no name", "", "Name every column"),
    "long name": ("lot", "l" * 200, "column 4 has a name of 200", "", "At most 120"),
    "open quote": ("2,10.0", '2,"10.0', "cannot be cut into cells", "", "a quote that is not"),
    "no header": (HEAD, "", "the first line holds numbers|no column", "", ""),
    "run twice": ("\n2,", "\n1,", 'run "1" stands twice, first in line 2', "1", "its own name"),
    "run without name": ("\n2,", "\n,", '"run" is empty here', "", "Give every run one"),
}


@pytest.mark.parametrize("name", CASES)
def test_refused(name: str, desk: Desk) -> None:
    old, new, says, under, do = CASES[name]
    assert old in TABLE
    text = TABLE.replace(old, new, 1)
    desk.write(table=text)
    message = desk.refused()
    lines = message.splitlines()
    if name == "no header":  # run 1 is read as names: two of them or none are columns of the study
        assert re.match(r"study\.toml, line \d+, column|runs\.csv, line 1", lines[0])
        return
    found = re.match(r"runs\.csv, line (\d+)", lines[0])
    assert found, message
    assert says in lines[0], message
    assert lines[1][4:].startswith(text.split("\n")[int(found[1]) - 1][:60])
    if name not in ("empty condition", "run without name"):
        assert underlined(message) == under, message
    assert do in lines[-1], message


FILES: dict[str, tuple[bytes, str, str]] = {
    "nothing": (b"", "runs.csv: the file is empty", "The first line names the columns"),
    "white space": (b" \n\n\t\n", "runs.csv: the file is empty", "The first line names"),
    "comments": (b"# a\n# b\n", "runs.csv: the file holds comments only", "The first line"),
    "header": (HEAD.encode(), "the table has column names but no rows", "One line a run"),
    "picture": (b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR\xff", "line 1: not UTF-8 text", "encoding UTF-8"),
    "UTF-16": (TABLE.encode("utf-16"), "the text is UTF-16, not UTF-8", "encoding UTF-8"),
    "UTF-16, no mark": (TABLE.encode("utf-16-le"), "zero bytes", "encoding UTF-8"),
    "Latin-1": (TABLE.replace("lot", "öl").encode("latin-1"), "line 1: not UTF-8", "UTF-8"),
    "workbook": (b"PK\x03\x04\0\0", "it looks like a workbook", "encoding UTF-8"),
    "long cell": (
        (TABLE + "8," + "1" * 10_000_000 + ",2,x,3\n").encode(),
        "line 9: a cell of more than 10,000 characters",
        "a quote that is not closed",
    ),
    "long row": (
        (TABLE + "8," + "1," * 5_000_000 + "\n").encode(),
        "line 9: 5000001 cells, but 5 columns",
        "Each line needs 5 cells",
    ),
    "long header": (
        ("a," * 5_000_000 + "\n" + TABLE).encode(),
        "line 1: 5,000,000 columns",
        "At most 2,000.",
    ),
    "long open quote": (
        (TABLE + '8,"' + "1\n" * 5_000_000).encode(),
        "line 9: a cell of more than 10,000 characters",
        "a quote that is not closed",
    ),
}


@pytest.mark.parametrize("name", FILES)
def test_refused_files(name: str, desk: Desk) -> None:
    data, says, do = FILES[name]
    desk.write(table=data)
    start = time.monotonic()
    message = desk.refused()
    assert time.monotonic() - start < 20
    assert message.startswith("runs.csv")
    assert says in message.splitlines()[0]
    assert do in message.splitlines()[-1]


def _link(path: Path) -> None:
    outside = path.parent.parent / "outside.csv"
    outside.write_text(TABLE)
    path.symlink_to(outside)


ODD: dict[str, tuple[Callable[[Path], object], str, str]] = {
    "link out of the folder": (
        _link,
        "study.toml, line 2: a path outside",
        "of the study or below",
    ),
    "link to itself": (lambda p: p.symlink_to(p.name), "study.toml, line 2", ""),
    "folder": (Path.mkdir, "runs.csv: this is no file", "relative to the folder of the study"),
    "pipe": (lambda p: __import__("os").mkfifo(p), "runs.csv: this is no file", "relative to"),
}


@pytest.mark.parametrize("name", ODD)
def test_what_is_no_file(name: str, desk: Desk) -> None:
    make, says, do = ODD[name]
    (desk.folder / "runs.csv").unlink()
    make(desk.folder / "runs.csv")
    if name == "folder":
        desk.before = desk.everything()
    message = desk.refused()
    assert says in message
    assert do in message


def test_pressure_and_concentration_in_one_sum(desk: Desk) -> None:
    text = STUDY.replace('is = "B"\nunits = "mmol/L"', 'is = "B"\nunits = "kPa"')
    text = text.replace('law = "k*[A]"', 'law = "k*([A] + [B])"')
    text = text[: text.index("[derived]")] + text[text.index("[constants]") :]
    desk.write(text)
    message = desk.refused()
    assert 'candidate "A alone": terms of a sum have different units: [A] and [B]' in message
    assert underlined(message) == "k*([A] + [B])"
    assert message.splitlines()[-1].startswith("Check the law and the units of the columns")


def test_nothing_measured_yet(desk: Desk) -> None:
    rows = [row.rpartition(",")[0] + "," for row in TABLE.splitlines()[1:]]
    desk.write(table=HEAD + "\n".join(rows) + "\n")
    message = desk.refused()
    assert "no run in runs.csv has a measured rate" in message
    assert "`discrim check` judges a planned table" in message
