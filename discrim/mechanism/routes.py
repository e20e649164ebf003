"""The pathways of a mechanism: which sets of steps can run on their own at steady state.

A pathway is a smallest set of steps that leaves every intermediate unchanged, steps in one
direction running forward only, and that changes something outside: an elementary flux mode
(Schuster and Hilgetag, Journal of Biological Systems 2 (1994) 165-182; in chemistry the direct
mechanisms of Milner, Journal of the Electrochemical Society 111 (1964) 228-232, and of Happel and
Sellers, Advances in Catalysis 32 (1983) 273-323; pages from memory). They are the edges of a cone,
found in whole numbers by the double description method (Motzkin, Raiffa, Thompson and Thrall,
Contributions to the Theory of Games II (1953) 51-73, from memory): one balance after another is
imposed, and each pair of neighbouring edges on either side of it gives one that lies on it.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from math import gcd

from discrim.mechanism.check import net, species_of
from discrim.mechanism.model import Mechanism, Species

MOST_LISTED = 100  # pathways; more are of no use to a reader
MOST_EDGES = 3_000  # edges of the cone at any moment
MOST_TESTS = 3_000_000  # comparisons of two sets of steps, about a second


@dataclass(frozen=True, slots=True)
class Route:
    """One pathway.

    Attributes
    ----------
    name : the step that belongs to it alone, where there is one; else "pathway 1", ...
    steps : how often each step runs, negative for backwards; smallest whole numbers
    overall : net change of each species outside, reactants negative, zeros left out
    text : the overall equation, such as ``A + B -> P``
    """

    name: str
    steps: Mapping[str, int]
    overall: Mapping[str, int]
    text: str

    def words(self) -> str:
        """The steps with their signs, such as ``ads_A + 2 ads_B - ads_P``: those ahead come first."""
        out = ""
        for name, n in sorted(self.steps.items(), key=lambda x: x[1] < 0):
            sign = (" - " if n < 0 else " + ") if out else ("-" if n < 0 else "")
            out += sign + (name if abs(n) == 1 else f"{abs(n)} {name}")
        return out


@dataclass(frozen=True, slots=True)
class Routes:
    """All pathways, and the sets of steps that run in a circle.

    ``cycles`` hold how often each step runs where nothing outside changes. ``complete`` is False
    where there are too many to find (``routes`` is then empty) or to list.
    """

    routes: tuple[Route, ...]
    cycles: tuple[Mapping[str, int], ...] = ()
    complete: bool = True


def routes_of(mechanism: Mechanism, intermediates: Iterable[Species]) -> Routes:
    """The pathways of ``mechanism``; all species but the ``intermediates`` are free to change."""
    balanced = set(intermediates)
    steps = mechanism.steps
    nets = [net(s) for s in steps]
    columns = [(i, 1) for i in range(len(steps))]
    columns += [(i, -1) for i, s in enumerate(steps) if s.reversible]
    every = species_of(mechanism)
    rows = [s for s in every if s in balanced]
    outside = [s for s in every if s not in balanced]
    edges = _edges(columns, [[d * nets[i].get(s, 0) for s in rows] for i, d in columns])
    if edges is None:
        return Routes((), complete=False)
    modes: list[dict[int, int]] = []
    for edge in edges:
        mode = {columns[c][0]: columns[c][1] * n for c, n in edge.items()}
        mode = dict(sorted(mode.items()))
        if all(steps[i].reversible for i in mode) and not _ahead(mechanism, mode):
            continue  # the same set the other way round is among them too
        modes.append(mode)
    modes.sort(key=lambda m: [(i not in m, -m.get(i, 0)) for i in range(len(steps))])
    found: list[tuple[dict[int, int], dict[str, int]]] = []
    cycles = []
    for mode in modes:
        change = {s: sum(n * nets[i].get(s, 0) for i, n in mode.items()) for s in outside}
        overall = {s.name: c for s, c in change.items() if c}
        if overall:
            found.append((mode, overall))
        else:
            cycles.append({steps[i].name: n for i, n in mode.items()})
    names = _names(mechanism, [m for m, _ in found])
    routes = [
        Route(name, {steps[i].name: n for i, n in mode.items()}, overall, _equation(
            overall, all(steps[i].reversible for i in mode)))
        for name, (mode, overall) in zip(names, found, strict=True)
    ]  # fmt: skip
    return Routes(tuple(routes[:MOST_LISTED]), tuple(cycles), len(routes) <= MOST_LISTED)


def _ahead(mechanism: Mechanism, mode: Mapping[int, int]) -> bool:
    """Whether a reversible pathway runs the way it is written: by its limiting or first step."""
    for i, n in mode.items():
        if mechanism.steps[i].name == mechanism.limiting:
            return n > 0
    return next(iter(mode.values())) > 0


def _names(mechanism: Mechanism, modes: Sequence[Mapping[int, int]]) -> list[str]:
    """A step of its own that is limiting, else in one direction, else not at equilibrium, else any."""
    uses: dict[int, int] = {}
    for mode in modes:
        for i in mode:
            uses[i] = uses.get(i, 0) + 1

    def rank(i: int) -> tuple[bool, bool, bool, int]:
        step = mechanism.steps[i]
        at_equilibrium = step.name in mechanism.equilibrated
        return step.name != mechanism.limiting, step.reversible, at_equilibrium, i

    out = []
    for k, mode in enumerate(modes):
        own = [i for i in mode if uses[i] == 1]
        out.append(mechanism.steps[min(own, key=rank)].name if own else f"pathway {k + 1}")
    return out


def _equation(overall: Mapping[str, int], reversible: bool) -> str:
    def side(sign: int) -> str:
        parts = [(s, n * sign) for s, n in overall.items() if n * sign > 0]
        return " + ".join(s if n == 1 else f"{n} {s}" for s, n in parts) or "nothing"

    return f"{side(-1)} {'<=>' if reversible else '->'} {side(1)}"


@dataclass(slots=True)
class _Edge:
    """A set of columns (as bits) with how often each runs, and what it still leaves unbalanced."""

    bits: int
    times: dict[int, int]
    left: list[int] = field(default_factory=list)


def _edges(
    columns: Sequence[tuple[int, int]], changes: Sequence[Sequence[int]]
) -> list[dict[int, int]] | None:
    """Edges of {x >= 0 : sum_c x_c changes[c] = 0}; None where there are too many.

    ``columns`` are (step, direction); no edge holds both directions of one step.
    """
    partner = {c: columns.index((i, -d)) for c, (i, d) in enumerate(columns) if (i, -d) in columns}
    edges = [_Edge(1 << c, {c: 1}, list(row)) for c, row in enumerate(changes)]
    open_ = set(range(len(changes[0]) if changes else 0))
    tests = 0
    while open_:
        counts = {}
        for r in open_:
            up = sum(1 for e in edges if e.left[r] > 0)
            counts[r] = up * sum(1 for e in edges if e.left[r] < 0)
        row = min(open_, key=lambda r: (counts[r], r))
        open_.remove(row)
        on = [e for e in edges if not e.left[row]]
        above = [e for e in edges if e.left[row] > 0]
        below = [e for e in edges if e.left[row] < 0]
        masks = [e.bits for e in edges]
        new: list[_Edge] = []
        for a in above:
            for b in below:
                both = a.bits | b.bits
                if any(b.bits >> partner[c] & 1 for c in a.times if c in partner):
                    continue
                tests += len(masks)
                if tests > MOST_TESTS or len(on) + len(new) > MOST_EDGES:
                    return None
                # neighbours: no third edge runs within the steps of the two
                if sum(1 for m in masks if m & both == m) == 2:
                    new.append(_joined(a, b, row))
        edges = on + new
    return [e.times for e in edges]


def _joined(a: _Edge, b: _Edge, row: int) -> _Edge:
    p, q = -b.left[row], a.left[row]
    times = {c: p * n for c, n in a.times.items()}
    for c, n in b.times.items():
        times[c] = times.get(c, 0) + q * n
    left = [p * x + q * y for x, y in zip(a.left, b.left, strict=True)]
    g = gcd(*times.values())
    return _Edge(
        a.bits | b.bits,
        {c: n // g for c, n in times.items()},
        [x // g for x in left],
    )
