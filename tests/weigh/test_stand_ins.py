"""What is tried in the place of a species, and the error margin of verdicts. Tables are simulated.

Expected are the causes that the tables were made with; the margin has a closed form.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import norm

from discrim.study import load
from discrim.weigh import weigh
from discrim.weigh.prepare import prepare
from discrim.weigh.proxies import proxies
from discrim.weigh.run import run
from discrim.weigh.weighed import Weighed

N = 12
STUDY = """
title = "simulated"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "umol/L/s"
error = "1 %"
[columns.a]
is = "A"
units = "mmol/L"
error = {{ sd = "1 %", origin = "measured" }}
[columns.b]
is = "B"
units = "mmol/L"
error = {{ sd = "1 %", origin = "measured" }}
{more}
[[candidates]]
name = "both"
law = "k_a*[A] + k_b*[B]"
overall = "A -> P"
[[questions]]
participates = "B"
"""


def _study(folder: Path, table: Mapping[str, np.ndarray], more: str = "") -> Path:
    heads = list(table)
    rows = [
        ",".join(
            str(table[h][i]) if table[h].dtype.kind == "U" else f"{table[h][i]:.5g}" for h in heads
        )
        for i in range(len(table["rate"]))
    ]
    (folder / "runs.csv").write_text("\n".join([",".join(heads), *rows]) + "\n", encoding="utf-8")
    (folder / "study.toml").write_text(STUDY.format(more=more), encoding="utf-8")
    return folder / "study.toml"


def _weighed(path: Path) -> Weighed:
    return run(load(path), lattices=False, one_by_one=False)


def _drawn(seed: int) -> tuple[np.random.Generator, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    return rng, rng.uniform(5, 50, N), rng.uniform(5, 50, N)


def _read(rng: np.random.Generator, x: np.ndarray) -> np.ndarray:
    return np.asarray(x * (1 + 0.01 * rng.standard_normal(len(x))))


@pytest.mark.parametrize(
    ("cause", "name"),
    [
        ("column", "column “x”"),
        ("square", "column “x” squared"),
        ("inverse", "1/column “x”"),
        ("product", "column “x” times column “z”"),
        ("group", "the group in column “lot”"),
    ],
)
def test_the_cause_in_the_place_of_the_species_stands(
    cause: str, name: str, tmp_path: Path
) -> None:
    rng, a, x = _drawn(3)
    z = rng.uniform(1, 4, N)
    lot = np.where(np.arange(N) % 3 == 0, "old", "new")
    level = np.where(lot == "old", 10.0, 60.0)
    true = {"column": x, "square": x**2 / 20, "inverse": 500 / x, "product": x * z, "group": level}
    b = 2.5 * true[cause] * (1 + 0.01 * rng.standard_normal(N))
    y = _read(rng, a + true[cause])
    table = {"rate": y, "a": _read(rng, a), "b": _read(rng, b)}
    more = ""
    if cause == "group":
        table["lot"] = lot
        more = '[columns.lot]\nis = "group"\n'
    else:
        table["x"] = _read(rng, x)
        if cause == "product":
            table["z"] = _read(rng, z)
    weighed = _weighed(_study(tmp_path, table, more))
    (answer,) = weighed.answers
    assert weighed.stands == (True,)
    assert answer.facts[0].readings[0].p < 1e-3  # the law alone would claim it
    assert answer.verdict.outcome == "undecided"
    assert name in [s.name for s, _ in answer.stand_ins if s.stands]
    assert "stand-in" in answer.verdict.because


def test_a_column_that_the_runs_tell_apart_is_tried_and_falls(tmp_path: Path) -> None:
    rng, a, x = _drawn(4)
    b = 2.5 * x * (1 + 0.1 * rng.standard_normal(N)).clip(0.5)
    y = _read(rng, a + 0.4 * b)
    table = {"rate": y, "a": _read(rng, a), "b": _read(rng, b), "x": _read(rng, x)}
    (answer,) = _weighed(_study(tmp_path, table)).answers
    assert answer.stand_ins
    assert not any(s.stands for s, _ in answer.stand_ins)
    assert answer.verdict.outcome == "participates"


def test_a_column_within_the_errors_follows_whatever_its_correlation(tmp_path: Path) -> None:
    """B hardly varies, so that readings of 1 % hide that x is B: their correlation is low."""
    rng, a, _ = _drawn(9)
    b = 20 * (1 + 0.008 * rng.standard_normal(N))
    table = {"rate": _read(rng, a + b), "a": _read(rng, a), "b": _read(rng, b), "x": _read(rng, b)}
    assert float(np.corrcoef(np.log(table["b"]), np.log(table["x"]))[0, 1] ** 2) < 0.9
    study = load(_study(tmp_path, table))
    _, bench, _ = prepare(study)
    assert "column “x”" in [p.name for p in proxies("B", study, bench)]


def test_other_powers_of_the_species_are_no_stand_ins(tmp_path: Path) -> None:
    rng, a, x = _drawn(5)
    table = {"rate": _read(rng, a + x), "a": _read(rng, a), "b": _read(rng, x)}
    (answer,) = _weighed(_study(tmp_path, table)).answers
    assert answer.stand_ins == ()
    assert answer.verdict.outcome == "participates"


def test_undeclared_labels_that_go_with_the_species_are_a_note(tmp_path: Path) -> None:
    rng, a, _ = _drawn(6)
    lot = np.where(np.arange(N) % 2 == 0, "old", "new")
    b = np.where(lot == "old", 10.0, 60.0)
    table = {"rate": _read(rng, a + b), "a": _read(rng, a), "b": _read(rng, b), "lot": lot}
    document = weigh(load(_study(tmp_path, table)))
    assert document["questions"][0]["verdict"] == "participates"
    assert any(
        f["where"] == "column “lot”" and "split the runs" in f["says"] for f in document["findings"]
    )


def test_the_error_margin_where_it_has_a_closed_form(tmp_path: Path) -> None:
    """One error of A for all runs, in mmol/L and set: V = s^2 + (k f u)^2 in every run, so that
    z(f) = z(1) sqrt((s^2 + k^2 u^2)/(s^2 + k^2 f^2 u^2)), k that of the law without B, which does not
    depend on f (weighted least squares with equal weights)."""
    rng, a, b = _drawn(7)
    s, u = 0.2, 0.4
    y = a + 0.03 * b + np.hypot(s, u) * rng.standard_normal(N)
    more = ""
    path = _study(tmp_path, {"rate": y, "a": a, "b": b}, more)
    text = path.read_text(encoding="utf-8")
    text = text.replace('error = "1 %"', f'error = "{s} umol/L/s"')
    text = text.replace(
        '{ sd = "1 %", origin = "measured" }', f'{{ sd = "{u} mmol/L", origin = "set" }}', 1
    )
    text = text.replace('{ sd = "1 %", origin = "measured" }', '"exact"', 1)
    path.write_text(text, encoding="utf-8")
    (answer,) = _weighed(path).answers
    (facts,) = answer.per_candidate[0].by_origin.values()
    shown = np.genfromtxt(tmp_path / "runs.csv", delimiter=",", names=True)
    k = float(shown["a"] @ shown["rate"] / (shown["a"] @ shown["a"]))
    own = s**2 + k**2 * u**2
    z, crit = facts.z, norm.ppf(0.95)
    assert z > crit
    expected = np.sqrt(((z / crit) ** 2 * own - s**2) / (k**2 * u**2))
    assert 1.0 < expected < 10.0
    np.testing.assert_allclose(facts.error_margin, expected, rtol=0.02)
    assert answer.verdict.outcome == "participates"
    np.testing.assert_allclose(answer.verdict.error_margin, expected, rtol=0.02)
