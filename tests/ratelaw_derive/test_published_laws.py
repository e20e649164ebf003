"""The law of every shipped mechanism against its published form, by exact equality.

The published forms are written in the constants of the steps (association constants for adsorption,
as Hougen and Watson write them), so the derived law is compared after its combinations are written
out. All forms are from memory of the works named beside them.
"""

from pathlib import Path

import pytest
import sympy

from discrim.errors import Place
from discrim.mechanism.library import load_mechanism, names
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import amount, constant_symbol

PUBLISHED = {
    # K. J. Laidler, Chemical Kinetics (1987): mass action, parallel reactions
    "two-parallel-pathways": "k_by_a*[A] + k_by_b*[B]",
    # Laidler (1987): steady state of a complex, common practice
    "complex-then-product": "k_associate*k_react*[A]*[B]/(k_rev_associate + k_react)",
    "reversible-one-to-one": "k_react*[A] - k_rev_react*[P]",
    # Langmuir (1922): k K p/(1 + K p)
    "surface-reaction-one-adsorbed": "k_surface*K_ads_A*[A]/(1 + K_ads_A*[A])",
    # Langmuir (1922), Hinshelwood (1940): both adsorbed on the same sites
    "surface-reaction-two-adsorbed": (
        "k_surface*K_ads_A*K_ads_B*[A]*[B]/(1 + K_ads_A*[A] + K_ads_B*[B])^2"
    ),
    # Hougen and Watson (1943): the adsorption term holds the product too
    "two-adsorbed-product-inhibits": (
        "k_surface*K_ads_A*K_ads_B*[A]*[B]/(1 + K_ads_A*[A] + K_ads_B*[B] + K_ads_P*[P])^2"
    ),
    # Hougen and Watson (1943): driving force A B - P/K
    "two-adsorbed-reversible": (
        "k_surface*K_ads_A*K_ads_B*([A]*[B] - [P]/K_eq)"
        "/(1 + K_ads_A*[A] + K_ads_B*[B] + K_ads_P*[P])^2"
    ),
    # Carr (1960) without hydrogen: k K_A (A - P/K)/(1 + K_A A + K_P P)
    "one-adsorbed-reversible": (
        "k_surface*K_ads_A*([A] - [P]/K_eq)/(1 + K_ads_A*[A] + K_ads_P*[P])"
    ),
    # Hougen and Watson (1943), adsorption controlling: k (A - P/K)/(1 + K_A P/K + K_P P), where
    # K_A = k/k_rev and K = K_A K_surface/K_P
    "adsorption-limiting-one-reactant": (
        "k_ads_A*([A] - [P]*k_rev_ads_A*K_ads_P/(k_ads_A*K_surface))"
        "/(1 + K_ads_P/K_surface*[P] + K_ads_P*[P])"
    ),
    # Hougen and Watson (1943), desorption controlling: k_P (K A - P)/(1 + K_A A + K_P K A), where
    # k_P = k_rev and K_P K = K_ads_A K_surface
    "desorption-limiting-one-reactant": (
        "(k_des_P*K_ads_A*K_surface*[A] - k_rev_des_P*[P])"
        "/(1 + K_ads_A*[A] + K_surface*K_ads_A*[A])"
    ),
    # Eley and Rideal (1940)
    "adsorbed-with-free": "k_surface*K_ads_A*[A]*[B]/(1 + K_ads_A*[A])",
    # Hougen and Watson (1943): hydrogen dissociated, three sites
    "hydrogen-dissociates-two-atoms": (
        "k_surface*K_ads_A*K_ads_H2*[A]*[H2]/(1 + K_ads_A*[A] + sqrt(K_ads_H2*[H2]))^3"
    ),
    # Horiuti and Polanyi (1934): half-hydrogenated state at equilibrium, second atom limiting
    "hydrogen-adds-in-two-steps": (
        "k_second*K_first*K_ads_A*K_ads_H2*[A]*[H2]"
        "/(1 + K_ads_A*[A] + sqrt(K_ads_H2*[H2]) + K_first*K_ads_A*[A]*sqrt(K_ads_H2*[H2]))^2"
    ),
    # Boudart and Djega-Mariadassou (1984): two kinds of site
    "two-kinds-of-site": ("k_surface*K_ads_A*[A]/(1 + K_ads_A*[A])*K_ads_B*[B]/(1 + K_ads_B*[B])"),
    # Briggs and Haldane (1925): K_m = (k_-1 + k_2)/k_1
    "enzyme-one-substrate": "k_turn*[S]/((k_rev_bind + k_turn)/k_bind + [S])",
    # Haldane (1930): (V_S/K_S S - V_P/K_P P)/(1 + S/K_S + P/K_P), with V_S = k_2, V_P = k_-1,
    # K_S = (k_-1 + k_2)/k_1, K_P = (k_-1 + k_2)/k_-2
    "enzyme-one-substrate-reversible": (
        "(k_release*k_bind/(k_rev_bind + k_release)*[S]"
        " - k_rev_bind*k_rev_release/(k_rev_bind + k_release)*[P])"
        "/(1 + k_bind/(k_rev_bind + k_release)*[S] + k_rev_release/(k_rev_bind + k_release)*[P])"
    ),
    # Segel (1975): K_m (1 + I/K_i) + S, with 1/K_i the association constant
    "enzyme-competitive": ("k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_inhibit*[I]) + [S])"),
    # Segel (1975): K_m + S (1 + I/K_i)
    "enzyme-uncompetitive": ("k_turn*[S]/((k_rev_bind + k_turn)/k_bind + [S]*(1 + K_inhibit*[I]))"),
    # Cornish-Bowden (2012): K_m (1 + I/K_ic) + S (1 + I/K_iu)
    "enzyme-mixed": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_inhibit_E*[I])"
        " + [S]*(1 + K_inhibit_ES*[I]))"
    ),
    # Cleland (1963), ordered bi bi without products: V A B/(K_ia K_b + K_b A + K_a B + A B)
    "enzyme-ordered-two-substrates": (
        "k_release_P*k_release_Q/(k_release_P + k_release_Q)*[A]*[B]/("
        "k_rev_bind_A/k_bind_A*(k_rev_bind_B + k_release_P)*k_release_Q"
        "/(k_bind_B*(k_release_P + k_release_Q))"
        " + (k_rev_bind_B + k_release_P)*k_release_Q/(k_bind_B*(k_release_P + k_release_Q))*[A]"
        " + k_release_P*k_release_Q/(k_bind_A*(k_release_P + k_release_Q))*[B] + [A]*[B])"
    ),
    # Cleland (1963), ping pong bi bi without products: V A B/(K_b A + K_a B + A B)
    "enzyme-substituted-two-substrates": (
        "k_release_P*k_release_Q/(k_release_P + k_release_Q)*[A]*[B]/("
        "k_release_P*(k_rev_bind_B + k_release_Q)/(k_bind_B*(k_release_P + k_release_Q))*[A]"
        " + k_release_Q*(k_rev_bind_A + k_release_P)/(k_bind_A*(k_release_P + k_release_Q))*[B]"
        " + [A]*[B])"
    ),
    # Segel (1975), rapid equilibrium random bireactant: V A B/(a K_A K_B + a K_B A + a K_A B + A B)
    # with K_A = 1/K_bind_A, K_B = 1/K_bind_B, a K_B = 1/K_bind_B_to_A
    "enzyme-random-two-substrates": (
        "k_turn*[A]*[B]/(1/(K_bind_A*K_bind_B_to_A) + [A]/K_bind_B_to_A"
        " + K_bind_B/(K_bind_A*K_bind_B_to_A)*[B] + [A]*[B])"
    ),
    # Lindemann (1922); law as in every textbook of kinetics
    "activation-by-collision": "k_activate*k_react*[M]*[A]/(k_rev_activate*[M] + k_react)",
    # Bodenstein (1922): third order
    "nitric-oxide-dimer-then-oxygen": "k_oxidation*K_dimer*[NO]^2*[O2]",
    # Bronsted and Pedersen (1924), Bell (1941)
    "catalysis-by-acids-and-bases": (
        "(k_water + k_hydrogen_ion*[H+] + k_hydroxide*[OH-] + k_acid*[HA] + k_base*[A-])*[S]"
    ),
    # Bateman, Hughes and Ingold (1940): mass law (common ion) effect
    "ionisation-then-capture": "k_ionise*[RX]/(1 + k_rev_ionise*[X-]/(k_capture*[Nu]))",
    # Bodenstein and Lind (1907), Christiansen (1919): for d[HBr]/dt 2 k_2 sqrt(K) H2 Br2^(1/2)/
    # (1 + k_4/k_3 HBr/Br2); the rate of the overall reaction is half of it
    "hydrogen-bromine-chain": (
        "k_propagate_H2*sqrt(K_dissociate)*[H2]*sqrt([Br2])"
        "/(1 + k_inhibit/k_propagate_Br2*[HBr]/[Br2])"
    ),
}


def written_out(law, expression):
    """In the constants of the steps; ``K_eq`` stays, since the published forms have it."""
    known = {
        c.symbol: c.definition
        for c in law.constants
        if c.definition is not None and c.name != "K_eq"
    }
    return expression.xreplace(known)


def read(text):
    """The published form with the symbols of the law."""
    expression = parse_expression(text, Place(text=text))
    return expression.xreplace(
        {s: constant_symbol(s.name) for s in expression.free_symbols if s.name[0] not in "[{"}
    )


def test_every_shipped_mechanism_is_checked():
    assert set(PUBLISHED) == set(names())


@pytest.mark.parametrize("name", PUBLISHED)
def test_law_equals_the_published_form(name):
    law = derive(load_mechanism(name, Path()))
    assert sympy.cancel(sympy.together(written_out(law, law.rate) - read(PUBLISHED[name]))) == 0
    assert sympy.cancel(sympy.together(law.step_rate - full(law, law.rate))) == 0
    for species, expression in law.production.items():
        if law.stoichiometry is not None:
            assert expression == law.stoichiometry.get(species, 0) * law.rate
    assert law.species == tuple(s for s in law.species if amount(s) in law.rate.free_symbols)


def full(law, expression):
    return expression.xreplace(
        {c.symbol: c.definition for c in law.constants if c.definition is not None}
    )


@pytest.mark.parametrize("name", PUBLISHED)
def test_the_form_is_readable(name):
    """Squares stay squares; a study prints sentences, not fragments."""
    law = derive(load_mechanism(name, Path()))
    for sentence in (*law.assumptions, *law.conventions, *law.findings):
        assert sentence[0].isupper() or sentence.split()[0] in law.species
        assert sentence.endswith(".")
    assert sympy.count_ops(law.rate) <= 40
    assert law.derivation[-1][0].startswith("Rate law in the constants")
