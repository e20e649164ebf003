"""Which pathways of a mechanism the runs need: every law of its lattice fitted to the same runs.

These are facts beside the verdicts and change none of them. A set of pathways is enough when its
law is a proven case of the full one and the nested test does not reject it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import sympy

from discrim.errors import DiscrimError
from discrim.evidence.criteria import criteria
from discrim.evidence.rivals import table_key
from discrim.evidence.term_tests import nested_f
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import Measurements, Scale
from discrim.ratelaw.lattice import Edge, Lattice, Pair, lattice
from discrim.ratelaw.model import RateLaw
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound, bind
from discrim.weigh.laws import CandidateLaw, measured_names, observed, per_amount_of_catalyst
from discrim.weigh.sameness import expanded

MOST_LAWS = 63  # all sets of six pathways
STARTS = 8  # of a fit; the laws are smaller than the full one, which has had more


@dataclass(frozen=True, slots=True, eq=False)
class Tried:
    """One law of the lattice on the runs.

    ``p`` of the nested test against the full law (None: not proven to be a case of it, the full
    law itself, or no degrees of freedom); ``enough`` None where ``p`` is; True for the full law.
    """

    fit: Fit
    aicc: float | None
    p: float | None
    enough: bool | None


@dataclass(frozen=True, slots=True, eq=False)
class KnockOuts:
    """The lattice of one candidate, with what the runs say of each law (``tried``) and edge (``p``).

    ``smallest`` : indices of the laws that are enough while none of their proven cases is
    """

    lattice: Lattice
    tried: tuple[Tried, ...]
    p: tuple[float | None, ...]
    smallest: tuple[int, ...]


def knock_outs(
    laws: Sequence[CandidateLaw],
    bounds: Sequence[Bound],
    fits: Sequence[Fit],
    stands: Sequence[bool],
    bench: Bench,
    common: Measurements,
    *,
    level: float,
    seed: int,
) -> tuple[KnockOuts | None, ...]:
    """The lattice of each candidate; None where it has fewer than two pathways or does not stand.

    Against a law that the runs reject no nested test means anything. ``fits`` : of all candidates
    to the same measurements; a law that is among the candidates is not fitted again. ``common`` :
    the measurements with one scale for all, for AICc.
    """
    pool = _Pool(laws, bounds, fits, bench, seed)
    return tuple(
        _one(i, laws[i], pool, bench, common, level) if stands[i] and fits[i].ok else None
        for i in range(len(laws))
    )


def _one(
    i: int, law: CandidateLaw, pool: _Pool, bench: Bench, common: Measurements, level: float
) -> KnockOuts | None:
    if law.candidate.mechanism is None:
        return None
    binder = _Binder(i, law, pool)
    found = lattice(
        law.candidate.mechanism,
        measured=measured_names(bench.study),
        law=law.law,
        paired=binder.paired,
    )
    if found.full < 0 or len(found.nodes) < 2 or len(found.nodes) > MOST_LAWS:
        return None
    fitted = [pool.fitted(binder.bound(node.law)) for node in found.nodes]
    full = fitted[found.full]
    tried = []
    for k, one in enumerate(fitted):
        p = _p(full, one, found.chain(k, found.full))
        enough = True if k == found.full else None if p is None else p > 1.0 - level
        tried.append(Tried(one, _aicc(one, common, pool.seed) if one.ok else None, p, enough))
    along = [_p(fitted[e.larger], fitted[e.smaller], (e,)) for e in found.edges]
    return KnockOuts(found, tuple(tried), tuple(along), _smallest(found, tried))


def _smallest(found: Lattice, tried: Sequence[Tried]) -> tuple[int, ...]:
    enough = [k for k, t in enumerate(tried) if t.enough]
    return tuple(
        k for k in enough if not any(found.chain(j, k) is not None for j in enough if j != k)
    )


def _p(larger: Fit, smaller: Fit, chain: tuple[Edge, ...] | None) -> float | None:
    """p of the nested test; half of it on the edge, as in every comparison of two candidates."""
    if not chain or not larger.ok or not smaller.ok:
        return None
    test = nested_f(larger, smaller, edge=any(e.nesting.edge for e in chain))
    return None if test is None else test.p_one_sided


def _aicc(one: Fit, common: Measurements, seed: int) -> float:
    known = common.scale is not Scale.ESTIMATED
    if common.scale is not one.data.scale:  # the scale was taken from the most general candidate
        again = fit(one.predictor, common, seed=seed, starts=4, near=one.theta[None])
        one = again if again.ok else one
    found = criteria(
        data=table_key(common), n=one.n, p=one.p, objective=one.objective, scale_known=known
    )
    return found.aicc


class _Pool:
    """Laws on the bench, each bound and fitted once, whichever candidate they come from."""

    def __init__(
        self,
        laws: Sequence[CandidateLaw],
        bounds: Sequence[Bound],
        fits: Sequence[Fit],
        bench: Bench,
        seed: int,
    ) -> None:
        self.bench, self.seed = bench, seed
        self.known = [(c.bound, c.law.constants, b) for c, b in zip(laws, bounds, strict=True)]
        self.fits = {id(b): f for b, f in zip(bounds, fits, strict=True)}
        self.data = fits[0].data

    def bound(self, law: RateLaw, expressions: tuple[Any, ...]) -> Bound:
        for seen, constants, b in self.known:
            if seen == expressions and constants == law.constants:
                return b
        made = bind(law, self.bench, expressions, with_units=False)
        if not made.names:
            raise DiscrimError("nothing in its law is left to estimate")
        self.known.append((expressions, law.constants, made))
        return made

    def fitted(self, bound: Bound) -> Fit:
        if id(bound) not in self.fits:
            self.fits[id(bound)] = fit(bound.predictor, self.data, seed=self.seed, starts=STARTS)
        return self.fits[id(bound)]


class _Binder:
    """The laws of one candidate's lattice as the columns observe them."""

    def __init__(self, i: int, full: CandidateLaw, pool: _Pool) -> None:
        self.full, self.pool = full, pool
        # the law is kept beside its bound form, so that no other gets its id
        self.done: dict[int, tuple[RateLaw, Bound]] = {id(full.law): (full.law, pool.known[i][2])}

    def bound(self, law: RateLaw) -> Bound:
        """Raises ``DiscrimError`` for a law of which the columns observe nothing."""
        if id(law) not in self.done:
            candidate, study = self.full.candidate, self.pool.bench.study
            whole = per_amount_of_catalyst(replace(law, place=candidate.place), candidate, study)
            # what only the missing pathways make is made at no rate
            nothing = dict.fromkeys(self.full.law.production, sympy.Integer(0))
            whole = replace(whole, production={**nothing, **whole.production})
            seen = observed(candidate, whole, study)
            self.done[id(law)] = (law, self.pool.bound(whole, seen.bound))
        return self.done[id(law)][1]

    def paired(self, a: RateLaw, b: RateLaw) -> Pair:
        return expanded(self.bound(a), self.bound(b), self.pool.bench.study)
