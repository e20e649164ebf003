"""What is known of the errors of the observed columns, and what has to be estimated from the fits."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from discrim.errors import DiscrimError
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.responses import (
    Estimate,
    Unknown,
    first_guess,
    reference_df,
    with_covariance,
)
from discrim.runs.errors import half_a_digit
from discrim.runs.model import Column, ErrorBasis
from discrim.study.lookup import to_shown

# no error is estimated below this fraction of the typical size of a column whose values are calculated
LEAST = 1e-7


def scale_of(
    responses: Sequence[Column], computed: Sequence[str], together: bool
) -> tuple[Scale, float]:
    """What is known of the size of the errors, with the degrees of freedom of the t reference.

    ``computed``: names of columns that were worked out from others. Several responses of which one or
    more have no error come out as STATED: `unknown_of` says what to estimate.

    Raises
    ------
    DiscrimError
        For a column that is said to have no error.
    """
    for c in responses:
        if c.basis is ErrorBasis.EXACT and c.name not in computed:
            raise DiscrimError(
                f'column "{c.name}" is observed and said to have no error',
                place=c.place,
                do="Every measured rate has one; state it, or leave `error` out to have it "
                "estimated.",
            )
    if len(responses) == 1 and responses[0].basis is ErrorBasis.ESTIMATED and not together:
        return Scale.ESTIMATED, 0
    df = reference_df([float(c.replicate_df) for c in responses if c.replicate_df])
    return (Scale.REPLICATES, df) if np.isfinite(df) else (Scale.STATED, 0)


def unknown_of(
    responses: Sequence[Column],
    response: np.ndarray,
    runs: np.ndarray,
    y: np.ndarray,
    together: bool,
) -> Unknown | None:
    """What of the errors of several responses has to be estimated; None when nothing has.

    ``response``, ``runs`` and ``y`` have shape (N,). A single response without an error is not meant:
    its variance is estimated with each fit.
    """
    is_open = np.array([c.basis is ErrorBasis.ESTIMATED for c in responses])
    if not is_open.any() or len(responses) == 1:
        return None
    df = np.array([float(c.replicate_df) if c.replicate_df else np.inf for c in responses])
    least = np.array([_least(c, y[response == r]) for r, c in enumerate(responses)])
    return Unknown(response, runs, is_open, together, least, df)


def with_errors(stated: Measurements, unknown: Unknown, errors: Estimate | None) -> Measurements:
    """The measurements with the errors as estimated, or with a rough guess before they are."""
    if errors is None:
        return with_covariance(stated, unknown, first_guess(stated.y, unknown), 1.0)
    return with_covariance(stated, unknown, errors.held, errors.reference_df)


def _least(column: Column, values: np.ndarray) -> float:
    """Standard deviation of the rounding of a column, internal units."""
    values = values[np.isfinite(values)]
    size = float(np.sqrt(np.mean(values**2))) if len(values) else 1.0
    floor = max(LEAST * size, 1e-150)
    texts = [t for t, x in zip(column.labels, column.values, strict=True) if np.isfinite(x) and t]
    if not column.in_table or not texts:
        return floor
    shown = 2.0 * half_a_digit(texts) / np.sqrt(12.0)
    one = float(to_shown(column, np.ones(1))[0]) if column.shown else 1.0
    return max(shown / one, floor) if one > 0 else floor
