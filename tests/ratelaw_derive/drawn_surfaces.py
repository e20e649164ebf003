"""Mechanisms on surfaces, drawn at random: adsorption, sites of several kinds, bridges."""

from __future__ import annotations

import numpy as np

from tests.ratelaw_derive.draft import Draft, arrow, chance, pick


def _surface(kind: str, *signs: str) -> Draft:
    return Draft(kind, sites=list(signs), families=[{sign: 1} for sign in signs])


def _side(parts: list[str]) -> str:
    counts: dict[str, int] = {}
    for p in parts:
        counts[p] = counts.get(p, 0) + 1
    return " + ".join(p if n == 1 else f"{n} {p}" for p, n in counts.items())


def adsorbed_then_reaction(rng: np.random.Generator) -> Draft:
    """Equilibrated adsorption of one to four species, whole or as halves, one limiting step."""
    signs = pick(rng, [("*",), ("*",), ("*", "#")])
    d = _surface("adsorption, one limiting step", *signs)
    held: list[str] = []
    for name in "ABCD"[: int(rng.integers(1, 5))]:
        k = int(rng.integers(len(signs)))
        halves = chance(rng, 0.3)
        form = d.on(k, f"{name}{signs[k]}")
        v = signs[k]
        d.add(
            f"{name}2 + 2 {v} <=> 2 {form}" if halves else f"{name} + {v} <=> {form}",
            equilibrated=True,
        )
        held.append(form)
    first = held[0]
    other = pick(rng, held)
    way = int(rng.integers(5))
    if way == 0:
        left, freed = [first], [first[-1]]
    elif way == 1:
        left, freed = [first, first[-1]], [first[-1], first[-1]]
    elif way == 2 and other != first:
        left, freed = [first, other], [first[-1], other[-1]]
    elif way == 3 and other != first:
        left, freed = [first, other, other], [first[-1], other[-1], other[-1]]
    else:
        left, freed = [first, "Z"], [first[-1]]
    right = list(freed)
    if chance(rng, 0.4):  # the product stays, and leaves at equilibrium
        sign = right.pop(0)
        right.append(d.on(signs.index(sign), f"P{sign}"))
        d.add(f"P{sign} <=> P + {sign}", equilibrated=True)
    else:
        right.append("P")
    step = d.add(f"{_side(left)} {arrow(rng, 0.4)} {_side(right)}", name="surface")
    d.limiting = step
    if chance(rng, 0.3):
        d.equilibrated = []  # the limiting step alone says the same
    return d


def oxidised_surface(rng: np.random.Generator) -> Draft:
    """The surface oxidises the reactant and is oxidised again; products may stay on it."""
    d = _surface("surface oxidised and reduced", "*")
    d.on(0, "O*")
    d.add("R + O* -> Q + *")
    if chance(rng, 0.5):
        d.add("O2 + 2 * -> 2 O*")  # quadratic in the vacant sites
    else:
        d.on(0, "O2*")
        d.add(f"O2 + * {arrow(rng, 0.5)} O2*")
        d.add("O2* + R -> O* + Q" if chance(rng, 0.5) else "O2* + * -> 2 O*")
    if chance(rng, 0.5):
        d.on(0, "W*")
        d.add("W + * <=> W*", equilibrated=chance(rng, 0.7))
    if chance(rng, 0.4):
        d.on(0, "R*")
        d.add("R + * <=> R*", equilibrated=chance(rng, 0.7))
        if chance(rng, 0.5):
            d.add("R* + O* -> Q + 2 *")
    return d


def dissociative(rng: np.random.Generator) -> Draft:
    """Adsorption in halves that is not at equilibrium, then a reaction with a partner."""
    d = _surface("adsorption in halves, not at equilibrium", "*")
    d.on(0, "H*")
    d.add(f"H2 + 2 * {arrow(rng, 0.6)} 2 H*", name="ads")
    if chance(rng, 0.6):
        d.on(0, "A*")
        d.add("A + * <=> A*", equilibrated=chance(rng, 0.7))
        if chance(rng, 0.5):
            d.add("A* + H* -> P + 2 *")
        else:
            d.on(0, "AH*")
            d.add(f"A* + H* {arrow(rng, 0.5)} AH* + *")
            d.add("AH* + H* -> P + 2 *")
    else:
        d.add(f"H* + A {arrow(rng, 0.4)} P + *")
    if chance(rng, 0.3):
        d.on(0, "I*")
        d.add("I + * <=> I*", equilibrated=True)
    return d


def bridged(rng: np.random.Generator) -> Draft:
    """A species on two sites at once: the balance of sites is quadratic."""
    d = _surface("bridged over two sites", "*")
    d.on(0, "A**", 2)
    d.add("A + 2 * <=> A**", equilibrated=True)
    if chance(rng, 0.6):
        d.on(0, "B*")
        halves = chance(rng, 0.4)
        d.add("B2 + 2 * <=> 2 B*" if halves else "B + * <=> B*", equilibrated=True)
        if chance(rng, 0.7):
            d.add(f"A** + B* {arrow(rng, 0.3)} P + 3 *")
            return d
    if chance(rng, 0.4):
        d.on(0, "C*")
        d.add("C + * <=> C*", equilibrated=True)
    if chance(rng, 0.3):
        d.on(0, "P*")
        d.add("P* <=> P + *", equilibrated=True)
        d.add(f"A** {arrow(rng, 0.5)} P* + *")
    else:
        d.add(f"A** {arrow(rng, 0.3)} P + 2 *" if chance(rng, 0.5) else "A** + Z -> P + 2 *")
    return d


def coupled_sites(rng: np.random.Generator) -> Draft:
    """Two kinds of site, each with its own forms; a species passes between them."""
    d = _surface("two kinds of site", "*", "#")
    d.on(0, "A*")
    d.on(1, "B#")
    d.add("A + * <=> A*", equilibrated=chance(rng, 0.6))
    d.add("B + # <=> B#", equilibrated=True)
    d.add(f"A* + B# {arrow(rng, 0.4)} P + * + #")
    if chance(rng, 0.5):
        d.on(0, "C*")
        d.add("C + * <=> C*", equilibrated=chance(rng, 0.6))
    if chance(rng, 0.5):
        d.on(1, "H#")
        d.add("H2 + 2 # <=> 2 H#", equilibrated=True)
    return d


def through_surface(rng: np.random.Generator) -> Draft:
    """Equilibrated adsorption, then surface steps one after the other at steady state."""
    d = _surface("equilibrated adsorption, surface steps in turn", "*")
    d.on(0, "A*")
    d.add("A + * <=> A*", equilibrated=True)
    hydrogen = chance(rng, 0.5)
    if hydrogen:
        d.on(0, "H*")
        d.add("H2 + 2 * <=> 2 H*", equilibrated=True)
    at = "A*"
    for k in range(int(rng.integers(1, 4))):
        to = d.on(0, f"Y{k}*")
        with_h = hydrogen and chance(rng, 0.7)
        left, right = (f"{at} + H*", f"{to} + *") if with_h else (at, to)
        d.add(f"{left} {arrow(rng, 0.6)} {right}")
        at = to
    d.add(f"{at} {arrow(rng, 0.4)} P + *")
    if chance(rng, 0.4):
        d.add("A* -> Q + *")
    if chance(rng, 0.4):
        d.on(0, "P*")
        d.add("P + * <=> P*", equilibrated=True)
    return d
