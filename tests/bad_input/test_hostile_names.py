"""Names that a browser, a terminal or a spreadsheet would obey."""

from __future__ import annotations

import csv
import io
import json
import re
from html.parser import HTMLParser

import pytest

from discrim.errors import nearest
from tests.bad_input.sample import STUDY, TABLE, Desk

SCRIPT = "<script>alert(1)</script><img src=x onerror=alert(2)>"
MATHML = "<math><mtext></mtext></math>"
ANSI = "\x1b[31mred\x1b]0;title\x07\x9b2J\r\u202e\u2028"
NAMES = {
    "html": SCRIPT,
    "mathml": MATHML + "]]>--></style></title>",
    "terminal": ANSI,
    "sheet": '=cmd|"/C calc"!A0',
    "template": "{{ 7*7 }}{% raw %}${7*7}",
    "latex": r"\input{/etc/passwd}$\write18{touch pwned}$",
}


class Tags(HTMLParser):
    """Collects the tags and the attributes of a page."""

    def __init__(self) -> None:
        super().__init__()
        self.seen: list[tuple[str, dict[str, str | None]]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.seen.append((tag, dict(attrs)))


def hostile(name: str) -> tuple[str, str]:
    """The study and table with the text in every place that takes free text."""
    text = json.dumps(name)  # JSON's escapes are TOML's
    study = STUDY.replace('"Does B open a pathway of its own?"', text)
    study = study.replace('"A alone"', text)
    study = study.replace('"valve not flushed"', text).replace('"two stirrer speeds"', text)
    study = study.replace('"no label in the product"', text).replace('"notebook 12"', text)
    study = study.replace("transport =", f"{text} =")
    study = study.replace('overall = "A -> P"', f'overall = "A -> P"\nnote = {text}')
    cell = io.StringIO()
    csv.writer(cell, lineterminator="").writerow([name.replace("\r", " ").replace("\x1b", "\x1b")])
    table = TABLE.replace("\n2,", f"\n{cell.getvalue()},").replace(",lot,", f",{cell.getvalue()},")
    return study, table.replace("\n3,10", f"\n@{cell.getvalue()},10")


@pytest.mark.parametrize("kind", NAMES)
def test_names_do_nothing(kind: str, desk: Desk) -> None:
    name = NAMES[kind]
    desk.write(*hostile(name))
    code, out, err = desk.run("weigh", "study.toml", "--out", "new")
    assert code == 0, err
    new = desk.folder / "new"
    # the terminal
    assert all(ch.isprintable() or ch == "\n" for ch in out + err)
    # the page
    page = (new / "report.html").read_text(encoding="utf-8")
    tags = Tags()
    tags.feed(page)
    clean = Tags()
    clean.feed((desk.folder / "results" / "study" / "report.html").read_text(encoding="utf-8"))
    assert {tag for tag, _ in tags.seen} <= {tag for tag, _ in clean.seen}
    assert not any(key.startswith("on") for _, attrs in tags.seen for key in attrs)
    assert "<script>alert" not in page
    assert MATHML not in page
    assert "\x1b" not in page
    assert not any(
        str(attrs.get(key, "")).startswith(("http:", "https:", "//", "javascript:"))
        for _, attrs in tags.seen
        for key in ("src", "href")
    )
    for picture in (new / "figures").glob("*.svg"):
        svg = picture.read_text(encoding="utf-8")
        assert "<script" not in svg
        assert "<img" not in svg
        assert "\x1b" not in svg
    # the spreadsheet
    for path in new.glob("*.csv"):
        with path.open(encoding="utf-8", newline="") as stream:
            for row in csv.reader(stream):
                for cell in row:
                    number = re.fullmatch(r"-?[\d.]+(e[-+]?\d+)?", cell)
                    assert number or not cell.startswith(("=", "+", "-", "@", "\t", "\r")), cell
                    assert all(ch.isprintable() for ch in cell)
    # the record is plain data
    assert json.loads((new / "evidence.json").read_text(encoding="utf-8"))["format"] == 1
    assert not (desk.folder / "pwned").exists()
    # and drawn again
    code, again, err = desk.run("report", "new")
    assert (code, err) == (0, "")
    assert all(ch.isprintable() or ch == "\n" for ch in again)


@pytest.mark.parametrize("command", ["check", "derive"])
@pytest.mark.parametrize("kind", NAMES)
def test_names_do_nothing_on_the_terminal(kind: str, command: str, desk: Desk) -> None:
    desk.write(*hostile(NAMES[kind]))
    code, out, err = desk.run(command, "study.toml")
    assert code == 0, err
    assert all(ch.isprintable() or ch == "\n" for ch in out + err)


@pytest.mark.parametrize("kind", NAMES)
def test_complaints_about_such_names(kind: str, desk: Desk) -> None:
    """``refused`` itself looks for control characters."""
    text = json.dumps(NAMES[kind])
    desk.write(STUDY.replace("title =", f"{text} ="))
    desk.refused()
    desk.write(STUDY.replace("[columns.a]", f"[columns.{text}]"))
    desk.refused()
    desk.write(STUDY.replace('participates = "B"', f"participates = {text}"))
    desk.refused()
    desk.write(STUDY.replace('is = "B"', f"is = {text}"))
    desk.refused()
    desk.write(STUDY.replace('by_b = "B -> P"', f"by_b = {text}"))
    desk.refused()
    desk.write(STUDY.replace('"runs.csv"', text))
    desk.refused()
    desk.write(table=TABLE.replace("1.31", '"' + NAMES[kind].replace('"', '""') + '"'))
    desk.refused()
    desk.refused("weigh", NAMES[kind] + ".toml")
    desk.refused(NAMES[kind])


def test_a_name_that_looks_like_another(desk: Desk) -> None:
    """A Cyrillic letter in one place and a Latin one in another, said by their names."""
    desk.write(STUDY.replace("at = { A", 'at = { "\u0410"'))
    message = desk.refused()
    assert "U+0410 CYRILLIC CAPITAL LETTER A" in message
    hint = nearest("A\u0301", ["B", "\u00c1"])
    assert hint.startswith('"\u00c1" looks the same but is written with other characters')
