"""What is printed with every derived law: assumptions, conventions, the lines of the derivation."""

from __future__ import annotations

from typing import Any

import sympy
from sympy import Rational

from discrim.mechanism.check import net
from discrim.mechanism.model import Species, Step
from discrim.ratelaw.derive_algebra import quotient
from discrim.ratelaw.derive_cycles import Relation
from discrim.ratelaw.derive_equilibria import Monomial, Powers, backward, equilibrium, forward
from discrim.ratelaw.derive_network import Network
from discrim.ratelaw.derive_solve import Solution, poly_expr
from discrim.ratelaw.model import amount, total_amount
from discrim.ratelaw.printing import plain

_LONG = 200  # terms of a sum that nobody would read
_MOST_SYMBOLS = 10_000  # in all lines of an elimination, some fifteen pages


def _listed(names: list[str]) -> str:
    if len(names) == 1:
        return names[0]
    return f"{', '.join(names[:-1])} and {names[-1]}"


def _steps(names: list[str]) -> str:
    return f"Step {names[0]} is" if len(names) == 1 else f"Steps {_listed(names)} are"


def assumptions(network: Network, solution: Solution) -> tuple[str, ...]:
    """What is taken for granted of this mechanism, full sentences."""
    out = []
    if network.equilibrated:
        names = [s.name for s in network.equilibrated]
        so = " (all reversible steps but the limiting one)" if network.taken_as_equilibrated else ""
        out.append(
            f"{_steps(names)} quasi-equilibrated: fast in both directions against the rest{so}."
        )
    limiting = network.mechanism.limiting
    if limiting:
        out.append(f"Step {limiting} is limiting.")
    if solution.unknowns:
        names = [s.name for s in solution.unknowns]
        verb = "is" if len(names) == 1 else "are"
        out.append(
            f"{_listed(names)} {verb} at steady state: made as fast as consumed, with an amount "
            "that is small against that of the reactants."
            if not network.families
            else f"{_listed(names)} {verb} at steady state: made as fast as consumed."
        )
    one_way = [s.name for s in network.kinetic if not s.reversible]
    if one_way:
        out.append(f"{_steps(one_way)} in one direction only, as written.")
    for family in network.families:
        if family.kind == "sites":
            out.append(
                f"All sites {family.name} are alike and independent: adsorbed species do not "
                "interact, spread at random, and no others take up sites."
            )
        else:
            forms = _listed([s.name for s in family.weights])
            out.append(
                f"The total of {family.name} is constant and shared between {forms}; the amounts "
                "of the other species are those not bound to it."
            )
    out += [_relation(network, r) for r in solution.relations]
    if not network.intermediates and len(network.kinetic) > 1:
        out.append("The steps run side by side and do not influence each other.")
    return tuple(out)


def _relation(network: Network, relation: Relation) -> str:
    """What a cycle says of one constant, a full sentence."""
    given_up = _tied(network, relation)
    name = relation.step.name
    if relation.equilibrated:
        return (
            f"The equilibrated steps close a cycle, so that {plain(given_up.lhs)} = "
            f"{plain(given_up.rhs)} and is not a constant of its own."
        )
    order = [s.name for s in network.mechanism.steps]
    around = _listed(sorted([name, *relation.others], key=order.index))
    return (
        f"Steps {around} close a cycle without net change, so that {plain(given_up.lhs)} = "
        f"{plain(given_up.rhs)} (microscopic reversibility) and is not a constant of its own."
    )


def _tied(network: Network, relation: Relation) -> Any:
    """The constant that a cycle gives up, in terms of the others around it."""
    fast = {s.name for s in network.equilibrated}
    steps = {s.name: s for s in network.mechanism.steps}
    value: Any = sympy.Integer(1)
    for name, e in relation.others.items():
        step = steps[name]
        own = equilibrium(step) if name in fast else forward(step) / backward(step)
        value *= own ** Rational(e.numerator, e.denominator)
    if relation.equilibrated:
        return sympy.Eq(equilibrium(relation.step), value, evaluate=False)
    return sympy.Eq(backward(relation.step), forward(relation.step) / value, evaluate=False)


def roots_words(solution: Solution) -> tuple[str, ...]:
    """Findings about what has no closed form, full sentences."""
    out = []
    for group, solved in zip(solution.groups, solution.solved, strict=True):
        names = _listed([s.name for s in group.unknowns])
        if solution.too_large:
            out.append(
                "The sums over the network have too many terms to be written out: the law is kept "
                "implicit and solved numerically, with exact derivatives."
            )
            continue
        if not solved.closed:
            out.append(
                f"The balances have no closed form for {names}: the law is kept implicit and "
                "solved numerically, with exact derivatives."
            )
        if solved.several:
            out.append(
                "The balances may have more than one positive solution; the law uses "
                + (
                    f"that with the least {names}."
                    if len(group.unknowns) == 1
                    else f"one for {names}, found from fixed starting values."
                )
            )
    return tuple(out)


def conventions(network: Network, solution: Solution) -> tuple[str, ...]:
    """How the symbols are to be read, full sentences."""
    out = [
        "Mass action: the order of each species in a step is its coefficient; amounts stand for "
        "activities.",
        "The rate constant is that of the step as written: for 2 A -> B the consumption of A is "
        "2 k [A]^2.",
    ]
    if network.equilibrated:
        out.append("An equilibrium constant K is that of its step as written, left to right.")
    if any(f.kind == "sites" for f in network.families):
        out.append(
            "Coverages are fractions of the sites of their kind and sum to 1; rate constants "
            "include the density of sites."
        )
    for family in network.families:
        if family.kind != "catalyst":
            continue
        if solution.per_catalyst:
            out.append(f"The rate is per total {family.name}.")
        else:
            out.append(
                f"In the law [total {family.name}] is the amount of {family.name} in all forms."
            )
    return tuple(out)


def _rate_symbolic(step: Step) -> Any:
    def side(parts: tuple[tuple[Species, int], ...]) -> Any:
        return sympy.Mul(*(amount(s.name) ** n for s, n in parts))

    ahead = forward(step) * side(step.left)
    return ahead - backward(step) * side(step.right) if step.reversible else ahead


def derivation(network: Network, solution: Solution, rate: Any) -> tuple[tuple[str, Any], ...]:
    """Balance, equilibria, steady states, elimination, law; coverages stand as amounts."""
    lines: list[tuple[str, Any]] = []
    for step in network.kinetic:
        lines.append((f"Net rate of step {step.name}: {step.text}", _rate_symbolic(step)))
    for family in network.families:
        total = sympy.Add(*(w * amount(s.name) for s, w in family.weights.items()))
        whole: Any = sympy.Integer(1)
        words = (
            f"Sites {family.name}: vacant and covered fractions sum to 1"
            if family.kind == "sites"
            else f"Forms of {family.name}, as fractions of its total, sum to 1"
        )
        if family.kind == "catalyst" and not solution.per_catalyst:
            words = f"Forms of {family.name} sum to its total"
            whole = total_amount(family.name)
        lines.append((words, sympy.Eq(total, whole, evaluate=False)))
    for step in network.equilibrated:
        ratio = sympy.Mul(*(amount(s.name) ** n for s, n in step.right)) / sympy.Mul(
            *(amount(s.name) ** n for s, n in step.left)
        )
        lines.append(
            (f"Step {step.name} at equilibrium", sympy.Eq(equilibrium(step), ratio, evaluate=False))
        )
    lines += _steady_lines(network, solution)
    for relation in solution.relations:
        lines.append(
            ("Constants around a closed cycle multiply to one, so", _tied(network, relation))
        )
    lines += _elimination_lines(network, solution)
    lines.append(("Rate law in the constants of the steps", rate))
    return tuple(lines)


def _steady_lines(network: Network, solution: Solution) -> list[tuple[str, Any]]:
    held = {s for step in network.equilibrated for s in net(step)}
    lines = []
    for species in solution.unknowns:
        if species in held:
            lines.append(
                (
                    f"{species.name} and what is at equilibrium with it: made as fast as consumed",
                    None,
                )
            )
            continue
        balance = sympy.Add(*(net(s).get(species, 0) * _rate_symbolic(s) for s in network.kinetic))
        lines.append((f"{species.name} at steady state", sympy.Eq(0, balance, evaluate=False)))
    return lines


def _elimination_lines(network: Network, solution: Solution) -> list[tuple[str, Any]]:
    algebra = solution.algebra
    lines: list[tuple[str, Any]] = []
    references = [amount(f.reference.name) for f in network.families]
    known = {f.reference for f in network.families}

    def raised(powers: Powers) -> list[Any]:
        return [s ** Rational(e.numerator, e.denominator) for s, e in powers.items()]

    def value(m: Monomial) -> Any:
        powers = raised(m.symbols)
        powers += [references[k] ** Rational(e.numerator, e.denominator) for k, e in m.v.items()]
        for u, e in m.u.items():
            top, bottom = solution.values[u]
            solved = (poly_expr(algebra, top) / poly_expr(algebra, bottom)) ** solution.powers[u]
            powers.append(solved ** Rational(e.numerator, e.denominator))
        return sympy.Mul(*powers)

    for group, solved in zip(solution.groups, solution.solved, strict=True):
        lines += [(f"To be solved for {_listed([s.name for s in group.unknowns])}", None)]
        lines += [("", sympy.Eq(0, e, evaluate=False)) for e in group.equations]
        if solved.closed:
            lines += [
                ("Its positive root", sympy.Eq(symbol, e, evaluate=False))
                for symbol, e in zip(group.unknowns, solved.values, strict=True)
            ]
    sums = [t.top for t in solution.totals]
    sums += [p for v in solution.values.values() for part in v for p, _ in part]
    symbols = sum(1 for p in sums for m in p for e in m if e)
    if any(len(p) > _LONG for p in sums) or symbols > _MOST_SYMBOLS:
        return [*lines, ("The intermediates are sums too long to print here", None)]
    for species, m in solution.monomials.items():
        symbol, solved = amount(species.name), value(m)
        itself = solved.is_Symbol and solved.name == symbol.name  # a root that stays a symbol
        if species not in known and not itself:
            lines.append((f"So for {species.name}", sympy.Eq(symbol, solved, evaluate=False)))
    for family, total in zip(network.families, solution.totals, strict=True):
        what = "Vacant sites" if family.kind == "sites" else "Free catalyst, as fraction of all,"
        words = f"{what} {family.reference.name} from the sum"
        inverse = 1 / quotient(total.top, total.bottom).expr(algebra)
        if inverse.is_Symbol:
            continue  # a root, which has been given
        lines.append((words, sympy.Eq(amount(family.reference.name), inverse, evaluate=False)))
    return lines
