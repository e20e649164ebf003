"""Positive solutions of balances: closed forms, roots to 50 digits, and the time course that leads
to the steady state.

Sources: closed form of a quadratic; polynomials multiplied out from chosen roots; mpmath
(findroot, polyroots) and scipy.integrate as outside references. All figures here are invented.
"""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import root

from discrim.ratelaw.balances import Balances, solved

POWERS = np.array([[0], [1], [2], [3]])


def one(powers: Any, coefficients: Any) -> np.ndarray:
    c = np.asarray(coefficients, float)
    return Balances([np.asarray(powers)]).solve(c.reshape(len(powers), -1))[0]


def spread(rng: np.random.Generator, decades: float, shape: Any) -> np.ndarray:
    return np.asarray(10.0 ** rng.uniform(-decades, decades, shape))


def test_quadratic_has_its_closed_form() -> None:
    a, b, c = spread(np.random.default_rng(1), 20, (3, 2000))
    found = one(POWERS[:3], [c, -b, -a])
    closed = 2 * c / (b + np.sqrt(b**2 + 4 * a * c))
    assert np.abs(found / closed - 1).max() < 1e-14


def test_cubic_over_forty_powers_of_ten() -> None:
    c = spread(np.random.default_rng(2), 20, (4, 150)) * np.array([[1], [-1], [-1], [-1]])
    found = one(POWERS, c)
    with mpmath.workdps(50):
        for k, z in enumerate(found):
            exact = mpmath.findroot(
                lambda w, k=k: sum(mpmath.mpf(c[i, k]) * mpmath.exp(i * w) for i in range(4)),
                mpmath.log(z),
            )
            assert abs(mpmath.exp(exact) / z - 1) < 1e-14
            # one change of sign, one positive root (Descartes): it is the one


def test_a_broken_power() -> None:
    found = one([[0], [0.5], [1]], [[6.0], [-1.0], [-1.0]])  # sqrt(z) = 2 solves 6 - x - x^2
    assert found[0] == pytest.approx(4.0, rel=1e-14)


@pytest.mark.parametrize("lowest", [-6, -3, 0])
def test_of_several_roots_the_smallest(lowest: int) -> None:
    rng = np.random.default_rng(3)
    roots = np.sort(10.0 ** rng.uniform(lowest, 3, (3, 500)), axis=0)
    c = np.array([np.poly(r)[::-1] for r in roots.T]).T
    # the coefficients are rounded, which moves roots that lie close together
    gap = np.diff(roots, axis=0).min(axis=0) / roots[-1]
    assert (np.abs(one(POWERS, c) / roots[0] - 1) * np.minimum(gap, 1.0) < 1e-13).all()


def test_no_root_is_taken_for_one() -> None:
    rng = np.random.default_rng(4)
    at, beside, width = 10.0 ** rng.uniform(-3, 3, (3, 400))
    width = beside * np.minimum(width, 1.0)
    # (z - at)((z - beside)^2 + width^2): the balance comes near zero at ``beside`` without reaching it
    c = np.array(
        [
            np.poly([a, complex(b, w), complex(b, -w)]).real[::-1]
            for a, b, w in zip(at, beside, width, strict=True)
        ]
    ).T
    assert np.abs(one(POWERS, c) / at - 1).max() < 1e-9


@pytest.mark.parametrize(
    ("powers", "coefficients", "expected"),
    [
        ([0, 1], [1.0, 1.0], np.nan),  # z + 1
        ([0, 1, 2], [2.0, -2.0, 1.0], np.nan),  # (z - 1)^2 + 1
        ([1, 2], [-1.0, -3.0], 0.0),  # nothing is made
        ([1, 2], [1.0, -4.0], 0.25),  # made from itself: not the solution "none of it"
        ([0, 1], [np.nan, 1.0], np.nan),
        ([0, 1], [np.inf, -1.0], np.nan),
    ],
)
def test_without_a_positive_root(powers: Any, coefficients: Any, expected: float) -> None:
    found = one(np.array(powers)[:, None], np.array(coefficients)[:, None])[0]
    assert found == pytest.approx(expected, nan_ok=True)


# Two radicals X and Y: both started at rates p and q, three terminations. The two left sides rise
# with both unknowns, 2a x^2 + b x y = p and 2c y^2 + b x y = q, which has one positive solution.
TWO = [np.array([[0, 0], [2, 0], [1, 1]]), np.array([[0, 0], [0, 2], [1, 1]])]


def exact_pair(k: Any, x: float, y: float) -> Any:
    """The solution to 50 digits by mpmath, from near it; unknowns as logarithms."""
    p, q, a, b, c = map(mpmath.mpf, k)

    def balance(u: Any, v: Any) -> list[Any]:
        cross = b * mpmath.exp(u + v)
        return [
            (2 * a * mpmath.exp(2 * u) + cross) / p - 1,
            (2 * c * mpmath.exp(2 * v) + cross) / q - 1,
        ]

    return mpmath.findroot(balance, (mpmath.log(x), mpmath.log(y)), tol=1e-60)


def test_two_unknowns_to_fifty_digits() -> None:
    constants = spread(np.random.default_rng(5), 6, (60, 5))
    p, q, a, b, c = constants.T
    x, y = Balances(TWO).solve(np.array([p, -2 * a, -b, q, -2 * c, -b]))
    with mpmath.workdps(50):
        for k, xk, yk in zip(constants, x, y, strict=True):
            u, v = exact_pair(k, xk, yk)
            # the condition number of the relative solution: where cross termination prevails, both
            # balances fix x*y and only a small rest tells x from y
            j = np.array(
                [
                    [4 * k[2] * xk**2 + k[3] * xk * yk, k[3] * xk * yk],
                    [k[3] * xk * yk, 4 * k[4] * yk**2 + k[3] * xk * yk],
                ]
            ) / np.array([[k[0]], [k[1]]])
            allowed = 1e-14 * max(np.abs(np.linalg.inv(j)).max(), 1.0)
            assert abs(mpmath.exp(u) / xk - 1) < allowed
            assert abs(mpmath.exp(v) / yk - 1) < allowed


def test_two_unknowns_as_scipy_finds_them() -> None:
    rng = np.random.default_rng(6)
    for p, q, a, b, c in spread(rng, 1, (20, 5)):

        def balance(z: np.ndarray, v: tuple[float, ...] = (p, q, a, b, c)) -> list[float]:
            x, y = z
            return [
                v[0] - 2 * v[2] * x * x - v[3] * x * y,
                v[1] - 2 * v[4] * y * y - v[3] * x * y,
            ]

        x, y = Balances(TWO).solve(np.array([[p], [-2 * a], [-b], [q], [-2 * c], [-b]]))[:, 0]
        outside = root(balance, [x * 1.3, y * 0.8], tol=1e-13)
        assert outside.success
        assert [x, y] == pytest.approx(outside.x, rel=1e-9)


def surface(k: np.ndarray) -> tuple[list[np.ndarray], list[float], Any]:
    """A + 2 * <=> A**, B + * <=> B*, A** + B* -> 3 *: exponents of [*], [A**], [B*]; coefficients."""
    a_on, a_off, b_on, b_off, r = k
    exponents = [
        np.array([[2, 0, 0], [0, 1, 0], [0, 1, 1]]),
        np.array([[1, 0, 0], [0, 0, 1], [0, 1, 1]]),
        np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1], [0, 0, 0]]),
    ]
    coefficients = [a_on, -a_off, -r, b_on, -b_off, -r, 1.0, 2.0, 1.0, -1.0]

    def change(_: float, y: np.ndarray) -> list[float]:
        free = 1 - 2 * y[0] - y[1]
        return [
            a_on * free**2 - a_off * y[0] - r * y[0] * y[1],
            b_on * free - b_off * y[1] - r * y[0] * y[1],
        ]

    return exponents, coefficients, change


def test_coverages_are_where_the_time_course_ends() -> None:
    """From an empty surface, integrated until nothing changes (scipy, BDF)."""
    for k in spread(np.random.default_rng(7), 1.5, (12, 5)):
        exponents, coefficients, change = surface(k)
        z = Balances(exponents).solve(np.array(coefficients)[:, None])[:, 0]
        end = solve_ivp(change, (0, 1e5), [0, 0], method="BDF", rtol=1e-10, atol=1e-13).y[:, -1]
        assert z[1:] == pytest.approx(end, rel=1e-6, abs=1e-9)
        assert z[0] == pytest.approx(1 - 2 * end[0] - end[1], rel=1e-5, abs=1e-8)


def test_three_unknowns_at_every_point_of_many_decades() -> None:
    c = [surface(k) for k in spread(np.random.default_rng(8), 8, (400, 5))]
    coefficients = np.array([x[1] for x in c]).T
    z = Balances(c[0][0]).solve(coefficients)
    assert (z > 0).all()
    assert np.abs(z[0] + 2 * z[1] + z[2] - 1).max() < 1e-9


def test_a_point_does_not_depend_on_the_others() -> None:
    c = [surface(k) for k in spread(np.random.default_rng(9), 4, (40, 5))]
    coefficients = np.array([x[1] for x in c]).T
    balances = Balances(c[0][0])
    together = balances.solve(coefficients)
    assert together.tobytes() == balances.solve(coefficients).tobytes()
    for k in range(0, 40, 7):
        assert balances.solve(coefficients[:, k : k + 1])[:, 0] == pytest.approx(
            together[:, k], rel=1e-13
        )


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_small_linear_systems(n: int) -> None:
    rng = np.random.default_rng(n)
    a, b = rng.normal(size=(50, n, n)), rng.normal(size=(50, n, 2))
    a[3] = 0.0  # singular: not finite there, and everywhere else as numpy has it
    x = solved(a, b)
    assert not np.isfinite(x[3]).any()
    rest = [k for k in range(50) if k != 3]
    assert x[rest] == pytest.approx(np.linalg.solve(a[rest], b[rest]), rel=1e-9)


def test_unknowns_that_must_be_zero_leave_the_others() -> None:
    """Without B there is no B*: what is left is A at its balance with the vacant sites."""
    exponents, coefficients, _ = surface(np.array([2.0, 3.0, 5.0, 7.0, 11.0]))
    c = np.array(coefficients)
    c[3] = 0.0  # no adsorption of B
    balances = Balances(exponents)
    assert balances.delicate(c[:, None]).all()
    free, a, b = balances.without(c[:, None])[:, 0]
    assert b == 0.0
    # v + 2 (2/3) v^2 = 1
    assert free == pytest.approx((-1 + np.sqrt(1 + 16 / 3)) / (8 / 3), rel=1e-14)
    assert a == pytest.approx(2 / 3 * free**2, rel=1e-14)
    assert not balances.delicate(np.array(coefficients)[:, None]).any()
