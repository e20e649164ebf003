"""Which rivals stand: a confidence set of laws.

For each candidate i taken as the truth: it is rejected when its Q rejects it at alpha/5 (stated
scale only), or when the largest |z_ij| over the other candidates j exceeds its joint quantile at 4
alpha/5. z_ij is the score of i along what j would say: j is fitted to the *predictions* of i at i's
reconciled conditions, not to the data (Fisher & McAleer, J. Econometrics 16 (1981) 103), and the
difference of the two predictions is the direction tested. For a rival that contains i that
difference is nothing; its extra sensitivities are the directions then.

The true law, if listed, stands with probability at least 1 - alpha, whatever the number of rivals.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from discrim.evidence.distributions import chi2_upper, t_upper
from discrim.evidence.mimic import FEW, mimics
from discrim.evidence.score import basis, without
from discrim.fit.covariance import Whitener
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale

SHARE_OVERALL = 0.2  # of alpha, spent on the overall fit; the rest on the directions
DRAWS = 20_000
# Two laws that are less than this many standard errors apart, all runs together, could not be told
# apart whatever the data; the length does not depend on the residuals, so leaving them out is fair.
TOO_SHORT = 0.5


@dataclass(frozen=True, slots=True)
class Against:
    """Candidate i as the truth, tried in the direction of rival ``rival``.

    ``z`` equivalent normal; ``length`` whitened length of the direction left after i's own
    constants: how many standard errors the two laws are apart at i's optimum; ``direction`` it, shape
    (N,), whitened and of unit length.
    """

    rival: int
    z: float
    length: float
    contains: bool
    direction: np.ndarray = field(repr=False, compare=False)


@dataclass(frozen=True, slots=True)
class Standing:
    """Whether one candidate stands.

    ``p_fit`` of Q (None: scale not stated); ``largest`` |z| with the rival it came from;
    ``p_joint`` chance of a larger |z| in any of the directions; ``against`` all directions.
    """

    stands: bool
    p_fit: float | None
    largest: float
    worst_rival: int
    p_joint: float
    against: tuple[Against, ...]


def standing(
    fits: Sequence[Fit],
    contains: Mapping[tuple[int, int], bool],
    same: Mapping[tuple[int, int], bool],
    *,
    alpha: float,
    seed: int,
    only: Sequence[int] | None = None,
) -> list[Standing]:
    """The confidence set over ``fits`` (all on the same measurements).

    ``contains[(j, i)]``: law j is proven to contain law i; ``same[(i, j)]``: proven the same law.
    ``only``: the candidates to judge, in this order, all by default (to count how often a known truth
    stands, one is enough).
    """
    n = len(fits)
    judged = list(range(n)) if only is None else list(only)
    nulls = {i: _Null(fits[i]) for i in judged if fits[i].ok}
    tried: list[list[int]] = [[] for _ in fits]  # rivals in whose directions each is tried
    found: list[list[np.ndarray]] = [[] for _ in fits]
    for j, rival in enumerate(fits):
        against = [
            i
            for i in nulls
            if rival.ok
            and i != j
            and not same.get((min(i, j), max(i, j)))
            and not contains.get((i, j))  # a special case of i says nothing that i does not
        ]
        if not against:
            continue
        every = _directions([nulls[i] for i in against], rival, thorough=n <= FEW)
        for i, rows in zip(against, every, strict=True):
            found[i].extend(rows)
            tried[i].extend([j] * len(rows))
    return [
        _judge(fits[i], found[i], tried[i], contains, i, alpha, seed)
        if fits[i].ok
        else Standing(False, None, float("nan"), -1, float("nan"), ())
        for i in judged
    ]


def standing_in_studies(
    nulls: Sequence[Fit],
    rivals: Sequence[Fit],
    contains: Sequence[bool],
    *,
    alpha: float,
    seed: int,
) -> list[Standing]:
    """Whether one law stands among its rivals in each of many studies of the same size.

    ``nulls``: its fit to the table of each study; ``rivals``: the other laws, fitted to any one table (only
    where to begin is taken from it); ``contains``: which of them contain it. To count how often a known
    truth is kept: all studies are one batch, where `standing` would take a fit for each rival in each.
    """
    tried: list[list[int]] = [[] for _ in nulls]
    found: list[list[np.ndarray]] = [[] for _ in nulls]
    made = [_Null(f) for f in nulls]
    for j, rival in enumerate(rivals, start=1):
        if not rival.ok:
            continue
        for k, rows in enumerate(_directions(made, rival, thorough=False)):
            found[k].extend(rows)
            tried[k].extend([j] * len(rows))
    inside = {(j, 0): True for j, c in enumerate(contains, start=1) if c}
    return [
        _judge(null, found[k], tried[k], inside, 0, alpha, seed) for k, null in enumerate(nulls)
    ]


def directions(null: Fit, rival: Fit) -> list[np.ndarray]:
    """Whitened directions, orthogonal to the sensitivities of ``null``, in which ``rival`` would show.

    Shape (N,) each, not of unit length: the length is the distance in standard errors. Where a rival
    that reproduces the null shows in one direction only, it points to more of what it has beyond it.
    """
    return _directions([_Null(null)], rival, thorough=True)[0]


class _Null:
    """A law taken for true: its sensitivities and how it weighs the runs, made once."""

    def __init__(self, null: Fit) -> None:
        self.fit = null
        self.own = basis(null.jacobian[None])
        self.white = Whitener(null.covariance[None])
        self.sd = 1.0
        if null.data.scale is Scale.ESTIMATED and not null.problem.with_conditions:
            self.sd = float(np.sqrt(null.scale2)) if null.scale2 > 0 else 1.0


def _directions(nulls: Sequence[_Null], rival: Fit, *, thorough: bool) -> list[list[np.ndarray]]:
    """The directions of one rival for each of several nulls."""
    thetas = mimics([n.fit for n in nulls], rival, thorough=thorough)
    usable = np.isfinite(thetas).all(axis=1)
    made = rival.predictor.predict(
        np.where(usable[:, None], thetas, rival.theta), np.array([n.fit.conditions for n in nulls])
    )
    assert made.by_constants is not None
    out: list[list[np.ndarray]] = []
    for k, null in enumerate(nulls):
        if not usable[k]:
            out.append([])
            continue
        d = without(null.own, null.white.vector(made.values[k : k + 1] - null.fit.values))[0]
        # A rival that comes closer than could ever be seen shows in what it has beyond the null: else a
        # law that ends next to the edge at which both are one law would be tried in no direction at all.
        # (Simulated: the true law stands as often, 0.97 to 0.99; wrong ones next to an edge in 0.11 of
        # studies, not 0.20.)
        if float(np.sqrt(d @ d)) > TOO_SHORT * null.sd:
            out.append([d])
        else:
            out.append(_beyond(null, null.white.matrix(made.by_constants[k : k + 1])))
    return out


def _beyond(null: _Null, g: np.ndarray) -> list[np.ndarray]:
    """What a rival that reproduces the null has beyond it: sensitivities ``g``, shape (1, N, p), at
    that point of its constants."""
    norms = np.sqrt((g**2).sum(axis=1))
    g = np.where(norms[:, None, :] > 0, g / np.where(norms > 0, norms, 1.0)[:, None, :], 0.0)
    if not np.isfinite(g).all():
        return []
    extra = np.stack([without(null.own, g[:, :, k])[0] for k in range(g.shape[2])], axis=1)
    u, s, _ = np.linalg.svd(extra, full_matrices=False)
    rows = [u[:, k] * 1e6 for k in range(len(s)) if s[k] > 1e-6]
    if len(rows) == 1:
        most = int(np.argmax((extra**2).sum(axis=0)))
        rows = [rows[0] if rows[0] @ extra[:, most] > 0 else -rows[0]]
    return rows


def _judge(
    null: Fit,
    rows: list[np.ndarray],
    who: list[int],
    contains: Mapping[tuple[int, int], bool],
    i: int,
    alpha: float,
    seed: int,
) -> Standing:
    data = null.data
    known = data.scale is not Scale.ESTIMATED
    df_rest = null.degrees_of_freedom
    p_fit = None
    if data.scale is Scale.STATED and null.objective_df > 0:
        p_fit = chi2_upper(null.objective, null.objective_df)
    unit, lengths, keep = [], [], []
    scale = 1.0
    if not known and not null.problem.with_conditions and null.scale2 > 0:
        scale = float(np.sqrt(null.scale2))
    for row, j in zip(rows, who, strict=True):
        size = float(np.sqrt(row @ row))
        if size / scale > TOO_SHORT:
            unit.append(row / size)
            lengths.append(size / scale)
            keep.append(j)
    if not unit or df_rest < 1:
        stands = p_fit is None or p_fit >= alpha * SHARE_OVERALL
        return Standing(stands, p_fit, 0.0, -1, 1.0, ())
    d = np.array(unit)  # (k, N)
    z = d @ null.residual
    norm2 = float(null.residual @ null.residual)
    estimated = not known and not null.problem.with_conditions
    observed = np.abs(z)
    if estimated:
        observed = studentised(observed, norm2, df_rest)
    elif data.scale is Scale.REPLICATES:
        observed = np.abs(z)
    k = int(np.argmax(observed))
    largest = float(observed[k])
    # an order of the directions that neither that of the runs nor that of the candidates changes
    order = np.argsort(-observed, kind="stable")
    turned = (d * np.where(z < 0, -1.0, 1.0)[:, None])[order]
    p_joint = joint_p(
        turned,
        largest,
        df_rest,
        estimated,
        data.scale_df if data.scale is Scale.REPLICATES else 0,
        seed,
    )
    spend = alpha * (1.0 - SHARE_OVERALL) if p_fit is not None else alpha
    stands = p_joint >= spend and (p_fit is None or p_fit >= alpha * SHARE_OVERALL)
    against = tuple(
        Against(j, float(np.sign(a) * b), ln, bool(contains.get((j, i))), u)
        for j, a, b, ln, u in zip(keep, z, observed, lengths, unit, strict=True)
    )
    return Standing(stands, p_fit, largest, keep[k], p_joint, against)


def studentised(z: np.ndarray, norm2: float | np.ndarray, df: int) -> np.ndarray:
    """t of each direction, the scale from what is left of the residual; df - 1 degrees of freedom."""
    if df < 2:
        return np.zeros_like(z)
    rest = np.maximum(np.asarray(norm2) - z**2, 1e-30 * np.asarray(norm2))
    with np.errstate(divide="ignore", invalid="ignore"):
        t = z / np.sqrt(rest / (df - 1))
    return np.nan_to_num(t)


def joint_p(
    d: np.ndarray,
    largest: float,
    df: int,
    estimated: bool,
    replicate_df: float,
    seed: int,
    *,
    two_sided: bool = True,
) -> float:
    """P(max |z| >= largest) over correlated unit directions, one-by-one exact for a single one.

    P(max z >= largest) when not ``two_sided``. That is not half the other: of two directions that are
    opposite to one another, one always has z = |z|.
    """
    sides = 2 if two_sided else 1
    reference = float(df - 1) if estimated else float(replicate_df) if replicate_df else np.inf
    if estimated and df < 2:
        return 1.0
    single = sides * float(t_upper(largest, reference))
    if len(d) == 1 or (_one_line(d) and (two_sided or bool((d @ d[0] > 0).all()))):
        return single
    # far in the tail the sum over directions is sharper than counting draws, and still valid
    bound = min(1.0, single * len(d))
    if bound * (DRAWS + 1) < 1.0:
        return bound
    # in the space of the directions: z = A x with x standard normal, A triangular with a positive
    # diagonal, so that the order of the runs does not change the draws
    triangle = np.asarray(np.linalg.qr(_in_order(d, two_sided).T, mode="r"))
    a = (triangle * np.where(np.diagonal(triangle) < 0, -1.0, 1.0)[:, None]).T
    a = a[:, (np.abs(a) > 1e-9).any(axis=0)]  # what adds nothing draws nothing
    r = a.shape[1]
    rng = np.random.default_rng(seed)
    x = rng.standard_normal((DRAWS, r))
    z = x @ a.T
    if two_sided:
        z = np.abs(z)
    if estimated:
        rest = rng.chisquare(max(df - r, 1), DRAWS) if df > r else np.zeros(DRAWS)
        total = (x**2).sum(axis=1) + rest
        z = studentised(z, total[:, None], df)
    elif replicate_df:
        z = z / np.sqrt(rng.chisquare(replicate_df, DRAWS) / replicate_df)[:, None]
    hits = int((z.max(axis=1) >= largest).sum())
    simulated = (hits + 1) / (DRAWS + 1)
    return min(bound, simulated) if hits < 20 else simulated


def _in_order(d: np.ndarray, two_sided: bool) -> np.ndarray:
    """The directions in an order that is their own, and where the sign is free with one of their own, so
    that the order of the candidates does not change the draws."""
    alike = d @ d.T
    keys = [np.round((np.abs(alike) ** power).sum(axis=1), 9) for power in (4, 2)]
    order = np.lexsort(keys)
    d, alike = d[order], alike[order][:, order]
    if two_sided:  # each along the first that it is not at right angles to
        for k in range(1, len(d)):
            seen = alike[k, :k][np.abs(alike[k, :k]) > 1e-9]
            if len(seen) and seen[0] < 0:
                d[k], alike[k], alike[:, k] = -d[k], -alike[k], -alike[:, k]
    return d


def _one_line(d: np.ndarray) -> bool:
    return bool((np.abs(d @ d[0]) > 1 - 1e-9).all())


def apart(a: Fit, b: Fit, window: np.ndarray | None = None) -> float:
    """Largest difference of two fitted laws in standard deviations of a run, at the printed conditions
    of the runs and at those in ``window``, shape (K, m), where the error is taken to be as small as
    that of the best run, relative to its size."""
    sd = np.sqrt(np.maximum(a.variances, b.variances))
    if a.data.scale is Scale.ESTIMATED and not a.problem.with_conditions:
        s2 = np.nanmax([a.scale2, b.scale2, 0.0])
        sd = sd * np.sqrt(s2)
    values = [
        f.predictor.predict(f.theta[None], a.data.conditions, constants=False) for f in (a, b)
    ]
    first, second = values[0].values[0], values[1].values[0]
    with np.errstate(divide="ignore", invalid="ignore"):
        largest = float(np.nanmax(np.abs(first - second) / sd))
        if window is None or not len(window):
            return largest
        relative = float(np.nanmin(sd / np.maximum(np.abs(first), np.abs(second))))
        # each named condition in the place of every run, so that all responses are looked at
        there = np.repeat(window[:, None, :], a.n, axis=1)
        f, g = (
            x.predictor.predict(
                np.repeat(x.theta[None], len(there), axis=0), there, constants=False
            ).values
            for x in (a, b)
        )
        gap = np.abs(f - g) / (relative * np.maximum(np.abs(f), np.abs(g)))
    return max(largest, float(np.nanmax(np.where(f == g, 0.0, gap))))


def table_key(data: Measurements) -> str:
    """What two fits must share for their criteria to be comparable."""
    import hashlib

    h = hashlib.sha256()
    h.update(np.ascontiguousarray(data.y).tobytes())
    h.update(np.ascontiguousarray(data.conditions).tobytes())
    for s in data.sources:
        h.update(np.ascontiguousarray(s.relative).tobytes())
        h.update(np.ascontiguousarray(s.absolute).tobytes())
        h.update(f"{s.target}{s.origin}".encode())
    return h.hexdigest()
