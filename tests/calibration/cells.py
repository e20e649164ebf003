"""The cells of the calibration: what a set of simulated studies has in common, and the grid of them."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from dataclasses import dataclass, fields
from itertools import product


@dataclass(frozen=True)
class Cell:
    """One cell.

    Attributes
    ----------
    law : name in `laws.LAWS`
    runs : of a time course each has three samples
    spread : how far the runs are from lockstep: standard deviation of B/A over its mean
    condition_error, rate_error : relative standard deviations as stated
    origin : of the condition errors: measured, set, mixed (A measured, B set; of a stirred tank: the
        inlet set, the rest measured) or exact (none)
    shared : how many runs share one error of A; 0 for all of them
    share : what the term in question carries of an average rate
    scale : what is known of the rates' variance: stated, estimated, replicates
    scale_df : degrees of freedom of replicates
    drawn : true size of the condition errors over the stated one
    """

    law: str = "two pathways"
    runs: int = 12
    spread: float = 0.5
    condition_error: float = 0.01
    rate_error: float = 0.01
    origin: str = "measured"
    shared: int = 1
    share: float = 0.0
    scale: str = "stated"
    scale_df: int = 0
    drawn: float = 1.0

    def seeds(self, seed: int, part: str) -> list[int]:
        """Seed of this cell in one part of the calibration; no cell shares it with another."""
        text = part + repr(tuple(getattr(self, f.name) for f in fields(self)))
        return [seed, zlib.crc32(text.encode())]

    @property
    def barred(self) -> bool:
        """Whether a bar is set: not where the stated errors are wrong."""
        return self.drawn == 1.0

    @property
    def well_spread(self) -> bool:
        return self.spread >= 10 * self.condition_error


SPREADS = (0.003, 0.01, 0.05, 0.5)


def _two_pathways() -> Iterator[Cell]:
    for spread, error, rate, runs in product(SPREADS, (0.01, 0.03), (0.003, 0.03), (5, 12, 30)):
        yield Cell("two pathways", runs, spread, error, rate)
    for spread, error, rate, runs in product(
        (0.003, 0.05, 0.5), (0.01, 0.03), (0.003, 0.03), (5, 12)
    ):
        yield Cell("two pathways", runs, spread, error, rate, "set")
    for spread, error in product(SPREADS, (0.01, 0.03)):
        yield Cell("two pathways", 12, spread, error, origin="mixed")
        yield Cell("two pathways", 12, spread, error, origin="measured", shared=3)
        yield Cell("two pathways", 12, spread, error, origin="set", shared=3)
        yield Cell("two pathways", 12, spread, error, origin="measured", shared=0)
    for runs, spread in product((2, 3), (0.003, 0.5)):  # as many constants as runs, nearly
        yield Cell("two pathways", runs, spread, 0.02)


def _unknown_scale() -> Iterator[Cell]:
    for origin, shared, runs, rate in product(
        ("measured", "set"), (1, 3, 0), (6, 30), (0.01, 0.05)
    ):
        yield Cell("two pathways", runs, 0.02, 0.03, rate, origin, shared, scale="estimated")
    for runs, spread in product((3, 6, 12), (0.01, 0.5)):
        yield Cell("two pathways", runs, spread, 0.0, 0.02, "exact", scale="estimated")
    for origin, df, spread in product(("measured", "set", "exact"), (3, 8), (0.02, 0.5)):
        error = 0.0 if origin == "exact" else 0.01
        yield Cell("two pathways", 12, spread, error, 0.02, origin, scale="replicates", scale_df=df)


def _other_laws() -> Iterator[Cell]:
    for spread, error, runs in product((0.01, 0.05, 0.5), (0.01, 0.03), (12, 30)):
        yield Cell("third column aligned", runs, spread, error)
    for spread, origin in product((0.01, 0.05, 0.5), ("measured", "set")):
        yield Cell("other at zero", 12, spread, 0.02, origin=origin)
    for law in ("adsorption", "rate maximum", "time course", "stirred tank", "order"):
        other = "mixed" if law == "stirred tank" else "set"
        for spread, error, origin in product((0.02, 0.1, 0.5), (0.01, 0.03), ("measured", other)):
            yield Cell(law, 12, spread, error, origin=origin)


def _others_in_lockstep() -> Iterator[Cell]:
    for runs, (spread, error), law in product(
        (12, 30),
        ((0.02, 0.01), (0.02, 0.03), (0.1, 0.03), (0.3, 0.01)),
        ("others in lockstep, B with", "others in lockstep, B against"),
    ):
        yield Cell(law, runs, spread, error)
    for runs in (12, 30):
        yield Cell("three others in lockstep", runs, 0.02, 0.03)


def _effects() -> Iterator[Cell]:
    for share, spread, origin in product(
        (0.05, 0.3), (0.003, 0.02, 0.5), ("measured", "set", "mixed")
    ):
        yield Cell("two pathways", 12, spread, 0.02, origin=origin, share=share)
    for law in ("adsorption", "rate maximum", "time course", "stirred tank"):
        for spread in (0.05, 0.5):
            yield Cell(law, 12, spread, 0.02, share=0.3)


def _misstated() -> Iterator[Cell]:
    for drawn, spread in product((0.5, 0.67, 1.5, 2.0), (0.003, 0.02, 0.5)):
        yield Cell("two pathways", 12, spread, 0.02, drawn=drawn)


SIZE_GROUPS: dict[str, tuple[Cell, ...]] = {
    "two pathways": tuple(_two_pathways()),
    "variance of the rates unknown": tuple(_unknown_scale()),
    "other laws": tuple(_other_laws()),
    "other constants in lockstep": tuple(_others_in_lockstep()),
    "errors misstated": tuple(_misstated()),
}
COVERAGE_CELLS = tuple(_effects())
"""Intervals at a true effect that is not zero."""

NEGLIGIBLE_CELLS = (
    *(
        Cell("two pathways", 12, spread, error, origin=origin, share=share)
        for spread, error, origin, share in product(
            (0.01, 0.1, 0.5), (0.01,), ("measured", "set"), (0.05, 0.2)
        )
    ),
    *(
        Cell("two pathways", runs, 0.5, error, 0.03, share=0.1)
        for runs, error in product((5, 30), (0.01, 0.05))
    ),
    *(
        Cell(law, 12, spread, 0.01, share=0.1)
        for law, spread in product(
            ("adsorption", "rate maximum", "time course", "third column aligned"), (0.05, 0.5)
        )
    ),
    Cell("others in lockstep, B against", 12, 0.05, 0.03, share=0.1),
    Cell("two pathways", 12, 0.5, 0.0, 0.02, "exact", share=0.05, scale="estimated"),
    Cell("two pathways", 12, 0.1, 0.02, 0.02, share=0.05, scale="estimated"),
)
"""Effects just over what matters: `share` is the effect, what matters a thousandth part less."""

POWER_CELLS = (
    *(
        Cell("two pathways", runs, spread, error, rate, origin)
        for runs, (spread, error), rate, origin in product(
            (12, 30), ((0.2, 0.01), (0.5, 0.01), (0.5, 0.03)), (0.01, 0.03), ("measured", "set")
        )
    ),
    *(
        Cell("two pathways", 12, spread, error, share=share)
        for (spread, error), share in product(
            ((0.003, 0.02), (0.01, 0.01), (0.05, 0.02)), (0.3, 0.8)
        )
    ),
    *(
        Cell(law, 12, 0.5, 0.01)
        for law in ("adsorption", "rate maximum", "time course", "stirred tank")
    ),
    Cell("two pathways", 12, 0.5, 0.01, 0.02, scale="estimated"),
    Cell("two pathways", 12, 0.5, 0.0, 0.02, "exact", scale="estimated"),
)
