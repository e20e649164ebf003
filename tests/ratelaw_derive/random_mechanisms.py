"""Mechanisms drawn at random, of the classes that kineticists write; seeded and invented.

Each is well posed by how it is drawn and by checks on its species and on the numbers, never by
whether a law can be derived. Constants are consistent by construction: every species gets a
potential, and K of a step is exp(potentials left - potentials right), so that the product of K over
any closed cycle is one (Wegscheider 1901, Monatshefte für Chemie 22, 849-906; from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from discrim.mechanism.model import Mechanism
from discrim.mechanism.parse import parse_mechanism
from tests.ratelaw_derive import drawn_networks as networks
from tests.ratelaw_derive import drawn_surfaces as surfaces
from tests.ratelaw_derive.draft import Draft
from tests.ratelaw_derive.full_mass_action import NoSteadyState, Steady, Values, steady_state

# In turn, so that each is drawn as often as the others.
CLASSES: Mapping[str, Callable[[np.random.Generator], Draft]] = {
    "adsorbed_then_reaction": surfaces.adsorbed_then_reaction,
    "network": networks.network,
    "carriers": networks.carriers,
    "enzyme": networks.enzyme,
    "network_partly_equilibrated": networks.network_partly_equilibrated,
    "closed_cycles": networks.closed_cycles,
    "side_by_side": networks.side_by_side,
    "oxidised_surface": surfaces.oxidised_surface,
    "dissociative": surfaces.dissociative,
    "bridged": surfaces.bridged,
    "radicals": networks.radicals,
    "coupled_sites": surfaces.coupled_sites,
    "through_surface": surfaces.through_surface,
}

LEAST_NET = 1e-3  # of the largest net rate: a smaller production would measure cancellation
ALWAYS = 1e-20  # of the largest net rate: a production below this is none at all


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
    if len({t.replace("<=>", "->") for t in draft.steps.values()}) < len(draft.steps):
        return None  # one step twice
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
