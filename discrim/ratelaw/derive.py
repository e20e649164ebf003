"""The rate law that a mechanism implies.

Mass action for every step. Quasi-equilibrated steps give monomials, the remaining intermediates
steady states, conserved sites and catalysts a total that sums to one. The elimination is in
:mod:`discrim.ratelaw.derive_solve`; here the rate, the production of each fluid species and the
parts of the law are put together.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import sympy

from discrim.errors import DiscrimError
from discrim.mechanism.claims import check_limiting, check_limiting_shows, check_sources, taken
from discrim.mechanism.exact import Matrix, null_space, primitive, row_reduce
from discrim.mechanism.model import Mechanism, Species
from discrim.mechanism.routes import routes_of
from discrim.mechanism.unlikely import notes_of, warnings_of
from discrim.ratelaw.derive_algebra import Algebra, Quotient, add, times
from discrim.ratelaw.derive_equilibria import backward, equilibrium, forward
from discrim.ratelaw.derive_network import Network, changes, classify
from discrim.ratelaw.derive_solve import Solution, solve
from discrim.ratelaw.derive_words import assumptions, conventions, derivation, roots_words
from discrim.ratelaw.lump import lump
from discrim.ratelaw.model import Constant, ConstantKind, Pathway, RateLaw, amount, total_amount


def derive(mechanism: Mechanism, *, measured: frozenset[str] | None = None) -> RateLaw:
    """Rate law of ``mechanism``, in the constants that rate data can tell apart.

    Parameters
    ----------
    mechanism : as read by :func:`discrim.mechanism.parse.parse_mechanism`
    measured : names of species whose amounts are known; they are never taken as intermediates.
        None: every fluid species that is made by one step and consumed by a later one is taken as
        an intermediate at steady state.

    Returns
    -------
    RateLaw
        ``rate`` is that of the limiting step as written if one is named; else that of the overall
        reaction with the smallest whole coefficients (of the first step as written when there are
        no intermediates); else, when the steps lead to different products in parallel, their sum.
        Per total catalyst when the mechanism has one. Where the balances have no closed form the
        law holds :class:`~discrim.ratelaw.implicit.ImplicitValue` and a finding says so.

    Raises
    ------
    DiscrimError
        when the balances do not determine the intermediates, when measured species would be tied
        to each other by equilibrated steps, or when nothing has a net rate.
    """
    network = classify(mechanism, measured)
    check_sources(mechanism, network.intermediates)
    routes = routes_of(mechanism, network.intermediates)
    check_limiting(mechanism, routes)
    fluxes = _fluxes(network)
    overall = _overall(network, fluxes)
    solution = solve(network, _wanted(network, overall, fluxes))
    production_of = _production_rows(network)
    parts = _rate_parts(network, solution, overall, fluxes, production_of)
    algebra = solution.algebra
    rate = _grouped(algebra, [q for _, q in parts.terms])
    if rate == 0:
        raise DiscrimError(
            "the mechanism has no net rate",
            place=mechanism.place,
            do="All its steps cancel in the steady state. Check the directions of the steps and "
            "which of them are called equilibrated." + taken(mechanism, network.intermediates),
        )
    production: dict[str, Any] = {}
    for f, species in enumerate(network.fluid):
        if overall is not None:
            nu = sympy.Rational(*_ratio(overall[species]))
            production[species.name] = nu * rate if nu else sympy.Integer(0)
        else:
            pieces = [
                times(solution.rates[s.name], c)
                for s, c in zip(network.kinetic, production_of[f], strict=True)
                if c
            ]
            production[species.name] = _grouped(algebra, _compact(network, pieces))
    pathways: tuple[Pathway, ...] = ()
    if len(parts.terms) > 1 and all(name for name, _ in parts.terms):
        pathways = tuple(Pathway(name, (name,), q.expr(algebra)) for name, q in parts.terms)
    equations = [e for group in solution.groups for e in group.equations]
    constants = _constants(network, [rate, *production.values(), *equations])
    check_limiting_shows(mechanism, [c.name for c in constants])
    used = _symbols([rate, *production.values(), *equations])
    law = RateLaw(
        name=mechanism.name,
        rate=rate,
        production=production,
        constants=constants,
        species=tuple(
            name
            for name in (*(s.name for s in network.fluid), *_totals(network))
            if amount(name) in used
        ),
        step_rate=rate.xreplace(solution.roots),
        step_constants=constants,
        pathways=pathways,
        assumptions=assumptions(network, solution),
        conventions=(*conventions(network, solution), parts.says),
        derivation=derivation(network, solution, rate.xreplace(solution.roots)),
        steps={s.name: s.text for s in mechanism.steps},
        stoichiometry=None
        if overall is None
        else {s.name: sympy.Rational(*_ratio(n)) for s, n in overall.items() if n},
        source=mechanism.source,
        place=mechanism.place,
        findings=(
            *network.findings,
            *_silent(network, solution, constants),
            *roots_words(solution),
            *notes_of(mechanism, routes, measured),
        ),
        routes=routes.routes,
        warnings=warnings_of(mechanism, routes),
    )
    lumped = lump(
        law,
        per_catalyst=solution.per_catalyst,
        equilibrium=mechanism.overall_equilibrium,
        groups=solution.groups,
    )
    wanted = mechanism.overall_equilibrium
    if wanted and all(c.name != wanted for c in lumped.constants):
        raise DiscrimError(
            f'the law cannot be written with the overall equilibrium constant "{wanted}"',
            place=mechanism.place,
            do="It needs one forward and one reverse term. Write the steps that the overall "
            "reaction can go back by with <=>, or leave overall_equilibrium out.",
        )
    return lumped


def _totals(network: Network) -> list[str]:
    """Names by which the totals of catalysts may stand in a law."""
    return [total_amount(f.name).name[1:-1] for f in network.families if f.kind == "catalyst"]


def _ratio(x: Fraction) -> tuple[int, int]:
    return x.numerator, x.denominator


@dataclass(frozen=True, slots=True)
class _Parts:
    """Additive parts of the rate, each with the step that owns it ("" if none does)."""

    terms: list[tuple[str, Quotient]]
    says: str  # which rate it is, a full sentence


def _fluxes(network: Network) -> list[dict[str, Fraction]]:
    """Basis of the rates of all steps that leave every intermediate unchanged."""
    steps = network.mechanism.steps
    basis = null_space(changes(steps, network.intermediates), len(steps))
    return [{s.name: x for s, x in zip(steps, v, strict=True)} for v in basis]


def _overall(
    network: Network, fluxes: Sequence[Mapping[str, Fraction]]
) -> dict[Species, Fraction] | None:
    """Overall stoichiometry if all steady fluxes have the same one, scaled as the rate is."""
    steps = network.mechanism.steps
    of_fluid = changes(steps, network.fluid)
    made = [
        [sum((row[j] * flux[s.name] for j, s in enumerate(steps)), Fraction(0)) for row in of_fluid]
        for flux in fluxes
    ]
    rows = [v for v in made if any(v)]
    if not rows or len(row_reduce(rows)[1]) != 1:
        return None
    lead = next(k for k, v in enumerate(made) if any(v))
    vector, flux = made[lead], fluxes[lead]
    limiting = network.mechanism.limiting
    if limiting and len(fluxes) == 1:
        if not flux[limiting]:
            raise DiscrimError(
                f'the limiting step "{limiting}" carries no net rate',
                place=network.mechanism.place,
                do="It leads nowhere in the steady state; name another step as limiting.",
            )
        scaled = [x / flux[limiting] for x in vector]
    elif not network.intermediates:
        scaled = [row[0] for row in of_fluid]
    else:
        whole = [Fraction(x) for x in primitive(vector)]
        k = next(i for i, x in enumerate(vector) if x)
        direction = _direction(network, flux) * (1 if (whole[k] > 0) == (vector[k] > 0) else -1)
        scaled = [direction * x for x in whole]
    return dict(zip(network.fluid, scaled, strict=True))


def _direction(network: Network, flux: Mapping[str, Fraction]) -> int:
    """+1 if the flux runs through the steps as they are written."""
    for step in network.mechanism.steps:
        if flux[step.name] and not step.reversible:
            return 1 if flux[step.name] > 0 else -1
    return 1 if next(x for x in flux.values() if x) > 0 else -1


def _production_rows(network: Network) -> Matrix:
    """Net production of each fluid species as a combination of the rates of the kinetic steps.

    The rates of equilibrated steps follow from the balances of the intermediates.
    """
    inner = changes(network.equilibrated, network.intermediates)
    driven = changes(network.kinetic, network.intermediates)
    m, s = len(network.equilibrated), len(network.kinetic)
    rows = [a + [-x for x in b] for a, b in zip(inner, driven, strict=True)]
    reduced, pivots = row_reduce(rows, m) if rows and m else ([], [])
    of_equilibrated = [[Fraction(0)] * s for _ in range(m)]
    for r, p in enumerate(pivots):
        of_equilibrated[p] = reduced[r][m:]
    direct = changes(network.kinetic, network.fluid)
    through = changes(network.equilibrated, network.fluid)
    return [
        [
            direct[f][j]
            + sum((through[f][e] * of_equilibrated[e][j] for e in range(m)), Fraction(0))
            for j in range(s)
        ]
        for f in range(len(network.fluid))
    ]


def _wanted(
    network: Network,
    overall: Mapping[Species, Fraction] | None,
    fluxes: Sequence[Mapping[str, Fraction]],
) -> frozenset[str]:
    """Kinetic steps whose net rates are needed: one is enough where all are in a fixed ratio."""
    every = [s.name for s in network.kinetic]
    if overall is None or len(fluxes) != 1:
        return frozenset(every)
    carrying = [s for s in network.kinetic if fluxes[0][s.name]]
    simplest = min(carrying, key=lambda s: (s.name != network.mechanism.limiting, s.reversible))
    return frozenset([simplest.name])


def _rate_parts(
    network: Network,
    solution: Solution,
    overall: Mapping[Species, Fraction] | None,
    fluxes: Sequence[Mapping[str, Fraction]],
    production_of: Matrix,
) -> _Parts:
    limiting = network.mechanism.limiting
    if overall is not None and len(fluxes) == 1:
        scale = _flux_scale(network, overall, fluxes[0])
        name, quotient = next(iter(solution.rates.items()))
        says = (
            f"The rate is that of the step {limiting} as written."
            if limiting
            else "The rate is that of the step as written."
            if len(network.mechanism.steps) == 1
            else f"The rate is that of the overall reaction {_equation(overall)}."
        )
        return _Parts([("", times(quotient, scale / fluxes[0][name]))], says)
    kinetic = network.kinetic
    rates = [solution.rates[s.name] for s in kinetic]
    if overall is not None:
        f = min(
            (f for f, s in enumerate(network.fluid) if overall[s]),
            key=lambda f: sum(1 for c in production_of[f] if c),
        )
        scale = 1 / overall[network.fluid[f]]
        terms = [
            (s.name, times(q, c * scale))
            for s, q, c in zip(kinetic, rates, production_of[f], strict=True)
            if c
        ]
        if len(terms) == 1:
            return _Parts(terms, f"The rate is that of the step {terms[0][0]} as written.")
        if solution.unknowns:
            return _joined(terms, f"The rate is that of the overall reaction {_equation(overall)}.")
        return _Parts(terms, f"The rate is the sum over the pathways of {_equation(overall)}.")
    terms = [(s.name, q) for s, q in zip(kinetic, rates, strict=True)]
    if limiting:
        terms = [(n, q) for n, q in terms if n == limiting]
        return _Parts(terms, f"The rate is that of the step {limiting} as written.")
    if not network.intermediates and _parallel(network):
        return _Parts(terms, "The rate is the sum of the rates of the steps, each as written.")
    for f, species in enumerate(network.fluid):
        consumed = [
            (s.name, times(q, -c))
            for s, q, c in zip(kinetic, rates, production_of[f], strict=True)
            if c
        ]
        first_use = next(
            (
                dict(s.left).get(species, 0) - dict(s.right).get(species, 0)
                for s in network.mechanism.steps
                if dict(s.left).get(species, 0) != dict(s.right).get(species, 0)
            ),
            0,
        )
        if consumed and first_use > 0:
            says = (
                f"The steps have no single overall equation; the rate is the consumption of "
                f"{species.name}."
            )
            return _Parts(consumed, says) if not solution.unknowns else _joined(consumed, says)
    raise DiscrimError(
        "the mechanism consumes nothing",
        place=network.mechanism.place,
        do="At least one species outside the intermediates has to be consumed.",
    )


def _joined(terms: Sequence[tuple[str, Quotient]], says: str) -> _Parts:
    total = terms[0][1]
    for _, q in terms[1:]:
        total = add(total, q)
    return _Parts([("", total)], says)


def _flux_scale(
    network: Network, overall: Mapping[Species, Fraction], flux: Mapping[str, Fraction]
) -> Fraction:
    """The flux vector times this has the overall stoichiometry as scaled; see ``_overall``."""
    steps = network.mechanism.steps
    row = changes(steps, network.fluid)
    f = next(f for f, s in enumerate(network.fluid) if overall[s])
    made = sum((row[f][j] * flux[s.name] for j, s in enumerate(steps)), Fraction(0))
    # rate * overall = production and r_s = flux_s/(flux scaled to the overall) * rate
    return made / overall[network.fluid[f]]


def _parallel(network: Network) -> bool:
    rows = changes(network.kinetic, network.fluid)
    return not any(any(x > 0 for x in row) and any(x < 0 for x in row) for row in rows)


def _equation(overall: Mapping[Species, Fraction]) -> str:
    def side(sign: int) -> str:
        parts = []
        for species, n in overall.items():
            if n * sign > 0:
                size = abs(n)
                parts.append(species.name if size == 1 else f"{size} {species.name}")
        return " + ".join(parts) or "nothing"

    return f"{side(-1)} -> {side(1)}"


def _compact(network: Network, pieces: list[Quotient]) -> list[Quotient]:
    """Join the pieces when steady states let them cancel against each other."""
    if len(pieces) < 2 or not network.intermediates:
        return pieces
    total = pieces[0]
    for q in pieces[1:]:
        total = add(total, q)
    apart = sum(len(q.top) for q in pieces)
    return [total] if len(total.top) <= apart else pieces


def _grouped(algebra: Algebra, quotients: Sequence[Quotient]) -> Any:
    """The sum, terms over the same denominator joined, different denominators kept apart."""
    groups: dict[Any, Quotient] = {}
    for q in quotients:
        if not q.top:
            continue
        key = q.bottom
        groups[key] = add(groups[key], q) if key in groups else q
    return sympy.Add(*(q.expr(algebra) for q in groups.values()))


def _symbols(expressions: Sequence[Any]) -> set[sympy.Symbol]:
    """The symbols in all of them; a sum that they share is looked through once."""
    seen: set[Any] = set()
    out: set[sympy.Symbol] = set()
    waiting = list(expressions)
    while waiting:
        e = waiting.pop()
        if e.is_Symbol:
            out.add(e)
        elif e not in seen:
            seen.add(e)
            waiting += e.args
    return out


def _constants(network: Network, expressions: Sequence[Any]) -> tuple[Constant, ...]:
    used = _symbols(expressions)
    out = []
    at_equilibrium = {s.name for s in network.equilibrated}
    for step in network.mechanism.steps:
        if step.name in at_equilibrium:
            symbol = equilibrium(step)
            if symbol in used:
                meaning = f"equilibrium constant of {step.text}"
                out.append(Constant(symbol.name, symbol, ConstantKind.EQUILIBRIUM, meaning))
            continue
        for symbol, word in ((forward(step), "ahead"), (backward(step), "back")):
            if symbol in used:
                meaning = f"rate constant of {step.text}" + (f", {word}" if step.reversible else "")
                out.append(Constant(symbol.name, symbol, ConstantKind.RATE, meaning))
    return tuple(out)


def _silent(network: Network, solution: Solution, constants: Sequence[Constant]) -> tuple[str, ...]:
    names = {c.name for c in constants}
    for relation in solution.relations:
        names |= {f"{kind}_{relation.step.name}" for kind in ("k", "K")}
    silent = [
        s.name
        for s in network.mechanism.steps
        if not names & {f"k_{s.name}", f"k_rev_{s.name}", f"K_{s.name}"}
    ]
    if not silent:
        return ()
    which = f"step {silent[0]}" if len(silent) == 1 else f"steps {', '.join(silent)}"
    return (f"No constant of {which} stands in the law; these rates say nothing about it.",)
