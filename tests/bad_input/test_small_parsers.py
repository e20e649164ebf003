"""Random text through the small parsers: a value or a complaint, in little time, nothing else."""

from __future__ import annotations

import random
import time
from collections.abc import Callable
from typing import Any

import pytest

from discrim.errors import DiscrimError, Place
from discrim.mechanism.formula import elements
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.step import parse_step
from discrim.ratelaw.expression import parse_expression
from discrim.runs.columns import parse_is
from discrim.runs.errors import parse_error
from discrim.units import parse_number, parse_quantity, parse_unit

SEED = 20240611
TEXTS = 250  # of each kind, for each parser
PIECES = {
    "expression": [
        "k", "K_A", "[A]", "[H+]", "[", "]", "(", ")", "+", "-", "*", "/", "^", "exp(", "log(",
        "sqrt(", "1", "0", "2.5", "1e300", "1e-300", "0.5", ".", ",", " ", "pH", "**", "=", "'",
        "\\", "\n", "é", "²", "∞", "__import__", "lambda", "0x1", "1e5", "-1", "^-1", "^0.5",
    ],
    "step": [
        "A", "B", "*", "**", "A*", "A**", "#", " + ", "+", " -> ", "->", " <=> ", "=", "2 ", "2",
        "10 ", "0.5 ", "1/2 ", "H+", "OH-", "SO4^2-", "^", "(g)", " ", "", "→", "⇌", ".", "<", "9",
    ],
    "unit": [
        "mol", "mmol", "u", "µ", "L", "m", "s", "min", "kPa", "bar", "g", "cat", "%", "/", "*",
        "(", ")", " ", "-1", "^", "^-1", "2", "1e-6", "·", "⁻¹", "²", "ppm", "psig", "sccm", "M",
        "mass", "mole", "degC", "°C", "K", "$", "\n", "__class__", "1/0", "^99", "e",
    ],
    "formula": [
        "C", "H", "Al", "D", "(", ")", "[", "]", ".", "·", "2", "10", "99999", "0", " ", "+", "x",
    ],
    "error": [
        "1", "0.5", "-1", "1e999", "%", " %", "mmol/L", " + ", "+", "digits", "replicates", "exact",
        "sd", " ", "nan", "inf", ",", "±", "e", "1e-400", "kPa", "0",
    ],
}  # fmt: skip
RIGHT = {
    "formula": "Al2(SO4)3.18H2O",
    "expression": "k*[A]",
    "step": "A -> B",
    "unit": "mol/L",
    "error": "1",
}
PLACE = Place("study.toml", 1)
PARSERS: dict[str, tuple[str, Callable[[str], Any]]] = {
    "expression": ("expression", lambda t: parse_expression(t, Place(text=t))),
    "step": ("step", lambda t: parse_step("s", t, sites=("*", "#"), place=PLACE)),
    "mechanism": ("step", lambda t: parse_mechanism(name="m", steps={"s": t}, place=PLACE)),
    "unit": ("unit", lambda t: parse_unit(t, PLACE)),
    "quantity": ("error", lambda t: parse_quantity(t, PLACE)),
    "number": ("error", lambda t: parse_number(t, PLACE)),
    "error": ("error", lambda t: parse_error(t, PLACE, lambda path: None)),
    "is": ("step", lambda t: parse_is(t, PLACE)),
    "formula": ("formula", lambda t: elements(t, PLACE)),
}


def texts(kind: str, seed: int) -> list[str]:
    rng = random.Random(seed)
    pieces = PIECES[kind]
    out = [RIGHT[kind], "", " ", "\0", "\ud7ff", "x" * 3000]
    for _ in range(TEXTS):
        parts = [rng.choice(pieces) for _ in range(rng.randint(1, 14))]
        if rng.random() < 0.15:  # now and then any character at all
            parts.insert(rng.randrange(len(parts)), chr(rng.randrange(0xD7FF)))
        out.append("".join(parts))
    return out


@pytest.mark.parametrize("name", PARSERS)
def test_random_text(name: str) -> None:
    kind, parse = PARSERS[name]
    values = complaints = 0
    for text in texts(kind, SEED):
        start = time.monotonic()
        try:
            parse(text)
            values += 1
            message = "read"
        except DiscrimError as error:
            complaints += 1
            message = str(error)
        assert 0 < len(message) < 3000, text
        assert all(ch.isprintable() or ch == "\n" for ch in message), text
        assert time.monotonic() - start < 5, text
    assert complaints > 0
    assert values > 0


@pytest.mark.parametrize("name", PARSERS)
def test_the_same_character_many_times(name: str) -> None:
    _, parse = PARSERS[name]
    for ch in "(k*^-+[ 1.%/#e\u0301":
        for text in (ch * 3000, "k" + ch * 3000, (ch + "k") * 1500):
            start = time.monotonic()
            message = ""
            try:
                parse(text)
            except DiscrimError as error:
                message = str(error)
            assert len(message) < 3000
            assert time.monotonic() - start < 5, text[:10]
