"""Questions about constants and about the reverse reaction, in whole studies.

Puromycin: the extra sums of squares of Bates & Watts 1988 (see `tests/reference/SOURCES.toml`).
Linear laws with exact conditions: statsmodels (`t_test`, `f_test`). Other tables are simulated.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import statsmodels.api as sm

import discrim
from discrim.errors import DiscrimError
from discrim.report.text import summary
from discrim.weigh import weigh
from tests.reference.outside import HERE, comparison, digits

# ---- Puromycin --------------------------------------------------------------------------------


def puromycin(folder: Path, questions: str) -> dict[str, Any]:
    """The published table with the candidate that has both constants per group, and questions."""
    text = (HERE / "studies" / "puromycin.toml").read_text(encoding="utf-8")
    head, _, rest = text.partition("[[candidates]]")
    first = rest.partition("[[candidates]]")[0]
    (folder / "study.toml").write_text(f"{head}[[candidates]]{first}{questions}", encoding="utf-8")
    table = (HERE / "studies" / "puromycin.csv").read_bytes()
    (folder / "puromycin.csv").write_bytes(table)
    return weigh(discrim.load(folder / "study.toml"))


def test_puromycin_constants_of_the_groups(tmp_path: Path) -> None:
    """K need not differ between the states (F = 1.72), Vm does (F = 25.5)."""
    document = puromycin(
        tmp_path,
        """
        [[questions]]
        equal = ["K[treated]", "K[untreated]"]
        matters_above = "60 %"
        [[questions]]
        equal = ["Vm[treated]", "Vm[untreated]"]
        [[questions]]
        equal = ["K[treated]", "K[untreated]"]
        matters_above = "5 %"
        """,
    )
    k, vm, strict = document["questions"]
    for found, entry in (
        (k, "separate K against common K"),
        (vm, "separate Vm against common Vm"),
    ):
        exact = comparison("puromycin", entry)["refit"]
        test = found["tests"]["nested_F"]
        assert test["df"] == [exact["df1"], exact["df2"]]
        assert digits(test["statistic"], exact["F"]) >= 6
        assert digits(test["p"], exact["p"]) >= 6
    published = comparison("puromycin", "separate K against common K")["published"]
    assert k["tests"]["nested_F"]["statistic"] == pytest.approx(published["F"], abs=5e-5)
    assert [q["verdict"] for q in (k, vm, strict)] == ["agrees", "differs", "undecided"]
    assert k["sentence"] == "K[treated] and K[untreated] agree within 60 %."
    assert vm["sentence"] == "Vm[treated] and Vm[untreated] differ."
    text = summary(document)
    assert "Are Vm[treated] and Vm[untreated] equal?" in " ".join(text.split())
    assert "DIFFERS" in text


# ---- linear laws: statsmodels -----------------------------------------------------------------

STUDY = """title = "simulated"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
[columns.a]
is = "A"
units = "mmol/L"
error = "exact"
[columns.b]
is = "B"
units = "mmol/L"
error = "exact"
[columns.c]
is = "C"
units = "mmol/L"
error = "exact"
[[candidates]]
name = "three pathways"
law = "k_a*[A] + k_b*[B] + k_c*[C]"
"""


def simulated(
    folder: Path, k: tuple[float, float, float], noise: float, n: int = 15, seed: int = 4
) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    x = rng.uniform(5, 40, (n, 3)).round(2)
    y = (x @ k + noise * rng.standard_normal(n)).round(4)
    lines = [",".join(map(str, (*row, r))) for row, r in zip(x, y, strict=True)]
    (folder / "runs.csv").write_text("a,b,c,rate\n" + "\n".join(lines) + "\n")
    return x, y


def studied(folder: Path, questions: str, study: str = STUDY) -> dict[str, Any]:
    (folder / "study.toml").write_text(study + questions, encoding="utf-8")
    return weigh(discrim.load(folder / "study.toml"))


def test_p_values_are_those_of_statsmodels(tmp_path: Path) -> None:
    x, y = simulated(tmp_path, (0.5, 0.48, 0.2), 0.8)
    document = studied(
        tmp_path,
        """
        [[questions]]
        equal = ["k_a", "k_b"]
        [[questions]]
        equal = ["k_c", "k_b"]
        [[questions]]
        constant = "k_a"
        value = "0.45 1/s"
        [[questions]]
        equal = ["k_a", "k_b", "k_c"]
        [[questions]]
        constant = "k_c"
        value = 0
        """,
    )
    fitted = sm.OLS(y, x).fit()
    expected = [
        float(fitted.t_test([1, -1, 0]).pvalue),
        float(fitted.t_test([0, 1, -1]).pvalue),
        float(fitted.t_test(([1, 0, 0], 0.45)).pvalue),
        float(fitted.f_test([[1, -1, 0], [1, 0, -1]]).pvalue),
        float(fitted.t_test([0, 0, 1]).pvalue) / 2,  # on the edge: only a rise counts
    ]
    for question, p in zip(document["questions"], expected, strict=True):
        found = question["tests"]["reconciled"]["p"]
        assert digits(found, p) >= 9, question["asks"]
        if "nested_F" in question["tests"]:
            assert digits(question["tests"]["nested_F"]["p"], p) >= 9


def test_agreement_is_shown_by_both_bounds(tmp_path: Path) -> None:
    """Two one-sided t-tests of k_a - 0.9 k_b and k_a - k_b/0.9, worked out with statsmodels."""
    x, y = simulated(tmp_path, (0.5, 0.5, 0.2), 0.4)
    document = studied(
        tmp_path,
        "".join(
            f'[[questions]]\nequal = ["k_a", "k_b"]\nmatters_above = "{m} %"\n' for m in (3, 10)
        ),
    )
    fitted = sm.OLS(y, x).fit()
    for question, m in zip(document["questions"], (0.03, 0.10), strict=True):
        low = float(fitted.t_test([1, -(1 - m), 0]).tvalue.item())
        high = float(fitted.t_test([1, -1 / (1 - m), 0]).tvalue.item())
        limit = 1.782287556  # t with 12 degrees of freedom, 95 % (handbook table, from memory)
        shown = low > limit and high < -limit
        assert (question["verdict"] == "agrees") == shown
    assert [q["verdict"] for q in document["questions"]] == ["undecided", "agrees"]


def test_a_small_difference_can_be_real_and_not_matter(tmp_path: Path) -> None:
    simulated(tmp_path, (0.5, 0.49, 0.2), 0.01)
    (question,) = studied(
        tmp_path, '[[questions]]\nequal = ["k_a", "k_b"]\nmatters_above = "10 %"\n'
    )["questions"]
    assert question["verdict"] == "differs"
    assert question["below_what_matters"] is True
    assert question["sentence"] == "k_a and k_b differ, but by less than the 10 % that matters."


def test_an_order_is_compared_by_its_difference(tmp_path: Path) -> None:
    rng = np.random.default_rng(5)
    a = np.linspace(5, 40, 12).round(2)
    y = (0.5 * a**1.02 * (1 + 0.005 * rng.standard_normal(12))).round(5)
    rows = "\n".join(f"{p},1,1,{q}" for p, q in zip(a, y, strict=True))
    (tmp_path / "runs.csv").write_text(f"a,b,c,rate\n{rows}\n")
    study = STUDY.replace("k_a*[A] + k_b*[B] + k_c*[C]", "k_a*[A]^n")
    study = study.replace('units = "mmol/L/s"', 'units = "mmol/L/s"\nerror = "0.5 %"')
    document = studied(
        tmp_path,
        """
        [[questions]]
        constant = "n"
        value = 1
        matters_above = 0.1
        [[questions]]
        constant = "n"
        value = 2
        """,
        study,
    )
    first, second = document["questions"]
    assert first["below_what_matters"] or first["verdict"] == "agrees"
    assert second["verdict"] == "differs"
    assert second["sentence"] == "n differs from 2."


# ---- reverse reaction -------------------------------------------------------------------------

REVERSE = """title = "simulated"
table = "runs.csv"
[columns.rate]
is = "rate of P"
units = "mmol/L/s"
error = "2 %"
[columns.a]
is = "A"
units = "mmol/L"
error = { sd = "0.5 %", origin = "measured" }
[columns.p]
is = "P"
units = "mmol/L"
error = { sd = "0.5 %", origin = "measured" }
"""
LAWS = {
    "own constant": '[[candidates]]\nname = "own constant"\nsteps = { go = "A <=> P" }\n',
    "K_eq": '[[candidates]]\nname = "K_eq"\nlaw = "k*([A] - [P]/K_eq)"\noverall = "A -> P"\n',
    "given": '[[candidates]]\nname = "given"\nlaw = "k*([A] - [P]/K_eq)"\noverall = "A -> P"\n'
    "[constants]\nK_eq = { value = 5, fixed = true }\n",
}
ASKED = '[[questions]]\nreversible = true\nmatters_above = "5 %"\n'


def back_and_forth(folder: Path, reverse: float, most: float = 40.0) -> tuple[np.ndarray, ...]:
    rng = np.random.default_rng(6)
    a, p = rng.uniform(10, 40, 16).round(2), rng.uniform(0.1, most, 16).round(2)
    y = ((0.5 * a - reverse * p) * (1 + 0.02 * rng.standard_normal(16))).round(4)
    rows = "\n".join(f"{s},{t},{r}" for s, t, r in zip(a, p, y, strict=True))
    (folder / "runs.csv").write_text(f"a,p,rate\n{rows}\n")
    return a, p, y


@pytest.mark.parametrize("law", LAWS)
def test_a_reverse_reaction_shows(tmp_path: Path, law: str) -> None:
    a, p, _ = back_and_forth(tmp_path, 0.1)
    (question,) = studied(tmp_path, ASKED, REVERSE + LAWS[law])["questions"]
    assert question["verdict"] == "participates"
    assert question["sentence"] == "The reverse reaction shows in these runs."
    # (f - f0)/f0 = -[P]/([A] K) in the run nearest to equilibrium, K = 5
    effect = question["effect"]
    assert effect["value"] == pytest.approx(-float((p / a).max()) / 5, rel=0.03)
    assert effect["low"] <= effect["value"] <= effect["high"]
    assert effect["high"] - effect["low"] < 0.06


def test_ways_to_write_a_reverse_reaction_say_the_same(tmp_path: Path) -> None:
    back_and_forth(tmp_path, 0.0005)
    own, k_eq = (
        studied(tmp_path, ASKED, REVERSE + LAWS[law])["questions"][0]
        for law in ("own constant", "K_eq")
    )
    assert own["verdict"] == k_eq["verdict"]
    p = own["tests"]["reconciled"]["p"]
    assert k_eq["tests"]["reconciled"]["p"] == pytest.approx(p, rel=1e-3)
    assert k_eq["effect"]["bound"] == pytest.approx(own["effect"]["bound"], rel=1e-2)


@pytest.mark.parametrize("law", ["own constant", "given"])
def test_far_from_equilibrium_it_is_negligible(tmp_path: Path, law: str) -> None:
    back_and_forth(tmp_path, 0.1, most=0.3)
    matters = ASKED.replace("5 %", "10 %")
    (question,) = studied(tmp_path, matters, REVERSE + LAWS[law])["questions"]
    assert question["verdict"] == "negligible"
    assert question["sentence"].startswith("The reverse reaction takes less than 10 % off the rate")


def test_the_reverse_of_a_step(tmp_path: Path) -> None:
    back_and_forth(tmp_path, 0.1)
    study = REVERSE + LAWS["own constant"]
    (question,) = studied(tmp_path, ASKED.replace("true", '"go"'), study)["questions"]
    assert question["verdict"] == "participates"
    assert question["sentence"] == "The reverse of go shows in these runs."


# ---- wrong questions --------------------------------------------------------------------------

REFUSED = {
    "no such constant": ('equal = ["k_a", "k_x"]', 'no candidate has a constant "k_x"'),
    "one constant": ('equal = ["k_a"]', "two or more constants"),
    "twice": ('equal = ["k_a", "k_a"]', "named twice"),
    "a group is meant": ('equal = ["k_g", "k_a"]', 'no candidate has a constant "k_g"'),
    "at": ('equal = ["k_a", "k_b"]\nat = { A = "1 mmol/L" }', '"at" does not belong'),
    "no value": ('constant = "k_a"', "needs a value"),
    "no unit": ('constant = "k_a"\nvalue = 3', "of what?"),
    "another unit": ('constant = "k_a"\nvalue = "3 mmol/L"', "not mmol/L"),
    "below its bound": ('constant = "k_a"\nvalue = "-3 1/s"', "cannot be -3 1/s"),
    "percent of zero": ('constant = "k_a"\nvalue = 0\nmatters_above = "5 %"', "value of 0"),
    "nothing reversible": ("reversible = true", "no rate law of a candidate holds the reverse"),
    "no such step": ('reversible = "go"', 'there is no step "go"'),
    "not asked": ("reversible = false", "write reversible = true"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_wrong_questions_point_at_the_place(tmp_path: Path, case: str) -> None:
    asked, says = REFUSED[case]
    simulated(tmp_path, (0.5, 0.48, 0.2), 0.8)
    with pytest.raises(DiscrimError) as caught:
        studied(tmp_path, f"[[questions]]\n{asked}\n")
    assert says in caught.value.says
    assert caught.value.place is not None
    assert caught.value.place.line > STUDY.count("\n")


def test_constants_of_different_units_are_not_equal(tmp_path: Path) -> None:
    simulated(tmp_path, (0.5, 0.48, 0.2), 0.8)
    study = STUDY.replace("k_c*[C]", "k_c*[C]*[B]")
    with pytest.raises(DiscrimError, match="they cannot be equal"):
        studied(tmp_path, '[[questions]]\nequal = ["k_a", "k_c"]\n', study)
