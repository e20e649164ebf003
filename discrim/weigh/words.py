"""Standing words of every document: cautions, controls, settings, methods with their sources."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from discrim import verdict
from discrim.evidence.conditioning import TradeOff
from discrim.fit.measurements import Scale
from discrim.verdict.words import measure

if TYPE_CHECKING:
    from discrim.weigh.bind import Bound
    from discrim.weigh.weighed import Weighed

CAUTIONS = (
    "The verdict concerns these runs, these candidates and the stated errors; it is not permission to "
    "change a process.",
    "A species without effect on the rate may be a stabiliser, inhibitor, oxygen scavenger, "
    "neutraliser, diluent or heat sink, or govern selectivity, coking or corrosion.",
    "A rate law is not a basis for relief sizing or scale-up of heat removal.",
    "Where an autocatalytic law, an induction period or accumulation stands, it can mean runaway: assess "
    "before any larger batch.",
    "Changes go through the site's own hazard review and management of change, local codes, and "
    "qualified, licensed people where the law asks for them.",
)

CONTROLS = {
    "transport": "rates free of heat and mass transfer limits",
    "blank": "rate without catalyst or reactant",
    "deactivation": "a first run repeated at the end",
    "mass balance": "what was consumed was found again",
}


ROUNDING = 1e-12  # a fraction below this comes from the arithmetic


def share(fraction: float) -> str:
    """A fraction in percent, two digits; what is only rounding is none."""
    return "0 %" if fraction < ROUNDING else f"{100 * fraction:.2g} %"


def trade_off_words(bound: Bound, t: TradeOff, theta: np.ndarray) -> str:
    """A weak direction as a sentence with units."""
    names, units = bound.names, bound.units
    involved = [j for j in t.involved if t.change[j] != 0]
    if len(involved) < 2:
        return "one combination of the constants is hardly fixed by these runs"
    involved.sort(key=lambda j: -abs(t.change[j] * max(abs(theta[j]), 1e-300)))
    everywhere = "these runs" if bool(bound.predictor.linear.all()) else "near this fit the runs"
    if len(involved) == 2:
        a, b = sorted(involved)
        ratio = -t.change[a] / t.change[b]
        unit = f" {_ratio_unit(units[a], units[b])}".rstrip()
        sign = "+" if ratio > 0 else "−"
        # k_a + ratio k_b stays put along the direction
        number = measure(abs(ratio))
        factor = f"({number}{unit})·" if unit else f"{number}·"
        if factor == "1·":
            factor = ""
        return f"{everywhere} fix only {names[a]} {sign} {factor}{names[b]}, not the two apart"
    parts = []
    for j in involved:
        up = "raising" if t.change[j] > 0 else "lowering"
        size = abs(t.change[j]) / t.singular_value if t.singular_value > 0 else abs(t.change[j])
        parts.append(f"{up} {names[j]} by {measure(size, units[j], 2)}")
    return (
        f"{', '.join(parts)} together changes the predicted rates by no more than one standard "
        "error in all"
    )


def _ratio_unit(a: str, b: str) -> str:
    if a == b:
        return ""
    from discrim.units import parse_unit

    try:
        left, right = parse_unit(a or "1"), parse_unit(b or "1")
        from discrim.units import UnitSet

        units = UnitSet.choose([left, right])
        text = (units.unit(left) / units.unit(right)).text()
        return text
    except Exception:  # units with orders in them are words, not units
        return f"{a or '1'}/({b or '1'})"


def settings_words(w: Weighed) -> dict[str, str]:
    """The settings in force."""
    return {
        "confidence level": f"{w.study.level:g}",
        "seed": str(w.seed),
        "starts per fit": "16",
        "error margin asked": f"{verdict.ERROR_MARGIN:g} times the stated errors of the conditions",
        "spread asked where errors were assumed": f"{100 * verdict.ASSUMED_SPREAD:g} %",
    }


def references(w: Weighed) -> list[dict[str, str]]:
    """Sources of the methods that this document used."""
    out = [
        (
            "Weighted least squares with errors in the conditions",
            "York, Can. J. Phys. 44 (1966) 1079; Barker & Diana, Am. J. Phys. 42 (1974) 224; Britt & "
            "Luecke, Technometrics 15 (1973) 233",
        ),
        (
            "Tests that hold where runs are in lockstep",
            "score: Kleibergen, Econometrica 70 (2002) 1781; 73 (2005) 1103; conditional likelihood "
            "ratio: Moreira, Econometrica 71 (2003) 1027; other constants in lockstep: Chaudhuri & "
            "Zivot, J. Econometrics 164 (2011) 239",
        ),
        (
            "Extra sum of squares, profile intervals",
            "Bates & Watts, Nonlinear Regression Analysis and Its Applications, Wiley 1988",
        ),
        ("Constants on the edge of their range", "Self & Liang, J. Am. Stat. Assoc. 82 (1987) 605"),
        (
            "Condition indices and variance proportions",
            "Belsley, Kuh & Welsch, Regression Diagnostics, Wiley 1980",
        ),
        ("Guaranteed ranges", "Oettli & Prager, Numer. Math. 6 (1964) 405"),
        (
            "Criteria and weights",
            "Burnham & Anderson, Model Selection and Multimodel Inference, 2nd ed., Springer 2002",
        ),
        (
            "Confidence set of rivals",
            "score of each law towards its rivals, after Fisher & McAleer, J. Econometrics 16 (1981) 103",
        ),
        (
            "Rivals two at a time, tables drawn with the reconciled conditions held",
            "Cox, J. R. Stat. Soc. B 24 (1962) 406; Williams, Biometrics 26 (1970) 23; as a guide Vuong, "
            "Econometrica 57 (1989) 307; when to stop drawing: Gandy, J. Am. Stat. Assoc. 104 (2009) 1504",
        ),
        (
            "Residuals: influence of single runs, trends of all columns together, patterns with "
            "references drawn for each fit",
            "Cook & Weisberg, Residuals and Influence in Regression, Chapman & Hall 1982; Holm, Scand. "
            "J. Statist. 6 (1979) 65; Dufour, Khalaf, Bernard & Genest, J. Econometrics 122 (2004) 317",
        ),
        ("Rounding of results", "JCGM 100:2008 (GUM), section 7.2.6"),
    ]
    if w.bench.unknown is not None and w.bench.unknown.together:
        out.append(
            (
                "Covariance of several responses",
                "Box & Draper, Biometrika 52 (1965) 355; dependences among them: Box, Hunter, MacGregor "
                "& Erjavec, Technometrics 15 (1973) 33",
            )
        )
    elif w.bench.unknown is not None:
        out.append(
            (
                "Variance of each response",
                "restricted maximum likelihood: Patterson & Thompson, Biometrika 58 (1971) 545",
            )
        )
    if w.common.scale is Scale.STATED:
        out.insert(
            2, ("Guard by the overall fit", "Anderson & Rubin, Ann. Math. Stat. 20 (1949) 46")
        )
    return [{"method": m, "source": s} for m, s in out]
