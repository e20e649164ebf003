"""What is known of one constant along its values: restricted fits, scores and objectives.

One curve serves the test (at zero), the profile interval (objective) and the reconciled interval
(score), so all of them rest on the same restricted fits (`restricted`). All values of a grid, and
the curves of all constants of a law (`at_all`), are one batch.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from discrim.evidence.restricted import Trail, follow
from discrim.evidence.score import Score, score
from discrim.fit.fit import Fit
from discrim.fit.problem import Problem, Solution


@dataclass(frozen=True, slots=True, eq=False)
class Points:
    """Restricted optima at ``values`` of one constant.

    Attributes
    ----------
    values : shape (S,); objective : shape (S,); z : shape (S,) equivalent normal score
    solution : the restricted fits
    """

    values: np.ndarray
    objective: np.ndarray
    z: np.ndarray
    score: Score
    solution: Solution


class Curve:
    """Restricted fits along constant ``psi`` of a fitted law.

    Parameters
    ----------
    problem, theta : the problem and its unrestricted optimum, shape (p,)
    psi : index of the constant
    """

    def __init__(self, problem: Problem, theta: np.ndarray, psi: int, jacobian: np.ndarray) -> None:
        self.problem = problem
        self.theta = theta
        self.psi = psi
        self.trail = Trail(problem, theta, psi, jacobian)

    @classmethod
    def of(cls, fit: Fit, psi: int) -> Curve:
        return cls(fit.problem, fit.theta, psi, fit.jacobian)

    def on(self, again: Fit) -> tuple[Fit, Curve]:
        """The same curve of a fit made again with other errors, and that fit in its coordinates."""
        return again, Curve.of(again, self.psi)

    def at(self, values: np.ndarray, *, careful: bool = True) -> Points:
        """Restricted optima at each of ``values``, shape (S,).

        ``careful`` searches each from several starts; without it each starts between its solved
        neighbours, which is enough where a first pass was careful.
        """
        return at_all([self], [np.atleast_1d(np.asarray(values, float))], careful=careful)[0]

    def points(self, values: np.ndarray, sol: Solution) -> Points:
        """The scores at restricted optima that are solved already."""
        sc = score(self.problem, sol, self.psi)
        return Points(values, sol.objective, sc.z, sc, sol)


def at_all(
    curves: Sequence[Curve],
    values: Sequence[np.ndarray],
    *,
    careful: bool = True,
    hopeless: float = np.inf,
    afresh: int = 0,
) -> list[Points]:
    """Restricted optima at ``values`` of each curve, all of one problem, solved as one batch (see
    `restricted.follow` for how)."""
    trails = [c.trail for c in curves]
    # values far out are where laws overflow: such a fit is not finite, and never the best
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        found = follow(trails, values, careful=careful, hopeless=hopeless, afresh=afresh)
        return [c.points(v, sol) for c, v, sol in zip(curves, values, found, strict=True)]
