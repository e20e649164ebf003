"""Whole studies of published rival-law data: the verdicts agree with what the sources conclude.

Sources, figures and the words of ``expected``: ``tests/reference/SOURCES.toml``. The studies are
beside their tables in ``tests/reference/studies``. No source states an error of the conditions:
they are exact there, and the variance of the rates is estimated.
"""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import discrim
from discrim.cli import main
from discrim.weigh import weigh
from tests.reference.outside import HERE, comparison, digits, model, sources

STUDIES = HERE / "studies"


@cache
def weighed(name: str) -> dict[str, Any]:
    return weigh(discrim.load(STUDIES / f"{name}.toml"))


def candidate(name: str, about: str) -> dict[str, Any]:
    found: dict[str, Any] = next(c for c in weighed(name)["candidates"] if c["name"] == about)
    return found


def outcomes(name: str) -> dict[str, str]:
    return {c["name"]: c["outcome"] for c in weighed(name)["candidates"]}


def question(name: str, about: str) -> dict[str, Any]:
    found: dict[str, Any] = next(
        q for q in weighed(name)["questions"] if q["asks"] == "participates" and q["about"] == about
    )
    return found


def compared(name: str, larger: str, smaller: str) -> dict[str, Any]:
    found: dict[str, Any] = next(
        c for c in weighed(name)["comparisons"] if (c["larger"], c["smaller"]) == (larger, smaller)
    )
    return found


# study, candidate, model in SOURCES.toml, its constants there in terms of the candidate's
SAME_FIT = [
    ("puromycin", "separate Vm and K", "both_separate"),
    ("puromycin", "separate Vm, common K", "both_common_K"),
    ("puromycin", "common Vm, separate K", "both_common_Vm"),
    ("puromycin", "one curve", "both_common"),
    ("ethylene_hydrogenation", "ethylene and ethane adsorbed", "a_ethylene_and_ethane_adsorbed"),
    ("ethylene_hydrogenation", "ethylene adsorbed", "b_ethylene_adsorbed"),
    ("ethylene_hydrogenation", "dual site", "c_dual_site"),
    ("ethylene_hydrogenation", "power law", "d_power_law"),
    ("isomerization_npentane", "single site", "single_site_surface_reaction"),
    ("isomerization_npentane", "dual site", "dual_site_surface_reaction"),
    ("isomerization_npentane", "power law", "power_law"),
    ("isomerization_npentane", "no vacant sites", "no_unity_term"),
    ("enzyme_inhibition_vmkmki", "competitive", "competitive"),
    ("enzyme_inhibition_vmkmki", "non-competitive", "non_competitive"),
    ("enzyme_inhibition_vmkmki", "uncompetitive", "uncompetitive"),
    ("enzyme_inhibition_vmkmki", "no inhibition", "no_inhibition"),
    ("silane_deposition", "saturation", "saturation"),
    ("silane_deposition", "dual site", "dual_site"),
    ("silane_deposition", "power law", "power_law"),
    ("silane_deposition", "first order", "first_order"),
]


@pytest.mark.parametrize(("study", "name", "entry"), SAME_FIT)
def test_fits_and_criteria(study: str, name: str, entry: str) -> None:
    found, exact = candidate(study, name), model(study, entry)["refit"]
    assert found["status"] == "converged"
    assert digits(found["rss"], exact["rss"]) >= 7
    assert found["degrees_of_freedom"] == exact["dof"]
    # the variance is counted as a constant: aic_full
    assert found["aic"] == pytest.approx(exact["aic_full"], abs=1e-5)
    n = exact["n"]
    if np.isinf(exact["aicc"]):
        assert found["aicc"] is None
    else:
        rest = n * (np.log(2 * np.pi) + 1)
        assert found["aicc"] - rest == pytest.approx(exact["aicc"], abs=1e-5)


def test_constants_reach_the_page_in_their_units() -> None:
    """Published estimates and standard errors of ethylene hydrogenation, law b, through a whole
    study (pressures in atm, rate in mol/(kg s))."""
    found = candidate("ethylene_hydrogenation", "ethylene adsorbed")
    published = model("ethylene_hydrogenation", "b_ethylene_adsorbed")["published"]
    by_name = {c["name"]: c for c in found["constants"]}
    values = [by_name["k"]["value"], by_name["K_E"]["value"]]
    errors = [by_name["k"]["standard_error"], by_name["K_E"]["standard_error"]]
    assert digits(np.array(values), published["estimates"]) >= 6
    assert digits(np.array(errors), published["standard_errors"]) >= 4.5
    assert by_name["K_E"]["units"] == "atm⁻¹"


# ---- Puromycin: constants per group -----------------------------------------------------------


@pytest.mark.parametrize(
    ("smaller", "entry"),
    [
        ("separate Vm, common K", "separate K against common K"),
        ("common Vm, separate K", "separate Vm against common Vm"),
        ("one curve", "two curves against one"),
    ],
)
def test_puromycin_published_f(smaller: str, entry: str) -> None:
    found = compared("puromycin", "separate Vm and K", smaller)
    exact = comparison("puromycin", entry)
    assert found["df"] == [exact["refit"]["df1"], exact["refit"]["df2"]]
    assert digits(found["F"], exact["refit"]["F"]) >= 6
    assert digits(found["p"], exact["refit"]["p"]) >= 6
    if "published" in exact:
        assert found["F"] == pytest.approx(exact["published"]["F"], abs=5e-5)
        assert found["p"] == pytest.approx(exact["published"]["p"], abs=5e-5)
    assert found["nested"] is True
    assert found["edge"] is False


def test_puromycin_verdict() -> None:
    """The limiting rate differs between the states, the Michaelis constant need not (F = 1.72)."""
    assert outcomes("puromycin") == {
        "separate Vm and K": "stands",
        "separate Vm, common K": "stands",
        "common Vm, separate K": "rejected",
        "one curve": "rejected",
    }
    assert candidate("puromycin", "separate Vm and K")["no_better_than"] == "separate Vm, common K"
    names = {c["name"] for c in candidate("puromycin", "separate Vm and K")["constants"]}
    assert names == {"Vm[treated]", "Vm[untreated]", "K[treated]", "K[untreated]"}


# ---- ethylene hydrogenation: four rivals ------------------------------------------------------


def test_ethylene_verdict() -> None:
    """Expected: laws c and d are far worse; a against b is undecided, K_EA covers zero."""
    name = "ethylene_hydrogenation"
    assert sources()[name]["expected"].startswith(
        "laws c and d are far worse; a against b is undecided"
    )
    assert outcomes(name) == {
        "ethylene and ethane adsorbed": "stands",
        "ethylene adsorbed": "stands",
        "dual site": "rejected",
        "power law": "rejected",
    }
    larger = candidate(name, "ethylene and ethane adsorbed")
    assert larger["no_better_than"] == "ethylene adsorbed"
    assert question(name, "EA")["verdict"] == "undecided"
    ethane = next(c for c in larger["constants"] if c["name"] == "K_EA")
    exact = model(name, "a_ethylene_and_ethane_adsorbed")
    low, high = ethane["intervals"]["linearised"]
    assert low < 0 < high
    half = exact["published"]["confidence_half_width_95"]["KEA"]
    assert (high - low) / 2 == pytest.approx(half, rel=1e-4)
    # held at or above zero: the upper end of the profile is the published one, the lower end 0
    low, high = ethane["intervals"]["profile"]
    assert low == 0.0
    assert digits(high, exact["refit"]["profile_95"]["KEA"][1]) >= 5
    assert ethane["interval_ends"]["profile"] == ["bound", "crossed"]
    reconciled = ethane["intervals"]["reconciled"]
    assert reconciled[0] == 0.0
    assert 0.1 < reconciled[1] < 0.15


def test_ethylene_f_and_criteria_point_both_ways() -> None:
    name = "ethylene_hydrogenation"
    found = compared(name, "ethylene and ethane adsorbed", "ethylene adsorbed")
    exact = comparison(name, "ethane adsorption term (a against b)")["refit"]
    assert digits(found["F"], exact["F"]) >= 6
    assert found["p"] == pytest.approx(exact["p"], rel=1e-6)
    assert found["edge"] is True
    assert found["p_one_sided"] == pytest.approx(exact["p"] / 2, rel=1e-6)
    a, b = (candidate(name, n) for n in ("ethylene and ethane adsorbed", "ethylene adsorbed"))
    assert a["aic"] - b["aic"] == pytest.approx(exact["aic_difference_full_minus_reduced"])
    corrected = [
        model(name, n)["refit"]["aicc"]
        for n in ("a_ethylene_and_ethane_adsorbed", "b_ethylene_adsorbed")
    ]
    assert a["aicc"] - b["aicc"] == pytest.approx(corrected[0] - corrected[1])  # favours b by 4.0


# ---- n-pentane isomerization ------------------------------------------------------------------


def test_isomerization_verdict() -> None:
    """Expected: hydrogen adsorption is clearly needed; the unity term is not supported; single-site
    and dual-site laws stay undecided."""
    name = "isomerization_npentane"
    assert sources()[name]["expected"].startswith("hydrogen adsorption is clearly needed")
    assert outcomes(name) == {
        "single site": "stands",
        "dual site": "stands",
        "no vacant sites": "stands",
        "without hydrogen": "rejected",
        "power law": "rejected",
    }
    assert question(name, "H")["verdict"] == "participates"
    assert question(name, "H")["tests"]["reconciled"]["p"] < 1e-6
    assert set(candidate(name, "single site")["inseparable_from"]) == {
        "dual site",
        "no vacant sites",
    }


def test_isomerization_linearised_and_profile_intervals_differ() -> None:
    """Four constants, condition number 292 of the scaled sensitivities: absolute adsorption
    constants are not determined, and only the profile (open above) says so."""
    found = candidate("isomerization_npentane", "single site")
    exact = model("isomerization_npentane", "single_site_surface_reaction")
    b1, b2, b3, b4 = exact["refit"]["estimates"]
    by_name = {c["name"]: c for c in found["constants"]}
    # k = b1 b3
    for constant, value in (("k", b1 * b3), ("K_H", b2), ("K_N", b3), ("K_I", b4)):
        assert by_name[constant]["value"] == pytest.approx(value, rel=1e-4)
    published = exact["published"]["standard_errors"]  # to the 3 or 4 digits printed
    for constant, error in (("K_H", published[1]), ("K_N", published[2]), ("K_I", published[3])):
        entry = by_name[constant]
        assert entry["standard_error"] == pytest.approx(error, rel=5e-3)
        assert entry["intervals"]["linearised"][0] < 0
        assert entry["interval_ends"]["linearised"] == ["crossed", "crossed"]
        assert entry["intervals"]["profile"][0] > 0
        assert entry["interval_ends"]["profile"] == ["crossed", "open"]
        assert entry["intervals"]["profile"][1] is None
        assert entry["interval_ends"]["reconciled"] == ["crossed", "open"]
    said = [f["says"] for f in weighed("isomerization_npentane")["findings"]]
    for constant in ("K_H", "K_N", "K_I"):
        assert (
            f"the linearised interval of {constant} is closed, but the runs set it no upper limit: "
            "its profile is open"
        ) in said
    # k = b1 b3 in place of b1: the condition number is of these four columns
    assert 100 < found["condition_number"] < 2000
    assert found["trade_offs"]


# ---- enzyme inhibition: five rivals -----------------------------------------------------------


def test_inhibition_verdict() -> None:
    """Expected: competitive and plain non-competitive are rejected, uncompetitive is not."""
    name = "enzyme_inhibition_vmkmki"
    assert outcomes(name) == {
        "no inhibition": "rejected",
        "competitive": "rejected",
        "non-competitive": "rejected",
        "uncompetitive": "stands",
        "mixed": "stands",
    }
    mixed = candidate(name, "mixed")
    assert mixed["no_better_than"] == "uncompetitive"
    assert "uncompetitive" in mixed["inseparable_from"]
    assert question(name, "I")["verdict"] == "participates"
    effect = question(name, "I")["effect"]
    assert effect["high"] < -0.05  # it slows the reaction


@pytest.mark.parametrize(
    ("smaller", "entry"),
    [
        ("competitive", "mixed against competitive"),
        ("non-competitive", "mixed against non-competitive"),
    ],
)
def test_inhibition_f(smaller: str, entry: str) -> None:
    """The published mixed fit has a < 0, which an inhibition constant cannot have: with a at its
    bound of 0 its sum of squares is 42.105 in place of 41.882, and the F against it changes
    accordingly."""
    found = compared("enzyme_inhibition_vmkmki", "mixed", smaller)
    exact = comparison("enzyme_inhibition_vmkmki", entry)["refit"]
    rss = {
        n: model("enzyme_inhibition_vmkmki", n)["refit"]["rss"]
        for n in (smaller.replace("-", "_"), "uncompetitive")
    }
    by_hand = (rss[smaller.replace("-", "_")] - rss["uncompetitive"]) / (rss["uncompetitive"] / 68)
    assert found["df"] == [exact["df1"], exact["df2"]]
    assert found["F"] == pytest.approx(by_hand, rel=1e-6)
    assert found["F"] == pytest.approx(exact["F"], rel=0.05)
    assert found["p"] < 1e-4


# ---- silane: four points ----------------------------------------------------------------------


def test_silane_verdict() -> None:
    """Expected: saturation law; first order rejected. Four points: no AICc for two constants."""
    found = outcomes("silane_deposition")
    assert found["saturation"] == "stands"
    assert found["first order"] == "rejected"
    best = min(weighed("silane_deposition")["candidates"], key=lambda c: c["rank"])
    assert best["name"] == "saturation"
    exact = comparison("silane_deposition", "saturation term")["refit"]
    test = compared("silane_deposition", "saturation", "first order")
    assert digits(test["F"], exact["F"]) >= 6
    assert digits(test["p"], exact["p"]) >= 6
    profile = {
        c["name"]: c["intervals"]["profile"]
        for c in candidate("silane_deposition", "saturation")["constants"]
    }
    limits = model("silane_deposition", "saturation")["refit"]["profile_95"]
    assert digits(np.array(profile["k"]), limits["k"]) >= 5
    assert digits(np.array(profile["K"]), limits["K"]) >= 5


# ---- one of them as a user runs it ------------------------------------------------------------


def test_command_line_says_the_same(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    study = STUDIES / "silane_deposition.toml"
    out = tmp_path / "results"
    assert main(["weigh", str(study), "--out", str(out), "--quiet"]) == 0
    saved = json.loads((out / "evidence.json").read_text(encoding="utf-8"))
    assert {c["name"]: c["outcome"] for c in saved["candidates"]} == outcomes("silane_deposition")
    for name in ("report.html", "candidates.csv", "constants.csv", "runs.csv"):
        assert (out / name).is_file()


def test_order_of_runs_and_of_candidates_does_not_matter(tmp_path: Path) -> None:
    """Same verdicts, same numbers, with the table and the candidates written in another order."""
    lines = (STUDIES / "ethylene_hydrogenation.csv").read_text().splitlines()
    (tmp_path / "ethylene_hydrogenation.csv").write_text(
        "\n".join([lines[0], *reversed(lines[1:])]) + "\n"
    )
    text = (STUDIES / "ethylene_hydrogenation.toml").read_text()
    head, *blocks = text.split("[[candidates]]\n")
    *middle, last = blocks
    law, rest = last.split("[constants]", 1)
    new = head + "".join("[[candidates]]\n" + b for b in [law + "\n", *reversed(middle)])
    (tmp_path / "study.toml").write_text(new + "[constants]" + rest)
    again = weigh(discrim.load(tmp_path / "study.toml"))
    first = weighed("ethylene_hydrogenation")
    assert {c["name"]: c["outcome"] for c in again["candidates"]} == outcomes(
        "ethylene_hydrogenation"
    )
    for c in again["candidates"]:
        before = candidate("ethylene_hydrogenation", c["name"])
        assert c["rss"] == pytest.approx(before["rss"], rel=1e-8)
        assert c["weight"] == pytest.approx(before["weight"], rel=1e-6)
    assert [q["verdict"] for q in again["questions"]] == [q["verdict"] for q in first["questions"]]
    # units: the same pressures in kPa
    rows = [line.split(",") for line in lines]
    scaled = [rows[0]] + [[r[0], *(repr(float(v) * 101.325) for v in r[1:])] for r in rows[1:]]
    (tmp_path / "ethylene_hydrogenation.csv").write_text(
        "\n".join(",".join(r) for r in scaled) + "\n"
    )
    (tmp_path / "study.toml").write_text(
        text.replace('units = "atm"', 'units = "kPa"').replace('"1 atm"', '"101.325 kPa"')
    )
    again = weigh(discrim.load(tmp_path / "study.toml"))
    assert {c["name"]: c["outcome"] for c in again["candidates"]} == outcomes(
        "ethylene_hydrogenation"
    )
    ethane = next(q for q in again["questions"] if q["asks"] == "participates")
    assert ethane["verdict"] == "undecided"
    was = question("ethylene_hydrogenation", "EA")["effect"]
    assert ethane["effect"]["value"] == pytest.approx(was["value"], rel=1e-5)
    assert ethane["effect"]["bound"] == pytest.approx(was["bound"], rel=1e-4)
