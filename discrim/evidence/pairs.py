"""Rivals two at a time: neither is a case of the other, and both stand.

*Each as the truth in turn* (Cox, J. R. Stat. Soc. B 24 (1962) 406; simulated as by Williams, Biometrics 26
(1970) 23; both from memory). Tables are drawn from one of the laws (`bootstrap`) and both are fitted
to each. The statistic is what the rival gains on Q over what the first law at its own optimum lets
one expect: Q_0 - Q_1 + D, or N ln((Q_0 + D)/Q_1) with the scale unknown, D the squared distance of
the rival, fitted to the first law's predictions, from them. Without D the statistic moves with the
constants of the law drawn from, and the test rejects too seldom. A large gain says that the law
drawn from does not hold. Both laws can pass, and both can fail.

*How often each comes first.* On the tables drawn from law i every candidate that stands is fitted;
the share in which law j has the least criterion says how much "j ranks first" is worth.

*Vuong's test* (Econometrica 57 (1989) 307, from memory) asks which law is closer to the truth when
neither need be true. It needs independent residuals, exact conditions and many runs; here it is a
guide and decides nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from discrim.evidence.bootstrap import (
    COARSE,
    LOOKS,
    Simulated,
    Tables,
    of_counts,
    refitted,
    settled,
)
from discrim.evidence.distributions import normal_quantile, normal_upper
from discrim.evidence.mimic import mimicked, mimics
from discrim.evidence.quadratic import weighted_chi2_upper
from discrim.evidence.rivals import TOO_SHORT
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Solution

# criteria closer than this are a tie: nobody would act on the difference
TIE = 0.01
# with more laws than this only the best are drawn from and fitted again
MOST = 8


@dataclass(frozen=True, slots=True)
class Vuong:
    """Vuong's test of two laws a and b.

    ``statistic`` positive towards a; ``p`` two-sided, that they are equally close to the truth;
    ``p_alike`` that they cannot be told apart at all, the first step: with it not small ``p`` means
    nothing. ``prefers`` 0 for a, 1 for b, None for neither.
    """

    statistic: float
    p: float
    p_alike: float
    prefers: int | None


@dataclass(frozen=True, slots=True)
class Pair:
    """Candidates ``a`` and ``b``; ``as_truth`` the p-values with a, then b, taken for true, of the
    statistics ``gains``: 1 without a draw where the other law can mimic it so well that no data on
    these runs would tell."""

    a: int
    b: int
    vuong: Vuong | None
    as_truth: tuple[Simulated, Simulated]
    gains: tuple[float, float]


@dataclass(frozen=True, slots=True, eq=False)
class Repeats:
    """What repeating the runs would show.

    Attributes
    ----------
    members : candidates that were drawn from and fitted, k of them
    shares : shape (k, k), with ``members[i]`` true the share of tables in which ``members[j]`` ranks
        first
    draws : shape (k,) tables drawn from each
    """

    members: tuple[int, ...]
    shares: np.ndarray
    draws: np.ndarray

    def first_share(self, candidate: int) -> float | None:
        """Share of tables in which it ranks first, the laws that stand taken for true equally often."""
        if candidate not in self.members:
            return None
        return float(self.shares[:, self.members.index(candidate)].mean())

    def first_if_true(self, candidate: int) -> float | None:
        """Share of tables drawn from it in which it ranks first."""
        if candidate not in self.members:
            return None
        k = self.members.index(candidate)
        return float(self.shares[k, k])


@dataclass(frozen=True, slots=True, eq=False)
class Pairs:
    pairs: tuple[Pair, ...] = ()
    repeats: Repeats | None = None


def pairs(
    fits: Sequence[Fit],
    members: Sequence[int],
    related: Mapping[tuple[int, int], object],
    penalties: Sequence[float],
    *,
    alpha: float,
    seed: int,
    looks: Sequence[int] = LOOKS[:3],
) -> Pairs:
    """Compare the candidates in ``members``, different laws that stand, on the same measurements.

    ``related``: pairs (i, j), in any order, of which one contains the other: not compared here, but
    counted in who comes first. ``penalties``: what the criterion adds to Q for each candidate.
    """
    penalty = np.array([penalties[j] for j in members])
    scores = np.array([_minus2(fits[j]) for j in members]) + penalty
    order = np.argsort(scores, kind="stable")[:MOST]
    chosen = sorted(members[k] for k in order)
    k = len(chosen)
    if k < 2:
        return Pairs()
    penalty = np.array([penalties[j] for j in chosen])
    rival = np.array(
        [
            [i != j and (i, j) not in related and (j, i) not in related for j in chosen]
            for i in chosen
        ]
    )
    p_values: dict[tuple[int, int], tuple[Simulated, float]] = {}
    shares, draws = np.zeros((k, k)), np.zeros(k, int)
    for a, i in enumerate(chosen):
        found, shares[a], draws[a] = _drawn_from(
            fits, chosen, a, rival[a], penalty, alpha, seed, looks
        )
        for b, simulated in found.items():
            p_values[(i, chosen[b])] = simulated
    compared = []
    for a, i in enumerate(chosen):
        for b, j in enumerate(chosen):
            if a < b and rival[a, b]:
                (p_i, gain_i), (p_j, gain_j) = p_values[(i, j)], p_values[(j, i)]
                closer = vuong(fits[i], fits[j], alpha=alpha)
                compared.append(Pair(i, j, closer, (p_i, p_j), (gain_i, gain_j)))
    return Pairs(tuple(compared), Repeats(tuple(chosen), shares, draws))


def _drawn_from(
    fits: Sequence[Fit],
    chosen: Sequence[int],
    a: int,
    rivals: np.ndarray,
    penalty: np.ndarray,
    alpha: float,
    seed: int,
    looks: Sequence[int],
) -> tuple[dict[int, tuple[Simulated, float]], np.ndarray, int]:
    """p-values and statistics of ``chosen[a]`` against its rivals, shares of who comes first, and draws."""
    null = fits[chosen[a]]
    data, width = null.data, len(chosen)
    observed, starts, alike = np.zeros(width), [], []
    size = 1.0
    if data.scale is Scale.ESTIMATED:
        size = float(np.sqrt(null.scale2)) if null.scale2 > 0 else 1.0
    compared = rivals.copy()  # less those that no data would separate from the null
    for b, j in enumerate(chosen):
        law = fits[j]
        near = mimics([null], law) if rivals[b] else law.theta[None]
        near = near[np.isfinite(near).all(axis=1)]
        alike.append(near if len(near) else law.theta[None])
        # where it mimics the null, and where it fits the runs
        starts.append(np.vstack([near, law.theta[None]]) if rivals[b] else law.theta[None])
        if rivals[b]:
            distance = _distance(null.solution, law, alike[b])
            compared[b] = bool(distance[0] > (TOO_SHORT * size) ** 2)
            observed[b] = float(_gain(data, null.solution.objective, law.objective, distance)[0])
    tables_of = Tables(null, seed)
    hits, first, drawn = np.zeros(width, int), np.zeros(width), 0
    clear = [True] * width
    for look in looks:
        tables, rescaled = tables_of.draw(look - drawn)
        own = refitted(null, tables, starts[a])
        q = np.empty((width, look - drawn))
        for b, j in enumerate(chosen):
            q[b] = own.objective if b == a else refitted(fits[j], tables, starts[b]).objective
            if compared[b]:
                distance = _distance(own, fits[j], alike[b])
                drawn_gain = _gain(data, own.objective, q[b], distance) / rescaled
                hits[b] += int((~(drawn_gain < observed[b])).sum())
        with np.errstate(divide="ignore", invalid="ignore"):
            fitted = null.n * np.log(q) if data.scale is Scale.ESTIMATED else q / rescaled
        criterion = np.where(np.isfinite(fitted), fitted, np.inf) + penalty[:, None]
        leads = criterion <= criterion.min(axis=0) + TIE
        first += (leads / leads.sum(axis=0)).sum(axis=1)
        drawn = look
        clear = [settled(int(h), drawn, alpha, len(looks)) for h in hits]
        if all(c or not r for c, r in zip(clear, compared, strict=True)):
            break
    found = {
        b: (
            of_counts(int(hits[b]), drawn, clear[b])
            if compared[b]
            else Simulated(1.0, 0.0, 0, True),
            float(observed[b]),
        )
        for b in range(width)
        if rivals[b]
    }
    return found, first / drawn, drawn


def _distance(null: Solution, law: Fit, starts: np.ndarray) -> np.ndarray:
    """D, shape (S,): how far the law that mimics each of the null's fits stays from it."""
    v = null.covariance
    variances = v if v.ndim == 2 else np.diagonal(v, axis1=1, axis2=2)
    return mimicked(null.values, null.conditions, variances, law, starts, COARSE).objective


def _gain(
    data: Measurements, null: np.ndarray, rival: np.ndarray | float, distance: np.ndarray
) -> np.ndarray:
    if data.scale is not Scale.ESTIMATED:
        return np.asarray(null - rival + distance)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(data.n * np.log((null + distance) / rival))


def _minus2(law: Fit) -> float:
    if law.data.scale is not Scale.ESTIMATED:
        return law.objective
    return law.n * float(np.log(max(law.objective, 1e-300)))


def vuong(a: Fit, b: Fit, *, alpha: float) -> Vuong | None:
    """Vuong's test without correction for the number of constants; None where errors are shared by
    runs, or a law leaves no residual.

    l_i = -(ln s^2 + r_i^2/s^2)/2 in run i, s^2 = RSS/N of each law where the scale is unknown, else 1;
    statistic sum(l_a - l_b)/(sqrt(N) w), w^2 the variance of the differences. N w^2 of two laws that
    predict alike is a sum of chi-squared variables weighted by the squared eigenvalues of a matrix of
    scores, made here from orthonormal sensitivities, in which the information is the identity.
    """
    if a.covariance.ndim == 2 or b.covariance.ndim == 2 or a.n < 3:
        return None
    parts = [_likelihoods(f) for f in (a, b)]
    if parts[0] is None or parts[1] is None:
        return None
    (l_a, s_a), (l_b, s_b) = parts[0], parts[1]
    n = a.n
    d = l_a - l_b
    w2 = float(np.var(d))
    if not w2 > 0:
        return Vuong(0.0, 1.0, 1.0, None)
    b_aa, b_bb, b_ab = s_a.T @ s_a / n, s_b.T @ s_b / n, s_a.T @ s_b / n
    matrix = np.block([[b_aa, b_ab], [-b_ab.T, -b_bb]])
    weights = np.real(np.linalg.eigvals(matrix)) ** 2
    p_alike = weighted_chi2_upper(n * w2, weights)
    z = float(d.sum() / np.sqrt(n * w2))
    p = float(2 * normal_upper(abs(z)))
    prefers = None
    if p_alike < alpha and abs(z) > normal_quantile(1 - alpha / 2):
        prefers = 0 if z > 0 else 1
    return Vuong(z, p, p_alike, prefers)


def _likelihoods(law: Fit) -> tuple[np.ndarray, np.ndarray] | None:
    """ln L of each run, and the scores, shape (N, k), in coordinates of unit information."""
    n = law.n
    unknown = law.data.scale is Scale.ESTIMATED
    scale2 = law.objective / n if unknown and not law.problem.joint_scale else 1.0
    if not scale2 > 0:
        return None
    r = law.residual / np.sqrt(scale2)
    u, s, _ = np.linalg.svd(law.jacobian[:, ~law.at_bound], full_matrices=False)
    u = u[:, s > 1e-10 * max(float(s.max(initial=0.0)), 1e-300)]
    scores = np.sqrt(n) * u * r[:, None]
    if unknown:
        scores = np.column_stack([scores, (r**2 - 1) / np.sqrt(2)])
    return -0.5 * (np.log(scale2) + r**2), scores
