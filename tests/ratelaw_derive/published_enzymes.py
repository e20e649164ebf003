"""Published laws of enzymes, in the constants of the steps of the library's files.

Adsorption and inhibition constants are of association. Constants that begin with K_ are of an
equilibrium. All forms are from memory of the works named beside them; the full references stand in
the files.
"""

FORMS = {
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
    # Haldane (1930): V S/(K_m + S + S^2/K_s)
    "enzyme-substrate-inhibits": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind + [S] + K_inhibit*[S]^2)"
    ),
    # Segel (1975), product competitive, no reverse reaction: V S/(K_m (1 + P/K_p) + S)
    "enzyme-product-inhibits": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_inhibit*[P]) + [S])"
    ),
    # Yonetani and Theorell (1964): V S/(K_m (1 + I/K_i + J/K_j + I J/(a K_i K_j)) + S), 1/(a K_j) the
    # association of J with EI
    "enzyme-two-inhibitors": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_inhibit_I*[I] + K_inhibit_J*[J] "
        "+ K_inhibit_I*K_both*[I]*[J]) + [S])"
    ),
    # Segel (1975), activator binds first: V S/(K_m (1 + K_a/A) + S)
    "enzyme-essential-activator": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + 1/(K_activate*[A])) + [S])"
    ),
    # Botts and Morales (1953) at rapid equilibrium:
    # (k S/K_s + k' S X/(K_s K_sx))/(1 + S/K_s + X/K_x + S X/(K_s K_sx))
    "enzyme-modifier": (
        "(k_turn*K_bind*[S] + k_turn_X*K_bind*K_modify_ES*[S]*[X])/(1 + K_bind*[S] + "
        "K_modify*[X] + K_bind*K_modify_ES*[S]*[X])"
    ),
    # Theorell and Chance (1951) without products: 1/v = 1/k3 + 1/(k1 A) + 1/(k2 B) + k-1/(k1 k2 A B)
    "enzyme-ordered-no-central-complex": (
        "1/(1/k_release_Q + 1/(k_bind_A*[A]) + 1/(k_react_B*[B]) + "
        "k_rev_bind_A/(k_bind_A*k_react_B*[A]*[B]))"
    ),
    # Haldane (1930), Segel (1975), uni uni with two central complexes, by the patterns of King and
    # Altman
    "enzyme-two-complexes-reversible": (
        "(k_bind*k_turn*k_release*[S] - "
        "k_rev_bind*k_rev_turn*k_rev_release*[P])/(k_rev_bind*k_rev_turn + "
        "k_rev_bind*k_release + k_turn*k_release + k_bind*[S]*(k_turn + k_rev_turn + "
        "k_release) + k_rev_release*[P]*(k_rev_bind + k_turn + k_rev_turn))"
    ),
    # Michaelis and Davidsohn (1911), Cornish-Bowden (2012): K_m (1 + H/K_1 + K_2/H) + S, complex in one
    # form
    "enzyme-active-in-one-charge": (
        "k_turn*[S]/((k_rev_bind + k_turn)/k_bind*(1 + K_second*[H+] + 1/(K_first*[H+])) + [S])"
    ),
    # Adair (1925) for two sites, each complex with its turnover
    "enzyme-two-binding-sites": (
        "(k_turn_first*K_bind_first*[S] + "
        "k_turn_second*K_bind_first*K_bind_second*[S]^2)/(1 + K_bind_first*[S] + "
        "K_bind_first*K_bind_second*[S]^2)"
    ),
}
