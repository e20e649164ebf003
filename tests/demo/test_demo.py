"""The studies in demo/: what they must answer, that they can be made and weighed again to the byte.

The data are invented, so the truth is known: demo/make_data.py holds the laws that made the tables.
"""

from __future__ import annotations

import importlib.util
import json
import shutil
from pathlib import Path
from typing import Any

import pytest

from discrim.cli import main
from tests.demo import quotes

DEMO = Path(__file__).resolve().parents[2] / "demo"
BUFFER = DEMO / "buffer-hydrolysis"
CATALYST = DEMO / "supported-catalyst"


class Printed(quotes.Printed):
    """What commands print, and the evidence that they save."""

    def evidence(self, study: str) -> dict[str, Any]:
        assert self[f"discrim weigh {study}"]
        saved = quotes.results_of(study, self.folder) / "evidence.json"
        loaded: dict[str, Any] = json.loads(saved.read_text(encoding="utf-8"))
        return loaded


@pytest.fixture(scope="module")
def said(tmp_path_factory: pytest.TempPathFactory) -> Printed:
    return Printed(tmp_path_factory.mktemp("results"))


@pytest.fixture(scope="module")
def first(said: Printed) -> dict[str, Any]:
    return said.evidence("demo/buffer-hydrolysis/first.toml")


@pytest.fixture(scope="module")
def second(said: Printed) -> dict[str, Any]:
    return said.evidence("demo/buffer-hydrolysis/second.toml")


@pytest.fixture(scope="module")
def catalyst(said: Printed) -> dict[str, Any]:
    return said.evidence("demo/supported-catalyst/study.toml")


def question(found: dict[str, Any], about: str) -> dict[str, Any]:
    return next(q for q in found["questions"] if q["about"] == about)


def constants(found: dict[str, Any], candidate: str) -> dict[str, dict[str, Any]]:
    one = next(c for c in found["candidates"] if c["name"] == candidate)
    return {k["name"]: k for k in one["constants"]}


def holds(constant: dict[str, Any], truth: float) -> bool:
    low, high = constant["intervals"]["reconciled"]
    return low <= truth and (high is None or truth <= high)


# --- buffer: undecided in lockstep, decided and right when spread --------------------------------


@pytest.mark.parametrize("about", ["HA", "A-"])
def test_one_buffer_ratio_decides_neither_form(first: dict[str, Any], about: str) -> None:
    asked = question(first, about)
    assert asked["verdict"] == "undecided"
    assert "conditioning" in asked["undecided_because"]
    assert any("lockstep" in reason for reason in asked["why"])
    assert asked["effect"]["low"] == pytest.approx(0.0, abs=1e-9)
    assert asked["effect"]["high"] > 0.8
    other = {"HA": "A-", "A-": "HA"}[about]
    assert any(s["name"] == other and s["stands"] for s in asked["stand_ins"])


def test_the_lockstep_is_named(first: dict[str, Any]) -> None:
    assert [set(x["terms"]) for x in first["runs"]["lockstep"]] == [{"k_base", "k_acid"}]


def test_a_law_with_the_wrong_form_looks_clean_in_lockstep(first: dict[str, Any]) -> None:
    """Why conditioning is judged first: the fit returns a sharp constant of a form that is idle."""
    idle = constants(first, "water and acid form")["k_acid"]
    assert idle["value"] > 20 * idle["standard_error"]
    wrong = next(c for c in first["candidates"] if c["name"] == "water and acid form")
    assert wrong["outcome"] == "stands"


def test_three_buffer_ratios_decide_both_forms_rightly(second: dict[str, Any]) -> None:
    idle = question(second, "HA")
    assert idle["verdict"] == "negligible"
    assert idle["effect"]["bound"] < 0.05
    assert question(second, "A-")["verdict"] == "participates"
    outcome = {c["name"]: c["outcome"] for c in second["candidates"]}
    assert outcome["water and base form"] == "stands"
    assert outcome["water and acid form"] == outcome["water alone"] == "rejected"


def test_the_constants_of_the_buffer_are_found(second: dict[str, Any]) -> None:
    made = script()
    found = constants(second, "water and base form")
    assert found["k_water"]["units"] == "s⁻¹"
    assert holds(found["k_water"], made.K_WATER)
    assert found["k_base"]["units"] == "L mmol⁻¹ s⁻¹"
    assert holds(found["k_base"], made.K_BASE / 1000)


# --- supported catalyst --------------------------------------------------------------------------


def test_the_law_that_made_the_rates_stands_beside_its_twin_alone(catalyst: dict[str, Any]) -> None:
    twins = {"first atom to oxygen limits", "first atom to carbon limits"}
    assert len(catalyst["candidates"]) == 9
    for c in catalyst["candidates"]:
        assert c["outcome"] == ("stands" if c["name"] in twins else "rejected"), c["name"]
        if c["name"] in twins:
            assert {*c["same_law_as"]} == {*c["inseparable_from"]} == twins - {c["name"]}


@pytest.mark.parametrize(("about", "low", "high"), [("alcohol", -1, -0.8), ("H2", 0.9, 1)])
def test_who_takes_part_over_the_metal(
    catalyst: dict[str, Any], about: str, low: float, high: float
) -> None:
    asked = question(catalyst, about)
    assert asked["verdict"] == "participates"
    assert low <= asked["effect"]["value"] <= high


def test_the_constants_over_the_metal_are_found(catalyst: dict[str, Any]) -> None:
    made = script()
    found = constants(catalyst, "first atom to oxygen limits")
    assert holds(found["K_ads_H2"], made.K_H2)
    assert holds(found["K_ads_alcohol"], made.K_ALCOHOL)
    assert holds(found["b_ketone"], made.K_KETONE)
    assert holds(found["kK_to_oxygen_ketone"], made.K_SURFACE * made.K_KETONE)


# --- the same again ------------------------------------------------------------------------------


def script() -> Any:
    spec = importlib.util.spec_from_file_location("make_data", DEMO / "make_data.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_the_script_makes_the_tables_to_the_byte(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    made = script()
    monkeypatch.setattr(made, "HERE", tmp_path)
    for folder in (BUFFER, CATALYST):
        (tmp_path / folder.name).mkdir()
    made.buffer_runs()
    made.catalyst_runs()
    tables = sorted(p.relative_to(DEMO) for p in DEMO.glob("*/*.csv"))
    assert len(tables) == 3
    for table in tables:
        assert (tmp_path / table).read_bytes() == (DEMO / table).read_bytes(), table


def test_every_file_says_that_it_is_invented() -> None:
    files = [p for p in DEMO.rglob("*") if p.suffix in (".csv", ".toml", ".md", ".py")]
    files = [p for p in files if "results" not in p.parts]
    assert len(files) >= 8
    for path in files:
        assert "Invented data" in path.read_text(encoding="utf-8"), path


@pytest.mark.parametrize("page", quotes.PAGES, ids=["README", "demo"])
def test_what_the_pages_quote_is_what_is_printed(page: Path, said: Printed) -> None:
    """If a change was meant: ``python -m tests.demo.quotes``, and read the pages again."""
    text = page.read_text(encoding="utf-8")
    assert text.count("<!-- printed:") >= 2
    assert quotes.renewed(text, said) == text


def contents(folder: Path) -> dict[str, bytes]:
    return {
        str(p.relative_to(folder)): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()
    }


@pytest.fixture
def copied(tmp_path: Path) -> Path:
    """The first campaign in a folder of its own, to be run and spoilt."""
    for name in ("first.toml", "first.csv"):
        shutil.copy(BUFFER / name, tmp_path / name)
    return tmp_path / "first.toml"


def test_the_same_seed_writes_the_same_bytes(copied: Path, tmp_path: Path) -> None:
    for out in ("one", "two"):
        assert main(["weigh", str(copied), "--out", str(tmp_path / out), "--quiet"]) == 0
    one, two = contents(tmp_path / "one"), contents(tmp_path / "two")
    assert {"report.html", "evidence.json", "candidates.csv", "constants.csv", "runs.csv"} <= {*one}
    assert any(name.endswith(".svg") for name in one)
    assert [*one] == [*two]
    assert [name for name in one if one[name] != two[name]] == []


SPOILT = [
    ("first.csv", "2,S1,100,", "2,S1,-100,", "negative"),
    ("first.csv", "buffer_total", "buffer", 'no column "buffer_total"'),
    ("first.toml", "ester + HA ->", "ester + HA->", "acid"),
    ("first.toml", 'participates  = "HA"', 'participates  = "HB"', '"HB"'),
    ("first.toml", "matters_above", "matter_above", '"matters_above"'),
]


@pytest.mark.parametrize(("file", "good", "bad", "says"), SPOILT)
def test_a_failed_run_leaves_the_results_alone(
    copied: Path,
    capsys: pytest.CaptureFixture[str],
    file: str,
    good: str,
    bad: str,
    says: str,
) -> None:
    results = copied.parent / "results" / "first"
    results.mkdir(parents=True)
    for name in ("report.html", "evidence.json"):
        (results / name).write_text("from an earlier run", encoding="utf-8")
    before = contents(results)
    path = copied.parent / file
    text = path.read_text(encoding="utf-8")
    assert good in text
    path.write_text(text.replace(good, bad, 1), encoding="utf-8")
    assert main(["weigh", str(copied)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert file in err
    assert says in err
    assert contents(results) == before
    assert [p.name for p in results.parent.iterdir()] == ["first"]
