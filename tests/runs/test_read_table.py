"""Tables as text: separators, digits, workbooks, and what is refused, with its message."""

from __future__ import annotations

import openpyxl
import pytest

from discrim.errors import DiscrimError
from discrim.runs.read import read_table


def written(tmp_path, text, name="runs.csv"):
    path = tmp_path / name
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


SAME = {
    "comma": ("runs.csv", "A,rate\n0.600,1.80\n1.800,5.40\n"),
    "semicolon": ("runs.csv", "A;rate\n0.600;1.80\n1.800;5.40\n"),
    "tab": ("runs.tsv", "A\trate\n0.600\t1.80\n1.800\t5.40\n"),
    "tab in csv": ("runs.csv", "A\trate\n0.600\t1.80\n1.800\t5.40\n"),
    "byte order mark": ("runs.csv", "\ufeffA,rate\n0.600,1.80\n1.800,5.40\n"),
    "windows lines": ("runs.csv", "A,rate\r\n0.600,1.80\r\n1.800,5.40\r\n"),
    "comments": ("runs.csv", "# invented\nA,rate\n0.600,1.80\n\n# second day\n1.800,5.40\n"),
    "spaces": ("runs.csv", "A , rate\n 0.600, 1.80\n1.800 ,5.40\n"),
    "quotes": ("runs.csv", '"A","rate"\n"0.600","1.80"\n1.800,5.40\n'),
    "empty last column": ("runs.csv", "A,rate,\n0.600,1.80,\n1.800,5.40,\n"),
}


@pytest.mark.parametrize("case", SAME)
def test_the_same_table_written_in_many_ways(tmp_path, case):
    name, text = SAME[case]
    table = read_table(written(tmp_path, text, name))
    assert table.names == ("A", "rate")
    assert table.rows == (("0.600", "1.80"), ("1.800", "5.40"))


def test_line_numbers_and_spans_survive_comments(tmp_path):
    table = read_table(written(tmp_path, "# x\nrun,A\n# y\na,1.5\nb,2.5\n"))
    place = table.place(1, "A")
    assert (place.line, place.column, place.length, place.text) == (5, 3, 3, "b,2.5")


def workbook(path, rows, formats=(), title="runs", more=()):
    book = openpyxl.Workbook()
    sheet = book.active
    sheet.title = title
    for row in rows:
        sheet.append(row)
    for cell, shown in formats:
        sheet[cell].number_format = shown
    for name in more:
        book.create_sheet(name)
    book.save(path)
    return path


def test_workbook_keeps_the_digits_that_its_sheet_shows(tmp_path):
    rows = [["A", "lot"], [0.6, "x"], [0.1 + 0.2, "y"], [12, None]]
    path = workbook(tmp_path / "runs.xlsx", rows, [("A2", "0.000"), ("A3", "0.00")])
    table = read_table(path)
    assert table.rows == (("0.600", "x"), ("0.30", "y"), ("12", ""))
    assert str(table.place(0, "A")) == 'runs.xlsx, sheet "runs", cell A2, column "A"'


def test_workbook_with_several_sheets_asks_which(tmp_path):
    path = workbook(tmp_path / "runs.xlsx", [["A"], [1]], more=["notes"])
    with pytest.raises(DiscrimError, match=r"sheets: runs, notes\nName the one with the runs"):
        read_table(path)
    assert read_table(path, sheet="runs").rows == (("1",),)
    with pytest.raises(DiscrimError, match="The sheets are: runs, notes"):
        read_table(path, sheet="data")


def test_workbook_formula_that_was_never_calculated(tmp_path):
    path = workbook(tmp_path / "runs.xlsx", [["A", "B"], ["=1+1", 2]])
    with pytest.raises(DiscrimError, match=r"cell A2.*a formula without a saved value"):
        read_table(path)


BAD = {
    "empty": ("", "the file is empty"),
    "comments only": ("# nothing\n", "comments only"),
    "no rows": ("A,rate\n", "column names but no rows"),
    "duplicate": ("A,rate,A\n1,2,3\n", 'line 1: two columns are called "A"'),
    "no name": ("A,,rate\n1,2,3\n", "column 2 has no name"),
    "no header": ("0.6,1.8\n1.8,5.4\n", "holds numbers, not the names of the columns"),
    "ragged": ("A,rate\n1,2\n3\n", "line 3: 1 cells, but 2 columns"),
    "decimal commas": ("A,rate\n0,5,1,2\n", "decimal commas, write them with points"),
    "not text": (b"A,rate\n\xff\xfe\xfa,2\n", "line 2: not UTF-8 text"),
    "zero bytes": ("A,rate\n1,\x002\n", "not a text file"),
    "utf-16": ("A,rate\n1,2\n".encode("utf-16"), "UTF-16, not UTF-8"),
    "workbook called csv": (b"PK\x03\x04zzzz", "it looks like a workbook"),
    "open quote": ('A,rate\n1,"2\n3,4\n', "a quote that is not closed"),
    "long line": ("A,rate\n1," + "9" * 10_000_000 + "\n", "cut into cells|a cell of"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_table(tmp_path, case):
    text, says = BAD[case]
    with pytest.raises(DiscrimError, match=says) as caught:
        read_table(written(tmp_path, text))
    assert "runs.csv" in str(caught.value)
    assert len(str(caught.value)) < 1000


def test_missing_file_and_unknown_kind(tmp_path):
    with pytest.raises(DiscrimError, match="there is no such file"):
        read_table(tmp_path / "none.csv")
    with pytest.raises(DiscrimError, match=r"Save it as \.csv, \.tsv or \.xlsx"):
        read_table(written(tmp_path, "A\n1\n", "runs.pdf"))
    with pytest.raises(DiscrimError, match="not a workbook"):
        read_table(written(tmp_path, "A\n1\n", "runs.xlsx"))
