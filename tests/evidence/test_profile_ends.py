"""Ends of profiles on laws that bend, held against restricted fits made by other libraries.

An end of a 95 % profile is a value at which the smallest sum of squares, the constant held there, is
rss (1 + t^2/(N - p)) (Bates & Watts 1988, ch. 6), or Q + z^2 with stated errors. Here that smallest
sum is found again by scipy.optimize.least_squares from several starts, and for laws with errors in
the abscissa by odrpack. Data and certified fits: SOURCES.toml (NIST Statistical Reference Datasets;
Pearson's data with York's weights; the example of the ODRPACK guide).
"""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from scipy import optimize, stats
from sympy import exp

from discrim.evidence.curve import Curve
from discrim.evidence.intervals import Along, Interval, Side, along_all, standard_errors, united
from discrim.fit.fit import Fit, fit
from tests.fit.test_nist_nonlinear import LAWS
from tests.reference.outside import column, digits, measurements, model, predictor, symbols

x, a, b, b1, b2, b3 = symbols("x a b b1 b2 b3")

# Strongly bent valleys (MGH10: certified "higher difficulty"), two decays that can change places
# (MGH17), constants of very different sizes (Rat43), few runs (BoxBOD, Misra1a).
HARD = ["boxbod", "mgh10", "mgh17", "misra1a", "rat43", "chwirut2"]


@cache
def certified(name: str) -> tuple[Fit, tuple[Along, ...]]:
    entry = model(f"nist_{name}")
    best = np.array(entry["published"]["estimates"], float)
    constants = symbols(" ".join(entry["parameters"]))
    y, table = column(f"nist_{name}", "y"), column(f"nist_{name}", "x")[:, None]
    law = predictor(LAWS[name], constants, (x,), len(y), scale=best)
    found = fit(law, measurements(y, table), near=best[None])
    assert digits(found.theta, best) >= 6
    curves = [Curve.of(found, j) for j in range(found.p)]
    return found, tuple(along_all(found, curves, 0.95, se=standard_errors(found)))


def lowest(found: Fit, j: int, value: float, near: np.ndarray) -> float:
    """Smallest sum of squares with constant j held, from several starts, by scipy."""
    others = np.delete(np.arange(found.p), j)
    rng = np.random.default_rng(1)
    starts = [found.theta[others], near[others]]
    starts += [near[others] * (1 + 0.3 * rng.standard_normal(len(others))) for _ in range(6)]

    def residual(free: np.ndarray) -> np.ndarray:
        theta = np.insert(free, j, value)[None]
        with np.errstate(all="ignore"):
            f = found.predictor.predict(theta, found.data.conditions, constants=False).values[0]
        return np.nan_to_num(found.data.y - f, nan=1e6, posinf=1e6, neginf=-1e6)

    sums = []
    for start in starts:
        if not len(others):
            return float((residual(start) ** 2).sum())
        done = optimize.least_squares(
            residual,
            start,
            x_scale=np.maximum(np.abs(start), 1e-12),
            xtol=1e-14,
            ftol=1e-14,
            gtol=1e-14,
            max_nfev=4000,
            method="lm",
        )
        sums.append(2 * done.cost)
    return min(sums)


@pytest.mark.parametrize("name", HARD)
def test_ends_are_where_the_best_restricted_fit_crosses(name: str) -> None:
    found, every = certified(name)
    dof = found.n - found.p
    limit = float(stats.t.ppf(0.975, dof)) ** 2 / dof
    crossed = 0
    for j, one in enumerate(every):
        for side in (one.profile.low, one.profile.high):
            if side.end != "crossed":
                continue
            crossed += 1
            points = one.points
            near = points.solution.theta[int(np.argmin(np.abs(points.values - side.value)))]
            rise = lowest(found, j, side.value, near) / found.rss - 1
            assert rise == pytest.approx(limit, rel=1e-3), (name, found.predictor.names[j], side)
    assert crossed >= found.p
    assert all("did not settle" not in one.profile.note for one in every)


# ---- errors in the abscissa -------------------------------------------------------------------

Z2 = float(stats.norm.ppf(0.975)) ** 2


def odr(law: Any, name: str, beta: np.ndarray, held: int | None, **more: Any) -> Any:
    odrpack = pytest.importorskip("odrpack")
    fixed = None if held is None else np.arange(len(beta)) == held
    return odrpack.odr_fit(
        law,
        column(name, "x"),
        column(name, "y"),
        beta,
        fix_beta=fixed,
        sstol=1e-14,
        partol=1e-14,
        maxit=1000,
        **more,
    )


@cache
def york() -> tuple[Fit, dict[str, Any]]:
    name = "pearson_york"
    weights = {"weight_x": column(name, "weight_x"), "weight_y": column(name, "weight_y")}
    sds = {k: 1 / np.sqrt(w) for k, w in weights.items()}
    data = measurements(
        column(name, "y"),
        column(name, "x")[:, None],
        sd=sds["weight_y"],
        conditions_sd=[sds["weight_x"]],
    )
    return fit(predictor(a + b * x, (a, b), (x,), data.n, scale=[5.0, 0.5]), data), weights


def test_profile_of_pearsons_line_against_odrpack() -> None:
    found, weights = york()
    free = odr(lambda xs, c: c[0] + c[1] * xs, "pearson_york", found.theta, None, **weights)
    assert digits(found.theta, free.beta) >= 6  # its derivatives are differences
    assert digits(found.objective, free.sum_square) >= 9
    _crosses(found, lambda xs, c: c[0] + c[1] * xs, "pearson_york", free.sum_square, weights)


def test_profile_of_a_curve_against_odrpack() -> None:
    """Three abscissae are exact; the ends are compared with the fits of the library at them."""
    name = "odrpack_explicit"
    free_x = column(name, "x_free")
    data = measurements(
        column(name, "y"), column(name, "x")[:, None], sd=1.0, conditions_sd=[free_x]
    )
    start = np.array(model(name, "odr")["starts"][0], float)
    law = predictor(b1 + b2 * (exp(b3 * x) - 1) ** 2, (b1, b2, b3), (x,), 12, scale=np.abs(start))
    found = fit(law, data, near=start[None])

    def plain(xs: np.ndarray, c: np.ndarray) -> np.ndarray:
        return np.asarray(c[0] + c[1] * (np.exp(c[2] * xs) - 1) ** 2)

    more = {"fix_x": free_x == 0}
    free = odr(plain, name, found.theta, None, **more)
    assert digits(found.objective, free.sum_square) >= 8
    _crosses(found, plain, name, free.sum_square, more)


def _crosses(found: Fit, law: Any, name: str, lowest_sum: float, more: dict[str, Any]) -> None:
    curves = [Curve.of(found, j) for j in range(found.p)]
    for j, one in enumerate(along_all(found, curves, 0.95, se=standard_errors(found))):
        for side in (one.profile.low, one.profile.high):
            assert side.end == "crossed"
            points = one.points
            near = points.solution.theta[int(np.argmin(np.abs(points.values - side.value)))].copy()
            near[j] = side.value
            held = odr(law, name, near, j, **more)
            assert held.sum_square - lowest_sum == pytest.approx(Z2, rel=2e-5)


# ---- two readings of the errors ------------------------------------------------------------------


def _interval(*pieces: tuple[float, float], note: str = "") -> Interval:
    low, high = pieces[0][0], pieces[-1][1]
    return Interval(
        "reconciled",
        Side(low, "bound" if low == 0 else "crossed"),
        Side(high, "open" if np.isinf(high) else "crossed"),
        pieces,
        False,
        note,
    )


def test_union_of_two_readings() -> None:
    """Worked by hand here."""
    both = united(_interval((1.0, 2.0), (5.0, 6.0)), _interval((1.5, 3.0), (7.0, np.inf)))
    assert both.pieces == ((1.0, 3.0), (5.0, 6.0), (7.0, np.inf))
    assert (both.low, both.high) == (Side(1.0, "crossed"), Side(np.inf, "open"))
    assert both.note == "3 separate pieces; the hull is given"
    one = united(_interval((0.0, 4.0)), _interval((3.0, 9.0)))
    assert (one.pieces, one.note, one.low.end) == (((0.0, 9.0),), "", "bound")


def test_union_with_an_empty_reading() -> None:
    nan = Side(float("nan"), "failed")
    empty = Interval("reconciled", nan, nan, empty=True, note="empty: the law is rejected")
    some = _interval((1.0, 2.0))
    for both in (united(empty, some), united(some, empty)):
        assert (both.pieces, both.empty) == (((1.0, 2.0),), False)
        assert both.note.startswith("under one reading of the condition errors no value")
    assert united(empty, empty).empty
    failed = Interval("reconciled", nan, nan, note="not computed")
    assert united(some, failed).note == "not computed"
