"""Mechanisms drawn at random, of the classes that kineticists write; seeded and invented.

Each is well posed by how it is drawn and by checks on its species and on the numbers, never by
whether a law can be derived. Constants are consistent by construction: every species gets a potential, and
K of a step is exp(potentials left - potentials right), so that the product of K over any closed
cycle is one (Wegscheider 1901, Monatshefte für Chemie 22, 849-906; from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from discrim.mechanism.model import Mechanism
from discrim.mechanism.parse import parse_mechanism
from tests.ratelaw_derive.full_mass_action import NoSteadyState, Steady, Values, steady_state

LEAST_NET = 1e-3  # of the largest net rate: a smaller production would measure cancellation
ALWAYS = 1e-20  # of the largest net rate: a production below this is none at all


@dataclass(slots=True)
class Draft:
    """A mechanism as text, with what its drawing knows of it."""

    kind: str
    steps: dict[str, str] = field(default_factory=dict)
    families: list[dict[str, int]] = field(default_factory=list)
    steady: list[str] = field(default_factory=list)
    catalyst: list[str] = field(default_factory=list)
    sites: list[str] = field(default_factory=list)
    equilibrated: list[str] = field(default_factory=list)
    limiting: str = ""

    def add(self, text: str, *, equilibrated: bool = False, name: str = "") -> str:
        name = name or f"s{len(self.steps) + 1}"
        self.steps[name] = text
        if equilibrated:
            self.equilibrated.append(name)
        return name

    def on(self, family: int, form: str, holds: int = 1) -> str:
        """``form`` as a member of the family, with the sign of its site."""
        self.families[family][form] = holds
        return form

    def keywords(self) -> dict[str, Any]:
        """For :func:`discrim.mechanism.parse.parse_mechanism`."""
        assume: dict[str, Any] = {}
        if self.equilibrated:
            assume["equilibrated"] = self.equilibrated
        if self.limiting:
            assume["limiting"] = self.limiting
        if self.steady:
            assume["steady"] = self.steady
        return {
            "steps": self.steps,
            "sites": self.sites,
            "catalyst": self.catalyst,
            "assume": assume,
        }


@dataclass(frozen=True, slots=True)
class Case:
    """A drawn mechanism with numbers and its numerical steady state."""

    number: int
    draft: Draft
    mechanism: Mechanism
    fluid: tuple[str, ...]
    values: Values
    steady: Steady

    def text(self) -> str:
        """All of it, to be read in a failure."""
        lines = [f"number {self.number}, {self.draft.kind}", repr(self.draft.keywords())]
        lines += [f"log k {dict(self.values.forward)}", f"log K {dict(self.values.equilibrium)}"]
        lines += [f"amounts {dict(self.values.amounts)}, totals {list(self.values.totals)}"]
        return "\n".join(lines)


def cases(seed: int, count: int) -> list[Case]:
    """``count`` different mechanisms, the classes in turn; the same for the same seed."""
    rng = np.random.default_rng(seed)
    out: list[Case] = []
    kinds = list(CLASSES)
    seen: set[str] = set()
    tries = 0
    while len(out) < count:
        tries += 1
        if tries > 50 * count:
            raise RuntimeError("hardly any drawing is well posed")
        draft = CLASSES[kinds[len(out) % len(kinds)]](rng)
        text = repr(draft.keywords())
        case = None if text in seen else _case(len(out), draft, rng)
        if case is not None:
            seen.add(text)
            out.append(case)
    return out


def _case(number: int, draft: Draft, rng: np.random.Generator) -> Case | None:
    """Numbers for a draft; None when the mechanism is ill posed."""
    mechanism = parse_mechanism(name=f"drawn {number}", **draft.keywords())
    inner = {name for family in draft.families for name in family} | set(draft.steady)
    every = {s.name for step in mechanism.steps for s, _ in (*step.left, *step.right)}
    fluid = tuple(sorted(every - inner))
    if not fluid or not inner <= every or not _made_and_consumed(mechanism, inner):
        return None
    for _ in range(4):
        potential = {name: rng.uniform(-1.5, 1.5) for name in sorted(every)}
        forward = {s.name: rng.uniform(-2, 2) for s in mechanism.steps}
        equilibrium = {
            s.name: sum(n * potential[x.name] for x, n in s.left)
            - sum(n * potential[x.name] for x, n in s.right)
            for s in mechanism.steps
            if s.reversible
        }
        amounts = {name: float(10 ** rng.uniform(-0.6, 0.6)) for name in fluid}
        totals = [
            float(10 ** rng.uniform(-0.5, 0.5)) if draft.catalyst else 1.0 for _ in draft.families
        ]
        values = Values(forward, equilibrium, amounts, totals)
        try:
            steady = steady_state(
                mechanism,
                values,
                families=draft.families,
                steady=draft.steady,
                equilibrated=equilibrated_steps(draft, mechanism),
            )
        except NoSteadyState:
            return None
        largest = max(abs(r) for r in steady.rates.values())
        shares = [abs(p) / largest for p in steady.production.values() if largest]
        if not shares or max(shares) < ALWAYS:
            return None  # at rest for any values
        if all(x < ALWAYS or x > LEAST_NET for x in shares):
            return Case(number, draft, mechanism, fluid, values, steady)
    return None


def equilibrated_steps(draft: Draft, mechanism: Mechanism) -> list[str]:
    """Equilibrated steps: those named, else all that are reversible beside a limiting one."""
    if draft.equilibrated or not draft.limiting or draft.steady:
        return draft.equilibrated
    return [s.name for s in mechanism.steps if s.reversible and s.name != draft.limiting]


def _made_and_consumed(mechanism: Mechanism, inner: set[str]) -> bool:
    for name in inner:
        made = consumed = False
        for step in mechanism.steps:
            change = sum(n for s, n in step.right if s.name == name)
            change -= sum(n for s, n in step.left if s.name == name)
            made |= change > 0 or (step.reversible and change < 0)
            consumed |= change < 0 or (step.reversible and change > 0)
        if not (made and consumed):
            return False
    return True


def _pick(rng: np.random.Generator, options: Any) -> Any:
    return options[int(rng.integers(len(options)))]


def _chance(rng: np.random.Generator, p: float) -> bool:
    return bool(rng.random() < p)


def _arrow(rng: np.random.Generator, reversible: float) -> str:
    return "<=>" if _chance(rng, reversible) else "->"


def _surface(kind: str, *signs: str) -> Draft:
    return Draft(kind, sites=list(signs), families=[{sign: 1} for sign in signs])


def adsorbed_then_reaction(rng: np.random.Generator) -> Draft:
    """Equilibrated adsorption of one to four species, whole or as halves, one limiting step."""
    signs = _pick(rng, [("*",), ("*",), ("*", "#")])
    d = _surface("adsorption, one limiting step", *signs)
    held: list[str] = []
    for name in "ABCD"[: int(rng.integers(1, 5))]:
        k = int(rng.integers(len(signs)))
        halves = _chance(rng, 0.3)
        form = d.on(k, f"{name}{signs[k]}")
        v = signs[k]
        d.add(
            f"{name}2 + 2 {v} <=> 2 {form}" if halves else f"{name} + {v} <=> {form}",
            equilibrated=True,
        )
        held.append(form)
    first = held[0]
    other = _pick(rng, held)
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
    if _chance(rng, 0.4):  # the product stays, and leaves at equilibrium
        sign = right.pop(0)
        right.append(d.on(signs.index(sign), f"P{sign}"))
        d.add(f"P{sign} <=> P + {sign}", equilibrated=True)
    else:
        right.append("P")
    step = d.add(f"{_side(left)} {_arrow(rng, 0.4)} {_side(right)}", name="surface")
    d.limiting = step
    if _chance(rng, 0.3):
        d.equilibrated = []  # the limiting step alone says the same
    return d


def _side(parts: list[str]) -> str:
    counts: dict[str, int] = {}
    for p in parts:
        counts[p] = counts.get(p, 0) + 1
    return " + ".join(p if n == 1 else f"{n} {p}" for p, n in counts.items())


def _forms(d: Draft, rng: np.random.Generator, n: int) -> list[str]:
    """``n`` forms of a catalyst: of a site, or of a dissolved species."""
    if _chance(rng, 0.5):
        d.sites = ["*"]
        names = ["*"] + [f"F{i}*" for i in range(1, n)]
    else:
        names = [f"F{i}" for i in range(n)]
        d.catalyst = ["F0"]
    d.families = [dict.fromkeys(names, 1)]
    return names


def network(rng: np.random.Generator, smallest: int = 3, largest: int = 9) -> Draft:
    """Catalyst forms joined at random: a ring, so that all connect, and chords."""
    d = Draft("network of catalyst forms")
    n = int(rng.integers(smallest, largest + 1))
    forms = _forms(d, rng, n)
    order = [0, *(1 + int(i) for i in rng.permutation(n - 1))]
    edges = [(order[i], order[(i + 1) % n]) for i in range(n)]
    chords = int(rng.integers(1, max(2, min(5, 14 - n))))
    while chords:
        a, b = (int(i) for i in rng.choice(n, 2, replace=False))
        chords -= 1
        if (a, b) not in edges and (b, a) not in edges:
            edges.append((a, b))
    consumed, made = ["A", "B", "C"], ["P", "Q", "R"]
    for k, (a, b) in enumerate(edges):
        left, right = [forms[a]], [forms[b]]
        if k == 0 or _chance(rng, 0.5):
            left.append(_pick(rng, consumed))
        if k == n - 1 or _chance(rng, 0.4):
            right.append(_pick(rng, made))
        d.add(f"{' + '.join(left)} {_arrow(rng, 0.5)} {' + '.join(right)}")
    return d


def network_partly_equilibrated(rng: np.random.Generator) -> Draft:
    """As :func:`network`; reversible steps that close no cycle may be equilibrated."""
    d = network(rng, 3, 7)
    d.kind = "network, some steps equilibrated"
    members = d.families[0]
    part = {name: name for name in members}

    def root(x: str) -> str:
        while part[x] != x:
            x = part[x]
        return x

    for name, text in d.steps.items():
        left, right = text.split(" <=> ") if " <=> " in text else ("", "")
        if not left or _chance(rng, 0.4):
            continue
        a, b = (root(next(t for t in side.split(" + ") if t in members)) for side in (left, right))
        if a != b:
            part[a] = b
            d.equilibrated.append(name)
    if len({root(x) for x in members}) < 2:
        d.equilibrated.pop()
    return d


def carriers(rng: np.random.Generator) -> Draft:
    """Carriers made from reactants, passed on in first-order steps and lost: an open network."""
    d = Draft("carriers, linear")
    n = int(rng.integers(2, 6))
    d.steady = names = [f"X{i}" for i in range(n)]
    d.add(f"A {_arrow(rng, 0.4)} {names[0]}" + _pick(rng, ["", " + P"]))
    for i in range(1, n):
        giver = names[int(rng.integers(i))]
        d.add(f"{giver} + {_pick(rng, 'BC')} {_arrow(rng, 0.4)} {names[i]} + {_pick(rng, 'PQ')}")
    for _ in range(int(rng.integers(0, 3))):
        a, b = rng.choice(n, 2, replace=False)
        d.add(
            f"{names[a]} + {_pick(rng, 'BCD')} {_arrow(rng, 0.5)} {names[b]} + {_pick(rng, 'QR')}"
        )
    d.add(f"{names[-1]} -> T")
    for name in names[:-1]:
        passed_on = any(t.startswith(f"{name} ") for t in d.steps.values())
        if not passed_on or _chance(rng, 0.35):
            d.add(f"{name} + {_pick(rng, 'CD')} -> U")
    return d


def enzyme(rng: np.random.Generator) -> Draft:
    """One or two substrates: ordered, random or substituted; inhibitors; products that go back."""
    d = Draft("enzyme", catalyst=["E"], families=[{"E": 1}])
    fast = _chance(rng, 0.4)
    way = _pick(rng, ["one", "ordered", "random", "substituted"])
    back = _arrow(rng, 0.4)

    def bind(left: str, right: str) -> None:
        form = d.on(0, right)
        d.add(f"{left} <=> {form}", equilibrated=fast)

    if way == "one":
        bind("E + A", "EA")
        if _chance(rng, 0.5):
            d.add(f"EA {_arrow(rng, 0.6)} {d.on(0, 'EP')}")
            d.add(f"EP {back} E + P")
        else:
            d.add(f"EA {back} E + P")
    elif way == "ordered":
        bind("E + A", "EA")
        bind("EA + B", "EAB")
        d.add(f"EAB {_arrow(rng, 0.5)} {d.on(0, 'EQ')} + P")
        d.add(f"EQ {back} E + Q")
    elif way == "random":
        bind("E + A", "EA")
        bind("E + B", "EB")
        bind("EA + B", "EAB")
        d.add("EB + A <=> EAB", equilibrated=fast)
        d.add(f"EAB {back} E + P + Q")
    else:
        bind("E + A", "EA")
        d.add(f"EA {_arrow(rng, 0.5)} {d.on(0, 'F')} + P")
        bind("F + B", "FB")
        d.add(f"FB {back} E + Q")
    inhibited = list(d.families[0])
    for name in "IJ"[: int(rng.integers(0, 3))]:
        held = [str(x) for x in rng.permutation(inhibited)[: int(rng.integers(1, 3))]]
        for form in held:
            bound = d.on(0, f"{form}{name}")
            d.add(f"{form} + {name} <=> {bound}", equilibrated=fast or _chance(rng, 0.5))
    return d


def closed_cycles(rng: np.random.Generator) -> Draft:
    """A modifier binds to every form: closed reversible cycles, each with its relation of K."""
    d = Draft("closed reversible cycles")
    ligands = _pick(rng, ["AI", "AI", "AB", "AIJ"])
    forms = _forms(d, rng, 2 ** len(ligands))
    fast = _chance(rng, 0.3)
    for code in range(len(forms)):
        for bit, name in enumerate(ligands):
            if not code >> bit & 1:
                bound = forms[code | 1 << bit]
                d.add(f"{forms[code]} + {name} <=> {bound}", equilibrated=fast)
    need = 3 if ligands == "AB" else 1
    turning = [c for c in range(len(forms)) if c & need == need]
    for code in turning:
        if code == need or _chance(rng, 0.6):
            d.add(f"{forms[code]} {_arrow(rng, 0.4)} {forms[code & ~need]} + P")
    return d


def side_by_side(rng: np.random.Generator) -> Draft:
    """One reversible reaction over several ways at once: their equilibrium is the same."""
    d = Draft("one equilibrium, several ways", catalyst=["E"], families=[{"E": 1, "EA": 1}])
    d.add("A + E <=> EA")
    if _chance(rng, 0.5):
        d.on(0, "EP")
        d.add("EA <=> EP")
        d.add("EP <=> E + P")
    else:
        d.add("EA <=> E + P")
    free = _chance(rng, 0.5)
    if free:
        d.add("A <=> P")
    if _chance(rng, 0.5) or not free:
        d.add("A + H <=> P + H")
    modifier = int(rng.integers(4))
    if modifier:
        d.on(0, "EI")
        d.add("I + E <=> EI")
    if modifier > 1:
        d.on(0, "EIA")
        d.add("EI + A <=> EIA")
        d.add("EIA <=> EI + P")
    if modifier > 2:
        d.add("EA + I <=> EIA")
    return d


def oxidised_surface(rng: np.random.Generator) -> Draft:
    """The surface oxidises the reactant and is oxidised again; products may stay on it."""
    d = _surface("surface oxidised and reduced", "*")
    d.on(0, "O*")
    d.add("R + O* -> Q + *")
    if _chance(rng, 0.5):
        d.add("O2 + 2 * -> 2 O*")  # quadratic in the vacant sites
    else:
        d.on(0, "O2*")
        d.add(f"O2 + * {_arrow(rng, 0.5)} O2*")
        d.add("O2* + R -> O* + Q" if _chance(rng, 0.5) else "O2* + * -> 2 O*")
    if _chance(rng, 0.5):
        d.on(0, "W*")
        d.add("W + * <=> W*", equilibrated=_chance(rng, 0.7))
    if _chance(rng, 0.4):
        d.on(0, "R*")
        d.add("R + * <=> R*", equilibrated=_chance(rng, 0.7))
        if _chance(rng, 0.5):
            d.add("R* + O* -> Q + 2 *")
    return d


def dissociative(rng: np.random.Generator) -> Draft:
    """Adsorption in halves that is not at equilibrium, then a reaction with a partner."""
    d = _surface("adsorption in halves, not at equilibrium", "*")
    d.on(0, "H*")
    d.add(f"H2 + 2 * {_arrow(rng, 0.6)} 2 H*", name="ads")
    if _chance(rng, 0.6):
        d.on(0, "A*")
        d.add("A + * <=> A*", equilibrated=_chance(rng, 0.7))
        if _chance(rng, 0.5):
            d.add("A* + H* -> P + 2 *")
        else:
            d.on(0, "AH*")
            d.add(f"A* + H* {_arrow(rng, 0.5)} AH* + *")
            d.add("AH* + H* -> P + 2 *")
    else:
        d.add(f"H* + A {_arrow(rng, 0.4)} P + *")
    if _chance(rng, 0.3):
        d.on(0, "I*")
        d.add("I + * <=> I*", equilibrated=True)
    return d


def bridged(rng: np.random.Generator) -> Draft:
    """A species on two sites at once: the balance of sites is quadratic."""
    d = _surface("bridged over two sites", "*")
    d.on(0, "A**", 2)
    d.add("A + 2 * <=> A**", equilibrated=True)
    if _chance(rng, 0.6):
        d.on(0, "B*")
        halves = _chance(rng, 0.4)
        d.add("B2 + 2 * <=> 2 B*" if halves else "B + * <=> B*", equilibrated=True)
        if _chance(rng, 0.7):
            d.add(f"A** + B* {_arrow(rng, 0.3)} P + 3 *")
            return d
    if _chance(rng, 0.4):
        d.on(0, "C*")
        d.add("C + * <=> C*", equilibrated=True)
    if _chance(rng, 0.3):
        d.on(0, "P*")
        d.add("P* <=> P + *", equilibrated=True)
        d.add(f"A** {_arrow(rng, 0.5)} P* + *")
    else:
        d.add(f"A** {_arrow(rng, 0.3)} P + 2 *" if _chance(rng, 0.5) else "A** + Z -> P + 2 *")
    return d


def radicals(rng: np.random.Generator) -> Draft:
    """A chain with initiation, propagation and termination of second order in radicals."""
    d = Draft("radical chain, second-order termination")
    two = _chance(rng, 0.7)
    d.steady = ["X", "Y"] if two else ["X"]
    d.add(f"{_pick(rng, ['M', 'M + A', 'M + D'])} {_arrow(rng, 0.3)} 2 X")
    if two:
        d.add(f"X + A {_arrow(rng, 0.4)} P + Y")
        d.add(f"Y + B {_arrow(rng, 0.2)} Q + X")
    else:
        d.add("X + A -> P + X")
    ends = ["2 X -> T"] + (["2 Y -> U", "X + Y -> V"] if two else [])
    for k in rng.permutation(len(ends))[: int(rng.integers(1, len(ends) + 1))]:
        d.add(ends[int(k)])
    if _chance(rng, 0.3):
        d.add(f"{_pick(rng, d.steady)} -> W")
    return d


def coupled_sites(rng: np.random.Generator) -> Draft:
    """Two kinds of site, each with its own forms; a species passes between them."""
    d = _surface("two kinds of site", "*", "#")
    d.on(0, "A*")
    d.on(1, "B#")
    d.add("A + * <=> A*", equilibrated=_chance(rng, 0.6))
    d.add("B + # <=> B#", equilibrated=True)
    d.add(f"A* + B# {_arrow(rng, 0.4)} P + * + #")
    if _chance(rng, 0.5):
        d.on(0, "C*")
        d.add("C + * <=> C*", equilibrated=_chance(rng, 0.6))
    if _chance(rng, 0.5):
        d.on(1, "H#")
        d.add("H2 + 2 # <=> 2 H#", equilibrated=True)
    return d


def through_surface(rng: np.random.Generator) -> Draft:
    """Equilibrated adsorption, then surface steps one after the other at steady state."""
    d = _surface("equilibrated adsorption, surface steps in turn", "*")
    d.on(0, "A*")
    d.add("A + * <=> A*", equilibrated=True)
    hydrogen = _chance(rng, 0.5)
    if hydrogen:
        d.on(0, "H*")
        d.add("H2 + 2 * <=> 2 H*", equilibrated=True)
    at = "A*"
    for k in range(int(rng.integers(1, 4))):
        to = d.on(0, f"Y{k}*")
        with_h = hydrogen and _chance(rng, 0.7)
        left, right = (f"{at} + H*", f"{to} + *") if with_h else (at, to)
        d.add(f"{left} {_arrow(rng, 0.6)} {right}")
        at = to
    d.add(f"{at} {_arrow(rng, 0.4)} P + *")
    if _chance(rng, 0.4):
        d.add("A* -> Q + *")
    if _chance(rng, 0.4):
        d.on(0, "P*")
        d.add("P + * <=> P*", equilibrated=True)
    return d


# In turn, so that each is drawn as often as the others.
CLASSES: Mapping[str, Callable[[np.random.Generator], Draft]] = {
    "adsorbed_then_reaction": adsorbed_then_reaction,
    "network": network,
    "carriers": carriers,
    "enzyme": enzyme,
    "network_partly_equilibrated": network_partly_equilibrated,
    "closed_cycles": closed_cycles,
    "side_by_side": side_by_side,
    "oxidised_surface": oxidised_surface,
    "dissociative": dissociative,
    "bridged": bridged,
    "radicals": radicals,
    "coupled_sites": coupled_sites,
    "through_surface": through_surface,
}
