"""The randomised trial: studies of mixed design through the study file and everything behind it.

A decided verdict is wrong when it is `participates` though B has no effect, or `negligible` though B's
largest effect over the runs is above what matters. Beside it an oracle decides from the same noise: it
knows the law, its other constants up to estimating them, the true sensitivities and all errors.
"""

from __future__ import annotations

import tempfile
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from discrim.evidence.distributions import normal_quantile
from discrim.evidence.score import basis, without
from discrim.fit.covariance import Whitener
from discrim.study import load
from discrim.weigh.run import run
from tests.calibration.trial_design import Design, draw, write

ALPHA = 0.05


@dataclass(frozen=True)
class Outcome:
    """One study of the trial; ``effect``: the largest over the runs, with its sign."""

    number: int
    runs: int
    candidates: tuple[str, ...]
    spread: float
    condition_error: float
    rate_error: float
    origin: str
    shared: bool
    scale: str
    matters: float
    effect: float
    well_spread: bool
    verdict: str
    oracle: str
    why: tuple[str, ...] = ()

    @property
    def decided(self) -> bool:
        return self.verdict in ("participates", "negligible")

    @property
    def wrong(self) -> bool:
        if self.verdict == "participates":
            return self.effect == 0.0
        return self.verdict == "negligible" and abs(self.effect) > self.matters


def oracle(design: Design) -> str:
    """What is decided by the score along the true sensitivities, one-sided at the same level."""
    problem, truth = design.problem(), design.truth[None]
    null = truth.copy()
    null[0, 0] = 0.0

    def says(theta: np.ndarray, conditions: np.ndarray) -> np.ndarray:
        return problem.predictor.predict(theta, conditions, constants=False).values

    e = design.rate - says(truth, design.shown) + says(truth, design.base) - says(null, design.base)
    at = problem.predictor.predict(truth, design.base, conditions_too=True)
    assert at.by_constants is not None
    v = problem.own_covariance(at.values, design.base[None], at.by_conditions, np.ones(1))
    v = problem.with_measured(v, design.base[None], at.by_conditions)
    white = Whitener(v)
    g = white.matrix(at.by_constants)
    along = without(basis(g[:, :, 1:]), g[:, :, 0])[0]
    length = float(np.sqrt(along @ along))
    if not length > 1e-9 * float(np.sqrt((g[0, :, 0] ** 2).sum())):
        return "undecided"
    z = float(along @ white.vector(e)[0]) / length
    need = normal_quantile(1 - ALPHA)
    if z > need:
        return "participates"
    most = max((z + need) / length, 0.0)
    if float(np.abs(design.effects(most)).max()) < design.matters:
        return "negligible"
    return "undecided"


def one(seed: int, number: int) -> Outcome:
    """Study ``number``, weighed."""
    design = draw(seed, number)
    with tempfile.TemporaryDirectory() as folder:
        weighed = run(load(write(design, Path(folder))), seed=1, lattices=False, one_by_one=False)
    verdict = weighed.answers[0].verdict
    effects = design.effects(float(design.truth[0]))
    largest = float(effects[int(np.argmax(np.abs(effects)))])
    origin = " and ".join(dict.fromkeys(x or "not stated" for x in design.origins))
    return Outcome(
        number,
        design.runs,
        design.family,
        design.spread,
        design.condition_error,
        design.rate_error,
        origin if design.condition_error else "exact",
        design.shared,
        design.scale,
        design.matters,
        largest,
        design.well_spread,
        verdict.outcome,
        oracle(design),
        verdict.why,
    )


def tried(seed: int, number: int) -> Outcome:
    """The same; a study that could not be weighed is an outcome too."""
    try:
        return one(seed, number)
    except Exception as trouble:
        design = draw(seed, number)
        return Outcome(
            number,
            design.runs,
            design.family,
            design.spread,
            design.condition_error,
            design.rate_error,
            "",
            design.shared,
            design.scale,
            design.matters,
            0.0,
            design.well_spread,
            f"failed: {type(trouble).__name__}: {trouble}"[:200],
            oracle(design),
        )
