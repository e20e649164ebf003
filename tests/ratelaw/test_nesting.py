"""Which law is a case of which: relations that can be read off by hand, each checked again.

Names of the kinds of inhibition as in common practice (from memory, no source): competitive
raises Km, uncompetitive lowers both, mixed does both, non-competitive is mixed with one constant.
"""

import time

import pytest
import sympy

from discrim.errors import Place
from discrim.ratelaw.bare import law_from_expression
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import quantity
from discrim.ratelaw.nesting import Nesting, NotProven, examine, nested, same_law

PLAIN = "Vm*[S]/(Km + [S])"
COMPETITIVE = "Vm*[S]/(Km*(1 + a*[I]) + [S])"
UNCOMPETITIVE = "Vm*[S]/(Km + [S]*(1 + b*[I]))"
NONCOMPETITIVE = "Vm*[S]/((Km + [S])*(1 + [I]/Ki))"
MIXED = "Vm*[S]/(Km*(1 + a*[I]) + [S]*(1 + b*[I]))"
ONE_SITE = "k*K_A*[A]*[B]/(1 + K_A*[A])"
TWO_SITES = "k*K_A*[A]*[B]/(1 + K_A*[A])^2"
BOTH_ADSORBED = "k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2"
APART = "k*K_A*K_B*[A]*[B]/((1 + K_A*[A])*(1 + K_B*[B]))"
SPLIT = "k*sqrt(K_H*[H])*[A]/(1 + sqrt(K_H*[H]))"

# (smaller, larger, restriction in words, zero, vanish, inside)
NESTED = [
    ("k_A*[A]", "k_A*[A] + k_B*[B]", "k_B = 0", ["k_B"], [], False),
    ("q*[B]", "k_A*[A] + k_B*[B]", "k_A = 0", ["k_A"], [], False),
    (PLAIN, COMPETITIVE, "a = 0", ["a"], [], False),
    (PLAIN, UNCOMPETITIVE, "b = 0", ["b"], [], False),
    (PLAIN, MIXED, "a = 0, b = 0", ["a", "b"], [], False),
    (COMPETITIVE, MIXED, "b = 0", ["b"], [], False),
    (UNCOMPETITIVE, MIXED, "a = 0", ["a"], [], False),
    (NONCOMPETITIVE, MIXED, "a = 1/Ki, b = 1/Ki", [], [], True),
    ("k*K_A*[A]/(1 + K_A*[A])", "k*K_A*[A]/(1 + K_A*[A] + K_B*[B])", "K_B = 0", ["K_B"], [],
     False),
    ("k*[A]*[B]/(1 + K_A*[A])^2", "k*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2", "K_B = 0", ["K_B"], [],
     False),
    (SPLIT, "k*sqrt(K_H*[H])*[A]/(1 + sqrt(K_H*[H]) + K_A*[A])", "K_A = 0", ["K_A"], [], False),
    ("k*[A]*[B]", "k*[A]*[B]^n", "n = 1", [], [], True),
    ("k*[A]", "k*[A]*[B]^n", "n = 0", [], [], True),
    ("k*sqrt([A])/[B]", "k*[A]^n*[B]^m", "n = 0.5, m = -1", [], [], True),
    ("k*[A]^p", "k_A*[A]^n + k_B*[B]", "k_B = 0", ["k_B"], [], False),
    ("k*([A]/c)^n", "k*([A]/c)^n/(1 + K*[B])", None, ["K"], [], False),
    ("k_2*[A]", "k*K*[B]/(1 + K*[B]) + k_2*[A]", "k = 0, K without effect", ["k"], ["K"], False),
    ("k*[A]", "k*[A] + q*[B]^n", "q = 0, n without effect", ["q"], ["n"], False),
    ("k*[A]*[B]/(1 + K_A*[A] + K_B*[B] + K_A*K_B*[A]*[B])",
     "k*[A]*[B]/(1 + K_A*[A] + K_B*[B] + K_AB*[A]*[B])", "K_AB = K_A*K_B", [], [], True),
    ("k*([A] - [B]/K)", "k_f*[A] - k_r*[B]", "k_r = k/K", [], [], True),
    ("k*[A]", "k*[A]*exp(-E/T)", "E = 0", ["E"], [], False),
    ("k*[A]*exp(-E/T)", "k*[A]*exp(-E/T) + q*[B]", "q = 0", ["q"], [], False),
    ("k*10^(pKa - pH)", "k*10^(pKa - pH) + q", "q = 0", ["q"], [], False),
    ("k", "Vm*[A]/(Km + [A])", "Km = 0", ["Km"], [], False),
]  # fmt: skip

NOT_NESTED = [
    (ONE_SITE, TWO_SITES),
    (TWO_SITES, ONE_SITE),
    (BOTH_ADSORBED, APART),
    (APART, BOTH_ADSORBED),
    (MIXED, COMPETITIVE),
    (COMPETITIVE, UNCOMPETITIVE),
    ("k*[A]*[B]^n", "k*[A]*[B]"),
    ("k_A*[A] + k_B*[B]", "k_A*[A]"),
    ("k*[C]", "k_A*[A] + k_B*[B]"),
    ("k*[A] - q*[B]", "k*[A] + q*[B]"),  # needs a negative constant
    ("k*[A]/(1 + K*[A])", "k*[A]/(1 - K*[A])"),  # likewise
]

SAME = [
    ("k*K_A*[A]/(1 + K_A*[A])", "Vm*[A]/(Km + [A])", "k = Vm, K_A = 1/Km"),
    ("k*([A] - [B]/K_eq)", "k_f*[A] - k_r*[B]", "k = k_f, K_eq = k_f/k_r"),
    ("k*[A]/(1 + K*sqrt([H]))", "k*[A]/(1 + sqrt(L*[H]))", "K = sqrt(L)"),
    ("k*[A]^n", "q*[A]^m", "k = q, n = m"),
    ("k*[A]/(1 + K*[A] + L*[A]^2)", "k*[A]/(1 + [A]*(K + L*[A]))", ""),
    ("k*[A]", "k*[A]", ""),
    ("k*[A]", "(k_1 + k_2)*[A]", "k = k_1 + k_2"),
    # Briggs and Haldane, Biochem. J. 19 (1925) 338 (from memory): Km = (k_-1 + k_2)/k_1
    (PLAIN, "k_1*k_2*[S]/(k_1*[S] + k_m1 + k_2)", "Vm = k_2, Km = (k_2 + k_m1)/k_1"),
]

QUANTITIES = {"T": quantity("T"), "pH": quantity("pH")}


def law(text):
    expr = parse_expression(text, Place(), QUANTITIES)
    return law_from_expression("x", expr, overall=None, place=None)


def is_zero(expr):
    """By sympy's simplification, and where it does not finish the job, by 30 digits at a point."""
    if sympy.simplify(expr) == 0:
        return True
    point = {
        s: sympy.Rational(7 + 3 * i, 5 + i)
        for i, s in enumerate(sorted(expr.free_symbols, key=str))
    }
    return abs(sympy.N(expr.subs(point), 30)) < 1e-25


@pytest.mark.parametrize(("smaller", "larger", "words", "zero", "vanish", "inside"), NESTED)
def test_nested(smaller, larger, words, zero, vanish, inside):
    small, large = law(smaller), law(larger)
    found = examine([small.rate], [large.rate], small.constants, large.constants)
    assert isinstance(found, Nesting), found
    if words is not None:
        assert found.words() == words
    assert list(found.zero) == zero
    assert list(found.vanish) == vanish
    assert found.inside is inside
    assert found.edge is bool(zero)
    assert found.n_restrictions == len(large.constants) - len(small.constants)
    # put back by sympy, independently of the ring arithmetic of the search
    unlike = {c.symbol: sympy.Dummy(c.name, positive=True) for c in large.constants}
    values = {unlike[large.constant(n).symbol]: v for n, v in found.values.items()}
    at = large.rate.xreplace(unlike).subs(values)
    assert not at.has(sympy.nan, sympy.zoo)
    assert is_zero(at - small.rate)
    assert not at.free_symbols & set(unlike.values())  # what vanishes is really gone
    for value in found.values.values():
        point = {s: sympy.Rational(3, 7) for s in value.free_symbols}
        assert value.subs(point) >= 0 or value.is_number


@pytest.mark.parametrize(("smaller", "larger"), NOT_NESTED)
def test_not_nested(smaller, larger):
    small, large = law(smaller), law(larger)
    assert nested([small.rate], [large.rate], small.constants, large.constants) is None


@pytest.mark.parametrize(("a", "b", "words"), SAME)
def test_same_law(a, b, words):
    one, other = law(a), law(b)
    found = same_law([one.rate], [other.rate], one.constants, other.constants)
    assert found is not None
    assert found.words() == words
    assert same_law([other.rate], [one.rate], other.constants, one.constants) is not None


@pytest.mark.parametrize(
    ("a", "b"),
    [(s, g) for s, g, *_ in NESTED if g not in {"k_f*[A] - k_r*[B]"}] + NOT_NESTED,
)
def test_not_the_same_law(a, b):
    one, other = law(a), law(b)
    assert same_law([one.rate], [other.rate], one.constants, other.constants) is None


def test_a_name_may_mean_different_things_in_the_two_laws():
    one, other = law("k*[A]/(1 + K*sqrt([H]))"), law("k*[A]/(1 + sqrt(K*[H]))")
    found = same_law([one.rate], [other.rate], one.constants, other.constants)
    assert found.words() == "K = sqrt(K) (right of =: constants of the other law)"


def test_every_observed_expression_counts():
    small, large = law("k*[A]"), law("k_1*[A] + k_2*[B]")
    k_2 = large.constant("k_2").symbol
    b = parse_expression("[B]", Place())
    # the second observation shows that k_2 is not zero
    args = (small.constants, large.constants)
    assert nested([small.rate, b], [large.rate, b], *args) is not None
    assert nested([small.rate, b], [large.rate, k_2 * b], *args) is None


def test_known_numbers_are_shared():
    small, large = law("k*[A]"), law("k_1*([A] + K*[B]) - k_2*[B]")
    adjustable = [c for c in large.constants if c.name != "K"]
    found = nested([small.rate], [large.rate], small.constants, adjustable)
    assert found.words() == "k_2 = k*K"
    assert found.inside


def test_other_symbols_and_order_of_constants_change_nothing():
    small, large = law("z*[A]"), law("y*[A] + x*[B]/(1 + w*[B])")
    for constants in (large.constants, large.constants[::-1]):
        found = nested([small.rate], [large.rate], small.constants, constants)
        assert (found.zero, found.vanish) == (("x",), ("w",)) or (
            found.zero, found.vanish) == (("w",), ("x",))  # fmt: skip


def test_too_large_is_said_not_guessed():
    terms = " + ".join(f"K{i}*[A{i}]*[B{i}]^2" for i in range(200))
    big = law(f"k*[A]/(1 + {terms})^2")
    other = law(f"k*[A]/(1 + {terms.replace('K', 'L')})^2")
    found = examine([other.rate], [big.rate], other.constants, big.constants)
    assert found == NotProven("the laws are too large to compare", exhaustive=False)


def test_a_typical_pair_takes_milliseconds():
    small, large = law(BOTH_ADSORBED), law(BOTH_ADSORBED.replace(")^2", " + K_P*[P])^2"))
    start = time.perf_counter()
    for _ in range(3):
        assert nested([small.rate], [large.rate], small.constants, large.constants)
    # 50 ms are meant; the bound leaves room for a busy machine
    assert (time.perf_counter() - start) / 3 < 0.5


def test_a_law_with_many_constants():
    tail = "1 + a*[A] + b*[B] + c*[A]*[B] + d*[P] + e*[Q] + f*[P]*[Q] + g*[A]*[P] + h*[B]*[Q]"
    small = law(f"(V*[A]*[B] - W*[P]*[Q])/({tail})")
    large = law(f"(V*[A]*[B] - W*[P]*[Q])/({tail} + i*[A]*[B]*[P] + j*[B]*[P]*[Q])")
    found = nested([small.rate], [large.rate], small.constants, large.constants)
    assert found.words() == "i = 0, j = 0"
