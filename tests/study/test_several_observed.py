"""Several observed columns: exact dependences among them, and what the study says of their errors.

The measured table is that of the isomerization of alpha-pinene (tests/reference/SOURCES.toml), in
which Box, Hunter, MacGregor & Erjavec, Technometrics 15 (1973) 33, found two dependences; the
others are simulated.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from discrim.errors import DiscrimError
from discrim.study.load import load
from discrim.study.model import Study
from tests.reference.outside import column

LAW = """
[[candidates]]
name = "a"
law = "k*[A]"
"""


def study(folder: Path, columns: dict[str, list[str]], extra: str = "", error: str = "") -> Study:
    names = list(columns)
    lines = [",".join(["A", *names])]
    n = len(columns[names[0]])
    for i in range(n):
        lines.append(",".join([f"{1 + i}", *(columns[name][i] for name in names)]))
    (folder / "runs.csv").write_text("\n".join(lines), encoding="utf-8")
    text = 'table = "runs.csv"\n[columns.A]\nis = "A"\nunits = "mol/L"\nerror = "exact"\n'
    for name in names:
        text += f'[columns.{name}]\nis = "rate of {name}"\nunits = "mol/L/s"\n{error}'
    (folder / "study.toml").write_text(text + LAW + extra, encoding="utf-8")
    return load(folder / "study.toml")


def test_published_dependences(tmp_path: Path) -> None:
    """Pyronene was taken as 3 % of the pinene that had reacted; the five shares add to 100."""
    names = ("pinene", "dipentene", "allo", "pyronene", "dimer")
    table = {n: [f"{x:g}" for x in column("alpha_pinene", n)] for n in names}
    found = study(tmp_path, table)
    assert found.runs.left_out == ("pyronene", "dimer")
    assert [c.name for c in found.runs.observations()] == ["pinene", "dipentene", "allo"]
    words = [f for f in found.findings if "no information of its own" in f]
    assert words[0].startswith("0.03 “pinene” + “pyronene” = 3.0")
    assert "“dimer” = 10" in words[1]


def simulated(seed: int, n: int = 12) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    return rng.uniform(1.0, 5.0, n), rng.uniform(0.5, 2.0, n)


def written(x: np.ndarray, digits: int = 3) -> list[str]:
    return [f"{v:.{digits}f}" for v in x]


def test_a_sum_is_found_and_said(tmp_path: Path) -> None:
    p, q = simulated(1)
    found = study(tmp_path, {"a": written(p + q), "p": written(p), "q": written(q)})
    assert found.runs.left_out == ("q",)
    assert "“p” + “q” = “a” in all runs" in " ".join(found.findings)


def test_measured_responses_are_not_dependent(tmp_path: Path) -> None:
    """A noise of a few roundings is enough to tell a balance that was measured from one that was
    used; in 40 tables none is taken for the other."""
    for seed in range(40):
        p, q = simulated(seed)
        noise = 0.005 * np.random.default_rng(seed + 500).standard_normal(len(p))
        found = study(tmp_path, {"a": written(p + q + noise), "p": written(p), "q": written(q)})
        assert found.runs.left_out == ()


def test_rounding_alone_is_dependence(tmp_path: Path) -> None:
    """The same 40 tables with the sum calculated before rounding: always found."""
    for seed in range(40):
        p, q = simulated(seed)
        found = study(tmp_path, {"a": written(p + q), "p": written(p), "q": written(q)})
        assert found.runs.left_out == ("q",)


def test_a_constant_response_and_few_runs_are_left_alone(tmp_path: Path) -> None:
    p, _ = simulated(2)
    steady = study(tmp_path, {"p": written(p), "q": written(np.full(12, 2.0))})
    assert steady.runs.left_out == ()
    few = study(tmp_path, {"p": written(p[:4]), "q": written(2 * p[:4])})
    assert few.runs.left_out == ()


def test_excluded_runs_do_not_count(tmp_path: Path) -> None:
    p, q = simulated(3)
    total = p + q
    total[4] += 1.0
    table = {"a": written(total), "p": written(p), "q": written(q)}
    assert study(tmp_path, table).runs.left_out == ()
    out = '[[exclude]]\nwhere = { A = 5 }\nreason = "spilled"\n'
    assert study(tmp_path, table, out).runs.left_out == ("q",)


UNKNOWN = '[errors]\nbetween_responses = "unknown"\n'


def test_the_key_is_read(tmp_path: Path) -> None:
    p, q = simulated(4)
    table = {"p": written(p), "q": written(q)}
    assert study(tmp_path, table, UNKNOWN).responses_together
    assert not study(tmp_path, table).responses_together
    said = '[errors]\nbetween_responses = "independent"\n'
    assert not study(tmp_path, table, said).responses_together


@pytest.mark.parametrize(
    ("extra", "error", "says"),
    [
        ('[errors]\nbetween_responses = "perhaps"\n', "", 'cannot be "perhaps"'),
        ('[errors]\nbetween_response = "unknown"\n', "", 'unknown key "between_response"'),
        (UNKNOWN, 'error = "1 %"\n', "is stated, and the covariance unknown"),
    ],
)
def test_wrong_keys(tmp_path: Path, extra: str, error: str, says: str) -> None:
    p, q = simulated(5)
    with pytest.raises(DiscrimError) as caught:
        study(tmp_path, {"p": written(p), "q": written(q)}, extra, error)
    assert says in caught.value.says
    assert caught.value.place is not None


def test_one_column_has_no_covariance(tmp_path: Path) -> None:
    with pytest.raises(DiscrimError) as caught:
        study(tmp_path, {"p": written(simulated(6)[0])}, UNKNOWN)
    assert "only one column" in caught.value.says
