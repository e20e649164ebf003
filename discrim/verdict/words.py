"""Numbers inside the reasons of a verdict."""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal


def percent(x: float) -> str:
    if x >= 0.995:
        return "100 %"
    if x >= 0.1:
        return f"{100 * x:.0f} %"
    return f"{100 * x:.2g} %"


def p_value(p: float) -> str:
    return "p < 0.0001" if p < 1e-4 else f"p = {p:.2g}"


def listed(items: Sequence[str]) -> str:
    return items[0] if len(items) == 1 else ", ".join(items[:-1]) + " and " + items[-1]


_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def power_of(x: float, *beside: float) -> int:
    """The power of ten that is taken out of a number in a sentence and of those beside it (an error,
    ends); 0 where they read well without."""
    if x == 0 or not math.isfinite(x):
        return 0
    power = math.floor(math.log10(abs(x)))
    small = any(1e-4 * abs(x) < abs(b) < 1e-3 for b in beside)
    return 0 if -3 <= power < 5 and not small else power


def times(power: int, units: str = "") -> str:
    """`` × 10⁻⁵ s⁻¹``: what stands behind a number from which that power was taken out."""
    raised = f" × 10{str(power).translate(_RAISED)}" if power else ""
    return raised + (f" {units}" if units not in ("", "1") else "")


def scaled(x: float, power: int, digits: int = 4) -> str:
    """``x`` in that power of ten, to so many digits; through decimal digits, so that 3e-6 is 3."""
    return f"{float(Decimal(repr(float(x))).scaleb(-power)):.{digits}g}"


def measure(x: float, units: str = "", digits: int = 4) -> str:
    """``6.1 × 10⁻⁶ s⁻¹``."""
    power = power_of(x)
    return scaled(x, power, digits) + times(power, units)
