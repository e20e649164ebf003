"""Quantities of the constants in whole studies (`[report_constants]`).

The table is simulated; values are compared with closed forms worked out here from the constants
that the same document prints, and with statsmodels for the linear law.
"""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm

import discrim
from discrim.errors import DiscrimError
from discrim.report.folder import write_report
from discrim.report.text import summary
from discrim.weigh import weigh

STUDY = """title = "simulated"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "umol/L/s"
[columns.a]
is = "A"
units = "mmol/L"
error = "0 %"
[columns.b]
is = "B"
units = "mmol/L"
error = "0 %"
[columns.vessel]
is = "group"
[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"
[[candidates]]
name = "saturation"
law = "V*[A]/(K + [A]) + k_by_b*[B]"
overall = "A -> P"
"""
AT = 'at = { A = "20 mmol/L", B = "0.05 mol/L" }'


def simulated(folder: Path) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(2)
    n = 14
    x = rng.uniform(5, 40, (n, 2)).round(2)
    y = (x @ [0.5, 0.2] + 0.3 * rng.standard_normal(n)).round(4)
    rows = [f"{a},{b},{r},v{1 + k % 2}" for k, ((a, b), r) in enumerate(zip(x, y, strict=True))]
    (folder / "runs.csv").write_text("a,b,rate,vessel\n" + "\n".join(rows) + "\n")
    return x, y


def studied(folder: Path, wanted: str, more: str = "") -> dict[str, Any]:
    path = folder / "study.toml"
    path.write_text(f"{STUDY}[report_constants]\n{wanted}\n{more}", encoding="utf-8")
    return weigh(discrim.load(path))


def reported(document: dict[str, Any], candidate: str) -> dict[str, dict[str, Any]]:
    one = next(c for c in document["candidates"] if c["name"] == candidate)
    return {r["name"]: r for r in one["reported"]}


def test_values_units_and_intervals(tmp_path: Path) -> None:
    x, y = simulated(tmp_path)
    document = studied(
        tmp_path,
        f"""ratio = "k_by_b/k_by_a"
        at_feed = {{ formula = "rate", {AT}, units = "nmol/L/s" }}
        slope = "V/K"
        scaled = {{ formula = "k_by_a*[A]", at = {{ A = "1 mol/L" }} }}""",
    )
    two = reported(document, "two pathways")
    outside = sm.OLS(y, x).fit()  # umol/L/s per mmol/L
    a, b = outside.params
    assert two["ratio"]["value"] == pytest.approx(b / a, rel=1e-9)
    contrast = outside.t_test(np.array([20.0, 50.0]))
    feed = two["at_feed"]
    assert feed["units"] == "nmol/L/s"
    assert feed["at"] == {"A": "20 mmol/L", "B": "0.05 mol/L"}
    assert feed["value"] == pytest.approx(1000 * float(contrast.effect[0]), rel=1e-9)
    assert feed["standard_error"] == pytest.approx(1000 * float(contrast.sd.item()), rel=1e-9)
    for kind in ("linearised", "profile", "reconciled"):
        np.testing.assert_allclose(
            feed["intervals"][kind], 1000 * contrast.conf_int(0.05)[0], rtol=1e-6
        )
    low, high = feed["intervals"]["guaranteed"]
    assert low < feed["intervals"]["reconciled"][0] < feed["intervals"]["reconciled"][1] < high
    # the rate is in umol/L/s, [A] in mmol/L: units follow from the constant
    assert two["scaled"]["units"] == "mmol L⁻¹ s⁻¹"
    assert two["scaled"]["value"] == pytest.approx(a, rel=1e-9)
    assert two["slope"]["value"] is None
    assert two["slope"]["reason"] == "the law does not hold K"
    saturation = reported(document, "saturation")
    constants = {
        k["name"]: k["value"]
        for c in document["candidates"]
        if c["name"] == "saturation"
        for k in c["constants"]
    }
    expected = constants["V"] / constants["K"]
    assert saturation["slope"]["value"] == pytest.approx(expected, rel=1e-9)
    assert saturation["ratio"]["value"] is None
    text = summary(document)
    assert "Quantities, two pathways" in text
    assert "at_feed: rate at A = 20 mmol/L, B = 0.05 mol/L" in text
    write_report(document, tmp_path / "out")
    with (tmp_path / "out" / "quantities.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert [r["quantity"] for r in rows[:4]] == ["ratio", "at_feed", "slope", "scaled"]
    assert float(rows[1]["value"]) == pytest.approx(feed["value"])


def test_a_law_that_has_none_of_the_quantities_is_printed(tmp_path: Path) -> None:
    simulated(tmp_path)
    document = studied(tmp_path, 'ratio = "k_by_b/k_by_a"')
    assert (
        next(c for c in document["candidates"] if c["name"] == "saturation")["outcome"] == "stands"
    )
    assert "Quantities, two pathways" in summary(document)


def test_the_band_of_the_runs_is_that_of_statsmodels(tmp_path: Path) -> None:
    x, y = simulated(tmp_path)
    document = studied(tmp_path, 'ratio = "k_by_b/k_by_a"')
    one = next(c for c in document["candidates"] if c["name"] == "two pathways")
    outside = sm.OLS(y, x).fit().get_prediction(x).conf_int(alpha=0.05)
    found = [[f["fit_low"], f["fit_high"]] for f in one["fitted"]]
    np.testing.assert_allclose(found, outside, rtol=1e-8)


def test_constants_of_groups(tmp_path: Path) -> None:
    x, y = simulated(tmp_path)
    document = studied(
        tmp_path,
        'between = "k_by_a[v2]/k_by_a[v1]"\nratio = "k_by_b/k_by_a"',
        '[constants]\nk_by_a = { per = "vessel" }\n',
    )
    first = np.arange(14) % 2 == 0
    design = np.column_stack([x[:, 0] * first, x[:, 0] * ~first, x[:, 1]])
    a1, a2, b = sm.OLS(y, design).fit().params
    two = reported(document, "two pathways")
    assert two["between"]["value"] == pytest.approx(a2 / a1, rel=1e-9)
    assert two["ratio[v1]"]["value"] == pytest.approx(b / a1, rel=1e-9)
    assert two["ratio[v2]"]["value"] == pytest.approx(b / a2, rel=1e-9)


REFUSED = {
    "unknown constant": ('x = "k_by_c/k_by_a"', "the law does not hold k_by_c", "k_by_c/k_by_a"),
    "unknown species": ('x = "k_by_a*[C]"', '"C" is no species', "[C]"),
    "unknown key": ('x = { formla = "k_by_a" }', 'unknown key "formla"', "formla"),
    "no formula": ('x = { units = "1/s" }', '"formula" is missing', '{ units = "1/s" }'),
    "at missing": ('x = "rate"', '"x" needs [A]', "rate"),
    "at incomplete": (
        'x = { formula = "rate", at = { A = "1 mmol/L" } }',
        '"x" needs [B]',
        '{ A = "1 mmol/L" }',
    ),
    "at unknown": (
        'x = { formula = "rate", at = { C = "1 mmol/L" } }',
        '"C" is no condition of the runs',
        "C",
    ),
    "units of a sum": ('x = "V + K"', "different units", "V + K"),
    "units asked": (
        'x = { formula = "k_by_b/k_by_a", units = "1/s" }',
        '"units" says 1/s',
        "1/s",
    ),
    "not a formula": ('x = "k_by_a/"', "the expression ends", "/"),
    "a number": ('x = "3*4"', "holds no constant", "3*4"),
    "not a text": ("x = 3", "must be a table", "3"),
    "a column of the table": ('x = "k_by_a*vessel"', "vessel", "k_by_a*vessel"),
    "a group": ('x = "k_by_a[v1]"', "stands between", "k_by_a[v1]"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_bad_quantities_point_at_the_place(tmp_path: Path, case: str) -> None:
    wanted, says, at = REFUSED[case]
    simulated(tmp_path)
    with pytest.raises(DiscrimError) as caught:
        studied(tmp_path, wanted)
    error = caught.value
    assert says in error.says
    assert error.place is not None
    shown = error.place.text[error.place.column - 1 : error.place.column - 1 + error.place.length]
    assert shown.strip('"') == at
