"""Limiting cases as they are told, and the derivation on the terminal: nothing cut, nothing wide."""

import re
from functools import cache
from pathlib import Path

import pytest

from discrim import weigh
from discrim.mechanism.library import names
from discrim.report.cases import groups
from discrim.report.laws import law
from discrim.report.text import laws
from discrim.report.wrapping import wrap, wrap_latex

derive_mechanism = cache(weigh.derive_mechanism)

LOW = {"species": "A", "where": "low", "order": "1", "words": "first order in A", "forward": False,
       "reverse": False, "exact": False, "law": "k*K*[A]", "law_mathml": "<mi>x</mi>"}  # fmt: skip
HIGH = LOW | {"where": "high", "order": "0", "words": "zero order in A", "law": "k"}


def test_low_high_and_between():
    order = {"species": "A", "order": "1/(1 + K*[A])", "order_mathml": "<mi>y</mi>"}
    ((heading, lines),) = groups({"limits": [LOW, HIGH], "apparent_orders": [order]})
    assert heading == "Limiting cases"
    assert [(c.where, c.order, c.text) for c in lines] == [
        ("low [A]", "first order", "r = k*K*[A]"),
        ("high [A]", "zero order", "r = k"),
        ("in between", "", "order in A = 1/(1 + K*[A])"),
    ]
    assert [c.starts for c in lines] == [True, False, False]
    assert lines[0].mathml == "<mrow><mi>r</mi><mo>=</mo><mi>x</mi></mrow>"


def test_ends_that_are_the_same_are_one_line():
    ((_, lines),) = groups({"limits": [LOW | {"exact": True}, LOW | {"where": "high"}]})
    assert [(c.where, c.order, c.text) for c in lines] == [("any [A]", "first order", "")]
    ((_, lines),) = groups({"limits": [LOW, LOW | {"where": "high"}]})
    assert [(c.where, c.text) for c in lines] == [("low and high [A]", "r = k*K*[A]")]


def test_of_the_net_rate_only_what_differs():
    ahead = [LOW | {"forward": True}, HIGH | {"forward": True}]
    back = LOW | {"law": "-m*[P]", "words": "zero order in A, net rate negative"}
    found = groups({"limits": [*ahead, back, HIGH]})
    assert [heading for heading, _ in found] == [
        "Limiting cases of the forward reaction",
        "The net rate, where it differs",
    ]
    assert [(c.where, c.order, c.text) for c in found[1][1]] == [
        ("low [A]", "zero order, net rate negative", "r = -m*[P]")
    ]


def test_a_limit_that_is_not_given_says_why():
    none = LOW | {"law": "", "law_mathml": "", "order": "", "words": "not given: no closed form"}
    ((_, lines),) = groups({"limits": [none]})
    assert (lines[0].order, lines[0].text) == ("not given: no closed form", "")


@pytest.mark.parametrize("odd", [{}, {"limits": 3}, {"limits": [None, 1, "x"]}, {"limits": [{}]}])
def test_odd_documents_are_read(odd):
    assert isinstance(groups(odd), tuple)


@pytest.mark.parametrize("width", [60, 80])
@pytest.mark.parametrize("name", names())
def test_derivations_keep_to_the_width_and_nothing_is_cut(name, width):
    found = derive_mechanism(name)
    printed = laws([found], width=width)
    for line in printed.splitlines():
        assert len(line) <= width, line
        assert line == line.rstrip()
    if "; all of it with --json" in printed:
        return
    seen = re.sub(r"\s+", "", printed)
    formulas = [found["law"], *(d["text"] for d in found["derivation"])]
    formulas += [x["law"] for x in found["limits"] if not x["exact"] and x["forward"]]
    for formula in formulas:
        assert re.sub(r"\s+", "", formula) in seen
    for command in re.findall(r"\\mathrm\{[^{}]*\}", found["law_latex"]):
        assert command in printed  # never broken inside a name


def test_a_very_long_law_is_shortened_and_says_where_it_is_whole():
    long = "k*[A]/(1 + " + " + ".join(f"K_{i}*[S{i}]" for i in range(400)) + ")"
    document = {"name": "long", "law": long, "derivation": [{"words": "Law", "text": long}],
                "law_latex": long.replace("*", r"\,")}  # fmt: skip
    printed = laws([document])
    assert len(printed.splitlines()) < 60  # whole it would be some 200 lines twice
    assert printed.count("more lines; all of it with --json") == 2
    assert all(len(line) <= 80 for line in printed.splitlines())


def test_breaks_before_the_denominator_rather_than_inside():
    assert wrap("order in P = -2*K_P*[P]/(1 + K_A*[A] + K_P*[P])", 40).splitlines() == [
        "order in P = -2*K_P*[P]",
        "    /(1 + K_A*[A] + K_P*[P])",
    ]


def test_latex_breaks_only_where_a_blank_may_stand():
    whole = r"\frac{k\,[\mathrm{Fe^{3+}\ (aq)}]}{1 + K_{\mathrm{ads,A}}\,[\mathrm{A}]}"
    lines = wrap_latex(whole, 34).splitlines()
    assert len(lines) > 1
    assert re.sub(r"\n", "", "\n".join(lines)).replace(" ", "") == whole.replace(" ", "")
    assert r"\mathrm{Fe^{3+}\ (aq)}" in lines[0] + "".join(lines[1:])


def test_the_law_holds_the_whole_derivation_as_latex():
    found = derive_mechanism("enzyme-one-substrate")
    item = law(found)
    assert item.whole_latex.startswith("% enzyme-one-substrate; needs amsmath\n")
    assert item.derives(item.text)
    assert Path("mechanisms/enzyme-one-substrate.toml").exists()


def test_a_hostile_block_of_latex_holds_no_control_characters():
    item = law({"name": "x", "derivation_latex": "a\x1b[2J\nb\u202ec"})
    assert item.whole_latex == "a [2J\nb c"
