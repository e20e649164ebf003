"""Numbers inside the reasons of a verdict."""

from __future__ import annotations

from collections.abc import Sequence


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
