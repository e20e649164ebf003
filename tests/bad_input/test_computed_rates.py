"""Rates worked out from other columns where that cannot be done, and what is said of them.

The study is the small one of this folder with the rate of a stirred tank; its numbers are invented.
"""

from __future__ import annotations

import pytest

from tests.bad_input.sample import STUDY, TABLE, Desk, underlined

OWN = 'units = "umol/L/s"\nerror = "2 %"\n'
TANK = STUDY.replace('error = { sd = "0.5 %", origin = "set" }', 'error = "exact"').replace(
    'error = "1 %"\n', 'error = "exact"\n'
)


def computed(formula: str, error: str = "exact", study: str = TANK) -> str:
    return study.replace(
        OWN, f'units = "umol/L/s"\ncomputed_from = "{formula}"\nerror = "{error}"\n'
    ).replace("[constants]\n", '[constants]\nper_time = { value = "1e-3 1/s", fixed = true }\n')


@pytest.mark.parametrize(
    "formula",
    ["per_time*a/(b - 2)*b", "per_time*a*log(b/2 - 2)", "per_time*a*sqrt(b/2 - 2)"],
    ids=["zero below", "logarithm", "root"],
)
def test_a_formula_without_a_value_in_a_run_points_at_itself(formula: str, desk: Desk) -> None:
    table = TABLE.replace("1,10.0,2.0", "1,10.0,2")
    desk.write(computed(formula.replace("b", "[B]"), study=_no_unit(TANK)), table)
    said = desk.refused()
    assert 'the formula of "rate" has no value in line 2 of the table' in said
    assert "computed_from" in said
    assert "per_time" in underlined(said)


def _no_unit(study: str) -> str:
    """B as a plain number, so that it can be compared with one."""
    return study.replace('is = "B"\nunits = "mmol/L"', 'is = "B"\nunits = "1"').replace(
        'AB = { formula = "[A]*[B]/([A] + [B])", units = "mmol/L" }\n', ""
    )


def test_a_formula_without_a_unit_for_a_rate_that_has_one(desk: Desk) -> None:
    desk.write(computed("[A]/[B]"))
    assert 'the formula has no unit, "rate" is in umol/L/s' in desk.refused()


def test_no_error_at_all(desk: Desk) -> None:
    desk.write(computed("per_time*[A]"))
    said = desk.refused()
    assert '"rate" has no error, and nothing that it was worked out from has one' in said
    # what the rate was not worked out from does not count
    desk.write(_error_of_b(computed("per_time*[A]")))
    assert "nothing that it was worked out from has one" in desk.refused()


def _error_of_b(study: str) -> str:
    head, b, tail = study.partition("[columns.b]")
    return head + b + tail.replace('error = "exact"', 'error = "1 %"', 1)
