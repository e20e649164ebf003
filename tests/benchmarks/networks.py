"""Catalytic networks for the speed of derivation: 12 steps, eight intermediates beside the free form.

Invented. Edges are (from, to, what is consumed, what is made, goes back too).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from discrim.mechanism.model import Mechanism
from discrim.mechanism.parse import parse_mechanism

Edge = tuple[int, int, str, str, bool]

RING: Sequence[Edge] = (
    (0, 1, "A", "", True),
    (1, 2, "B", "", True),
    (2, 3, "", "", False),
    (3, 4, "", "P", False),
    (4, 5, "C", "", True),
    (5, 6, "", "", True),
    (6, 7, "", "Q", False),
    (7, 8, "B", "", True),
    (8, 0, "", "R", False),
)

NETWORKS: Mapping[str, Sequence[Edge]] = {
    "a ring with three short cuts": (
        *RING,
        (2, 5, "C", "", False),
        (4, 0, "", "Q", False),
        (1, 7, "", "", True),
    ),
    "two rings through the free form, joined": (
        (0, 1, "A", "", True),
        (1, 2, "B", "", True),
        (2, 3, "", "", False),
        (3, 4, "", "", True),
        (4, 0, "", "P", False),
        (0, 5, "C", "", True),
        (5, 6, "B", "", True),
        (6, 7, "", "", False),
        (7, 8, "", "", True),
        (8, 0, "", "Q", False),
        (1, 5, "C", "A", True),
        (3, 7, "", "", False),
    ),
    "a ladder": (
        (0, 1, "A", "", True),
        (1, 2, "", "", True),
        (2, 3, "", "", False),
        (3, 8, "", "P", False),
        (8, 0, "", "", True),
        (0, 4, "B", "", True),
        (4, 5, "A", "", True),
        (5, 6, "", "", False),
        (6, 7, "", "Q", False),
        (7, 0, "", "", False),
        (1, 5, "B", "", True),
        (2, 6, "B", "", True),
    ),
    "a ring with three short cuts, every step goes back too": tuple(
        (a, b, taken, made, True)
        for a, b, taken, made, _ in (
            *RING,
            (2, 5, "C", "P", True),
            (4, 0, "", "Q", True),
            (1, 7, "C", "", True),
        )
    ),
}


def network(name: str) -> Mechanism:
    """The mechanism of that name; its forms are F0 (free) to F8."""
    steps = {}
    for k, (a, b, taken, made, back) in enumerate(NETWORKS[name], 1):
        left = f"F{a}" + (f" + {taken}" if taken else "")
        right = f"F{b}" + (f" + {made}" if made else "")
        steps[f"s{k}"] = f"{left} {'<=>' if back else '->'} {right}"
    return parse_mechanism(name=name, steps=steps, catalyst=["F0"])
