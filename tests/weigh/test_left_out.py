"""Verdicts with each single run left out: what they are compared with is the study that excludes that
run, weighed from its file. Tables are simulated."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from discrim.study import load
from discrim.weigh import weigh
from discrim.weigh.run import run

STUDY = """
title = "simulated"
table = "runs.csv"
[columns.no]
is = "run"
[columns.rate]
is = "rate of P"
units = "umol/L/s"
error = "{rate_error}"
[columns.a]
is = "A"
units = "mmol/L"
error = {{ sd = "1 %", origin = "measured" }}
[columns.b]
is = "B"
units = "mmol/L"
error = {{ sd = "1 %", origin = "measured" }}
[[candidates]]
name = "both"
law = "k_a*[A] + k_b*[B]"
overall = "A -> P"
[[candidates]]
name = "A alone"
law = "k_a*[A]"
overall = "A -> P"
[[questions]]
participates = "B"
matters_above = "5 %"
[[questions]]
stands = "all"
"""


def _written(
    folder: Path,
    y: np.ndarray,
    a: np.ndarray,
    b: np.ndarray,
    *,
    rate_error: str = "2 %",
    more: str = "",
) -> Path:
    folder.mkdir(exist_ok=True)
    lines = [
        f"{i + 1},{v:.6g},{p:.6g},{q:.6g}" for i, (v, p, q) in enumerate(zip(y, a, b, strict=True))
    ]
    (folder / "runs.csv").write_text("no,rate,a,b\n" + "\n".join(lines) + "\n", encoding="utf-8")
    text = STUDY.format(rate_error=rate_error) + more
    (folder / "study.toml").write_text(text, encoding="utf-8")
    return folder / "study.toml"


def _hanging() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Nine runs in which only the last varies B on its own."""
    rng = np.random.default_rng(5)
    a = np.linspace(5, 45, 9)
    b = 2.5 * a * (1 + 0.005 * rng.standard_normal(9))
    b[8] = 4 * b[8]
    y = (a + 0.2 * b) * (1 + 0.01 * rng.standard_normal(9))
    return y, a, b


def test_a_verdict_that_hangs_on_one_run_names_it(tmp_path: Path) -> None:
    y, a, b = _hanging()
    document = weigh(load(_written(tmp_path / "all", y, a, b)))
    question = document["questions"][0]
    assert question["verdict"] == "participates"
    assert question["left_out_runs"] == 9
    assert [c["run"] for c in question["left_out"]] == ["9"]
    assert question["left_out"][0]["exact"]
    words = "leaving out run 9 changes the verdict from participates to undecided"
    assert words in question["why"]
    assert any(f["severity"] == "warning" and f["says"] == words for f in document["findings"])
    # the study that excludes it says the same
    more = '[[exclude]]\nwhere = { no = 9 }\nreason = "valve"\n'
    without = weigh(load(_written(tmp_path / "without", y, a, b, more=more)))
    excluded = without["questions"][0]
    assert excluded["verdict"] == question["left_out"][0]["verdict"]
    # ... and what it would be with the run put back
    assert excluded["with_excluded_runs"] == "participates"
    assert any(
        f["severity"] == "warning" and "with the excluded runs put back" in f["says"]
        for f in without["findings"]
    )


def test_a_verdict_that_hangs_on_no_run_says_nothing(tmp_path: Path) -> None:
    rng = np.random.default_rng(6)
    a, b = rng.uniform(5, 50, 12), rng.uniform(5, 50, 12)
    y = (a + 0.5 * b) * (1 + 0.01 * rng.standard_normal(12))
    document = weigh(load(_written(tmp_path, y, a, b)))
    question, standing = document["questions"]
    assert question["verdict"] == "participates"
    assert (question["left_out"], question["left_out_runs"]) == ([], 12)
    assert (standing["left_out"], standing["left_out_runs"]) == ([], 12)
    assert not any("leaving out" in f["says"] for f in document["findings"])


def test_a_run_that_alone_rejects_a_law_is_named(tmp_path: Path) -> None:
    rng = np.random.default_rng(8)
    a, b = rng.uniform(5, 50, 10), rng.uniform(5, 50, 10)
    y = a * (1 + 0.01 * rng.standard_normal(10))
    y[3] *= 1.25  # a run that no law explains
    path = _written(tmp_path, y, a, b)
    weighed = run(load(path), lattices=False)
    assert not any(weighed.stands)
    assert weighed.left_out is not None
    (changed,) = weighed.left_out.standing
    assert changed.run == "4"
    assert changed.standing == ("both", "A alone")
    document = weigh(load(path))
    assert any("without run 4" in w for w in document["questions"][1]["why"])


def test_the_rest_of_a_rate_on_its_bound_is_no_proof(tmp_path: Path) -> None:
    """Without run 9 the best fit gives all of the rate to B; the interval of its effect still holds
    every effect, as the test of a rate without B does not reject, and 0 is an effect of B."""
    y, a, b = _hanging()
    document = weigh(load(_written(tmp_path, y[:8], a[:8], b[:8])))
    question = document["questions"][0]
    constants = {k["name"]: k for c in document["candidates"] for k in c["constants"]
                 if c["name"] == "both"}  # fmt: skip
    assert constants["k_a"]["at_bound"]
    assert question["tests"]["reconciled"]["p"] > 0.2
    assert question["effect"]["low"] == 0.0
    assert question["effect"]["high"] > 0.99
