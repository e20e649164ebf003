"""What was measured, with its errors: observations, conditions, and the independent error sources.

The covariance of the differences between observed and predicted values is

    V(theta) = S_y + F S_c F',     F = d f / d conditions

(York, Can. J. Phys. 44 (1966) 1079; Barker & Diana, Am. J. Phys. 42 (1974) 224), built here source
by source, so that errors shared by several runs fill the blocks between those runs.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from enum import Enum

import numpy as np

OBSERVATION = -1


class Scale(Enum):
    """What is known of the size of the errors of the observations."""

    STATED = "stated"
    ESTIMATED = "estimated from the fit"
    REPLICATES = "estimated from replicates"


@dataclass(frozen=True, slots=True, eq=False)
class ErrorSource:
    """One independent source of error in one column.

    Attributes
    ----------
    target : ``OBSERVATION``, or the index of the condition
    relative, absolute : sd of value v in observation i is sqrt(absolute[i]^2 + (relative*v)^2);
        ``relative`` and ``absolute`` have shape (N,)
    bound : shape (N,) half-width when the error is a hard bound, else None
    origin : "set" (true = nominal + error) or "measured" (reading = true + error)
    groups : shape (N,) observations with equal numbers share one error
    individual : True when no two observations share it
    """

    target: int
    relative: np.ndarray
    absolute: np.ndarray
    bound: np.ndarray | None
    origin: str | None
    groups: np.ndarray
    individual: bool
    proportional: bool = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "proportional", bool(self.relative.any()))

    def sd(self, value: np.ndarray) -> np.ndarray:
        """Standard deviation at ``value``; shape of ``value``, or (N,) where it does not depend on it."""
        if not self.proportional:
            return self.absolute
        return np.sqrt(self.absolute**2 + (self.relative * value) ** 2)


def source(
    target: int,
    n: int,
    *,
    relative: float | np.ndarray = 0.0,
    absolute: float | np.ndarray = 0.0,
    bound: np.ndarray | None = None,
    origin: str | None = "measured",
    groups: np.ndarray | None = None,
) -> ErrorSource:
    """An :class:`ErrorSource` for n observations; individual errors unless ``groups`` is given."""
    g = np.arange(n) if groups is None else np.asarray(groups)
    return ErrorSource(
        target,
        np.broadcast_to(np.asarray(relative, float), (n,)),
        np.broadcast_to(np.asarray(absolute, float), (n,)),
        bound,
        origin,
        g,
        len(np.unique(g)) == n,
    )


@dataclass(frozen=True, slots=True, eq=False)
class Measurements:
    """Observations and conditions with their error sources.

    Attributes
    ----------
    y : shape (N,), or (S, N) for a batch of tables
    conditions : shape (N, m), or (S, N, m)
    sources : error sources of observations and conditions
    scale : whether the errors of the observations are stated or must be estimated; when estimated,
        an observation without a source has covariance s^2 I with s^2 unknown
    scale_df : degrees of freedom of a variance pooled from replicates, 0 otherwise
    condition_names : m names
    replicate_of : shape (N,) equal numbers are replicates
    absent : shape (S, N) True for observations that do not count in that member of a batch (a run
        left out), the same number of them in each member; None when all count
    patterns : derivative of V by each variance or covariance of the observations that was estimated
        with other constants than those of a fit at hand, shape (N,) of its diagonal or (N, N)
    """

    y: np.ndarray
    conditions: np.ndarray
    sources: tuple[ErrorSource, ...]
    scale: Scale
    condition_names: tuple[str, ...]
    scale_df: float = 0
    replicate_of: np.ndarray | None = None
    absent: np.ndarray | None = None
    patterns: tuple[np.ndarray, ...] = ()

    @property
    def n(self) -> int:
        return int(self.y.shape[-1])

    @property
    def count(self) -> int:
        """The observations that count: N, or fewer where some are left out."""
        return self.n if self.absent is None else self.n - int(self.absent[0].sum())

    @property
    def m(self) -> int:
        return int(self.conditions.shape[-1])

    @property
    def of_observations(self) -> tuple[ErrorSource, ...]:
        return tuple(s for s in self.sources if s.target == OBSERVATION)

    @property
    def of_conditions(self) -> tuple[ErrorSource, ...]:
        return tuple(s for s in self.sources if s.target != OBSERVATION)

    @property
    def exact_conditions(self) -> bool:
        return not self.of_conditions

    @property
    def diagonal(self) -> bool:
        """True when no error is shared, so that V is diagonal."""
        return all(s.individual for s in self.sources)

    def origins(self) -> tuple[str, ...]:
        """The ways to read this study: both when an origin that matters is not stated."""
        if any(s.origin is None for s in self.of_conditions):
            return ("measured", "set")
        return ("stated",)

    def as_origin(self, origin: str) -> Measurements:
        """With errors of unstated origin taken as ``origin``."""
        if origin == "stated":
            return self
        return replace(
            self,
            sources=tuple(
                replace(s, origin=origin) if s.origin is None and s.target != OBSERVATION else s
                for s in self.sources
            ),
        )

    def with_condition_errors_times(self, factor: float) -> Measurements:
        """All errors of conditions multiplied by ``factor`` (for the error margin)."""
        return replace(
            self,
            sources=tuple(
                s
                if s.target == OBSERVATION
                else replace(s, relative=s.relative * factor, absolute=s.absolute * factor)
                for s in self.sources
            ),
        )

    def with_variance(self, variance: float, df: float) -> Measurements:
        """The unknown variance of the observations held at an estimate with ``df`` degrees of freedom."""
        least = 1e-12 * float(np.var(self.y))
        sd = float(np.sqrt(max(variance, least, 1e-300)))
        return replace(
            self,
            sources=(*self.of_conditions, source(OBSERVATION, self.n, absolute=sd)),
            scale=Scale.REPLICATES,
            scale_df=df,
        )

    def without_condition_errors(self) -> Measurements:
        """Conditions taken as exact, as the textbook tests do."""
        return replace(self, sources=self.of_observations)

    def take(self, rows: np.ndarray) -> Measurements:
        """Only the observations in ``rows``."""
        return replace(
            self,
            y=self.y[..., rows],
            conditions=self.conditions[..., rows, :],
            sources=tuple(
                ErrorSource(
                    s.target,
                    s.relative[rows],
                    s.absolute[rows],
                    None if s.bound is None else s.bound[rows],
                    s.origin,
                    s.groups[rows],
                    len(np.unique(s.groups[rows])) == len(rows),
                )
                for s in self.sources
            ),
            replicate_of=None if self.replicate_of is None else self.replicate_of[rows],
            patterns=tuple(
                e[rows] if e.ndim == 1 else e[np.ix_(rows, rows)] for e in self.patterns
            ),
        )
