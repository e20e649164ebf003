"""A candidate whose mechanism is a law from a file: renamed, read and weighed as a bare law."""

import pytest
import sympy

from discrim.errors import DiscrimError
from discrim.ratelaw.model import amount, constant_symbol, quantity
from discrim.study import load
from discrim.weigh.laws import laws_of

# Invented: a solid that shrinks from outside; what is left, and its loss in a minute.
TABLE = """\
run,left,k,rate
1,0.9,1,0.28
2,0.6,1,0.21
3,0.3,2,0.14
4,0.1,2,0.064
"""
STUDY = """\
title = "How does the solid react?"
table = "runs.csv"

[columns.left]
is = "oxide"
units = "mol"
error = "exact"

[columns.rate]
is = "consumption of oxide"
units = "mol/min"
error = "2 %"

[conditions.put_in]
is = "oxide_0"
value = "1.0 mol"
error = "exact"

[[candidates]]
name = "from outside"
mechanism = "contracting-volume"
bind = { A = "oxide", A_0 = "oxide_0" }

[[candidates]]
name = "first order"
mechanism = "first-order"
bind = { A = "oxide" }

[[questions]]
stands = "all"
"""


def study(tmp_path, text=STUDY, table=TABLE):
    (tmp_path / "runs.csv").write_text(table)
    (tmp_path / "study.toml").write_text(text)
    return load(tmp_path / "study.toml")


def test_it_becomes_a_bare_law_with_its_species_renamed(tmp_path):
    found = study(tmp_path)
    candidate = found.candidates[0]
    assert candidate.mechanism is None
    assert candidate.law_text == "3*k*[oxide_0]*([oxide]/[oxide_0])^(2/3)"
    assert candidate.overall == {"oxide": -1, "P": 1}
    assert "Sharp" in candidate.source
    k, a, a_0 = constant_symbol("k"), amount("oxide"), amount("oxide_0")
    expected = 3 * k * a_0 * (a / a_0) ** sympy.Rational(2, 3)
    assert sympy.simplify(candidate.law - expected) == 0
    law = laws_of(found)[0].law
    assert law.source == candidate.source
    # the undeclared column "k" of the table is not what k in the file means
    assert [c.name for c in law.constants] == ["k"]


def test_it_is_weighed(tmp_path):
    evidence = study(tmp_path).weigh()
    outcomes = {c["name"]: c["outcome"] for c in evidence["candidates"]}
    assert outcomes == {"from outside": "stands", "first order": "rejected"}


def test_a_condition_that_the_law_names(tmp_path):
    (tmp_path / "own.toml").write_text('law = "k*[A]*10^(-pH)"\noverall = "A -> P"\n')
    text = STUDY.replace('"contracting-volume"', '"own.toml"').replace(', A_0 = "oxide_0"', "")
    text += '\n[conditions.acidity]\nis = "pH"\nvalue = "3.0"\nerror = "exact"\n'
    law = study(tmp_path, text).candidates[0].law
    assert law.free_symbols == {constant_symbol("k"), amount("oxide"), quantity("acidity")}


@pytest.mark.parametrize(
    ("change", "says"),
    [
        (('A_0 = "oxide_0"', 'B = "oxide_0"'), 'bind renames "B", which is no species'),
        (('A_0 = "oxide_0"', 'A_0 = "oxide"'), 'one species "oxide"'),
        (('"contracting-volume"', '"contracting-volumes"'), 'Did you mean "contracting-volume"?'),
    ],
)
def test_wrong_names_point_at_the_study(tmp_path, change, says):
    with pytest.raises(DiscrimError, match=r"study\.toml, line 2[0-9]") as caught:
        study(tmp_path, STUDY.replace(*change))
    assert says in str(caught.value)


def test_a_law_that_cannot_be_read_points_at_its_file(tmp_path):
    (tmp_path / "own.toml").write_text('title = "x"\nlaw = "k*[A"\n')
    text = STUDY.replace('"contracting-volume"', '"own.toml"')
    text = text.replace('bind = { A = "oxide", A_0 = "oxide_0" }\n', "")
    with pytest.raises(DiscrimError, match=r"own\.toml, line 2") as caught:
        study(tmp_path, text)
    assert "k*[A" in str(caught.value)
