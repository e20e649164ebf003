"""A law without a closed form is printed with the balances that its unknowns solve.

The mechanism is invented; its balance is worked by hand from mass action.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import sympy

from discrim.report.content import law as law_content
from discrim.report.text import laws
from discrim.weigh.derived import derive_file

STEPS = """
title = "Invented: a chain that two terminations end"
source = "invented"

[steps]
start = "X2 -> 2 X"
carry = "X + A -> P + Y"
again = "Y + X2 -> P + X"
end_1 = "2 X -> X2"
end_2 = "X + Y -> P"
"""


@pytest.fixture(scope="module")
def keys(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    path = Path(tmp_path_factory.mktemp("balances")) / "chain.toml"
    path.write_text(STEPS, encoding="utf-8")
    return derive_file(str(path))


def test_the_document_holds_the_balance(keys: dict[str, Any]) -> None:
    (balance,) = keys["balances"]
    assert balance["unknown"] == "[X]"
    assert balance["mathml"].startswith("<math")
    assert balance["latex"].startswith("0 = ")
    # d[X]/dt + d[Y]/dt = 2 start - 2 end_1 - 2 end_2 with [Y] from its own balance
    x, x2, a, start, carry, again, end_1, end_2 = sympy.symbols("X X2 A s c g e1 e2", positive=True)
    y = carry * x * a / (again * x2 + end_2 * x)
    by_hand = sympy.numer(sympy.together(2 * start * x2 - 2 * end_1 * x**2 - 2 * end_2 * x * y))
    names = {"[X2]": x2, "[X]": x, "[A]": a, "k_start": start, "k_carry": carry,
             "k_again": again, "k_end_1": end_1, "k_end_2": end_2}  # fmt: skip
    # the printed sum, term by term: products of names, powers with ^
    shown = sympy.Integer(0)
    for sign, term in _terms(balance["text"].removeprefix("0 = ")):
        product = sympy.Integer(sign)
        for factor in term.split("*"):
            base, _, power = factor.partition("^")
            value = names[base] if base in names else sympy.Integer(base)
            product *= value ** int(power or 1)
        shown += product
    ratio = sympy.cancel(shown / by_hand)
    assert ratio.is_number or ratio.is_Mul or ratio.is_Symbol
    assert x not in ratio.free_symbols


def _terms(text: str) -> list[tuple[int, str]]:
    out, sign = [], 1
    for piece in text.split(" "):
        if piece in "+-":
            sign = -1 if piece == "-" else 1
        else:
            out.append((-sign if piece.startswith("-") else sign, piece.lstrip("-")))
    return out


def test_the_balance_is_printed_below_the_law(keys: dict[str, Any]) -> None:
    text = laws([keys])
    head, _, rest = text.partition("with [X] from")
    assert "[X]" in head.splitlines()[-2]
    assert rest.split("\n")[1].strip().startswith("0 = ")
    assert "solved numerically" in " ".join(keys["findings"])


def test_unknowns_are_listed_in_words(keys: dict[str, Any]) -> None:
    one = law_content(keys)
    assert one.balance_words == "with [X] from"
    two = law_content({**keys, "balances": [{"unknown": u, "text": "0 = 0"} for u in "PQR"]})
    assert two.balance_words == "with P, Q and R from"
    assert len(two.balances) == 3
    assert law_content({"name": "closed"}).balances == ()
