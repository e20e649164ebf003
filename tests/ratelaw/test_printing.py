"""Laws as text, LaTeX and MathML."""

import xml.dom.minidom

import pytest
import sympy

from discrim.errors import Place
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import amount, constant_symbol, quantity
from discrim.ratelaw.printing import latex, mathml, plain
from discrim.report.wrapping import wrap

QUANTITIES = {"pH": quantity("pH"), "T": quantity("T")}


def read(text):
    return parse_expression(text, Place(), QUANTITIES)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("[B]*[A]*K_ads_A*k_s/(K_ads_B*[B] + K_ads_A*[A] + 1)^2",
         "k_s*K_ads_A*[A]*[B]/(1 + K_ads_A*[A] + K_ads_B*[B])^2"),
        ("k10*[A] + k2*[B]", "k2*[B] + k10*[A]"),
        ("-k_r*[P] + k_f*[A]", "k_f*[A] - k_r*[P]"),
        ("k*([A] - [B]/K_eq)", "k*([A] - [B]/K_eq)"),
        ("[A]^0.5*sqrt(K_H)*k", "k*sqrt(K_H*[A])"),
        ("k*[A]^1.5/[B]^(1/3)", "k*[A]^1.5/[B]^(1/3)"),
        ("0.5*k", "k/2"),
        ("0.001*k", "0.001*k"),
        ("0.000000123*k", "1.23e-7*k"),
        ("k/([A]*[B])", "k/([A]*[B])"),
        ("10^(pKa - pH)*C", "10^(pKa - pH)*C"),
        ("k*[A]*exp(-E/(R*T))", "k*exp(-E/(R*T))*[A]"),
        ("-(1 + k)*[A]", "-[A]*(1 + k)"),
        ("-k", "-k"),
        ("0*k", "0"),
    ],
)  # fmt: skip
def test_reading_order(text, expected):
    assert plain(read(text)) == expected


@pytest.mark.parametrize(
    "text",
    [
        "k*K_A*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2",
        "k*sqrt(K_H*[H2])*[A]/(1 + K_A*[A] + sqrt(K_H*[H2]))^3",
        "[A]^-n",
        "[A]^(2*n)/[B]^m",
        "(k*[A])^n",
        "(-[A])^n",
        "[A]^n^m",
        "2^n*k",
        "log([A]/2)^2*2.5*k",
        "sqrt(k + [A])/sqrt(1 + [B])",
        "1/(1 + 1/(1 + [A]))",
        "k*12345678901234567890123/7*sqrt(2)",
        "exp(1)*k + exp(-k)/exp([A])",
        "k_a*[H+] + k_b*[SO4^2-]*10^(pKa - pH)",
        "-(k_1 + k_2)*[A]/(k_3 + [B])",
        "k^-1.5 - 1e-9 + 1e20*[A]",
        "1 - [A]^(1/7)",
    ],
)
def test_what_is_printed_reads_back(text):
    expr = read(text)
    again = read(plain(expr))
    assert sympy.simplify(again - expr) == 0
    assert plain(again) == plain(expr)
    long_again = read(wrap(plain(expr), 20))
    assert sympy.simplify(long_again - expr) == 0


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("K_ads_A", r"K_{\mathrm{ads,A}}"),
        ("k1", "k_{1}"),
        ("k", "k"),
        ("Vmax", r"V_{\mathrm{max}}"),
        ("alpha_2", r"\alpha_{2}"),
        ("pKa", r"\mathrm{p}K_{\mathrm{a}}"),
        ("order_B", r"\mathrm{order}_{\mathrm{B}}"),
    ],
)
def test_latex_of_constants(name, expected):
    assert latex(constant_symbol(name)) == expected


@pytest.mark.parametrize(
    ("species", "expected"),
    [
        ("A", r"[\mathrm{A}]"),
        ("H+", r"[\mathrm{H^{+}}]"),
        ("H2O", r"[\mathrm{H_{2}O}]"),
        ("SO4^2-", r"[\mathrm{SO_{4}^{2-}}]"),
        ("amine_b", r"[\mathrm{amine\_b}]"),
        ("50%", r"[\mathrm{50\%}]"),
    ],
)
def test_latex_of_species(species, expected):
    assert latex(amount(species)) == expected


def test_latex_of_a_law():
    assert latex(read("k*[A]/(1 + K*[A])")) == (r"\frac{k\,[\mathrm{A}]}{1 + K\,[\mathrm{A}]}")
    assert latex(read("1.5e-9*k*[A]^(1/3)")) == (r"1.5 \times 10^{-9}\,k\,[\mathrm{A}]^{1/3}")


@pytest.mark.parametrize(
    "expr",
    [
        read("k*K_A*[A]*[SO4^2-]/(1 + sqrt(K_H*[H2]))^2 - 1e-9*exp(-E/T)"),
        amount("<script>alert(1)</script>"),
        amount('"&'),
        constant_symbol("<b>"),
        sympy.Eq(amount("A"), 2 * constant_symbol("k")),
    ],
)
def test_mathml_is_well_formed_and_escaped(expr):
    text = mathml(expr)
    assert not any(tag in text for tag in ("<script", "<b>"))
    root = xml.dom.minidom.parseString(text).documentElement
    assert root.tagName == "math"


def test_mathml_of_a_small_law():
    assert mathml(read("k/2")) == (
        '<math xmlns="http://www.w3.org/1998/Math/MathML"><mrow>'
        "<mfrac><mi>k</mi><mn>2</mn></mfrac></mrow></math>"
    )


def test_equations_print_with_an_equals_sign():
    equation = sympy.Eq(amount("A"), 2 * constant_symbol("k"), evaluate=False)
    assert plain(equation) == "[A] = 2*k"


def test_wrapping_breaks_at_shallow_operators_and_never_inside_a_name():
    text = plain(read(
        "k_surface*K_ads_A*[A]*[B]/(1 + K_ads_A*[A] + K_ads_B*[B] + K_ads_C*[cyclohexane])^2"
        " + k_b*[Fe^3+ (aq)]"
    ))  # fmt: skip
    lines = wrap(text, 60).splitlines()
    assert all(len(line) <= 60 for line in lines)
    assert len(lines) > 1
    assert "".join(line.strip() for line in lines).replace(" ", "") == text.replace(" ", "")
    assert wrap("short", 60) == "short"
    assert wrap("x" * 90, 60) == "x" * 90


def test_the_power_of_a_function_is_not_a_power_inside_it():
    log_squared = read("log([A])^2")
    assert latex(log_squared) == r"\left(\log\left([\mathrm{A}]\right)\right)^{2}"
    assert "<msup><mrow><mo>(</mo><mrow><mi>log</mi>" in mathml(log_squared)
    assert plain(log_squared) == "log([A])^2"


def test_names_that_differ_in_case_keep_one_order():
    one, two = constant_symbol("k_a"), constant_symbol("k_A")
    assert plain(one * two) == plain(two * one)
