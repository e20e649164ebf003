"""Several observed columns: what is known of their errors together, and which say nothing of their own.

Responses that were worked out from one another, or that a balance ties together, are no independent
observations: their covariance is singular, and a determinant criterion or a sum of squares over them
is meaningless. Such exact linear dependences are looked for before anything is fitted, in the singular values
of the centred responses against the rounding of the values (Box, Hunter, MacGregor & Erjavec,
Technometrics 15 (1973) 33).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import combinations, product
from math import log10

import numpy as np

from discrim.runs.errors import decimals, significant_digits
from discrim.runs.model import Column, ErrorBasis, Runs
from discrim.study.lookup import to_shown
from discrim.study.node import Node

TOGETHER = ("independent", "unknown")
# Fewer runs than responses and this many more can look dependent by accident.
RUNS_BEYOND = 3
# A response that varies by less than this many roundings looks dependent on any other.
VARIES = 20.0
# Part of a combination that is under this many roundings of the whole is no part of it.
TAKES_PART = 5.0
SIMPLE = sorted({a / b for a, b in product(range(1, 7), range(1, 5))})


def read_between_responses(root: Node, runs: Runs) -> bool:
    """``[errors] between_responses``: True when the errors of the responses of a run may be correlated.

    Raises
    ------
    DiscrimError
        For another word, one observed column only, or errors that are stated: the covariance is then
        estimated as a whole, and a stated error would be ignored.
    """
    node = root.table("errors", "errors")
    node.check_keys(("between_responses", "note"))
    if "between_responses" not in node.data:
        return False
    word = node.text("between_responses")
    if word not in TOGETHER:
        raise node.error(
            f'errors between responses cannot be "{word}"',
            'Write "independent" (usual), or "unknown" to have their covariance estimated.',
            "between_responses",
        )
    if word == "independent":
        return False
    seen = runs.observations()
    if len(seen) + len(runs.left_out) < 2:
        raise node.error(
            "only one column is observed",
            "A covariance between responses needs two observed columns; take the line out.",
            "between_responses",
        )
    stated = [c.name for c in seen if c.basis is not ErrorBasis.ESTIMATED]
    if stated:
        raise node.error(
            f'the error of "{stated[0]}" is stated, and the covariance unknown',
            "Where the covariance between responses is unknown it is estimated as a whole: take "
            '`error` out of every observed column, or write "independent".',
            "between_responses",
        )
    return True


def independent(runs: Runs) -> tuple[Runs, list[str]]:
    """The runs without observed columns that others give exactly, and what was found, in sentences.

    Columns are taken in the order of the table, so the later one of those that depend on one another is
    left out. Runs that are excluded or lack a response do not count.
    """
    columns = runs.observations()
    if len(columns) < 2:
        return runs, []
    kept: list[Column] = []
    out: list[str] = []
    left_out: list[str] = []
    for column in columns:
        weights = _dependence([*kept, column], runs.kept) if kept else None
        if weights is None:
            kept.append(column)
            continue
        left_out.append(column.name)
        out.append(
            f"{weights} in all runs, within the digits given: one of them carries no information of "
            f"its own, and “{column.name}” is left out"
        )
    return (replace(runs, left_out=tuple(left_out)) if left_out else runs), out


def _dependence(columns: Sequence[Column], usable: np.ndarray) -> str | None:
    """The relation by which the others give the last column, in words; None where there is none."""
    shown = np.stack([np.asarray(to_shown(c, c.values)) for c in columns], axis=1)
    rows = np.flatnonzero(usable & np.isfinite(shown).all(axis=1))
    n = len(rows)
    if n < len(columns) + RUNS_BEYOND:
        return None
    y = shown[rows]
    rounding = np.array([_rounding(c, rows, y[:, k]) for k, c in enumerate(columns)])
    centred = (y - y.mean(axis=0)) / rounding
    size = np.sqrt((centred**2).sum(axis=0) / (n - 1))
    last = len(columns) - 1
    if size[last] <= VARIES:
        return None
    # sum of squares of n - 1 roundings of unit variance, and three of its standard deviations
    limit = float((n - 1) + 3.0 * np.sqrt(2.0 * (n - 1)))
    others = [k for k in range(last) if size[k] > VARIES]
    # the relation between the fewest columns: with more of them it is not unique
    for many in range(1, len(others) + 1):
        for chosen in combinations(others, many):
            use = [*chosen, last]
            _, s, vt = np.linalg.svd(centred[:, use], full_matrices=False)
            if s[-1] ** 2 > limit or (np.abs(vt[-1]) * size[use] < TAKES_PART).any():
                continue
            v = np.zeros(len(columns))
            v[use] = vt[-1]
            return _words(columns, _simple(v / rounding, y, rounding, limit), y, rounding)
    return None


def _rounding(column: Column, rows: np.ndarray, values: np.ndarray) -> float:
    """Standard deviation of the rounding of the cells, in shown units, root mean square over the runs.

    A column is as fine as most of its cells are written, but no cell has more significant digits than
    the column: a single cell of more decimals says nothing of the others.
    """
    texts = [column.labels[i] for i in rows]
    finest = 10.0 ** -float(np.median([decimals(t) for t in texts]))
    digits = max(significant_digits(t) for t in texts)
    units = [
        max(finest, 10.0 ** (int(np.floor(log10(abs(x)))) - digits + 1)) if x else finest
        for x in values
    ]
    least = 4 * np.finfo(float).eps * float(np.abs(values).max())
    return max(float(np.sqrt(np.mean(np.square(units)) / 12.0)), least, 1e-300)


def _simple(weights: np.ndarray, y: np.ndarray, rounding: np.ndarray, limit: float) -> np.ndarray:
    """The same relation with simple fractions or few digits where those hold as well, the last column
    weighed 1."""
    weights = weights / weights[-1]
    simple = np.array(SIMPLE)
    nearest = simple[np.argmin(np.abs(np.abs(weights)[:, None] - simple), axis=1)]
    tries = [np.where(weights == 0, 0.0, np.sign(weights) * nearest)]
    tries += [np.array([float(f"{w:.{d}g}") for w in weights]) for d in (1, 2, 3)]
    for near in tries:
        combined = y @ near
        own = float(((near * rounding) ** 2).sum())
        if ((combined - combined.mean()) ** 2).sum() <= limit * own:
            return near
    return weights


def _words(
    columns: Sequence[Column], weights: np.ndarray, y: np.ndarray, rounding: np.ndarray
) -> str:
    """ "a + 2 b = c + 5": positive terms on one side, negative ones on the other."""
    constant = float((y @ weights).mean())
    doubt = float(np.sqrt(((weights * rounding) ** 2).sum() / len(y)))
    sides: tuple[list[str], list[str]] = ([], [])
    for column, w in zip(columns, weights, strict=True):
        if w:
            factor = "" if abs(abs(w) - 1) < 1e-9 else f"{abs(w):.4g} "
            sides[0 if w > 0 else 1].append(f"{factor}“{column.name}”")
    if abs(constant) > 4.0 * doubt:
        sides[1 if constant > 0 else 0].append(f"{abs(constant):.4g}")
    left, right = (" + ".join(side) or "0" for side in sides)
    return f"{left} = {right}"
