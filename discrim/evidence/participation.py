"""Does a term take part: the facts about one law with and without it, on one reading of the errors."""

from __future__ import annotations

import numpy as np

from discrim.evidence.distributions import normal_of_tail
from discrim.evidence.flip_distance import flip_distance
from discrim.evidence.flips import error_margin, flip_to_effect, typical_flip
from discrim.evidence.on_edge import several_on_edge
from discrim.evidence.score import p_one_sided
from discrim.evidence.term import Effect, Kind, Participation, Term
from discrim.evidence.term_effect import detectable_effect, effect_with_interval
from discrim.evidence.term_tests import absence_test, by_objective, nested_f
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Problem


def participation(
    term: Term,
    data: Measurements,
    full: Fit,
    reduced: Fit,
    *,
    origin: str,
    level: float,
    seed: int,
    matters_above: float | None,
    brief: bool = False,
    flips: bool = True,
) -> Participation:
    """Facts about ``term`` on ``data`` (origins of the condition errors resolved).

    ``brief`` leaves out effect, margin and flip distances (a law that does not stand); without
    ``flips`` only the flip distances are left out, which no verdict needs.
    """
    alpha = 1.0 - level
    problem = Problem(term.full, data)
    two_sided = term.kind in (Kind.ORDER, Kind.FACTOR, Kind.SEVERAL)
    z, information, words, weak = absence_test(term, problem, full, reduced, seed, alpha)
    p = float("nan")
    if np.isfinite(z):
        p = 2 * p_one_sided(abs(z)) if two_sided else p_one_sided(z)
    simulated = None if weak else several_on_edge(term, full, reduced, p, alpha=alpha, seed=seed)
    if simulated is not None:
        z, p = float(normal_of_tail(simulated.p / 2)), simulated.p
        words = "conditional bootstrap, several constants on the edge"
    z, p, words = by_objective(term, problem, reduced, z, p, words, alpha)
    edge = term.kind in (Kind.ZERO, Kind.VANISH, Kind.SEVERAL)
    f = None
    if term.kind is not Kind.FACTOR:
        f = nested_f(full, reduced, edge=edge)
    effect = None
    if term.kind is not Kind.FACTOR and not brief:
        effect = effect_with_interval(term, problem, full, level)
    if term.kind is Kind.FACTOR:
        effect = Effect(1.0, 1.0, 1.0, 1.0, "every run", False)
    detectable = detectable_effect(term, problem, full, effect, alpha)
    margin = flip = typical = matters = float("nan")
    if not brief and np.isfinite(p) and p < alpha and not data.exact_conditions:
        margin = error_margin(term, data, full, seed, alpha, two_sided)
    if flips and not brief:
        s2 = full.scale2 if data.scale is Scale.ESTIMATED else 1.0
        flip = flip_distance(term.reduced, data, s2, reduced.theta, fixed=np.zeros(reduced.p, bool))
        typical = typical_flip(term, data, reduced, s2, seed)
        if matters_above is not None and effect is not None and term.kind is not Kind.FACTOR:
            matters = flip_to_effect(term, problem, full, s2, matters_above)
    return Participation(
        term.kind,
        origin,
        z,
        p,
        two_sided,
        information,
        f,
        effect,
        detectable,
        margin,
        flip,
        typical,
        matters,
        words,
        weak,
    )
