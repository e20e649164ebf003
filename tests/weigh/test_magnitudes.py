"""Rate constants beyond what diffusion, collisions and transition states allow, through study files.

Sources, from memory: Atkins, Physical Chemistry: 7.4e9 L/mol/s for diffusion in water at 25 °C, k T/h
= 6.2e12 1/s; collisions of some 0.4 nm2 in a gas: of the order 1e11 L/mol/s. Viscosity of water at
20 °C 1.002 mPa s (IAPWS). All rates here are invented, made from constants that no step could have.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import sympy

import discrim
from discrim.weigh import weigh
from discrim.weigh.magnitudes import (
    collision_limit,
    diffusion_limit,
    first_order_limit,
    never_above,
    water_viscosity,
)


def test_limits_are_the_handbook_ones() -> None:
    assert 1e3 * diffusion_limit(298.15, 0.891e-3) == pytest.approx(7.4e9, rel=5e-3)
    assert water_viscosity(293.15) == pytest.approx(1.002e-3, rel=0.01)
    assert water_viscosity(298.15) == pytest.approx(0.890e-3, rel=0.01)
    assert first_order_limit(298.15) == pytest.approx(6.21e12, rel=1e-3)
    assert 1e11 < 1e3 * collision_limit() < 3e11


def test_what_cannot_exceed_the_first_encounter() -> None:
    """k_cat/K_m = k_1 k_2/(k_-1 + k_2) <= k_1 (Briggs & Haldane 1925): below k_1, not below k_2 K."""
    k1, k1r, k2, ka = sympy.symbols("k1 k1r k2 ka", positive=True)
    ratio = k1 * k2 / (k1r + k2)
    assert never_above(ratio, k1)
    assert not never_above(ratio, k1r)
    assert not never_above(k1 * k2 / k1r, k1)
    assert not never_above(k2 * ka, k2)
    assert never_above(k2, k2)
    assert not never_above(2 * k2, k2)


def _study(
    folder: Path, rates: np.ndarray, amounts: np.ndarray, *, steps: str, more: str = "",
    columns: tuple[str, str] = ("A", "B"), unit: str = "umol/L", rate: str = "mol/L/s",
) -> list[dict[str, Any]]:  # fmt: skip
    rows = [",".join(f"{x:.6g}" for x in (*a, r)) for a, r in zip(amounts, rates, strict=True)]
    (folder / "runs.csv").write_text(f"{columns[0]},{columns[1]},rate\n" + "\n".join(rows) + "\n")
    text = f'title = "t"\ntable = "runs.csv"\n[columns.rate]\nis = "rate of P"\nunits = "{rate}"\n'
    text += 'error = "2 %"\n'
    for c in columns:
        text += f'[columns.{c}]\nis = "{c}"\nunits = "{unit}"\n'
        text += 'error = { sd = "0.1 %", origin = "set" }\n'
    text += f'[[candidates]]\nname = "one"\n{more}\n[candidates.steps]\n{steps}\n'
    text += '[[questions]]\nstands = "all"\n'
    (folder / "study.toml").write_text(text)
    document: dict[str, Any] = weigh(discrim.load(folder / "study.toml"))
    (c,) = document["candidates"]
    about = [f for f in document["findings"] if "is above" in f["says"]]
    return [*c["magnitudes"], *about]


AMOUNTS = np.array([[1, 2], [2, 1], [3, 4], [4, 2], [5, 5], [6, 1], [2, 6], [1, 5]], float)
NOISE = 1 + 0.02 * np.random.default_rng(1).standard_normal(8)


@pytest.mark.parametrize(("k", "severity"), [(5e9, ""), (5e10, "warning"), (7.45e9, "note")])
def test_second_order_in_solution(tmp_path: Path, k: float, severity: str) -> None:
    """Amounts in µmol/L, rates in mol/L/s, so that the limit has to be converted."""
    rates = k * (AMOUNTS * 1e-6).prod(axis=1) * NOISE
    one, *findings = _study(tmp_path, rates, AMOUNTS, steps='meet = "A + B -> P"')
    assert one["step_constant"] == "k_meet"
    assert one["value"] / one["limit"] == pytest.approx(k / 7.43e9, rel=0.05)
    assert [f["severity"] for f in findings] == ([severity] if severity else [])
    if findings:
        assert "diffusion in water at 25 °C, the study gives no temperature" in findings[0]["says"]


def test_collisions_in_a_gas_of_pressures(tmp_path: Path) -> None:
    """k_p = k_c/(R T) where amounts are pressures and the rate is in pressure a second."""
    k = 1e12 * 1e-3 / (8.314 * 298.15)  # 1/Pa/s
    rates = k * AMOUNTS.prod(axis=1) * NOISE
    one, finding = _study(
        tmp_path, rates, AMOUNTS, steps='meet = "A + B -> P"', unit="Pa", rate="Pa/s"
    )
    assert one["value"] / one["limit"] == pytest.approx(1e12 / 1.8e11, rel=0.05)
    assert finding["severity"] == "warning"
    assert "collide" in finding["says"]


def test_first_order_step(tmp_path: Path) -> None:
    rates = 1e14 * AMOUNTS[:, 0] * 1e-6 * NOISE
    one, finding = _study(tmp_path, rates, AMOUNTS, steps='falls = "A -> P"\nwith_b = "B -> P"')[
        ::2
    ]
    assert one["limit"] == pytest.approx(6.21e12, rel=1e-3)
    assert finding["severity"] == "warning"
    assert "transition-state" in finding["says"]


def test_k_cat_over_k_m_of_an_enzyme(tmp_path: Path) -> None:
    """Neither constant is beyond its limit, their quotient is."""
    k_cat, k_m = 1e6, 1e-5  # 1/s, mol/L
    e, s = AMOUNTS[:, 0] * 1e-9, AMOUNTS[:, 1] * 5e-6
    rates = k_cat * e * s / (k_m + s) * NOISE
    amounts = np.column_stack([1e6 * e, 1e6 * s])
    folder = tmp_path
    rows = [",".join(f"{x:.6g}" for x in (*a, r)) for a, r in zip(amounts, rates, strict=True)]
    (folder / "runs.csv").write_text("E,S,rate\n" + "\n".join(rows) + "\n")
    (folder / "study.toml").write_text(
        'title = "t"\ntable = "runs.csv"\n[columns.rate]\nis = "rate of P"\nunits = "mol/L/s"\n'
        'error = "2 %"\n[columns.E]\nis = "total E"\nunits = "umol/L"\n'
        'error = { sd = "0.1 %", origin = "set" }\n[columns.S]\nis = "S"\nunits = "umol/L"\n'
        'error = { sd = "0.1 %", origin = "set" }\n[[candidates]]\nname = "one"\n'
        'mechanism = "enzyme-one-substrate"\n[[questions]]\nstands = "all"\n'
    )
    document = weigh(discrim.load(folder / "study.toml"))
    above = [m for m in document["candidates"][0]["magnitudes"] if m["above"]]
    assert [m["name"] for m in above] == ["k_turn/K_m_S"]
    assert above[0]["step_constant"] == "k_bind"
    assert above[0]["value"] / above[0]["limit"] == pytest.approx(1e11 / 7.43e9, rel=0.3)
    (finding,) = [f for f in document["findings"] if "cannot exceed" in f["says"]]
    assert "k_turn/K_m_S" in finding["says"]
