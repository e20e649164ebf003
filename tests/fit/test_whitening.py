"""Whitening a batch of which one member is out of all proportion.

The numbers are those of a trial step far from any fit, where a law of two parts had run to 1e73. Whitening
is checked against its definition, W V W' = 1.
"""

from __future__ import annotations

import numpy as np

from discrim.fit.covariance import Whitener

# all digits: others may leave a pivot of rounding in place of zero
FACTOR = (
    (0, 0, 0.35610306284196286),
    (1, 1, 0.18935025839875072),
    (2, 2, 6.369050983731542e30),
    (3, 3, 0.00010698120935644372),
    (4, 4, 0.00010698122039900562),
    (5, 5, 0.00010698122260427481),
    (6, 0, 0.33331950365611224),
    (6, 6, 0.00010698122331774426),
    (7, 1, 0.17723553932736644),
    (7, 7, 0.00010698121070230669),
    (8, 2, -0.17837678362017606),
    (8, 8, 0.17837678439254864),
    (9, 2, -4.997398703751362e57),
    (9, 8, -4.057688744492261e73),
    (9, 9, 3.776052059539187e69),
)


def far_away() -> np.ndarray:
    """A covariance with a Cholesky factor that cannot be inverted in double precision."""
    factor = np.zeros((10, 10))
    for row, column, entry in FACTOR:
        factor[row, column] = entry
    return factor @ factor.T


def test_one_member_out_of_all_proportion_leaves_the_others_alone() -> None:
    rng = np.random.default_rng(5)
    root = rng.standard_normal((10, 10))
    ordinary = root @ root.T + np.eye(10)
    white = Whitener(np.stack([ordinary, far_away(), 4.0 * np.eye(10)]))
    assert white.ok[[0, 2]].all()
    w = white.matrix(np.broadcast_to(np.eye(10), (3, 10, 10)))
    np.testing.assert_allclose(w[0] @ ordinary @ w[0].T, np.eye(10), atol=1e-10)
    np.testing.assert_allclose(w[2], 0.5 * np.eye(10))
