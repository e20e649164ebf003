"""Laws with values that only balances fix: values, exact derivatives, and all that reads a law.

Sources: mpmath at 60 digits (roots and difference quotients); the closed root of a quadratic; sympy's
own derivative of that root. The laws and figures are invented.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy

from discrim.ratelaw.cleared import cleared
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.dimension import find_units
from discrim.ratelaw.implicit import ImplicitValue, balances_of, named, systems, terms_in
from discrim.ratelaw.knockout import KnockOutKind, knock_out
from discrim.ratelaw.linear import linear_constants
from discrim.ratelaw.model import Constant, ConstantKind, RateLaw, amount, constant_symbol
from discrim.ratelaw.printing import latex, mathml, plain
from discrim.ratelaw.scale import typical_scale
from discrim.ratelaw.settle import settled
from discrim.units import Unit

k_i, k_p, k_t, k_3 = (constant_symbol(n) for n in ("k_i", "k_p", "k_t", "k_3"))
CONSTANTS = [k_i, k_p, k_t, k_3]
A, B = amount("A"), amount("B")
Z = sympy.Dummy("[R]", positive=True)
R = ImplicitValue(0, [Z], [k_i * A - 2 * k_t * Z**2 - k_3 * B * Z**3])
CHAIN = k_p * R * B
X, Y = sympy.Dummy("[H]", positive=True), sympy.Dummy("[Br]", positive=True)
PAIR = [k_p * Y * A - k_3 * X * B - k_t * X * Y, 2 * k_i * B - 2 * k_t * Y**2 - 2 * k_t * X * Y]
TWO = k_p * ImplicitValue(1, [X, Y], PAIR) * A + k_3 * ImplicitValue(0, [X, Y], PAIR) * B
# one value within the balances of another
W = sympy.Dummy("[S]", positive=True)
INNER = k_p * ImplicitValue(0, [W], [k_t * R - k_3 * W - k_i * W**3]) + k_t * R**2 / (A + R)


def root_of(f: Callable[[Any], Any]) -> Any:
    """The one positive root to 60 digits: halving from 1e-40 to 1e40, then Newton's method."""
    low, high = mpmath.log("1e-40"), mpmath.log("1e40")
    start = mpmath.sign(f(mpmath.exp(low)))
    for _ in range(50):
        middle = (low + high) / 2
        if mpmath.sign(f(mpmath.exp(middle))) == start:
            low = middle
        else:
            high = middle
    z = mpmath.exp((low + high) / 2)
    for _ in range(4):
        h = z * mpmath.mpf("1e-25")
        z -= f(z) * 2 * h / (f(z + h) - f(z - h))
    return z


def chain_root(ki: Any, kt: Any, k3: Any, a: Any, b: Any) -> Any:
    return root_of(lambda z: ki * a - 2 * kt * z**2 - k3 * b * z**3)


def chain(x: Sequence[Any]) -> Any:
    ki, kp, kt, k3, a, b = x
    return kp * chain_root(ki, kt, k3, a, b) * b


def nested(x: Sequence[Any]) -> Any:
    ki, kp, kt, k3, a, b = x
    r = chain_root(ki, kt, k3, a, b)
    s = root_of(lambda w: kt * r - k3 * w - ki * w**3)
    return kp * s + kt * r**2 / (a + r)


def pair(x: Sequence[Any]) -> Any:
    ki, kp, kt, k3, a, b = x

    def h_of(y: Any) -> Any:
        return kp * y * a / (k3 * b + kt * y)

    def f(y: Any) -> Any:
        return 2 * ki * b - 2 * kt * y**2 - 2 * kt * h_of(y) * y

    y = root_of(f)
    return kp * y * a + k3 * h_of(y) * b


LAWS = [(CHAIN, chain), (INNER, nested), (TWO, pair)]


@pytest.mark.parametrize(("law", "exact"), LAWS, ids=["one unknown", "nested", "two unknowns"])
def test_values_and_derivatives_to_many_digits(law: Any, exact: Callable[..., Any]) -> None:
    rng = np.random.default_rng(11)
    theta = 10.0 ** rng.uniform(-2, 2, (6, 1, 4))
    conditions = 10.0 ** rng.uniform(-1, 1, (2, 2))
    value, by_t, by_c, by_both = CompiledLaw(law, CONSTANTS, [A, B])(
        theta, conditions, constants=True, conditions_too=True, both=True
    )
    assert by_t is not None
    assert by_c is not None
    assert by_both is not None
    with mpmath.workdps(60):
        for s, n in np.ndindex(value.shape):
            x = [mpmath.mpf(float(v)) for v in (*theta[s, 0], *conditions[n])]
            here = exact(x)
            assert abs(value[s, n] / here - 1) < 1e-13
            h = [v * mpmath.mpf("1e-14") for v in x]

            def moved(*by: tuple[int, int], x: Any = x, h: Any = h) -> Any:
                y = list(x)
                for i, sign in by:
                    y[i] += sign * h[i]
                return exact(y)

            got = [*by_t[s, n], *by_c[s, n]]
            for i in range(6):
                slope = (moved((i, 1)) - moved((i, -1))) / (2 * h[i])
                # relative to the law's own size where a slope passes through zero
                assert abs(got[i] - slope) < 1e-11 * max(abs(slope), abs(here / x[i]) / 100)
            for i in (4, 5):
                for j in range(4):
                    second = (
                        moved((i, 1), (j, 1))
                        - moved((i, 1), (j, -1))
                        - moved((i, -1), (j, 1))
                        + moved((i, -1), (j, -1))
                    ) / (4 * h[i] * h[j])
                    size = max(abs(second), abs(here / x[i] / x[j]) / 100)
                    assert abs(by_both[s, n, i - 4, j] - second) < 1e-10 * size


def test_quadratic_agrees_with_its_closed_root_in_value_and_all_derivatives() -> None:
    a, b, c = k_t, k_3 * B, k_i * A
    implicit = k_p * ImplicitValue(0, [Z], [c - b * Z - a * Z**2]) ** 2
    closed = k_p * (2 * c / (b + sympy.sqrt(b**2 + 4 * a * c))) ** 2
    rng = np.random.default_rng(12)
    theta, conditions = 10.0 ** rng.uniform(-3, 3, (20, 1, 4)), 10.0 ** rng.uniform(-1, 1, (9, 2))
    every = {"constants": True, "conditions_too": True, "both": True}
    found = CompiledLaw(implicit, CONSTANTS, [A, B])(theta, conditions, **every)
    wanted = CompiledLaw(closed, CONSTANTS, [A, B])(theta, conditions, **every)
    for got, right in zip(found, wanted, strict=True):
        assert got is not None
        assert right is not None
        assert got == pytest.approx(right, rel=1e-9, abs=1e-12)


def test_shapes_with_and_without_own_constants_and_conditions() -> None:
    law = CompiledLaw(CHAIN, CONSTANTS, [A, B])
    rng = np.random.default_rng(13)
    theta, conditions = 10.0 ** rng.uniform(-1, 1, (3, 5, 4)), 10.0 ** rng.uniform(-1, 1, (3, 5, 2))
    every = {"constants": True, "conditions_too": True, "both": True}
    all_own = law(theta, conditions, **every)
    assert [x.shape for x in all_own if x is not None] == [
        (3, 5),
        (3, 5, 4),
        (3, 5, 2),
        (3, 5, 2, 4),
    ]
    shared_theta = law(theta[:, :1], conditions, **every)
    shared_conditions = law(theta, conditions[0], **every)
    one_start = law(theta[:1, :1], conditions, **every)
    for s in range(3):
        for n in range(5):
            for out, t, c in (
                (shared_theta, theta[s, 0], conditions[s, n]),
                (shared_conditions, theta[s, n], conditions[0, n]),
                (one_start, theta[0, 0], conditions[s, n]),
            ):
                single = law(t[None, None], c[None], **every)
                for whole, alone in zip(out, single, strict=True):
                    assert whole is not None
                    assert alone is not None
                    assert whole[s, n] == pytest.approx(alone[0, 0], rel=1e-12)
    nothing = law(theta, conditions, constants=False, conditions_too=False, both=False)
    assert nothing[1:] == (None, None, None)
    assert nothing[0].tobytes() == all_own[0].tobytes()


def test_extreme_constants() -> None:
    """Radicals where one termination prevails: sqrt(ki A/(2 kt)) and (ki A/(k3 B))^(1/3)."""
    law = CompiledLaw(R, CONSTANTS, [A, B])
    conditions = np.array([[0.3, 2.0]])
    for ki in (1e-20, 1.0, 1e20):
        for kt, k3, z in (
            (1e15, 1e-20, (ki * 0.3 / 2e15) ** 0.5),
            (1e-20, 1e12, (ki * 0.15e-12) ** (1 / 3)),
        ):
            small = 2 * k3 * z**3 / (ki * 0.3) if kt == 1e15 else 2 * kt * z**2 / (ki * 0.3)
            theta = np.array([[[ki, 1.0, kt, k3]]])
            value, slope, _, _ = law(
                theta, conditions, constants=True, conditions_too=False, both=False
            )
            assert value[0, 0] == pytest.approx(z, rel=1e-13 + small)
            assert slope is not None
            power = 0.5 if kt == 1e15 else 1 / 3
            assert slope[0, 0, 0] == pytest.approx(power * z / ki, rel=1e-12 + small)


def test_zero_amounts_and_constants() -> None:
    every = {"constants": True, "conditions_too": True, "both": False}
    # linear at low amounts: c z + z^3 = k A; at A = 0 the slope is k/c
    low = ImplicitValue(0, [Z], [k_i * A - k_t * Z - k_3 * Z**3])
    law = CompiledLaw(low, [k_i, k_t, k_3], [A])
    theta = np.array([[[2.0, 5.0, 7.0]], [[0.0, 5.0, 7.0]], [[2.0, 0.0, 7.0]]])
    value, by_t, by_c, _ = law(theta, np.array([[0.0], [1.0]]), **every)
    assert by_t is not None
    assert by_c is not None
    assert value[0, 0] == 0
    assert by_c[0, 0, 0] == pytest.approx(0.4)
    assert not by_t[0, 0].any()
    assert value[1, 1] == 0
    assert by_t[1, 1, 0] == pytest.approx(0.2)
    assert value[2, 1] == pytest.approx((2 / 7) ** (1 / 3))
    assert value[2, 0] == 0
    assert not np.isfinite(by_c[2, 0]).any()
    # without initiation no radicals; without termination no end of them
    law = CompiledLaw(TWO, CONSTANTS, [A, B])
    theta = np.array([[[0.0, 1.0, 1.0, 1.0]], [[1.0, 1.0, 0.0, 1.0]]])
    value = law(theta, np.array([[1.0, 1.0]]), **{**every, "constants": False})[0]
    assert value[0, 0] == 0
    assert np.isnan(value[1, 0])


def test_no_positive_solution_is_not_a_number_and_leaves_the_others() -> None:
    law = CompiledLaw(CHAIN, CONSTANTS, [A, B])
    conditions = np.array([[1.0, 2.0], [-1.0, 2.0]])  # a reconciled amount below zero
    value, slope, _, _ = law(
        np.ones((1, 1, 4)), conditions, constants=True, conditions_too=False, both=False
    )
    assert slope is not None
    assert np.isfinite(value[0, 0])
    assert np.isfinite(slope[0, 0]).all()
    assert np.isnan(value[0, 1])
    assert np.isnan(slope[0, 1]).all()


def test_names_that_look_like_code_stay_out_of_what_is_compiled() -> None:
    odd = sympy.Symbol("k_x__import__('os')", nonnegative=True)
    unknown = sympy.Dummy("[a b]; raise", positive=True)
    value = ImplicitValue(0, [unknown], [odd * A - unknown - unknown**3])
    law = CompiledLaw(value, [odd], [A])
    out = law(
        np.array([[[2.0]]]), np.array([[1.0]]), constants=False, conditions_too=False, both=False
    )
    assert out[0][0, 0] == pytest.approx(1.0)  # 1 + 1 = 2


def test_terms_of_a_balance() -> None:
    found = terms_in(sympy.expand((1 + Z) ** 2) * k_t - k_i * A * Z + sympy.sqrt(Z), [Z])
    half = sympy.Rational(1, 2)
    assert found == {(0,): k_t, (1,): 2 * k_t - k_i * A, (2,): k_t, (half,): 1}
    assert terms_in(k_i / Z - k_t * Z / (A + Z), [Z]) == {(0,): k_i * A, (1,): k_i, (2,): -k_t}
    with pytest.raises(ValueError, match="no polynomial"):
        terms_in(sympy.exp(Z) - k_i, [Z])


def test_systems_come_inner_first_and_each_once() -> None:
    assert [u[0].name for u, _ in systems(INNER)] == ["[R]", "[S]"]
    assert [u.name for u, _ in balances_of(TWO + CHAIN)].count("[H]") == 1
    bare, values = named(INNER)
    assert not bare.has(ImplicitValue)
    assert bare.xreplace(dict(values)) == INNER


def test_printed_by_the_name_of_the_unknown() -> None:
    assert plain(CHAIN) == "k_p*[B]*[R]"
    assert latex(R**2) == r"[\mathrm{R}]^{2}"
    assert '<mi mathvariant="normal">R</mi>' in mathml(CHAIN)
    ((unknown, equation),) = balances_of(CHAIN)
    assert plain(sympy.Eq(0, equation, evaluate=False)) == (
        "0 = k_i*[A] - k_3*[B]*[R]^3 - 2*k_t*[R]^2"
    )
    assert unknown.name == "[R]"
    share = ImplicitValue(0, [sympy.Dummy("[A*]/[*]", positive=True)], [sympy.Integer(0)])
    assert plain(k_p / share) == "k_p/([A*]/[*])"
    assert latex(share) == r"\left([\mathrm{A*}]/[\mathrm{*}]\right)"
    closed = 2 * A / (k_i + sympy.sqrt(k_i**2 + 4 * k_t * A))
    assert plain(closed) == "2*[A]/(k_i + sqrt(k_i^2 + 4*k_t*[A]))"
    assert latex(closed) == (
        r"\frac{2\,[\mathrm{A}]}{k_{\mathrm{i}} + \sqrt{k_{\mathrm{i}}^{2} + "
        r"4\,k_{\mathrm{t}}\,[\mathrm{A}]}}"
    )


def record(symbol: sympy.Symbol) -> Constant:
    return Constant(symbol.name, symbol, ConstantKind.RATE)


def test_a_constant_within_a_balance_or_a_root_is_not_linear() -> None:
    constants = [record(s) for s in CONSTANTS]
    assert linear_constants([CHAIN], constants) == ("k_p",)
    assert linear_constants([k_p * sympy.sqrt(k_i * A + k_t) + k_3], constants) == ("k_p", "k_3")


def test_no_cleared_form() -> None:
    assert cleared(CHAIN, CONSTANTS, [A, B]) is None


def test_typical_sizes_make_the_terms_of_a_balance_equal() -> None:
    at = {A: 0.1, B: 2.0}
    scale = typical_scale([(CHAIN, 1e-3)], at)
    assert set(scale) == {"k_i", "k_p", "k_t", "k_3"}
    z = 1e-3 / (scale["k_p"] * 2.0)  # of the law's own equation
    terms = [scale["k_i"] * 0.1, 2 * scale["k_t"] * z**2, scale["k_3"] * 2.0 * z**3]
    assert max(terms) / min(terms) == pytest.approx(1.0, rel=1e-4)


def test_units_of_constants_within_balances() -> None:
    concentration = Unit.of({"amount": 1, "volume": -1})
    rate = concentration / Unit.of({"time": 1})
    free = sympy.Dummy("[*]", positive=True)
    sites = ImplicitValue(0, [free], [free + k_t * A * free**2 + k_3 * B * free**3 - 1])
    found = find_units([(k_p * sites**2 * A, rate)], {A: concentration, B: concentration})
    assert found.words == {"k_p": "s⁻¹", "k_t": "L mol⁻¹", "k_3": "L mol⁻¹"}
    # [R] in k_p*[R]*[B] may have any unit, and with it the constants that make and end it
    found = find_units([(CHAIN, rate)], {A: concentration, B: concentration})
    assert set(found.words.values()) == {""}
    ratio = find_units(
        [(ImplicitValue(0, [Z], [k_t * A - Z - k_3 * Z**2]), rate)], {A: concentration}
    )
    assert ratio.words == {"k_t": "s⁻¹", "k_3": "L s mol⁻¹"}


def law_of(rate: Any) -> RateLaw:
    return RateLaw("invented", rate, {"P": rate}, tuple(record(s) for s in CONSTANTS), ("A", "B"))


def test_knock_outs_of_a_law_with_radicals() -> None:
    # an uncatalysed way beside the chain; without the initiator the chain is gone
    law = law_of(k_p * R * B + k_t * B)
    found = knock_out(law, "A", 0.1)
    assert found is not None
    assert found.kind is KnockOutKind.VANISH
    assert found.psi == ("k_i",)
    assert found.vanish == ("k_p", "k_3")
    assert found.rate == k_t * B


def test_a_balance_that_became_simple_is_solved() -> None:
    assert settled(CHAIN.subs(k_i, 0)) == 0
    cube = settled(R.subs(k_t, 0))
    assert not cube.has(ImplicitValue)
    at = {k_i: 2.0, A: 3.0, B: 0.5, k_3: 1.5}
    assert float(cube.subs(at)) == pytest.approx((2.0 * 3.0 / 0.75) ** (1 / 3), rel=1e-12)
    # without one termination of [H]: it follows from [Br], which keeps a balance of its own
    rest = settled(TWO.subs(k_3, 0))
    assert [u.name for u, _ in balances_of(rest)] == ["[Br]"]
    assert settled(TWO.subs(k_t, 0)) is sympy.nan  # started, never ended
    assert settled(TWO) == TWO
