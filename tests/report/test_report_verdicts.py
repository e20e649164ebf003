"""What must be read with a verdict stands beside it: in the terminal, on one line each with --quiet, on
the page. Records written by hand."""

from __future__ import annotations

from typing import Any

from discrim.report.content import build
from discrim.report.html import page
from discrim.report.paper import Paper
from discrim.report.text import summary, verdicts

LEFT_OUT = {"run": "9", "verdict": "undecided", "p": 0.5, "standing": ["both"], "exact": True}
WORDS = "leaving out run 9 changes the verdict from participates to undecided"


def document(**question: Any) -> dict[str, Any]:
    base = {"asks": "participates", "about": "B", "verdict": "participates", "why": ["p small"]}
    return {"title": "t", "questions": [{**base, **question}]}


def test_a_verdict_that_rests_on_one_run_says_so_beside_it() -> None:
    found = document(left_out=[LEFT_OUT], why=["p small", WORDS])
    (answer,) = build(found).answers
    said = "Rests on run 9: without it the verdict is undecided."
    assert answer.beside == (said,)
    assert answer.why == ("p small",)
    lines = summary(found).splitlines()
    assert lines[lines.index(f"  ! {said}") - 1].endswith("PARTICIPATES")
    assert said in verdicts(found)
    assert f'<p class="beside">{said}</p>' in page(found)


def test_an_open_question_rests_on_nothing() -> None:
    (answer,) = build(document(verdict="undecided", left_out=[LEFT_OUT], why=[WORDS])).answers
    assert answer.beside == ()
    assert answer.why == (WORDS,)


def test_excluded_runs_that_would_change_a_verdict() -> None:
    (answer,) = build(document(with_excluded_runs="undecided")).answers
    assert answer.beside == ("With the excluded runs put back the verdict is undecided.",)
    (answer,) = build(document(with_excluded_runs="participates")).answers
    assert answer.beside == ()


def test_what_is_too_small_to_matter_is_no_plain_verdict() -> None:
    found = document(asks="equal", verdict="differs", below_what_matters=True)
    (answer,) = build(found).answers
    assert answer.verdict == "differs, too little to matter"
    assert 'class="verdict differs-small"' in page(found)


def test_one_reading_of_the_errors_has_one_row() -> None:
    test = {"p": 0.01, "z": 2.6, "statistic": 2.6, "words": "score"}
    one = document(tests={"reconciled": test}, by_origin={"stated": test})
    two = document(tests={"reconciled": test}, by_origin={"set": test, "measured": test})
    for found, rows in ((one, 1), (two, 3)):
        (answer,) = build(found).answers
        assert len(answer.details[0].rows) == rows


def test_an_estimate_without_an_interval_is_no_failure() -> None:
    measure = {"name": "k", "units": "s⁻¹", "value": 1.913e-5, "interval": [None, None],
               "ends": ["failed", "failed"]}  # fmt: skip
    candidate = {"candidate": "c", "stands": False, "contains": True, "measures": [measure]}
    (answer,) = build(document(asks="constant", by_candidate=[candidate])).answers
    (table,) = answer.details
    assert "k 1.913 × 10⁻⁵ s⁻¹" in table.rows[0]


def test_remarks_on_intervals_stand_once_below_the_table() -> None:
    notes = {"guaranteed": "an outer bound"}
    ends = {kind: [1.0, 2.0] for kind in ("linearised", "profile", "reconciled", "guaranteed")}
    constants = [{"name": n, "value": 1.5, "intervals": ends, "interval_notes": notes}
                 for n in ("k_1", "k_2")]  # fmt: skip
    (table,) = build({"candidates": [{"name": "c", "constants": constants}]}).constants
    assert "Meaning" not in table.heads
    assert table.note.count("Guaranteed: an outer bound.") == 1


def test_a_rate_that_was_worked_out_names_its_formula() -> None:
    column = {"name": "rate", "is": "consumption of A", "error": "exact", "declared": True,
              "computed_from": "(A_in - A)/tau", "carries_errors_of": ["A_in", "A"]}  # fmt: skip
    content = build({"runs": {"columns": [column]}})
    assert content.columns is not None
    assert any("that of A_in and A in (A_in - A)/tau" in cell for cell in content.columns.rows[0])
    assert ("rate = (A_in - A)/tau",) in [lines for _, lines in content.assumed]


def test_no_line_ends_inside_a_number() -> None:
    for width in range(40, 60):
        paper = Paper(width=width)
        paper.say("it holds within 5 % (p < 0.0001) where k is 1.9 × 10⁻⁵ at p = 0.5 " * 4)
        text = str(paper)
        for part in ("5 %", "p < 0.0001", "1.9 × 10⁻⁵", "p = 0.5"):
            assert text.count(part) == 4
