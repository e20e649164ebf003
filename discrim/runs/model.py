"""Records of the table of runs: columns, their errors of measurement, replicates."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from typing import Any, Literal

import numpy as np

from discrim.errors import Place
from discrim.units import Unit

Origin = Literal["set", "measured"]


class Role(Enum):
    """What a column or a condition can be; the value is how it is written after ``is``."""

    RATE_OF = "rate of"
    CONSUMPTION_OF = "consumption of"
    K_OBS_OF = "k_obs of"
    SPECIES = "species"  # written as the bare name of the species
    TOTAL = "total"
    INITIAL = "initial"
    INLET = "inlet"
    CONVERSION = "conversion of"
    SIGNAL = "signal of"
    ABSORBANCE = "absorbance"
    PRESSURE = "pressure"
    TEMPERATURE = "temperature"
    PH = "pH"
    IONIC_STRENGTH = "ionic strength"
    CATALYST = "catalyst"
    TOTAL_FLOW = "total flow"
    TIME = "time"
    TIME_ON_STREAM = "time on stream"
    RUN = "run"
    RUN_ORDER = "run order"
    GROUP = "group"
    IGNORED = ""  # in the table, not declared: looked at as a stand-in and in residuals


@dataclass(frozen=True, slots=True, eq=False)
class ErrorPart:
    """One independent part of the error of a column, one standard deviation.

    The variance of a value v in run i is ``absolute[i]**2 + (relative*v)**2``.

    Attributes
    ----------
    relative : fraction of the value
    absolute : shape (N,), internal units
    bound : shape (N,) half-width of a hard (rectangular) bound in internal units when this part is
        one ("digits", "limits"); None when it is a standard deviation
    origin : "set", "measured", or None when the study does not say
    groups : shape (N,) integers; runs with equal numbers share one and the same error
    words : how the user wrote it, for the report
    """

    relative: float
    absolute: np.ndarray
    bound: np.ndarray | None
    origin: Origin | None
    groups: np.ndarray
    words: str


class ErrorBasis(Enum):
    """Where the size of the error of a column comes from."""

    STATED = "stated"
    ASSUMED = "assumed"  # a condition without ``error``: the smaller of its digits and 1 %
    ESTIMATED = "estimated"  # an observation without ``error``: variance estimated from the fit
    REPLICATES = "replicates"  # pooled from replicate runs, with ``replicate_df``
    EXACT = "exact"  # the study says that the error is zero


@dataclass(frozen=True, slots=True, eq=False)
class Column:
    """One column of the table, or a condition that is the same in all runs.

    Attributes
    ----------
    name : as in the table (or the key under ``[conditions]``)
    role, about : what it is, and of which species ("" if none)
    unit : internal unit that ``values`` are in; ``shown`` the unit the user wrote
    values : shape (N,), internal units; nan where the cell is empty. For text columns all nan.
    labels : shape (N,) the cells as text (groups, labels, undeclared text columns)
    errors : independent parts; empty when exact or when the variance is to be estimated
    replicate_df : degrees of freedom of a pooled replicate variance, else 0
    """

    name: str
    role: Role
    about: str
    unit: Unit
    shown: str
    values: np.ndarray
    labels: tuple[str, ...]
    errors: tuple[ErrorPart, ...]
    basis: ErrorBasis
    replicate_df: int = 0
    in_table: bool = True
    place: Place | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Runs:
    """The table of runs of a study (N rows), all columns, in internal units.

    Attributes
    ----------
    labels : shape (N,) what to call each run: the ``run`` column, else the row number from 1
    kept : shape (N,) False for runs excluded by the study
    excluded_because : per run, the reason, or ""
    replicate_of : shape (N,) integers; runs with equal numbers are replicates (same declared
        conditions, digit for digit)
    sha256 : of the bytes of the table
    left_out : observed columns that others give exactly, which are not fitted
    """

    file: str
    labels: tuple[str, ...]
    columns: tuple[Column, ...]
    kept: np.ndarray
    excluded_because: tuple[str, ...]
    replicate_of: np.ndarray
    sha256: str
    left_out: tuple[str, ...] = ()

    @property
    def n(self) -> int:
        return len(self.labels)

    def find(self, name: str) -> Column:
        for column in self.columns:
            if column.name == name:
                return column
        raise KeyError(name)

    def observations(self) -> tuple[Column, ...]:
        """The columns that a law has to predict."""
        wanted = (Role.RATE_OF, Role.CONSUMPTION_OF, Role.K_OBS_OF)
        return tuple(c for c in self.columns if c.role in wanted and c.name not in self.left_out)

    def species(self) -> dict[str, Column]:
        """Columns and constant conditions that give the amount of a species, by species."""
        return {c.about: c for c in self.columns if c.role is Role.SPECIES}


def frozen(array: Any, dtype: Any = float) -> np.ndarray:
    """A read-only copy."""
    out = np.array(array, dtype=dtype)
    out.setflags(write=False)
    return out
