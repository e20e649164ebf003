"""Fits of all candidates, as good as one another's, and which of the laws stand by them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from discrim.evidence.rivals import Standing, standing
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.study.model import Study
from discrim.weigh.bind import Bound
from discrim.weigh.embedded import embedded
from discrim.weigh.sameness import Relations


def fits_of(
    bound: Bound, data: Measurements, *, seed: int, near: np.ndarray | None = None
) -> dict[str, Fit]:
    """One fit for each way to read the condition errors; ``near``, shape (k, p), adds starts."""
    out: dict[str, Fit] = {}
    for origin in data.origins():
        found = fit(
            bound.predictor,
            data.as_origin(origin),
            seed=seed,
            near=near,
            starts=16 if near is None else 4,
        )
        out[origin] = found
        if found.ok:
            near = found.theta[None]
    return out


def no_larger_law_worse(
    bounds: Sequence[Bound],
    fits: list[dict[str, Fit]],
    related: Relations,
    study: Study,
    seed: int,
) -> list[dict[str, Fit]]:
    """A law that contains another must fit at least as well: if not, start it from there."""
    out = list(fits)
    known = {n: c.value for n, c in study.constants.items() if c.value is not None}
    for larger, smaller, nesting in related.embeddings():
        for origin, big in out[larger].items():
            small = out[smaller].get(origin)
            if small is None or not small.ok:
                continue
            if big.ok and big.badness <= small.badness * (1 + 1e-9) + 1e-12:
                continue
            near = embedded(
                bounds[smaller], bounds[larger], small.theta, nesting, big.data.conditions, known
            )
            again = fit(bounds[larger].predictor, big.data, seed=seed + 1, starts=32, near=near)
            if again.ok and (not big.ok or again.badness < big.badness):
                out[larger] = {**out[larger], origin: again}
    return out


def common_scale(fits: Sequence[dict[str, Fit]], data: Measurements) -> Measurements:
    """The measurements with one scale for all candidates, for criteria and rivals.

    Where the variance of the rates is unknown and conditions have errors, s^2 is taken from the
    candidate with the most constants (the best of those), once for all; its degrees of freedom make
    the reference a t.
    """
    if data.scale is not Scale.ESTIMATED or data.exact_conditions:
        return data
    first = [next(iter(f.values())) for f in fits]
    good = [f for f in first if f.ok] or first
    most = max(f.p for f in good)
    general = min((f for f in good if f.p == most), key=lambda f: f.scale2)
    df = max(general.degrees_of_freedom, 1)
    typical = float(np.var(data.y)) * 1e-12
    sd = float(np.sqrt(max(general.scale2, typical, 1e-300)))
    return replace(
        data,
        sources=(*data.of_conditions, source(OBSERVATION, data.n, absolute=sd)),
        scale=Scale.REPLICATES,
        scale_df=df,
    )


def on_common(
    bound: Bound, fits: dict[str, Fit], common: Measurements, data: Measurements, seed: int
) -> list[Fit]:
    """One law fitted to the measurements with the common scale, one fit for each reading."""
    if common is data:
        return list(fits.values())
    return [
        fit(
            bound.predictor,
            common.as_origin(origin),
            seed=seed,
            starts=4,
            near=f.theta[None] if f.ok else None,
        )
        for origin, f in fits.items()
    ]


def standings(
    common_fits: Sequence[Sequence[Fit]], related: Relations, alpha: float, seed: int
) -> tuple[list[list[Standing]], list[bool]]:
    """Under each reading of the condition errors, and in all: a candidate stands if it does under any
    of them."""
    contains = dict.fromkeys(related.contains, True)
    same = dict.fromkeys(related.same, True)
    readings = [
        standing([f[r] for f in common_fits], contains, same, alpha=alpha, seed=seed)
        for r in range(len(common_fits[0]))
    ]
    first = readings[0]
    stands = [any(r[i].stands for r in readings) for i in range(len(first))]
    for i, j in related.same:
        stands[i] = stands[j] = stands[i] or stands[j]
    return readings, stands
