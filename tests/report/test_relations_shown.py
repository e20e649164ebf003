"""How pairs of laws are related, as ``derive`` prints it: few words where nothing is left open."""

from itertools import combinations
from typing import Any

import pytest

from discrim.report.text import laws


def shown(relations: list[dict[str, str]]) -> str:
    document: dict[str, Any] = {"name": "one", "law": "k*[A]", "relations": relations}
    return " ".join(laws([document, {"name": "two", "law": "k*[B]"}]).split())


def pairs(n: int, relation: str) -> list[dict[str, str]]:
    return [
        {"a": f"law {i}", "b": f"law {j}", "relation": relation, "words": ""}
        for i, j in combinations(range(n), 2)
    ]


def test_a_case_at_zero_is_special_and_one_at_infinity_is_limiting() -> None:
    def record(words: str) -> dict[str, str]:
        return {"a": "small", "b": "large", "relation": "special case", "words": words}

    assert "“small” is a special case of “large”: K_B = 0" in shown([record("K_B = 0")])
    assert "“small” is a limiting case of “large”: k = infinite" in shown([record("k = infinite")])


@pytest.mark.parametrize(("n", "named"), [(5, 10), (6, 0)])
def test_many_pairs_proven_apart_are_counted(n: int, named: int) -> None:
    text = shown(pairs(n, "neither"))
    assert text.count("“law ") == 2 * named
    said = "Each of the other 15 pairs is proven to be neither the same law nor one a case"
    assert (said in text) == (not named)


def test_pairs_are_named_where_some_are_undecided() -> None:
    rest = [{"a": "x", "b": "y", "relation": "undecided", "words": ""}]
    text = shown(pairs(6, "neither") + rest)
    assert "and 3 more pairs" in text
    assert "Not decided: “x” and “y”" in text
