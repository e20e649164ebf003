"""Two runs in lockstep, and a third that breaks it: worked by hand here, through a study file.

Invented numbers. r = k_A A + k_B B, runs (A, B, r) = (0.600, 1.500, 1.80) and (1.800, 4.503, 5.40),
every value known to half a unit in its last place. Solving gives k_A = 3, k_B = 0; with 1.81 in
place of 1.80 it gives k_A = 28, k_B = -10: (1.81 - 0.6 k_A)/1.5 = (5.40 - 1.8 k_A)/4.503.
"""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.optimize import linprog

import discrim
from discrim.cli import main
from discrim.weigh import weigh

HEAD = "A,B,rate\n"
TWO = "0.600,1.500,1.80\n1.800,4.503,5.40\n"
THIRD = "1.800,0.450,5.40\n"
STUDY = """
title = "Two pathways, invented runs"
table = "runs.csv"

[columns.rate]
is    = "rate of P"
units = "mol/L/s"
error = "digits"

[columns.A]
is    = "A"
units = "mol/L"
error = "digits"

[columns.B]
is    = "B"
units = "mol/L"
error = "digits"

[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"

[[questions]]
participates  = "B"
matters_above = "5 %"
"""


def _write(folder: Path, rows: str) -> Path:
    (folder / "runs.csv").write_text(HEAD + rows)
    (folder / "study.toml").write_text(STUDY)
    return folder / "study.toml"


@cache
def _weighed(folder: Path, rows: str) -> dict[str, Any]:
    return weigh(discrim.load(_write(folder, rows)))


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("two")


def _ranges(document: dict[str, Any]) -> dict[str, list[float]]:
    (found,) = document["candidates"]
    return {c["name"]: c["intervals"]["guaranteed"] for c in found["constants"]}


def _by_linear_program(rows: str) -> list[tuple[float, float]]:
    """The same polytope (Oettli & Prager 1964, from memory) written down directly: lower bounds of
    A and B with the upper bound of the rate, and the reverse."""
    table = np.array([[float(v) for v in line.split(",")] for line in rows.split()])
    c, y = table[:, :2], table[:, 2]
    a = np.vstack([c - 0.0005, -(c + 0.0005)])
    b = np.concatenate([y + 0.005, -(y - 0.005)])
    ends = []
    for j in range(2):
        cost = np.eye(2)[j]
        low = linprog(cost, A_ub=a, b_ub=b, method="highs").fun
        high = -linprog(-cost, A_ub=a, b_ub=b, method="highs").fun
        ends.append((float(low), float(high)))
    return ends


def test_arithmetic_of_the_case() -> None:
    c = np.array([[0.6, 1.5], [1.8, 4.503]])
    assert np.linalg.solve(c, [1.80, 5.40]) == pytest.approx([3.0, 0.0], abs=1e-10)
    assert np.linalg.solve(c, [1.81, 5.40]) == pytest.approx([28.0, -10.0], abs=0.1)


def test_two_runs(folder: Path) -> None:
    found = _weighed(folder, TWO)
    (law,) = found["candidates"]
    # columns of unit length, weighted: condition number from the angle between them
    assert law["condition_number"] == pytest.approx(1.0e4, rel=0.01)
    assert law["digits_lost"] == pytest.approx(4.0, abs=0.01)
    (lock,) = found["runs"]["lockstep"]
    assert lock["columns"] == ["A", "B"]
    assert lock["ratio"] == pytest.approx([2.5, 4.503 / 1.8])
    ranges = _ranges(found)
    assert ranges["k_by_a"] == pytest.approx([0.0, 3.0036], abs=5e-5)
    assert ranges["k_by_b"] == pytest.approx([0.0, 1.2004], abs=5e-5)
    for name, ends in zip(("k_by_a", "k_by_b"), _by_linear_program(TWO), strict=True):
        assert ranges[name] == pytest.approx(ends, abs=1e-8)
    (answer,) = found["questions"]
    assert answer["verdict"] == "undecided"
    assert "conditioning" in answer["undecided_because"]
    assert answer["effect"]["low"] == 0.0
    assert answer["effect"]["high"] == pytest.approx(1.0)
    # 0.0016: each run alone gives the sum with the error of its rate and amounts, rectangular:
    # 0.0050 and 0.0017 by hand; together 1/sqrt(1/0.0050^2 + 1/0.0017^2)
    assert law["trade_offs"][0]["words"] == (
        "these runs fix only k_by_a + 2.502·k_by_b, not the two apart: 3.0000 ± 0.0016 s⁻¹"
    )


def test_third_run_decides(folder: Path) -> None:
    found = _weighed(folder, TWO + THIRD)
    ranges = _ranges(found)
    assert ranges["k_by_a"] == pytest.approx([2.9956, 3.0036], abs=5e-5)
    assert ranges["k_by_b"] == pytest.approx([0.0, 0.0032], abs=5e-5)
    for name, ends in zip(("k_by_a", "k_by_b"), _by_linear_program(TWO + THIRD), strict=True):
        assert ranges[name] == pytest.approx(ends, abs=1e-8)
    (answer,) = found["questions"]
    assert answer["verdict"] == "negligible"
    assert answer["effect"]["bound"] < 0.05
    assert found["runs"]["lockstep"] == []


@pytest.mark.parametrize("rows", [TWO, TWO + THIRD])
def test_exit_code_is_zero_whatever_the_verdict(tmp_path: Path, rows: str) -> None:
    study = _write(tmp_path, rows)
    assert main(["weigh", str(study), "--quiet"]) == 0
    saved = json.loads(
        (tmp_path / "results" / "study" / "evidence.json").read_text(encoding="utf-8")
    )
    assert saved["questions"][0]["verdict"] in ("undecided", "negligible")
