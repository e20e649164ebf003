"""What the document says of each observed column: its error, and what a law says of it."""

from __future__ import annotations

from typing import Any

import numpy as np

from discrim.ratelaw.printing import latex, mathml, plain
from discrim.runs.model import Column
from discrim.study.lookup import to_shown
from discrim.weigh.bench import Bench
from discrim.weigh.document_values import is_words, number
from discrim.weigh.laws import CandidateLaw


def response_records(bench: Bench) -> list[dict[str, Any]]:
    """``responses`` of the document: what is known of the error of each observed column.

    In the units of the columns: ``variance``, ``sd`` and ``df`` where the error was estimated with several
    responses, ``covariance`` (a row of the matrix) where that between responses was.
    """
    factors = [_shown_per_internal(c) for c in bench.responses]
    out: list[dict[str, Any]] = []
    for r, column in enumerate(bench.responses):
        record: dict[str, Any] = {
            "column": column.name,
            "units": column.shown,
            "estimated": not column.errors and column.basis.value == "estimated",
            "variance": None,
            "sd": None,
            "df": None,
            "covariance": None,
            "correlation": None,
            "enlarged": None,
            "candidate": "",
        }
        errors, unknown = bench.errors, bench.unknown
        if errors is not None and unknown is not None and unknown.open[r]:
            m = errors.matrix
            record["candidate"] = bench.errors_from
            record["variance"] = number(m[r, r] * factors[r] ** 2)
            record["sd"] = number(np.sqrt(m[r, r]) * factors[r])
            record["df"] = number(errors.df[r])
            if unknown.together:
                record["covariance"] = [
                    number(m[r, k] * factors[r] * factors[k]) for k in range(len(m))
                ]
                size = np.sqrt(np.diag(m))
                record["correlation"] = [
                    number(m[r, k] / (size[r] * size[k])) for k in range(len(m))
                ]
                record["enlarged"] = number(errors.held[r, r] / m[r, r])
        out.append(record)
    return out


def _shown_per_internal(column: Column) -> float:
    return float(to_shown(column, np.ones(1))[0]) if column.shown else 1.0


def observed_records(bench: Bench, law: CandidateLaw) -> list[dict[str, Any]]:
    """What each observed column is in a law; empty where there is one, which the law itself is."""
    if len(bench.responses) < 2:
        return []
    return [
        {
            "column": column.name,
            "is": is_words(column),
            "law": plain(e),
            "law_latex": latex(e),
            "law_mathml": mathml(e),
        }
        for column, e in zip(bench.responses, law.observed, strict=True)
    ]
