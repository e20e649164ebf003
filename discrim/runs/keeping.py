"""The same table with other runs kept: runs put back, or one more left out."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from discrim.errors import DiscrimError
from discrim.runs.errors import scatter
from discrim.runs.model import Column, ErrorBasis, Runs, frozen


def with_kept(runs: Runs, kept: np.ndarray) -> Runs:
    """The runs with ``kept``, shape (N,), in place of those kept so far.

    An error pooled from replicates is pooled again, from the runs now kept. Raises
    :class:`DiscrimError` when no replicates are left, or when they agree to the last digit.
    """
    columns = tuple(_pooled_again(c, runs, kept) for c in runs.columns)
    return replace(runs, kept=frozen(kept, bool), columns=columns)


def _pooled_again(column: Column, runs: Runs, kept: np.ndarray) -> Column:
    if column.basis is not ErrorBasis.REPLICATES:
        return column
    before, df_before = scatter(column.values, runs.replicate_of, runs.kept)
    squares, df = scatter(column.values, runs.replicate_of, kept)
    if df == 0 or squares == 0.0 or df_before == 0:
        raise DiscrimError(
            f'with these runs no two replicates give the error of "{column.name}"',
            place=column.place,
            do="State the error of the rate, or leave it out to have it estimated from the fit.",
        )
    old, new = math.sqrt(before / df_before), math.sqrt(squares / df)
    errors = tuple(
        replace(e, absolute=frozen(np.full(len(e.absolute), new)))
        if e.relative == 0.0 and bool((e.absolute == old).all())
        else e
        for e in column.errors
    )
    return replace(column, errors=errors, replicate_df=df)
