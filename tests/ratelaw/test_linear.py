"""Constants that a fit can eliminate."""

import pytest
import sympy

from discrim.errors import Place
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.linear import linear_constants


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("k_A*[A] + k_B*[B]", {"k_A", "k_B"}),
        ("(k_A*[A] + k_B*[B])/(1 + K*[C])", {"k_A", "k_B"}),
        ("k*K*[A]/(1 + K*[A])", {"k"}),
        ("k*K*[A]", {"k"}),  # one of two; the first
        ("k*[A]^n", {"k"}),
        ("k_1*(k_2 + [A]) - k_1*k_2 + k_2", {"k_1", "k_2"}),  # the product cancels
        ("k_1*k_2*[A] + k_3*k_1", {"k_2", "k_3"}),
        ("exp(-E/[T])", set()),
        ("k*([A] - [B]/K_eq)", {"k"}),
        ("(K*[A] + K^2*[A]^2)/(1 + K*[A]) + k", {"K", "k"}),  # the fraction is K*[A]
    ],
)
def test_largest_set(text, expected):
    expr = parse_expression(text, Place())
    law = law_from_expression("x", expr, overall=None, place=None)
    found = linear_constants([expr], law.constants)
    assert set(found) == expected
    chosen = [c.symbol for c in law.constants if c.name in found]
    for a in chosen:  # sympy as the reference
        for b in chosen:
            assert sympy.simplify(sympy.diff(expr, a, b)) == 0


def test_every_expression_counts():
    first, second = (parse_expression(t, Place()) for t in ("k*[A]", "k^2*[A] + q"))
    law = law_from_expression("x", first + second, overall=None, place=None)
    assert linear_constants([first], law.constants) == ("k",)
    assert linear_constants([first, second], law.constants) == ("q",)
