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
from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.distributions import chi2_upper, t_upper
from discrim.evidence.score import basis, without
from discrim.fit.covariance import Whitener
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import ErrorSource, Measurements, Scale

SHARE_OVERALL = 0.2  # of alpha, spent on the overall fit; the rest on the directions
DRAWS = 20_000
# Two laws that are less than this many standard errors apart, all runs together, could not be told
# apart whatever the data; the length does not depend on the residuals, so leaving them out is fair.
TOO_SHORT = 0.5
# rivals whose predictions differ by less than this many standard deviations in every run
INSEPARABLE = 1.0


@dataclass(frozen=True, slots=True)
class Against:
    """Candidate i as the truth, tried in the direction of rival ``rival``.

    ``z`` equivalent normal; ``length`` whitened length of the direction left after i's own
    constants: how many standard errors the two laws are apart at i's optimum.
    """

    rival: int
    z: float
    length: float
    contains: bool


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
) -> list[Standing]:
    """The confidence set over ``fits`` (all on the same measurements).

    ``contains[(j, i)]``: law j is proven to contain law i; ``same[(i, j)]``: proven the same law.
    """
    out = []
    for i, null in enumerate(fits):
        if not null.ok:
            out.append(Standing(False, None, float("nan"), -1, float("nan"), ()))
            continue
        rows: list[np.ndarray] = []
        who: list[int] = []
        for j, rival in enumerate(fits):
            if j == i or same.get((min(i, j), max(i, j))) or not rival.ok:
                continue
            if contains.get((i, j)):
                continue  # a special case of i says nothing that i does not
            for u in directions(null, rival):
                rows.append(u)
                who.append(j)
        out.append(_judge(null, rows, who, contains, i, alpha, seed))
    return out


def directions(null: Fit, rival: Fit) -> list[np.ndarray]:
    """Whitened directions, orthogonal to the sensitivities of ``null``, in which ``rival`` would show.

    Shape (N,) each, not of unit length: the length is the distance in standard errors.
    """
    own = basis(null.jacobian[None])
    white = Whitener(null.covariance[None])
    data = replace(
        null.data,
        y=null.values,
        conditions=null.conditions,
        sources=_sizes_only(null),
        scale=Scale.STATED,
    )
    fitted = fit(rival.predictor, data, starts=8, seed=1, near=rival.theta[None])
    if not fitted.ok:
        return []
    difference = (fitted.values - null.values)[None]
    d = without(own, white.vector(difference))[0]
    sd = 1.0
    if null.data.scale is Scale.ESTIMATED and not null.problem.with_conditions:
        sd = float(np.sqrt(null.scale2)) if null.scale2 > 0 else 1.0
    if float(np.sqrt(d @ d)) > 1e-4 * sd * np.sqrt(null.n):
        return [d]
    # the rival reproduces this law: what it has beyond it, at this point of its constants
    jac = rival.predictor.predict(fitted.theta[None], null.conditions).by_constants
    assert jac is not None
    g = white.matrix(jac)
    norms = np.sqrt((g**2).sum(axis=1))
    g = np.where(norms[:, None, :] > 0, g / np.where(norms > 0, norms, 1.0)[:, None, :], 0.0)
    extra = np.stack([without(own, g[:, :, k])[0] for k in range(g.shape[2])], axis=1)
    u, s, _ = np.linalg.svd(extra, full_matrices=False)
    return [u[:, k] * 1e6 for k in range(len(s)) if s[k] > 1e-6]


def _sizes_only(null: Fit) -> tuple[ErrorSource, ...]:
    """One error source that weighs the observations as the null fit does."""
    from discrim.fit.measurements import OBSERVATION, source

    return (source(OBSERVATION, null.n, absolute=np.sqrt(null.variances)),)


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
    if data.scale is Scale.STATED and df_rest > 0:
        p_fit = chi2_upper(null.objective, df_rest)
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
    p_joint = joint_p(
        d, largest, df_rest, estimated, data.scale_df if data.scale is Scale.REPLICATES else 0, seed
    )
    spend = alpha * (1.0 - SHARE_OVERALL) if p_fit is not None else alpha
    stands = p_joint >= spend and (p_fit is None or p_fit >= alpha * SHARE_OVERALL)
    against = tuple(
        Against(j, float(np.sign(a) * b), ln, bool(contains.get((j, i))))
        for j, a, b, ln in zip(keep, z, observed, lengths, strict=True)
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
    replicate_df: int,
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
    # in the space of the directions: z = A x with x standard normal
    u, s, _ = np.linalg.svd(d, full_matrices=False)
    r = int((s > 1e-9 * s[0]).sum())
    a = u[:, :r] * s[:r]
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
    # far in the tail the sum over directions is sharper than counting draws, and still valid
    bound = min(1.0, single * len(d))
    return min(bound, simulated) if hits < 20 else simulated


def _one_line(d: np.ndarray) -> bool:
    return bool((np.abs(d @ d[0]) > 1 - 1e-9).all())


def apart(a: Fit, b: Fit) -> float:
    """Largest difference of two fitted laws over the runs, in standard deviations of a run."""
    sd = np.sqrt(np.maximum(a.variances, b.variances))
    if a.data.scale is Scale.ESTIMATED and not a.problem.with_conditions:
        s2 = np.nanmax([a.scale2, b.scale2, 0.0])
        sd = sd * np.sqrt(s2)
    with np.errstate(divide="ignore", invalid="ignore"):
        gap = np.abs(a.values - b.values) / sd
    return float(np.nanmax(gap))


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
