"""Every kind of wrong study, through the command, as its user reads it.

Each case: what to replace in the study, by what; what the message says; which characters it
underlines; what it tells the user to do. The line that it names is checked against the file.
"""

from __future__ import annotations

import re

import pytest

from tests.bad_input.sample import STUDY, Desk, underlined

Case = tuple[str, str, str, str, str]
UNKNOWN_KEYS: dict[str, Case] = {
    "top": ("title =", "titel =", 'unknown key "titel"', "titel", 'Did you mean "title"?'),
    "section": ("[controls]", "[contrls]", 'key "contrls"', "contrls", 'mean "controls"?'),
    "reactor": ("kind =", "knd =", "reactor: unknown key", "knd", 'Did you mean "kind"?'),
    "column": ('units = "mmol/L"', 'unit = "x"', 'column "a": unknown', "unit", 'mean "units"?'),
    "error": ("sd =", "std =", 'no key "std"', "std", 'Did you mean "sd"?'),
    "condition": ('value = "55', 'valu = "55', 'condition "W"', "valu", 'Did you mean "value"?'),
    "derived": ("formula =", "formla =", 'quantity "AB"', "formla", 'Did you mean "formula"?'),
    "constant": ("start =", "strat =", 'constant "k_by_a"', "strat", 'Did you mean "start"?'),
    "candidate": ("overall =", "overal =", '"A alone"', "overal", 'Did you mean "overall"?'),
    "assume": (
        "[candidates.steps]",
        'assume = { limitting = "by_a" }\n[candidates.steps]',
        'candidate "two pathways": unknown key "limitting"',
        "limitting",
        'Did you mean "limiting"?',
    ),
    "species": (
        "[candidates.steps]",
        'species = { A = { formla = "C" } }\n[candidates.steps]',
        'unknown key "formla"',
        "formla",
        'Did you mean "formula"?',
    ),
    "question": ("matters_above", "maters_above", "question 1", "maters_above", "matters_above"),
    "exclusion": ("reason =", "raeson =", "exclusion 1", "raeson", 'Did you mean "reason"?'),
    "control": ("done =", "dnoe =", 'control "transport"', "dnoe", 'Did you mean "done"?'),
    "evidence": ("source =", "sorce =", "other evidence 1", "sorce", 'mean "source"?'),
    "confidence": ("level =", "levle =", "confidence", "levle", 'Did you mean "level"?'),
}
STRUCTURE: dict[str, Case] = {
    "no quotes": ('title = "Does', "title = Does", "not valid TOML", "D", "Texts stand in quotes"),
    "no bracket": ("[columns.b]", "[columns.b", "not valid TOML", "", "tables in [brackets]"),
    "column twice": ("[columns.b]", "[columns.a]", "twice", "", "A name can stand only once"),
    "step twice": ("by_b =", "by_a =", "overwrite", "", "A name can stand only once"),
    "zero byte": ("Does", "\0", "not valid TOML", "", "Texts stand in quotes"),
    "title is a number": (
        'title = "Does B open a pathway of its own?"',
        "title = 3",
        '"title" must be a text',
        "3",
        'Write title = "..."',
    ),
    "columns in a list": (
        "[columns.b]",
        "[[columns.b]]",
        '"b" must be a table',
        "b",
        "Write [columns.b] on a line of its own",
    ),
    "missing table": ("runs.csv", "run.csv", 'no table "run.csv"', "run.csv", "relative to"),
    "no table named": ('table = "runs.csv"', "", '"table" is missing', "", "Name the table"),
    "missing column": ("columns.a]", "columns.aa]", 'no column "aa"', "aa", 'Did you mean "a"?'),
    "reactor later": ('"rates"', '"batch"', '"batch" is not yet supported', "batch", "Give rates"),
    "no such reactor": ('"rates"', '"rate"', 'no reactor "rate"', "rate", 'Did you mean "rates"?'),
    "column later": ('"B"', '"inlet B"', "not yet supported here", "inlet B", "computed_from"),
    "column unknown": ("rate of P", "rte of P", "is not known", "rte of P", 'mean "rate of"?'),
    "long title": ("Does", "x" * 400, "a title of", "x" * 40, "At most 300"),
    "long text": ("two stirrer", "x" * 6000, '"done" has 6,0', "x" * 40, "At most 5,000"),
}
OUTSIDE = "a path outside what the user gave"
INSIDE = "must lie in the folder of the study or below it"
PATHS: dict[str, Case] = {
    "above": ("runs.csv", "../runs.csv", OUTSIDE, "../runs.csv", INSIDE),
    "above, later": ("runs.csv", "x/../../runs.csv", OUTSIDE, "x/../../runs.csv", INSIDE),
    "absolute": ("runs.csv", "/etc/passwd", OUTSIDE, "/etc/passwd", INSIDE),
    "a drive": ("runs.csv", "C:/runs.csv", OUTSIDE, "C:/runs.csv", INSIDE),
    "home": ("runs.csv", "~/runs.csv", OUTSIDE, "~/runs.csv", INSIDE),
    "zero byte": ("runs.csv", r"r\u0000.csv", "holds a zero byte", r"r\u0000.csv", ""),
    "mechanism": (
        'law = "k*[A]"\noverall = "A -> P"',
        'mechanism = "../own.toml"',
        OUTSIDE,
        "../own.toml",
        INSIDE,
    ),
}
UNITS: dict[str, Case] = {
    "rate as amount": ("umol/L/s", "mol/L", "which is not per time", "mol/L", "mol/L/s"),
    "rate as pressure": ("umol/L/s", "kPa", "which is not per time", "kPa", "mol/L/s"),
    "flow as amount": ("mmol/L", "mmol/s", "the amount of A", "mmol/s", "A concentration"),
    "derived": (
        '[B])", units = "mmol/L"',
        '[B])", units = "kPa"',
        "the formula is in mmol L⁻¹",
        "kPa",
        "Mend the formula or its units.",
    ),
    "gauge": ("mmol/L", "psig", "absolute or gauge?", "psig", "Add the atmospheric pressure"),
    "standard flow": ("mmol/L", "sccm", "holds a reference state", "sccm", "Convert to mol"),
    "ppm": ("mmol/L", "ppm", '"ppm" by what?', "ppm", '"ppm (mole)"'),
    "per cent": ("mmol/L", "%", '"%" of what?', "%", '"mol %"'),
    "no unit between": ("umol/L/s", "umol//s", "a unit is missing", "umol//s", "Write units like"),
    "high power": ("umol/L/s", "umol^99999999", "a power of 99999999", "umol^99999999", "like"),
    "constant": (
        'k_by_a = { start = "1e-4 1/s", at_most = "1e3 1/s" }',
        'k_by_a = { start = "1e-4 kPa" }',
        'the unit of "k_by_a", kPa, does not fit the law of "two pathways"',
        "k_by_a",
        "Check it against the law",
    ),
    "error": ('"2 %"', '"2 kPa"', "is in kPa, its values are in umol/L/s", "2 kPa", "same kind"),
    "at": ('"20 mmol/L"', '"20 kPa"', '"kPa" does not fit', "20 kPa", "Write a unit"),
}
CHEMISTRY: dict[str, Case] = {
    "sites": ("B -> P", "B + * -> P", "sites do not balance", "P", "Write the freed site too"),
    "elements": (
        "[candidates.steps]",
        'species = { B.formula = "C2H4", P.formula = "C2H6" }\n[candidates.steps]',
        "step by_b: elements do not balance",
        "B -> P",
        "H: 4 on the left, 6 on the right",
    ),
    "charge": (
        "[candidates.steps]",
        "species = { B.charge = 1, P.charge = 0 }\n[candidates.steps]",
        "step by_b: charge does not balance",
        "B -> P",
        "1 on the left, 0 on the right",
    ),
    "2O*": ("B -> P", "2O* -> P", '"2O*" begins with a number', "2O*", "write 2 O*"),
    "E+ B": ("B -> P", "E+ B -> P", "no + with a space on either side", "E+ B", "write E + B"),
    "no arrow": ("B -> P", "B = P", '"=" is no arrow', "=", "Write -> for a step"),
    "nothing changes": ("B -> P", "B -> B", "nothing changes", "B -> B", "leave it out"),
    "written twice": (
        "B -> P",
        "A -> P",
        'step "by_b" is the same as step "by_a"',
        "A -> P",
        'Leave "by_b" out',
    ),
    "read backwards": (
        "B -> P",
        "P <=> A",
        'step "by_b" is step "by_a" read backwards',
        "P <=> A",
        'Leave "by_a" out',
    ),
    "only from itself": (
        'by_b = "B -> P"',
        'by_b = "X + B -> 2 X"\nend = "X -> P"\n[candidates.assume]\nsteady = ["X"]',
        '"X" is made only from itself',
        "X + B -> 2 X",
        "such as an initiation",
    ),
    "many": ("B -> P", "9999999999 B -> P", "a coefficient above 9", "9999999999", "1 to 9"),
    "html": ("B -> P", "B -> <b>", '"<b>" is no name of a species', "<b>", "letters, digits"),
    "empty step": ('"B -> P"', '""', '"by_b" is empty', '"', 'Write a text in quotes: by_b = "'),
    "name of a step": ("by_b =", '"k b" =', "is no name for a step", "B -> P", "letters, digits"),
    "limiting": (
        "[candidates.steps]",
        'assume.limiting = "by_c"\n[candidates.steps]',
        'no step is called "by_c"',
        "two pathways",
        "Steps: by_a, by_b.",
    ),
    "nothing measures it": (
        'law = "k*[A]"',
        'law = "k*[A]*[Q]"',
        'the law of "A alone" contains "Q", which no column measures',
        "[Q]",
        "[conditions.Q]",
    ),
    "nothing measures a reactant": (
        '"B -> P"',
        '"B + Q -> P"',
        'the law of "two pathways" contains "Q", which no column measures',
        "two pathways",
        "Declare the column that gives it",
    ),
    "looks like A": (
        'law = "k*[A]"',
        'law = "k*[А]"',
        'contains "А"',
        "[А]",
        '"A" looks the same but is written with other characters '
        "(U+0410 CYRILLIC CAPITAL LETTER A)",
    ),
}
CANDIDATES: dict[str, Case] = {
    "same name": ('"A alone"', '"two pathways"', "two candidates are", "two pathways", "its own"),
    "no name": ('"A alone"', '" "', '"name" is empty', " ", "Give each candidate a name"),
    "long name": ('name = "A alone"', f'name = "{"x" * 200}"', "of 200", "x" * 40, "At most 120"),
    "nothing": (
        'law = "k*[A]"\noverall = "A -> P"\n',
        "",
        "needs one of steps, mechanism, law; found none",
        "candidates",
        "Write its steps",
    ),
    "two of them": (
        'law = "k*[A]"',
        'law = "k*[A]"\nmechanism = "complex-then-product"',
        "found mechanism and law",
        "candidates",
        "Write its steps",
    ),
    "no such mechanism": (
        'law = "k*[A]"\noverall = "A -> P"',
        'mechanism = "two-paralel-pathways"',
        'no mechanism is called "two-paralel-pathways"',
        "two-paralel-pathways",
        'Did you mean "two-parallel-pathways"?',
    ),
    "bind of nothing": (
        'law = "k*[A]"\noverall = "A -> P"',
        'mechanism = "two-parallel-pathways"\nbind = { Z = "A" }',
        'bind renames "Z", which is no species of the mechanism',
        '{ Z = "A" }',
        "Species: A, P, B.",
    ),
    "bind to one": (
        'law = "k*[A]"\noverall = "A -> P"',
        'mechanism = "two-parallel-pathways"\nbind = { A = "A", B = "A" }',
        'makes "A" and "B" one species',
        '{ A = "A", B = "A" }',
        "a name of its own",
    ),
    "nothing to estimate": (
        '"k*[A]"',
        '"2*[A]"',
        'nothing in the law of "A alone" is left to estimate',
        "2*[A]",
        "Leave at least one constant",
    ),
    "all known": (
        'k_by_a = { start = "1e-4 1/s", at_most = "1e3 1/s" }',
        'k_by_a = { value = "1 1/s", fixed = true }\nk_by_b = { value = "1 1/s", error = "1 %" }',
        'nothing in the law of "two pathways" is left to estimate',
        "two pathways",
        "start = in place of value =",
    ),
}
LAWS: dict[str, Case] = {
    "empty": ('"k*[A]"', '""', '"law" is empty', '"', "Write a text"),
    "number": ('"k*[A]"', '"1"', "the law is the number 1", "1", "needs a constant"),
    "left side": ('"k*[A]"', '"r = k*[A]"', '"=" does not belong', "=", "without a left-hand"),
    "units in a sum": (
        '"k*[A]"',
        '"k*([A] + [A]^2)"',
        "terms of a sum have different units",
        "k*([A] + [A]^2)",
        "Check the law and the units",
    ),
    "exp of an amount": ('"k*[A]"', '"k*exp([A])"', "has a unit", "k*exp([A])", "Check the law"),
    "zero": ("[A]*[B]/([A] + [B])", "[A]/([B] - [B])", "division by zero", "([B] - [B])", ""),
    "circle": ("[A]*[B]/([A] + [B])", "AB*[A]", "in a circle: AB -> AB", "AB*[A]", ""),
    "high power": ('"k*[A]"', '"k*[A]^9999999"', "is too large", "9999999", "between -50 and 50"),
    "tower": ('"k*[A]"', '"k*9^9^9^9"', "the exponent 9^9 is too large", "9^9", "between -50"),
    "power of powers": (
        '"k*[A]"',
        '"k*(([A]^50)^50)^50"',
        "a power of 2500 is too high",
        "(([A]^50)^50)",
        "between -50 and 50",
    ),
    "long number": ('"k*[A]"', f'"k*{"9" * 61}"', "a number of 61", "9" * 61, "at most 60"),
    "long name": ('"k*[A]"', f'"{"k" * 101}"', "101 characters", "k" * 40, "at most 100"),
    "code": (
        '"k*[A]"',
        "\"__import__('os').system('touch pwned')\"",
        "quotes do not belong",
        "'",
        "Write names without quotes",
    ),
    "attribute": ('"k*[A]"', '"k.__class__*[A]"', '"." does not belong', ".", "inside a number"),
    "call": ('"k*[A]"', '"open(k)*[A]"', '"open" is not a function', "open", "exp, log and sqrt"),
    "index": ('"k*[A]"', '"k*[A][0]"', "nothing stands between", "[A][0]", "[A]*[0]"),
    "lambda": ('"k*[A]"', '"lambda: 0"', '":" does not belong', ":", "Allowed are"),
    "python power": ('"k*[A]"', '"k*[A]**2"', '"**" is not an operator', "**", "with ^"),
    "61 constants": (
        '"k*[A]"',
        '"k*' + "*".join(f"(1+K{i}*[A])" for i in range(60)) + '"',
        'the law of "A alone" has 61 constants',
        "k*(1+K0*[A])*(1+K1*[A])",
        "Rates do not pin down so many.",
    ),
}
CONSTANTS: dict[str, Case] = {
    "per nothing": (
        'start = "1e-4 1/s", at_most = "1e3 1/s"',
        'per = "lott"',
        'no column "lott"',
        "lott",
        'Did you mean "lot"?',
    ),
    "bounds": ('"1e-4 1/s"', '"1 1/s", at_least = "2e3 1/s"', "not below", "2e3 1/s", "Exchange"),
    "below zero": (
        'start = "1e-4 1/s", at_most = "1e3 1/s"',
        'at_most = "-1 1/s"',
        'at_most of "k_by_a" is -1, but it is at least 0',
        "k_by_a",
        "write the minus in the law",
    ),
    "starts below zero": ('"1e-4 1/s"', '"-1 1/s"', "is -1, but it is at least 0", "k_by_a", "0"),
    "huge": ('"1e-4 1/s"', '"1e300 1/s"', "too large to compute with", "1e300 1/s", "1e60"),
    "word": ('"1e3 1/s"', '"many"', '"many" stands where', "many", "Write a number and its unit"),
    "fixed and bounded": (
        'start = "1e-4 1/s"',
        'value = "1 1/s", fixed = true',
        '"at_most" belongs to a constant that is estimated',
        "1e3 1/s",
        "Take out one of the two.",
    ),
}
ERRORS: dict[str, Case] = {
    "no unit": ('"2 %"', '"2"', '"2" of what?', "2", 'Write "2 umol/L/s" or "2 %".'),
    "huge": ('"2 %"', '"1e300 %"', '"1e300" is too large', "1e300 %", "between 1e-60 and 1e60"),
    "tiny": ('"2 %"', '"1e-300 %"', '"1e-300" is too small', "1e-300 %", "1e-60 and 1e60"),
    "number": ('"2 %"', "2", '"2" of what?', "2", 'Write "2 umol/L/s" or "2 %".'),
    "negative": ('"2 %"', '"-1 %"', '"-1 %" is negative', "-1 %", "An error is 0 or more."),
    "word": ('"2 %"', '"digit"', '"digit" is no error', "digit", 'Did you mean "digits"?'),
    "truth": ('"2 %"', "true", "an error is a text or a table", "true", '"1 %"'),
    "origin": ('"set"', '"weighed"', "weighed", "weighed", '"set" (weighed, pipetted'),
    "shared by nothing": ('"set"', '"set", shared_by = "lots"', "no column", "lots", 'mean "lot"?'),
    "column missing": ('"2 %"', '{ column = "sd" }', 'no column "sd"', "sd", "It has"),
}
MATTERS = "It is the size of an effect, between 0 and 100 % of the rate"
QUESTIONS: dict[str, Case] = {
    "of nobody": ('"B"\nmatters', '"Bx"\nmatters', 'no candidate contains "Bx"', "Bx", '"B"?'),
    "of a column": (
        '"B"\nmatters',
        '"b"\nmatters',
        'no candidate contains "b"',
        "b",
        'species "B"',
    ),
    "of nothing": ('"B"\nmatters', '""\nmatters', '"participates" is empty', '"', "Write a text"),
    "500 %": ('"5 %"', "5", "matters_above is 5", "5", MATTERS),
    "500 % in words": ('"5 %"', '"500 %"', "matters_above is 500 %", "500 %", MATTERS),
    "in units": ('"5 %"', '"5 mmol/L"', '"5 mmol/L" is no fraction', "5 mmol/L", '"5 %"'),
    "negative": ('"5 %"', '"-5 %"', "matters_above is -5 %", "-5 %", MATTERS),
    "zero": ('"5 %"', "0", "matters_above is 0", "0", MATTERS),
    "word": ('"5 %"', '"five"', '"five" stands where a number belongs', "five", MATTERS),
    "truth": ('"5 %"', "true", "must be a number", "true", MATTERS),
    "nan": ('"5 %"', "nan", "must be a finite number", "nan", MATTERS),
    "at no condition": ("at = { A", "at = { Q", '"Q" is no condition', "Q", '"A", "B", "W"'),
    "at the rate": ("at = { A", "at = { rate", '"rate" is no condition', "rate", '"A", "B", "W"'),
    "at the end of the world": ('"20 m', '"1e99 m', "too large", "1e99 mmol/L", "1e60"),
    "at below zero": ('"20 mmol/L"', '"-20 mmol/L"', "a negative condition", "-20 mmol/L", "0 or"),
    "stands": ('"all"', '["A alon"]', 'no candidate "A alon"', '["A alon"]', 'mean "A alone"?'),
    "two in one": (
        'stands = "all"',
        'stands = "all"\nparticipates = "B"',
        "found",
        "questions",
        "",
    ),
    "exclude nothing": ("run = 7", "run = 77", "no run fits run = 77", "{ run = 77 }", 'are "1"'),
    "exclude everything": (
        "run = 7",
        "run = [1, 2, 3, 4, 5, 6, 7]",
        "every run is excluded",
        "{ run = [1, 2, 3, 4, 5, 6, 7] }",
        "At least one run must stay.",
    ),
    "level 95": ("0.95", "95", "a level of 95", "95", "between 0.5 and 0.9999"),
    "level in words": ("0.95", '"95 %"', "must be a number", "95 %", "Write level = 0.95."),
    "against nobody": ('["A alone"]', '["A alon"]', 'no candidate "A alon"', "A alon", "A alone"),
    "negative condition": ("55.5", "-55.5", "a negative concentration", "-55.5 mol/L", "sign"),
    "condition in words": ("55.5 mol/L", "lots", '"lots" stands where', "lots", "2.5 mmol/L"),
}
ALL = {
    f"{group}: {name}": case
    for group, cases in {
        "key": UNKNOWN_KEYS,
        "structure": STRUCTURE,
        "path": PATHS,
        "units": UNITS,
        "chemistry": CHEMISTRY,
        "candidate": CANDIDATES,
        "law": LAWS,
        "constant": CONSTANTS,
        "error": ERRORS,
        "question": QUESTIONS,
    }.items()
    for name, case in cases.items()
}


@pytest.mark.parametrize("name", ALL)
def test_refused(name: str, desk: Desk) -> None:
    old, new, says, under, do = ALL[name]
    assert old in STUDY
    text = STUDY.replace(old, new, 1)
    desk.write(text)
    message = desk.refused()
    lines = message.splitlines()
    found = re.match(r"study\.toml(?:, line (\d+))?", lines[0])
    assert found, message
    assert says in lines[0], message
    marked = underlined(message)
    if marked.endswith("…"):  # a long line is cut
        assert len(under) >= 20
        assert marked.startswith(under)
    elif under:
        assert marked == under, message
    if found[1]:  # the line shown is the line named
        shown = lines[1][4:].strip("… ")
        assert shown[:70] in "".join(
            ch if ch.isprintable() else " " for ch in text.split("\n")[int(found[1]) - 1]
        )
    else:
        assert name == "structure: no table named"
    assert do in lines[-1], message
    assert not (desk.folder / "pwned").exists()


@pytest.mark.parametrize("command", ["check", "derive"])
@pytest.mark.parametrize("name", ["key: top", "path: absolute", "law: code", "chemistry: sites"])
def test_refused_by_every_command(name: str, command: str, desk: Desk) -> None:
    old, new, says, under, _ = ALL[name]
    desk.write(STUDY.replace(old, new, 1))
    message = desk.refused(command, "study.toml")
    assert says in message
    assert underlined(message) == under


def test_a_study_without_candidates(desk: Desk) -> None:
    desk.write(STUDY.split("[[candidates]]")[0])
    for command in ("weigh", "check"):
        message = desk.refused(command, "study.toml")
        assert message.startswith("study.toml: the study has no candidates\nWrite each mechanism")


def test_an_empty_study(desk: Desk) -> None:
    desk.write("")
    assert desk.refused() == (
        'study.toml: "table" is missing\nName the table of runs: table = "runs.csv".\n'
    )
