"""Candidates against one another through a study file.

Invented numbers: r = 2 A/(1 + A/2) with errors of 2 % drawn with a seed, B near A.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
import pytest

import discrim
from discrim.report.pairs import first_places, pairs
from discrim.report.tables import comparisons, criteria
from discrim.weigh import weigh

STUDY = """
title = "Rivals, invented runs"
table = "runs.csv"

[columns.rate]
is    = "rate of P"
units = "mol/L/s"
error = "2 %"

[columns.A]
is    = "A"
units = "mol/L"
error = { sd = "0.0001 %", origin = "set" }

[columns.B]
is    = "B"
units = "mol/L"
error = { sd = "0.0001 %", origin = "set" }

[[questions]]
stands = "all"
"""

LAWS = {
    "held back by A": "k*[A]/(1 + K*[A])",
    "held back by B": "k*[A]/(1 + K*[B])",
    "the same by other constants": "v*[A]/(M + [A])",
    "with a second term": "k*[A]/(1 + K*[A]) + k2*[B]^2/(1 + K2*[B])",
}


def study(names: list[str], seed: int = 3) -> Any:
    rng = np.random.default_rng(seed)
    a = np.round(10 ** rng.uniform(-1, 1, 12), 4)
    b = np.round(a * 10 ** rng.uniform(-0.1, 0.1, 12), 4)
    rate = 2 * a / (1 + a / 2) * (1 + 0.02 * rng.standard_normal(12))
    rows = "".join(f"{x},{y},{r:.5g}\n" for x, y, r in zip(a, b, rate, strict=True))
    text = STUDY + "".join(
        f'\n[[candidates]]\nname = "{n}"\nlaw = "{LAWS[n]}"\noverall = "A -> P"\n' for n in names
    )
    with TemporaryDirectory() as folder:
        (Path(folder) / "runs.csv").write_text("A,B,rate\n" + rows)
        (Path(folder) / "study.toml").write_text(text)
        return weigh(discrim.load(Path(folder) / "study.toml"), seed=1)


@cache
def four() -> Any:
    return study(list(LAWS))


def by_name(document: Any) -> dict[str, Any]:
    return {c["name"]: c for c in document["candidates"]}


def test_a_law_under_two_names_shares_its_weight() -> None:
    found = by_name(four())
    one, other = found["held back by A"], found["the same by other constants"]
    assert one["weight"] == pytest.approx(other["weight"])
    assert one["weight_shared_with"] == ["the same by other constants"]
    assert one["first_share"] == other["first_share"]
    table = criteria(four()["candidates"])
    assert table is not None
    weights = [row[table.heads.index("Weight")] for row in table.rows]
    assert [w.endswith("shared") for w in weights] == [True, False, True, False]
    assert "weighed once" in table.note
    distinct = sum(c["weight"] for n, c in found.items() if n != "the same by other constants")
    assert distinct == pytest.approx(1.0)


def test_vanishing_constants_get_a_bootstrap() -> None:
    """With k2 = 0, K2 has no effect: no F reference; the larger law gains nothing here."""
    (found,) = [c for c in four()["comparisons"] if c["smaller"] == "held back by A"]
    assert found["p_bootstrap"] is not None
    assert found["bootstrap"]["draws"] >= 0
    assert found["p_that_holds"] == found["p_bootstrap"]
    assert found["p_that_holds_from"] == "bootstrap"
    assert "the bootstrap does" in found["p_note"]
    assert comparisons([found]) is not None
    assert by_name(four())["with a second term"]["no_better_than"] is not None


def test_pairs_and_first_places() -> None:
    """Only laws that stand, are different and not nested are paired."""
    document = four()
    standing = {c["name"] for c in document["candidates"] if c["outcome"] == "stands"}
    for pair in document["pairs"]:
        assert {pair["a"], pair["b"]} <= standing
        assert {pair["a"], pair["b"]} != {"held back by A", "the same by other constants"}
        assert [t["null"] for t in pair["cox_williams"]] == [pair["a"], pair["b"]]
        for test in pair["cox_williams"]:
            assert 0 < test["p"] <= 1
    found = by_name(document)
    shares = {n: found[n]["first_share"] for n in standing - {"the same by other constants"}}
    assert sum(shares.values()) == pytest.approx(1.0)
    places = first_places(document["candidates"])
    assert places is not None
    assert len(places.rows) == len(standing)
    table = pairs(document["pairs"])
    assert (table is None) == (not document["pairs"])


def test_the_order_of_the_candidates_changes_no_p_value() -> None:
    turned = by_name(study(list(LAWS)[::-1]))
    for name, c in by_name(four()).items():
        assert turned[name]["outcome"] == c["outcome"]
        assert turned[name]["first_share"] == pytest.approx(c["first_share"], abs=0.01)
        assert turned[name]["p_joint"] == pytest.approx(c["p_joint"], rel=1e-3)
