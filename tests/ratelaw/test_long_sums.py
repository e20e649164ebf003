"""Laws with long sums, compiled as tables of exponents, against sympy's own derivatives."""

import numpy as np
import pytest
import sympy

from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.compile_sums import MANY_TERMS, has_long_sums

K = sympy.symbols("k1:5", nonnegative=True)
A, B = (sympy.Symbol(f"[{n}]", nonnegative=True) for n in "AB")
T = sympy.Symbol("{temperature}", real=True)
ALL = [*K, A, B, T]


def long_sum(rng, terms, roots=False):
    powers = rng.integers(0, 4, size=(terms, len(ALL)))
    half = sympy.Rational(1, 2) if roots else sympy.Integer(1)
    return sympy.Add(
        *(
            int(rng.integers(1, 9))
            * sympy.Mul(
                *(s ** (int(e) * (half if s is A else 1)) for s, e in zip(ALL, row, strict=True))
            )
            for row in powers
        )
    )


def law(seed, roots=False):
    rng = np.random.default_rng(seed)
    top, bottom = long_sum(rng, MANY_TERMS + 20, roots), long_sum(rng, MANY_TERMS + 20)
    return K[0] * A * top / (1 + bottom) ** 2 + K[1] * B


def plain(expression, points):
    """The same by differentiation and evaluation in 40 digits."""
    out = []
    for row in points:
        at = {s: sympy.Float(float(x), 40) for s, x in zip(ALL, row, strict=True)}
        out.append(float(expression.xreplace(at)))
    return np.array(out)


@pytest.mark.parametrize(("seed", "roots"), [(1, False), (3, True)])
def test_values_and_derivatives(seed, roots):
    e = law(seed, roots)
    assert has_long_sums(e)
    rng = np.random.default_rng(10 + seed)
    theta = rng.uniform(0.3, 1.5, size=(1, 1, 4))
    conditions = rng.uniform(0.3, 1.5, size=(3, 3))
    conditions[0, 2] = -0.7  # a quantity that may be negative
    points = np.column_stack([np.repeat(theta[0], 3, axis=0), conditions])
    value, by_theta, by_cond, by_both = CompiledLaw(e, K, [A, B, T])(
        theta, conditions, constants=True, conditions_too=True, both=True
    )
    assert value[0] == pytest.approx(plain(e, points), rel=1e-11)
    for j, k in ((0, K[0]), (2, K[2])):
        assert by_theta[0, :, j] == pytest.approx(plain(e.diff(k), points), rel=1e-9, abs=1e-12)
    for i, c in ((0, A), (2, T)):
        assert by_cond[0, :, i] == pytest.approx(plain(e.diff(c), points), rel=1e-9, abs=1e-12)
    for i, c, j, k in ((1, B, 2, K[2]), (0, A, 0, K[0])):
        mixed = plain(e.diff(c).diff(k), points[:1])
        assert by_both[0, :1, i, j] == pytest.approx(mixed, rel=1e-8, abs=1e-11)


def test_zeros_and_batches():
    """A term whose amount or constant is zero is absent, and its slope is what multiplies it."""
    e = law(4)
    theta = np.random.default_rng(5).uniform(0.3, 1.5, size=(6, 1, 4))
    theta[0, 0, 3] = 0.0
    conditions = np.random.default_rng(6).uniform(0.3, 1.5, size=(5, 3))
    conditions[0, 1] = 0.0
    compiled = CompiledLaw(e, K, [A, B, T])
    value, by_theta, _, _ = compiled(
        theta, conditions, constants=True, conditions_too=False, both=False
    )
    assert value.shape == (6, 5)
    assert np.isfinite(by_theta).all()
    points = np.concatenate([theta[0, 0], conditions[0]])[None]
    assert value[0, 0] == pytest.approx(plain(e, points)[0], rel=1e-11)
    assert by_theta[0, 0, 3] == pytest.approx(plain(e.diff(K[3]), points)[0], rel=1e-9, abs=1e-12)
    again = compiled(theta[3:4], conditions, constants=False, conditions_too=False, both=False)[0]
    assert np.array_equal(again[0], value[3])
