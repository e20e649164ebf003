"""Outside data and published values for the tests, and laws over them bound by hand.

``SOURCES.toml`` names the source of every table and figure. Laws are sympy expressions written out
here or in a test: nothing is read from the formulas in that file, which are there for the reader.
"""

from __future__ import annotations

import csv
import tomllib
from collections.abc import Sequence
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import sympy

from discrim.fit.measurements import OBSERVATION, ErrorSource, Measurements, Scale, source
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.linear import linear_constants
from discrim.ratelaw.model import Constant, ConstantKind
from discrim.reactor.rates import RatePredictor

HERE = Path(__file__).parent


@cache
def sources() -> dict[str, Any]:
    """The whole of ``SOURCES.toml``."""
    return tomllib.loads((HERE / "SOURCES.toml").read_text(encoding="utf-8"))


def model(table: str, name: str = "") -> dict[str, Any]:
    """The entry of one model of a table; the first without a name."""
    models = sources()[table]["models"]
    found: dict[str, Any] = next(m for m in models if not name or m["name"] == name)
    return found


def comparison(table: str, name: str) -> dict[str, Any]:
    """The entry of one comparison of two models of a table."""
    found: dict[str, Any] = next(c for c in sources()[table]["comparisons"] if c["name"] == name)
    return found


@cache
def _rows(table: str) -> tuple[dict[str, str], ...]:
    with (HERE / sources()[table]["file"]).open(encoding="utf-8", newline="") as f:
        return tuple(csv.DictReader(f))


def column(table: str, name: str) -> np.ndarray:
    """One column of numbers, shape (N,)."""
    return np.array([float(row[name]) for row in _rows(table)])


def labels(table: str, name: str) -> np.ndarray:
    """One column of text, shape (N,)."""
    return np.array([row[name] for row in _rows(table)])


def symbols(names: str) -> tuple[sympy.Symbol, ...]:
    """Real symbols: these laws have constants of either sign."""
    return tuple(sympy.Symbol(n, real=True) for n in names.split())


def predictor(
    law: sympy.Expr,
    constants: Sequence[sympy.Symbol],
    conditions: Sequence[sympy.Symbol],
    n: int,
    *,
    scale: Sequence[float] | np.ndarray | None = None,
    lower: float | Sequence[float] = -np.inf,
    starts: np.ndarray | None = None,
) -> RatePredictor:
    """A law over n observations, its constants without bounds unless ``lower`` is given."""
    p = len(constants)
    records = [Constant(str(s), s, ConstantKind.RATE) for s in constants]
    linear = set(linear_constants([law], records))
    return RatePredictor(
        [CompiledLaw(law, list(constants), list(conditions))],
        np.zeros(n, int),
        names=tuple(str(s) for s in constants),
        lower=np.broadcast_to(np.asarray(lower, float), (p,)).copy(),
        upper=np.full(p, np.inf),
        linear=np.array([str(s) in linear for s in constants]),
        scale=np.ones(p) if scale is None else np.abs(np.asarray(scale, float)),
        starts=np.zeros((0, p)) if starts is None else np.atleast_2d(starts),
    )


def measurements(
    y: np.ndarray,
    conditions: np.ndarray,
    *,
    sd: float | np.ndarray | None = None,
    conditions_sd: Sequence[np.ndarray | float] = (),
    origin: str = "measured",
) -> Measurements:
    """Observations over conditions, shape (N, m); the variance is estimated without ``sd``."""
    n = y.shape[-1]
    found: list[ErrorSource] = []
    for j, s in enumerate(conditions_sd):
        found.append(source(j, n, absolute=s, origin=origin))
    if sd is not None:
        found.append(source(OBSERVATION, n, absolute=sd))
    return Measurements(
        y,
        conditions,
        tuple(found),
        Scale.ESTIMATED if sd is None else Scale.STATED,
        tuple(f"x{j}" for j in range(conditions.shape[-1])),
    )


def digits(found: np.ndarray | float, published: Sequence[float] | np.ndarray | float) -> float:
    """Smallest number of agreeing significant digits, -log10 of the relative difference."""
    a, b = np.atleast_1d(np.asarray(found, float)), np.atleast_1d(np.asarray(published, float))
    with np.errstate(divide="ignore"):
        relative = np.abs(a - b) / np.where(b != 0, np.abs(b), 1.0)
        return float(np.min(np.where(relative > 0, -np.log10(relative), 16.0)))
