"""The identifiable form of a law: constants that only occur together become one.

Write each denominator with one of its coefficients divided out. The remaining coefficients are all
that rates can show. In the logarithms of their factors they span a space; its dimension is the
number of constants that can be told apart. The law is written in a basis of it: constants of the
steps where these lie in the space, and named combinations where they do not.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import sympy
from sympy import Rational

from discrim.ratelaw.lump_form import Form, NotRational, Term, Vector, read_form
from discrim.ratelaw.lump_gauge import gauged
from discrim.ratelaw.lump_names import Candidate, candidates, over
from discrim.ratelaw.lump_roots import powers_put_in, renamed, solved
from discrim.ratelaw.lump_scaling import scaled
from discrim.ratelaw.lump_span import Span
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw
from discrim.ratelaw.roots import Group


def lump(
    law: RateLaw,
    *,
    per_catalyst: bool = False,
    equilibrium: str = "",
    groups: Sequence[Group] = (),
) -> RateLaw:
    """``law`` with its rate, production and pathways in constants that rates can tell apart.

    Parameters
    ----------
    law : its ``rate`` is a quotient of polynomials in its constants and the amounts; other laws
        (with orders to be found, say) are returned unchanged
    per_catalyst : name saturation constants of a catalyst ``k_cat``, ``K_m_S``, ``K_i_S``
    equilibrium : name of a constant to write a reversible law with: the ratio of the forward to the
        reverse coefficient of the numerator
    groups : unknowns that stand in the expressions of ``law`` as symbols, with their equations;
        they are solved once the equations, too, are in constants that can be told apart

    Returns
    -------
    RateLaw
        ``constants`` are constants of ``law``, or combinations with their ``definition`` in the
        constants of the steps; all >= 0. ``step_rate`` and ``step_constants`` are those of ``law``.
    """
    law, groups = powers_put_in(law, groups)
    known = law.constants
    fixed = law.stoichiometry
    names = list(law.production) if fixed is None else []  # else all are multiples of the rate
    expressions = [law.rate, *(law.production[n] for n in names), *(p.rate for p in law.pathways)]
    if not known:
        return law
    equations = [e for group in groups for e in group.equations]
    try:
        form = read_form(expressions, [c.symbol for c in known], equations)
    except NotRational:
        return scaled(solved(law, groups))
    decisive = 1 + len(names)  # what can be measured; pathways cannot, on their own
    form, units = gauged(form, [z for g in groups for z in g.unknowns], decisive, differences)
    written = _write(form, known, decisive, per_catalyst=per_catalyst, equilibrium=equilibrium)
    if written is None:
        return _as_it_is(solved(law, groups), form, decisive)
    if groups:
        # units of several unknowns at once are found by their scalings
        other = scaled(solved(law, groups))
        if len(other.constants) < len(written.constants):
            return other
    rate, *others = written.expressions
    if fixed is None:
        production = dict(zip(names, others[: len(names)], strict=True))
    else:
        # sympy looks deep into the law before it takes zero times it for zero
        production = {
            n: fixed[n] * rate if fixed.get(n) else sympy.Integer(0) for n in law.production
        }
    apart = others[len(names) :]
    pathways = (
        tuple(replace(p, rate=r) for p, r in zip(law.pathways, apart, strict=True)) if apart else ()
    )
    before = {c.symbol: c.definition for c in known if c.definition is not None}
    constants = tuple(
        replace(c, definition=c.definition.xreplace(before))
        if before and c.definition is not None and c not in known
        else c
        for c in written.constants
    )
    combined = [c for c in constants if c.definition is not None and c not in known]
    lines = list(law.derivation)
    if combined:
        for c in combined:
            lines.append((f"Combined: {c.name}", sympy.Eq(c.symbol, c.definition, evaluate=False)))
    shortened = replace(
        law,
        rate=rate,
        production=production,
        constants=constants,
        pathways=pathways,
        findings=(*law.findings, *written.findings),
    )
    rest = iter(written.equations)
    groups = [replace(g, equations=tuple(next(rest) for _ in g.equations)) for g in groups]
    shortened, groups, counted = renamed(shortened, groups, form, units)
    lines += counted
    out = solved(shortened, groups)
    if combined:
        lines.append(("Rate law in the constants that rates can tell apart", out.rate))
    return replace(out, derivation=tuple(lines))


def _as_it_is(law: RateLaw, form: Form, decisive: int) -> RateLaw:
    """A law that products of powers of its constants do not shorten, with what that leaves open."""
    shown = differences(form, decisive)
    rank = _functional_rank(form, shown)
    if rank == len(law.constants):
        return law
    law = scaled(law) if form.equations else scaled(law, (form.atoms, shown))
    n = len(law.constants)
    if rank >= n:  # more than n: in units of the unknowns that are not the best
        return law
    if law.derivation and law.derivation[-1][0].endswith("rates can tell apart"):
        lines = [*law.derivation[:-1], ("Rate law in fewer constants", law.rate)]
        law = replace(law, derivation=tuple(lines))
    words = (
        f"Rates can tell apart only {rank} combinations of the {n} constants of this law, and they "
        "are no products of powers of them: some constants stay undetermined whatever is measured."
    )
    return replace(law, findings=(*law.findings, words))


_MANY = 60  # coefficients of a law that is not looked at for a shorter form


@dataclass(frozen=True, slots=True)
class _Written:
    expressions: tuple[Any, ...]
    equations: tuple[Any, ...]
    constants: tuple[Constant, ...]
    findings: tuple[str, ...]


def _write(
    form: Form, known: Sequence[Constant], decisive: int, *, per_catalyst: bool, equilibrium: str
) -> _Written | None:
    """Every expression in a basis of what can be told apart.

    None when the constants as they are can all be told apart, while products of powers of them
    cannot express the law without more constants than there are.
    """
    shown = differences(form, decisive)
    large = len(shown) > _MANY and not equilibrium
    space = Span()
    for vector in shown:
        space.add(vector)
        if large and space.n >= len(known):
            return None  # as many combinations as constants of the steps, or more
    chosen: list[Candidate] = []
    solver = Span()
    missing = list(space.rows.values())
    kept_single: set[int] = set()
    for candidate in candidates(form, known, space.holds, per_catalyst, equilibrium):
        missing = [row for row in missing if not solver.holds(row)]
        if not missing:
            break
        if candidate.written:
            inside = form.atoms[next(iter(candidate.vector))].free_symbols
            if not inside <= {form.constants[i] for i in kept_single}:
                continue
        elif not space.holds(candidate.vector):
            continue
        if solver.add(candidate.vector):
            chosen.append(candidate)
            if candidate.single is not None:
                kept_single.add(candidate.single)
    findings: list[str] = []
    if not all(solver.holds(v) for v in differences(form, len(form.expressions))):
        form = replace(form, expressions=form.expressions[:decisive])
        findings.append(
            "Some pathways have the same form: no measured rates could tell how much each carries, "
            "so they are written as one."
        )
    apparent = _functional_rank(form, [c.vector for c in chosen if not c.written])
    extra = sum(not c.written for c in chosen) - apparent
    count = sum(not c.written for c in chosen)
    if extra and (apparent == len(known) or count >= len(known)):
        return None
    if extra:
        relation = "a relation" if extra == 1 else f"{extra} relations"
        findings.append(
            f"The mechanism also implies {relation} between the constants of the law that the fit "
            "does not impose; the fitted law is wider than the mechanism."
        )
    norms = _norms(form, per_catalyst, [k for k, c in enumerate(chosen) if not c.can_turn], solver)
    chosen, flipped = _positive(form, norms, chosen, solver)
    if flipped:
        solver = Span(c.vector for c in chosen)
    constants = _constants(form, known, [c for c in chosen if not c.written])
    order = {c.name: k for k, c in enumerate(known)}
    rest = iter(constants)
    symbols = [form.atoms[next(iter(c.vector))] if c.written else next(rest).symbol for c in chosen]
    writer = _Writer(form, norms, solver, symbols)
    expressions = tuple(writer.expression(e) for e in form.expressions)
    equations = tuple(writer.below(k) for k in form.equations)
    used = set().union(*(e.free_symbols for e in (*expressions, *equations)))
    kept = [c for c in constants if c.symbol in used]
    kept.sort(key=lambda c: (c.kind is not ConstantKind.RATE, order.get(c.name, len(order))))
    return _Written(expressions, equations, tuple(kept), tuple(findings))


def subtract(a: Vector, b: Vector, times: Fraction = Fraction(1)) -> Vector:
    out = dict(a)
    for i, e in b.items():
        out[i] = out.get(i, Fraction(0)) - times * e
    return {i: e for i, e in out.items() if e}


def differences(form: Form, decisive: int) -> list[Vector]:
    """Coefficients of the first ``decisive`` expressions, one of each denominator divided out."""
    rows: list[Vector] = []
    first = [next(iter(s.terms.values())).vector for s in form.sums]
    for s, norm in zip(form.sums, first, strict=True):
        rows += [subtract(c.vector, norm) for c in s.terms.values()]
    for expression in form.expressions[:decisive]:
        for term in expression:
            scale: Vector = {}
            for k, power in term.bottom:
                scale = subtract(scale, first[k], Fraction(-power))
            rows += [subtract(c.vector, scale) for c in term.top.terms.values()]
    return [r for r in rows if r]


def _norms(form: Form, per_catalyst: bool, fixed: Sequence[int], solver: Span) -> list[Vector]:
    """For each denominator the coefficient that is written as 1, or none.

    For a catalyst that of the reactants that saturate it; else of the term without amounts; else of
    one whose species stand in the numerator too. Another, if only so no constant is divided by that
    cannot be turned round (``fixed``).
    """
    tops: dict[int, list[Any]] = {}
    for term in form.expressions[0]:
        lead = next((a for a, c in term.top.terms.items() if c.number > 0), None)
        for k, _ in term.bottom:
            if lead is not None:
                tops.setdefault(k, []).append(lead)
    out = []
    for k, s in enumerate(form.sums):
        choices = list(s.terms)
        saturating = [a for a in tops.get(k, []) if a in s.terms]
        within = [a for a in choices if any(_divides(a, t) for t in tops.get(k, []))]
        constant = [()] if () in s.terms else []
        order = [*(saturating if per_catalyst else []), *constant, *within, *choices]

        def divides_by_none(pick: Any, s: Any = s) -> bool:
            if not fixed:
                return True
            norm = s.terms[pick].vector
            powers = [solver(subtract(c.vector, norm)) for c in s.terms.values()]
            return all(p[i] >= 0 for p in powers for i in fixed)

        pick = next((a for a in order if divides_by_none(a)), None)
        if pick is not None:
            out.append(s.terms[pick].vector)
        elif solver.holds(s.terms[order[0]].vector):
            out.append({})  # every coefficient can be told apart: none has to be written as 1
        else:
            out.append(s.terms[order[0]].vector)
    return out


def _divides(a: Any, b: Any) -> bool:
    powers = dict(b)
    return all(powers.get(s, 0) >= e for s, e in a)


def _scaled_terms(
    form: Form, norms: Sequence[Vector], term: Term
) -> list[tuple[Any, Fraction, Vector]]:
    scale: Vector = {}
    for k, power in term.bottom:
        scale = subtract(scale, norms[k], Fraction(-power))
    return [(a, c.number, subtract(c.vector, scale)) for a, c in term.top.terms.items()]


def _positive(
    form: Form, norms: Sequence[Vector], chosen: list[Candidate], solver: Span
) -> tuple[list[Candidate], bool]:
    """Constants that the law only multiplies by, so that zero means "absent".

    What it only divides by is turned round; what it divides by here and multiplies by there, always
    with another constant, is made part of that one.
    """
    vectors = [
        subtract(c.vector, norm)
        for s, norm in zip(form.sums, norms, strict=True)
        for c in s.terms.values()
    ]
    for expression in form.expressions:
        for term in expression:
            vectors += [vector for _, _, vector in _scaled_terms(form, norms, term)]
    powers = [solver(v) for v in vectors]
    out = list(chosen)
    for k, c in enumerate(chosen):
        below = any(p[k] < 0 for p in powers)
        if not below:
            continue
        if c.can_turn and all(p[k] <= 0 for p in powers):
            out[k] = c.turned()
            for p in powers:
                p[k] = -p[k]
            continue
        for i, other in enumerate(out):
            if i == k or any(x.single is not None or x.written for x in (other, c)):
                continue
            if all(p[k] + p[i] >= 0 for p in powers):
                out[i] = over(other, c)
                for p in powers:
                    p[k] += p[i]
                break
    return out, out != chosen


def _constants(
    form: Form, known: Sequence[Constant], chosen: Sequence[Candidate]
) -> tuple[Constant, ...]:
    """The chosen constants as records; no combination takes the name of a constant of a step."""
    taken = {c.name for c in known}
    out = []
    for c in chosen:
        if c.single is not None:
            out.append(known[c.single])
            continue
        name, n = c.name, 2
        while name in taken:
            name, n = f"{c.name}_{n}", n + 1
        taken.add(name)
        definition = sympy.Mul(
            *(form.atoms[i] ** Rational(e.numerator, e.denominator) for i, e in c.vector.items())
        )
        symbol = sympy.Symbol(name, nonnegative=True)
        out.append(Constant(name, symbol, c.kind, c.meaning, definition))
    return tuple(out)


class _Writer:
    """A form written in the constants that were chosen."""

    def __init__(
        self,
        form: Form,
        norms: Sequence[Vector],
        solver: Callable[[Vector], list[Fraction]],
        symbols: Sequence[sympy.Symbol],
    ) -> None:
        self.form, self.norms, self.solver, self.symbols = form, norms, solver, symbols
        self.written: dict[int, Any] = {}

    def value(self, amounts: Any, number: Fraction, vector: Vector) -> Any:
        powers = [
            s ** Rational(e.numerator, e.denominator)
            for s, e in zip(self.symbols, self.solver(vector), strict=True)
            if e
        ]
        powers += [s ** Rational(e.numerator, e.denominator) for s, e in amounts]
        return sympy.Mul(Rational(number.numerator, number.denominator), *powers)

    def below(self, k: int) -> Any:
        """A denominator, or an equation."""
        if k not in self.written:
            norm = self.norms[k]
            terms = self.form.sums[k].terms.items()
            self.written[k] = sympy.Add(
                *(self.value(a, c.number, subtract(c.vector, norm)) for a, c in terms)
            )
        return self.written[k]

    def expression(self, terms: Sequence[Term]) -> Any:
        parts = []
        for term in terms:
            pieces = [self.value(*t) for t in _scaled_terms(self.form, self.norms, term)]
            below = (self.below(k) ** -power for k, power in term.bottom)
            parts.append(sympy.Mul(_common(pieces), *below))
        return sympy.Add(*parts)


def _common(pieces: Sequence[Any]) -> Any:
    """A sum with what all its terms share in front: k K (A B - C/K_eq)."""
    if len(pieces) == 1:
        return pieces[0]
    powers: Mapping[Any, Any] = {}
    for n, piece in enumerate(pieces):
        here = {b: e for b, e in piece.as_powers_dict().items() if b.is_Symbol}
        powers = (
            here
            if n == 0
            else {
                b: min(e, here[b]) for b, e in powers.items() if b in here and e > 0 and here[b] > 0
            }
        )
    shared = sympy.Mul(*(b**e for b, e in powers.items() if e > 0))
    if shared == 1:
        return sympy.Add(*pieces)
    return sympy.Mul(shared, sympy.Add(*(p / shared for p in pieces)), evaluate=True)


_PRIME = 2**61 - 1


def _functional_rank(form: Form, vectors: Sequence[Vector]) -> int:
    """Rank of d log(lump)/d log(constant) at a point: how many lumps can move freely.

    Modulo a prime, which can only take the rank too low, with a chance of about 1e-17.
    """
    slopes = [
        [int(x.numerator) * pow(int(x.denominator), _PRIME - 2, _PRIME) % _PRIME for x in row]
        for row in form.slopes
    ]
    n = len(form.constants)
    pivots: dict[int, list[int]] = {}
    for v in {tuple(sorted(v.items())) for v in vectors}:
        row = [0] * n
        for i, e in v:
            times = e.numerator * pow(e.denominator, _PRIME - 2, _PRIME)
            row = [(x + times * y) % _PRIME for x, y in zip(row, slopes[i], strict=True)]
        for p, known in pivots.items():
            if row[p]:
                f = row[p]
                row = [(x - f * y) % _PRIME for x, y in zip(row, known, strict=True)]
        p = next((i for i, x in enumerate(row) if x), -1)
        if p >= 0:
            inverse = pow(row[p], _PRIME - 2, _PRIME)
            pivots[p] = [x * inverse % _PRIME for x in row]
            if len(pivots) == n:
                break
    return len(pivots)
