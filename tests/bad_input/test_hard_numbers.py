"""What is not wrong but hard: a status, a finding or an open verdict, never an exception."""

from __future__ import annotations

import json
import time
from typing import Any

import pytest

from tests.bad_input.sample import STUDY, TABLE, Desk

HEAD = "run,a,b,lot,rate\n"
ALL_RUNS = STUDY.replace('[[exclude]]\nwhere = { run = 7 }\nreason = "valve not flushed"\n', "")
NO_ERROR = ALL_RUNS.replace('error = "2 %"\n', "")
ONE_CONSTANT = ALL_RUNS.replace(
    '[candidates.steps]\nby_a = "A -> P"\nby_b = "B -> P"', 'law = "k1*[A]"\noverall = "A -> P"'
).replace('participates = "B"', 'participates = "A"')


def weighed(desk: Desk, study: str, table: str, code: int = 0) -> dict[str, Any]:
    desk.write(study, table)
    found, out, err = desk.run("weigh", "study.toml", "--out", "new")
    assert (found, err) == (code, ""), err
    assert all(ch.isprintable() or ch == "\n" for ch in out)
    text = (desk.folder / "new" / "evidence.json").read_text(encoding="utf-8")
    assert "NaN" not in text
    assert "Infinity" not in text
    document: dict[str, Any] = json.loads(text)
    return document


def rows(*lines: str) -> str:
    return HEAD + "\n".join(lines) + "\n"


# A law that breaks down at a run leaves the others standing, and the exit code says so.
BROKEN_LAWS = ["k*[A]/([B] - 2)", "k*[A]/([A] - 10)", "k*log(([A] - 12)/[B])", "k*sqrt(15 - [A])"]


@pytest.mark.parametrize("law", BROKEN_LAWS)
def test_a_law_that_is_not_finite_at_a_run(law: str, desk: Desk) -> None:
    document = weighed(desk, STUDY.replace("k*[A]", law), TABLE, code=1)
    first, second = document["candidates"]
    assert (first["status"], first["outcome"]) == ("converged", "stands")
    assert "not finite" in second["status"]
    assert document["questions"][0]["verdict"] == "participates"


def test_nothing_but_zeros(desk: Desk) -> None:
    table = rows(*(f"{i},{10 * i},{2 + i % 3},x,0" for i in range(1, 7)))
    document = weighed(desk, ALL_RUNS, table)
    assert document["questions"][0]["verdict"] == "undecided"
    none = rows(*(f"{i},0,0,x,{i}" for i in range(1, 7)))
    assert weighed(desk, ALL_RUNS, none)["questions"][0]["verdict"] == "undecided"
    desk.write(NO_ERROR, table)  # zeros say nothing of an error that is not stated
    code, _, err = desk.run("weigh", "study.toml")
    assert code == 2
    assert '"rate" is 0 in every run, and its error is not stated' in err


@pytest.mark.parametrize("study", [ALL_RUNS, NO_ERROR, ONE_CONSTANT], ids=["two", "free", "one"])
def test_one_run(study: str, desk: Desk) -> None:
    document = weighed(desk, study, rows("1,10,2,x,1.31"))
    assert document["questions"][0]["verdict"] == "undecided"


def test_one_constant_one_run_without_error(desk: Desk) -> None:
    study = ONE_CONSTANT.replace('error = "2 %"\n', "")
    document = weighed(desk, study, rows("1,10,2,x,1.31"))
    assert document["questions"][0]["verdict"] == "undecided"
    assert document["candidates"][0]["degrees_of_freedom"] == 0


def test_as_many_constants_as_runs_without_error(desk: Desk) -> None:
    document = weighed(desk, NO_ERROR, rows("1,10,2,x,1.31", "2,20,2,x,2.4"))
    assert document["questions"][0]["verdict"] == "undecided"
    assert document["candidates"][0]["degrees_of_freedom"] == 0


def test_every_run_the_same(desk: Desk) -> None:
    table = rows(*(f"{i},10,2,x,1.3{i}" for i in range(1, 7)))
    assert weighed(desk, ALL_RUNS, table)["questions"][0]["verdict"] == "undecided"


def test_500_runs(desk: Desk) -> None:
    table = rows(
        *(
            f"{i},{10 + i % 7},{2 + i % 5},x,{0.1 * (10 + i % 7) + 0.15 * (2 + i % 5):.3f}"
            for i in range(500)
        )
    )
    start = time.monotonic()
    document = weighed(desk, ALL_RUNS, table)
    assert time.monotonic() - start < 60
    assert document["questions"][0]["verdict"] == "participates"


@pytest.mark.parametrize("size", ["e50", "e-50"])
def test_large_and_small_numbers_that_can_be_computed_with(size: str, desk: Desk) -> None:
    """Only a change of units: the verdict is the same."""
    body = [line.split(",") for line in TABLE.splitlines()[1:]]
    table = rows(*(f"{r},{a}{size},{b}{size},{lot},{v}{size}" for r, a, b, lot, v in body))
    study = STUDY.replace(' = { A = "20 mmol/L" }', f' = {{ A = "20{size} mmol/L" }}')
    assert weighed(desk, study, table)["questions"][0]["verdict"] == "participates"


def test_a_column_beside_the_study_may_hold_anything(desk: Desk) -> None:
    body = TABLE.splitlines()[1:]
    odd = ["1e300", "-1e300", "1e-300", "0", "1e299", "5", "1e308"]
    table = "run,a,b,lot,rate,odd\n" + "".join(f"{r},{o}\n" for r, o in zip(body, odd, strict=True))
    assert weighed(desk, STUDY, table)["questions"][0]["verdict"] == "participates"


def test_a_constant_of_no_law_is_a_finding(desk: Desk) -> None:
    document = weighed(desk, STUDY.replace("k_by_a =", "k_by_c ="), TABLE)
    assert any("k_by_c" in finding["says"] for finding in document["findings"])


@pytest.mark.parametrize("error", ["1e-9 %", "1000 %", "0.0000001 umol/L/s", "1e9 umol/L/s"])
def test_errors_out_of_all_proportion(error: str, desk: Desk) -> None:
    study = STUDY.replace('error = "2 %"', f'error = "{error}"')
    document = weighed(desk, study, TABLE)
    assert document["questions"][0]["verdict"] in ("participates", "negligible", "undecided")


def test_a_question_about_a_constant_that_is_given(desk: Desk) -> None:
    """The study says that the pathway is there, so the runs are not asked."""
    given = 'k_by_b = { value = "1.5e-4 1/s", fixed = true }'
    study = STUDY.replace('k_by_a = { start = "1e-4 1/s", at_most = "1e3 1/s" }', given)
    question = weighed(desk, study, TABLE)["questions"][0]
    assert question["verdict"] == "undecided"
    assert "k_by_b is given in the study, so these runs are not asked about it" in str(question)


def test_all_but_the_constant_in_question_is_given(desk: Desk) -> None:
    given = 'k_by_a = { value = "1e-4 1/s", error = "1 %" }'
    study = STUDY.replace('k_by_a = { start = "1e-4 1/s", at_most = "1e3 1/s" }', given)
    assert weighed(desk, study, TABLE)["questions"][0]["verdict"] == "participates"


def test_a_column_of_no_effect(desk: Desk) -> None:
    """The constant of a pathway whose species is nowhere has no sensitivity at all."""
    table = rows(*(f"{i},0,{i},x,{i}" for i in range(1, 7)))
    assert weighed(desk, ALL_RUNS, table)["questions"][0]["verdict"] == "participates"
    code, _, err = desk.run("check", "study.toml")
    assert (code, err) == (0, "")
