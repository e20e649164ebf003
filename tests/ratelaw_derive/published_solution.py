"""Published laws of simple schemes, of catalysis in solution and of solution kinetics.

Adsorption and inhibition constants are of association. Constants that begin with K_ are of an
equilibrium. All forms are from memory of the works named beside them; the full references stand in
the files.
"""

FORMS = {
    # K. J. Laidler, Chemical Kinetics (1987): mass action, parallel reactions
    "two-parallel-pathways": "k_by_a*[A] + k_by_b*[B]",
    # Laidler (1987): steady state of a complex, common practice
    "complex-then-product": "k_associate*k_react*[A]*[B]/(k_rev_associate + k_react)",
    "reversible-one-to-one": "k_react*[A] - k_rev_react*[P]",
    # Bronsted and Pedersen (1924), Bell (1941)
    "catalysis-by-acids-and-bases": (
        "(k_water + k_hydrogen_ion*[H+] + k_hydroxide*[OH-] + k_acid*[HA] + k_base*[A-])*[S]"
    ),
    # Bateman, Hughes and Ingold (1940): mass law (common ion) effect
    "ionisation-then-capture": "k_ionise*[RX]/(1 + k_rev_ionise*[X-]/(k_capture*[Nu]))",
    # Wilhelmy (1850)
    "first-order": "k_react*[A]",
    # Guldberg and Waage (1879)
    "second-order": "k_react*[A]*[B]",
    # Laidler (1987), pre-equilibrium: k K A B
    "fast-equilibrium-then-product": "k_react*K_associate*[A]*[B]",
    # Laidler (1987), steady state: k1 k2 A B/(k-1 + k2 B)
    "intermediate-then-second-reactant": "k_form*k_catch*[A]*[B]/(k_rev_form + k_catch*[B])",
    # Bell (1941), Jencks (1969): proportional to the hydrogen ion alone
    "specific-acid": "k_react*K_protonate*[S]*[H+]",
    # Bell (1941), Jencks (1969): proportional to hydroxide alone
    "specific-base": "k_react*K_deprotonate*[SH]*[OH-]",
    # Bell (1941), Jencks (1969): proportional to the acid
    "general-acid": "k_transfer*[S]*[HA]",
    # Bell (1941), Jencks (1969): proportional to the base
    "general-base": "k_transfer*[SH]*[B]",
    # Jencks (1969), specific acid and general base: k K S H+ A-
    "acid-then-conjugate-base": "k_react*K_protonate*[S]*[H+]*[A-]",
    # Jencks (1969), steady state of the adduct: k1 k2 S Nu/(k-1 X + k2)
    "nucleophilic-catalysis": "k_attack*k_release*[S]*[Nu]/(k_rev_attack*[X] + k_release)",
    # Lapworth (1904), Bell (1941): k1 k2 S HA X2/(k-1 HA + k2 X2)
    "enolisation-then-halogen": (
        "k_enolise*k_halogenate*[S]*[HA]*[X2]/(k_rev_enolise*[HA] + k_halogenate*[X2])"
    ),
    # Bell (1959): k1 k2 A^2 OH-/(k-1 + k2 A)
    "aldol-addition": "k_deprotonate*k_add*[A]^2*[OH-]/(k_rev_deprotonate + k_add*[A])",
    # steady state of two forms of the catalyst, as Halpern (1981) treats it; common practice
    "metal-complex-cycle": "k_bind*k_react*[A]*[B]/(k_bind*[A] + k_rev_bind + k_react*[B])",
    # Halpern (1981), fast equilibria of loss and binding: k K S/(1 + K S + L/K_L)
    "metal-complex-loses-ligand": "k_react*K_bind*[S]/(1 + K_bind*[S] + [L]/K_lose)",
    # M + 2 K M^2 = total M, the rate is k M S (balance written out, no source needed)
    "metal-complex-with-dimer": "2*k_react*[S]*[total M]/(1 + sqrt(1 + 8*K_dimer*[total M]))",
    # Laidler (1987), steady state of two forms of the catalyst; common practice
    "catalyst-oxidised-and-reduced": "k_oxidise*k_reduce*[A]*[B]/(k_oxidise*[A] + k_reduce*[B])",
    # Ostwald (1890)
    "autocatalysis": "k_alone*[A] + k_helped*[A]*[P]",
    # McLennan (1967), the general law of elimination by a carbanion: k1 k2 SH B/(k-1 BH+ + k2)
    "carbanion-then-loss": "k_deprotonate*k_lose*[SH]*[B]/(k_rev_deprotonate*[BH+] + k_lose)",
    # Basolo and Pearson (1967), the two-term law: (k1 + k2 Y) MX
    "substitution-direct-and-by-solvent": "(k_solvent + k_direct*[Y])*[MX]",
    # Bunnett and Randall (1958): k1 (k2 + k3 B) S Nu/(k-1 + k2 + k3 B)
    "base-catalysed-substitution": (
        "k_add*(k_lose + k_lose_with_B*[B])*[S]*[Nu]/(k_rev_add + k_lose + k_lose_with_B*[B])"
    ),
}
