"""How often an effect is found, against an oracle that knows the true sensitivities.

The oracle sees the same tables and tests one-sided at the same level. The effect is chosen so that it
finds it in about four studies of five, or in almost all; where the cell gives a share, that is the effect.
"""

from __future__ import annotations

import numpy as np

from discrim.evidence.distributions import chi2_quantile_upper, normal_quantile
from discrim.fit.measurements import Scale
from tests.calibration.cells import Cell
from tests.calibration.methods import ALPHA, oracle, score_z
from tests.calibration.simulate import draw
from tests.calibration.size import Counts, rejected

# the oracle's distance in standard errors: found in 80 % of the studies, one-sided at 5 %
DISTANCE = 1.645 + 0.842
PILOT = 400


def run_power(cell: Cell, studies: int, seed: int) -> Counts:
    """Counts of studies that find the effect, by method; all of them through the package's test."""
    rng = np.random.default_rng(cell.seeds(seed, "power"))
    psi = None
    if cell.share == 0:
        psi = 0.0
        for _ in range(3):  # the errors grow with the effect
            psi = DISTANCE / float(np.median(oracle(draw(cell, PILOT, rng, psi))[1]))
    drawn = draw(cell, studies, rng, psi)
    held, free = drawn.at(0.0), drawn.free()
    need = normal_quantile(1 - ALPHA)
    out = Counts(cell, studies)
    out.false["oracle"] = int((oracle(drawn)[0] > need).sum())
    for name, conditional in (("K", False), ("conditional", True)):
        z = score_z(drawn.problem, held, conditional=conditional)
        out.false[name] = int((z > need).sum())
    if drawn.problem.data.scale is Scale.STATED:
        fall = held.objective - free.objective
        up = free.theta[:, 0] > 0
        out.false["likelihood ratio"] = int(((fall > chi2_quantile_upper(2 * ALPHA, 1)) & up).sum())
    out.false["discrim"] = int(rejected(drawn, free, np.arange(studies)).sum())
    return out
