"""Digits of printed numbers.

The rule and the cases marked GUM are from JCGM 100:2008, 7.2.6 (from memory): 10.057 62 ohm with a
standard uncertainty of 27 milliohm is given as 10.058 ohm; 28.05 kHz becomes 28 kHz.
"""

import math

import pytest

from discrim.report.numbers import (
    as_read,
    count,
    factor,
    interval,
    listed,
    number,
    percent,
    probability,
    rounded,
)


@pytest.mark.parametrize(
    ("value", "uncertainty", "expected"),
    [
        (10.05762, 0.027, ("10.058", "0.027")),  # GUM
        (10.05762, 0.0272, ("10.058", "0.027")),
        (0.01882, 6.7e-4, ("0.01882", "0.00067")),
        (56789.0, 1234.0, ("56800", "1200")),
        (28.02, 0.0996, ("28.02", "0.10")),  # the uncertainty gains a digit when it is rounded
        (1.2345e-5, 1.2e-7, ("1.235e-5", "1.2e-7")),
        (-1.2345e-5, 1.2e-7, ("-1.235e-5", "1.2e-7")),
        (2.5e8, 1.0e6, ("2.500e8", "1.0e6")),
        (0.001, 5.0, ("0.0", "5.0")),
        (-0.0001, 0.05, ("0.000", "0.050")),
        (3.0, None, ("3", "")),
        (3.0, 0.0, ("3", "")),
        (None, None, ("–", "–")),
        (None, 0.2, ("–", "0.2")),
        (math.nan, None, ("–", "–")),
        (1e-320, 1e-322, None),
        (1.0, 1e-300, None),
        (1e300, 1e290, None),
    ],
)
def test_value_to_the_place_of_its_uncertainty(value, uncertainty, expected):
    found = rounded(value, uncertainty)
    if expected is None:  # only that odd sizes do no harm and keep their value
        assert float(found[0]) == pytest.approx(value)
    else:
        assert found == expected


@pytest.mark.parametrize(
    ("x", "expected"),
    [
        (0, "0"),
        (3, "3"),
        (28050.0, "28050"),
        (0.00123456, "0.001235"),
        (0.000123456, "1.235e-4"),
        (123456.0, "123500"),
        (1234567.0, "1.235e6"),
        (99999.9, "100000"),
        (-2.5, "-2.5"),
        (None, "–"),
        (True, "–"),
        ("3", "–"),
        (math.inf, "–"),
        (10**400, "–"),
    ],
)
def test_four_digits_without_an_uncertainty(x, expected):
    assert number(x) == expected


@pytest.mark.parametrize(
    ("low", "high", "how", "expected"),
    [
        (0, 3.0036, ["bound", "crossed"], "0 (bound) to 3.00"),
        (2.9956, 3.0036, ["crossed", "crossed"], "2.9956 to 3.0036"),
        (0.0, 0.0032, None, "0 to 0.00320"),
        (None, 5.0, ["open", "crossed"], "up to 5, open below"),
        (12.34, None, ["crossed", "open"], "from 12.3, open above"),
        (0.0, None, ["bound", "open"], "from 0 (bound), open above"),
        (None, None, ["open", "open"], "open both ways"),
        (None, None, ["failed", "failed"], "not found"),
        (None, None, None, "–"),
        (1.0, 2.0, ["failed", "crossed"], "1.00 (not found) to 2.00"),
        (-28.0, 10.0, None, "-28.0 to 10.0"),
    ],
)
def test_an_interval_says_how_its_ends_were_found(low, high, how, expected):
    assert interval(low, high, how) == expected


@pytest.mark.parametrize(
    ("low", "high", "expected"),
    [
        # Worked by hand for two runs whose digits bound the constants.
        (0.0, 5.405 / 1.7995, "0 (bound) to 3.00362"),
        (2.99564, 3.003600000000001, "2.99564 to 3.0036"),
        (-2.9956432, -1.0, "-2.99565 to -1"),
    ],
)
def test_a_guaranteed_range_is_rounded_outward(low, high, expected):
    how = ["bound" if low == 0 else "crossed", "crossed"]
    assert interval(low, high, how, outward=True, digits=6) == expected


@pytest.mark.parametrize(
    ("low", "high", "expected"),
    [
        (0.15583384, 0.59839405, "0.155 to 0.599"),  # width 0.44: to its third digit, outward
        (20.864740, 50.503133, "20.8 to 50.6"),
        (2.99564, 3.0036, "2.99564 to 3.0036"),
    ],
)
def test_a_worst_case_range_has_three_digits_of_its_width(low, high, expected):
    assert interval(low, high, ["crossed", "crossed"], outward=True) == expected


@pytest.mark.parametrize(
    ("function", "x", "expected"),
    [
        (percent, 0.05, "5 %"),
        (percent, 0.0532, "5.3 %"),
        (percent, 0.382, "38 %"),
        (percent, 1.0, "100 %"),
        (percent, -0.2, "-20 %"),
        (percent, 0.0001, "under 0.1 %"),
        (percent, 0, "0 %"),
        (percent, None, "–"),
        (probability, 0.0, "< 0.0001"),
        (probability, 0.00034, "0.0003"),
        (probability, 0.0123, "0.012"),
        (probability, 0.05, "0.050"),
        (probability, 0.5, "0.50"),
        (probability, 0.999, "> 0.99"),
        (probability, None, "–"),
        (factor, 10012.3, "10000"),
        (factor, 4.123, "4.12"),
        (as_read, 1.503, "1.503"),
        (as_read, 4.503000000000001, "4.503"),
    ],
)
def test_other_kinds_of_number(function, x, expected):
    assert function(x) == expected


def test_counts_and_lists():
    assert [count(n, "run") for n in (0, 1, 2)] == ["no runs", "1 run", "2 runs"]
    assert listed([]) == ""
    assert listed(["a", "b", "c"]) == "a, b and c"
