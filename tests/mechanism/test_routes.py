"""Pathways of a mechanism: known sets, brute force over small networks, and their limits."""

from fractions import Fraction
from itertools import combinations
from math import gcd

import numpy as np
import pytest

from discrim.mechanism.check import net, species_of
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.routes import routes_of


def found(steps, inner=(), **keywords):
    mechanism = parse_mechanism(name="x", steps=steps, **keywords)
    every = species_of(mechanism)
    inner = {s for s in every if s.site or s.name in inner}
    return mechanism, routes_of(mechanism, inner), inner


def summary(routes):
    return {r.name: (r.text, r.words()) for r in routes.routes}


# Chemistry that any textbook has; pathways by inspection (common practice, no source).
KNOWN = {
    "side by side": (
        {"by_a": "A -> P", "by_b": "B -> P"},
        (),
        {"by_a": ("A -> P", "by_a"), "by_b": ("B -> P", "by_b")},
        0,
    ),
    "dissociation feeds two events": (
        {"ads_A2": "A2 + 2 * <=> 2 A*", "ads_B": "B + * <=> B*", "react": "A* + B* -> P + 2 *"},
        (),
        {"react": ("A2 + 2 B -> 2 P", "ads_A2 + 2 ads_B + 2 react")},
        0,
    ),
    "adsorbed and from the gas": (
        {
            "ads_A": "A + * <=> A*",
            "ads_B": "B + * <=> B*",
            "both": "A* + B* -> P + 2 *",
            "gas": "A* + B -> P + *",
            "hold": "I + * <=> I*",
        },
        (),
        {"both": ("A + B -> P", "ads_A + ads_B + both"), "gas": ("A + B -> P", "ads_A + gas")},
        0,
    ),
    # binding in either order: two pathways and the circle E, EA, EAB, EB
    "any order": (
        {
            "a": "E + A <=> EA",
            "b": "E + B <=> EB",
            "ab": "EA + B <=> EAB",
            "ba": "EB + A <=> EAB",
            "turn": "EAB -> E + P",
        },
        ("E", "EA", "EB", "EAB"),
        {"a": ("A + B -> P", "a + ab + turn"), "b": ("A + B -> P", "b + ba + turn")},
        1,
    ),
    "reversible both ways": (
        {"a": "A <=> X", "b": "X <=> P", "c": "X -> Q"},
        ("X",),
        {"pathway 1": ("A <=> P", "a + b"), "pathway 2": ("A -> Q", "a + c"),
         "pathway 3": ("P -> Q", "c - b")},
        0,
    ),
    "no step of its own": (
        {"a": "A -> X", "b": "B -> X", "p": "X -> P", "q": "X -> Q"},
        ("X",),
        {"pathway 1": ("A -> P", "a + p"), "pathway 2": ("A -> Q", "a + q"),
         "pathway 3": ("B -> P", "b + p"), "pathway 4": ("B -> Q", "b + q")},
        0,
    ),
    # the chain without its beginning and end, which cancel each other
    "chain": (
        {"begin": "Br2 <=> 2 Br", "one": "Br + H2 -> HBr + H", "two": "H + Br2 -> HBr + Br",
         "back": "H + HBr -> H2 + Br"},
        ("Br", "H"),
        {"one": ("Br2 + H2 -> 2 HBr", "one + two")},
        1,
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", KNOWN)
def test_known_pathways(case):
    steps, inner, expected, circles = KNOWN[case]
    _, routes, _ = found(steps, inner)
    assert summary(routes) == expected
    assert len(routes.cycles) == circles
    assert routes.complete


def brute_force(mechanism, inner):
    """Smallest sets of steps by trying every set: exact null spaces of one dimension."""
    steps = mechanism.steps
    rows = [[net(s).get(x, 0) for s in steps] for x in sorted(inner)]
    out = set()
    for size in range(1, len(steps) + 1):
        for chosen in combinations(range(len(steps)), size):
            if any({k for k, _ in m} <= set(chosen) for m in out):
                continue
            vector = null_vector([[Fraction(r[c]) for c in chosen] for r in rows], size)
            if vector is None or not all(vector):
                continue
            for sign in (1, -1):
                if all(steps[c].reversible or sign * v > 0
                       for c, v in zip(chosen, vector, strict=True)):  # fmt: skip
                    out.add(tuple((c, sign * v) for c, v in zip(chosen, vector, strict=True)))
    return out


def null_vector(rows, width):
    """The whole-number solution of rows x = 0 if it is unique but for its length, else None."""
    rows, pivots, at = [list(r) for r in rows], [], 0
    for c in range(width):
        p = next((r for r in range(at, len(rows)) if rows[r][c]), None)
        if p is None:
            continue
        rows[at], rows[p] = rows[p], rows[at]
        rows[at] = [x / rows[at][c] for x in rows[at]]
        for r in range(len(rows)):
            if r != at:
                f = rows[r][c]
                rows[r] = [x - f * y for x, y in zip(rows[r], rows[at], strict=True)]
        pivots.append(c)
        at += 1
    free = [c for c in range(width) if c not in pivots]
    if len(free) != 1:
        return None
    x = [Fraction(0)] * width
    x[free[0]] = Fraction(1)
    for r, p in enumerate(pivots):
        x[p] = -rows[r][free[0]]
    scale = np.lcm.reduce([v.denominator for v in x])
    whole = [int(v * scale) for v in x]
    g = gcd(*whole)
    return [w // g for w in whole]


@pytest.mark.parametrize("seed", range(30))
def test_brute_force_finds_the_same(seed):
    rng = np.random.default_rng(seed)
    inner = [f"X{i}" for i in range(4)]
    outer = ["A", "B", "P", "Q"]
    steps, seen = {}, set()
    while len(steps) < 8:
        a, b = (int(i) for i in rng.integers(0, 8, 2))
        left, right = (inner + outer)[a], (inner + outer)[b]
        n = int(rng.integers(1, 3))
        if a == b or (left, right) in seen or (right, left) in seen:
            continue
        seen.add((left, right))
        arrow = "<=>" if rng.random() < 0.4 else "->"
        steps[f"s{len(steps)}"] = f"{n if n > 1 else ''} {left} {arrow} {right}".strip()
    mechanism, routes, held = found(steps, inner)
    index = {s.name: i for i, s in enumerate(mechanism.steps)}

    def key(times):
        mode = tuple(sorted((index[name], n) for name, n in times.items()))
        turned = tuple((i, -n) for i, n in mode)
        both = all(mechanism.steps[i].reversible for i, _ in mode)
        return max(mode, turned) if both else mode

    got = {key(r.steps) for r in routes.routes} | {key(c) for c in routes.cycles}
    expected = {
        key({mechanism.steps[i].name: n for i, n in m}) for m in brute_force(mechanism, held)
    }
    assert got == expected
    assert routes.complete


@pytest.mark.parametrize("seed", range(5))
def test_every_pathway_balances(seed):
    rng = np.random.default_rng(100 + seed)
    steps = {}
    names = [f"X{i}*" for i in range(6)]
    while len(steps) < 12:
        a, b = (names[int(i)] for i in rng.choice(6, 2, replace=False))
        text = f"{a} + {rng.choice(['A', 'B'])} <=> {b} + {rng.choice(['P', 'Q'])}"
        if text not in steps.values():
            steps[f"s{len(steps)}"] = text
    mechanism, routes, inner = found(steps)
    assert routes.routes
    by_name = {s.name: s for s in mechanism.steps}
    for r in routes.routes:
        total = {}
        for name, n in r.steps.items():
            for s, c in net(by_name[name]).items():
                total[s] = total.get(s, 0) + n * c
        assert not any(total.get(s, 0) for s in inner)
        assert {s.name: c for s, c in total.items() if c} == dict(r.overall)
        assert gcd(*r.steps.values()) == 1


def test_too_many_pathways_are_not_searched_for_ever():
    names = [f"X{i}*" for i in range(11)]
    steps = {f"s{i}_{j}": f"{a} + A{i} <=> {b} + B{j}"
             for i, a in enumerate(names) for j, b in enumerate(names) if i < j}  # fmt: skip
    _, routes, _ = found(steps)
    assert not routes.complete
    assert routes.routes == ()
