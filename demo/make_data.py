"""Make the tables of the demo studies. Invented data: every number comes from this script.

Run from anywhere with ``python demo/make_data.py``; it writes the CSV files beside the studies, the
same bytes each time. Each table is made from a law that is known here and hidden from the studies,
with errors of the sizes that the studies state: conditions that are *set* are printed as intended
and differ in truth, readings are printed with their error.
"""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from pathlib import Path

import numpy as np

HERE = Path(__file__).resolve().parent


def write(path: Path, header: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    """A CSV file with the same line ends everywhere; lines with # are comments."""
    with path.open("w", newline="", encoding="utf-8") as out:
        out.write("# Invented data, made by demo/make_data.py.\n")
        writer = csv.writer(out, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def digits(value: float, significant: int) -> str:
    """``value`` with so many significant digits, never in exponential form."""
    places = significant - 1 - int(np.floor(np.log10(abs(value))))
    return f"{round(value, places):.{max(places, 0)}f}"


# --- hydrolysis in a carboxylate buffer ----------------------------------------------------------

PKA = 4.62  # of the buffer acid at the ionic strength of the runs
K_WATER = 1.90e-5  # 1/s
K_BASE = 3.40e-4  # L/mol/s; the acid form does nothing
STOCKS = {"S1": 0.50, "S2": 0.10, "S3": 0.82}  # fraction of the buffer in its base form
RATE_ERROR = 0.012
WEIGHING = 0.004  # of a stock, shared by all its dilutions
DILUTION = 0.003
PH_ERROR = 0.01  # of the reading, one for each stock


def buffer_runs(seed: int = 20417) -> None:
    """First campaign: one stock diluted. Second: the same runs and a few from two more stocks."""
    rng = np.random.default_rng(seed)
    amounts = {
        "S1": (50, 100, 150, 200, 250, 300, 400, 400, 500, 500),
        "S2": (200, 400, 500, 500),
        "S3": (100, 250, 500, 500),
    }
    rows: list[list[str]] = []
    for stock, totals in amounts.items():
        base = STOCKS[stock]
        made = 1 + WEIGHING * rng.standard_normal()
        ph = PKA + float(np.log10(base / (1 - base))) + PH_ERROR * rng.standard_normal()
        for total in totals:
            true = total / 1000 * made * (1 + DILUTION * rng.standard_normal())
            k = (K_WATER + K_BASE * base * true) * (1 + RATE_ERROR * rng.standard_normal())
            rows.append([str(len(rows) + 1), stock, str(total), f"{ph:.2f}", digits(k * 1e6, 4)])
    header = ("run", "stock", "buffer_total", "pH", "k_obs")
    folder = HERE / "buffer-hydrolysis"
    write(folder / "first.csv", header, rows[: len(amounts["S1"])])
    write(folder / "second.csv", header, rows)


# --- a ketone hydrogenated over a supported metal ------------------------------------------------

K_SURFACE = 96.0  # mmol/kg/s, with the site balance
K_KETONE = 0.110  # 1/kPa
K_H2 = 0.0040  # 1/kPa, dissociative
K_ALCOHOL = 0.260  # 1/kPa
FLOW_ERROR = 0.01  # of each partial pressure
BED_ERROR = 0.04  # of the rate


def catalyst_rate(ketone: np.ndarray, h2: np.ndarray, alcohol: np.ndarray) -> np.ndarray:
    """Dissociated hydrogen; addition of its first atom to the adsorbed ketone limits."""
    atoms = np.sqrt(K_H2 * h2)
    sites = 1 + K_KETONE * ketone + atoms + K_ALCOHOL * alcohol
    return K_SURFACE * K_KETONE * ketone * atoms / sites**2


def catalyst_runs(seed: int = 31) -> None:
    """26 runs at one temperature: each pressure varied, some together, three repeats."""
    rng = np.random.default_rng(seed)
    plan = [
        # ketone, hydrogen, alcohol in kPa
        (1.0, 60, 0), (2.0, 60, 0), (4.0, 60, 0), (8.0, 60, 0), (16.0, 60, 0), (30.0, 60, 0),
        (8.0, 5.0, 0), (8.0, 10, 0), (8.0, 20, 0), (8.0, 40, 0), (8.0, 90, 0),
        (8.0, 60, 1.0), (8.0, 60, 2.0), (8.0, 60, 4.0), (8.0, 60, 8.0), (8.0, 60, 16.0),
        (2.0, 20, 0), (2.0, 90, 0), (30.0, 20, 0), (30.0, 5.0, 0),
        (2.0, 20, 4.0), (30.0, 20, 8.0), (2.0, 60, 8.0),
        (8.0, 60, 0), (8.0, 60, 0), (8.0, 60, 4.0),
    ]  # fmt: skip
    order = rng.permutation(len(plan))
    set_points = np.array([plan[i] for i in order], dtype=float)
    true = set_points * (1 + FLOW_ERROR * rng.standard_normal(set_points.shape))
    rate = catalyst_rate(*true.T) * (1 + BED_ERROR * rng.standard_normal(len(plan)))
    rows = [
        [str(n), f"{ketone:.1f}", f"{h2:.1f}", f"{alcohol:.1f}", digits(r, 3)]
        for n, ((ketone, h2, alcohol), r) in enumerate(zip(set_points, rate, strict=True), 1)
    ]
    write(
        HERE / "supported-catalyst" / "runs.csv",
        ("run", "p_ketone", "p_h2", "p_alcohol", "rate"),
        rows,
    )


if __name__ == "__main__":
    buffer_runs()
    catalyst_runs()
