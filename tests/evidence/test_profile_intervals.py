"""Profile intervals against published and independently computed ones.

Sources: Bates & Watts, Nonlinear Regression Analysis and Its Applications, Wiley 1988 (Puromycin,
biochemical oxygen demand, n-pentane isomerization of Carr, Ind. Eng. Chem. 52 (1960) 391,
sulfisoxazole); Fogler, Elements of Chemical Reaction Engineering (ethylene hydrogenation, silane
deposition); data set vmkmki of Baty et al., J. Stat. Softw. 66(5) (2015). Limits in SOURCES.toml,
each reached there by an independent profile; the published ones were computed with interpolation
and agree to 3.5 digits.
"""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from sympy import Expr, exp

from discrim.evidence.curve import Curve
from discrim.evidence.intervals import Along, along, linearised, standard_errors
from discrim.fit.fit import Fit, fit
from tests.reference.outside import column, digits, labels, measurements, model, predictor, symbols

conc, time, t, P = symbols("conc time t P")
pE, pEA, pH, pC5, pI = symbols("pE pEA pH pC5 pI")
S, inhibitor = symbols("S I")
Vm, K, h, A, k, KEA, KE, Vmax, Km, Ki, a, b = symbols("Vm K h A k KEA KE Vmax Km Ki a b")
b1, b2, b3, b4, c0, c1, c2, c3 = symbols("b1 b2 b3 b4 c0 c1 c2 c3")

_DRIVING = pC5 - pI / 1.632
_MICHAELIS = Vm * conc / (K + conc)

# table, model, law, conditions
LAWS: dict[tuple[str, str], tuple[Expr, tuple[Any, ...]]] = {
    ("puromycin", "treated"): (_MICHAELIS, (conc,)),
    ("puromycin", "untreated"): (_MICHAELIS, (conc,)),
    ("bod", "first_order"): (A * (1 - exp(-k * time)), (time,)),
    ("ethylene_hydrogenation", "a_ethylene_and_ethane_adsorbed"): (
        k * pE * pH / (1 + KEA * pEA + KE * pE),
        (pE, pEA, pH),
    ),
    ("ethylene_hydrogenation", "b_ethylene_adsorbed"): (k * pE * pH / (1 + KE * pE), (pE, pH)),
    ("isomerization_npentane", "pseudo_linear"): (
        _DRIVING / (c0 + c1 * pH + c2 * pC5 + c3 * pI),
        (pH, pC5, pI),
    ),
    ("enzyme_inhibition_vmkmki", "competitive"): (
        Vmax * S / (S + Km * (1 + inhibitor / Ki)),
        (S, inhibitor),
    ),
    ("enzyme_inhibition_vmkmki", "mixed"): (
        Vmax * S / (Km * (1 + a * inhibitor) + S * (1 + b * inhibitor)),
        (S, inhibitor),
    ),
    ("sulfisoxazole", "two_exponentials"): (b1 * exp(-b2 * t) + b3 * exp(-b4 * t), (t,)),
    ("silane_deposition", "saturation"): (k * P / (1 + K * P), (P,)),
}


@cache
def fitted(table: str, name: str) -> Fit:
    law, conditions = LAWS[table, name]
    entry = model(table, name)
    constants = symbols(" ".join(entry["parameters"]))
    c = np.column_stack([column(table, str(s)) for s in conditions])
    y = column(table, entry["response"])
    if table == "puromycin":
        rows = labels(table, "state") == name
        c, y = c[rows], y[rows]
    start = np.array(entry["starts"][:1], float)
    bound = predictor(law, constants, conditions, len(y), scale=entry["refit"]["estimates"])
    return fit(bound, measurements(y, c), near=start)


def curves(found: Fit, j: int, level: float = 0.95) -> Along:
    return along(found, Curve.of(found, j), level, se=float(standard_errors(found)[j]))


def _limits() -> list[tuple[str, str, str]]:
    return [(t, m, c) for (t, m) in LAWS for c in model(t, m)["refit"]["profile_95"]]


@pytest.mark.parametrize(("table", "name"), LAWS)
def test_estimates_and_standard_errors(table: str, name: str) -> None:
    found = fitted(table, name)
    entry = model(table, name)["refit"]
    assert found.ok
    assert digits(found.theta, entry["estimates"]) >= 6
    assert digits(standard_errors(found), entry["standard_errors"]) >= 5.5
    assert digits(found.rss, entry["rss"]) >= 8


@pytest.mark.parametrize(("table", "name", "constant"), _limits())
def test_profile_limits(table: str, name: str, constant: str) -> None:
    found = fitted(table, name)
    entry = model(table, name)
    result = curves(found, entry["parameters"].index(constant)).profile
    assert [result.low.end, result.high.end] == ["crossed", "crossed"]
    ends = [result.low.value, result.high.value]
    assert digits(np.array(ends), entry["refit"]["profile_95"][constant]) >= 5
    published = entry.get("published", {}).get("profile_95", {})
    if constant in published:
        assert digits(np.array(ends), published[constant]) >= 3.3


def test_two_exponentials_that_change_places() -> None:
    """The law is the same with its terms exchanged: the interval of each constant is the piece
    around its estimate, and the other piece is named beside it."""
    found = fitted("sulfisoxazole", "two_exponentials")
    entry = model("sulfisoxazole", "two_exponentials")["refit"]["profile_95"]
    result = curves(found, 3).profile
    assert digits(np.array(result.pieces[0]), entry["b4"]) >= 5
    assert digits(np.array(result.pieces[1]), entry["b2"]) >= 5
    assert result.note == "also consistent: 0.9453 to 1.846"


def test_open_ends_are_called_open() -> None:
    """At 99 % the limits of the biochemical oxygen demand are open above for both constants; their
    lower ends are 11.531 and -0.0445 (SOURCES.toml).

    Through A = infinity (a straight line) the law goes on to negative A, so without bounds the set
    of A has a second piece there, and that of k goes below 0. At k = 0 itself the law as written is
    0 for every A, a point that these values to try avoid.
    """
    law, conditions = LAWS["bod", "first_order"]
    once = fitted("bod", "first_order")
    bound = predictor(law, (A, k), conditions, 6, scale=1.1 * once.theta)
    found = fit(bound, once.data, near=once.theta[None])
    for j, lower in ((0, 11.531), (1, -0.0445)):
        result = curves(found, j, level=0.99).profile
        assert result.high.end == "open"
        assert result.high.value == np.inf
        assert result.low.end == "crossed"
        assert result.low.value == pytest.approx(lower, abs=6e-4)
    assert len(curves(found, 0, level=0.99).profile.pieces) == 2


def test_linearised_interval_of_a_badly_conditioned_law_fails_where_the_profile_does_not() -> None:
    """n-Pentane isomerization, four constants (Bates & Watts 1988, table 2.2: b2 = 0.071 +- 0.178):
    the linearised 95 % interval of each adsorption constant reaches far below zero, which
    adsorption constants cannot; the profile of b1 is lopsided, from 26.8 to 67.0, where the
    linearised one is 35.9 -+ 17.1. Adsorption constants held at or above zero."""
    law = b1 * b3 * _DRIVING / (1 + b2 * pH + b3 * pC5 + b4 * pI)
    table = "isomerization_npentane"
    entry = model(table, "single_site_surface_reaction")
    c = np.column_stack([column(table, s) for s in ("pH", "pC5", "pI")])
    scale = entry["refit"]["estimates"]
    bound = predictor(law, (b1, b2, b3, b4), (pH, pC5, pI), 24, scale=scale, lower=0.0)
    found = fit(bound, measurements(column(table, "rate"), c))
    assert digits(found.theta, entry["refit"]["estimates"]) >= 5
    assert digits(found.theta, entry["published"]["estimates"]) >= 5
    se = standard_errors(found)
    assert digits(se, entry["refit"]["standard_errors"]) >= 5
    # Bates & Watts table 2.2, from memory, printed to 3 digits
    assert np.allclose(se, entry["published"]["standard_errors"], rtol=5e-3)
    assert digits(found.rss, entry["refit"]["rss"]) >= 8
    for j in (1, 2, 3):
        wald = linearised(found, j, float(se[j]), 0.95)
        assert wald.low.value < -2 * found.theta[j]
        result = curves(found, j)
        assert result.profile.low.value >= 0.0
        # the unity term is not supported: the absolute adsorption constants are not determined, and
        # the profile says it by an open upper end
        assert result.profile.high.end == "open"
        assert wald.high.end == "crossed"
    profile = curves(found, 0).profile
    ends = np.array([profile.low.value, profile.high.value])
    assert digits(ends, entry["refit"]["profile_95"]["b1"]) >= 5
    wald = linearised(found, 0, float(se[0]), 0.95)
    assert [wald.low.value, wald.high.value] == pytest.approx([18.79, 53.05], abs=0.01)


def test_profile_against_lmfit() -> None:
    """The same limits by the general-purpose library lmfit (conf_interval, F-based, 95 %)."""
    lmfit = pytest.importorskip("lmfit")
    found = fitted("puromycin", "treated")
    x, y = found.data.conditions[:, 0], found.data.y
    start = lmfit.Parameters()
    start.add("Vm", value=200.0)
    start.add("K", value=0.1)
    mini = lmfit.Minimizer(lambda p: y - p["Vm"] * x / (p["K"] + x), start)
    result = mini.minimize()
    other = lmfit.conf_interval(mini, result, sigmas=[0.95])
    for j, name in enumerate(("Vm", "K")):
        mine = curves(found, j).profile
        theirs = [other[name][0][1], other[name][-1][1]]
        assert digits(np.array([mine.low.value, mine.high.value]), theirs) >= 4.5


def test_linear_law_has_one_interval_by_every_method() -> None:
    """A law linear in its constants, exact conditions, scale unknown: the profile, the linearised
    and the reconciled interval are the t interval, here that of statsmodels OLS."""
    sm = pytest.importorskip("statsmodels.api")
    x1, x2 = symbols("x1 x2")
    table = "bodyfat"
    c = np.column_stack([column(table, s) for s in ("triceps", "thigh")])
    y = column(table, "bodyfat")
    found = fit(predictor(a + b * x1 + k * x2, (a, b, k), (x1, x2), 20), measurements(y, c))
    expected = sm.OLS(y, sm.add_constant(c)).fit().conf_int(0.05)
    se = standard_errors(found)
    for j in range(3):
        result = curves(found, j)
        for kind in (linearised(found, j, float(se[j]), 0.95), result.profile, result.reconciled):
            assert digits(np.array([kind.low.value, kind.high.value]), expected[j]) >= 5.5
