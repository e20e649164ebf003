"""Units: grammar, factors against published definitions, refusals read in full.

Factors are checked against definitions, not against the library that supplies them. Sources, from
memory: SI Brochure 9th ed. (2019), tables 4 and 8 (L, h, min, d, t, and prefixes); the standard
atmosphere 101 325 Pa and the torr as 1/760 of it, NIST SP 811 (2008), appendix B; the pound-force
per square inch 6.894 757e3 Pa and the thermochemical calorie 4.184 J, same appendix; the pound
0.453 592 37 kg, same appendix.
"""

from __future__ import annotations

import csv
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from discrim.errors import DiscrimError, Place
from discrim.units import Unit, UnitSet, parse_number, parse_quantity, parse_sum, parse_unit

SI = {
    # written: value in mol, L, m2, m, kg, s, Pa, K, J
    "mol/L": 1,
    "mmol/L": 1e-3,
    "µmol/L": 1e-6,
    "M": 1,
    "mM": 1e-3,
    "nM": 1e-9,
    "mol/m3": 1e-3,
    "mol dm-3": 1,
    "mol·L⁻¹": 1,
    "mol/(kg s)": 1,
    "mmol/g/h": 1 / 3600,
    "mmol/(cm2 h)": 1e-3 / 1e-4 / 3600,
    "umol/L/s": 1e-6,
    "1/h": 1 / 3600,
    "kPa": 1e3,
    "bar": 1e5,
    "bara": 1e5,
    "kPa(a)": 1e3,
    "atm": 101325,
    "torr": 101325 / 760,
    "mtorr": 101325 / 760e3,
    "psia": 6894.757,
    "kPa^-0.5": 1e3**-0.5,
    "kPa^(1/2)": 1e3**0.5,
    "kJ/mol": 1e3,
    "kcal/mol": 4184,
    "m3": 1e3,
    "cm3": 1e-3,
    "cm2": 1e-4,
    "lb": 0.45359237,
    "day": 86400,
    "d": 86400,
    "t": 1000,
    "0.01 mol/L": 0.01,
    "mol %": 0.01,
    "ppm (mole)": 1e-6,
    "mmol/mol": 1e-3,
    "1": 1,
    "": 1,
    "-": 1,
}


@pytest.mark.parametrize(("text", "value"), SI.items())
def test_factor_to_coherent_units(text, value):
    parsed = parse_unit(text)
    assert parsed.factor(Unit.of(parsed.exponents())) == pytest.approx(value, rel=2e-7)
    if abs(value) in (1, 1e-3, 1e3, 1e-6, 1e5, 101325, 86400, 0.01):
        assert parsed.factor(Unit.of(parsed.exponents())) == value  # exact, no rounding


SHOWN = {
    "mol/kg/s": ("mol kg⁻¹ s⁻¹", "mol kg-1 s-1", r"\mathrm{mol\,kg^{-1}\,s^{-1}}"),
    "s-1 kg-1 mol": ("mol kg⁻¹ s⁻¹", "mol kg-1 s-1", r"\mathrm{mol\,kg^{-1}\,s^{-1}}"),
    "mM": ("mmol L⁻¹", "mmol L-1", r"\mathrm{mmol\,L^{-1}}"),
    "counts/min/min": ("counts min⁻²", "counts min-2", r"\mathrm{counts\,min^{-2}}"),
    "cm^-2": ("cm⁻²", "cm-2", r"\mathrm{cm^{-2}}"),
    "psia^-0.5": ("psia^-0.5", "psia^-0.5", r"\mathrm{psia^{-0.5}}"),
    "mol/gcat/h": ("mol gcat⁻¹ h⁻¹", "mol gcat-1 h-1", r"\mathrm{mol\,gcat^{-1}\,h^{-1}}"),
    "mol/mol": ("", "", ""),
    "°C": ("K", "K", r"\mathrm{K}"),
}


@pytest.mark.parametrize(("text", "shown"), SHOWN.items())
def test_writing(text, shown):
    parsed = parse_unit(text)
    unit = UnitSet.choose([parsed]).unit(parsed)
    assert (unit.text(), unit.ascii(), unit.latex()) == shown
    again = parse_unit(unit.ascii())
    assert again.fits(unit)
    assert again.factor(unit) == 1.0


REFUSED = {
    "psig": "absolute or gauge?",
    "barg": "absolute or gauge?",
    "kPa(g)": "absolute or gauge?",
    "bar gauge": "absolute or gauge?",
    "psi": "Write psia when the values are absolute",
    "sccm": "which temperature and pressure?",
    "slpm": "which temperature and pressure?",
    "NmL/min": "which temperature and pressure?",
    "Nm3/h": "which temperature and pressure?",
    "ppm": 'Write "ppm (mole)" or "ppm (mass)"',
    "ppb/s": 'Write "ppb (mole)" or "ppb (mass)"',
    "%": '"%" of what?',
    "%/min": '"%" of what?',
    "mol/L s": "can be read in two ways",
    "mol/L s-1": "can be read in two ways",
    "mol//L": "a unit is missing",
    "(mol": "a bracket is not closed",
    "mol)": "is not expected here",
    "s**-1": "Write ^ or just the power",
    "mol^99": "a power of 99",
    "mol; import os": "cannot be read in a unit",
    "J/mol/°C": "Write K there.",
    "0 mol": "is no factor",
    "x" * 500: "At most 200 characters",
    "(" * 50 + "mol": "nested too deeply",
}


@pytest.mark.parametrize(("text", "says"), REFUSED.items())
def test_refused_with_a_question(text, says):
    place = Place("study.toml", 7, 9, len(text), f'units = "{text}"')
    with pytest.raises(DiscrimError) as caught:
        parse_unit(text, place)
    assert says in str(caught.value)
    assert "study.toml, line 7" in str(caught.value)


def test_internal_set_is_chosen_from_the_first_columns():
    amine, rate = parse_unit("mmol/L"), parse_unit("umol/L/s")
    units = UnitSet.choose([amine, rate])
    internal = units.unit(rate)
    assert internal.text() == "mmol L⁻¹ s⁻¹"
    assert rate.to_internal(np.array([5.0]), internal) == pytest.approx([0.005], rel=1e-15)
    assert rate.from_internal(np.array([0.005]), internal) == pytest.approx([5.0], rel=1e-15)
    assert (internal / units.unit(amine)).text() == "s⁻¹"


def test_algebra_is_exact_and_hashable():
    k = Unit.of({"amount": 1, "mass": -1, "time": -1})
    p = Unit.of({"pressure": 1})
    root = p ** Fraction(1, 2)
    assert root * root == p
    assert hash(root * root) == hash(p)
    assert (k / p).text() == "mol kg⁻¹ Pa⁻¹ s⁻¹"
    assert k / k == Unit()
    assert (k / k).is_dimensionless


def test_litres_and_lengths_are_separate_kinds():
    assert parse_unit("L").exponents() == parse_unit("cm^3").exponents() == {"volume": 1}
    assert parse_unit("m").exponents() == {"length": 1}
    with pytest.raises(DiscrimError, match="does not fit"):
        parse_unit("mol/L").factor(Unit.of({"pressure": 1}))


def test_temperatures_move_their_zero_but_differences_do_not():
    kelvin = Unit.of({"temperature": 1})
    celsius, fahrenheit = parse_unit("°C"), parse_unit("degF")
    assert celsius.to_internal(25.0, kelvin) == pytest.approx(298.15)
    assert fahrenheit.to_internal(212.0, kelvin) == pytest.approx(373.15)
    assert celsius.from_internal(373.15, kelvin) == pytest.approx(100.0)
    assert celsius.factor(kelvin) == 1.0


def test_unknown_unit_is_a_kind_of_its_own():
    counts = parse_unit("counts/min")
    assert counts.exponents() == {"counts": 1, "time": -1}
    assert parse_unit("a.u.").exponents() == {"a.u.": 1}


def test_units_of_the_reference_sets_are_read_or_asked_about():
    # tests/reference/units.csv: the units that the published data sets are printed in.
    with open(Path(__file__).parents[1] / "reference" / "units.csv", encoding="utf-8") as file:
        texts = {row["unit"] for row in csv.DictReader(file)}
    asked = set()
    for text in texts:
        try:
            parse_unit(text)
        except DiscrimError:
            asked.add(text)
    assert {"psia", "1/h", "mol/(kg s)", "atm", "mol/dm3", "0.01 mol/L", "mtorr"} <= texts - asked
    assert "ppm" in asked


QUANTITIES = {
    "2.5 mmol/L": (2.5, "2.5", {"amount": 1, "volume": -1}),
    "1e3 mol/kg/s": (1000.0, "1e3", {"amount": 1, "mass": -1, "time": -1}),
    "0.600": (0.6, "0.600", {}),
    "−3 °C": (-3.0, "−3", {"temperature": 1}),
    "5mM": (5.0, "5", {"amount": 1, "volume": -1}),
}


@pytest.mark.parametrize(("text", "wanted"), QUANTITIES.items())
def test_quantity(text, wanted):
    quantity = parse_quantity(text)
    assert (quantity.value, quantity.number, quantity.unit.exponents()) == wanted


def test_sum_of_a_percentage_and_an_amount():
    relative, absolute = parse_sum("1 % + 0.02 umol/L/s")
    assert (relative.value, relative.percent) == (0.01, True)
    assert (absolute.value, absolute.percent) == (0.02, False)


NUMBERS = {
    "0,5": "Write decimals with a point",
    "1,000.5": "no separators of thousands",
    "nan": "is not a measured value",
    "-inf": "is not a measured value",
    "n/a": "is not a measured value",
    "1e999": "too large",
    "high": "stands where a number belongs",
    "0x10": "stands where a number belongs",
    "1_000": "stands where a number belongs",
    "": "stands where a number belongs",
}


@pytest.mark.parametrize(("text", "says"), NUMBERS.items())
def test_bad_number(text, says):
    with pytest.raises(DiscrimError, match=says):
        parse_number(text)


@pytest.mark.parametrize("text", ["mmol/L", "0,5 mmol/L", "5 % mmol", "", "1..2 s"])
def test_bad_quantity(text):
    with pytest.raises(DiscrimError):
        parse_quantity(text)
