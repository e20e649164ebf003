"""Remarks of a chemist on the runs: each where it belongs, and silence where it does not.

Invented runs. Worked by hand or from handbooks: nX/2 at X = 0.2 and first order is 10 %; at 50 kJ/mol
298 to 308 K raises a rate by exp(50000/8.314 (1/298 - 1/308)) = 1.93; the primary salt effect of two
ions of charge +1 and -1 between I = 0 and 0.1 mol/L lowers log k by 2 x 0.509 x 0.316/1.316 = 0.245
(Debye-Hückel constant of water at 25 °C 0.509, from memory). The limits (a tenth and so on) are common
practice, no source.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import discrim
from discrim.units import Unit
from discrim.weigh.checked import checked
from discrim.weigh.chemistry import chemistry_findings
from discrim.weigh.chemistry_conditions import molar, salt_effect
from discrim.weigh.run import run

A = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0])
B = np.array([3.0, 9.0, 5.0, 2.0, 8.0, 4.0, 7.0, 6.0])
NOISE = 1 + 0.01 * np.random.default_rng(3).standard_normal(8)


def remarks(
    folder: Path, columns: dict[str, tuple[str, str, np.ndarray]], candidates: str, more: str = ""
) -> list[tuple[str, str, str]]:
    """``columns``: name -> (what stands under it in the study, unit, values)."""
    lines = [",".join(columns)]
    lines += [",".join(f"{x:.5g}" for x in row)
              for row in zip(*(v for _, _, v in columns.values()), strict=True)]  # fmt: skip
    (folder / "runs.csv").write_text("\n".join(lines) + "\n")
    text = 'title = "t"\ntable = "runs.csv"\n' + more
    for name, (what, unit, _) in columns.items():
        text += f"\n[columns.{name}]\n{what}\n" + (f'units = "{unit}"\n' if unit else "")
    (folder / "study.toml").write_text(text + candidates)
    w = run(discrim.load(folder / "study.toml"), lattices=False)
    return chemistry_findings(w)


def rate(y: np.ndarray, error: str = "1 %") -> tuple[str, str, np.ndarray]:
    return f'is = "rate of P"\nerror = "{error}"', "mmol/L/s", y


def given(species: str, x: np.ndarray, error: str = "0.5 %") -> tuple[str, str, np.ndarray]:
    return f'is = "{species}"\nerror = {{ sd = "{error}", origin = "set" }}', "mmol/L", x


FIRST = '\n[[candidates]]\nname = "first order"\n[candidates.steps]\nfall = "A -> P"\n'
SECOND = '\n[[candidates]]\nname = "second order"\n[candidates.steps]\nmeet = "A + B -> P"\n'


def test_nothing_to_remark(tmp_path: Path) -> None:
    columns = {"A": given("A", A), "rate": rate(0.3 * A * NOISE)}
    assert remarks(tmp_path, columns, FIRST) == []


ENZYME = '\n[[candidates]]\nname = "one"\nmechanism = "enzyme-one-substrate"\n'


@pytest.mark.parametrize(("e", "expected"), [(0.01, 0), (0.5, 1)])
def test_catalyst_that_binds_a_part_that_counts(tmp_path: Path, e: float, expected: int) -> None:
    total = np.full(8, e) * np.tile([1.0, 0.8], 4)
    columns = {
        "E": ('is = "total E"\nerror = { sd = "1 %", origin = "set" }', "mmol/L", total),
        "S": given("S", A),
        "rate": rate(total * A / (2.0 + A) * NOISE),
    }
    found = remarks(tmp_path, columns, ENZYME)
    binding = [f for f in found if "which it binds" in f[2]]
    assert len(binding) == expected
    if binding:
        assert binding[0][0] == "warning"
        assert "up to 50 % of S" in binding[0][2]  # 0.5 of 1 mmol/L in run 1
        # 0.5 of 3 and 0.4 of 2 are above a tenth, 0.4 of 4 and 0.5 of 5 are not
        assert binding[0][1] == "runs 1, 2 and 3"
    blank = [f for f in found if "no blank" in f[2]]
    assert [f[0] for f in blank] == ["note"]


def test_a_blank_in_the_table_or_stated_is_one(tmp_path: Path) -> None:
    total = np.array([0.0, 1, 1, 2, 2, 2, 1, 1]) * 1e-3
    columns = {
        "E": ('is = "total E"\nerror = { sd = "1 %", origin = "set" }', "mmol/L", total),
        "S": given("S", A),
        "rate": rate(total * A / (2.0 + A) * NOISE, "1 % + 1e-6 mmol/L/s"),
    }
    assert not [f for f in remarks(tmp_path, columns, ENZYME) if "no blank" in f[2]]
    columns["E"] = (columns["E"][0], "mmol/L", total + 1e-3)
    columns["rate"] = rate((total + 1e-3) * A / (2.0 + A) * NOISE)
    stated = '[controls]\nblank = "no rate without enzyme"\n'
    assert not [f for f in remarks(tmp_path, columns, ENZYME, stated) if "no blank" in f[2]]


def test_flooded_reagent_that_is_used_up(tmp_path: Path) -> None:
    """k_obs of A, 0.05 or 0.5 mmol/L of it, with at least 2 mmol/L of B: 2.5 % or 25 % of B goes."""
    k = ('is = "k_obs of A"\nerror = "1 %"', "1/s", 0.3 * B * NOISE)
    for a, error, expected in ((0.05, "5 %", 0), (0.5, "5 %", 1), (0.05, "0.5 %", 1)):
        columns = {"A": given("A", np.full(8, a)), "B": given("B", B, error), "k": k}
        found = [f for f in remarks(tmp_path, columns, SECOND) if "reacts with A" in f[2]]
        assert len(found) == expected, (a, error)
        if a == 0.5:
            assert "up to 25 % of B reacts with A" in found[0][2]


CATALYSED = '\n[[candidates]]\nname = "general base"\n[candidates.steps]\nby_b = "A + B -> P + B"\n'


def test_a_catalyst_in_excess_is_not_used_up(tmp_path: Path) -> None:
    k = ('is = "k_obs of A"\nerror = "1 %"', "1/s", 0.3 * B * NOISE)
    columns = {"A": given("A", np.full(8, 1.5)), "B": given("B", B), "k": k}
    assert not [f for f in remarks(tmp_path, columns, CATALYSED) if "reacts with A" in f[2]]


@pytest.mark.parametrize(("x", "expected"), [(0.01, 0), (0.2, 1)])
def test_conversion_of_a_differential_bed(tmp_path: Path, x: float, expected: int) -> None:
    columns = {
        "A": given("A", A),
        "X": ('is = "conversion of A"', "%", 100 * np.full(8, x) * np.tile([1.0, 0.5], 4)),
        "rate": rate(0.3 * A * NOISE),
    }
    more = '[reactor]\nkind = "differential"\n'
    found = [f for f in remarks(tmp_path, columns, FIRST, more) if "nX/2" in f[2]]
    assert len(found) == expected
    if found:
        assert "conversion of 20 %" in found[0][2]
        assert "nX/2 = 10 % along the bed" in found[0][2]


def test_conversion_makes_no_replicate_and_no_stand_in(tmp_path: Path) -> None:
    a = np.repeat([1.0, 2.0, 4.0, 8.0], 2)
    columns = {
        "A": given("A", a),
        "X": ('is = "conversion of A"', "", np.linspace(0.001, 0.002, 8)),
        "rate": rate(0.3 * a * NOISE),
    }
    remarks(tmp_path, columns, FIRST)
    study = discrim.load(tmp_path / "study.toml")
    assert len(set(study.runs.replicate_of.tolist())) == 4


BOTH_WAYS = """
[[candidates]]
name = "both ways"
law = "k*([A] - [P]/K_eq)"
overall = "A -> P"
[constants]
K_eq = { value = 4.0, fixed = true }
"""


def test_near_equilibrium_without_a_reverse_step(tmp_path: Path) -> None:
    p = np.array([0.0, 0.1, 0.1, 0.2, 0.2, 0.2, 0.1, 20.0])
    columns = {"A": given("A", A), "P": given("P", p), "rate": rate(0.3 * (A - p / 4) * NOISE)}
    found = [f for f in remarks(tmp_path, columns, FIRST + BOTH_WAYS) if "equilibrium" in f[2]]
    assert len(found) == 1
    assert found[0][1] == "run 8"
    # Q/K = (20/10)/4 = 0.5
    assert "up to 50 % of its equilibrium (Q/K_eq)" in found[0][2]
    assert "“first order” has none" in found[0][2]
    columns["P"] = given("P", np.minimum(p, 0.2))
    columns["rate"] = rate(0.3 * (A - np.minimum(p, 0.2) / 4) * NOISE)
    quiet = remarks(tmp_path, columns, FIRST + BOTH_WAYS)
    assert not [f for f in quiet if "equilibrium" in f[2]]


def test_temperature_beside_the_law(tmp_path: Path) -> None:
    for t, expected in (
        (np.linspace(298.0, 308.0, 8), 1),
        (298.0 + 0.02 * np.arange(8) % 2, 0),
    ):
        columns = {
            "A": given("A", A),
            "T": ('is = "temperature"\nerror = { sd = "0.01 K", origin = "measured" }', "K", t),
            "rate": rate(0.3 * A * NOISE),
        }
        found = [f for f in remarks(tmp_path, columns, FIRST) if "activation energy" in f[2]]
        assert len(found) == expected
        if found:
            assert "changes by 93 %" in found[0][2]
    # a constant for each temperature is a law with temperature
    columns["T"] = (columns["T"][0], "K", np.tile([298.0, 308.0], 4))
    columns["lot"] = ('is = "group"', "", np.tile([1.0, 2.0], 4))
    per = '\n[constants]\nk_fall = { per = "lot" }\n'
    assert not [f for f in remarks(tmp_path, columns, FIRST + per) if "activation" in f[2]]


def test_ph_that_no_law_holds(tmp_path: Path) -> None:
    columns = {
        "A": given("A", A),
        "pH": ('is = "pH"\nerror = { sd = "0.02", origin = "measured" }', "", np.linspace(4, 6, 8)),
        "rate": rate(0.3 * A * NOISE),
    }
    (found,) = remarks(tmp_path, columns, FIRST)
    assert found[0] == "note"
    assert "pH varies from 4 to 6" in found[2]


IONS = (
    SECOND + "\n[candidates.species]\nA = { charge = 1 }\nB = { charge = -1 }\nP = { charge = 0 }\n"
)


def test_ionic_strength_of_ions(tmp_path: Path) -> None:
    columns = {"A": given("A", A), "B": given("B", B), "rate": rate(0.3 * A * B * NOISE)}
    assert not remarks(tmp_path, columns, SECOND)  # charges are never guessed
    (found,) = remarks(tmp_path, columns, IONS)
    assert (found[0], found[1]) == ("warning", "ionic strength")
    held = '[controls]\n"ionic strength" = "0.1 mol/L by salt"\n'
    assert not remarks(tmp_path, columns, IONS, held)
    strength = np.linspace(0.0, 100.0, 8)
    columns["I"] = (
        'is = "ionic strength"\nerror = { sd = "1 %", origin = "set" }', "mmol/L", strength
    )  # fmt: skip
    (found,) = remarks(tmp_path, columns, IONS)
    # 10^-0.245 = 0.57
    assert "(charges +1 and -1)" in found[2]
    assert "changes by about 43 %" in found[2]
    columns["I"] = (columns["I"][0], "mmol/L", np.full(8, 100.0))
    assert not remarks(tmp_path, columns, IONS)


def test_salt_effect_in_small_salt_is_the_limiting_law() -> None:
    """ln k = ln k0 + 2 A z z ln(10) sqrt(I) as I goes to zero (Brønsted 1922)."""
    small = 1e-8
    limit = 2 * 0.509 * -2 * np.log(10) * np.sqrt(small)
    assert salt_effect(0.0, small, -2) == pytest.approx(limit, rel=2e-4)
    assert salt_effect(0.0, 0.1, -1) / np.log(10) == pytest.approx(-0.245, abs=5e-4)


def test_ionic_strength_in_other_units() -> None:
    assert molar(np.ones(1), Unit.of({"amount": 1, "volume": -1})) == pytest.approx([1.0])
    assert molar(np.ones(1), Unit.of({"amount": 1, "mass": -1})) == pytest.approx([1.0])
    assert molar(np.ones(1), Unit.of({"mass": 1, "volume": -1})) is None


def test_rate_of_nothing_with_a_relative_error(tmp_path: Path) -> None:
    y = 0.3 * A * NOISE
    y[0] = 0.0
    columns = {"A": given("A", np.r_[1e-6, A[1:]]), "rate": rate(y)}
    (found,) = remarks(tmp_path, columns, FIRST)
    assert (found[0], found[1]) == ("warning", "run 1")
    assert "rule the fit" in found[2]
    columns["rate"] = rate(y, "1 % + 0.01 mmol/L/s")
    assert not remarks(tmp_path, columns, FIRST)


ADDED = """
[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"
[[questions]]
participates = "B"
"""


def test_species_that_no_run_is_nearly_without(tmp_path: Path) -> None:
    for b, expected in ((B, 1), (np.r_[0.0, B[1:]], 0)):
        columns = {
            "A": given("A", A),
            "B": given("B", b),
            "rate": rate((0.3 * A + 0.2 * b) * NOISE),
        }
        found = [f for f in remarks(tmp_path, columns, ADDED) if "extrapolated" in f[2]]
        assert len(found) == expected
        if found:
            # 2 of 9
            assert "the least B in any run is 22 % of the most" in found[0][2]
            assert "if a review of their hazards allows" in found[0][2]


def test_check_remarks_before_any_fit(tmp_path: Path) -> None:
    """Also where the rates are still to be measured."""
    columns = {
        "A": given("A", A),
        "T": ('is = "temperature"\nerror = { sd = "0.01 K", origin = "measured" }', "K",
              np.linspace(298.0, 308.0, 8)),
        "rate": rate(0.3 * A * NOISE),
    }  # fmt: skip
    told = remarks(tmp_path, columns, FIRST)
    before = checked(discrim.load(tmp_path / "study.toml"))["findings"]
    assert [(f["severity"], f["where"], f["says"]) for f in before] == told
    table = (tmp_path / "runs.csv").read_text().splitlines()
    planned = [table[0]] + [line.rpartition(",")[0] + "," for line in table[1:]]
    (tmp_path / "runs.csv").write_text("\n".join(planned) + "\n")
    again = checked(discrim.load(tmp_path / "study.toml"))["findings"]
    assert told[0][2] in [f["says"] for f in again]
