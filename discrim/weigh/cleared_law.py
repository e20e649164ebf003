"""The cleared form of a compiled law, as the arrays that guaranteed ranges need."""

from __future__ import annotations

from typing import Any

import numpy as np

from discrim.evidence.guaranteed_cleared import Cleared
from discrim.ratelaw.cleared import cleared
from discrim.ratelaw.compile import CompiledLaw


def cleared_law(law: CompiledLaw, expression: Any = None) -> Cleared | None:
    """The law with its denominator cleared, None when it has no such form.

    ``expression``: the law itself, where what is compiled is something else in the same constants.
    """
    form = cleared(expression or law.expression, law.constants, law.conditions)
    if form is None:
        return None
    known = () if form.known is None else (form.known,)
    groups = [
        [CompiledLaw(e, [], list(law.conditions)) for e in part]
        for part in (form.numerator, form.denominator, known)
    ]

    def shapes(conditions: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Each part at ``conditions``, shape (S, N, m) or (N, m): (S, N, k) or (N, k)."""
        batch = conditions if conditions.ndim == 3 else conditions[None]
        none = np.zeros((len(batch), 1, 0))

        def columns(part: list[CompiledLaw]) -> np.ndarray:
            out = np.empty((*batch.shape[:2], len(part)))
            for k, f in enumerate(part):
                out[..., k] = f(none, batch, constants=False, conditions_too=False, both=False)[0]
            return out if conditions.ndim == 3 else out[0]

        return columns(groups[0]), columns(groups[1]), columns(groups[2])

    return Cleared(shapes, form.power, form.exponents, form.factor)
