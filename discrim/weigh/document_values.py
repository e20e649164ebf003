"""Numbers and columns as they stand in the document."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from discrim.runs.model import Column, Role
from discrim.study.lookup import to_shown


def column_record(c: Column) -> dict[str, Any]:
    numeric = bool(np.isfinite(c.values).any())
    values = to_shown(c, c.values) if numeric and c.shown else c.values
    sd = None
    if c.errors and numeric:
        var = sum(np.asarray(e.absolute) ** 2 + (e.relative * c.values) ** 2 for e in c.errors)
        zero = to_shown(c, np.zeros(1))[0] if c.shown else 0.0
        one = np.sqrt(np.asarray(var, float))
        sd_shown = (to_shown(c, one) - zero) if c.shown else one
        sd = [number(x) for x in np.atleast_1d(sd_shown)]
    origins = {e.origin for e in c.errors}
    origin = ""
    if c.errors and c.role not in (Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF):
        origin = "not stated" if None in origins else " and ".join(sorted(o for o in origins if o))
    return {
        "name": c.name,
        "is": is_words(c),
        "units": shown_units(c),
        "values": [number(x) for x in np.atleast_1d(values)] if numeric else [None] * len(c.values),
        "labels": None if numeric else list(c.labels),
        "cells": list(c.labels) if numeric and c.in_table else None,
        "sd": sd,
        "error": "; ".join(e.words for e in c.errors),
        "origin": origin,
        "basis": c.basis.value if c.role is not Role.IGNORED else "",
        "declared": c.role is not Role.IGNORED,
        "in_table": c.in_table,
    }


def is_words(c: Column) -> str:
    if c.role is Role.SPECIES:
        return c.about
    return f"{c.role.value} {c.about}".strip()


def shown_units(c: Column) -> str:
    return c.shown


def number(x: Any) -> float | None:
    """A finite float, or None."""
    if x is None:
        return None
    v = float(x)
    return v if math.isfinite(v) else None


def distance(x: float) -> float | None:
    """A flip distance; what is only rounding is none at all."""
    v = number(x)
    return 0.0 if v is not None and abs(v) < 1e-6 else v
