"""The laws of a mechanism without some of its pathways, on runs: against ordinary regression.

Invented tables. With exact conditions and an unknown error the laws are straight lines through the
origin in their constants, so objective, nested F and AICc are those of ordinary least squares
(statsmodels); AICc by its formula (Hurvich & Tsai, Biometrika 76 (1989) 297).
"""

from __future__ import annotations

import json
from itertools import combinations
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm

import discrim
from discrim.report.content import build
from discrim.report.figures import draw
from discrim.report.folder import as_json
from discrim.weigh import weigh

HEAD = """
title = "Three pathways, invented runs"
table = "runs.csv"

[columns.rate]
is    = "rate of P"
units = "mol/L/s"
"""
COLUMN = """
[columns.{0}]
is    = "{0}"
units = "mol/L"
error = "exact"
"""
THREE = """
[[candidates]]
name = "three"
[candidates.steps]
by_A = "A -> P"
by_B = "B -> P"
by_C = "C -> P"
"""
LAW = """
[[candidates]]
name = "a law"
law  = "k*[A]"
overall = "A -> P"
"""


def _table(seed: int, truth: tuple[float, float, float]) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    x = rng.uniform(0.5, 3.0, (14, 3))
    return x, x @ np.array(truth) + 0.05 * rng.normal(size=14)


def _weighed(folder: Path, x: np.ndarray, y: np.ndarray, candidates: str) -> dict[str, Any]:
    rows = ["A,B,C,rate", *(",".join(f"{v!r}" for v in (*map(float, r), float(t)))
                            for r, t in zip(x, y, strict=True))]  # fmt: skip
    (folder / "runs.csv").write_text("\n".join(rows) + "\n")
    text = HEAD + "".join(COLUMN.format(s) for s in "ABC") + candidates
    (folder / "study.toml").write_text(text)
    return weigh(discrim.load(folder / "study.toml"))


@pytest.fixture(scope="module")
def found(tmp_path_factory: pytest.TempPathFactory) -> tuple[np.ndarray, np.ndarray, Any]:
    x, y = _table(4, (1.0, 0.4, 0.0))
    return x, y, _weighed(tmp_path_factory.mktemp("three"), x, y, THREE + LAW)


def test_every_set_against_ordinary_least_squares(
    found: tuple[np.ndarray, np.ndarray, Any],
) -> None:
    x, y, document = found
    record = document["candidates"][0]["knock_outs"]
    assert len(record["nodes"]) == 7
    full = sm.OLS(y, x).fit()
    if (full.params <= 0).any():
        pytest.fail("the invented table should have its optimum inside")
    names = ("by_A", "by_B", "by_C")
    nodes = {tuple(n["pathways"]): n for n in record["nodes"]}
    for k in (1, 2, 3):
        for chosen in combinations(range(3), k):
            node = nodes[tuple(names[i] for i in chosen)]
            fit = sm.OLS(y, x[:, chosen]).fit()
            assert (fit.params >= 0).all()
            assert node["rss"] == pytest.approx(fit.ssr, rel=1e-6)
            p = k + 1  # the variance counts
            aicc = 14 * (np.log(2 * np.pi * fit.ssr / 14) + 1) + 2 * p + 2 * p * (p + 1) / (13 - p)
            assert node["aicc"] == pytest.approx(aicc, rel=1e-8)
            if k == 3:
                assert node["full"]
                assert node["p_against_full"] is None
                assert node["enough"] is True
                continue
            _, p_value, q = full.compare_f_test(fit)
            expected = p_value / 2 if q == 1 else p_value  # one-sided on the edge
            assert node["p_against_full"] == pytest.approx(expected, rel=1e-5, abs=1e-14)
            assert node["enough"] is bool(expected > 0.05)


def test_edges_and_the_smallest_sets(found: tuple[np.ndarray, np.ndarray, Any]) -> None:
    x, y, document = found
    record = document["candidates"][0]["knock_outs"]
    assert len(record["edges"]) == 3 * 2**2 - 3
    names = ("by_A", "by_B", "by_C")
    for e in record["edges"]:
        small = record["nodes"][e["smaller"]]["pathways"]
        large = record["nodes"][e["larger"]]["pathways"]
        (gone,) = set(large) - set(small)
        assert e["words"] == f"k_{gone} = 0"
        assert e["edge"] is True
        fits = [sm.OLS(y, x[:, [names.index(p) for p in s]]).fit() for s in (large, small)]
        assert e["p"] == pytest.approx(fits[0].compare_f_test(fits[1])[1] / 2, rel=1e-5, abs=1e-14)
    assert record["smallest"] == [["by_A", "by_B"]]
    assert record["words"].startswith("Not worse than all 3 pathways together, at 95 %: by_A with")
    assert record["complete"] is True
    assert [p["overall"] for p in record["pathways"]] == ["A -> P", "B -> P", "C -> P"]


def test_what_has_no_pathways_to_take_out_has_none(
    found: tuple[np.ndarray, np.ndarray, Any],
) -> None:
    assert found[2]["candidates"][1]["knock_outs"] is None


def test_a_rejected_law_is_no_measure(tmp_path: Path) -> None:
    """Without errors stated only a rival rejects: here the law that made the table."""
    x, y = _table(7, (1.0, 0.4, 0.0))
    two = THREE.replace("three", "wrong").replace('by_A = "A -> P"\n', "")
    document = _weighed(tmp_path, x, y, THREE + two)
    by_name = {c["name"]: c for c in document["candidates"]}
    assert by_name["wrong"]["outcome"] == "rejected"
    assert by_name["wrong"]["knock_outs"] is None
    assert by_name["three"]["knock_outs"] is not None


def test_the_report_draws_it(found: tuple[np.ndarray, np.ndarray, Any]) -> None:
    document = json.loads(as_json(found[2]))
    pictures = {p.name: p for p in draw(document)}
    picture = pictures["lattice-1"]
    assert "7 laws from sets of the pathways by_A, by_B and by_C" in picture.alt
    assert "joined by 9 proven special cases" in picture.alt
    assert "Not worse than all 3 pathways together" in picture.caption
    for mark in ("✓", "✗"):  # never by colour alone
        assert mark in picture.svg
    again = {p.name: p for p in draw(document)}["lattice-1"]
    assert again.svg == picture.svg
    (table,) = build(document).knock_outs
    assert len(table.rows) == 7
    assert {row[table.heads.index("Enough")] for row in table.rows} == {"yes", "no"}
    for row in table.rows:  # each pathway left out is a constant set to zero, over two levels too
        assert row[-1].count(" = 0") == 3 - len(row[0].split(", "))


def test_two_ways_to_write_one_law_are_a_finding(tmp_path: Path) -> None:
    x, y = _table(9, (1.0, 0.4, 0.2))
    other = THREE.replace('"three"', '"renamed"').replace("by_", "way_")
    document = _weighed(tmp_path, x, y, THREE + other)
    said = [f for f in document["findings"] if "two ways to write the same law" in f["says"]]
    assert len(said) == 1
    assert said[0]["severity"] == "note"
    assert "“three”" in said[0]["where"]
    assert "“renamed”" in said[0]["where"]


def test_improbable_steps_are_a_warning(tmp_path: Path) -> None:
    x, y = _table(9, (1.0, 0.4, 0.2))
    many = THREE.replace('"C -> P"', '"2 C + 2 A -> P"')
    document = _weighed(tmp_path, x, y, many)
    said = [f for f in document["findings"] if "would have to meet at once" in f["says"]]
    assert [f["severity"] for f in said] == ["warning"]
    assert "study.toml, line" in said[0]["says"]
