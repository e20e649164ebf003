"""The page: one file that needs nothing else, says what it must, and runs nothing of a file's."""

import re
from html.parser import HTMLParser

import pytest

from discrim.report.canvas import NAMES
from discrim.report.figures import draw
from discrim.report.formulas import safe_mathml
from discrim.report.html import numeral, page
from tests.report import sample

HOSTILE = '"><script>alert(1)</script><img src=x onerror=alert(1)>{{ 7*7 }}'
VOID = {"meta", "link", "br", "img", "hr", "input"}


class Elements(HTMLParser):
    def __init__(self):
        super().__init__()
        self.names, self.attributes, self.open = [], [], []

    def handle_starttag(self, tag, attrs):
        self.names.append(tag)
        self.attributes += [(tag, key, value or "") for key, value in attrs]
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.names.append(tag)
        self.attributes += [(tag, key, value or "") for key, value in attrs]

    def handle_endtag(self, tag):
        assert self.open.pop() == tag


def elements(text):
    found = Elements()
    found.feed(text)
    found.close()
    assert found.open == []
    return found


def with_hostile_texts(item):
    """Every text of a document replaced, but for the few words that the report steers by."""
    kept = {"stands", "rejected", "participates", "undecided", "converged", "crossed", "open"}
    if isinstance(item, dict):
        return {k: with_hostile_texts(v) for k, v in item.items()}
    if isinstance(item, list):
        return [with_hostile_texts(v) for v in item]
    return HOSTILE if isinstance(item, str) and item not in kept else item


@pytest.mark.parametrize("name", sample.ALL)
def test_one_file_that_needs_nothing_else(name):
    document = sample.ALL[name]()
    text = page(document, draw(document))
    found = elements(text)
    assert not {"script", "link", "iframe", "img", "object", "embed", "form"} & set(found.names)
    for tag, key, value in found.attributes:
        assert not key.startswith("on")
        if key in ("href", "src", "xlink:href", "action"):
            assert value.startswith("#"), (tag, key, value)
    assert "@import" not in text
    assert not re.search(r"url\((?!#)", text)
    ids = [value for _, key, value in found.attributes if key == "id"]
    assert len(ids) == len(set(ids))
    targets = [v[1:] for _, k, v in found.attributes if k in ("href", "xlink:href")]
    assert set(targets) <= set(ids)
    assert set(re.findall(r"url\(#([^)]*)\)", text)) <= set(ids)


def test_nothing_of_a_file_is_run():
    document = with_hostile_texts(sample.two_amines())
    text = page(document, draw(document))
    found = elements(text)
    assert not {"script", "img"} & set(found.names)
    assert "&lt;script&gt;" in text
    assert "49" not in re.findall(r"<h1>.*?</h1>", text)[0]


def test_answer_cautions_and_provenance_are_on_the_page():
    document = sample.two_amines()
    text = page(document, draw(document)).partition("<body>")[2]
    order = ["<h1>", "Does B take part?", "undecided", "These runs cannot tell", "Before you act",
             "Findings</h2>", "The candidates compared", "Constants</h2>", "The runs and what",
             "How well the standing", "How each rate law follows", "Behind the verdicts",
             "not checked", "Methods and provenance"]  # fmt: skip
    places = [text.index(words) for words in order]
    assert places == sorted(places)
    for words in ("valve not flushed", "label found in the acid", "notebook 12, p. 40",
                  "cdcdcdcd", "Kleibergen", "mmol/L", "total volume"):  # fmt: skip
        assert words in text


def test_every_figure_has_words_and_follows_light_and_dark():
    document = sample.two_amines()
    pictures = draw(document)
    text = page(document, pictures)
    assert text.count('role="img"') == len(pictures) == 7
    svg = "".join(re.findall(r"<svg.*?</svg>", text, flags=re.DOTALL))
    assert not [colour for colour in NAMES if colour in svg]
    assert "prefers-color-scheme: dark" in text
    for name in NAMES.values():
        assert text.count(f"--{name}:") >= 2


def test_same_document_same_bytes():
    document = sample.catalyst()
    assert page(document, draw(document)) == page(document, draw(document))


def test_formulas_are_mathml_with_their_text_beside():
    text = page(sample.two_amines(), [])
    assert '<math display="block"><mrow><mi>r</mi>' in text
    assert "<code>r = k_by_a*[A] + k_by_b*[B]</code>" in text


def test_long_formulas_are_text_on_paper():
    """Drawn they do not break into lines, and paper cannot scroll."""
    document = sample.two_amines()
    drawn = "<math><mi>r</mi></math>"
    document["candidates"][0] |= {"law": " + ".join(["k*[A]"] * 40), "law_mathml": drawn}
    document["candidates"][1] |= {"law": "k*[A]", "law_mathml": drawn}
    text = page(document, {})
    assert text.count('<div class="formula long">') == 1
    assert '<code class="on-paper">r = k*[A] + k*[A]' in text


@pytest.mark.parametrize(
    ("given", "expected"),
    [
        ("<mi>k</mi>", '<math display="block"><mi>k</mi></math>'),
        ("<math xmlns='http://www.w3.org/1998/Math/MathML'><mi>k</mi></math>",
         '<math display="block"><mi>k</mi></math>'),
        ("<mfenced><mi>a</mi><mi>b</mi></mfenced>",
         '<math display="block"><mrow><mo>(</mo><mi>a</mi><mo>,</mo><mi>b</mi><mo>)</mo></mrow>'
         "</math>"),
        ('<mi onclick="alert(1)" mathvariant="normal">k</mi>',
         '<math display="block"><mi mathvariant="normal">k</mi></math>'),
        ("<mi>a &lt; b</mi>", '<math display="block"><mi>a &lt; b</mi></math>'),
        ("<script>alert(1)</script>", ""),
        ("<mi><a href='x'>k</a></mi>", ""),
        ("<maction><mi>k</mi></maction>", ""),
        ("<!DOCTYPE x [<!ENTITY a 'b'>]><mi>&a;</mi>", ""),
        ("<mi>unclosed", ""),
        ("", ""),
        ("<mrow>" * 500 + "</mrow>" * 500, ""),
        ("<mi>" + "k" * 300_000 + "</mi>", ""),
    ],
)  # fmt: skip
def test_only_plain_formulas_pass(given, expected):
    assert safe_mathml(given) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1.2e-5", "1.2 × 10⁻⁵"),
        ("-3.1 to 2e6", "−3.1 to 2 × 10⁶"),
        ("<b>", "&lt;b&gt;"),
        ("run-3", "run-3"),
        ("k1e2", "k1e2"),
    ],
)
def test_numbers_as_print_sets_them(text, expected):
    assert str(numeral(text)) == expected
