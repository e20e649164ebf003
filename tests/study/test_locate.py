"""Places of keys and values in TOML text; the values themselves are checked against tomllib."""

from __future__ import annotations

import tomllib

import pytest

from discrim.study.locate import Locator

TEXT = '''title = "one" # with "quotes" in a comment
table = 'runs.csv'

[columns.rate]
is = "rate of P"
error = { sd = "1 %", origin = "set" }
[columns."amine b"]
"is" = "B"

[[candidates]]
name = "two"
steps.by_a = "A -> P"
[candidates.steps2]
x = """
multi"""
[[candidates]]
name = "three"
list = [1, "two",  # comment ]
  { a = "deep" },
]
[[candidates.inner]]
y = 1
[[candidates.inner]]
y = 2
"a\\tb" = 'literal \\ '
'''


def walk(value, path=()):
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from walk(inner, (*path, key))
    elif isinstance(value, list):
        for i, inner in enumerate(value):
            yield from walk(inner, (*path, i))
    else:
        yield path, value


@pytest.mark.parametrize("text", [TEXT, TEXT.replace("\n", "\r\n")])
def test_every_value_is_found_where_it_stands(text):
    locator = Locator("study.toml", text)
    leaves = list(walk(tomllib.loads(text)))
    assert len(leaves) == 16
    for path, value in leaves:
        start, end = locator.values[path]
        assert text[start:end].strip() == str(value).strip(), path


def test_place_of_value_key_and_missing_key():
    locator = Locator("study.toml", TEXT)
    place = locator.place(("columns", "rate", "error", "origin"))
    assert (place.line, place.text[place.column - 1 :][: place.length]) == (6, "set")
    place = locator.place(("columns", "amine b", "is"), key=True)
    assert (place.line, place.text[place.column - 1 :][: place.length]) == (8, '"is"')
    place = locator.place(("candidates", 1, "mechanism"))
    assert (place.line, place.text) == (16, "[[candidates]]")
    assert locator.place(("nothing",)).line == 0
