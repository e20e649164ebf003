"""The terminal summary: order, width, plain characters, and no terminal codes from a file."""

import io

import pytest

from discrim.report.paper import Paper, to_ascii, wants_colour, write
from discrim.report.table import make
from discrim.report.text import summary, verdicts
from tests.report import sample


@pytest.mark.parametrize("name", sample.ALL)
@pytest.mark.parametrize("width", [60, 80, 100])
def test_lines_keep_to_the_width(name, width):
    for line in summary(sample.ALL[name](), width=width).splitlines():
        assert len(line) <= width, line
        assert line == line.rstrip()


def test_verdict_first_then_why_then_numbers():
    text = summary(sample.two_amines())
    order = ["UNDECIDED", "These runs cannot tell", "Why", "What would settle it",
             "Effect on the rate", "Conditioning of the runs", "Candidates", "Rate laws",
             "Constants, two pathways", "Before you act on this", "Not checked"]  # fmt: skip
    places = [text.index(words) for words in order]
    assert places == sorted(places)
    assert text.splitlines()[3] == "Does B take part?" + "UNDECIDED".rjust(63)


def test_constants_stand_side_by_side():
    text = summary(sample.two_amines())
    block = text[text.index("Constants, two pathways") :].splitlines()
    assert block[1].split() == ["k_by_a", "k_by_b"]
    assert block[2].split() == ["value", "3.0", "5.5"]
    assert any(line.split()[0] == "reconciled" and "open above" in line for line in block[1:9])


def test_quiet_gives_one_line_a_question():
    assert verdicts(sample.two_amines(decided=True)).splitlines() == [
        "Does B take part?" + "participates".rjust(63),
        "Which candidates stand?" + "1 of 2 stands".rjust(57),
    ]
    assert verdicts({}) == ""


def test_colour_only_on_a_terminal_and_never_the_only_sign():
    plain, bold = summary(sample.two_amines()), summary(sample.two_amines(), colour=True)
    assert "\x1b" not in plain
    assert "\x1b[1m" in bold
    assert bold.replace("\x1b[1m", "").replace("\x1b[0m", "") == plain


class Terminal(io.StringIO):
    def isatty(self):
        return True


@pytest.mark.parametrize(
    ("stream", "environ", "expected"),
    [
        (Terminal(), {}, True),
        (Terminal(), {"NO_COLOR": "1"}, False),
        (Terminal(), {"NO_COLOR": ""}, True),
        (Terminal(), {"TERM": "dumb"}, False),
        (io.StringIO(), {}, False),
        (None, {}, False),
    ],
)
def test_when_colour_is_used(stream, environ, expected):
    assert wants_colour(stream, environ) is expected


def test_control_characters_of_a_file_do_not_reach_the_terminal():
    document = sample.two_amines()
    document["title"] = "a\x1b[2Jb\rc\nd\u202e"
    document["candidates"][0]["name"] = "x\x1b]0;owned\x07"
    text = summary(document)
    assert not {"\x1b", "\r", "\x07", "\u202e"} & set(text)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("E² as well as E·B", "E^2 as well as E*B"),
        ("10⁻⁶ s⁻¹", "10^-6 s^-1"),
        ("“a” – χ² ≥ 3 µmol", '"a" - chi^2 >= 3 umol'),
        ("Größe", "Grosse".replace("ss", "?")),
        ("分子", "??"),
    ],
)
def test_plain_characters(text, expected):
    assert to_ascii(text) == expected


def test_a_stream_without_unicode_gets_plain_characters():
    raw = io.BytesIO()
    stream = io.TextIOWrapper(raw, encoding="ascii")
    write(summary(sample.two_amines()), stream)
    stream.flush()
    assert b"E^2 explains these runs as well as E*B." in raw.getvalue()


def test_a_table_that_is_too_wide_becomes_blocks():
    wide = make("t", [("Name", False), ("Long head", True)], [["n" * 30, "v" * 43]])
    paper = Paper(width=60)
    paper.table(wide)
    assert str(paper).splitlines() == ["  " + "n" * 30, "    long head  " + "v" * 43]
