"""Whole studies of several responses without stated errors. The tables are simulated.

A -> P and A + B -> Q side by side, so the rates of P and Q are k_p [A] and k_q [A][B].
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm

from discrim.errors import DiscrimError
from discrim.fit.measurements import Scale
from discrim.study.load import load
from discrim.weigh import weigh
from discrim.weigh.run import run

STUDY = """
title = "Simulated: two products"
table = "runs.csv"
[columns.rate_p]
is = "rate of P"
units = "umol/L/s"
{error_p}
[columns.rate_q]
is = "rate of Q"
units = "mmol/L/s"
[columns.a]
is = "A"
units = "mmol/L"
error = "exact"
[columns.b]
is = "B"
units = "mmol/L"
error = "exact"
[[candidates]]
name = "side by side"
[candidates.steps]
to_p = "A -> P"
to_q = "A + B -> Q"
[[questions]]
participates = "B"
matters_above = "5 %"
"""
OTHER = """
[[candidates]]
name = "both with B"
[candidates.steps]
to_p = "A -> P"
with_b = "A + B -> P + B"
to_q = "A + B -> Q"
"""
UNKNOWN = '\n[errors]\nbetween_responses = "unknown"\n'


def written(
    folder: Path, extra: str = "", *, n: int = 12, error_p: str = "", seed: int = 1
) -> tuple[Path, np.ndarray]:
    """Study file and the table, shape (n, 4): rates of P and Q in mmol/L/s, A, B."""
    rng = np.random.default_rng(seed)
    a, b = np.exp(rng.uniform(-1.0, 1.0, (2, n)))
    noise = rng.multivariate_normal([0, 0], [[1e-4, 1e-4], [1e-4, 4e-4]], n)
    p, q = 0.5 * a + noise[:, 0], 0.3 * a * b + noise[:, 1]
    rows = [f"{1e3 * w:.2f},{x:.5f},{y:.4f},{z:.4f}" for w, x, y, z in zip(p, q, a, b, strict=True)]
    text = "\n".join(["rate_p,rate_q,a,b", *rows])
    (folder / "runs.csv").write_text(text, encoding="utf-8")
    (folder / "study.toml").write_text(STUDY.format(error_p=error_p) + extra, encoding="utf-8")
    table = np.array([[float(x) for x in row.split(",")] for row in rows])
    table[:, 0] /= 1e3
    return folder / "study.toml", table


def by_column(document: dict[str, Any]) -> dict[str, dict[str, Any]]:
    return {r["column"]: r for r in document["responses"]}


def test_a_variance_for_each(tmp_path: Path) -> None:
    """Two laws without a constant in common: the residual variances are those of statsmodels."""
    path, table = written(tmp_path)
    out = weigh(load(path))
    p, q, a, b = table.T
    first, second = sm.OLS(p, a).fit(), sm.OLS(q, a * b).fit()
    got = by_column(out)
    assert got["rate_p"]["variance"] == pytest.approx(1e6 * first.scale, rel=1e-6)
    assert got["rate_q"]["variance"] == pytest.approx(second.scale, rel=1e-6)
    assert got["rate_p"]["df"] == pytest.approx(11)
    assert got["rate_p"]["units"] == "umol/L/s"
    assert got["rate_p"]["estimated"]
    assert got["rate_p"]["candidate"] == "side by side"
    # the standard errors of the constants are those of the two regressions
    constants = {c["name"]: c for c in out["candidates"][0]["constants"]}
    assert constants["k_to_p"]["standard_error"] == pytest.approx(first.bse[0], rel=1e-6)
    assert constants["k_to_q"]["standard_error"] == pytest.approx(second.bse[0], rel=1e-6)
    assert any("a variance for each was estimated" in f["says"] for f in out["findings"])
    # B stands in the rate of Q alone: the effect is on that rate, not none on that of P
    question = out["questions"][0]
    assert question["verdict"] == "participates"
    assert question["effect"]["value"] == pytest.approx(1.0)
    assert "rate of Q" in question["effect"]["words"]


def test_an_unknown_covariance(tmp_path: Path) -> None:
    path, table = written(tmp_path, UNKNOWN)
    out = weigh(load(path))
    got = by_column(out)
    # |E'E| is least: neither constant can be moved so that it falls
    k = [c["value"] for c in out["candidates"][0]["constants"]]

    def residuals(k_p: float, k_q: float) -> np.ndarray:
        p, q, a, b = table.T
        return np.stack([p - k_p * a, q - k_q * a * b], axis=1)

    e = residuals(*k)
    least = np.linalg.det(e.T @ e)
    for change in ((1.001, 1.0), (0.999, 1.0), (1.0, 1.001), (1.0, 0.999)):
        moved = residuals(k[0] * change[0], k[1] * change[1])
        assert np.linalg.det(moved.T @ moved) > least
    expected = e.T @ e / 11
    assert got["rate_q"]["covariance"] == pytest.approx(
        [1e3 * expected[0, 1], expected[1, 1]], rel=1e-6
    )
    assert got["rate_p"]["correlation"][1] == pytest.approx(got["rate_q"]["correlation"][0])
    assert got["rate_q"]["enlarged"] == pytest.approx(11 * 10 / (10 * 9))


def test_one_error_stated_and_one_not(tmp_path: Path) -> None:
    """Errors are held for all candidates, from the most general of those that fit."""
    path, _ = written(tmp_path, OTHER, error_p='error = "10 umol/L/s"')
    weighed = run(load(path), one_by_one=False)
    assert weighed.bench.errors_from == "both with B"
    assert weighed.common.scale is Scale.REPLICATES
    errors = weighed.bench.errors
    assert errors is not None
    assert errors.df[0] == np.inf
    assert weighed.common.scale_df == pytest.approx(errors.df[1])
    data = weighed.bench.measurements
    for a in weighed.assessments:
        assert a.fit.variances[data.n // 2 :] == pytest.approx(errors.matrix[1, 1])
        # mmol/L/s and umol/L/s in one internal set
        assert a.fit.variances[0] != pytest.approx(errors.matrix[1, 1])


def test_too_few_runs(tmp_path: Path) -> None:
    path, _ = written(tmp_path, UNKNOWN, n=2)
    with pytest.raises(DiscrimError) as caught:
        run(load(path))
    assert "too few to estimate them" in caught.value.says
    assert "State `error`" in caught.value.do


def test_an_error_of_a_condition_is_shared_by_the_responses_of_a_run(tmp_path: Path) -> None:
    """One reading of A errs once for both rates: V = S_y + F S_c F' with F for both, so the rates of P
    and Q of one run are correlated (JCGM 100:2008, 5.2.2), and both see the same reconciled A."""
    path, table = written(tmp_path, error_p='error = "10 umol/L/s"')
    text = path.read_text(encoding="utf-8").replace(
        'is = "A"\nunits = "mmol/L"\nerror = "exact"',
        'is = "A"\nunits = "mmol/L"\nerror = { sd = "4 %", origin = "measured" }',
    )
    text = text.replace('is = "rate of Q"', 'is = "rate of Q"\nerror = "0.02 mmol/L/s"')
    path.write_text(text, encoding="utf-8")
    weighed = run(load(path), one_by_one=False, lattices=False)
    fit = weighed.assessments[0].fit
    n = len(table)
    bench = weighed.bench
    j = next(k for k, s in enumerate(bench.symbols) if s.name == "[A]")
    a = fit.conditions[:, j]
    assert a[:n] == pytest.approx(a[n:], rel=1e-9)
    other = next(k for k, s in enumerate(bench.symbols) if s.name == "[B]")
    names = weighed.bounds[0].names
    k_p, k_q = (float(fit.theta[names.index(k)]) for k in ("k_to_p", "k_to_q"))
    slope_p, slope_q = k_p, k_q * fit.conditions[n:, other]
    sd = 0.04 * a[:n]
    v = fit.covariance
    assert v.shape == (2 * n, 2 * n)
    units = v[0, 0] / (0.01**2 + (slope_p * sd[0]) ** 2)  # internal rates may be in other units
    for i in range(n):
        assert v[i, n + i] == pytest.approx(units * slope_p * slope_q[i] * sd[i] ** 2, rel=1e-5)
        assert v[i, n + (i + 1) % n] == 0.0


def test_a_response_missing_in_some_runs(tmp_path: Path) -> None:
    """An empty cell leaves out that observation, not its run."""
    for extra in ("", UNKNOWN):
        path, table = written(tmp_path, extra)
        lines = (tmp_path / "runs.csv").read_text(encoding="utf-8").splitlines()
        lines[3] = lines[3].replace(lines[3].split(",")[1], "", 1)
        (tmp_path / "runs.csv").write_text("\n".join(lines), encoding="utf-8")
        weighed = run(load(path), one_by_one=False, lattices=False)
        assert weighed.bench.measurements.n == 2 * len(table) - 1
        errors = weighed.bench.errors
        assert errors is not None
        assert errors.converged
        assert errors.df[1] == pytest.approx(10)
