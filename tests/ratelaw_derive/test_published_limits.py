"""Published limits of laws of the library, and laws that only their balances give.

All forms and limits are from memory of the works named beside them; the references stand in the
files of the library.
"""

import numpy as np
import pytest
import sympy

from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.model import amount, constant_symbol
from tests.ratelaw_derive.published import in_steps, is_zero, library_law, read, same

# name: (what is scaled, towards what, how the rate is then scaled, limiting form). Each symbol of
# the first set is multiplied by x, and x goes to 0 or infinity; the limit is exact.
LIMITS = {
    # Langmuir (1922): oxidation of carbon monoxide, much of it on the surface
    "dissociation-on-covered-surface": (
        ["k_surface"],
        "oo",
        0,
        "k_ads_O2*[O2]/(1 + K_ads_CO*[CO])^2",
    ),
    # Lindemann (1922), low and high pressure
    "activation-by-collision": (["[M]"], "0", -1, "k_activate*[M]*[A]"),
    # Laidler (1987): combination of radicals, third order at low pressure
    "recombination-with-third-body": (
        ["[M]"],
        "0",
        -1,
        "k_associate*k_quiet/k_rev_associate*[A]*[B]*[M]",
    ),
    # Lapworth (1904): halogenation does not depend on the halogen
    "enolisation-then-halogen": (["[X2]"], "oo", 0, "k_enolise*[S]*[HA]"),
    # Bell (1959): aldol addition, second order in aldehyde when the carbanion mostly goes back
    "aldol-addition": (
        ["k_add"],
        "0",
        -1,
        "k_deprotonate*k_add/k_rev_deprotonate*[A]^2*[OH-]",
    ),
    # McLennan (1967): carbanion that never goes back
    "carbanion-then-loss": (["k_lose"], "oo", 0, "k_deprotonate*[SH]*[B]"),
    # Bunnett (1958): linear in base while the adduct mostly goes back
    "base-catalysed-substitution": (
        ["k_rev_add"],
        "oo",
        1,
        "k_add/k_rev_add*(k_lose + k_lose_with_B*[B])*[S]*[Nu]",
    ),
    # Bodenstein and Unger (1930): d[HCl]/dt = 4 k_light k3 H2 Cl2^2/(O2 (k4 H2 + (k5 k3/k2) Cl2)),
    # half of it used up of H2, when oxygen meets few of the atoms
    "hydrogen-chlorine-chain-with-oxygen": (
        ["k_end_H", "k_end_Cl"],
        "0",
        1,
        "2*k_light*k_propagate_Cl2*[H2]*[Cl2]^2"
        "/([O2]*(k_end_H*[H2] + k_end_Cl*k_propagate_Cl2/k_propagate_H2*[Cl2]))",
    ),
    # Rice and Herzfeld (1934): long chains, (k1 k3 k4/k5)^(1/2) C2H6
    "ethane-chain": (
        ["k_split", "k_propagate"],
        "oo",
        -1,
        "sqrt(k_start*k_split*k_propagate/k_end)*[C2H6]",
    ),
    # Benson and Axworthy (1957): much oxygen, k1 k2/k-1 O3^2/O2
    "ozone-decomposition": (["[O2]"], "oo", 1, "k_split*k_attack/k_rev_split*[O3]^2/[O2]"),
    # Mars and van Krevelen (1954): oxidation of the surface limiting
    "lattice-oxygen-two-sites": (["k_reduce"], "oo", 0, "k_oxidise*[O2]"),
    # dissociation limiting when what it makes goes fast
    "dissociation-not-at-equilibrium": (["k_surface"], "oo", 0, "k_ads_A2*[A2]"),
    # few sites taken: first order, as of any adsorption
    "bridged-on-two-sites": (["K_ads_A"], "0", -1, "k_surface*K_ads_A*[A]"),
    # Haldane (1930): at much substrate the rate falls as 1/S
    "enzyme-substrate-inhibits": (["[S]"], "oo", 1, "k_turn/(K_inhibit*[S])"),
    # Yonetani and Theorell (1964), inhibitors that exclude each other
    "enzyme-two-inhibitors": (
        ["K_both"],
        "0",
        0,
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_inhibit_I*[I] + K_inhibit_J*[J]) + [S])",
    ),
    # Botts and Morales (1953), modifier that stops the complex: mixed inhibition at equilibrium
    "enzyme-modifier": (
        ["k_turn_X"],
        "0",
        0,
        "k_turn*K_bind*[S]/(1 + K_modify*[X] + K_bind*[S]*(1 + K_modify_ES*[X]))",
    ),
    # Halpern (1981), much ligand: inverse first order in it
    "metal-complex-loses-ligand": (["[L]"], "oo", 1, "k_react*K_bind*K_lose*[S]/[L]"),
    # metal as monomer; mostly as dimer, order 1/2 (common practice, no source)
    "metal-complex-with-dimer": (
        ["[total M]"],
        "oo",
        -sympy.Rational(1, 2),
        "k_react*[S]*sqrt([total M]/(2*K_dimer))",
    ),
}


@pytest.mark.parametrize("name", LIMITS)
def test_limit_of_a_law(name):
    scaled, towards, power, form = LIMITS[name]
    law = library_law(name)
    rate = law.production["C2H4"] if name == "ethane-chain" else law.rate
    rate = in_steps(law, rate)
    # the square of x keeps roots of it whole
    x = sympy.Symbol("x", positive=True)
    factor = x**2 if towards == "oo" else x**-2
    chosen = {s: s * factor for s in rate.free_symbols if s.name in scaled}
    assert len(chosen) == len(scaled)
    plain = {s: sympy.Symbol(f"p{i}", positive=True) for i, s in enumerate(rate.free_symbols)}
    moved = (rate.xreplace(chosen) * factor**power).xreplace(plain)
    limit = sympy.limit(sympy.simplify(moved), x, sympy.oo)
    assert is_zero(limit - read(form).xreplace(plain))


def test_two_ways_to_general_acid_catalysis():
    """Jencks (1969): specific acid with general base is general acid catalysis, K_a = H+ A-/HA."""
    one, other = library_law("acid-then-conjugate-base"), library_law("general-acid")
    k_a = constant_symbol("K_a")
    acid = {amount("H+"): k_a * amount("HA") / amount("A-")}
    ratio = one.rate.xreplace(acid) / other.rate
    assert not {s for s in ratio.free_symbols if s.name.startswith("[")}


@pytest.mark.parametrize(
    ("one", "other"),
    [
        # Laidler (1987): nitric oxide and oxygen by the dimer or by the trioxide
        ("nitric-oxide-dimer-then-oxygen", "nitric-oxide-trioxide-then-oxide"),
        # Sullivan (1967): hydrogen and iodine by atoms or in one step
        ("hydrogen-iodine-through-atoms", "second-order"),
        # the chain with atoms at equilibrium or at steady state (Laidler 1987)
        ("hydrogen-bromine-chain", "hydrogen-bromine-chain-by-collision"),
    ],
)
def test_mechanisms_that_no_rate_tells_apart(one, other):
    """The same function of the amounts, with a constant in front and constants inside."""
    a, b = library_law(one), library_law(other)
    renamed = {amount("A"): amount("I2"), amount("B"): amount("H2")}
    letters = sympy.symbols("c1:9", positive=True)
    forms = []
    for law in (a, b):
        swap = dict(zip([c.symbol for c in law.constants], letters, strict=False))
        forms.append(law.rate.xreplace(renamed).xreplace(swap))
    assert same(*forms)


def test_haldane_relation():
    """Haldane (1930): the law vanishes where P/S = K_eq = k1 k2 k3/(k-1 k-2 k-3)."""
    law = library_law("enzyme-two-complexes-reversible")
    ratio = read("k_bind*k_turn*k_release/(k_rev_bind*k_rev_turn*k_rev_release)")
    there = {amount("P"): ratio * amount("S")}
    assert is_zero(in_steps(law, law.rate).xreplace(there))


# --- oxidation of a liquid: balances without a closed form ----------------------------------------

AUTOXIDATION = library_law("autoxidation-chain")
RATES = ("k_start", "k_add", "k_propagate", "k_end_R", "k_end_both", "k_end_RO2")
AMOUNTS = ("I", "O2", "RH")


def oxidation(species, **values):
    """How fast a species is made, from the compiled law."""
    law = CompiledLaw(
        in_steps(AUTOXIDATION, AUTOXIDATION.production[species]),
        [constant_symbol(n) for n in RATES],
        [amount(n) for n in AMOUNTS],
    )
    theta = np.array([[[values[n] for n in RATES]]])
    amounts = np.array([[values[n] for n in AMOUNTS]])
    return law(theta, amounts, constants=False, conditions_too=False, both=False)[0][0, 0]


@pytest.mark.parametrize("seed", range(5))
def test_autoxidation_is_fixed_by_its_published_balances(seed):
    """Bolland (1949), Bateman (1954): R and RO2 at steady state, the three ways to end; the
    balances solved by SciPy."""
    from scipy.optimize import root

    rng = np.random.default_rng(seed)
    v = dict(zip((*RATES, *AMOUNTS), np.exp(rng.normal(size=9)), strict=True))

    def balances(logs):
        r, ro2 = np.exp(logs)
        ends = v["k_end_R"] * r**2 + v["k_end_both"] * r * ro2 + v["k_end_RO2"] * ro2**2
        made = v["k_propagate"] * v["RH"] * ro2
        into = v["k_add"] * v["O2"] * r
        rest = v["k_end_both"] * r * ro2 + 2 * v["k_end_RO2"] * ro2**2
        return [v["k_start"] * v["I"] - ends, into - made - rest]

    tried = [root(balances, [a, b], tol=1e-13) for a in (-3, -1, 1) for b in (-3, -1, 1)]
    solved = min(tried, key=lambda found: np.abs(found.fun).max())
    assert np.abs(solved.fun).max() < 1e-12
    r, ro2 = np.exp(solved.x)
    assert oxidation("ROOH", **v) == pytest.approx(v["k_propagate"] * v["RH"] * ro2, rel=1e-9)
    assert oxidation("O2", **v) == pytest.approx(-v["k_add"] * v["O2"] * r, rel=1e-9)


RUN = {"k_start": 2e-6, "k_add": 3e4, "k_propagate": 5.0, "I": 0.02, "O2": 1e-3, "RH": 4.0}


def test_autoxidation_with_enough_oxygen():
    """Bolland (1949): k_p RH (r_i/2k_t)^(1/2) when only RO2 meets its like; r_i = 2 k_start I."""
    v = RUN | {"k_end_R": 1e-25, "k_end_both": 1e-25, "k_end_RO2": 1e5}
    expected = v["k_propagate"] * v["RH"] * np.sqrt(v["k_start"] * v["I"] / v["k_end_RO2"])
    assert oxidation("ROOH", **v) == pytest.approx(expected, rel=1e-10)


def test_autoxidation_with_little_oxygen():
    """Bolland (1949): the uptake of oxygen is k_a O2 (r_i/2k_t)^(1/2) when only R meets its like."""
    v = RUN | {"k_propagate": 1e9, "k_end_R": 1e5, "k_end_both": 1e-12, "k_end_RO2": 1e-12}
    v |= {"O2": 1e-10}
    expected = -v["k_add"] * v["O2"] * np.sqrt(v["k_start"] * v["I"] / v["k_end_R"])
    assert oxidation("O2", **v) == pytest.approx(expected, rel=1e-10)


def test_autoxidation_with_geometric_mean_of_the_ends():
    """Bateman (1954), long chains, k_both = 2 (k_R k_RO2)^(1/2):
    (r_i/2)^(1/2) k_a O2 k_p RH/(k_R^(1/2) k_p RH + k_RO2^(1/2) k_a O2)."""
    v = RUN | {"k_end_R": 4e5, "k_end_RO2": 9e4, "k_start": 1e-32}
    v["k_end_both"] = 2 * np.sqrt(v["k_end_R"] * v["k_end_RO2"])
    v["k_add"], v["O2"] = 2e3, 5e-3
    a, p = v["k_add"] * v["O2"], v["k_propagate"] * v["RH"]
    expected = np.sqrt(v["k_start"] * v["I"]) * a * p
    expected /= np.sqrt(v["k_end_R"]) * p + np.sqrt(v["k_end_RO2"]) * a
    assert oxidation("ROOH", **v) == pytest.approx(expected, rel=1e-10)
