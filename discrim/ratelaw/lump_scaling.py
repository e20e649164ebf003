"""Identifiable constants of a law with roots or implicit values, by its scalings.

Where constants can be multiplied by powers of one factor without any change of what is measured,
no data can tell them apart. In logarithms these scalings are a linear space: in every sum all
terms must scale alike, and what is measured not at all. For each scaling one constant is set to
one and the others become the combinations that do not scale.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import combinations
from math import lcm
from typing import Any

import numpy as np
import sympy
from sympy import Rational

from discrim.mechanism.exact import Matrix, null_space, row_reduce
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.lump_names import combination, in_other_units
from discrim.ratelaw.lump_span import Vector
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw

Weight = dict[int, int | Fraction]  # powers of the constants and of implicit values, by index

_MOST_CHOICES = 4000  # sets of constants that are compared


def scaled(law: RateLaw, shown: tuple[Sequence[Any], Sequence[Vector]] | None = None) -> RateLaw:
    """``law`` in combinations of its constants that do not scale.

    Returned unchanged when there is no scaling, or when an exponent holds a constant. ``shown``, if
    known: factors of coefficients of the law, and the products of their powers that data show.
    """
    known = law.constants
    names = list(law.production)
    measured = [law.rate, *law.production.values()]
    walk = _Walk([c.symbol for c in known])
    try:
        if shown is None:
            for e in measured:
                walk.unscaled(walk.weight(e))
        else:
            weights = [walk.weight(factor) for factor in shown[0]]
            for vector in shown[1]:
                total: Weight = {}
                for i, e in vector.items():
                    total = _plus(total, weights[i], e)
                walk.unscaled(total)
    except _Unscalable:
        return law
    everything = walk.scalings()
    reduced, pivots = row_reduce([v[: walk.n] for v in everything]) if everything else ([], [])
    scalings = reduced[: len(pivots)]
    if not scalings:
        return law
    chosen = _choose(scalings, known)
    if chosen is None:
        return law
    gone, powers = chosen
    renamed, units = _renamed(walk, everything, gone, known)
    swap: dict[Any, Any] = {known[g].symbol: sympy.Integer(1) for g in gone}
    constants: list[Constant] = []
    taken = {c.name for c in known}
    for j, c in enumerate(known):
        if j in gone:
            continue
        if set(powers[j]) == {j}:
            constants.append(c)
            continue
        vector = powers[j]
        divided = _only_divided_by(measured, c.symbol)
        if divided:  # turned round, so that the law never divides by what may be zero
            vector = {i: -e for i, e in vector.items()}
        made = _made(vector, known, taken)
        taken.add(made.name)
        swap[c.symbol] = 1 / made.symbol if divided else made.symbol
        constants.append(made)
    swap |= renamed
    apart = list(law.pathways)
    rate = law.rate.xreplace(swap)
    production = {n: law.production[n].xreplace(swap) for n in names}
    used = rate.free_symbols.union(*(e.free_symbols for e in production.values()))
    kept = tuple(c for c in constants if c.symbol in used)
    lines = [*law.derivation, *units]
    for c in kept:
        if c not in known:
            lines.append((f"Combined: {c.name}", sympy.Eq(c.symbol, c.definition, evaluate=False)))
    lines.append(("Rate law in the constants that rates can tell apart", rate))
    before = {c.symbol: c.definition for c in known if c.definition is not None}
    return replace(
        law,
        rate=rate,
        production=production,
        constants=tuple(
            replace(c, definition=c.definition.xreplace(before))
            if before and c.definition is not None and c not in known
            else c
            for c in kept
        ),
        pathways=tuple(replace(p, rate=p.rate.xreplace(swap)) for p in apart)
        if all(_alike(walk, p.rate, everything) for p in apart)
        else (),
        derivation=tuple(lines),
    )


def _renamed(
    walk: _Walk, scalings: Matrix, gone: Sequence[int], known: Sequence[Constant]
) -> tuple[dict[Any, Any], list[tuple[str, Any]]]:
    """Implicit values that are counted in other units once constants are set to one."""
    d = len(gone)
    reduced, _ = row_reduce([[v[g] for g in gone] + list(v) for v in scalings], d)
    swap: dict[Any, Any] = {}
    lines: list[tuple[str, Any]] = []
    for z, k in walk.unknown.items():
        powers = {g: -reduced[r][d + k] for r, g in enumerate(gone) if reduced[r][d + k]}
        if not powers:
            continue
        x = in_other_units(z)
        swap[z] = x
        unit = (known[g].symbol ** Rational(e.numerator, e.denominator) for g, e in powers.items())
        counted = sympy.Eq(x, sympy.Mul(z, *unit), evaluate=False)
        lines.append((f"{z.name} counted in units of constants", counted))
    return swap, lines


def _only_divided_by(expressions: Sequence[Any], symbol: sympy.Symbol) -> bool:
    """Whether a constant stands in them only as a factor below."""
    below = False
    for e in expressions:
        divisors = {p for p in e.atoms(sympy.Pow) if p.base == symbol and p.exp.is_negative}
        below |= bool(divisors)
        if symbol in e.xreplace(dict.fromkeys(divisors, sympy.Integer(1))).free_symbols:
            return False
    return below


class _Unscalable(Exception):
    """A piece for which no scaling is known."""


class _Walk:
    """How each piece of a law scales, linear in the logarithms of the factors of the constants."""

    def __init__(self, constants: Sequence[sympy.Symbol]) -> None:
        self.index = {s: i for i, s in enumerate(constants)}
        self.n = len(constants)
        self.width = self.n
        self.rows: dict[frozenset[tuple[int, int | Fraction]], Weight] = {}
        self.systems: dict[Any, tuple[int, ...]] = {}
        self.unknown: dict[sympy.Symbol, int] = {}

    def weight(self, e: Any) -> Weight:
        if e.is_Symbol:
            i = self.unknown.get(e, self.index.get(e))
            return {} if i is None else {i: 1}
        if e.is_number:
            return {}
        if e.is_Mul:
            out: Weight = {}
            for factor in e.args:
                out = _plus(out, self.weight(factor))
            return out
        if e.is_Add:
            first, *rest = (self.weight(term) for term in e.args)
            for other in rest:
                self.unscaled(_plus(first, other, -1))
            return first
        if e.is_Pow and e.exp.is_Rational:
            power = int(e.exp) if e.exp.is_Integer else Fraction(int(e.exp.p), int(e.exp.q))
            return _plus({}, self.weight(e.base), power)
        if isinstance(e, ImplicitValue):
            return {self.system(e)[e.index]: 1}
        if e.free_symbols & self.index.keys():
            raise _Unscalable
        return {}

    def system(self, e: ImplicitValue) -> tuple[int, ...]:
        if e.system not in self.systems:
            ids = tuple(range(self.width, self.width + len(e.unknowns)))
            self.width += len(ids)
            self.systems[e.system] = ids
            self.unknown |= dict(zip(e.unknowns, ids, strict=True))
            for equation in e.equations:
                self.weight(sympy.expand(equation))
        return self.systems[e.system]

    def unscaled(self, weight: Weight) -> None:
        """What has to stay as it is; most of the sums of a law say the same."""
        if weight:
            self.rows[frozenset(weight.items())] = weight

    def scalings(self) -> Matrix:
        """Basis of all scalings, as powers of constants and implicit values."""
        whole = np.zeros((len(self.rows), self.width), dtype=np.int64)
        for r, weight in enumerate(self.rows.values()):
            scale = lcm(*(Fraction(e).denominator for e in weight.values()))
            for i, e in weight.items():
                whole[r, i] = int(e * scale)
        chosen = _independent(whole)
        while True:
            rows = [[Fraction(int(x)) for x in whole[r]] for r in chosen]
            basis = null_space(rows, self.width)
            missed = next((r for r in range(len(whole)) if _moves(whole[r], basis)), None)
            if missed is None:
                return basis
            chosen.append(missed)


def _independent(matrix: np.ndarray) -> list[int]:
    """Rows that are independent modulo a prime; with luck, as always but once in 1e9, all of them."""
    prime = 2**31 - 1
    left = matrix % prime
    at = np.arange(len(matrix))
    out: list[int] = []
    for c in range(matrix.shape[1]):
        found = np.flatnonzero(left[:, c])
        if not len(found):
            continue
        p = int(found[0])
        out.append(int(at[p]))
        row = left[p] * pow(int(left[p, c]), prime - 2, prime) % prime
        left, at = np.delete(left, p, axis=0), np.delete(at, p)
        left = (left - left[:, c : c + 1] * row) % prime
    return out


def _moves(weight: np.ndarray, scalings: Matrix) -> bool:
    """Whether a scaling changes what must not change."""
    held = [(i, int(weight[i])) for i in np.flatnonzero(weight)]
    return any(sum((v[i] * e for i, e in held), Fraction(0)) for v in scalings)


def _plus(a: Weight, b: Weight, times: int | Fraction = 1) -> Weight:
    out = dict(a)
    for i, e in b.items():
        x = out.get(i, 0) + times * e
        if x:
            out[i] = x
        else:
            out.pop(i, None)
    return out


def _alike(walk: _Walk, e: Any, scalings: Matrix) -> bool:
    """Whether an expression is unchanged by scalings."""
    before = len(walk.rows)
    try:
        walk.unscaled(walk.weight(e))
    except _Unscalable:
        return False
    new = list(walk.rows.values())[before:]
    return not any(
        sum((v[i] * f for i, f in weight.items()), Fraction(0)) for v in scalings for weight in new
    )


def _choose(
    scalings: Matrix, known: Sequence[Constant]
) -> tuple[tuple[int, ...], dict[int, Vector]] | None:
    """Which constants are set to one, and the powers that the others are then combined with.

    The fewest changed constants, then products rather than quotients, then whole powers.
    """
    d = len(scalings)
    moving = [j for j in range(len(known)) if any(v[j] for v in scalings)]
    best = None
    for count, gone in enumerate(combinations(moving, d)):
        if count > _MOST_CHOICES:
            break
        # columns of gone first: [G | rest]; G must be invertible
        rows = [[v[g] for g in gone] + list(v) for v in scalings]
        reduced, pivots = row_reduce(rows, d)
        if len(pivots) < d:
            continue
        powers: dict[int, Vector] = {}
        changed = negative = broken = 0
        for j in range(len(known)):
            if j in gone:
                continue
            vector: Vector = {j: Fraction(1)}
            for r, g in enumerate(gone):
                e = -reduced[r][d + j]
                if e:
                    vector[g] = e
                    negative += e < 0
                    broken += e.denominator > 1
            changed += len(vector) > 1
            powers[j] = vector
        score = (broken, changed, negative, gone)
        if best is None or score < best[0]:
            best = (score, gone, powers)
    return None if best is None else (best[1], best[2])


def _of_one_step(vector: Vector, known: Sequence[Constant]) -> str:
    """K_X for k_X/k_rev_X, K_rev_X for its inverse, else nothing."""
    names = {known[i].name: e for i, e in vector.items()}
    for name, e in names.items():
        step = name.removeprefix("k_")
        if len(names) == 2 and abs(e) == 1 and names.get(f"k_rev_{step}") == -e:
            return f"K_{step}" if e == 1 else f"K_rev_{step}"
    return ""


def _made(vector: Vector, known: Sequence[Constant], taken: set[str]) -> Constant:
    step = _of_one_step(vector, known)
    if step:
        read = "" if step.startswith("K_rev_") else "of the step as written"
        words = f"equilibrium constant {read or 'of the step read backwards'}"
        powers = [known[i].symbol ** int(e) for i, e in vector.items()]
        symbol = sympy.Symbol(step, nonnegative=True)
        return Constant(step, symbol, ConstantKind.EQUILIBRIUM, words, sympy.Mul(*powers))
    above = [known[i].name for i, e in vector.items() if e > 0]
    below = [known[i].name for i, e in vector.items() if e < 0]
    fallback = "_".join(above) + ("_over_" + "_".join(below) if below else "")
    found = combination(
        vector, known, fallback, "combination of constants that only occur together"
    )
    name, n = found.name, 2
    while name in taken:
        name, n = f"{found.name}_{n}", n + 1
    definition = sympy.Mul(
        *(known[i].symbol ** Rational(e.numerator, e.denominator) for i, e in vector.items())
    )
    return Constant(
        name, sympy.Symbol(name, nonnegative=True), found.kind, found.meaning, definition
    )
