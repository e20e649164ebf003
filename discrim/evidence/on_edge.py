"""Several constants that are zero together, at the edge of their range: more power than a test that
counts rises and falls alike."""

from __future__ import annotations

import numpy as np

from discrim.evidence.bootstrap import RISK, Simulated, nested_p
from discrim.evidence.term import Kind, Term
from discrim.fit.fit import Fit


def several_on_edge(
    term: Term, full: Fit, reduced: Fit, p: float, *, alpha: float, seed: int
) -> Simulated | None:
    """p-value that all of the term's constants are zero, none of which can be below; from drawn tables.

    None where the test does not apply: other kinds of term, constants that can be negative, a
    variance estimated together with errors of conditions, or ``p``, of the score test, so small that
    the decision is clear without. The score test of several constants is chi-squared and valid on the
    edge, but counts what the data say in the wrong direction as evidence too. Measured for two
    constants on 14 runs: 75 % against 64 % of true effects found, no more false ones (4 to 7 of 100).
    """
    if term.kind is not Kind.SEVERAL or not p >= RISK:
        return None
    psi = list(term.psi)
    if full.predictor.lower[psi].any() or reduced.degrees_of_freedom < 1:
        return None
    if full.problem.joint_scale or not (full.ok and reduced.ok):
        return None
    at = {n: k for k, n in enumerate(reduced.predictor.names)}
    names = full.predictor.names
    if not all(n in at or k in psi for k, n in enumerate(names)):
        return None
    near = np.array([0.0 if k in psi else reduced.theta[at[n]] for k, n in enumerate(names)])
    return nested_p(reduced, full, np.array([near, full.theta]), alpha=alpha, seed=seed)
