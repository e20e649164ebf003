"""Errors of several responses, estimated once from the most general candidate that is adequate.

What is estimated is then held for every fit, test and interval of every candidate, so that laws are
compared under one and the same errors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from discrim.errors import DiscrimError
from discrim.fit.responses import Estimate, estimate
from discrim.runs.build import listed
from discrim.runs.model import ErrorBasis
from discrim.weigh.bench import Bench
from discrim.weigh.bind import Bound
from discrim.weigh.errors_of import with_errors

# A candidate this far in AIC behind the best has essentially no support (Burnham & Anderson, Model
# Selection and Multimodel Inference, 2nd ed., Springer 2002, sec. 2.6; from memory): the errors are not
# taken from it.
NO_SUPPORT = 10.0
# with fewer degrees of freedom than this the references of the tests are guides
FEW = 5.0


def with_estimated_errors(
    bench: Bench, bounds: Sequence[Bound], names: Sequence[str], *, seed: int
) -> Bench:
    """The bench with the errors of its responses estimated; as it is where all are stated.

    ``names`` : of the candidates. Of several readings of the condition errors the first is used.

    Raises
    ------
    DiscrimError
        When no candidate leaves enough runs to estimate the errors from, or a column whose error is
        not stated holds nothing but zeros.
    """
    _check_some_rate(bench)
    unknown, stated = bench.unknown, bench.stated
    if unknown is None or stated is None:
        return bench
    data = stated.as_origin(stated.origins()[0])
    tried = [estimate(b.predictor, data, unknown, seed=seed) for b in bounds]
    usable = [i for i, e in enumerate(tried) if e is not None and e.enough]
    if not usable:
        raise _too_few(bench, tried)
    aic = {i: tried[i].criterion + 2 * len(bounds[i].names) for i in usable}  # type: ignore[union-attr]
    best = min(aic.values())
    adequate = [i for i in usable if aic[i] <= best + NO_SUPPORT]
    chosen = min(adequate, key=lambda i: (-len(bounds[i].names), aic[i], i))
    errors = estimate(bounds[chosen].predictor, data, unknown, seed=seed, several=True)
    assert errors is not None
    return replace(
        bench,
        measurements=with_errors(stated, unknown, errors),
        errors=errors,
        errors_from=names[chosen],
    )


def _check_some_rate(bench: Bench) -> None:
    """Nothing but zeros is a result where the error is stated, and says nothing of an unknown one."""
    y = bench.measurements.y
    for k, column in enumerate(bench.responses):
        seen = y[bench.response == k]
        if column.basis is ErrorBasis.ESTIMATED and len(seen) and not seen.any():
            raise DiscrimError(
                f'"{column.name}" is 0 in every run, and its error is not stated',
                place=column.place,
                do="An error cannot be estimated from zeros. State it, for example as the smallest "
                "rate that would have been seen.",
            )


def _too_few(bench: Bench, tried: Sequence[Estimate | None]) -> DiscrimError:
    assert bench.unknown is not None
    missing = [c for c, is_open in zip(bench.responses, bench.unknown.open, strict=True) if is_open]
    names = listed([c.name for c in missing])
    if all(e is None for e in tried):
        return DiscrimError(
            f"the errors of {names} are not stated, and no candidate could be fitted to estimate them",
            place=missing[0].place,
            do="State `error` for each observed column.",
        )
    more = ""
    if bench.unknown.together:
        more = (
            ' Or take between_responses = "unknown" out: a variance for each column, without their '
            "covariance, needs fewer runs."
        )
    return DiscrimError(
        f"the errors of {names} are not stated, and the runs are too few to estimate them beside the "
        "constants",
        place=missing[0].place,
        do=f"State `error` for each observed column, or give more runs.{more}",
    )


def error_findings(bench: Bench) -> list[tuple[str, str, str]]:
    """(severity, where, says): what was estimated, from what, and how far to trust it."""
    errors, unknown = bench.errors, bench.unknown
    if errors is None or unknown is None:
        return []
    names = [c.name for c, is_open in zip(bench.responses, unknown.open, strict=True) if is_open]
    every = " and ".join(f"“{n}”" for n in names)
    what = "their covariance was" if unknown.together else "a variance for each was"
    if len(names) == 1:
        what = "its variance was"
    out = [
        (
            "note",
            "errors",
            f"the error of {every} is not stated: {what} estimated with “{bench.errors_from}” and "
            f"held for all candidates (tests by t with {errors.reference_df:.3g} degrees of freedom), "
            "so lack of fit cannot be told from noise",
        )
    ]
    if errors.reference_df < FEW:
        out.append(
            (
                "warning",
                "errors",
                f"only {errors.reference_df:.2g} degrees of freedom for the estimated errors of the "
                "observed columns: p-values and intervals are a guide",
            )
        )
    for c, low in zip(bench.responses, errors.on_least, strict=True):
        if low:
            out.append(
                (
                    "warning",
                    f"column “{c.name}”",
                    "the law it was estimated with leaves it no error beyond the rounding of its digits "
                    "(or beyond what the errors of the conditions explain); that rounding is held",
                )
            )
    if not errors.converged:
        out.append(
            (
                "warning",
                "errors",
                "the errors of the observed columns and the fit had not come to full agreement when "
                "the search was stopped",
            )
        )
    if len(errors.minima) > 1:
        gap = errors.minima[1] - errors.minima[0]
        out.append(
            (
                "warning",
                "errors",
                f"{len(errors.minima)} minima were found for the errors of the observed columns; the "
                f"lowest is used, the next is {gap:.2g} higher in −2 ln L",
            )
        )
    return out
