"""Published laws of surface catalysis, in the constants of the steps of the library's files.

Adsorption and inhibition constants are of association. Constants that begin with K_ are of an
equilibrium. All forms are from memory of the works named beside them; the full references stand in
the files.
"""

FORMS = {
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
    # Langmuir (1922): a gas that only holds sites adds its term to the denominator
    "poison-holds-sites": "k_surface*K_ads_A*[A]/(1 + K_ads_A*[A] + K_ads_I*[I])",
    # Hougen and Watson (1943), one reactant not adsorbed: k K_A A B/(1 + K_A A + K_P P)
    "adsorbed-with-free-product-inhibits": (
        "k_surface*K_ads_A*[A]*[B]/(1 + K_ads_A*[A] + K_ads_P*[P])"
    ),
    # Hinshelwood (1940), two molecules on neighbouring sites: k (K p)^2/(1 + K p)^2
    "two-alike-adsorbed": "k_surface*(K_ads_A*[A]/(1 + K_ads_A*[A]))^2",
    # Hougen and Watson (1943), A -> P + Q with a second site: adsorption term squared
    "adsorbed-with-vacant-site": (
        "k_surface*K_ads_A*[A]/(1 + K_ads_A*[A] + K_ads_P*[P] + K_ads_Q*[Q])^2"
    ),
    # Boudart and Djega-Mariadassou (1984): adsorption and reaction in sequence, steady state
    "adsorption-and-reaction-both-slow": (
        "k_ads_A*k_surface*[A]/(k_ads_A*[A] + k_rev_ads_A + k_surface)"
    ),
    # Langmuir (1922), Hougen and Watson (1943): atoms as the root of the pressure
    "dissociated-with-adsorbed": (
        "k_surface*K_ads_CO*[CO]*sqrt(K_ads_O2*[O2])/(1 + K_ads_CO*[CO] + sqrt(K_ads_O2*[O2]))^2"
    ),
    # Langmuir (1922), oxygen dissociating on two free sites: k O2 (vacant)^2; the oxygen that is on
    # the surface at steady state, 2 k O2/(k_s K CO) vacant, written out
    "dissociation-on-covered-surface": (
        "k_ads_O2*[O2]/(1 + K_ads_CO*[CO] + 2*k_ads_O2*[O2]/(k_surface*K_ads_CO*[CO]))^2"
    ),
    # Boudart and Djega-Mariadassou (1984): two Langmuir isotherms, one of them dissociative
    "hydrogen-on-sites-of-its-own": (
        "k_surface*K_ads_A*[A]/(1 + K_ads_A*[A])*sqrt(K_ads_H2*[H2])/(1 + sqrt(K_ads_H2*[H2]))"
    ),
    # Temkin (1979), Boudart and Djega-Mariadassou (1984), the two-step sequence:
    # (k1 k2 A B - k-1 k-2 C D)/(k1 A + k-1 C + k2 B + k-2 D)
    "two-step-cycle-reversible": (
        "(k_give*k_take*[H2O]*[CO] - k_rev_give*k_rev_take*[H2]*[CO2])/(k_give*[H2O] + "
        "k_rev_give*[H2] + k_take*[CO] + k_rev_take*[CO2])"
    ),
    # Mars and van Krevelen (1954) with one oxidant molecule for each reduced site and first order
    "lattice-oxygen-one-atom": "k_reduce*[A]*k_oxidise*[B]/(k_reduce*[A] + k_oxidise*[B])",
    # Mars and van Krevelen's balance (1954), k_red A (1 - v) = 2 k_ox O2 v^2 with v vacant: the root
    # of the quadratic in the usual form
    "lattice-oxygen-two-sites": (
        "k_oxidise*[O2]*((sqrt((k_reduce*[A])^2 + 8*k_reduce*[A]*k_oxidise*[O2]) - "
        "k_reduce*[A])/(4*k_oxidise*[O2]))^2"
    ),
    # Hougen and Watson (1943), species on two sites: k K A v^2 with v + 2 K A v^2 = 1
    "bridged-on-two-sites": (
        "k_surface*K_ads_A*[A]*((sqrt(1 + 8*K_ads_A*[A]) - 1)/(4*K_ads_A*[A]))^2"
    ),
    # Boudart and Djega-Mariadassou (1984), atoms at steady state: 2 k A2 v^2 = k_s B (1 - v)
    "dissociation-not-at-equilibrium": (
        "k_ads_A2*[A2]*((sqrt((k_surface*[B])^2 + 8*k_surface*[B]*k_ads_A2*[A2]) - "
        "k_surface*[B])/(4*k_ads_A2*[A2]))^2"
    ),
}
