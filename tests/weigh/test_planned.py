"""A planned table, with no rate measured yet, is judged by `check` and refused by `weigh`."""

import pytest

from discrim.cli import main

STUDY = """\
title = "Planned"
table = "plan.csv"
[columns.a]
is = "A"
units = "mol/L"
error = "digits"
[columns.b]
is = "B"
units = "mol/L"
error = "digits"
[columns.rate]
is = "rate of P"
units = "mol/L/s"
error = "{error}"
[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"
[[questions]]
participates = "B"
"""


@pytest.mark.parametrize("error", ["digits", "2 %"])
def test_check_judges_a_plan(tmp_path, capsys, error):
    (tmp_path / "plan.toml").write_text(STUDY.format(error=error), encoding="utf-8")
    # diluted from one stock: B = 2.5 A
    (tmp_path / "plan.csv").write_text("a,b,rate\n0.6,1.5,\n1.8,4.5,\n1.2,3.0,\n", encoding="utf-8")
    assert main(["check", str(tmp_path / "plan.toml")]) == 0
    out = capsys.readouterr().out
    assert "These runs cannot decide" in out
    assert "judged as planned" in out
    # one run in which A is varied alone breaks the lockstep
    (tmp_path / "plan.csv").write_text("a,b,rate\n0.6,1.5,\n1.8,4.5,\n1.8,0.5,\n", encoding="utf-8")
    assert main(["check", str(tmp_path / "plan.toml")]) == 0
    out = capsys.readouterr().out
    assert "These runs can decide" in out
    assert "cannot decide" not in out


def test_weigh_says_what_is_missing(tmp_path, capsys):
    (tmp_path / "plan.toml").write_text(STUDY.format(error="2 %"), encoding="utf-8")
    (tmp_path / "plan.csv").write_text("a,b,rate\n0.6,1.5,\n1.8,4.5,\n", encoding="utf-8")
    assert main(["weigh", str(tmp_path / "plan.toml")]) == 2
    assert "no run in plan.csv has a measured rate" in capsys.readouterr().err
    assert not (tmp_path / "results").exists()
