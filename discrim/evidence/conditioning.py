"""How well the runs condition a law: before any fit is believed.

Everything is computed on the weighted sensitivities with columns of unit length, from singular
values. Condition indices and variance-decomposition proportions follow Belsley, Kuh & Welsch
(Regression Diagnostics, Wiley 1980, ch. 3); lockstep is judged on the terms of the law against the
stated errors of the conditions.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.fit.measurements import Measurements
from discrim.reactor.model import Predictor

# condition index from which a near-dependency is named (Belsley, Kuh & Welsch 1980, sec. 3.2)
STRONG_INDEX = 30.0
# proportion of variance from which a constant counts as involved in it (same place)
INVOLVED = 0.5
# a sensitivity below this fraction of its largest over the runs is none at all: amounts of zero are
# nudged off zero under roots and logarithms
NO_SENSITIVITY = 1e-60


@dataclass(frozen=True, slots=True, eq=False)
class Conditioning:
    """Conditioning of p columns over N rows.

    Attributes
    ----------
    names : of the columns
    condition_number : largest over smallest singular value of the scaled columns, inf if singular
    digits_lost : its decimal logarithm
    indices : shape (k,) condition indices, rising
    proportions : shape (k, p) variance proportions, row by index; columns sum to 1
    directions : shape (k, p) right singular vectors in scaled constants, row by index
    norms : shape (p,) lengths of the columns
    singular_values : shape (k,), falling
    """

    names: tuple[str, ...]
    condition_number: float
    digits_lost: float
    indices: np.ndarray
    proportions: np.ndarray
    directions: np.ndarray
    norms: np.ndarray
    singular_values: np.ndarray


def conditioning(columns: np.ndarray, names: tuple[str, ...]) -> Conditioning:
    """Conditioning of a weighted sensitivity matrix, shape (N, p)."""
    n, p = columns.shape
    norms = np.sqrt((columns**2).sum(axis=0))
    scaled = np.where(norms > 0, columns / np.where(norms > 0, norms, 1.0), 0.0)
    if n < p:  # fewer rows than columns: the missing directions are null
        scaled = np.vstack([scaled, np.zeros((p - n, p))])
    if p == 0 or not np.isfinite(scaled).all():
        empty = np.zeros((0, p))
        return Conditioning(
            names, float("nan"), float("nan"), np.zeros(0), empty, empty, norms, np.zeros(0)
        )
    _, s, vt = np.linalg.svd(scaled, full_matrices=False)
    floor = s[0] * 1e-16
    safe = np.maximum(s, floor)
    number = float(s[0] / s[-1]) if s[-1] > s[0] * 4e-16 else float("inf")
    weights = (vt / safe[:, None]) ** 2
    total = weights.sum(axis=0)
    return Conditioning(
        names,
        number,
        float(np.log10(number)) if np.isfinite(number) else float("inf"),
        s[0] / safe,
        weights / np.where(total > 0, total, 1.0),
        vt,
        norms,
        s,
    )


def collinearity_index(columns: np.ndarray) -> float:
    """One over the smallest singular value of the unit-length columns (Brun, Reichert & Künsch,
    Water Resour. Res. 37 (2001) 1015)."""
    norms = np.sqrt((columns**2).sum(axis=0))
    if not np.isfinite(norms).all():
        return float("nan")
    if (norms == 0).any() or not len(norms):
        return float("inf")
    s = np.linalg.svd(columns / norms, compute_uv=False)
    return float(1.0 / s[-1]) if s[-1] > 0 else float("inf")


@dataclass(frozen=True, slots=True)
class Lockstep:
    """Two terms that move together over the runs.

    Attributes
    ----------
    first, second : indices of the constants of the two terms
    ratio : smallest and largest ratio of the sensitivities second/first over the runs
    variation : relative standard deviation of the ratio
    error : its relative error from the stated errors of the conditions (root mean square)
    within_errors : True when the variation is no more than that error explains
    """

    first: int
    second: int
    ratio: tuple[float, float]
    variation: float
    error: float
    within_errors: bool


def lockstep(
    predictor: Predictor,
    data: Measurements,
    theta: np.ndarray,
    weight: np.ndarray,
    *,
    errors: float,
    least: float,
    most: float,
) -> list[Lockstep]:
    """Pairs of terms in lockstep.

    ``theta`` shape (p,), where the sensitivities are taken; ``weight`` shape (N,). Their ratio varies
    by no more than ``errors`` times its own error, or than ``least`` relative, and never by more than
    ``most``.
    """
    p = len(theta)
    conditions = data.conditions
    pred = predictor.predict(theta[None], conditions, conditions_too=True, both=True)
    assert pred.by_constants is not None
    assert pred.by_both is not None
    g = pred.by_constants[0]
    largest = np.max(np.abs(np.where(np.isfinite(g), g, 0.0)), axis=0)
    g = np.where(np.abs(g) <= NO_SENSITIVITY * largest, 0.0, g)
    dg = pred.by_both[0]  # (N, m, p)
    found = []
    for j in range(p):
        for k in range(j + 1, p):
            use = (
                (np.abs(g[:, j]) > 0)
                & (np.abs(g[:, k]) > 0)
                & np.isfinite(g[:, [j, k]]).all(axis=1)
            )
            used_any = (g[:, j] != 0) | (g[:, k] != 0)
            if use.sum() < 2 or use.sum() < used_any.sum():
                continue
            ratio = g[use, k] / g[use, j]
            w = (weight[use] * np.abs(g[use, j])) ** 2
            w = w / w.sum()
            mean = float((w * ratio).sum())
            if mean == 0:
                continue
            variation = float(np.sqrt((w * (ratio - mean) ** 2).sum()) / abs(mean))
            # relative change of the ratio with each condition, individual errors only: an error
            # shared by all runs moves every ratio alike
            var = np.zeros(int(use.sum()))
            for s in data.of_conditions:
                if len(np.unique(s.groups)) == 1:
                    continue
                sd = s.sd(conditions[:, s.target])[use]
                with np.errstate(divide="ignore", invalid="ignore"):
                    rel = dg[use, s.target, k] / g[use, k] - dg[use, s.target, j] / g[use, j]
                var += (sd * np.nan_to_num(rel)) ** 2
            error = float(np.sqrt((w * var).sum()))
            limit = min(max(errors * error, least), most)
            if variation <= limit:
                found.append(
                    Lockstep(
                        j,
                        k,
                        (float(ratio.min()), float(ratio.max())),
                        variation,
                        error,
                        variation <= errors * error,
                    )
                )
    return found


@dataclass(frozen=True, slots=True, eq=False)
class TradeOff:
    """A direction of the constants that the runs hardly fix.

    Attributes
    ----------
    singular_value : of the scaled columns; index : its condition index
    change : shape (p,) change of each constant (in its own units) that keeps the predictions within
        one weighted unit; involved : indices of the constants that carry it
    """

    singular_value: float
    index: float
    change: np.ndarray
    involved: tuple[int, ...]


def trade_offs(c: Conditioning, strong: float = STRONG_INDEX) -> list[TradeOff]:
    """Directions with a condition index of at least ``strong``, weakest first."""
    out = []
    for k in range(len(c.indices) - 1, -1, -1):
        if c.indices[k] < strong:
            continue
        direction = c.directions[k]
        biggest = int(np.argmax(np.abs(direction)))
        direction = direction * np.sign(direction[biggest])
        with np.errstate(divide="ignore", invalid="ignore"):
            change = np.where(c.norms > 0, direction / c.norms, 0.0)
        involved = tuple(
            int(j)
            for j in np.flatnonzero((c.proportions[k] >= INVOLVED) | (np.abs(direction) >= 0.3))
        )
        out.append(TradeOff(float(c.singular_values[k]), float(c.indices[k]), change, involved))
    return out
