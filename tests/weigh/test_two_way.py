"""What is proven of two laws holds on data: the same optimum, and no special case that fits better.

The tables are random (seeded) and follow none of the laws; nothing in them is measured.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import discrim
from discrim.weigh import derive_all
from discrim.weigh.run import run
from discrim.weigh.weighed import Weighed

# (relation, a, b): in a special case, a is that case of b
PAIRS = [
    ("same", "k*K_A*[A]/(1 + K_A*[A])", "Vm*[A]/(Km + [A])"),
    ("same", "k*[A]*[B]/(1 + K_A*[A] + K_B*[B])", "[A]*[B]/(p + q*[A] + s*[B])"),
    ("same", "k*([A] - [B]/K_eq)", "k_f*[A] - k_r*[B]"),
    ("same", "k*[A]/(1 + K*sqrt([B]))", "k*[A]/(1 + sqrt(L*[B]))"),
    ("same", "k*K*[A]/(1 + K*[A] + L*[B])", "Vm*[A]/(Km*(1 + [B]/Ki) + [A])"),
    ("same", "(k_1 + k_2)*[A]", "k*[A]"),
    ("same", "k*[A]^2/(1 + K*[A])^2", "([A]/(p + q*[A]))^2"),
    ("special case", "k*[A]", "k_A*[A] + k_B*[B]"),
    ("special case", "k*[A]/(1 + K*[A])", "k*[A]/(1 + K*[A] + L*[B])"),
    ("special case", "k*[A]", "Vm*[A]/(Km + [A])"),
    ("special case", "k*[A]*[B]", "k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2"),
    ("special case", "Vm*[A]/(Km + [A])", "Vm*[A]/(Km*(1 + [B]/Ki) + [A])"),
    ("special case", "Vm*[A]/(Km + [A])", "Vm*[A]/(Km*(1 + [B]/Ki) + [A]*(1 + [B]/Kii))"),
    ("special case", "k*[A]", "k*([A] - [B]/K_eq)"),
    ("special case", "k", "k*K*[A]/(1 + K*[A])"),
    ("special case", "k*[B]/[A]", "k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2"),
    ("special case", "k*[A]*[B]", "k*[A]^n*[B]^m"),
    ("special case", "k*[A]", "k*[A]/(1 + K*[A]) + q*[B]/(1 + L*[B])"),
    ("special case", "k*[A]/(1 + K_B*[B])",
     "2*k*[A]/(1 + K_B*[B] + sqrt((1 + K_B*[B])^2 + 4*K*[A]))"),
    ("special case", "k*[A]", "4*k*K*[A]/(1 + sqrt(1 + 8*K*[A]))^2"),
    ("neither", "k*[A]/(1 + K*[A])", "k*[A]/(1 + K*[A])^2"),
]  # fmt: skip

STUDY = """
title = "Invented: random rates"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
error = "0.2 mmol/L/s"
[columns.a]
is = "A"
units = "mmol/L"
error = "exact"
[columns.b]
is = "B"
units = "mmol/L"
error = "exact"
[[candidates]]
name = "a"
law = "{a}"
[[candidates]]
name = "b"
law = "{b}"
[[questions]]
stands = "all"
"""


def weighed(folder: Path, a: str, b: str, seed: int) -> Weighed:
    rng = np.random.default_rng(seed)
    lines = ["rate,a,b"]
    for _ in range(14):
        x, y = np.exp(rng.uniform(-1.5, 1.5, 2))
        lines.append(f"{rng.uniform(0.2, 3.0):.4f},{x:.4f},{y:.4f}")
    (folder / "runs.csv").write_text("\n".join(lines), encoding="utf-8")
    (folder / "study.toml").write_text(STUDY.format(a=a, b=b), encoding="utf-8")
    return run(discrim.load(folder / "study.toml"))


@pytest.mark.parametrize(("relation", "a", "b"), PAIRS)
@pytest.mark.parametrize("seed", [1, 2])
def test_relations_hold_on_any_table(
    tmp_path: Path, relation: str, a: str, b: str, seed: int
) -> None:
    found = weighed(tmp_path, a, b, seed)
    (record,) = found.relations.records(["a", "b"])
    assert (record["a"], record["b"], record["relation"]) == ("a", "b", relation)
    one, other = (x.fit.objective for x in found.assessments)
    if relation == "same":
        assert one == pytest.approx(other, rel=1e-6)
    elif relation == "special case":
        assert other <= one * (1 + 1e-6)
    else:  # random numbers follow no law, so laws that differ differ in their fits
        assert abs(one - other) > 1e-4 * one


BUFFER = """
title = "Invented: one buffer, two ways to write its catalysis"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
error = "2 %"
[columns.total]
is = "total HA"
units = "mol/L"
error = "exact"
[columns.pH]
is = "pH"
error = "exact"
[derived]
"A-" = { formula = "total/(1 + 10^(pKa - pH))", units = "mol/L" }
HA   = { formula = "total - [A-]", units = "mol/L" }
"H+" = { formula = "c*10^(-pH)", units = "mol/L" }
[constants]
pKa = { value = 4.62, KNOWN }
c   = { value = "1 mol/L", fixed = true }
[[candidates]]
name = "general acid"
law = "k*[HA]"
[[candidates]]
name = "specific acid and base"
law = "k*[H+]*[A-]"
[[candidates]]
name = "base"
law = "k*[A-]"
[[questions]]
stands = "all"
"""


@pytest.mark.parametrize("known", ["fixed = true", 'error = "0.02"'])
def test_general_acid_is_specific_acid_times_base_in_a_study(tmp_path: Path, known: str) -> None:
    """[HA] = [H+][A-]/Ka, so k*[HA] and k'*[H+]*[A-] are one law (kinetically equivalent: common
    practice, no source); with a known pKa as with one that has an uncertainty."""
    rng = np.random.default_rng(4)
    lines = ["rate,total,pH"]
    for _ in range(10):
        total, ph = rng.uniform(0.01, 0.2), rng.uniform(3.5, 6)
        rate = 30 * total / (1 + 10 ** (ph - 4.6)) * rng.uniform(0.95, 1.05)
        lines.append(f"{rate:.4f},{total:.4f},{ph:.3f}")
    (tmp_path / "runs.csv").write_text("\n".join(lines), encoding="utf-8")
    text = BUFFER.replace("KNOWN", known)
    (tmp_path / "study.toml").write_text(text, encoding="utf-8")
    study = discrim.load(tmp_path / "study.toml")
    found = run(study)
    want = ["same", "neither", "neither"]
    records = found.relations.records([c.law.name for c in found.laws])
    assert [r["relation"] for r in records] == want
    assert [r["relation"] for r in derive_all(study)[0]["relations"]] == want[:2]
    one, other, _ = (x.fit.objective for x in found.assessments)
    assert one == pytest.approx(other, rel=1e-8)
