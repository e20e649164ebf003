"""Steady states of a network in which every step turns one intermediate into one other.

The amounts are in the ratio of sums over spanning trees: for each intermediate all trees whose
steps lead to it, each tree the product of its pseudo-first-order constants (King and Altman 1956,
Journal of Physical Chemistry 60, 1375-1378, pages from memory; in graphs, the matrix-tree theorem
of Kirchhoff and Tutte). Trees come one by one from the graph, without the cancelling terms of a
determinant. Parts of the network that hang together in one node only are solved apart.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

Sum = dict[int, int]  # packed exponents of each monomial -> its whole coefficient
Edges = Mapping[tuple[int, int], Sum]  # (from, to) -> rate constant of the way

ROOT = 0


class TooManyTrees(Exception):
    """The sums would have more terms than is asked for."""


_BITS = 16  # of one exponent: a product of monomials is then one addition of whole numbers
_HALF = 1 << (_BITS - 1)


def packed(exponents: Sequence[int]) -> int:
    """Whole exponents, negative ones too, as one number."""
    out = 0
    for e in reversed(exponents):
        out = (out << _BITS) + e
    return out


def unpacked(key: int, width: int) -> tuple[int, ...]:
    """The exponents that `packed` made one number of."""
    out = []
    for _ in range(width):
        e = ((key + _HALF) & (2 * _HALF - 1)) - _HALF
        out.append(e)
        key = (key - e) >> _BITS
    return tuple(out)


def steady_state(n: int, edges: Edges, most: int) -> list[list[tuple[Sum, Sum]]] | None:
    """Amounts of nodes 1..n-1 over that of node 0, each a product of quotients of sums.

    Parameters
    ----------
    n : number of nodes; 0 is the reference (free catalyst, vacant sites, what does not change)
    edges : rate constants of the ways between nodes
    most : terms of all trees of one part together, beyond which `TooManyTrees` is raised

    Returns
    -------
    For each node the factors (numerator, denominator) on the path to it; None when some node cannot
    be left, or is not reached from the reference.
    """
    neighbours: list[set[int]] = [set() for _ in range(n)]
    for i, j in edges:
        neighbours[i].add(j)
        neighbours[j].add(i)
    factors: list[list[tuple[Sum, Sum]] | None] = [None] * n
    factors[ROOT] = []
    for entry, nodes in _blocks(neighbours):
        known = factors[entry]
        if known is None:
            return None
        local = [entry, *nodes]
        inside = {(i, j): s for (i, j), s in edges.items() if i in set(local) and j in set(local)}
        sums = _tree_sums(local, inside, most)
        if not sums[entry]:
            return None
        for x in nodes:
            factors[x] = [*known, (sums[x], sums[entry])] if sums[x] else []
            if not sums[x]:  # never made: its amount is zero
                factors[x] = [({}, {0: 1})]
    if any(f is None for f in factors):
        return None
    return [f for f in factors[1:] if f is not None]


def _blocks(neighbours: Sequence[set[int]]) -> list[tuple[int, list[int]]]:
    """Biconnected parts, each with the node by which it hangs, from the reference outwards."""
    depth = {ROOT: 0}
    low = {ROOT: 0}
    stack: list[int] = []
    out: list[tuple[int, list[int]]] = []

    def visit(x: int, parent: int) -> None:
        stack.append(x)
        for y in sorted(neighbours[x]):
            if y == parent:
                continue
            if y in depth:
                low[x] = min(low[x], depth[y])
                continue
            depth[y] = low[y] = depth[x] + 1
            visit(y, x)
            low[x] = min(low[x], low[y])
            if low[y] >= depth[x]:
                part = []
                while True:
                    part.append(stack.pop())
                    if part[-1] == y:
                        break
                out.append((x, part[::-1]))

    visit(ROOT, -1)
    return sorted(out, key=lambda block: depth[block[0]])


def _tree_sums(nodes: Sequence[int], edges: Edges, most: int) -> dict[int, Sum]:
    """For each node the sum over all trees that lead to it."""
    one: Sum = {0: 1}
    sums: dict[int, Sum] = {x: {} for x in nodes}
    pairs = sorted({(min(i, j), max(i, j)) for i, j in edges})
    terms = 0
    for tree in _trees(list(nodes), pairs):
        around: dict[int, list[int]] = {x: [] for x in nodes}
        for i, j in tree:
            around[i].append(j)
            around[j].append(i)
        for root in nodes:
            product = one
            waiting = [(root, -1)]
            while waiting and product:
                x, parent = waiting.pop()
                for y in around[x]:
                    if y != parent:
                        way = edges.get((y, x))
                        if way is None:
                            product = {}
                            break
                        product = _times(product, way)
                        if len(product) > most:  # steps side by side: one tree alone has too many
                            raise TooManyTrees
                        waiting.append((y, x))
            into = sums[root]
            for m, c in product.items():
                into[m] = into.get(m, 0) + c
            terms += len(product)
        if terms > most:
            raise TooManyTrees
    return sums


def _times(a: Sum, b: Sum) -> Sum:
    if len(b) == 1:
        ((m, c),) = b.items()
        return {n + m: d * c for n, d in a.items()}
    out: Sum = {}
    for n, d in a.items():
        for m, c in b.items():
            out[n + m] = out.get(n + m, 0) + d * c
    return out


def _trees(
    nodes: list[int], pairs: Sequence[tuple[int, int]]
) -> Iterator[tuple[tuple[int, int], ...]]:
    """All spanning trees of an undirected graph: each edge in turn taken or left out."""
    need = len(nodes) - 1
    if need == 0:
        yield ()
        return
    chosen: list[tuple[int, int]] = []

    def connected(label: Mapping[int, int], at: int) -> bool:
        """Whether what is joined so far and the edges from ``at`` on reach every node."""
        to = {x: label[x] for x in nodes}

        def find(x: int) -> int:
            while to[x] != x:
                x = to[x]
            return x

        left = len(set(label.values()))
        for i, j in pairs[at:]:
            a, b = find(label[i]), find(label[j])
            if a != b:
                to[a] = b
                left -= 1
                if left == 1:
                    return True
        return left == 1

    def grow(label: dict[int, int], at: int) -> Iterator[tuple[tuple[int, int], ...]]:
        if len(chosen) == need:
            yield tuple(chosen)
            return
        while at < len(pairs):
            i, j = pairs[at]
            at += 1
            a, b = label[i], label[j]
            if a == b:
                continue
            chosen.append((i, j))
            yield from grow({x: b if c == a else c for x, c in label.items()}, at)
            chosen.pop()
            if not connected(label, at):
                return

    start = {x: x for x in nodes}
    if connected(start, 0):
        yield from grow(start, 0)
