"""What runs in lockstep fix of two constants, against statsmodels (simulated table)."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import statsmodels.api as sm

import discrim
from discrim.weigh import weigh

STUDY = """title = "simulated"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
[columns.a]
is = "A"
units = "mmol/L"
error = "exact"
[columns.b]
is = "B"
units = "mmol/L"
error = "exact"
[[candidates]]
name = "two pathways"
law = "k_a*[A] + k_b*[B]"
[[questions]]
stands = "all"
"""


def test_the_sum_that_the_runs_fix(tmp_path: Path) -> None:
    rng = np.random.default_rng(8)
    a = np.linspace(5, 40, 12).round(2)
    b = (2.5 * a * (1 + 0.001 * rng.standard_normal(12))).round(3)
    y = ((0.5 * a + 0.2 * b) * (1 + 0.01 * rng.standard_normal(12))).round(4)
    rows = "\n".join(f"{s},{t},{r}" for s, t, r in zip(a, b, y, strict=True))
    (tmp_path / "runs.csv").write_text(f"a,b,rate\n{rows}\n")
    (tmp_path / "study.toml").write_text(STUDY, encoding="utf-8")
    (candidate,) = weigh(discrim.load(tmp_path / "study.toml"))["candidates"]
    (weak,) = candidate["trade_offs"]
    fixed = weak["combination"]
    weight = float(fixed["formula"].split(" + ")[1].split("*")[0])
    assert weight == pytest.approx(2.5, rel=0.01)
    fitted = sm.OLS(y, np.column_stack([a, b])).fit().t_test([1.0, weight])
    # the bound at zero may bind in the fit: then only the standard error is comparable
    assert fixed["standard_error"] == pytest.approx(float(fitted.sd.item()), rel=0.05)
    assert fixed["value"] == pytest.approx(1.0, rel=0.02)
    assert "not the two apart: " in weak["words"]
    assert "±" in weak["words"]
