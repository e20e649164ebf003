"""Text of laws -> expressions, and the messages for text that is wrong."""

import math
import time

import pytest
import sympy

from discrim.errors import DiscrimError, Place
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import ConstantKind, amount, constant_symbol, quantity

A, B = amount("A"), amount("B")
k, K_A, K_B, k_b = (constant_symbol(n) for n in ("k", "K_A", "K_B", "k_b"))
n = constant_symbol("n", ConstantKind.ORDER)
half = sympy.Rational(1, 2)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("k*K_A*[A]/(1 + K_A*[A])^2", k * K_A * A / (1 + K_A * A) ** 2),
        ("-[A]^2", -(A**2)),  # ^ binds tighter than the sign, as in written mathematics
        ("2^3^2", sympy.Integer(512)),  # right associative, as in written mathematics
        ("[A]^-1", 1 / A),
        ("[A]^-n", A ** (-n)),
        ("k/[A]/[B]", k / A / B),
        ("k - [A] - [B]", k - A - B),
        ("- - k", k),
        ("+k", k),
        ("k*-[A]", -k * A),
        ("1e-3*[A]^0.5", sqrt_thousandth := sympy.sqrt(A) / 1000),
        (".001*sqrt([A])", sqrt_thousandth),
        ("0.1 + 0.2", sympy.Rational(3, 10)),  # exact decimals, not binary ones
        ("k*[H+]*[SO4^2-]", k * amount("H+") * amount("SO4^2-")),
        ("[ A ]", A),
        ("exp(-k/[A])*log([B])", sympy.exp(-k / A) * sympy.log(B)),
        ("sqrt(K_A*[A])", sympy.sqrt(K_A) * sympy.sqrt(A)),
        ("k\n  + [A]", k + A),
        ("k*[A]*([B]/K_B)^n", k * A * (B / K_B) ** n),
    ],
)
def test_meaning(text, expected):
    assert parse_expression(text, Place()) == expected


def test_constants_in_exponents_are_orders_everywhere():
    expr = parse_expression("n*k*[A]^n", Place())
    assert expr == n * k * A**n


def test_quantities_take_the_place_of_names_and_species():
    pH = quantity("pH")
    free = constant_symbol("C") / (1 + sympy.Integer(10) ** (4 - pH))
    expr = parse_expression("k_b*[A-] + pH", Place(), {"pH": pH, "[A-]": free})
    assert expr == k_b * free + pH


@pytest.mark.parametrize(
    ("text", "by_python"),
    [
        ("1.5*(2.5 - 0.25)^3/7 - 2^-2", 1.5 * (2.5 - 0.25) ** 3 / 7 - 2**-2),
        ("exp(-1.5)*log(3)/sqrt(2)", math.exp(-1.5) * math.log(3) / math.sqrt(2)),
        ("-2^2 + 3*-4/5", -(2**2) + 3 * -4 / 5),
        ("2*3^2^0.5", 2 * 3**2**0.5),
    ],
)
def test_values_agree_with_the_arithmetic_of_python(text, by_python):
    assert float(parse_expression(text, Place())) == pytest.approx(by_python, rel=1e-14)


@pytest.mark.parametrize(
    ("text", "underlined", "says", "do"),
    [
        ("2 k", "2 k", 'nothing stands between "2" and "k"', "write 2*k"),
        ("2k", "2k", 'nothing stands between "2" and "k"', "write 2*k"),
        ("k [A]", "k [A]", 'nothing stands between "k" and "[A]"', "write k*[A]"),
        ("(k)(k)", ")(", 'nothing stands between ")" and "("', "write )*("),
        ("0,5*k", "0,5", "has a comma inside a number", "Write a decimal point: 0.5"),
        ("exp(k, 2)", ",", '"," does not belong here', "one argument"),
        ("k**2", "**", '"**" is not an operator here', "Write a power with ^"),
        ("k*(1 + [A]", "(", 'a "(" without its ")"', "Close the bracket"),
        ("k*[A])", ")", 'a ")" without its "("', "Remove it"),
        ("k*[A", "[A", 'a "[" without its "]"', "square brackets"),
        ("k*A]", "]", 'a "]" without its "["', "[A]"),
        ("k*[ ]", "[ ]", "empty square brackets", "[H+]"),
        ("k*expp(2)", "expp", '"expp" is not a function', 'Did you mean "exp"?'),
        ("ln([A])", "ln", '"ln" is not a function', "Write log(...)"),
        ("log10([A])", "log10", '"log10" is not a function', "log(...)/log(10)"),
        ("k(2)", "k", '"k" is not a function', "write k*(...)"),
        ("exp*2", "exp", 'the function "exp" without brackets', "exp(...)"),
        ("k*", "*", 'the expression ends after "*"', "must follow"),
        ("*k", "*", '"*" stands where a value belongs', "must stand here"),
        ("()", ")", '")" stands where a value belongs', "must stand here"),
        ("k.real", ".", '"." does not belong here', "only inside a number"),
        ("__import__('os')", "'", "quotes do not belong", "without quotes"),
        ("r = k*[A]", "=", '"=" does not belong here', "without a left-hand side"),
        ("k−[A]", "−", '"−" does not belong here', "Write - instead"),
        ("k*[A]²", "²", '"²" does not belong here', "Write ^2 instead"),
        ("k;[A]", ";", '";" does not belong in an expression', "Allowed are"),
        ("k\x00", "\x00", '"U+0000" does not belong', "Allowed are"),
        ("{pH}", "{", '"{" does not belong here', "round brackets"),
        ("[A]^99", "99", "the exponent 99 is too large", "between -50 and 50"),
        ("[A]^50*([A]^50)^2", "([A]^50)^2", "a power of 100 is too high", "between -50 and 50"),
        ("9^50^50", "50^50", "the exponent 50^50 is too large", "between -50 and 50"),
        ("1e301*k", "1e301", "the number 1e301 is beyond", "use other units"),
        ("1e99999999999*k", "1e99999999999", "is beyond what can be computed", "other units"),
        ("1/(2 - 2)", "(2 - 2)", "division by zero", ""),
        ("sqrt(1 - 2)", "sqrt(1 - 2)", "the square root of a negative number", ""),
        ("log(0)", "log(0)", "the logarithm of zero", ""),
        ("", None, "the expression is empty", "Write a law"),
    ],
)
def test_wrong_text(text, underlined, says, do):
    with pytest.raises(DiscrimError) as caught:
        parse_expression(text, Place(file="study.toml", line=7, what='law of "x"'))
    error = caught.value
    assert says in error.says
    assert do in error.do
    assert str(error).startswith('study.toml, line 7, law of "x": ')
    if underlined is not None:
        start = error.place.column - 1
        assert error.place.text[start : start + error.place.length] == underlined


def test_the_span_is_shown_in_the_line_of_the_file():
    line = 'law = "k*[A"'
    with pytest.raises(DiscrimError) as caught:
        parse_expression("k*[A", Place(file="study.toml", line=3, column=8, text=line))
    assert str(caught.value).splitlines()[:3] == [
        'study.toml, line 3: a "[" without its "]"',
        '    law = "k*[A"',
        "             ^^",
    ]


def test_the_span_of_a_text_over_several_lines():
    with pytest.raises(DiscrimError) as caught:
        parse_expression("k*[A]\n + 2 k", Place(file="study.toml", line=3))
    assert caught.value.place.line == 4
    assert caught.value.place.text == " + 2 k"
    assert caught.value.place.column == 4


@pytest.mark.parametrize(
    "text",
    [
        "(" * 5000 + "k" + ")" * 5000,
        "-" * 9000 + "k",
        "exp(" * 99 + "k" + ")" * 99,
        "2^" * 9000 + "2",
        "((9^50)^50)^50",
        "*".join(["1e300"] * 3000),
        "+".join(["1e-300*k"] * 2000),
        "k" * 10_000_000,
        "1" * 15_000,
        "[" + "x" * 15_000 + "]",
        "+".join(f"k{i}*[A{i}]" for i in range(1500)),
    ],
    ids=lambda text: text[:12],
)
def test_hostile_text_is_refused_or_read_quickly(text):
    start = time.perf_counter()
    message = ""
    try:
        parse_expression(text, Place(text=text))
    except DiscrimError as error:
        message = str(error)
    assert len(message) < 1000
    assert time.perf_counter() - start < 5
