"""Polynomial equations in nonnegative unknowns, with positive parameters, solved case by case.

Written for the equations that say "this law is a case of that one": sparse, mostly linear in each
unknown. Every unknown is nonnegative unless listed as signed, and every parameter is positive and
generic. Cases are split where a product vanishes; sums of terms of one sign vanish term by term.
Nothing is guessed: a branch that cannot be solved in these ways is dropped and reported.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

MAX_CASES = 400  # of one system; a typical pair of laws needs fewer than 20
MAX_TERMS = 1500  # of one equation


@dataclass(slots=True)
class Progress:
    """What happened during a search: whether a branch was dropped unsolved, and how many cases."""

    cases: int = 0
    dropped: list[str] = field(default_factory=list)


Values = tuple[tuple[int, Any], ...]  # (index of the unknown, element of the field), in order


def solutions(
    equations: Sequence[Any], n_unknown: int, signed: frozenset[int], progress: Progress
) -> Iterator[dict[int, Any]]:
    """Every solution found, as values of unknowns in the parameters.

    Parameters
    ----------
    equations : elements of a polynomial ring whose first ``n_unknown`` generators are unknown
    signed : indices of generators (unknowns or parameters) that may be negative

    Yields
    ------
    Values (elements of the ring's field of fractions) by index of the unknown. An unknown without
    a value is free; values may depend on free unknowns.
    """
    system = _System(n_unknown, signed, progress)
    for values in system.solve(list(equations), ()):
        try:
            yield _back_substituted(values)
        except ZeroDivisionError:  # a case that a later value contradicts
            continue


class _System:
    def __init__(self, n_unknown: int, signed: frozenset[int], progress: Progress) -> None:
        self.n = n_unknown
        self.signed = signed
        self.progress = progress

    def unknowns(self, poly: Any) -> set[int]:
        return {i for monomial in poly for i in range(self.n) if monomial[i]}

    def solve(self, equations: list[Any], values: Values) -> Iterator[Values]:
        self.progress.cases += 1
        if self.progress.cases > MAX_CASES:
            self.progress.dropped.append("too many cases")
            return
        tidy = self.tidy(equations)
        if tidy is None:
            return
        if not tidy:
            yield values
            return
        tidy.sort(key=lambda e: (len(e), str(e)))
        if len(tidy[-1]) > MAX_TERMS:
            self.progress.dropped.append("an equation too large")
            return
        for step in (
            self.monomial,
            lambda e: self.linear(e, certain=True),
            self.factors,
            lambda e: self.bilinear(e, certain=True),
            self.linear,
            self.bilinear,
            self.root,
        ):
            cases = step(tidy)
            if cases is not None:
                for more, assigned in cases:
                    yield from self.solve(more, values + assigned)
                return
        self.progress.dropped.append("an equation of higher degree")

    def tidy(self, equations: list[Any]) -> list[Any] | None:
        """Without zeros, repetitions and parameter factors; None if one cannot hold."""
        out: dict[Any, None] = {}
        for equation in equations:
            if not equation:
                continue
            pieces = self.terms(equation) if self.one_sign(equation) else [equation]
            for piece in pieces:
                if not self.unknowns(piece):
                    return None
                out[self.stripped(piece)] = None
        return list(out)

    def one_sign(self, poly: Any) -> bool:
        return one_sign(poly, self.signed) is not None

    def terms(self, poly: Any) -> list[Any]:
        return [poly.ring.from_dict({m: c}) for m, c in poly.terms()]

    def stripped(self, poly: Any) -> Any:
        """Divided by common parameters, and by numbers; the sign made regular."""
        low = [min(m[i] for m in poly) for i in range(poly.ring.ngens)]
        low[: self.n] = [min(1, e) for e in low[: self.n]] if len(poly) == 1 else [0] * self.n
        if len(poly) == 1:
            (monomial,) = poly
            return poly.ring.from_dict(
                {tuple(min(1, e) if i < self.n else 0 for i, e in enumerate(monomial)): 1}
            )
        shifted = {tuple(a - b for a, b in zip(m, low, strict=True)): c for m, c in poly.items()}
        out = poly.ring.from_dict(shifted).primitive()[1]
        return -out if out.LC < 0 else out

    def monomial(self, equations: list[Any]) -> list[tuple[list[Any], Values]] | None:
        """A product of unknowns is zero: each of them in turn."""
        for equation in equations:
            if len(equation) == 1:
                found = sorted(self.unknowns(equation))
                zero = equation.ring.to_field().zero
                return [
                    ([put(e, i, zero.numer, zero.denom) for e in equations], ((i, zero),))
                    for i in found
                ]
        return None

    def linear(
        self, equations: list[Any], *, certain: bool = False
    ) -> list[tuple[list[Any], Values]] | None:
        """An unknown that stands linearly, with a coefficient of parameters alone."""
        found = self.best(equations, bare=True, certain=certain)
        return None if found is None else [self.assigned(equations, *found[1:])]

    def best(
        self, equations: list[Any], *, bare: bool, certain: bool
    ) -> tuple[Any, int, Any, Any] | None:
        """An equation with an unknown, its slope and the rest.

        With ``certain``, only where the value is sure to be allowed: solving k_on*K = k_off + k_cat
        for k_on keeps every value positive, solving for k_off would not. ``bare``: the slope holds
        no unknown.
        """
        second: tuple[Any, int, Any, Any] | None = None
        for equation in equations:
            for i in sorted(self.unknowns(equation)):
                split = linear_in(equation, i)
                if split is None:
                    continue
                slope, rest = split
                sign = one_sign(slope, self.signed)
                if bare and (self.unknowns(slope) or sign is None):
                    continue  # the coefficient might vanish for some parameters
                against = one_sign(rest, self.signed) if rest else None
                if not rest or i in self.signed or (sign and against == -sign):
                    return equation, i, slope, rest
                second = second or (equation, i, slope, rest)
        return None if certain else second

    def assigned(
        self, equations: list[Any], i: int, slope: Any, rest: Any
    ) -> tuple[list[Any], Values]:
        to_field = slope.ring.to_field()
        value = -to_field(rest) / to_field(slope)
        return [put(e, i, value.numer, value.denom) for e in equations], ((i, value),)

    def factors(self, equations: list[Any]) -> list[tuple[list[Any], Values]] | None:
        """An equation that is a product: each factor in turn."""
        for n, equation in enumerate(equations):
            if len(equation) > 60:
                continue
            found = [f for f, _ in equation.factor_list()[1] if self.unknowns(f)]
            if len(found) > 1 or (found and len(found[0]) < len(equation)):
                rest = equations[:n] + equations[n + 1 :]
                return [([f, *rest], ()) for f in found]
        return None

    def bilinear(
        self, equations: list[Any], *, certain: bool = False
    ) -> list[tuple[list[Any], Values]] | None:
        """Linear in one unknown, its coefficient holding others: it vanishes, or it does not."""
        found = self.best(equations, bare=False, certain=certain)
        if found is None:
            return None
        equation, i, slope, rest = found
        others = [e for e in equations if e is not equation]
        return [self.assigned(equations, i, slope, rest), ([slope, rest, *others], ())]

    def root(self, equations: list[Any]) -> list[tuple[list[Any], Values]] | None:
        """a*x^n = b with perfect powers a and b of parameters."""
        for equation in equations:
            found = self.unknowns(equation)
            if len(found) != 1:
                continue
            (i,) = found
            degrees = {m[i] for m in equation}
            if len(degrees) != 2 or 0 not in degrees:
                continue
            n = max(degrees)
            ring = equation.ring
            top = {m: c for m, c in equation.items() if m[i] == n}
            slope = ring.from_dict(
                {tuple(0 if j == i else e for j, e in enumerate(m)): c for m, c in top.items()}
            )
            rest = ring.from_dict({m: c for m, c in equation.items() if m[i] == 0})
            to_field = ring.to_field()
            power = -to_field(rest) / to_field(slope)
            numer, denom = _nth_root(power.numer, n), _nth_root(power.denom, n)
            if numer is None or denom is None or i in self.signed:
                continue
            value = to_field(numer) / to_field(denom)
            return [([put(e, i, value.numer, value.denom) for e in equations], ((i, value),))]
        return None


def one_sign(poly: Any, signed: frozenset[int]) -> int | None:
    """The sign of every term, for nonnegative variables; None if they differ or are not known."""
    sign = 0
    for monomial, c in poly.terms():
        if any(monomial[i] % 2 for i in signed):
            return None
        here = 1 if c > 0 else -1
        if sign and here != sign:
            return None
        sign = here
    return sign


def linear_in(poly: Any, i: int) -> tuple[Any, Any] | None:
    """(slope, rest) of a polynomial of degree one in generator ``i``, else None."""
    slope, rest = {}, {}
    for monomial, c in poly.items():
        if monomial[i] == 0:
            rest[monomial] = c
        elif monomial[i] == 1:
            slope[(*monomial[:i], 0, *monomial[i + 1 :])] = c
        else:
            return None
    if not slope:
        return None
    return poly.ring.from_dict(slope), poly.ring.from_dict(rest)


def put(poly: Any, i: int, numer: Any, denom: Any) -> Any:
    """``poly`` with numer/denom for generator ``i``, times denom^degree."""
    by_degree: dict[int, dict[Any, Any]] = {}
    for monomial, c in poly.items():
        bare = (*monomial[:i], 0, *monomial[i + 1 :])
        by_degree.setdefault(monomial[i], {})[bare] = c
    highest = max(by_degree, default=0)
    if highest == 0:
        return poly
    out = poly.ring.zero
    for degree, terms in by_degree.items():
        part = poly.ring.from_dict(terms)
        if degree:
            part *= numer**degree if numer else poly.ring.zero
        if degree < highest:
            part *= denom ** (highest - degree)
        out += part
    return out


def put_fraction(value: Any, i: int, put_in: Any) -> Any:
    """A field element with another put in for generator ``i``."""
    to_field = value.field
    numer, denom = value.numer, value.denom
    high_n = max((m[i] for m in numer), default=0)
    high_d = max((m[i] for m in denom), default=0)
    if not high_n and not high_d:
        return value
    top = to_field(put(numer, i, put_in.numer, put_in.denom))
    bottom = to_field(put(denom, i, put_in.numer, put_in.denom))
    scale = to_field(put_in.denom) ** (high_d - high_n)
    return top / bottom * scale


def _back_substituted(values: Values) -> dict[int, Any]:
    """Later values put into earlier ones, which may depend on them."""
    out: dict[int, Any] = {}
    for i, value in reversed(values):
        for j, known in out.items():
            value = put_fraction(value, j, known)
        out[i] = value
    return out


def _nth_root(poly: Any, n: int) -> Any | None:
    number, factors = poly.factor_list()
    if number < 0 or any(power % n for _, power in factors):
        return None
    whole = round(int(number) ** (1 / n))
    if whole**n != number:
        return None
    out = poly.ring(whole)
    for factor, power in factors:
        out *= factor ** (power // n)
    return out
