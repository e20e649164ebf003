"""Which combinations of constants a law is best written in, and what they are called."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import sympy

from discrim.ratelaw.lump_form import Amounts, Form, Sum, Vector, order_of
from discrim.ratelaw.model import Constant, ConstantKind


@dataclass(frozen=True, slots=True)
class Candidate:
    """A possible constant of the law: product of atoms to the powers ``vector``.

    ``single`` is the index of the constant of the steps that it is, or None. ``can_turn``: it may
    be replaced by its reciprocal, called ``turned_name``. ``written``: a sum of constants that are
    in the law by themselves (k_a + k_b beside k_a and k_b), which is written out.
    """

    name: str
    vector: Vector
    kind: ConstantKind = ConstantKind.LUMPED
    meaning: str = ""
    single: int | None = None
    turned_name: str = ""
    turned_meaning: str = ""
    written: bool = False

    @property
    def can_turn(self) -> bool:
        return bool(self.turned_name)

    def turned(self) -> Candidate:
        return replace(
            self,
            name=self.turned_name,
            meaning=self.turned_meaning,
            vector={i: -e for i, e in self.vector.items()},
            single=None,
            turned_name="",
        )


def over(a: Candidate, b: Candidate) -> Candidate:
    """The combination a/b."""
    vector = dict(a.vector)
    for i, e in b.vector.items():
        vector[i] = vector.get(i, Fraction(0)) - e
    return Candidate(
        f"{a.name}_over_{b.name}",
        {i: e for i, e in vector.items() if e},
        ConstantKind.LUMPED,
        f"{a.meaning or a.name}, divided by {b.name}",
    )


def candidates(
    form: Form,
    known: Sequence[Constant],
    holds: Callable[[Vector], bool],
    per_catalyst: bool,
    equilibrium: str,
) -> Iterator[Candidate]:
    """Combinations in order of preference; together they span all that occurs.

    The overall equilibrium constant if asked for; single constants of the steps; equilibrium
    constants k/k_rev of steps; saturation constants of a catalyst; association constants and other
    ratios in the denominators; what remains of the numerators.
    """
    if equilibrium:
        vector = _reverse_ratio(form)
        if vector is not None:
            yield Candidate(
                equilibrium,
                vector,
                ConstantKind.EQUILIBRIUM,
                "equilibrium constant of the overall reaction",
            )
    if per_catalyst:
        for c in _saturation(form):
            yield _if_single(c, known)
    singles = {i for i in range(len(known)) if holds({i: Fraction(1)})}
    for i in sorted(singles):
        yield _single(i, known[i])
    for i in range(len(known), len(form.atoms)):
        yield Candidate("", {i: Fraction(1)}, written=True)
    yield from _step_equilibria(known, holds, singles)
    yield from _rest(form, singles, known)


def _single(i: int, constant: Constant) -> Candidate:
    step = constant.name.removeprefix("K_")
    turn = constant.kind is ConstantKind.EQUILIBRIUM and constant.definition is None
    return Candidate(
        constant.name,
        {i: Fraction(1)},
        constant.kind,
        constant.meaning,
        single=i,
        turned_name=f"K_rev_{step}" if turn else "",
        turned_meaning=f"equilibrium constant of step {step} read backwards, 1/{constant.name}",
    )


def _if_single(candidate: Candidate, known: Sequence[Constant]) -> Candidate:
    """The constant of a step itself, where a combination is nothing but it."""
    if len(candidate.vector) == 1:
        i, e = next(iter(candidate.vector.items()))
        if i < len(known) and e == 1:
            return replace(_single(i, known[i]), turned_name="")
    return candidate


def _reverse_ratio(form: Form) -> Vector | None:
    """Forward over reverse coefficient of a numerator with one term of each sign."""
    for term in form.expressions[0]:
        ahead = [c for c in term.top.terms.values() if c.number > 0]
        back = [c for c in term.top.terms.values() if c.number < 0]
        if len(ahead) == 1 and len(back) == 1:
            return _minus(ahead[0].vector, back[0].vector)
    return None


def _minus(a: Vector, b: Vector) -> Vector:
    out = dict(a)
    for i, e in b.items():
        out[i] = out.get(i, Fraction(0)) - e
    return {i: e for i, e in out.items() if e}


def _step_equilibria(
    known: Sequence[Constant],
    holds: Callable[[Vector], bool],
    singles: set[int],
) -> Iterator[Candidate]:
    index = {c.name: i for i, c in enumerate(known)}
    for name, i in index.items():
        step = name.removeprefix("k_")
        j = index.get(f"k_rev_{step}")
        if j is None or not name.startswith("k_") or {i, j} & singles:
            continue
        vector = {i: Fraction(1), j: Fraction(-1)}
        if holds(vector):
            yield Candidate(
                f"K_{step}",
                vector,
                ConstantKind.EQUILIBRIUM,
                f"equilibrium constant of step {step}",
                turned_name=f"K_rev_{step}",
                turned_meaning=f"equilibrium constant of step {step} read backwards",
            )


def _saturation(form: Form) -> Iterator[Candidate]:
    """k_cat, K_m, K_i of a catalyst whose rate saturates in its reactants."""
    for term in form.expressions[0]:
        if len(term.bottom) != 1 or term.bottom[0][1] != 1:
            continue
        sums = form.sums[term.bottom[0][0]]
        lead = next(((a, c) for a, c in term.top.terms.items() if c.number > 0), None)
        if lead is None or lead[0] not in sums.terms:
            continue
        full = sums.terms[lead[0]].vector
        yield Candidate(
            "k_cat",
            _minus(lead[1].vector, full),
            ConstantKind.LUMPED,
            "rate per total catalyst when all its reactants saturate it",
        )
        for symbol, power in lead[0]:
            without = _without(lead[0], symbol, power)
            species = _plain(symbol.name)
            if without in sums.terms and power == 1:
                yield Candidate(
                    f"K_m_{species}",
                    _minus(sums.terms[without].vector, full),
                    ConstantKind.LUMPED,
                    f"amount of {_bare(symbol.name)} at half the rate, other reactants saturating",
                )
        if len(lead[0]) > 1 and () in sums.terms:
            for symbol, power in lead[0]:
                alone: Amounts = ((symbol, power),)
                if alone in sums.terms and power == 1:
                    yield Candidate(
                        f"K_i_{_plain(symbol.name)}",
                        _minus(sums.terms[()].vector, sums.terms[alone].vector),
                        ConstantKind.LUMPED,
                        f"dissociation constant of {_bare(symbol.name)} from the free catalyst, as "
                        "it stands in the law",
                    )


def _without(amounts: Amounts, symbol: Any, power: Fraction) -> Amounts:
    return tuple(
        (s, e - power if s == symbol else e) for s, e in amounts if s != symbol or e > power
    )


def _rest(form: Form, singles: set[int], known: Sequence[Constant]) -> Iterator[Candidate]:
    """Ratios within denominators, then numerators over them, without the single constants."""
    for k, sums in enumerate(form.sums):
        where = "a balance" if k in form.equations else "the denominator"
        for amounts, c in sums.terms.items():
            before = _before(sums, amounts)
            if before is None:
                continue
            vector = _apart(_minus(c.vector, sums.terms[before].vector), singles, len(known))
            if vector:
                yield combination(
                    vector,
                    known,
                    f"b_{_label(amounts) or 'const'}",
                    f"coefficient of {_words(amounts)} in {where}",
                )
    norms = [next(iter(s.terms.values())).vector for s in form.sums]
    for expression in form.expressions:
        for term in expression:
            scale: Vector = {}
            for k, power in term.bottom:
                scale = _minus(scale, {i: -power * e for i, e in norms[k].items()})
            for amounts, c in term.top.terms.items():
                vector = _apart(_minus(c.vector, scale), singles, len(known))
                if vector:
                    yield combination(
                        vector,
                        known,
                        f"a_{_label(amounts) or 'const'}",
                        f"coefficient of {_words(amounts)} in the numerator",
                    )


def _apart(vector: Vector, singles: set[int], n: int) -> Vector:
    """Without the single constants, if what is left is a product of constants; else as it is."""
    left = {i: e for i, e in vector.items() if i not in singles}
    return left if all(i < n and e > 0 for i, e in left.items()) else vector


def _before(sums: Sum, amounts: Amounts) -> Amounts | None:
    """The term of a denominator that a term is compared with: one species fewer, else the first."""
    first = next(iter(sums.terms))
    if amounts == first:
        return None
    smaller = [_without(amounts, s, e) for s, e in amounts]
    found = sorted((a for a in smaller if a in sums.terms), key=order_of)
    return found[-1] if found else first


def combination(
    vector: Vector,
    known: Sequence[Constant],
    fallback: str,
    meaning: str,
) -> Candidate:
    """A product of constants is named by joining them, anything else by where it stands."""
    n = len(known)
    if all(i < n for i in vector) and all(e > 0 for e in vector.values()):
        parts = sorted(
            vector, key=lambda i: (known[i].kind is not ConstantKind.RATE, known[i].name)
        )
        head = "".join("k" if known[i].kind is ConstantKind.RATE else "K" for i in parts)
        tails = [known[i].name.split("_", 1)[-1].removeprefix("ads_") for i in parts]
        if len(parts) == 1:
            return Candidate(known[parts[0]].name, vector, ConstantKind.LUMPED, "")
        return Candidate(
            f"{head}_{'_'.join(tails)}",
            vector,
            ConstantKind.LUMPED,
            "product of constants that only occur together",
        )
    return Candidate(
        fallback,
        vector,
        ConstantKind.LUMPED,
        meaning,
        turned_name=f"{fallback}_inverse" if fallback.startswith("b_") else "",
        turned_meaning="reciprocal of the " + meaning,
    )


def _bare(symbol: str) -> str:
    return symbol.strip("[]{}")


def _plain(symbol: str) -> str:
    """A species as part of a name: letters, digits and underscores only."""
    text = _bare(symbol.split("]/[")[0])
    if text and not any(ch.isalnum() for ch in text):
        return "vacant"
    text = text.replace("+", "plus").replace("-", "minus").replace("*", "ads")
    return "".join(ch if ch.isalnum() else "_" for ch in text).strip("_") or "x"


def in_other_units(unknown: sympy.Symbol) -> sympy.Symbol:
    """The symbol of an unknown of balances that is counted in units of constants."""
    return sympy.Dummy(f"x_{_plain(unknown.name)}", positive=True)


def _label(amounts: Amounts) -> str:
    parts = []
    for symbol, e in amounts:
        power = "" if e == 1 else str(e).replace("/", "o")
        parts.append(_plain(symbol.name) + (f"_{power}" if power else ""))
    return "_".join(parts)


def _words(amounts: Amounts) -> str:
    if not amounts:
        return "the term without amounts"
    return " ".join(s.name + ("" if e == 1 else f"^{e}") for s, e in amounts)
