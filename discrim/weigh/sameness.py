"""Which candidates are the same law, and which contain which, proven on what the columns observe.

Derived quantities and constants that the study fixes are put in first, so that a general acid term
and a specific acid times base term come out as the one law that they are.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import sympy

from discrim.ratelaw.model import Constant, ConstantKind
from discrim.ratelaw.nesting import Neither, Nesting, NotProven, Substitution, examine
from discrim.study.model import Study
from discrim.weigh.bench import fixed_put_in, is_condition
from discrim.weigh.bind import Bound
from discrim.weigh.laws import CandidateLaw


@dataclass(frozen=True, slots=True, eq=False)
class Relations:
    """How each pair of candidates is related, by index.

    ``same[(i, j)]``, ``neither[(i, j)]`` and ``undecided[(i, j)]`` with i < j, the latter two with
    the reason; ``contains[(larger, smaller)]`` for laws that are not the same.
    """

    same: dict[tuple[int, int], Substitution] = field(default_factory=dict)
    contains: dict[tuple[int, int], Nesting] = field(default_factory=dict)
    neither: dict[tuple[int, int], str] = field(default_factory=dict)
    undecided: dict[tuple[int, int], str] = field(default_factory=dict)

    def add(self, i: int, j: int, found: Pair) -> None:
        if found.same is not None:
            self.same[(i, j)] = found.same
        elif found.up is not None:
            self.contains[(j, i)] = found.up
        elif found.down is not None:
            self.contains[(i, j)] = found.down
        elif found.neither:
            self.neither[(i, j)] = found.reason
        else:
            self.undecided[(i, j)] = found.reason

    def embeddings(self) -> Iterator[tuple[int, int, Nesting]]:
        """(larger, smaller, how) for special cases; for the same law in both directions."""
        for (i, j), found in self.same.items():
            for larger, smaller, values in ((i, j, found.a_from_b), (j, i, found.b_from_a)):
                yield larger, smaller, Nesting(values, (), {}, (), 0, edge=False)
        for (larger, smaller), nesting in self.contains.items():
            yield larger, smaller, nesting

    def records(self, names: Sequence[str]) -> list[dict[str, str]]:
        """One plain record for each pair: in a special case, ``a`` is that case of ``b``."""
        out = []
        for i in range(len(names)):
            for j in range(i + 1, len(names)):
                a, b = names[i], names[j]
                if (i, j) in self.same:
                    kind, words = "same", self.same[(i, j)].words()
                elif (j, i) in self.contains:
                    kind, words = "special case", self.contains[(j, i)].words()
                elif (i, j) in self.contains:
                    a, b = b, a
                    kind, words = "special case", self.contains[(i, j)].words()
                elif (i, j) in self.neither:
                    kind, words = "neither", self.neither[(i, j)]
                else:
                    kind, words = "undecided", self.undecided.get((i, j), "")
                out.append({"a": a, "b": b, "relation": kind, "words": words})
        return out


@dataclass(frozen=True, slots=True, eq=False)
class Pair:
    """Two laws a and b: the same, a within b (``up``), b within a (``down``), or why not."""

    same: Substitution | None = None
    up: Nesting | None = None
    down: Nesting | None = None
    neither: bool = False
    reason: str = ""


def relations(bounds: Sequence[Bound], study: Study) -> Relations:
    """Every pair is tried both ways; what is not proven is not claimed."""
    out = Relations()
    for i in range(len(bounds)):
        for j in range(i + 1, len(bounds)):
            out.add(i, j, related(*expanded(bounds[i], bounds[j], study)))
    return out


def relations_of_laws(laws: Sequence[CandidateLaw], study: Study) -> Relations:
    """The same before anything is bound to runs."""
    out = Relations()
    labels = _labels(study)
    sides = [_of_law(c, study, labels) for c in laws]
    for i, (ea, ca) in enumerate(sides):
        for j, (eb, cb) in enumerate(sides):
            if i < j:
                out.add(i, j, related(ea, eb, ca, cb))
    return out


def related(
    a: Sequence[Any], b: Sequence[Any], constants_a: Sequence[Constant],
    constants_b: Sequence[Constant],
) -> Pair:  # fmt: skip
    """How two laws are related; arguments as for `examine`.

    A law with more constants than another is looked for within it only where some of them might
    be redundant, or to prove that neither contains the other.
    """
    na, nb = len(constants_a), len(constants_b)
    up = examine(a, b, constants_a, constants_b) if na <= nb else None
    down = examine(b, a, constants_b, constants_a) if nb <= na else None
    if up is None and _worth_reversing(down):
        up = examine(a, b, constants_a, constants_b)
    elif down is None and _worth_reversing(up):
        down = examine(b, a, constants_b, constants_a)
    if isinstance(up, Nesting) and isinstance(down, Nesting):
        if not up.infinite and not down.infinite:
            return Pair(same=Substitution(a_from_b=down.values, b_from_a=up.values))
        return Pair(up=up) if down.infinite else Pair(down=down)
    if isinstance(up, Nesting):
        return Pair(up=up)
    if isinstance(down, Nesting):
        return Pair(down=down)
    if isinstance(up, Neither) and isinstance(down, Neither):
        return Pair(neither=True, reason=up.reason if na <= nb else down.reason)
    said = next(f.reason for f in (up, down) if isinstance(f, NotProven))
    return Pair(reason=said)


def _worth_reversing(found: object) -> bool:
    return isinstance(found, Neither) or (
        isinstance(found, Nesting) and (bool(found.redundant) or not found.edge)
    )


def _labels(study: Study) -> list[dict[str, str]]:
    """Each combination of labels of runs for which a constant has values of its own."""
    columns = sorted({c.per for c in study.constants.values() if c.per is not None})
    found = [study.runs.find(c).labels for c in columns]
    rows = dict.fromkeys(zip(*found, strict=True)) if columns else {(): None}
    return [dict(zip(columns, row, strict=True)) for row in rows]


def _of_law(
    c: CandidateLaw, study: Study, labels: Sequence[dict[str, str]]
) -> tuple[list[Any], list[Constant]]:
    """What the columns observe, in the constants that are left to estimate."""
    exprs = [fixed_put_in(e, study) for e in c.bound]
    held = set().union(*(e.free_symbols for e in exprs))
    have = {k.symbol for k in c.law.constants}
    new = sorted((s for s in held - have if not is_condition(s)), key=lambda s: str(s.name))
    constants = [k for k in c.law.constants if k.symbol in held]
    constants += [
        Constant(s.name, s, ConstantKind.OTHER if s.is_nonnegative else ConstantKind.ORDER)
        for s in new
    ]
    out: list[Any] = []
    free: dict[str, Constant] = {}
    for row in labels:
        swap = {}
        for k in constants:
            setting = study.constants.get(k.name)
            if setting is not None and setting.value is not None:
                continue
            name = k.name
            if setting is not None and setting.per is not None:
                name = f"{k.name}[{row[setting.per]}]"
            swap[k.symbol] = _symbol(k, name)
            free[name] = replace(k, name=name, symbol=swap[k.symbol])
        out += [e.xreplace(swap) for e in exprs]
    return out, list(free.values())


def expanded(
    a: Bound, b: Bound, study: Study
) -> tuple[list[Any], list[Any], list[Constant], list[Constant]]:
    """Both laws once for every combination of response and group labels, in their free constants."""
    n = len(a.column_of)
    patterns: dict[tuple[Any, ...], int] = {}
    response = a.predictor.response
    for i in range(n):
        key = (int(response[i]), tuple(a.column_of[i]), tuple(b.column_of[i]))
        patterns.setdefault(key, i)
    rows = list(patterns.values())
    return (
        [_at_row(a, i, study) for i in rows],
        [_at_row(b, i, study) for i in rows],
        _free(a),
        _free(b),
    )


def _free(bound: Bound) -> list[Constant]:
    out = []
    for j, name in enumerate(bound.names):
        base = bound.base_constant(j)
        out.append(replace(base, name=name, symbol=_symbol(base, name)))
    return out


def _symbol(base: Constant, name: str) -> Any:
    if name == base.name:
        return base.symbol
    return (
        sympy.Symbol(name, nonnegative=True) if base.lower >= 0 else sympy.Symbol(name, real=True)
    )


def _at_row(bound: Bound, i: int, study: Study) -> Any:
    e = fixed_put_in(bound.expressions[int(bound.predictor.response[i])], study)
    swap = {}
    for q, c in enumerate(bound.constants):
        name = bound.names[int(bound.column_of[i, q])]
        if name != c.name:
            swap[c.symbol] = _symbol(c, name)
    return e.xreplace(swap) if swap else e
