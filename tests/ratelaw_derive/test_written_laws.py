"""The laws of the library that no steps give, against what was published of them.

The laws of solids are published as integrals g(alpha) = k t of the converted fraction alpha; the
library holds rates. With alpha = 1 - A/A_0 the rate must be k A_0/g'(alpha). All from memory.
"""

from pathlib import Path

import pytest
import sympy

from discrim.mechanism.library import load, names
from discrim.mechanism.model import WrittenLaw
from discrim.ratelaw.model import amount
from tests.ratelaw_derive.published import library_law

ALPHA, N = sympy.Symbol("alpha", positive=True), sympy.Symbol("n", positive=True)
LEFT = 1 - ALPHA
THIRD = sympy.Rational(1, 3)

# J. H. Sharp, G. W. Brindley and B. N. N. Achar, Journal of the American Ceramic Society 49 (1966)
# 379: table of g(alpha) = k t, with their names; others as noted
SOLIDS = {
    # A_n, Avrami (1940), Erofeev (1946)
    "nucleation-and-growth": (-sympy.log(LEFT)) ** (1 / N),
    # power law: A. K. Galwey and M. E. Brown (1999)
    "accelerating-nuclei": ALPHA ** (1 / N),
    "contracting-area": 1 - LEFT ** (THIRD * 3 / 2),  # R2
    "contracting-volume": 1 - LEFT**THIRD,  # R3
    "diffusion-through-flat-layer": ALPHA**2,  # D1
    "diffusion-through-cylinder": LEFT * sympy.log(LEFT) + ALPHA,  # D2, Valensi (1936)
    "diffusion-into-sphere": (1 - LEFT**THIRD) ** 2,  # D3, Jander (1927)
    # D4, Ginstling and Brounshtein (1950)
    "diffusion-through-shell": 1 - 2 * ALPHA / 3 - LEFT ** (2 * THIRD),
    # Prout and Tompkins (1944): ln(alpha/(1 - alpha)) = k t + c
    "branching-nuclei": sympy.log(ALPHA / LEFT),
}
OTHERS = {
    "enzyme-cooperative",
    "lattice-oxygen-any-order",
    "nitrogen-adsorption-limiting",
    "order-in-one-reactant",
    "order-in-two-reactants",
}


def constants(law):
    """Constants and amounts by their names in the text, as positive symbols."""
    every = {s: sympy.Symbol(s.name, positive=True) for s in law.rate.free_symbols}
    return law.rate.xreplace(every), {p.name: p for p in every.values()}


def test_every_written_law_is_checked():
    written = {n for n in names() if isinstance(load(n, Path()), WrittenLaw)}
    assert set(SOLIDS) | OTHERS == written


@pytest.mark.parametrize("name", SOLIDS)
def test_rate_of_a_solid_against_the_published_integral(name):
    rate, known = constants(library_law(name))
    alpha, n = ALPHA, N
    fraction = {known["[A]"]: known["[A_0]"] * (1 - alpha), sympy.Symbol("n", positive=True): n}
    shown = (rate.xreplace(fraction) / (known["k"] * known["[A_0]"])) * sympy.diff(
        SOLIDS[name], alpha
    )
    for value in (0.05, 0.3, 0.62, 0.97):
        for order in (1.5, 2.0, 3.0, 4.0):
            at = {alpha: sympy.Float(value, 40), n: sympy.Float(order, 40)}
            at |= {known["[A_0]"]: sympy.Float(7, 40)}
            assert abs(sympy.N(shown.subs(at), 30) - 1) < 1e-25


@pytest.mark.parametrize("name", SOLIDS)
def test_an_amount_of_solid_is_what_the_law_is_about(name):
    """The rate is extensive: twice the solid, twice the rate (n, k as they are)."""
    rate, known = constants(library_law(name))
    x = sympy.Symbol("x", positive=True)
    doubled = rate.xreplace({known[a]: x * known[a] for a in ("[A]", "[A_0]")})
    assert sympy.simplify(doubled / rate) == x


def test_order_of_a_power_law():
    """The order is d ln r/d ln A, by definition; the integral of order n is van 't Hoff's (1884):
    A^(1 - n) - A_0^(1 - n) = (n - 1) k t."""
    rate, known = constants(library_law("order-in-one-reactant"))
    a, n, k = known["[A]"], sympy.Symbol("n", positive=True), known["k"]
    rate = rate.subs(sympy.Symbol("n", real=True), n)
    assert sympy.simplify(a * sympy.diff(rate, a) / rate - n) == 0
    t, start, ref = sympy.symbols("t start ref", positive=True)
    rate = rate.subs(known["A_ref"], ref)
    factor = k * ref ** (-n)
    for order in (2, 3, sympy.Rational(3, 2)):
        course = (start ** (1 - order) + (order - 1) * factor.subs(n, order) * t) ** (
            sympy.Integer(1) / (1 - order)
        )
        left = sympy.diff(course, t) + rate.subs(n, order).subs(a, course)
        assert sympy.simplify(left) == 0
    two, also = constants(library_law("order-in-two-reactants"))
    for letter in "AB":
        x = also[f"[{letter}]"]
        assert sympy.simplify(x * sympy.diff(two, x) / two) == also[letter.lower()]


def test_oxidation_and_reduction_of_a_surface():
    """Mars and van Krevelen (1954): k_red A s = (k_ox/beta) O2^n (1 - s), s the share oxidised."""
    rate, known = constants(library_law("lattice-oxygen-any-order"))
    s = sympy.Symbol("s", positive=True)
    reduce = known["k_reduce"] * known["[A]"] * s
    oxidise = known["k_oxidise"] / known["beta"] * known["[O2]"] ** known["n"] * (1 - s)
    (share,) = sympy.solve(reduce - oxidise, s)
    assert sympy.simplify(reduce.subs(s, share) - rate) == 0


def test_ammonia_at_equilibrium():
    """Temkin and Pyzhev (1940): no rate where NH3^2/(N2 H2^3) = k_make/k_break; k_make N2
    (H2^3/NH3^2)^alpha far from it."""
    rate, known = constants(library_law("nitrogen-adsorption-limiting"))
    n2, h2, nh3 = known["[N2]"], known["[H2]"], known["[NH3]"]
    balanced = sympy.sqrt(known["k_make"] / known["k_break"] * n2 * h2**3)
    assert sympy.simplify(sympy.expand_power_base(rate.subs(nh3, balanced), force=True)) == 0
    ahead = rate.subs(known["k_break"], 0)
    alpha = known["alpha"]
    for gas, order in ((n2, 1), (h2, 3 * alpha), (nh3, -2 * alpha)):
        assert sympy.simplify(gas * sympy.diff(ahead, gas) / ahead - order) == 0


def test_cooperative_binding():
    """Hill (1910): log(v/(V - v)) is linear in log S with slope n, zero at half of V."""
    rate, known = constants(library_law("enzyme-cooperative"))
    s, n, k = known["[S]"], known["n"], known["k_cat"]
    odds = sympy.simplify(rate / (k - rate))
    assert sympy.simplify(s * sympy.diff(odds, s) / odds - n) == 0
    assert sympy.simplify(rate.subs(s, known["S_half"]) - k / 2) == 0


def test_a_written_law_knows_its_species_and_its_source():
    law = library_law("contracting-volume")
    assert law.species == ("A", "A_0")
    assert law.stoichiometry == {"A": -1, "P": 1}
    assert law.production["A"] == -law.rate
    assert "Sharp" in law.source
    assert amount("A_0") in law.rate.free_symbols
