"""By which factor the stated errors of all conditions must grow for an answer to change."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from discrim.evidence.distributions import normal_quantile
from discrim.evidence.left_out import law_again, slack_of, still_below
from discrim.evidence.rivals import Standing
from discrim.evidence.term import Participation, Term
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements

# tried first, since an answer can change and change back; beyond the last nobody's errors are so wrong
FACTORS = (1.0, 1.25, 1.5, 2.0, 3.0, 5.0, 10.0)
# for laws that are rejected as they are: many, and with larger errors their objective only falls
COARSE = (1.5, 3.0, 10.0)
CLOSENESS = 0.02  # relative, of the factor that is found between two of these


def factor_where(holds: Callable[[float], bool], factors: Sequence[float] = FACTORS) -> float:
    """The smallest factor, from 1 on, at which ``holds`` fails; inf where it holds at all ``factors``."""
    low = 1.0
    for factor in factors:
        if holds(factor):
            low = factor
            continue
        high = factor
        while high > low * (1.0 + CLOSENESS):
            middle = float(np.sqrt(low * high))
            low, high = (middle, high) if holds(middle) else (low, middle)
        return float(np.sqrt(low * high))
    return float("inf")


def bound_margin(
    term: Term, full: Fit, whole: Participation, *, alpha: float, matters_above: float
) -> float:
    """Factor at which an effect as large as what matters is no longer ruled out.

    nan where it is not ruled out with the errors as stated, or where conditions are exact.
    """
    data = full.data
    if whole.effect is None or data.exact_conditions or not whole.effect.bound < matters_above:
        return float("nan")
    if term.knocked is None or len(term.psi) != 1:
        return float("nan")
    need = normal_quantile(1.0 - alpha)

    def ruled_out(factor: float) -> bool:
        table = _wide(data, factor)
        return bool(still_below(term, table, full, matters_above)[0] > need)

    # the bound can rest on more than this one test (see `term_effect`)
    return factor_where(ruled_out) if ruled_out(1.0) else float("nan")


def standing_margin(fit: Fit, whole: Standing, alpha: float) -> float:
    """Factor at which a law that is rejected comes to stand; nan where conditions are exact."""
    if fit.data.exact_conditions or not fit.ok:
        return float("nan")

    def rejected(factor: float) -> bool:
        again = law_again(fit, whole, _wide(fit.data, factor))
        return bool(slack_of(again, whole, fit, alpha)[0] < 0)

    return factor_where(rejected, COARSE)


def _wide(data: Measurements, factor: float) -> Measurements:
    """One table, all of it counting, with all errors of conditions times ``factor``."""
    table = data if factor == 1.0 else data.with_condition_errors_times(factor)
    return replace(table, absent=np.zeros((1, data.n), bool))
