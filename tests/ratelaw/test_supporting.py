"""The derivation as LaTeX: a paper must be able to take it as it is.

There is no LaTeX here, so its structure is checked: every group and environment is closed, columns
fit, and no character that text cannot hold stands outside of formulas.
"""

import re
from dataclasses import replace
from pathlib import Path

import pytest
import sympy
from matplotlib.mathtext import MathTextParser

from discrim.errors import Place
from discrim.mechanism.library import load, names
from discrim.mechanism.model import Mechanism
from discrim.ratelaw.bare import law_as_written, law_from_expression
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.limits import apparent_orders, limits_of
from discrim.ratelaw.supporting import equation, supporting, text


def block(law):
    return supporting(law, limits_of(law), apparent_orders(law))


def library_law(name):
    record = load(name, base=Path.cwd())
    return derive(record) if isinstance(record, Mechanism) else law_as_written(record)


def check(latex):
    """Structure of LaTeX: groups, environments, fractions, mathematics and text kept apart."""
    lines = latex.splitlines()
    assert lines[0].startswith("% ")
    body = "\n".join(lines[1:])
    bare = re.sub(r"\\[\\{}]", "", body)
    depth = 0
    for ch in bare:
        depth += (ch == "{") - (ch == "}")
        assert depth >= 0
    assert depth == 0
    assert bare.count(r"\left") - bare.count(r"\leftarrow") == bare.count(r"\right") - len(
        re.findall(r"\\right(?:arrow|leftharpoons)", bare)
    )
    opened = []
    for verb, what in re.findall(r"\\(begin|end)\{(\w+\*?)\}", body):
        if verb == "begin":
            opened.append(what)
        else:
            assert opened.pop() == what
    assert opened == []
    assert body.count(r"\begingroup") == body.count(r"\endgroup") == 1
    outside = re.sub(r"\\begin\{align\*\}.*?\\end\{align\*\}", "", body, flags=re.DOTALL)
    written = [outside, *re.findall(r"\\(?:inter)?text\{((?:[^{}]|\{\})*)\}", body)]
    for words in written:
        words = re.sub(r"\$[^$]*\$", "", words)
        assert not re.search(r"(?<!\\)[_^#%&~$]", words), words
    for inside in re.findall(r"\\begin\{align\*\}(.*?)\\end\{align\*\}", body, flags=re.DOTALL):
        rows = re.sub(r"\\intertext\{(?:[^{}]|\{\})*\}", "", inside).split(r"\\")
        for row in rows:
            assert re.search(r"(?<!\\)&", row), row
            assert not re.search(r"(?<!\\)[%#$]", row)


@pytest.mark.parametrize("name", names())
def test_every_law_of_the_library(name):
    law = library_law(name)
    latex = block(law)
    check(latex)
    if law.steps:
        order = [r"\paragraph{Steps}", r"\paragraph{Assumptions}", r"\paragraph{Derivation}"]
        places = [latex.index(words) for words in order]
        assert places == sorted(places)


READ_AGAIN = (  # one of each kind: the whole library takes a minute
    "two-adsorbed-reversible", "hydrogen-adds-in-two-steps", "enzyme-ordered-two-substrates",
    "autoxidation-chain", "hydrogen-bromine-chain", "metal-complex-with-dimer",
    "nitrogen-adsorption-limiting", "catalysis-by-acids-and-bases", "nucleation-and-growth",
)  # fmt: skip


@pytest.mark.parametrize("name", READ_AGAIN)
def test_formulas_are_read_by_another_reader_of_latex(name):
    """matplotlib's mathtext reads a subset of LaTeX; it knows no columns, \\text and \\colon."""
    parser = MathTextParser("path")
    inside = re.findall(
        r"\\begin\{align\*\}(.*?)\\end\{align\*\}", block(library_law(name)), flags=re.DOTALL
    )
    body = re.sub(r"\\intertext\{(?:[^{}]|\{\})*\}", "", r"\\".join(inside))
    for row in body.split(r"\\"):
        formula = re.sub(r"\\text\{[^{}]*\}", "x", row).replace(r"\colon", ":")
        formula = re.sub(r"(?<!\\)&|\{\}|\n", " ", formula).strip()
        assert formula
        parser.parse(f"${formula}$")


def test_steps_and_words():
    assert equation("2 H2O + * <=> OH-") == (
        r"2\, \mathrm{H_{2}O} + \mathrm{*} \rightleftharpoons \mathrm{OH^{-}}"
    )
    assert text("50 % of A_x & {y} #1 -> ~\\") == (
        r"50 \% of A\_x \& \{y\} \#1 $\rightarrow$ \textasciitilde{}\textbackslash{}"
    )


def test_hostile_names_stay_text():
    rate = parse_expression("k*[a_{b}%$#&~^c]/(1 + K*[\\input{x}])", Place())
    law = law_from_expression("x\n\\input{/etc/passwd}", rate, overall=None, place=None)
    law = replace(law, steps={"s_1": "A_{x}% -> B#&"}, assumptions=("100 % & $x_1$ \\input{y}.",))
    latex = block(law)
    check(latex)
    commands = latex.replace(r"\textbackslash{}", "").replace(r"\backslash ", "")
    assert r"\input" not in "\n".join(commands.splitlines()[1:])
    assert latex.splitlines()[1].startswith(r"\begingroup")  # the name stays on its comment line


def test_a_long_law_is_broken_at_its_signs():
    rate = parse_expression(
        "k*[A]*[B]/(1 + " + " + ".join(f"K_adsorption_{i}*[S{i}]" for i in range(40)) + ")^2",
        Place(),
    )
    latex = block(law_from_expression("long", rate, overall=None, place=None))
    check(latex)
    assert r"r ={} & \frac{\mathcal{N}}{\mathcal{D}^{2}}" in latex or (
        r"r ={} & \frac{k\,[\mathrm{A}]\,[\mathrm{B}]}{\mathcal{D}^{2}}" in latex
    )
    assert latex.count(r"& \quad {}+") > 8


def test_sums_under_a_power_and_products_of_sums():
    for given in (
        "k*(" + " + ".join(f"constant_{i}*[S{i}]" for i in range(30)) + ")^2",
        "k*(" + " + ".join(f"c_{i}*[S{i}]" for i in range(30)) + ")/(" + " + ".join(
            f"d_{i}*[T{i}]" for i in range(30)) + ")",
    ):  # fmt: skip
        check(block(law_from_expression("x", parse_expression(given, Place()),
                                        overall=None, place=None)))  # fmt: skip


def test_the_same_law_reads_the_same_twice():
    law = library_law("two-adsorbed-reversible")
    sympy.core.cache.clear_cache()
    assert block(law) == block(library_law("two-adsorbed-reversible"))
