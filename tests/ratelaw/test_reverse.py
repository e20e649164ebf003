"""Laws without their reverse reaction, against forms worked out by hand.

The reversible laws are those of the library and of textbooks (a reverse term of its own, or divided by
the equilibrium constant); without it each is the law of the forward reaction as it is written there.
"""

from __future__ import annotations

from typing import Any

import pytest
import sympy

from discrim.errors import Place
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.knockout import KnockOutKind
from discrim.ratelaw.model import RateLaw
from discrim.ratelaw.reverse import reverse_of

HERE = Place(file="law")


def bare(text: str) -> RateLaw:
    return law_from_expression(
        "law", parse_expression(text, HERE), overall={"A": -1, "P": 1}, place=HERE, text=text
    )


def same(a: Any, text: str) -> bool:
    return bool(sympy.cancel(a - parse_expression(text, HERE)) == 0)


@pytest.mark.parametrize(
    ("law", "psi", "forward"),
    [
        ("k*[A] - k_r*[P]", ("k_r",), "k*[A]"),
        ("k*([A] - [P]/K_eq)", ("1/K_eq",), "k*[A]"),
        ("k*([A]*[B] - [P]/K_eq)/(1 + K_A*[A] + K_P*[P])", ("1/K_eq",),
         "k*[A]*[B]/(1 + K_A*[A] + K_P*[P])"),
        ("(V*[A]/K_A - V_r*[P]/K_P)/(1 + [A]/K_A + [P]/K_P)", ("V_r",),
         "V*[A]/K_A/(1 + [A]/K_A + [P]/K_P)"),
    ],
)  # fmt: skip
def test_the_reverse_term_is_a_case_at_zero(law: str, psi: tuple[str, ...], forward: str) -> None:
    found = reverse_of(bare(law), "", "the reverse reaction")
    assert found is not None
    assert found.knock_out is not None
    assert found.knock_out.psi == psi
    assert found.knock_out.kind is KnockOutKind.ZERO
    assert same(found.knock_out.rate, forward)
    assert same(found.knock_out.production["P"], forward)
    assert same(-found.knock_out.production["A"], forward)
    # what was put as an inverse is the same law
    back = {c.symbol: 1 / parse_expression(c.name[2:], HERE) for c in found.law.constants
            if c.name.startswith("1/")}  # fmt: skip
    assert same(found.law.rate.subs(back), law)


def test_a_given_equilibrium_constant_leaves_another_law() -> None:
    found = reverse_of(bare("k*([A] - [P]/K_eq)"), "", "it", given=("K_eq",))
    assert found is not None
    assert found.knock_out is not None
    assert found.knock_out.kind is KnockOutKind.FACTOR
    assert same(found.knock_out.rate, "k*[A]")


@pytest.mark.parametrize("law", ["k*[A]", "k*[A]/(1 + K*[P])", "k*[A]*[P]^n"])
def test_a_law_one_way_has_no_reverse(law: str) -> None:
    assert reverse_of(bare(law), "", "it") is None


def test_what_cannot_be_told_from_the_form_is_said() -> None:
    found = reverse_of(bare("k*([A] - [P])*([B] - [P])"), "", "it")
    assert found is not None
    assert found.knock_out is None
    assert "cannot be told apart" in found.note


def mechanism(steps: dict[str, str], measured: str, **assume: Any) -> RateLaw:
    read = parse_mechanism(name="m", steps=steps, assume=assume)
    return derive(read, measured=frozenset(measured))


def test_the_reverse_of_a_step_of_a_mechanism() -> None:
    law = mechanism({"go": "A <=> P", "side": "A -> Q"}, "APQ")
    found = reverse_of(law, "go", "the reverse of go")
    assert found is not None
    assert found.knock_out is not None
    assert found.knock_out.psi == ("k_rev_go",)
    assert reverse_of(law, "elsewhere", "it") is None


def test_a_step_at_equilibrium_is_not_asked_about() -> None:
    law = mechanism(
        {"fast": "A + B <=> C", "slow": "C -> P"}, "ABP", equilibrated=["fast"], limiting="slow"
    )
    found = reverse_of(law, "fast", "the reverse of fast")
    assert found is not None
    assert found.knock_out is None
    assert "equilibrium" in found.note or "together" in found.note


def test_a_reverse_constant_inside_a_sum_is_said_to_be_together_with_others() -> None:
    """K_M = (k_rev + k_cat)/k_on of Briggs & Haldane: rates give K_M, not its parts."""
    read = parse_mechanism(
        name="m", steps={"on": "E + S <=> ES", "cat": "ES -> E + P"}, catalyst=["E"]
    )
    law = derive(read, measured=frozenset({"S", "P"}))
    found = reverse_of(law, "on", "the reverse of on")
    assert found is not None
    assert found.knock_out is None
    assert "only together with other steps" in found.note
