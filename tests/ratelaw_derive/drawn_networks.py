"""Networks of catalyst forms, enzymes, carriers and chains, drawn at random."""

from __future__ import annotations

import numpy as np

from tests.ratelaw_derive.draft import Draft, arrow, chance, pick


def _forms(d: Draft, rng: np.random.Generator, n: int) -> list[str]:
    """``n`` forms of a catalyst: of a site, or of a dissolved species."""
    if chance(rng, 0.5):
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
        if k == 0 or chance(rng, 0.5):
            left.append(pick(rng, consumed))
        if k == n - 1 or chance(rng, 0.4):
            right.append(pick(rng, made))
        d.add(f"{' + '.join(left)} {arrow(rng, 0.5)} {' + '.join(right)}")
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
        if not left or chance(rng, 0.4):
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
    d.add(f"A {arrow(rng, 0.4)} {names[0]}" + pick(rng, ["", " + P"]))
    for i in range(1, n):
        giver = names[int(rng.integers(i))]
        d.add(f"{giver} + {pick(rng, 'BC')} {arrow(rng, 0.4)} {names[i]} + {pick(rng, 'PQ')}")
    for _ in range(int(rng.integers(0, 3))):
        a, b = rng.choice(n, 2, replace=False)
        d.add(f"{names[a]} + {pick(rng, 'BCD')} {arrow(rng, 0.5)} {names[b]} + {pick(rng, 'QR')}")
    d.add(f"{names[-1]} -> T")
    for name in names[:-1]:
        passed_on = any(t.startswith(f"{name} ") for t in d.steps.values())
        if not passed_on or chance(rng, 0.35):
            d.add(f"{name} + {pick(rng, 'CD')} -> U")
    return d


def enzyme(rng: np.random.Generator) -> Draft:
    """One or two substrates: ordered, random or substituted; inhibitors; products that go back."""
    d = Draft("enzyme", catalyst=["E"], families=[{"E": 1}])
    fast = chance(rng, 0.4)
    way = pick(rng, ["one", "ordered", "random", "substituted"])
    back = arrow(rng, 0.4)

    def bind(left: str, right: str) -> None:
        form = d.on(0, right)
        d.add(f"{left} <=> {form}", equilibrated=fast)

    if way == "one":
        bind("E + A", "EA")
        if chance(rng, 0.5):
            d.add(f"EA {arrow(rng, 0.6)} {d.on(0, 'EP')}")
            d.add(f"EP {back} E + P")
        else:
            d.add(f"EA {back} E + P")
    elif way == "ordered":
        bind("E + A", "EA")
        bind("EA + B", "EAB")
        d.add(f"EAB {arrow(rng, 0.5)} {d.on(0, 'EQ')} + P")
        d.add(f"EQ {back} E + Q")
    elif way == "random":
        bind("E + A", "EA")
        bind("E + B", "EB")
        bind("EA + B", "EAB")
        d.add("EB + A <=> EAB", equilibrated=fast)
        d.add(f"EAB {back} E + P + Q")
    else:
        bind("E + A", "EA")
        d.add(f"EA {arrow(rng, 0.5)} {d.on(0, 'F')} + P")
        bind("F + B", "FB")
        d.add(f"FB {back} E + Q")
    inhibited = list(d.families[0])
    for name in "IJ"[: int(rng.integers(0, 3))]:
        held = [str(x) for x in rng.permutation(inhibited)[: int(rng.integers(1, 3))]]
        for form in held:
            bound = d.on(0, f"{form}{name}")
            d.add(f"{form} + {name} <=> {bound}", equilibrated=fast or chance(rng, 0.5))
    return d


def closed_cycles(rng: np.random.Generator) -> Draft:
    """A modifier binds to every form: closed reversible cycles, each with its relation of K."""
    d = Draft("closed reversible cycles")
    ligands = pick(rng, ["AI", "AI", "AB", "AIJ"])
    forms = _forms(d, rng, 2 ** len(ligands))
    fast = chance(rng, 0.3)
    for code in range(len(forms)):
        for bit, name in enumerate(ligands):
            if not code >> bit & 1:
                bound = forms[code | 1 << bit]
                d.add(f"{forms[code]} + {name} <=> {bound}", equilibrated=fast)
    need = 3 if ligands == "AB" else 1
    turning = [c for c in range(len(forms)) if c & need == need]
    for code in turning:
        if code == need or chance(rng, 0.6):
            d.add(f"{forms[code]} {arrow(rng, 0.4)} {forms[code & ~need]} + P")
    return d


def side_by_side(rng: np.random.Generator) -> Draft:
    """One reversible reaction over several ways at once: their equilibrium is the same."""
    d = Draft("one equilibrium, several ways", catalyst=["E"], families=[{"E": 1, "EA": 1}])
    d.add("A + E <=> EA")
    if chance(rng, 0.5):
        d.on(0, "EP")
        d.add("EA <=> EP")
        d.add("EP <=> E + P")
    else:
        d.add("EA <=> E + P")
    free = chance(rng, 0.5)
    if free:
        d.add("A <=> P")
    if chance(rng, 0.5) or not free:
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


def radicals(rng: np.random.Generator) -> Draft:
    """A chain with initiation, propagation and termination of second order in radicals."""
    d = Draft("radical chain, second-order termination")
    two = chance(rng, 0.7)
    d.steady = ["X", "Y"] if two else ["X"]
    d.add(f"{pick(rng, ['M', 'M + A', 'M + D'])} {arrow(rng, 0.3)} 2 X")
    if two:
        d.add(f"X + A {arrow(rng, 0.4)} P + Y")
        d.add(f"Y + B {arrow(rng, 0.2)} Q + X")
    else:
        d.add("X + A -> P + X")
    ends = ["2 X -> T"] + (["2 Y -> U", "X + Y -> V"] if two else [])
    for k in rng.permutation(len(ends))[: int(rng.integers(1, len(ends) + 1))]:
        d.add(ends[int(k)])
    if chance(rng, 0.3):
        d.add(f"{pick(rng, d.steady)} -> W")
    return d
