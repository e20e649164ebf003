"""Laws for which it is known which combinations of constants rates can show.

Each entry: steps, what :func:`parse_mechanism` needs, the members of conserved totals, further
intermediates, and one expression in the constants of the steps for each combination. Constants:
``k_s``, ``k_rev_s`` of step s, ``K_s = k_s/k_rev_s``. Sources are from memory unless said otherwise.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any


@dataclass(frozen=True, slots=True)
class Known:
    """``families`` list members of conserved totals; ``free`` intermediates in none of them."""

    steps: Mapping[str, str]
    combinations: Sequence[str]
    source: str
    families: Sequence[Sequence[str]] = ()
    free: Sequence[str] = ()
    equilibrated: Sequence[str] = ()
    catalyst: Sequence[str] = ()
    sites: Sequence[str] = ()
    limiting: str = ""
    assume: Mapping[str, Any] = field(default_factory=dict)

    def keywords(self) -> dict[str, Any]:
        assume: dict[str, Any] = dict(self.assume)
        if self.equilibrated:
            assume["equilibrated"] = list(self.equilibrated)
        if self.limiting:
            assume["limiting"] = self.limiting
        if self.free:
            assume["steady"] = list(self.free)
        return {
            "steps": dict(self.steps),
            "catalyst": list(self.catalyst),
            "sites": list(self.sites),
            "assume": assume,
        }


def _enzyme(steps: Mapping[str, str], forms: str, *known: str, source: str, **kw: Any) -> Known:
    return Known(steps, known, source, families=[forms.split()], catalyst=[forms.split()[0]], **kw)


def _surface(steps: Mapping[str, str], forms: str, *known: str, source: str, **kw: Any) -> Known:
    return Known(steps, known, source, families=[forms.split()], sites=["*"], **kw)


def _fluid(steps: Mapping[str, str], free: str, *known: str, source: str, **kw: Any) -> Known:
    return Known(steps, known, source, free=free.split(), **kw)


CLELAND = "Cleland 1963, Biochimica et Biophysica Acta 67, 104-137"

KNOWN: Mapping[str, Known] = {
    # ---- enzymes
    "one substrate, steady state": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> E + P"},
        "E ES",
        "k_t",
        "(k_rev_b + k_t)/k_b",
        source="Briggs and Haldane 1925, Biochemical Journal 19, 338-339: k_cat and K_m",
    ),
    "one substrate, binding at equilibrium": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> E + P"},
        "E ES",
        "k_t",
        "1/K_b",
        source="Michaelis and Menten 1913, Biochemische Zeitschrift 49, 333-369",
        equilibrated=["b"],
    ),
    "reversible, one complex": _enzyme(
        {"b": "E + S <=> ES", "t": "ES <=> E + P"},
        "E ES",
        "k_t",
        "k_rev_b",
        "(k_rev_b + k_t)/k_b",
        "(k_rev_b + k_t)/k_rev_t",
        source="Haldane 1930, Enzymes: all four constants follow from the four parameters",
    ),
    "reversible, two complexes": _enzyme(
        {"b": "E + S <=> ES", "t": "ES <=> EP", "o": "EP <=> E + P"},
        "E ES EP",
        "k_t*k_o/(k_t + k_rev_t + k_o)",
        "k_rev_b*k_rev_t/(k_rev_b + k_t + k_rev_t)",
        "(k_rev_b*k_rev_t + k_rev_b*k_o + k_t*k_o)/(k_b*(k_t + k_rev_t + k_o))",
        "(k_rev_b*k_rev_t + k_rev_b*k_o + k_t*k_o)/(k_rev_o*(k_rev_b + k_t + k_rev_t))",
        source="Peller and Alberty 1959, Journal of the American Chemical Society 81, 5907-5914: "
        "four parameters for any number of complexes",
    ),
    "two complexes, product leaves for good": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> EP", "o": "EP -> E + P"},
        "E ES EP",
        "k_t*k_o/(k_t + k_o)",
        "k_o*(k_rev_b + k_t)/(k_b*(k_t + k_o))",
        source="acyl-enzyme: Gutfreund and Sturtevant 1956, Biochemical Journal 63, 656-661: k_cat "
        "and K_m of four constants",
    ),
    "competitive inhibitor": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> E + P", "i": "E + I <=> EI"},
        "E ES EI",
        "k_t",
        "(k_rev_b + k_t)/k_b",
        "k_rev_i/k_i",
        source="a dead end is at equilibrium in any steady state; " + CLELAND,
    ),
    "uncompetitive inhibitor": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> E + P", "i": "ES + I <=> ESI"},
        "E ES ESI",
        "k_t",
        "(k_rev_b + k_t)/k_b",
        "k_rev_i/k_i",
        source=CLELAND,
    ),
    "mixed inhibitor, bindings at equilibrium": _enzyme(
        {
            "b": "E + S <=> ES",
            "t": "ES -> E + P",
            "i": "E + I <=> EI",
            "j": "ES + I <=> ESI",
            "c": "EI + S <=> ESI",
        },
        "E ES EI ESI",
        "k_t",
        "1/K_b",
        "1/K_i",
        "1/K_j",
        source="K_b K_j = K_i K_c, so that the fourth binding adds nothing; " + CLELAND,
        equilibrated=["b", "i", "j", "c"],
    ),
    "modifier, complex with it reacts too": _enzyme(
        {
            "b": "E + S <=> ES",
            "t": "ES -> E + P",
            "i": "E + X <=> EX",
            "j": "ES + X <=> ESX",
            "u": "ESX -> EX + P",
        },
        "E ES EX ESX",
        "k_t",
        "k_u",
        "1/K_b",
        "1/K_i",
        "1/K_j",
        source="Botts and Morales 1953, Transactions of the Faraday Society 49, 696-707, with "
        "bindings at equilibrium",
        equilibrated=["b", "i", "j"],
    ),
    "substrate inhibits": _enzyme(
        {"b": "E + S <=> ES", "t": "ES -> E + P", "i": "ES + S <=> ESS"},
        "E ES ESS",
        "k_t",
        "(k_rev_b + k_t)/k_b",
        "k_rev_i/k_i",
        source="Haldane 1930, Enzymes",
    ),
    "two substrates, ordered": _enzyme(
        {"a": "E + A <=> EA", "b": "EA + B <=> EAB", "t": "EAB -> E + P + Q"},
        "E EA EAB",
        "k_t",
        "k_t/k_a",
        "(k_rev_b + k_t)/k_b",
        "k_rev_a/k_a",
        source=CLELAND + ": V, K_A, K_B and K_iA",
    ),
    "two substrates, substituted enzyme": _enzyme(
        {
            "a": "E + A <=> EA",
            "p": "EA -> F + P",
            "b": "F + B <=> FB",
            "q": "FB -> E + Q",
        },
        "E EA F FB",
        "k_p*k_q/(k_p + k_q)",
        "k_q*(k_rev_a + k_p)/(k_a*(k_p + k_q))",
        "k_p*(k_rev_b + k_q)/(k_b*(k_p + k_q))",
        source=CLELAND + ": V, K_A and K_B",
    ),
    "two substrates, random, bindings at equilibrium": _enzyme(
        {
            "a": "E + A <=> EA",
            "b": "E + B <=> EB",
            "c": "EA + B <=> EAB",
            "d": "EB + A <=> EAB",
            "t": "EAB -> E + P",
        },
        "E EA EB EAB",
        "k_t",
        "1/K_a",
        "1/K_b",
        "1/K_c",
        source="K_a K_c = K_b K_d; " + CLELAND,
        equilibrated=["a", "b", "c", "d"],
    ),
    "three one-way steps in a ring": _enzyme(
        {"a": "C + A -> CA", "b": "CA + B -> CAB", "t": "CAB -> C + P"},
        "C CA CAB",
        "k_a",
        "k_b",
        "k_t",
        source="1/rate = 1/(k_a A) + 1/(k_b B) + 1/k_t: times of the steps add up (closed form)",
    ),
    "two ways share one equilibrium": _enzyme(
        {"d": "A <=> P", "b": "C + A <=> CA", "t": "CA <=> C + P"},
        "C CA",
        "k_d",
        "k_t",
        "k_rev_b",
        "k_b",
        "k_rev_t",
        source="k_d/k_rev_d = K_b K_t (Wegscheider 1901): of six constants five are free, and with "
        "one complex each of the four with the catalyst shows (Haldane 1930)",
    ),
    # ---- surfaces
    "two adsorbed, surface reaction limiting": _surface(
        {"a": "A + * <=> A*", "b": "B + * <=> B*", "s": "A* + B* -> P + 2 *"},
        "* A* B*",
        "k_s",
        "K_a",
        "K_b",
        source="Hougen and Watson 1943, Industrial and Engineering Chemistry 35, 529-541",
        equilibrated=["a", "b"],
    ),
    "one adsorbed, one from the fluid": _surface(
        {"a": "A + * <=> A*", "s": "A* + B -> P + *"},
        "* A*",
        "k_s",
        "K_a",
        source="Rideal 1939, Proceedings of the Cambridge Philosophical Society 35, 130-132",
        equilibrated=["a"],
    ),
    "adsorbed in halves": _surface(
        {"h": "H2 + 2 * <=> 2 H*", "a": "A + * <=> A*", "s": "A* + 2 H* -> P + 3 *"},
        "* A* H*",
        "k_s",
        "K_a",
        "sqrt(K_h)",
        source="Hougen and Watson 1943, as above",
        equilibrated=["h", "a"],
    ),
    "adsorption and reaction both slow": _surface(
        {"a": "A + * <=> A*", "s": "A* -> P + *"},
        "* A*",
        "k_s",
        "k_a/(k_rev_a + k_s)",
        source="as Briggs and Haldane 1925, on a surface (closed form)",
    ),
    "isomer over adsorbed forms, all reversible": _surface(
        {"a": "A + * <=> A*", "s": "A* <=> B*", "d": "B* <=> B + *"},
        "* A* B*",
        "k_s*k_d/(k_s + k_rev_s + k_d)",
        "k_rev_a*k_rev_s/(k_rev_a + k_s + k_rev_s)",
        "(k_rev_a*k_rev_s + k_rev_a*k_d + k_s*k_d)/(k_a*(k_s + k_rev_s + k_d))",
        "(k_rev_a*k_rev_s + k_rev_a*k_d + k_s*k_d)/(k_rev_d*(k_rev_a + k_s + k_rev_s))",
        source="Peller and Alberty 1959, as above, on a surface",
    ),
    "surface oxidised and reduced": _surface(
        {"r": "R + O* -> Q + *", "o": "O2 + * -> OO*", "f": "OO* + R -> O* + Q"},
        "* O* OO*",
        "k_o",
        "k_r*k_f/(k_r + k_f)",
        source="Mars and van Krevelen 1954, Chemical Engineering Science 3, special supplement, "
        "41-59, in two steps of reduction: 1/rate = 1/(k_o O2) + (1/k_r + 1/k_f)/R (closed form)",
    ),
    # ---- gas phase and chains
    "activation by collision": _fluid(
        {"a": "A + M <=> X + M", "u": "X -> P"},
        "X",
        "k_a",
        "k_rev_a/k_u",
        source="Lindemann 1922, Transactions of the Faraday Society 17, 598-599",
    ),
    "activation by two partners": _fluid(
        {"a": "2 A <=> X + A", "m": "A + M <=> X + M", "u": "X -> P"},
        "X",
        "k_a",
        "k_m",
        "k_rev_a/k_u",
        source="Lindemann 1922; k_a/k_rev_a = k_m/k_rev_m, the same equilibrium",
    ),
    "dimer at equilibrium, then captured": _fluid(
        {"d": "2 N <=> N2", "o": "N2 + O -> 2 Q"},
        "N2",
        "k_o*K_d",
        source="nitric oxide with oxygen: Bodenstein 1918, Zeitschrift für Elektrochemie 24, "
        "183-201: one constant of third order",
        equilibrated=["d"],
    ),
    "hydrogen and bromine": _fluid(
        {
            "i": "Br2 + M <=> 2 Br + M",
            "p": "Br + H2 <=> HBr + H",
            "q": "H + Br2 -> HBr + Br",
        },
        "Br H",
        "k_p*sqrt(k_i/k_rev_i)",
        "k_rev_p/k_q",
        source="Bodenstein and Lind 1907, Zeitschrift für physikalische Chemie 57, 168-192; "
        "mechanism of Christiansen, Herzfeld and Polanyi 1919-1920",
    ),
    "chain with radicals ended in pairs": _fluid(
        {"i": "I -> 2 X", "p": "X + A -> P + X", "t": "2 X -> T"},
        "X",
        "k_i",
        "k_p*sqrt(k_i/k_t)",
        source="Rice and Herzfeld 1934, Journal of the American Chemical Society 56, 284-289; k_i "
        "from the loss of initiator",
    ),
    # ---- solution
    "ionisation, then capture": _fluid(
        {"i": "R <=> C + X", "c": "C + Y -> P"},
        "C",
        "k_i",
        "k_rev_i/k_c",
        source="Ingold 1953, Structure and Mechanism in Organic Chemistry: mass-law effect",
    ),
    "intermediate shared by two captures": _fluid(
        {"i": "R <=> C + X", "y": "C + Y -> P", "z": "C + Z -> Q"},
        "C",
        "k_i",
        "k_rev_i/k_y",
        "k_z/k_y",
        source="competition: only ratios of the steps from one intermediate show (closed form)",
    ),
    "loss of a proton, then of a group": _fluid(
        {"h": "S + B <=> C + HB", "l": "C -> P + L"},
        "C",
        "k_h",
        "k_rev_h/k_l",
        source="Bordwell 1972, Accounts of Chemical Research 5, 374-381",
    ),
    "two ways of one form": _fluid(
        {"a": "A -> X", "x": "X -> P", "b": "A -> P"},
        "X",
        "k_a + k_b",
        source="a sum of rate constants of one order (closed form)",
    ),
    "two products side by side": _fluid(
        {"a": "A -> P", "b": "A -> Q"},
        "",
        "k_a",
        "k_b",
        source="Wegscheider 1899, Monatshefte für Chemie 20, 693-707: the ratio of the products",
    ),
}
