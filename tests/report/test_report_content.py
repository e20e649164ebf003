"""What the report says, and that an incomplete or odd document never stops it."""

import copy

import numpy as np
import pytest

from discrim.report.content import build, not_computed
from discrim.report.figures import draw
from discrim.report.folder import candidate_rows, constant_rows, run_rows
from discrim.report.html import page
from discrim.report.text import check, laws, summary
from tests.report import sample

JUNK = [None, "text", [], {}, 3, [None, "x", 3], float("nan"), True, {"a": [1]}, [[1, 2], [3]]]


def every_place(item, path=()):
    """Paths to all entries of a document (the first two of each list stand for the rest)."""
    if isinstance(item, dict):
        pairs = list(item.items())
    elif isinstance(item, list):
        pairs = list(enumerate(item[:2]))
    else:
        return
    for key, inner in pairs:
        yield (*path, key)
        yield from every_place(inner, (*path, key))


def broken(document, path, value):
    """A copy with one entry replaced, or taken out when ``value`` is the word ``missing``."""
    out = dict(document)
    at = out
    for key in path[:-1]:
        at[key] = copy.copy(at[key])
        at = at[key]
    if value == "missing" and isinstance(at, dict):
        del at[path[-1]]
    else:
        at[path[-1]] = value
    return out


@pytest.mark.parametrize("name", sample.ALL)
def test_every_sample_is_drawn(name):
    document = sample.ALL[name]()
    pictures = draw(document)
    text = page(document, pictures)
    assert document.get("title", "") in text
    assert all(p.alt and p.title and p.caption for p in pictures)


@pytest.mark.parametrize("name", ["lockstep", "catalyst"])
def test_no_missing_or_odd_entry_stops_the_words(name):
    document = sample.ALL[name]()
    rng = np.random.default_rng(7)
    places = [p for p in every_place(document) if p[0] != "planes"]
    for i in rng.choice(len(places), size=80, replace=False):
        for value in ("missing", JUNK[rng.integers(len(JUNK))]):
            odd = broken(document, places[i], value)
            summary(odd)
            if i % 12 == 0:
                page(odd)
            candidate_rows(odd), constant_rows(odd), run_rows(odd)


@pytest.mark.parametrize("name", ["lockstep", "catalyst"])
def test_no_missing_or_odd_entry_stops_the_figures(name):
    document = sample.ALL[name]()
    rng = np.random.default_rng(11)
    places = [
        p
        for p in every_place(document)
        if p[0] in ("planes", "questions", "runs") or {"fitted", "pathways", "constants"} & {*p}
    ]
    for i in rng.choice(len(places), size=5, replace=False):
        draw(broken(document, places[i], JUNK[rng.integers(len(JUNK))]))


def test_the_answer_comes_with_its_reasons():
    content = build(sample.two_amines())
    first, second = content.answers
    assert (first.asks, first.verdict, first.decided) == ("Does B take part?", "undecided", False)
    assert first.why[0].startswith("[B]/[A] stays between 2.496 and 2.504")
    assert first.settle == ("Runs at two or more other ratios of [B] to [A].",)
    assert ("Flip distance", "0.4 times the stated errors (1.1 would be ordinary)") in first.facts
    assert (second.verdict, second.decided) == ("2 of 2 stand", False)


def test_without_a_sentence_the_agreed_words_stand_in():
    document = {"questions": [
        {"asks": "participates", "about": "B", "verdict": "negligible",
         "effect": {"matters_above": 0.05}},
        {"asks": "participates", "about": "B", "verdict": "participates"},
    ]}  # fmt: skip
    negligible, participates = (a.sentence for a in build(document).answers)
    assert negligible == (
        "No dependence of the rate on B above 5 % within these runs. B may still be consumed, "
        "enter after the limiting step, or be at saturation; rates cannot show that."
    )
    assert participates == "The rate depends on B."


def test_cautions_are_said_even_when_the_document_has_none():
    said = " ".join(build({}).cautions)
    for words in ("not permission to change a process", "relief sizing", "scavenger",
                  "management of change", "Transport limits", "licensed"):  # fmt: skip
        assert words in said


def test_rivals_are_never_called_the_only_laws():
    for document in (sample.two_amines(), sample.catalyst()):
        for answer in build(document).answers:
            if answer.asks == "Which candidates stand?":
                assert answer.sentence.count("not the only possible ones") == 1


def test_what_was_not_computed_is_said():
    assert not_computed(sample.two_amines()) == []
    assert not_computed(sample.catalyst()) == [
        "The candidate “power law” could not be fitted: evaluation limit reached."
    ]
    asked = {"questions": [{"asks": "reversible", "about": "", "verdict": None}]}
    assert not_computed(asked) == ["Is the reaction reversible within these runs? Not answered."]


def test_constants_share_one_power_of_ten():
    (table,) = build({"candidates": [{"name": "x", "constants": [
        {"name": "k", "units": "s⁻¹", "value": 3e-6, "standard_error": 1.2e-7,
         "intervals": {"profile": [2.7e-6, 3.3e-6]}}]}]}).constants  # fmt: skip
    row = dict(zip(table.heads, table.rows[0], strict=True))
    assert row["Value"] == "3.00"
    assert row["Standard error"] == "0.12"
    assert row["Units"] == "10⁻⁶ s⁻¹"
    assert row["Profile"] == "2.70 to 3.30"


def test_derive_and_check_speak_of_every_law():
    candidates = sample.catalyst()["candidates"]
    text = laws(candidates)
    assert "In the constants of the steps" in text
    assert "surface  A* + B* -> P + 2 *" in text
    assert "k = k_surface*K_ads_A (only their product occurs)" in text
    same = laws([{"name": "a", "law": "r = k*[A]", "same_law_as": ["b"]}])
    assert "“a” is the same law as “b”" in same
    checked = check({
        "title": "T", "runs": {"n": 2, "lockstep": [{"words": "A and B move together."}]},
        "laws": [{"name": "two", "law": "r = k*[A]", "condition_number": 10012.0,
                  "digits_lost": 4.0, "trade_offs": [{"words": "only k_a + 2.5 k_b is fixed"}]}],
        "can_decide": ["the sum"], "cannot_decide": ["Whether B takes part."],
    })  # fmt: skip
    order = ["T\n", "These runs cannot decide", "Whether B", "These runs can decide",
             "A and B move", "condition number  10000", "only k_a + 2.5 k_b"]  # fmt: skip
    places = [checked.index(words) for words in order]
    assert places == sorted(places)
    assert check({})
    assert laws([{}])
