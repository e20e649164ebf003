"""Rates that were worked out from the conditions of their own runs: ``computed_from``.

Checked against scipy.optimize.least_squares with the true value of every reading as an unknown, which needs
no covariance between a rate and its conditions, and against the law of propagation for correlated
input quantities (JCGM 100:2008, 5.2.2). Tables are simulated.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import least_squares

from discrim.errors import DiscrimError
from discrim.fit.engine import solve
from discrim.fit.fit import fit
from discrim.fit.problem import Problem
from discrim.study.load import load
from discrim.weigh.prepare import prepare

STUDY = """
title = "a stirred tank"
table = "runs.csv"

[columns.rate]
is = "consumption of A"
units = "mmol/L/s"
computed_from = "(A_in - A)/tau"
error = "exact"

[columns.A_in]
is = "inlet A"
units = "mmol/L"
error = { sd = "0.3 mmol/L", origin = "measured" }

[columns.A]
is = "A"
units = "mmol/L"
error = { sd = "0.4 mmol/L", origin = "measured" }

[columns.tau]
is = "time"
units = "s"
error = { sd = "1 s", origin = "measured" }

[[candidates]]
name = "order in A"
law = "k*[A]/(1 + K*[A])"
overall = "A -> P"
"""


def table(folder: Path, rng: np.random.Generator, n: int = 12) -> np.ndarray:
    """Simulated readings A_in, A, tau, shape (3, n), written as runs.csv."""
    inlet = rng.uniform(40.0, 100.0, n)
    tau = rng.uniform(30.0, 200.0, n)
    k, big = 0.02, 0.01  # (A_in - A)(1 + K A) = k tau A, a quadratic in A
    b = 1.0 + k * tau - big * inlet
    a = (-b + np.sqrt(b * b + 4.0 * big * inlet)) / (2.0 * big)
    read = np.array([inlet, a, tau]) + np.array([[0.3], [0.4], [1.0]]) * rng.standard_normal((3, n))
    lines = ["A_in,A,tau"] + [",".join(f"{x:.17g}" for x in row) for row in read.T]
    (folder / "runs.csv").write_text("\n".join(lines) + "\n")
    return read


def test_fit_against_all_true_values_as_unknowns(tmp_path: Path) -> None:
    x = table(tmp_path, np.random.default_rng(11))
    (tmp_path / "study.toml").write_text(STUDY)
    _, bench, (bound,) = prepare(load(tmp_path / "study.toml"))
    ours = fit(bound.predictor, bench.measurements)
    n = x.shape[1]

    def misses(unknown: np.ndarray) -> np.ndarray:
        k, big = unknown[:2]
        a, tau = unknown[2 : 2 + n], unknown[2 + n :]
        inlet = a + tau * k * a / (1.0 + big * a)  # the balance, solved for what flows in
        return np.concatenate([(inlet - x[0]) / 0.3, (a - x[1]) / 0.4, (tau - x[2]) / 1.0])

    start = np.concatenate([[0.02, 0.01], x[1], x[2]])
    theirs = least_squares(misses, start, x_scale=start, xtol=1e-15, ftol=1e-15, gtol=1e-15)
    by_name = dict(zip(bound.names, ours.theta, strict=True))
    assert [by_name["k"], by_name["K"]] == pytest.approx(list(theirs.x[:2]), rel=1e-6)
    assert ours.objective == pytest.approx(2.0 * theirs.cost, rel=1e-8)


def test_covariance_is_that_of_correlated_quantities(tmp_path: Path) -> None:
    x = table(tmp_path, np.random.default_rng(12))
    (tmp_path / "study.toml").write_text(STUDY)
    _, bench, (bound,) = prepare(load(tmp_path / "study.toml"))
    problem = Problem(bound.predictor, bench.measurements)
    theta = np.array([{"k": 0.02, "K": 0.01}[n] for n in bound.names])
    at = solve(problem, theta[None], fixed=np.ones((1, 2), bool))
    symbols = [s.name for s in bench.symbols]
    c = np.asarray(at.conditions[0])
    inlet, a, tau = (c[:, symbols.index(s)] for s in ("{A_in}", "[A]", "{tau}"))
    slope = 0.02 / (1.0 + 0.01 * a) ** 2
    # u^2(r) + u^2(f) - 2 u(r, f): both hold the reading of A
    variance_r = (0.3 / tau) ** 2 + (0.4 / tau) ** 2 + ((inlet - a) / tau**2 * 1.0) ** 2
    together = (-1.0 / tau) * slope * 0.4**2
    want = variance_r + (0.4 * slope) ** 2 - 2.0 * together
    assert at.covariance[0] == pytest.approx(want, rel=1e-6)
    assert bench.measurements.y == pytest.approx((x[0] - x[1]) / x[2])


def test_cells_that_differ_from_the_formula_are_pointed_out(tmp_path: Path) -> None:
    x = table(tmp_path, np.random.default_rng(13))
    rate = (x[0] - x[1]) / x[2]
    rate[3] *= 1.2
    lines = ["A_in,A,tau,rate"]
    lines += [",".join(f"{v:.6g}" for v in row) for row in np.vstack([x, rate]).T]
    (tmp_path / "runs.csv").write_text("\n".join(lines) + "\n")
    (tmp_path / "study.toml").write_text(STUDY)
    study = load(tmp_path / "study.toml")
    (said,) = [f for f in study.findings if "formula" in f]
    assert "run 4;" in said
    assert study.runs.find("rate").values[3] == pytest.approx(rate[3] / 1.2, rel=1e-4)


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ("(A_in - A)/tau", "(A_in - A)/t_res", 't_res" in the formula of "rate" has no value'),
        ("(A_in - A)/tau", "A_in - A", "the formula is in"),
        ("(A_in - A)/tau", "(A_in - A)/(tau - 0*tau)/0", "zero"),
        ('computed_from = "(A_in - A)/tau"\n', "", 'has no column "rate"'),
        ("(A_in - A)/tau", "(A_in - rate)/tau", "is the observed rate"),
        ("(A_in - A)/tau", "A/tau", '"inlet A" is not yet supported here'),
        (
            "[columns.A]",
            '[columns.B]\nis = "B"\ncomputed_from = "A/2"\n[columns.A]',
            "not observed",
        ),
        ('error = "exact"', 'error = "digits"', "six significant digits|calculated"),
    ],
)
def test_wrong_formulas(tmp_path: Path, old: str, new: str, says: str) -> None:
    table(tmp_path, np.random.default_rng(14))
    assert old in STUDY
    (tmp_path / "study.toml").write_text(STUDY.replace(old, new, 1))
    with pytest.raises(DiscrimError, match=says) as caught:
        load(tmp_path / "study.toml")
    assert caught.value.place is not None
