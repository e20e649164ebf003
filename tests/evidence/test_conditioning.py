"""Conditioning against published condition indices and variance proportions.

Sources: Belsley, Kuh & Welsch, Regression Diagnostics, Wiley 1980 (method; condition number 43275
of the Longley table, from memory); body fat of Neter, Wasserman & Kutner, with the indices and
proportions printed for it; condition numbers of Hilbert matrices, Higham, Accuracy and Stability of
Numerical Algorithms, 2nd ed. 2002, sec. 28.1. Figures in SOURCES.toml.
"""

from __future__ import annotations

import numpy as np
import pytest

from discrim.evidence.conditioning import collinearity_index, conditioning, lockstep, trade_offs
from discrim.verdict.thresholds import LOCKSTEP_ERRORS, LOCKSTEP_MOST, LOCKSTEP_RELATIVE
from tests.reference.outside import column, digits, measurements, predictor, sources, symbols

LIMITS = {"errors": LOCKSTEP_ERRORS, "least": LOCKSTEP_RELATIVE, "most": LOCKSTEP_MOST}


def _design(table: str, variables: list[str]) -> np.ndarray:
    n = len(column(table, variables[-1]))
    return np.column_stack(
        [np.ones(n) if v == "intercept" else column(table, v) for v in variables]
    )


@pytest.mark.parametrize(("table", "decimals"), [("nist_longley", 7e-7), ("bodyfat", 5e-8)])
def test_condition_indices_and_proportions(table: str, decimals: float) -> None:
    entry = sources()[table]["collinearity"]
    names = entry["variables"]
    found = conditioning(_design(table, names), tuple(names))
    assert digits(found.indices, entry["refit_condition_indices"]) >= 7
    expected = np.array(entry["refit_variance_proportions_rows_by_index"])
    assert np.abs(found.proportions - expected).max() <= decimals
    assert np.allclose(found.proportions.sum(axis=0), 1.0)
    assert found.condition_number == pytest.approx(entry["refit_condition_indices"][-1], rel=1e-7)
    assert found.digits_lost == pytest.approx(np.log10(found.condition_number))


def test_published_figures_of_both_tables() -> None:
    longley = sources()["nist_longley"]["collinearity"]
    found = conditioning(_design("nist_longley", longley["variables"]), tuple(longley["variables"]))
    assert round(found.condition_number) == longley["published_condition_number"]
    # two constants carry the near-dependency of the year and the intercept
    (weakest, *_) = trade_offs(found)
    assert {longley["variables"][j] for j in weakest.involved} >= {"intercept", "x6"}
    fat = sources()["bodyfat"]["collinearity"]
    found = conditioning(_design("bodyfat", fat["variables"]), tuple(fat["variables"]))
    assert found.indices == pytest.approx(fat["published_condition_indices"], abs=5e-6)
    published = np.array(fat["published_variance_proportions_rows_by_index"])
    assert np.abs(found.proportions - published).max() <= 5.1e-7


def test_scaling_of_columns_does_not_matter() -> None:
    design = _design("bodyfat", ["intercept", "triceps", "thigh", "midarm"])
    names = ("a", "b", "c", "d")
    first = conditioning(design, names)
    second = conditioning(design * np.array([1e-6, 1.0, 1e3, 1e9]), names)
    assert np.allclose(first.indices, second.indices, rtol=1e-9)


@pytest.mark.parametrize("n", range(2, 9))
def test_hilbert_matrices(n: int) -> None:
    """Condition numbers of the matrices themselves (columns as they are), which `conditioning` sees
    when its columns have unit length already: so the columns are scaled first and the number
    compared with numpy's of the same scaled matrix; and numpy's number of the plain matrix with the
    published one."""
    i = np.arange(1, n + 1)
    hilbert = 1.0 / (i[:, None] + i[None, :] - 1)
    published = dict(
        zip(
            column("hilbert_condition", "n"),
            column("hilbert_condition", "condition_2"),
            strict=True,
        )
    )
    assert np.linalg.cond(hilbert) == pytest.approx(published[n], rel=1e-4)
    scaled = hilbert / np.sqrt((hilbert**2).sum(axis=0))
    found = conditioning(hilbert, tuple(f"c{k}" for k in i))
    assert found.condition_number == pytest.approx(np.linalg.cond(scaled), rel=1e-5)
    # Van der Sluis (Numer. Math. 14 (1969) 14, from memory): equal column lengths are within
    # sqrt(n) of the best scaling, so scaling never costs more than that against the plain matrix
    assert found.condition_number <= np.sqrt(n) * published[n] * (1 + 1e-6)


def test_two_unit_columns_by_hand() -> None:
    """Worked by hand here: (1, 0) and (cos t, sin t) have singular values sqrt(1 +- cos t)."""
    t = 0.1
    columns = np.array([[1.0, np.cos(t)], [0.0, np.sin(t)]])
    found = conditioning(columns, ("a", "b"))
    assert found.singular_values == pytest.approx(np.sqrt([1 + np.cos(t), 1 - np.cos(t)]))
    assert found.condition_number == pytest.approx(1 / np.tan(t / 2))
    assert collinearity_index(columns) == pytest.approx(1 / np.sqrt(1 - np.cos(t)))
    # the weak direction is the difference of the two, and both constants carry it
    assert found.proportions[1] == pytest.approx([(1 + np.cos(t)) / 2] * 2)


def test_more_constants_than_rows() -> None:
    found = conditioning(np.array([[1.0, 2.0, 3.0]]), ("a", "b", "c"))
    assert found.condition_number == np.inf
    assert found.digits_lost == np.inf


def test_lockstep_is_judged_on_terms_and_errors() -> None:
    """E and E B diluted together are E and E^2: not in lockstep, although their columns are."""
    k1, k2, e, b = symbols("k1 k2 e b")
    dilution = np.array([1.0, 2.0, 3.0, 5.0])
    c = np.column_stack([dilution, 2.5 * dilution])
    data = measurements(dilution, c, sd=0.01, conditions_sd=[0.01, 0.01])
    together = predictor(k1 * e + k2 * b, [k1, k2], [e, b], 4, lower=0.0)
    apart = predictor(k1 * e + k2 * e * b, [k1, k2], [e, b], 4, lower=0.0)
    ones = np.ones(4)
    (found,) = lockstep(together, data, np.ones(2), ones, **LIMITS)
    assert (found.first, found.second) == (0, 1)
    assert found.ratio == pytest.approx((2.5, 2.5))
    assert found.within_errors
    assert lockstep(apart, data, np.ones(2), ones, **LIMITS) == []
