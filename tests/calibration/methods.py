"""The package's tests on a whole batch of studies at once, and the oracle that they are held against."""

from __future__ import annotations

import numpy as np

from discrim.evidence.acceptance import guard_level
from discrim.evidence.distributions import chi2_quantile_upper, normal_quantile
from discrim.evidence.score import basis, score, without
from discrim.fit.covariance import Whitener
from discrim.fit.measurements import Scale
from discrim.fit.problem import Problem, Solution
from tests.calibration.simulate import Drawn

ALPHA = 0.05


def score_z(
    problem: Problem, held: Solution, psi: int = 0, *, conditional: bool = True
) -> np.ndarray:
    """Equivalent normal of the test at the restricted fits ``held``, shape (S,): the conditional
    likelihood ratio where the package uses it, K in its place with ``conditional`` False."""
    return score(problem, held, psi, conditional=conditional).z


def excluded(problem: Problem, held: Solution, z: np.ndarray, *, two_sided: bool) -> np.ndarray:
    """Whether the reconciled set leaves out the value held: z (towards exclusion) at what the guard
    leaves of alpha, or the objective at the level of the guard."""
    data = problem.data
    spend = guard_level(ALPHA) if data.scale is Scale.STATED else 0.0
    if two_sided:
        z = np.abs(z)
    out = z > normal_quantile(1 - (ALPHA - spend) / (2 if two_sided else 1))
    if spend:
        df = max(data.n - (held.theta.shape[1] - 1), 1)
        out |= held.objective > chi2_quantile_upper(spend, df)
    return out


def oracle(drawn: Drawn) -> tuple[np.ndarray, np.ndarray]:
    """z of an oracle, and its mean for each unit of the constant in question, shape (S,) each.

    The score along the true sensitivities: e is the noise of the table at the true constants and what the
    term adds. V and the sensitivities are taken there too, and at what the errors of the conditions are
    independent of, which no one knows. The other constants are projected out, as they have to be
    estimated.
    """
    problem, truth = drawn.problem, drawn.truth
    null = truth.copy()
    null[:, 0] = 0.0

    def says(theta: np.ndarray, conditions: np.ndarray) -> np.ndarray:
        return problem.predictor.predict(theta, conditions, constants=False).values

    noise = problem.data.y - says(truth, problem.data.conditions)
    e = noise + says(truth, drawn.base) - says(null, drawn.base)
    at = problem.predictor.predict(truth, drawn.base, conditions_too=True)
    assert at.by_constants is not None
    scale2 = np.full(drawn.studies, drawn.variance)
    v = problem.own_covariance(at.values, drawn.base, at.by_conditions, scale2)
    white = Whitener(problem.with_measured(v, drawn.base, at.by_conditions))
    g = white.matrix(at.by_constants)
    along = without(basis(g[:, :, 1:]), g[:, :, 0])
    length = np.sqrt(np.einsum("sn,sn->s", along, along))
    return np.einsum("sn,sn->s", along, white.vector(e)) / length, length
