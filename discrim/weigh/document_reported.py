"""The part of the document that holds the quantities of the constants that the study asks for."""

from __future__ import annotations

from typing import Any

from discrim.weigh.document_candidates import interval_keys
from discrim.weigh.document_values import number
from discrim.weigh.reported import ReportedValue


def reported_records(found: tuple[ReportedValue, ...]) -> list[dict[str, Any]]:
    """One record a quantity; values are null where a candidate has none, with the reason."""
    out = []
    for one in found:
        values, ends, notes = interval_keys(one.intervals)
        out.append(
            {
                "name": one.formula.name,
                "formula": one.formula.text,
                "units": one.formula.units,
                "value": number(one.value),
                "standard_error": number(one.standard_error),
                "at": dict(one.formula.written),
                "intervals": values,
                "interval_ends": ends,
                "interval_notes": notes,
                "reason": one.formula.reason,
                "note": one.formula.note,
            }
        )
    return out
