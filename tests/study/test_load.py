"""Whole study files: what they mean, and every kind of bad input with its message."""

from __future__ import annotations

import numpy as np
import pytest

from discrim.errors import DiscrimError
from discrim.ratelaw.model import RateLaw, amount, constant_symbol, quantity
from discrim.runs.model import ErrorBasis, Role
from discrim.study import check_measured, load, to_shown, unit_of_species, unmeasured

# Invented: hydrolysis of an ester in an acetate buffer.
BUFFER_TABLE = """\
run,C_tot,pH,ester,lot,rate,room
1,0.100,4.62,10.0,a,1.80,21
2,0.200,4.62,10.0,a,3.62,21
3,0.100,5.62,10.0,b,2.10,22
4,0.200,5.62,10.0,b,,22
5,0.100,4.62,10.0,a,1.84,23
"""
BUFFER = """\
title = "Does the acid form catalyse too?"
table = "runs.csv"

[columns.run]
is = "run"

[columns.rate]
is = "rate of P"
units = "umol/L/s"
error = "1 % + 0.02 umol/L/s"

[columns.ester]
is = "E"
units = "mmol/L"
error = { sd = "0.5 %", origin = "set", shared_by = "lot" }

[columns.C_tot]
is = "total acetate"
units = "mol/L"
error = "0.3 %"

[columns.pH]
is = "pH"
error = { limits = "0.02", origin = "measured" }

[conditions.W]
value = "55.5 mol/L"

[derived]
HA   = { formula = "C_tot - [A-]", units = "mol/L" }
"A-" = { formula = "C_tot/(1 + 10^(pKa - pH))", units = "mol/L" }
"H+" = { formula = "10^(-pH)", units = "mol/L" }

[constants]
pKa    = { value = 4.62, error = "0.02" }
k_base = { start = "0.5 L/mol/s", at_most = "1e3 L/mol/s" }
k_cat  = { per = "lot" }

[[candidates]]
name = "base only"
law = "[E]*(k_water + k_base*[A-])"
overall = "E -> P"

[[candidates]]
name = "both"
[candidates.steps]
water = "E -> P"
base = "E + A- -> P + A-"
acid = "E + HA -> P + HA"

[[questions]]
participates = "HA"
matters_above = "5 %"
at = { E = "10 mmol/L", pH = 5.0 }

[[questions]]
stands = "all"

[[exclude]]
where = { run = 3 }
reason = "valve not flushed"

[controls]
transport = { done = "two stirrer speeds" }

[[other_evidence]]
says = "no exchange of label"
source = "notebook 12"
against = ["both"]

[confidence]
level = 0.9
"""


def study(tmp_path, text=BUFFER, table=BUFFER_TABLE):
    (tmp_path / "runs.csv").write_text(table)
    (tmp_path / "study.toml").write_text(text)
    return load(tmp_path / "study.toml")


def test_internal_units_come_from_the_species_and_the_rate(tmp_path):
    loaded = study(tmp_path)
    rate, total = loaded.runs.find("rate"), loaded.runs.find("C_tot")
    assert rate.unit.text() == "mmol L⁻¹ s⁻¹"
    assert rate.values[:2] == pytest.approx([1.80e-3, 3.62e-3], rel=1e-14)
    assert to_shown(rate, rate.values[:2]) == pytest.approx([1.80, 3.62], rel=1e-14)
    assert (total.role, total.about, total.values[0]) == (Role.TOTAL, "acetate", 100.0)
    assert unit_of_species(loaded, "A-").text() == "mmol L⁻¹"
    assert loaded.constants["k_base"].at_most == pytest.approx(1.0)
    assert loaded.constants["k_base"].start == pytest.approx(5e-4)
    assert rate.errors[0].absolute[0] == pytest.approx(0.02e-3)


def test_runs(tmp_path):
    runs = study(tmp_path).runs
    assert runs.labels == ("1", "2", "3", "4", "5")
    assert runs.kept.tolist() == [True, True, False, True, True]
    assert runs.excluded_because[2] == "valve not flushed"
    assert runs.replicate_of.tolist() == [0, 1, 2, 3, 0]
    assert np.isnan(runs.find("rate").values[3])
    assert runs.find("room").role is Role.IGNORED
    assert runs.find("lot").labels == ("a", "a", "b", "b", "a")
    assert runs.find("W").basis is ErrorBasis.ASSUMED
    assert runs.find("W").errors[0].groups.tolist() == [0] * 5
    with pytest.raises(ValueError, match="read-only"):
        runs.find("rate").values[0] = 1.0


def test_derived_quantities_are_symbolic_and_in_internal_units(tmp_path):
    loaded = study(tmp_path)
    total, acidity = quantity("C_tot"), quantity("pH")
    by_name = {d.name: d for d in loaded.derived}
    assert list(by_name) == ["HA", "A-", "H+"]  # the order of the file, not of their need
    constants = {s.name for s in by_name["HA"].formula.free_symbols} - {total.name, acidity.name}
    assert constants == {"pKa"}
    at = {total: 100.0, acidity: 4.62}
    at |= {s: 4.62 for s in by_name["A-"].formula.free_symbols if s.name == "pKa"}
    assert float(by_name["A-"].formula.subs(at)) == pytest.approx(50.0)
    assert float(by_name["HA"].formula.subs(at)) == pytest.approx(50.0)
    # 10^(-pH) is a bare number, so it is in the stated mol/L; internal are mmol/L.
    assert float(by_name["H+"].formula.subs({acidity: 3.0})) == pytest.approx(1.0)


def test_candidates_questions_and_the_rest(tmp_path):
    loaded = study(tmp_path)
    bare, steps = loaded.candidates
    ester, base = amount("E"), amount("A-")
    k_water, k_base = constant_symbol("k_water"), constant_symbol("k_base")
    assert bare.law == ester * (k_water + k_base * base)
    assert bare.overall == {"E": -1, "P": 1}
    assert [s.name for s in steps.mechanism.steps] == ["water", "base", "acid"]
    assert loaded.questions[0].matters_above == 0.05
    assert loaded.questions[0].at == {"E": 10.0, "pH": 5.0}
    assert loaded.questions[1].about == "all"
    assert loaded.controls == {"transport": "two stirrer speeds"}
    assert loaded.other_evidence[0].against == ("both",)
    assert loaded.exclusions == (("run = 3", "valve not flushed"),)
    assert (loaded.level, loaded.reactor) == (0.9, "rates")
    assert loaded.constants["pKa"].sd == 0.02
    assert loaded.constants["k_cat"].per == "lot"
    assert len(loaded.sha256) == 64


def test_supported_catalyst_in_a_differential_bed(tmp_path):
    # Invented. Pressures give the internal pressure, the rate gives amount, mass and time.
    loaded = study(
        tmp_path,
        'table = "runs.csv"\nreactor.kind = "differential"\n'
        'columns.p_CO = { is = "CO", units = "kPa", error = "1 %" }\n'
        'columns.p_H2O = { is = "H2O", units = "mbar", error = "digits" }\n'
        'columns.rate = { is = "consumption of CO", units = "mol/(kg s)", error = "3 %" }\n'
        '[[candidates]]\nname = "adsorbed"\nsites = ["*"]\n'
        'assume = { equilibrated = ["ads"], limiting = "surface" }\n'
        'steps = { ads = "CO + * <=> CO*", surface = "CO* -> P + *" }\n',
        "p_CO;p_H2O;rate\n10.0;5;0.0123\n20.0;10;0.0150\n",
    )
    assert loaded.runs.find("p_H2O").values.tolist() == [0.5, 1.0]
    assert loaded.runs.find("rate").unit.text() == "mol kg⁻¹ s⁻¹"
    assert loaded.runs.labels == ("1", "2")
    assert loaded.candidates[0].mechanism.limiting == "surface"


def test_enzyme_with_two_inhibitors(tmp_path):
    loaded = study(
        tmp_path,
        'table = "runs.csv"\n'
        'columns.S = { is = "S", units = "mM" }\ncolumns.I1 = { is = "I1", units = "uM" }\n'
        'columns.I2 = { is = "I2", units = "uM" }\n'
        'columns.v = { is = "rate of P", units = "umol/L/min", error = { column = "sd" } }\n'
        'conditions.catalyst = { value = "50 nmol/L", error = "2 %" }\n'
        '[[candidates]]\nname = "competitive"\n'
        'law = "k_cat*catalyst*[S]/(K_m*(1 + [I1]/K_1 + [I2]/K_2) + [S])"\n',
        "S,I1,I2,v,sd\n1.0,0,0,2.0,0.1\n2.0,1.5,0,2.0,0.2\n",
    )
    assert loaded.runs.find("I1").values.tolist() == [0.0, 0.0015]
    assert loaded.runs.find("catalyst").role is Role.CATALYST
    assert quantity("catalyst") in loaded.candidates[0].law.free_symbols
    assert loaded.runs.find("v").errors[0].absolute == pytest.approx([1e-4, 2e-4])


def test_species_that_nothing_measures(tmp_path):
    loaded = study(tmp_path)
    law = RateLaw("x", amount("ester") * amount("A-"), {}, (), ("ester", "A-"))
    assert unmeasured(law, loaded) == ("ester",)
    with pytest.raises(DiscrimError, match=r'column "ester" is the species "E": write \[E\]'):
        check_measured(law, loaded)
    law = RateLaw("x", amount("Q"), {}, (), ("Q",))
    with pytest.raises(DiscrimError, match=r'contains "Q".*\n.*"E \(ester\)", "W \(W\)"'):
        check_measured(law, loaded)


# --- bad input: (what to replace, by what, what the message holds) --------------------------------

BAD = {
    "unknown key": ("title =", "titel =", 'line 1.*unknown key "titel"(.|\n)*Did you mean "title"'),
    "unknown key in a column": ('units = "umol/L/s"', 'unit = "umol/L/s"', 'line 9(.|\n)*"units"'),
    "key for later": ("title =", "window =", '"window" is not yet supported'),
    "missing column": ("[columns.ester]", "[columns.estr]", 'has no column "estr"(.|\n)*"ester"'),
    "no is": ('is = "E"\n', "", 'what is the column "ester"'),
    "is misspelled": ("rate of P", "rates of P", 'Did you mean "rate of"'),
    "is in capitals": ('is = "pH"', 'is = "PH"', 'Did you mean "pH"'),
    "is not yet": ('is = "E"', 'is = "initial E"', '"initial E" is not yet supported'),
    "is of what": ('is = "rate of P"', 'is = "rate of"', '"rate of" of what'),
    "species twice": ('is = "total acetate"', 'is = "E"', 'both "ester" and "C_tot" are E'),
    "no rate": ('is = "rate of P"', 'is = "time on stream"', "no error|no column is a rate"),
    "gauge": ('units = "mmol/L"', 'units = "barg"', "line 14(.|\n)*absolute or gauge"),
    "temperature units": ('is = "pH"', 'is = "temperature"', "Write K or °C"),
    "rate as amount": ('units = "mmol/L"', 'units = "mmol/s"', "flows are not yet supported"),
    "reactor later": (
        "[columns.run]",
        'reactor.kind = "batch"\n[columns.run]',
        "not yet supported",
    ),
    "reactor unknown": ("[columns.run]", 'reactor.kind = "rats"\n[columns.run]', '"rates"'),
    "table outside": ('"runs.csv"', '"../runs.csv"', "line 2(.|\n)*outside what the user gave"),
    "table absolute": ('"runs.csv"', '"/etc/passwd"', "outside what the user gave"),
    "table on a drive": ('"runs.csv"', "'C:\\runs.csv'", "outside what the user gave"),
    "no such table": ('"runs.csv"', '"run.csv"', 'there is no table "run.csv"'),
    "no table": ('table = "runs.csv"', "", '"table" is missing'),
    "mechanism outside": (
        'law = "[E]*(k_water + k_base*[A-])"\noverall = "E -> P"',
        'mechanism = "../x.toml"',
        "outside what the user gave",
    ),
    "law is code": ("[E]*(k_water", "__import__('os').system('touch x')*(k_water", "line 41"),
    "law and steps": ('law = "[E]', 'steps = {a = "E -> P"}\nlaw = "[E]', "found steps and law"),
    "no way": ('law = "[E]*(k_water + k_base*[A-])"\noverall = "E -> P"', "", "found none"),
    "names twice": ('name = "both"', 'name = "base only"', 'two candidates are called "base only"'),
    "step does not balance": ("E + HA -> P + HA", "E + HA P", "line 49"),
    "undeclared column in law": ("k_water + k_base", "room*k_water + k_base", "does not declare"),
    "rate in law": ("k_water + k_base", "rate*k_water + k_base", "cannot stand in a formula"),
    "circle": ('"C_tot/(1 + 10^(pKa - pH))"', '"C_tot - [HA]"', "in a circle: HA -> A- -> HA"),
    "derived and measured": ("HA   =", "E =", '"E" is both measured and derived'),
    "derived units": (
        '"C_tot - [A-]", units = "mol/L"',
        '"C_tot - [A-]", units = "kPa"',
        "says kPa",
    ),
    "value alone": (', error = "0.02" }', " }", "without fixed and without error"),
    "fixed with error": (', error = "0.02" }', ', error = "0.02", fixed = true }', "has no error"),
    "start with value": ('error = "0.02" }', "fixed = true, start = 1 }", "that is estimated"),
    "bounds": ('at_most = "1e3 L', 'at_least = "2e3 L/mol/s", at_most = "1e3 L', "not below"),
    "start outside": ('start = "0.5 L', 'start = "5e3 L', "start is not between"),
    "units of a constant": ('start = "0.5 L/mol/s"', 'start = "0.5 1/s"', "do not fit one another"),
    "per": ('per = "lot"', 'per = "lott"', 'Did you mean "lot"'),
    "asks nothing": ('participates = "HA"\n', "", "found none"),
    "asks of nobody": ('participates = "HA"', 'participates = "HB"', 'no candidate contains "HB"'),
    "asks of a column": ('participates = "HA"', 'participates = "ester"', 'is the species "E"'),
    "asks of no candidate": ('stands = "all"', 'stands = "bth"', 'Did you mean "both"'),
    "matters": ('"5 %"', '"5"', "between 0 and 100 %"),
    "matters in units": ('"5 %"', '"5 mmol/L"', "is no fraction"),
    "at nothing": ('E = "10 mmol/L"', 'Q = "10 mmol/L"', '"Q" is no condition'),
    "at without units": ('E = "10 mmol/L"', "E = 10", 'Write "10 mmol/L"'),
    "at in other units": ('E = "10 mmol/L"', 'E = "10 kPa"', "does not fit"),
    "exclude nothing": ("run = 3", "run = 33", "no run fits run = 33"),
    "exclude no column": ("run = 3", "rum = 3", 'no column "rum"'),
    "exclude without reason": ('reason = "valve not flushed"', "", '"reason" is missing'),
    "against nobody": ('against = ["both"]', 'against = ["bothe"]', 'Did you mean "both"'),
    "level": ("level = 0.9", "level = 95", "between 0.5 and 0.9999"),
    "condition without value": ('value = "55.5 mol/L"', "", 'condition "W" has no value'),
    "condition is a column": ("[conditions.W]", "[conditions.room]", "a column of the table too"),
    "condition is a rate": (
        "[conditions.W]",
        '[conditions.W]\nis = "rate of Q"',
        "same in all runs",
    ),
    "negative condition": ('"55.5 mol/L"', '"-55.5 mol/L"', "negative concentration"),
    "not toml": ('is = "run"', "is = run", "line 5(.|\n)*not valid TOML"),
    "title is a number": ('"Does the acid form catalyse too?"', "3", '"title" must be a text'),
    "candidate is no list": ('[[candidates]]\nname = "both"', "[x]\ny = 1\n#", 'unknown key "x"'),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_study(tmp_path, case):
    old, new, says = BAD[case]
    assert old in BUFFER
    with pytest.raises(DiscrimError, match=says) as caught:
        study(tmp_path, BUFFER.replace(old, new, 1))
    assert "study.toml" in str(caught.value) or "runs.csv" in str(caught.value)
    assert list(tmp_path.iterdir()) != []
    assert not (tmp_path / "x").exists()


def test_total_that_nothing_uses(tmp_path):
    text = BUFFER.replace("C_tot - [A-]", "[W]").replace("C_tot/(1 + 10^(pKa - pH))", "[W]")
    with pytest.raises(DiscrimError, match='"total acetate" is not yet supported here'):
        study(tmp_path, text)


BAD_TABLES = {
    "word": ("1,0.100,4.62,10.0", "1,0.100,4.62,ten", 'line 2, column "ester": "ten" stands where'),
    "decimal comma": ("1,0.100,4.62,10.0", '1,0.100,4.62,"10,0"', "Write decimals with a point"),
    "nan": ("1,0.100", "1,nan", "is not a measured value"),
    "negative": ("1,0.100", "1,-0.100", "a negative concentration: -0.100"),
    "empty condition": ("1,0.100", "1,", "an empty cell among the conditions"),
    "below detection": ("1,0.100", "1,<0.1", "below a detection limit"),
    "run twice": ("2,0.200", "1,0.200", 'run "1" stands twice, first in line 2'),
    "run without name": ("2,0.200", ",0.200", '"run" is empty here'),
    "lot without name": ("4.62,10.0,a,3.62", "4.62,10.0,,3.62", "that an error is shared by"),
    "too large": ("1,0.100", "1,1e400", "too large for a number"),
}


@pytest.mark.parametrize("case", BAD_TABLES)
def test_bad_cells(tmp_path, case):
    old, new, says = BAD_TABLES[case]
    assert old in BUFFER_TABLE
    with pytest.raises(DiscrimError, match=says) as caught:
        study(tmp_path, BUFFER, BUFFER_TABLE.replace(old, new, 1))
    assert "runs.csv, line" in str(caught.value)
    assert "^" in str(caught.value)


def test_hostile_files_do_no_harm(tmp_path):
    (tmp_path / "study.toml").write_bytes(b"title = " + b'"' + b"x" * 10_000_000 + b'"')
    with pytest.raises(DiscrimError, match="at most 2 MB are read"):
        load(tmp_path / "study.toml")
    for text, says in {
        "x = " + "[" * 5000 + "]" * 5000: "nested too deeply",
        "x = " + "9" * 6000: "not valid TOML",
        "title = 'a\0b'": "not valid TOML",
        "a" * 1_900_000: "not valid TOML",
    }.items():
        (tmp_path / "study.toml").write_text(text)
        with pytest.raises(DiscrimError, match=says) as caught:
            load(tmp_path / "study.toml")
        assert len(str(caught.value)) < 1000
    (tmp_path / "study.toml").write_bytes(b"title = '\xff\xfe'")
    with pytest.raises(DiscrimError, match="line 1: not UTF-8 text"):
        load(tmp_path / "study.toml")
    with pytest.raises(DiscrimError, match="there is no such file"):
        load(tmp_path / "none.toml")
    with pytest.raises(DiscrimError, match="this is a folder"):
        load(tmp_path)


def test_a_link_out_of_the_folder_is_not_followed(tmp_path):
    outside = tmp_path / "outside.csv"
    outside.write_text(BUFFER_TABLE)
    folder = tmp_path / "study"
    folder.mkdir()
    (folder / "runs.csv").symlink_to(outside)
    (folder / "study.toml").write_text(BUFFER)
    with pytest.raises(DiscrimError, match="outside what the user gave"):
        load(folder / "study.toml")


def test_questions_about_constants_and_the_reverse_reaction(tmp_path):
    text = (
        BUFFER
        + '[[questions]]\nequal = ["k_a", "k_b"]\nmatters_above = "10 %"\n'
        + "[[questions]]\nreversible = true\n"
        + '[[questions]]\nconstant = "k_a"\nvalue = "0.5 1/s"\n'
    )
    read = study(tmp_path, text)
    assert any("empty in 1 of 5 runs" in f for f in read.findings)
    equal, reverse, value = read.questions[-3:]
    assert (equal.asks, equal.names, equal.matters_above) == ("equal", ("k_a", "k_b"), 0.1)
    assert (reverse.asks, reverse.about) == ("reversible", "")
    assert (value.about, value.value, value.value_text) == ("k_a", 0.5, "0.5 1/s")
    assert value.value_units is not None
    assert value.value_units.text == "1/s"


LIBRARY = """\
table = "runs.csv"
columns.p = { is = "H2", units = "kPa" }
columns.rate = { is = "rate of Q", units = "mol/kg/s" }
[[candidates]]
name = "adsorbed"
mechanism = "own/adsorbed.toml"
bind = { A = "H2", P = "Q" }
"""
MECHANISM = """\
title = "One adsorbed species reacts"
source = "invented"
sites = ["*"]
[steps]
ads_A = "A + * <=> A*"
surface = "A* -> P + *"
[assume]
equilibrated = ["ads_A"]
limiting = "surface"
"""


def test_mechanism_from_a_file_beside_the_study(tmp_path):
    (tmp_path / "own").mkdir()
    (tmp_path / "own" / "adsorbed.toml").write_text(MECHANISM)
    mechanism = study(tmp_path, LIBRARY, "p,rate\n1,2\n2,3\n").candidates[0].mechanism
    assert [s.text for s in mechanism.steps] == ["H2 + * <=> H2*", "H2* -> Q + *"]
    with pytest.raises(DiscrimError, match=r"study\.toml, line 7(.|\n)*Species: A, P"):
        study(tmp_path, LIBRARY.replace("{ A =", "{ B ="), "p,rate\n1,2\n2,3\n")
    with pytest.raises(DiscrimError, match=r"study\.toml, line 6(.|\n)*cannot be read"):
        study(tmp_path, LIBRARY.replace("own/ads", "own/abs"), "p,rate\n1,2\n2,3\n")
