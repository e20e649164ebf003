"""Published laws of chain reactions and of reactions in the gas.

Adsorption and inhibition constants are of association. Constants that begin with K_ are of an
equilibrium. All forms are from memory of the works named beside them; the full references stand in
the files.
"""

FORMS = {
    # Lindemann (1922); law as in every textbook of kinetics
    "activation-by-collision": "k_activate*k_react*[M]*[A]/(k_rev_activate*[M] + k_react)",
    # Bodenstein (1922): third order
    "nitric-oxide-dimer-then-oxygen": "k_oxidation*K_dimer*[NO]^2*[O2]",
    # Bodenstein and Lind (1907), Christiansen (1919): for d[HBr]/dt 2 k_2 sqrt(K) H2 Br2^(1/2)/
    # (1 + k_4/k_3 HBr/Br2); the rate of the overall reaction is half of it
    "hydrogen-bromine-chain": (
        "k_propagate_H2*sqrt(K_dissociate)*[H2]*sqrt([Br2])"
        "/(1 + k_inhibit/k_propagate_Br2*[HBr]/[Br2])"
    ),
    # Bodenstein (1922) third order; Laidler (1987)
    "nitric-oxide-trioxide-then-oxide": "k_reduce*K_associate*[NO]^2*[O2]",
    # Lindemann (1922) read backwards; Laidler (1987)
    "recombination-with-third-body": (
        "k_associate*k_quiet*[A]*[B]*[M]/(k_rev_associate + k_quiet*[M])"
    ),
    # Rabinowitch and Wood (1936), Porter (1962): k K I^2 M
    "atoms-recombine-over-a-complex": "k_take*K_associate*[I]^2*[M]",
    # Johnston, Bonner and Wilson (1957), steady state of NO3: k1 k2 NO2^2 CO/(k-1 NO + k2 CO)
    "nitrogen-dioxide-carbon-monoxide": (
        "k_exchange*k_oxidise*[NO2]^2*[CO]/(k_rev_exchange*[NO] + k_oxidise*[CO])"
    ),
    # Sullivan (1967): k K H2 I2
    "hydrogen-iodine-through-atoms": "k_react*K_dissociate*[H2]*[I2]",
    # Christiansen, Herzfeld, Polanyi (1919-1920): d[HBr]/dt = 2 k2 (k1/k5)^(1/2) H2 Br2^(1/2)/
    # (1 + k4 HBr/(k3 Br2)); the rate of the overall reaction is half of it
    "hydrogen-bromine-chain-by-collision": (
        "k_propagate_H2*sqrt(k_dissociate/k_recombine)*[H2]*sqrt([Br2])/(1 + "
        "k_inhibit*[HBr]/(k_propagate_Br2*[Br2]))"
    ),
    # Rice and Herzfeld (1934): d[CH4]/dt = k2 (k1/(2 k4))^(1/2) A^(3/2), 2 k4 CH3^2 the loss of CH3
    "acetaldehyde-chain": "k_propagate*sqrt(k_start/(2*k_end))*[CH3CHO]^(3/2)",
    # Rice and Herzfeld (1934), end by H + C2H5: steady states with H C2H5 = k1 C2H6/k5, first order
    "ethane-chain": "[C2H6]/2*(k_start + sqrt(k_start^2 + 4*k_start*k_split*k_propagate/k_end))",
    # Benson and Axworthy (1957): -d[O3]/dt = 2 k1 k2 M O3^2/(k-1 M O2 + k2 O3), twice the rate of
    # 2 O3 = 3 O2
    "ozone-decomposition": "k_split*k_attack*[M]*[O3]^2/(k_rev_split*[M]*[O2] + k_attack*[O3])",
    # Ogg (1947): -d[N2O5]/dt = 2 k1 k2 N2O5/(k-1 + k2), twice the rate of 2 N2O5 = 4 NO2 + O2
    "dinitrogen-pentoxide-decomposition": "k_split*k_lose_O2/(k_rev_split + k_lose_O2)*[N2O5]",
    # Bodenstein (1913), Laidler (1987), chlorine atoms lost at the wall: d[HCl]/dt = 2 k2 H2 Cl with
    # Cl = 2 k_light Cl2/k_wall
    "hydrogen-chlorine-chain": "2*k_propagate_H2*[H2]*2*k_light*[Cl2]/k_wall",
    # Bodenstein and Unger (1930), the steady state of Cl before the usual neglect (that limit: see
    # test_published_limits): Cl = 2 k_light Cl2/(k2 H2 k4 O2/(k3 Cl2 + k4 O2) + k5 O2), H2 used up
    "hydrogen-chlorine-chain-with-oxygen": (
        "k_propagate_H2*[H2]*2*k_light*[Cl2]/(k_propagate_H2*[H2]*k_end_H*[O2]/(k_propagate_Cl2*[Cl2] "
        "+ k_end_H*[O2]) + k_end_Cl*[O2])"
    ),
    # Bodenstein and Plaut (1924): k K_2 K_1^(1/2) CO Cl2^(3/2)
    "phosgene-chain": "k_propagate*K_associate*sqrt(K_dissociate)*[CO]*[Cl2]^(3/2)",
    # Flory (1953): k_p M (f k_d I/k_t)^(1/2)
    "radical-polymerisation": "k_grow*[M]*sqrt(k_start*[I]/k_end)",
}

#: Where steps have no single overall equation: the product whose making the form gives.
MADE = {
    "acetaldehyde-chain": "CH4",
    "ethane-chain": "C2H4",
    "hydrogen-chlorine-chain": "HCl",
}
