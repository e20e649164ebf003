"""A law without a closed form is printed with the balances that its unknowns solve.

The mechanism is invented; its steady state is worked by hand from mass action (scipy, brentq).
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from scipy.optimize import brentq

from discrim.errors import Place
from discrim.ratelaw.expression import parse_expression
from discrim.report.laws import law as law_content
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


def number(text: str, values: dict[str, float]) -> float:
    """A printed formula at numbers."""
    expr = parse_expression(text, Place(), {})
    return float(expr.subs({s: values[s.name] for s in expr.free_symbols}))


def test_law_and_balance_as_printed_give_the_rate_of_the_steady_state(keys: dict[str, Any]) -> None:
    (balance,) = keys["balances"]
    unknown = balance["unknown"]
    assert balance["mathml"].startswith("<math")
    assert balance["latex"].startswith("0 = ")
    k = {"k_start": 0.02, "k_carry": 3.0, "k_again": 7.0, "k_end_1": 5.0, "k_end_2": 11.0}
    a, x2 = 0.4, 0.6
    # d[X]/dt + d[Y]/dt = 2 start - 2 end_1 - 2 end_2 = 0 with [Y] from its own balance

    def both(x: float) -> float:
        y = k["k_carry"] * x * a / (k["k_again"] * x2 + k["k_end_2"] * x)
        return k["k_start"] * x2 - k["k_end_1"] * x * x - k["k_end_2"] * x * y

    x = brentq(both, 0, 1, xtol=1e-15)
    values = {**k, "[A]": a, "[X2]": x2}
    values |= {c["name"]: number(c["definition"], values) for c in keys["combinations"]}
    sum_of = balance["text"].removeprefix("0 = ")
    shown = brentq(lambda z: number(sum_of, {**values, unknown: z}), 1e-9, 10, xtol=1e-15)
    rate = number(keys["law"], {**values, unknown: shown})
    assert rate == pytest.approx(k["k_carry"] * x * a, rel=1e-9)


def test_the_balance_is_printed_below_the_law(keys: dict[str, Any]) -> None:
    text = laws([keys])
    unknown = keys["balances"][0]["unknown"]
    head, _, rest = text.partition(f"with {unknown} = ")
    assert unknown in head.splitlines()[-2]
    assert "[X]" in rest.split("\n")[0]  # an amount in units of constants, and what it is
    assert rest.split("\n")[1].strip().startswith("0 = ")
    notes = text.partition("  Notes\n")[2]
    assert "solved numerically" in " ".join(notes.split())


def test_unknowns_are_listed_in_words(keys: dict[str, Any]) -> None:
    plain = {**keys, "balances": [{"unknown": "[X]", "text": "0 = 0"}]}
    assert law_content(plain).balance_words == "with [X] from"
    one = law_content({**keys, "balances": [{"unknown": "x_X", "text": "0 = 0"}],
                       "derivation": [{"words": "so", "text": "x_X = k_a*[X]"}]})  # fmt: skip
    assert one.balance_words == "with x_X = k_a*[X] from"
    two = law_content({**keys, "balances": [{"unknown": u, "text": "0 = 0"} for u in "PQR"]})
    assert two.balance_words == "with P, Q and R from"
    assert len(two.balances) == 3
    assert law_content({"name": "closed"}).balances == ()
