"""Where a margin changes sign, against roots in closed form; how few points that takes."""

import math

import numpy as np
import pytest

from discrim.evidence import search
from discrim.evidence.search import Brackets

CLOSENESS = 1e-6

# margins with a root in closed form: (margin, root, from, to)
MARGINS = {
    "straight": (lambda x: 3.0 - x, 3.0, 1.0, 5.0),
    "parabola": (lambda x: 4.0 - x**2, 2.0, 0.5, 10.0),
    "over decades": (lambda x: math.log(7e-4 / x), 7e-4, 1e-9, 1e3),
    "from zero": (lambda x: 0.25 - x, 0.25, 0.0, 4.0),
    "negative": (lambda x: x**3 + 8.0, -2.0, -30.0, 1.0),
    # as the margin of a test whose objective climbs beside the end
    "flat, then steep": (lambda x: 2.0 - (x / 2.0) ** 40, 2.0 * 2.0 ** (1 / 40), 0.1, 4.0),
    "a step": (lambda x: 1.0 if x < 0.7 else -1.0, 0.7, 0.1, 3.0),
}


def found(margins, monkeypatch):
    """Ends of all margins as one batch, and the points each of them took."""
    taken = np.zeros(len(margins), int)

    def at(self, live, x):
        taken[live] += 1
        f = np.array([margins[i][0](float(v)) for i, v in zip(live, x, strict=True)])
        return search.tame(f), np.zeros(len(x)), np.ones(len(x), bool)

    monkeypatch.setattr(Brackets, "at", at)
    a, b = np.array([m[2] for m in margins]), np.array([m[3] for m in margins])
    fa, fb = ([m[0](float(v)) for m, v in zip(margins, x, strict=True)] for x in (a, b))
    none = np.zeros(len(a), int)
    ends, *_ = Brackets((), (), none, none, a, b, np.array(fa), np.array(fb)).refined(CLOSENESS)
    return ends, taken


@pytest.mark.parametrize("name", MARGINS)
def test_ends_are_the_roots(name, monkeypatch):
    (end,), _ = found([MARGINS[name]], monkeypatch)
    assert end == pytest.approx(MARGINS[name][1], rel=2 * CLOSENESS)


def test_a_batch_is_its_rows_one_by_one(monkeypatch):
    every, _ = found(list(MARGINS.values()), monkeypatch)
    singly = [found([m], monkeypatch)[0][0] for m in MARGINS.values()]
    assert every.tolist() == singly


def test_few_points(monkeypatch):
    """Halving takes 22 points for six digits of a bracket four times its root."""
    names = [n for n in MARGINS if n != "a step"]
    _, taken = found([MARGINS[n] for n in names], monkeypatch)
    assert taken.max() <= 16, dict(zip(names, taken, strict=True))
    assert taken[names.index("straight")] <= 3
