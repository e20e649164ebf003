"""Pairs of laws with known relations: same, special case (inside, at zero, at infinity), neither.

Each answer can be read off by hand and stands with its reason or source. Names of laws and kinds of
inhibition: common practice, no source; the Langmuir isotherm and what it becomes at low and high
pressure: I. Langmuir, J. Am. Chem. Soc. 40 (1918) 1361 (from memory). What the program says is
checked again by numbers: a special case by putting its constants into the larger law, "neither" by
fitting one law to exact values of the other with scipy.
"""

from __future__ import annotations

import re
import time
from pathlib import Path

import mpmath
import numpy as np
import pytest
import sympy
from scipy.optimize import least_squares

from discrim.errors import Place
from discrim.mechanism.library import load_mechanism
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.model import RateLaw, quantity
from discrim.ratelaw.nesting import Neither, Nesting, NotProven, examine, same_law
from discrim.weigh.sameness import Pair, related

QUANTITIES = {n: quantity(n) for n in ("T", "pH")}

# usual laws; one site: k*K_A*[A]*[B]/(...)
LANGMUIR = "k*K*[A]/(1 + K*[A])"
RIDEAL = "k*K_A*[A]*[B]/(1 + K_A*[A])"
RIDEAL_B = "k*K_B*[A]*[B]/(1 + K_B*[B])"
BOTH = "k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2"
BOTH_P = "k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B] + K_P*[P])^2"
TWO_KINDS = "k*K_A*K_B*[A]*[B]/((1 + K_A*[A])*(1 + K_B*[B]))"
SPLIT = "k*K_A*[A]*sqrt(K_H*[H])/(1 + K_A*[A] + sqrt(K_H*[H]))^2"
PLAIN = "Vm*[S]/(Km + [S])"
COMPETITIVE = "Vm*[S]/(Km*(1 + [I]/Kic) + [S])"
UNCOMPETITIVE = "Vm*[S]/(Km + [S]*(1 + [I]/Kiu))"
PURE = "Vm*[S]/((Km + [S])*(1 + [I]/Ki))"
MIXED = "Vm*[S]/(Km*(1 + [I]/Kic) + [S]*(1 + [I]/Kiu))"
REVERSIBLE = "k*([A] - [B]/K_eq)"
ORDERED = "V*[A]*[B]/(K_iA*K_B + K_B*[A] + K_A*[B] + [A]*[B])"
PING_PONG = "V*[A]*[B]/(K_B*[A] + K_A*[B] + [A]*[B])"
PARALLEL = "k_1*[A]/(1 + K_1*[A]) + k_2*[B]/(1 + K_2*[B])"
BRIDGED = "4*k*K*[A]/(1 + sqrt(1 + 8*K*[A]))^2"
FALLOFF = "k_0*[M]*[A]/(1 + k_0*[M]/k_inf)"

# (special case, larger law, constants at zero, at infinity, without effect)
SPECIAL = [
    # inside: all constants finite and positive
    (PURE, MIXED, [], [], []),  # Kic = Kiu = Ki
    ("k*[A]*[B]/(1 + K_A*[A] + K_B*[B] + K_A*K_B*[A]*[B])",
     "k*[A]*[B]/(1 + K_A*[A] + K_B*[B] + K_AB*[A]*[B])", [], [], []),  # K_AB = K_A*K_B
    ("k*[A]*[B]", "k*[A]^n*[B]^m", [], [], []),  # n = m = 1
    ("k*[A]/(1 + K*[A])^2", "k*[A]/(1 + K*[A])^n", [], [], []),  # n = 2
    ("k*[A]/(1 + K*[A])^2", "k*[A]/(1 + a*[A] + b*[A]^2)", [], [], []),  # a^2 = 4b
    # at zero: a term is dropped
    (BOTH, BOTH_P, ["K_P"], [], []),  # no product inhibition
    ("k_1*[A]", "k_1*[A] + k_2*[B]", ["k_2"], [], []),  # one of two pathways
    (REVERSIBLE, "k_f*[A] - k_r*[B] + k_x*[C]", ["k_x"], [], []),
    (PING_PONG, ORDERED, ["K_iA"], [], []),  # the constant term of the denominator is missing
    ("k*[A]*[B]/(1 + K_A*[A])^2", "k*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2", ["K_B"], [], []),
    ("k*sqrt([H])*[A]/(1 + K*sqrt([H]))^2", "k*sqrt([H])*[A]/(1 + K*sqrt([H]) + L*[A])^2",
     ["L"], [], []),  # dissociative adsorption without the partner
    ("k_1*[A]/(1 + K_1*[A]) + k_2*[B]", PARALLEL, ["K_2"], [], []),
    ("k_w + k_h*[H+]", "k_w + k_h*[H+] + k_o*[OH-]", ["k_o"], [], []),  # specific acid only
    # at zero, and another constant then without effect
    ("k_1*[A]/(1 + K_1*[A])", PARALLEL, ["k_2"], [], ["K_2"]),
    ("k*[A]", "k*[A] + q*[B]^n", ["q"], [], ["n"]),
    ("k_2*[A]", "k*[B]*exp(-E/T) + k_2*[A]", ["k"], [], ["E"]),
    # at infinity
    (PLAIN, COMPETITIVE, [], ["Kic"], []),  # an inhibitor that does not bind
    (COMPETITIVE, MIXED, [], ["Kiu"], []),
    (UNCOMPETITIVE, MIXED, [], ["Kic"], []),
    (PLAIN, MIXED, [], ["Kic", "Kiu"], []),
    ("k*[A]", REVERSIBLE, [], ["K_eq"], []),  # irreversible: equilibrium far on the right
    ("k", LANGMUIR, [], ["K"], []),  # saturation, order zero
    ("k*[M]*[A]", FALLOFF, [], ["k_inf"], []),  # low-pressure limit
    ("k*[A]", FALLOFF, [], ["k_0"], []),  # high-pressure limit
    ("k*[B]", RIDEAL, [], ["K_A"], []),
    # at zero and infinity together, with a product that stays
    ("k*[A]", LANGMUIR, ["K"], ["k"], []),  # low pressure: k*K = k'
    ("k*[A]", "Vm*[A]/(Km + [A])", [], ["Vm", "Km"], []),  # Vm/Km = k
    ("k*[A]*[B]", RIDEAL, ["K_A"], ["k"], []),
    ("k*K_B*[A]*[B]/(1 + K_B*[B])^2", BOTH, ["K_A"], ["k"], []),  # A weakly adsorbed
    ("k*[B]/[A]", BOTH, [], ["k", "K_A"], []),  # A covers the surface
    (RIDEAL, TWO_KINDS, ["K_B"], ["k"], []),
    ("k*[A]", BRIDGED, ["K"], ["k"], []),
    ("k*[A]/(1 + K_B*[B])", "2*k*[A]/(1 + K_B*[B] + sqrt((1 + K_B*[B])^2 + 4*K*[A]))",
     ["K"], [], []),  # the quadratic term of the site balance is dropped
]  # fmt: skip

SAME = [
    (LANGMUIR, "Vm*[A]/(Km + [A])"),  # K = 1/Km
    (REVERSIBLE, "k_f*[A] - k_r*[B]"),  # K_eq = k_f/k_r
    ("k*K*[A]/(1 + K*[A] + L*[B])", "Vm*[A]/(Km*(1 + [B]/Ki) + [A])"),  # competitive binding
    # Briggs and Haldane, Biochem. J. 19 (1925) 338 (from memory): Km = (k_-1 + k_2)/k_1
    (PLAIN, "k_1*k_2*[S]/(k_1*[S] + k_m1 + k_2)"),
    ("(k_1 + k_2)*[A]", "k*[A]"),
    ("k*K_H*[H]*[A]/(1 + sqrt(K_H*[H]))^2", "q*[H]*[A]/(1 + K*sqrt([H]))^2"),  # K = sqrt(K_H)
    (BRIDGED, "q*L*[A]/(1 + sqrt(1 + 4*L*[A]))^2"),  # L = 2K
    ("k*[A]^n", "q*[A]^m"),
    ("1/(a + b/[A])", "k*[A]/(1 + K*[A])"),  # straight line in reciprocals
    ("k*[A]*10^(pKa - pH)", "q*[A]*10^(-pH)"),
]  # fmt: skip

NEITHER = [
    (RIDEAL, RIDEAL_B),  # which one is adsorbed
    (BOTH, TWO_KINDS),  # one kind of site or two: 1 + ... + [A]^2, [B]^2 against [A][B] alone
    ("k*[A]/(1 + K*[A])", "k*[A]/(1 + K*[A])^2"),  # one site or two
    (RIDEAL, BOTH),  # [A]/(1 + K[A]) is no limit of [A]/(1 + K_A[A] + K_B[B])^2
    (COMPETITIVE, UNCOMPETITIVE),  # each forbids the other's term
    (PURE, COMPETITIVE),
    ("k*[A]", "k*[B]"),
    ("k*[A] - q*[B]", "k*[A] + q*[B]"),  # a constant would have to be negative
    ("k*[A]/(1 + K*[A])", "k*[A]^n"),  # the apparent order changes with [A]
    ("k_1*[A] + k_2*[B]", "k*[A]*[B]/(1 + K*[A])"),
    ("k*[A]*[B]/(1 + K_P*[P])", "k*[A]*[B]/(1 + K_A*[A])"),
    (BRIDGED, "k*[A]/(1 + K*[A])"),  # a root is no ratio of polynomials
    (SPLIT, BOTH.replace("[B]", "[H]")),  # half order in hydrogen or first
    ("k*[A]*exp(-E/T)/(1 + K*[B])", "k*[A]^n*exp(-E/T)"),  # the second knows nothing of [B]
    ("k*[A]/(1 + K*[A] + L*[B])", PARALLEL),  # [A] and [B] in one denominator
    # one site or two, at each temperature
    ("k*exp(-E/T)*[A]/(1 + K*[A])", "k*exp(-E/T)*[A]/(1 + K*[A])^2"),
    ("k*[A]^n/(1 + K*[B])", "k*[A]^n/(1 + K*[B])^2"),  # the same at each [A]
    ("k*([A] - [B]/K_eq)/(1 + K*[A])", "k*[A]/(1 + K*[A] + L*[B])"),  # no backward rate
]  # fmt: skip

# what is known by hand but is beyond the proofs: it must be said so, not guessed
UNDECIDED = [
    # K -> infinity gives k/2; the equation of second degree then has a double root
    ("k", BRIDGED),
    # a smaller law whose form depends on a function of a constant
    ("k*[A]", "k*log(1 + K*[A])"),
]


def law(text: str) -> RateLaw:
    expr = parse_expression(text, Place(), QUANTITIES)
    return law_from_expression("x", expr, overall=None, place=None)


def within(smaller: str, larger: str) -> Nesting | Neither | NotProven:
    small, large = law(smaller), law(larger)
    return examine([small.rate], [large.rate], small.constants, large.constants)


def pair(a: str, b: str) -> Pair:
    one, other = law(a), law(b)
    return related([one.rate], [other.rate], one.constants, other.constants)


def agree(found: Nesting, smaller: RateLaw, larger: RateLaw) -> None:
    """The larger law at the constants that were found is the smaller one, in fifty digits."""
    rng = np.random.default_rng(7)
    small = sorted(smaller.rate.free_symbols | larger.rate.free_symbols, key=str)
    constants = {c.symbol for c in larger.constants}
    with mpmath.workdps(60):
        for _ in range(5):
            numbers = {s: sympy.Rational(int(rng.integers(20, 90)), 37) for s in small}
            at = {}
            for c in larger.constants:
                value, power = found.along.get(c.name, (found.values.get(c.name), 0))
                if value is None:  # no effect: anything will do
                    value = sympy.Rational(int(rng.integers(20, 90)), 41)
                at[c.symbol] = value.subs(numbers) * sympy.Integer(10) ** (16 * power)
            amounts = {s: v for s, v in numbers.items() if s not in constants}
            large = sympy.N(larger.rate.subs({**amounts, **at}), 60)
            exact = sympy.N(smaller.rate.subs(numbers), 60)
            assert abs(large - exact) < 1e-12 * abs(exact)


@pytest.mark.parametrize(("smaller", "larger", "zero", "infinite", "vanish"), SPECIAL)
def test_special_case(
    smaller: str, larger: str, zero: list[str], infinite: list[str], vanish: list[str]
) -> None:
    found = within(smaller, larger)
    assert isinstance(found, Nesting), found
    assert (list(found.zero), list(found.infinite), list(found.vanish)) == (zero, infinite, vanish)
    assert found.edge is bool(zero or infinite)
    assert found.inside is not (found.edge or bool(vanish))
    agree(found, law(smaller), law(larger))
    for name in (*zero, *infinite, *vanish):
        assert name in found.words()
    seen = pair(smaller, larger)
    assert seen.up is not None
    assert seen.same is None


@pytest.mark.parametrize(("a", "b"), SAME)
def test_same(a: str, b: str) -> None:
    found = pair(a, b)
    assert found.same is not None, found
    one, other = law(a), law(b)
    for x, y in ((one, other), (other, one)):
        found_in = examine([x.rate], [y.rate], x.constants, y.constants)
        assert isinstance(found_in, Nesting)
        assert not found_in.infinite
        agree(found_in, x, y)


@pytest.mark.parametrize(("a", "b"), NEITHER)
def test_neither(a: str, b: str) -> None:
    found = pair(a, b)
    assert found.neither, found
    assert found.reason
    for x, y in ((a, b), (b, a)):
        assert distance(law(x), law(y)) > 3e-3


def distance(smaller: RateLaw, larger: RateLaw) -> float:
    """How close the larger law comes to values of the smaller one: worst relative difference."""
    rng = np.random.default_rng(3)
    symbols = sorted(smaller.rate.free_symbols | larger.rate.free_symbols, key=str)
    varied = [s for s in symbols if s.name[0] in "[{"]
    points = np.exp(rng.uniform(-1.5, 1.5, (40, len(varied))))
    fixed = {c.symbol: 0.8 + 0.3 * i for i, c in enumerate(smaller.constants)}
    want = sympy.lambdify(varied, smaller.rate.subs(fixed), "numpy")(*points.T)
    function = sympy.lambdify([*varied, *(c.symbol for c in larger.constants)], larger.rate)
    free = np.array([c.lower < 0 for c in larger.constants])

    def off(x: np.ndarray) -> np.ndarray:
        theta = np.where(free, x, np.exp(np.clip(x, -60, 60)))
        with np.errstate(all="ignore"):
            out = (function(*points.T, *theta) - want) / np.abs(want).max()
        return np.nan_to_num(np.broadcast_to(out, want.shape), nan=1e3, posinf=1e3, neginf=-1e3)

    best = np.inf
    for _ in range(8):
        found = least_squares(off, rng.normal(0, 1.5, len(larger.constants)), x_scale=1.0)
        best = min(best, float(np.abs(found.fun).max()))
    return best


@pytest.mark.parametrize(("smaller", "larger"), UNDECIDED)
def test_undecided_is_said(smaller: str, larger: str) -> None:
    assert isinstance(within(smaller, larger), NotProven)
    found = pair(smaller, larger)
    assert (found.same, found.up, found.down, found.neither) == (None, None, None, False)
    assert found.reason


def test_general_acid_is_specific_acid_times_base() -> None:
    """With [HA] = C - [A-] and [A-] = C/(1 + 10^(pKa - pH)): 10^-pKa*[HA] = 10^-pH*[A-]."""
    ratio = "(1 + 10^(pKa - pH))"
    general = law(f"k*(C - C/{ratio})")
    specific = law(f"q*10^(-pH)*C/{ratio}")
    known = {"pKa", "C"}
    mine = [[c for c in x.constants if c.name not in known] for x in (general, specific)]
    found = related([general.rate], [specific.rate], *mine)
    assert found.same is not None
    value = found.same.b_from_a["q"]
    pka, k = general.constant("pKa").symbol, general.constant("k").symbol
    assert sympy.simplify(value - k * 10**pka) == 0
    # and with the number that a study gives
    at = {pka: sympy.Float("4.62", 17)}
    found = related([general.rate.xreplace(at)], [specific.rate.xreplace(at)], *mine)
    assert found.same is not None
    assert float(found.same.b_from_a["q"].subs(k, 1)) == pytest.approx(10**4.62, rel=1e-12)


@pytest.mark.parametrize("name", [
    "adsorption-limiting-one-reactant",
    "enzyme-ordered-two-substrates",
    "enzyme-substituted-two-substrates",
])  # fmt: skip
def test_combined_constants_lose_nothing(name: str) -> None:
    """The law in combinations of constants is the same as in the constants of the steps."""
    found = derive(load_mechanism(name, base=Path()))
    assert len(found.constants) < len(found.step_constants)
    assert same_law([found.rate], [found.step_rate], found.constants, found.step_constants)
    pair_found = related([found.rate], [found.step_rate], found.constants, found.step_constants)
    assert pair_found.same is not None


def test_words_of_limits() -> None:
    def words(smaller: str, larger: str) -> str:
        found = within(smaller, larger)
        assert isinstance(found, Nesting)
        return found.words()

    assert words(PLAIN, COMPETITIVE) == "Kic = infinite"
    assert words("q*[A]", LANGMUIR) == "k = infinite, K = 0 with k*K = q"
    assert words("q*[A]", "Vm*[A]/(Km + [A])") == "Vm = infinite, Km = infinite with Vm/Km = q"
    assert words("k_1*[A]", PARALLEL) == "K_1 = 0, k_2 = 0, K_2 without effect"


def test_a_pair_with_twelve_constants_takes_milliseconds() -> None:
    tail = " + ".join(
        f"c{i}*{m}" for i, m in enumerate(
            "[A] [B] [P] [Q] [A]*[B] [P]*[Q] [A]*[P] [B]*[Q] [A]*[B]*[P] [B]*[P]*[Q]".split()
        )
    )  # fmt: skip
    large = law(f"(V*[A]*[B] - W*[P]*[Q])/(1 + {tail})")
    small = law(re.sub(r"c(\d)", r"d\1", f"(V*[A]*[B] - W*[P]*[Q])/(1 + {tail})").replace(
        "d9*", "0*"))  # fmt: skip
    assert len(large.constants) == 12
    args = ([small.rate], [large.rate], small.constants, large.constants)
    back = ([large.rate], [small.rate], large.constants, small.constants)
    examine(*args)
    times = []
    for _ in range(5):
        start = time.perf_counter()
        found, other = examine(*args), examine(*back)
        times.append(time.perf_counter() - start)
    assert isinstance(found, Nesting)
    assert found.words().startswith("c9 = 0")
    assert isinstance(other, Neither)
    assert min(times) < 0.05


def test_hundreds_of_terms_and_twenty_constants() -> None:
    """Another order of the constants in a law of 150 terms: the same law under other names."""
    rng = np.random.default_rng(5)
    names = [f"[S{i}]" for i in range(9)]
    monomials = sorted({"*".join(sorted(rng.choice(names, 3))) for _ in range(400)})[:150]
    pieces = [f"{i + 1}*k{i % 20}*k{(7 * i + 3) % 20}*{m}" for i, m in enumerate(monomials)]
    text = "k0*[S0]*[S1]/(1 + " + " + ".join(pieces) + ")"
    large, small = law(text), law(re.sub(r"\bk(\d+)", r"z\1", text))
    start = time.perf_counter()
    found = examine([small.rate], [large.rate], small.constants, large.constants)
    assert time.perf_counter() - start < 3.0  # a tenth of a second to half, with room
    assert isinstance(found, Nesting)
    assert found.inside
    # one coefficient that no product of the others gives
    last = f"{len(pieces)}*"
    wrong = law(re.sub(r"\bk(\d+)", r"z\1", text).replace(f" {last}", f" z0*{last}"))
    assert isinstance(
        examine([wrong.rate], [large.rate], wrong.constants, large.constants), Neither
    )


def test_laws_that_only_balances_fix() -> None:
    """Combined constants change the size of the unknown radical, not the law; a termination step
    with its constant at zero is the mechanism without that step. Rates by the numerical solver."""
    whole = derive(load_mechanism("autoxidation-chain", base=Path()))
    assert whole.rate.has(ImplicitValue)
    found = related([whole.rate], [whole.step_rate], whole.constants, whole.step_constants)
    assert found.same is not None
    (gone,) = [c for c in whole.step_constants if c.name == "k_end_RO2"]
    rest = [c for c in whole.step_constants if c is not gone]
    without = whole.step_rate.xreplace({gone.symbol: sympy.Integer(0)})
    up = examine([without], [whole.step_rate], rest, whole.step_constants)
    assert without.has(ImplicitValue)
    assert isinstance(up, Nesting)
    assert up.words() == "k_end_RO2 = 0"

    species = sorted((s for s in whole.rate.free_symbols if s.name[0] == "["), key=str)
    rng = np.random.default_rng(2)
    amounts = np.exp(rng.uniform(-1, 1, (20, len(species))))
    steps = np.exp(rng.uniform(-1, 1, len(whole.step_constants)))
    numbers = {c.symbol: v for c, v in zip(whole.step_constants, steps, strict=True)}
    combined = [float(found.same.a_from_b[c.name].subs(numbers)) for c in whole.constants]
    rates = [
        CompiledLaw(rate, [c.symbol for c in constants], species)(
            np.asarray(theta)[None, None, :],
            amounts,
            constants=False,
            conditions_too=False,
            both=False,
        )[0]
        for rate, constants, theta in (
            (whole.step_rate, whole.step_constants, steps),
            (whole.rate, whole.constants, combined),
        )
    ]
    np.testing.assert_allclose(rates[0], rates[1], rtol=1e-9)
