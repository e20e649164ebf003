"""Residuals against columns, order and one another through whole studies. Invented runs.

What is put into the runs is what has to be found: a second lot that is 15 % faster, a catalyst that
loses 3 % a run, a law that bends, a far run, a scatter that grows, replicates worse than stated.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import discrim
from discrim.report.content import build
from discrim.weigh import weigh

N = 24
RNG = np.random.default_rng(11)
A = RNG.permutation(np.linspace(1.0, 10.0, N))
B = RNG.permutation(np.linspace(2.0, 20.0, N))
NOISE = 0.02 * RNG.standard_normal(N)
ORDER = np.arange(1, N + 1)
LOT = RNG.permutation(np.repeat(["old", "new"], N // 2))
TRUE = 0.3 * A + 0.05 * B

LAW = '\n[[candidates]]\nname = "two pathways"\n[candidates.steps]\nby_a = "A -> P"\nby_b = "B -> P"\n'
ONE = '\n[[candidates]]\nname = "A alone"\n[candidates.steps]\nby_a = "A -> P"\n'


def weighed(
    folder: Path, rate: np.ndarray, *, error: str = "2 %", candidates: str = LAW, a: np.ndarray = A
) -> dict[str, Any]:
    rows = ["order,lot,stirring,A,B,rate"]
    stirring = RNG.integers(300, 900, N)
    rows += [f"{o},{lot},{s},{x:.4f},{y:.4f},{r:.5g}"
             for o, lot, s, x, y, r in zip(ORDER, LOT, stirring, a, B, rate, strict=True)]  # fmt: skip
    (folder / "runs.csv").write_text("\n".join(rows) + "\n")
    stated = f'error = "{error}"\n' if error else ""
    (folder / "study.toml").write_text(
        'title = "t"\ntable = "runs.csv"\n[columns.order]\nis = "run order"\n'
        f'[columns.rate]\nis = "rate of P"\nunits = "mmol/L/s"\n{stated}'
        '[columns.A]\nis = "A"\nunits = "mmol/L"\nerror = { sd = "0.3 %", origin = "set" }\n'
        '[columns.B]\nis = "B"\nunits = "mmol/L"\nerror = { sd = "0.3 %", origin = "set" }\n'
        + candidates
        + '[[questions]]\nstands = "all"\n'
    )
    document: dict[str, Any] = weigh(discrim.load(folder / "study.toml"))
    json.dumps(document, allow_nan=False)
    return document


def about_residuals(document: dict[str, Any]) -> list[str]:
    words = ("residuals", "lies further off", "scatter", "alone fixes", "Cook")
    return [f["says"] for f in document["findings"] if any(w in f["says"] for w in words)]


def test_silence_where_the_law_is_true(tmp_path: Path) -> None:
    document = weighed(tmp_path, TRUE * (1 + NOISE))
    assert about_residuals(document) == []
    found = document["candidates"][0]["adequacy"]
    assert [t["columns"] for t in found["trends"]] == [
        ["order"], ["lot"], ["stirring"], ["A"], ["B"],
    ]  # fmt: skip
    assert [t["in_law"] for t in found["trends"]] == [False, False, False, True, True]
    assert found["runs_of_signs"]["order"] == "column “order”"
    assert len(found["leverage"]) == N
    table = build(document).residuals
    assert table is not None
    assert table.rows[0][0] == "two pathways"


def test_the_order_of_the_table_changes_nothing(tmp_path: Path) -> None:
    """But for rounding, with drawn references too."""
    first = weighed(tmp_path, TRUE * (1 + NOISE))["candidates"][0]["adequacy"]
    rows = (tmp_path / "runs.csv").read_text().splitlines()
    mixed = [rows[0], *(rows[1 + int(i)] for i in np.random.default_rng(2).permutation(N))]
    (tmp_path / "runs.csv").write_text("\n".join(mixed) + "\n")
    again = weigh(discrim.load(tmp_path / "study.toml"))["candidates"][0]["adequacy"]
    for key in ("equal_variance", "normality"):
        assert again[key]["p"] == first[key]["p"]
    assert again["runs_of_signs"] == first["runs_of_signs"]
    for a, b in zip(again["trends"], first["trends"], strict=True):
        assert a["p"] == pytest.approx(b["p"], rel=1e-6)


def test_a_lot_that_no_law_holds(tmp_path: Path) -> None:
    document = weighed(tmp_path, TRUE * (1 + NOISE) * np.where(LOT == "new", 1.15, 1.0))
    (says,) = [s for s in about_residuals(document) if "“lot”" in s]
    assert "which is not in the law" in says
    assert 'per = "lot"' in says


def test_a_catalyst_that_ages(tmp_path: Path) -> None:
    document = weighed(tmp_path, TRUE * (1 + NOISE) * 0.97**ORDER)
    says = [s for s in about_residuals(document) if "“order”" in s]
    assert "fall with column “order”" in says[0]
    assert "repeat an early run at the end" in says[0]


def test_a_condition_that_acts_otherwise(tmp_path: Path) -> None:
    """No candidate stands: of the best one it is said how it fails."""
    document = weighed(tmp_path, 3.0 * A / (4.0 + A) * (1 + NOISE), candidates=ONE)
    assert document["candidates"][0]["outcome"] == "rejected"
    (says,) = [s for s in about_residuals(document) if "“A”" in s]
    assert "fall with" in says
    assert "in another way than the law says" in says


def test_a_far_run(tmp_path: Path) -> None:
    rate = TRUE * (1 + NOISE)
    rate[6] *= 1.25
    document = weighed(tmp_path, rate, error="")
    (far,) = [f for f in document["findings"] if "lies further off" in f["says"]]
    assert (far["severity"], far["where"]) == ("warning", "run 7")
    assert "only for a reason found there" in far["says"]


def test_scatter_that_is_not_what_was_stated(tmp_path: Path) -> None:
    """4 % of the rate up or down, taken as equal errors in all runs since none are stated."""
    wide = 0.05 * A**3 * (1 + 0.04 * np.sign(NOISE)) + 0.05 * B
    law = '\n[[candidates]]\nname = "cube"\nlaw = "k*[A]^3 + k_b*[B]"\n'
    document = weighed(tmp_path, wide, error="", candidates=law)
    says = [s for s in about_residuals(document) if "scatter" in s]
    assert "grows with the predicted rate" in says[0]
    assert 'state a relative error, for example "3 %"' in says[0]


def test_replicates_that_scatter_more_than_stated(tmp_path: Path) -> None:
    a = np.repeat(A[::2], 2)
    global B
    kept = B
    B = np.repeat(B[::2], 2)
    try:
        rate = (0.3 * a + 0.05 * B) * (1 + 3 * NOISE)
        document = weighed(tmp_path, rate, a=a, error="2 %")
    finally:
        B = kept
    found = document["candidates"][0]["adequacy"]["replicates"]
    assert found["df"] == 12
    assert found["ratio"] > 1.5
    (says,) = [f for f in document["findings"] if f["where"] == "replicates"]
    assert says["severity"] == "warning"


def test_readings_that_are_their_own_error_are_left_out(tmp_path: Path) -> None:
    """B read at one setting: what varies is its error, which the residuals contain as well."""
    reading = 10.0 * (1 + 0.02 * RNG.standard_normal(N))
    rows = [f"{x:.4f},{b:.4f},{r:.5g}"
            for x, b, r in zip(A, reading, (0.3 * A + 0.5) * (1 + NOISE), strict=True)]  # fmt: skip
    (tmp_path / "runs.csv").write_text("A,B,rate\n" + "\n".join(rows) + "\n")
    (tmp_path / "study.toml").write_text(
        'title = "t"\ntable = "runs.csv"\n[columns.rate]\nis = "rate of P"\nunits = "mmol/L/s"\n'
        'error = "2 %"\n[columns.A]\nis = "A"\nunits = "mmol/L"\n'
        'error = { sd = "0.3 %", origin = "set" }\n[columns.B]\nis = "B"\nunits = "mmol/L"\n'
        'error = { sd = "2 %", origin = "measured" }\n' + LAW
    )
    document = weigh(discrim.load(tmp_path / "study.toml"))
    trends = document["candidates"][0]["adequacy"]["trends"]
    assert [t["columns"] for t in trends] == [["A"]]


@pytest.mark.parametrize(
    "odd", [{}, {"trends": [{}]}, {"trends": 3, "leverage": ["x"], "runs": []}]
)
def test_the_table_reads_odd_documents(odd: dict[str, Any]) -> None:
    build({"candidates": [{"name": "x", "adequacy": odd}]})
