"""What thermodynamics asks of the constants of steps that close a cycle.

Around reversible steps whose changes cancel, the equilibrium constants multiply to one (Wegscheider
1901, Zeitschrift fuer physikalische Chemie 39, 257-303, pages from memory): microscopic
reversibility. Each independent cycle takes one constant away, so that a law is never fitted with
constants that no chemistry allows.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from discrim.mechanism.exact import null_space, row_reduce
from discrim.mechanism.model import Step
from discrim.ratelaw.derive_network import Network, changes


@dataclass(frozen=True, slots=True)
class Relation:
    """The equilibrium constant of ``step`` is the product of those of ``others`` to their powers.

    ``equilibrated``: it is written K_step; else as k_step/k_rev_step, and k_rev_step is replaced.
    """

    step: Step
    others: Mapping[str, Fraction]
    equilibrated: bool


def relations(network: Network) -> tuple[Relation, ...]:
    """One relation for each independent cycle of reversible steps without net change.

    The constant that is given up is that of the step written last, of the steps that are not
    equilibrated if the cycle has one.
    """
    fast = {s.name for s in network.equilibrated}
    reversible = [s for s in network.mechanism.steps if s.reversible]
    ordered = [s for s in reversed(reversible) if s.name not in fast]
    ordered += [s for s in reversed(reversible) if s.name in fast]
    if len(ordered) < 2:
        return ()
    cycles = null_space(changes(ordered, network.species), len(ordered))
    if not cycles:
        return ()
    reduced, pivots = row_reduce(cycles)
    return tuple(
        Relation(
            ordered[p],
            {ordered[c].name: -x for c, x in enumerate(reduced[r]) if x and c != p},
            ordered[p].name in fast,
        )
        for r, p in enumerate(pivots)
    )
