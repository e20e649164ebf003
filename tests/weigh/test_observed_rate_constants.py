"""Studies whose observed column is a pseudo-first-order rate constant.

k_obs = k_water + k_base*[B] is a straight line, so slope and intercept are checked against
statsmodels (weighted least squares), a general-purpose reference.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm

from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.derive import derive
from discrim.ratelaw.knockout import KnockOutKind, knock_out
from discrim.study import load
from discrim.weigh import check, weigh

B = np.array([10.0, 20.0, 40.0, 60.0, 80.0, 100.0])  # mmol/L
K_OBS = np.array([2.31, 2.52, 3.05, 3.44, 4.02, 4.39])  # 1e-5/s
SD = 0.05

STUDY = """
table = "runs.csv"
[columns.B]
is = "B"
units = "mmol/L"
error = "exact"
[columns.k]
is = "{observed}"
units = "{units}"
error = "{error}"
{more}
[[candidates]]
name = "water and base"
[candidates.steps]
water = "S -> P"
base = "S + B -> P + B"
[[questions]]
participates = "base"
matters_above = "5 %"
"""


def weighed(folder: Path, values: np.ndarray, **words: str) -> dict[str, Any]:
    rows = [f"{b:g},{v:.6g}" for b, v in zip(B, values, strict=True)]
    (folder / "runs.csv").write_text("\n".join(["B,k", *rows, ""]), encoding="utf-8")
    study = folder / "study.toml"
    study.write_text(STUDY.format(**words), encoding="utf-8")
    return weigh(load(study))


def found(document: dict[str, Any]) -> dict[str, tuple[float, float]]:
    constants = document["candidates"][0]["constants"]
    return {c["name"]: (c["value"], c["standard_error"]) for c in constants}


def test_the_substrate_need_not_be_measured(tmp_path: Path) -> None:
    document = weighed(
        tmp_path, K_OBS, observed="k_obs of S", units="1e-5/s", error=f"{SD} 1e-5/s", more=""
    )
    line = sm.WLS(K_OBS, sm.add_constant(B), weights=np.full(len(B), SD**-2)).fit(
        cov_type="fixed scale"
    )
    for (value, error), reference, reference_error in zip(
        (found(document)["k_water"], found(document)["k_base"]), line.params, line.bse, strict=True
    ):
        units = 1e-5
        assert value == pytest.approx(reference * units, rel=1e-6)
        assert error == pytest.approx(reference_error * units, rel=1e-6)
    shares = {p["name"]: p["share"] for p in document["candidates"][0]["pathways"]}
    at_60 = line.params[1] * 60 / (line.params @ [1, 60])
    assert shares["base"][3] == pytest.approx(at_60, rel=1e-6)
    assert document["questions"][0]["verdict"] == "participates"
    study = load(tmp_path / "study.toml")
    assert check(study)["laws"][0]["name"] == "water and base"


def test_a_rate_at_known_substrate_says_the_same(tmp_path: Path) -> None:
    """r = k_obs [S]: the two ways to write the same measurement agree."""
    as_k = weighed(
        tmp_path, K_OBS, observed="k_obs of S", units="1e-5/s", error=f"{SD} 1e-5/s", more=""
    )
    as_rate = weighed(
        tmp_path,
        2.5 * K_OBS,
        observed="rate of P",
        units="1e-5 mmol/L/s",
        error=f"{2.5 * SD} 1e-5 mmol/L/s",
        more='[conditions.S]\nvalue = "2.5 mmol/L"\nerror = "exact"',
    )
    for name, (value, error) in found(as_k).items():
        assert found(as_rate)[name] == pytest.approx((value, error), rel=1e-6)


def test_a_pathway_is_taken_out_though_all_share_a_factor() -> None:
    steps = {"water": "S -> P", "acid": "S + HA -> P + HA", "base": "S + B -> P + B"}
    law = derive(parse_mechanism(name="three", steps=steps))
    for name in steps:
        out = knock_out(law, name, 1.0)
        assert out is not None
        assert (out.kind, out.psi) == (KnockOutKind.ZERO, (f"k_{name}",))
