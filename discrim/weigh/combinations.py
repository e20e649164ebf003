"""What runs in lockstep fix all the same: the combination of two constants.

Its value and standard error only: they cost nothing. All four intervals of it are there for the asking,
as of any quantity of the constants (`[report_constants]`).
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import sympy

from discrim.evidence.conditioning import TradeOff
from discrim.evidence.quantity_intervals import quantity_facts
from discrim.ratelaw.model import ConstantKind, constant_symbol
from discrim.reactor.quantity import Quantity
from discrim.verdict.words import power_of, scaled, times
from discrim.weigh.assess import Assessment
from discrim.weigh.document_values import number


def _symbol(assessment: Assessment, j: int) -> Any:
    base = assessment.bound.base_constant(j)
    order = base.kind is ConstantKind.ORDER
    kind = ConstantKind.ORDER if order else ConstantKind.RATE
    return constant_symbol(assessment.bound.names[j], kind)


def combination_record(assessment: Assessment, t: TradeOff, level: float) -> dict[str, Any] | None:
    """The sum of two constants that a trade-off leaves fixed, in units of the first one; None for more
    constants, a difference, or a law that is not linear (where it is fixed near the fit only)."""
    bound, fit = assessment.bound, assessment.fit
    involved = [j for j in t.involved if t.change[j] != 0]
    if len(involved) != 2 or not fit.ok or not bound.predictor.linear.all():
        return None
    a, b = sorted(involved)
    ratio = -float(t.change[a] / t.change[b])
    if not ratio > 0:
        return None
    symbols = [_symbol(assessment, j) for j in range(len(bound.names))]
    expression = symbols[a] + sympy.Float(repr(ratio), 17) * symbols[b]
    quantity = Quantity(expression, symbols, (), np.zeros(0), bound.predictor.scale)
    facts = quantity_facts(fit, quantity, level, brief=True)
    return {
        "formula": f"{bound.names[a]} + {ratio:.6g}*{bound.names[b]}",
        "value": number(facts.value),
        "standard_error": number(facts.standard_error),
        "units": bound.units[a],
        "linearised": [number(facts.linearised.low.value), number(facts.linearised.high.value)],
    }


def combination_words(record: dict[str, Any]) -> str:
    """``(3.418 ± 0.036) × 10⁻⁷ s⁻¹``: its value with the standard error."""
    value, error = record["value"], record["standard_error"]
    power = power_of(value, error or 0.0)
    behind = times(power, record["units"])
    if not error:
        return f"{scaled(value, power)}{behind}"
    # both to the place of two digits of the error (JCGM 100:2008, 7.2.6)
    spread = float(scaled(error, power, 2))
    places = max(0, 1 - math.floor(math.log10(spread)))
    shown = f"{float(scaled(value, power, 15)):.{places}f} ± {spread:.{places}f}"
    return f"({shown}){behind}" if power else f"{shown}{behind}"
