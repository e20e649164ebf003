"""All laws that one mechanism gives when pathways are taken out of it, and how they nest.

Each non-empty set of pathways is a mechanism of its own. A missing pathway goes with the steps of
its own that run in one direction (or are limiting); an adsorption that led to them stays and only
holds sites, like every other dead end, where what it binds to is still there. So a law without a
pathway is not worse for the lack of a site that is taken up. A pathway whose own steps all go both
ways goes with all of them. Sets that give the same law are one node. An edge says that the smaller law is
proven to be the larger one at a restriction of its constants; what follows from two edges in a row
is no edge of its own, so the graph is a Hasse diagram.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Any

import sympy

from discrim.errors import DiscrimError
from discrim.mechanism.claims import at_equilibrium, check_sources
from discrim.mechanism.model import Mechanism, Species, Step
from discrim.mechanism.routes import Route, routes_of
from discrim.ratelaw.derive import derive
from discrim.ratelaw.derive_network import classify
from discrim.ratelaw.model import Constant, RateLaw
from discrim.ratelaw.nesting import Nesting, nested
from discrim.ratelaw.zeroed import zeroed

ALL_SETS = 6  # pathways; beyond, only sets without one or two of them
MOST_SETS = 80

#: Two laws as the same expressions observed of each, with the constants of each.
Pair = tuple[Sequence[Any], Sequence[Any], Sequence[Constant], Sequence[Constant]]


@dataclass(frozen=True, slots=True, eq=False)
class Node:
    """One law of the lattice: ``sets`` are the sets of pathways that give it, smallest first."""

    sets: tuple[tuple[str, ...], ...]
    mechanism: Mechanism
    law: RateLaw

    @property
    def pathways(self) -> tuple[str, ...]:
        return self.sets[0]


@dataclass(frozen=True, slots=True, eq=False)
class Edge:
    """``smaller`` is a proven special case of ``larger`` (indices of nodes)."""

    smaller: int
    larger: int
    nesting: Nesting


@dataclass(frozen=True, slots=True, eq=False)
class Lattice:
    """The laws of a mechanism with some of its pathways.

    Attributes
    ----------
    routes : the pathways of the full mechanism
    nodes : distinct laws, those of few pathways first; empty when there are fewer than two pathways
    edges : proven nestings that do not follow from others
    full : index of the law of the full mechanism, -1 when there are no nodes
    left_out : sets of pathways that give no law, and why
    complete : every set of pathways was tried
    """

    routes: tuple[Route, ...]
    nodes: tuple[Node, ...] = ()
    edges: tuple[Edge, ...] = ()
    full: int = -1
    left_out: tuple[tuple[tuple[str, ...], str], ...] = ()
    complete: bool = True

    def chain(self, smaller: int, larger: int) -> tuple[Edge, ...] | None:
        """Edges that lead from one law up to another, () for the same, None where none do."""
        found: dict[int, tuple[Edge, ...]] = {smaller: ()}
        waiting = [smaller]
        while waiting:
            at = waiting.pop(0)
            for e in self.edges:
                if e.smaller == at and e.larger not in found:
                    found[e.larger] = (*found[at], e)
                    waiting.append(e.larger)
        return found.get(larger)


def lattice(
    mechanism: Mechanism,
    *,
    measured: frozenset[str] | None = None,
    law: RateLaw | None = None,
    paired: Callable[[RateLaw, RateLaw], Pair] | None = None,
) -> Lattice:
    """The lattice of ``mechanism``; see the records.

    ``measured`` and ``law`` (the derived law, if at hand) as for
    :func:`~discrim.ratelaw.derive.derive`. ``paired`` says what is observed of two laws that are to
    be compared; it may raise ``DiscrimError`` for a law of which nothing can be observed. None
    compares the production of every fluid species.
    """
    network = classify(mechanism, measured)
    found = routes_of(mechanism, network.intermediates)
    if len(found.routes) < 2:
        return Lattice(found.routes, complete=found.complete)
    full_law = derive(mechanism, measured=measured) if law is None else law
    sets, complete = _sets(len(found.routes))
    if paired is None:
        outside = [s.name for s in network.fluid]
        paired = _production(outside)
    inner = set(network.intermediates)
    bound = {s for f in network.families for s in f.weights}
    nodes: list[Node] = []
    left_out: list[tuple[tuple[str, ...], str]] = []
    full = -1
    grown = _Growing(nodes, paired)
    for kept in sets:
        names = tuple(found.routes[i].name for i in kept)
        whole = len(kept) == len(found.routes)
        try:
            part = mechanism if whole else _part(mechanism, found.routes, kept, inner, bound)
            made = full_law if whole else _derived(part, names, inner, measured)
            at = grown.add(names, part, made)
        except DiscrimError as trouble:
            left_out.append((names, trouble.says))
            continue
        full = at if whole else full
    return Lattice(
        found.routes,
        tuple(nodes),
        tuple(grown.edges()),
        full,
        tuple(left_out),
        complete and found.complete,
    )


def _sets(n: int) -> tuple[list[tuple[int, ...]], bool]:
    """Sets of pathways, small ones first, and whether they are all."""
    if n <= ALL_SETS:
        return [s for k in range(1, n + 1) for s in combinations(range(n), k)], True
    out: list[tuple[int, ...]] = [tuple(range(n))]
    for gone in (1, 2):
        more = list(combinations(range(n), n - gone))
        if len(out) + len(more) > MOST_SETS:
            break
        out = more + out
    return out, False


def _part(
    mechanism: Mechanism,
    routes: Sequence[Route],
    kept: Iterable[int],
    inner: set[Species],
    bound: set[Species],
) -> Mechanism:
    """The mechanism with the pathways ``kept`` only; what was assumed of the rest stays said.

    ``bound``: species that hold sites or catalyst.
    """
    used = {name for i in kept for name in routes[i].steps}
    some = {name for r in routes for name in r.steps}
    committed = {
        s.name for s in mechanism.steps if not s.reversible or s.name == mechanism.limiting
    } - used
    whole = [r for r in routes if not set(r.steps) <= used and not committed & set(r.steps)]
    barred = committed & some | {name for r in whole for name in r.steps}
    steps = [s for s in mechanism.steps if s.name in used]
    there = {s for step in steps for s in _species(step)}
    there |= {s for step in mechanism.steps for s in _species(step) if s not in inner}
    aside = [
        s
        for s in mechanism.steps
        if s.name not in used | barred and (s.name not in some or bound & _species(s))
    ]
    while True:
        more = [
            s
            for s in aside
            if {x for x, _ in s.left} <= there
            or (s.reversible and {x for x, _ in s.right} <= there)
        ]
        if not more:
            break
        steps += more
        there |= {x for s in more for x in _species(s)}
        aside = [s for s in aside if s not in more]
    chosen = {s.name for s in steps}
    steps = [s for s in mechanism.steps if s.name in chosen]
    present = {s for step in steps for s in _species(step)}
    fast = at_equilibrium(mechanism)
    catalyst = tuple(c for c in mechanism.catalyst if any(s.name == c for s in present))
    return replace(
        mechanism,
        steps=tuple(steps),
        catalyst=catalyst,
        equilibrated=tuple(s.name for s in fast if s.name in chosen),
        limiting=mechanism.limiting if mechanism.limiting in chosen else "",
        # said outright, so that no species changes its part because steps are gone
        steady=tuple(sorted(s.name for s in present & inner if not s.site)),
    )


def _species(step: Step) -> set[Species]:
    return {s for s, _ in (*step.left, *step.right)}


def _derived(
    part: Mechanism, names: Sequence[str], inner: set[Species], measured: frozenset[str] | None
) -> RateLaw:
    check_sources(part, {s for step in part.steps for s in _species(step) if s in inner})
    try:
        made = derive(part, measured=measured)
    except DiscrimError:
        if not part.overall_equilibrium:
            raise
        # one direction is left of it, or the equilibrium of another reaction
        made = derive(replace(part, overall_equilibrium=""), measured=measured)
    return replace(made, name=" + ".join(names))


def _production(outside: Sequence[str]) -> Callable[[RateLaw, RateLaw], Pair]:
    """What both laws make of each fluid species; the rate alone where that is in fixed ratios."""

    def paired(a: RateLaw, b: RateLaw) -> Pair:
        seen = outside
        if a.stoichiometry and a.stoichiometry == b.stoichiometry:
            seen = [next(iter(a.stoichiometry))]
        none = sympy.Integer(0)
        rows = [(a.production.get(s, none), b.production.get(s, none)) for s in seen]
        # what one makes another consumes often enough; said once is enough
        kept: dict[Any, None] = {}
        for x, y in rows:
            if (x != 0 or y != 0) and (-x, -y) not in kept:
                kept.setdefault((x, y))
        rows = list(kept)
        return [r[0] for r in rows], [r[1] for r in rows], a.constants, b.constants

    return paired


class _Growing:
    """Nodes as they are found, and the proofs between them."""

    def __init__(self, nodes: list[Node], paired: Callable[[RateLaw, RateLaw], Pair]) -> None:
        self.nodes = nodes
        self.paired = paired
        self.known: dict[tuple[int, int], Nesting | None] = {}

    def add(self, names: tuple[str, ...], mechanism: Mechanism, law: RateLaw) -> int:
        """The index of the node that holds this law, a new one or one that has the same law."""
        self.paired(law, law)  # a law of which nothing is observed is refused here
        for i, node in enumerate(self.nodes):
            if self._same(node.law, law):
                self.nodes[i] = replace(node, sets=(*node.sets, names))
                return i
        self.nodes.append(Node((names,), mechanism, law))
        return len(self.nodes) - 1

    def _same(self, a: RateLaw, b: RateLaw) -> bool:
        one, other, ca, cb = self.paired(a, b)
        if len(ca) != len(cb) or _amounts(one) != _amounts(other):
            return False
        up = nested(one, other, ca, cb)
        if up is None or up.infinite or up.zero:
            return False
        down = nested(other, one, cb, ca)
        return down is not None and not down.infinite

    def edges(self) -> list[Edge]:
        """From each law to the nearest larger ones that contain it."""
        n = len(self.nodes)
        out: list[Edge] = []
        for i in reversed(range(n)):
            reached: set[int] = set()
            for j in sorted((j for j in range(n) if j != i), key=lambda j: len(self._set(j))):
                if j in reached or not self._within(i, j):
                    continue
                nesting = self._nested(i, j)
                if nesting is None:
                    continue
                out.append(Edge(i, j, nesting))
                reached |= {j, *_above(out, j)}
        return sorted(out, key=lambda e: (e.smaller, e.larger))

    def _set(self, i: int) -> frozenset[str]:
        return frozenset(self.nodes[i].pathways)

    def _within(self, i: int, j: int) -> bool:
        """Whether some set of pathways of the one lies within some set of the other."""
        return any(set(a) < set(b) for a in self.nodes[i].sets for b in self.nodes[j].sets)

    def _nested(self, i: int, j: int) -> Nesting | None:
        one, other, ca, cb = self.paired(self.nodes[i].law, self.nodes[j].law)
        if len(ca) > len(cb):
            return None
        return zeroed(one, other, ca, cb) or nested(one, other, ca, cb)


def _above(edges: Sequence[Edge], start: int) -> set[int]:
    out: set[int] = set()
    waiting = [start]
    while waiting:
        at = waiting.pop()
        for e in edges:
            if e.smaller == at and e.larger not in out:
                out.add(e.larger)
                waiting.append(e.larger)
    return out


def _amounts(expressions: Sequence[Any]) -> set[str]:
    return {s.name for e in expressions if e != 0 for s in e.free_symbols if s.name[0] in "[{"}
