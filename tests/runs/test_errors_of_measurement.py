"""Errors of measurement against the rules of the GUM.

JCGM 100:2008: rectangular half-width a has standard deviation a/sqrt(3) (4.3.7), an expanded
uncertainty U = k u (6.2), a pooled variance weights by degrees of freedom (4.2.4, note; and
common practice). Clause numbers from memory.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from discrim.errors import DiscrimError
from discrim.runs.errors import decimals, half_a_digit, significant_digits
from discrim.runs.model import ErrorBasis
from discrim.study import load

DIGITS = {  # text: decimals, significant digits
    "0.600": (3, 3),
    "4.503": (3, 4),
    "100": (0, 1),
    "120.0": (1, 4),
    "1.5e-3": (4, 2),
    "2e3": (-3, 1),
    "-0.05": (2, 1),
    "0.333333333": (9, 9),
    "0": (0, 0),
}


@pytest.mark.parametrize(("text", "wanted"), DIGITS.items())
def test_digits_of_a_number(text, wanted):
    assert (decimals(text), significant_digits(text)) == wanted


def test_half_a_unit_in_the_finest_last_place():
    assert half_a_digit(["0.6", "1.80", "12"]) == pytest.approx(0.005)
    assert half_a_digit(["1e3", "2e3"]) == pytest.approx(500)


TABLE = (
    "run,A,B,lot,s,rate\n1,0.600,1.5,x,0.1,1.80\n2,1.800,0.5,x,0.2,5.40\n3,1.800,0.5,y,0.2,5.50\n"
)


def column(tmp_path, name, error, *, units='units = "mmol/L"', table=TABLE, origin=""):
    (tmp_path / "runs.csv").write_text(table)
    other = {"A": "B", "B": "A", "rate": "A"}[name]
    role = "rate of P" if name == "rate" else name
    line = f"error = {error}\n" if error else ""
    rate = "" if name == "rate" else '[columns.rate]\nis = "rate of P"\n'
    (tmp_path / "study.toml").write_text(
        f'table = "runs.csv"\n{rate}[columns.{other}]\nis = "{other}"\nunits = "mmol/L"\n'
        f'[columns.{name}]\nis = "{role}"\n{units}\n{line}'
    )
    return load(tmp_path / "study.toml").runs.find(name)


def sd(col):
    return np.sqrt(sum(p.absolute**2 + (p.relative * col.values) ** 2 for p in col.errors))


a = np.array([0.6, 1.8, 1.8])
CASES = {
    '"2 %"': 0.02 * a,
    '"0.1 mmol/L"': [0.1] * 3,
    '"0.1 umol/L"': [1e-4] * 3,
    '"1 % + 0.02 mmol/L"': np.sqrt((0.01 * a) ** 2 + 0.02**2),
    '"digits"': [0.0005 / math.sqrt(3)] * 3,
    '{ sd = "digits" }': [0.0005 / math.sqrt(3)] * 3,
    '{ limits = "0.3 mmol/L" }': [0.3 / math.sqrt(3)] * 3,
    '{ limits = "1 %" }': 0.01 * a / math.sqrt(3),
    '{ expanded = "4 %", k = 2 }': 0.02 * a,
    '{ column = "s" }': [0.1, 0.2, 0.2],
    '[ { sd = "3 %" }, { sd = "4 %" } ]': 0.05 * a,
    '"exact"': [0.0] * 3,
    '"0"': [0.0] * 3,
    "0": [0.0] * 3,
    '{ sd = "1 %", shared_by = "lot" }': 0.01 * a,
}


@pytest.mark.parametrize(("error", "wanted"), CASES.items())
def test_standard_deviation(tmp_path, error, wanted):
    col = column(tmp_path, "A", error)
    assert sd(col) * np.ones(3) == pytest.approx(np.asarray(wanted), rel=1e-12)
    exact = "0" in (error, error.strip('"')) or "exact" in error
    assert col.basis is (ErrorBasis.EXACT if exact else ErrorBasis.STATED)


def test_hard_bounds_are_kept_for_digits_and_limits_only(tmp_path):
    assert column(tmp_path, "A", '"digits"').errors[0].bound == pytest.approx([0.0005] * 3)
    assert column(tmp_path, "A", '{ limits = "0.3 mmol/L" }').errors[0].bound == pytest.approx(
        [0.3] * 3
    )
    assert column(tmp_path, "A", '"1 %"').errors[0].bound is None


def test_origin_and_sharing(tmp_path):
    error = (
        '[{ sd = "1 %", origin = "set", shared_by = "lot" }, { sd = "0.1 %", origin = "measured" }]'
    )
    shared, own = column(tmp_path, "A", error).errors
    assert (shared.origin, shared.groups.tolist()) == ("set", [0, 0, 1])
    assert (own.origin, own.groups.tolist()) == ("measured", [0, 1, 2])
    assert shared.words == "1 %, shared by runs of the same lot"
    everywhere = column(tmp_path, "A", '{ sd = "1 %", shared_by = "all" }').errors[0]
    assert everywhere.groups.tolist() == [0, 0, 0]


def test_condition_without_error_gets_the_smaller_of_digits_and_one_percent(tmp_path):
    col = column(tmp_path, "B", "")
    digits = 0.05 / math.sqrt(3)  # 0.0289, above 1 % of 1.5 and of 0.5
    assert col.basis is ErrorBasis.ASSUMED
    assert sd(col) == pytest.approx([min(digits, 0.015), min(digits, 0.005), min(digits, 0.005)])


def test_rate_without_error_is_estimated_and_replicates_are_pooled(tmp_path):
    col = column(tmp_path, "rate", "", units='units = "mmol/L/s"')
    assert (col.errors, col.basis) == ((), ErrorBasis.ESTIMATED)
    table = "A,B,rate\n1,2,10\n1,2,12\n1,2,14\n3,4,20\n3.0,4,22\n5,6,30\n"
    col = column(tmp_path, "rate", '"replicates"', units='units = "mmol/L/s"', table=table)
    # (2^2 + 0 + 2^2 + 1 + 1)/(2 + 1)
    assert (col.basis, col.replicate_df) == (ErrorBasis.REPLICATES, 3)
    assert sd(col) == pytest.approx([math.sqrt(10 / 3)] * 6)


REFUSED = {
    '"2"': 'Write "2 mmol/L" or "2 %"',
    "0.5": 'Write "0.5 mmol/L" or "0.5 %"',
    '"2 kPa"': "Units of the same kind, or a percentage",
    '"-1 %"': "is negative",
    '"digts"': 'Did you mean "digits"?',
    '"replicates"': "not of the conditions",
    '{ sd = "1 %", limits = "2 %" }': "found sd and limits",
    '{ origin = "set" }': "found none of them",
    '{ expanded = "2 %" }': "needs its coverage factor",
    '{ sd = "1 %", k = 2 }': "belongs to an expanded uncertainty",
    '{ sd = "1 %", origin = "sett" }': 'It is "set"',
    '{ sd = "1 %", shared = "lot" }': 'Did you mean "shared_by"?',
    '{ sd = "1 %", shared_by = "lott" }': 'no column "lott"\n[^\n]*\n[^\n]*\nDid you mean "lot"?',
    '{ column = "q" }': 'has no column "q"',
    "true": "is a text or a table",
    "[]": "an empty list of errors",
}


@pytest.mark.parametrize(("error", "says"), REFUSED.items())
def test_refused(tmp_path, error, says):
    with pytest.raises(DiscrimError, match=says) as caught:
        column(tmp_path, "A", error)
    assert "study.toml, line 10" in str(caught.value)


@pytest.mark.parametrize("error", ["", '"digits"'])
def test_calculated_values_need_a_stated_error(tmp_path, error):
    table = "A,B,rate\n0.3333333,1,2\n0.6666667,2,3\n"
    with pytest.raises(DiscrimError, match=r'more than 6 digits(.|\n)*State the error of "A"'):
        column(tmp_path, "A", error, table=table)
    assert column(tmp_path, "A", '"1 %"', table=table).basis is ErrorBasis.STATED


def test_no_replicates(tmp_path):
    table = "A,B,rate\n1,2,10\n2,2,12\n"
    with pytest.raises(DiscrimError, match="there are no replicates"):
        column(tmp_path, "rate", '"replicates"', units="", table=table)
