"""The plane of two constants: the band that each run allows, and the region that all allow."""

from __future__ import annotations

from typing import Any

from matplotlib.patches import Patch

from discrim.report import read
from discrim.report.canvas import (
    BLUE,
    GREEN,
    INK,
    OCHRE,
    PAPER,
    Picture,
    few_ticks,
    finish,
    label,
    scale_of,
    sheet,
    with_units,
)
from discrim.report.numbers import as_number, count, listed, number

#: More bands than this hide the region that they should explain.
MOST_BANDS = 60


def plane(name: str, record: Any) -> Picture | None:
    """One figure of two constants; None when the document has nothing to draw in it."""
    x_range, y_range = _range(record, "x_range"), _range(record, "y_range")
    if x_range is None or y_range is None:
        return None
    x, y = read.part(record, "x"), read.part(record, "y")
    fx, px = scale_of(list(x_range))
    fy, py = scale_of(list(y_range))
    figure = sheet(3.9)
    ax = figure.add_axes((0.165, 0.27, 0.81, 0.715))
    handles: list[tuple[Any, str]] = []
    bands = read.records(record, "bands")
    # All bands together stay light enough to see the lines and contours on them.
    depth = min(0.14, max(0.025, 0.8 / max(len(bands), 1)))
    for i, band in enumerate(bands[:MOST_BANDS]):
        _band(ax, band, fx, fy, depth, first=i == 0, handles=handles)
    corner = _points(record.get("corner"), fx, fy)
    if len(corner) > 2:
        (patch,) = ax.fill([p[0] for p in corner], [p[1] for p in corner], fc="none", ec=GREEN,
                           hatch="////", lw=1.6, zorder=3)  # fmt: skip
        handles.append((patch, "guaranteed region"))
    drawn = _contours(ax, record, fx, fy, handles)
    trade = _points(record.get("trade_off"), fx, fy)
    if len(trade) == 2:
        (line,) = ax.plot(
            [p[0] for p in trade], [p[1] for p in trade], color=OCHRE, lw=2, ls=(0, (6, 2, 1, 2)),
            marker="D", ms=5, mfc=PAPER, mew=1.5, zorder=5, clip_on=False,
        )  # fmt: skip
        handles.append((line, "trade-off: not fixed by these runs"))
    best = _points([record.get("best")], fx, fy)
    if best:
        (mark,) = ax.plot([best[0][0]], [best[0][1]], "P", color=INK, ms=9, mec=PAPER, mew=1,
                          ls="none", zorder=6, clip_on=False)  # fmt: skip
        handles.append((mark, "best fit"))
    ax.set_xlim(x_range[0] * fx, x_range[1] * fx)
    ax.set_ylim(y_range[0] * fy, y_range[1] * fy)
    few_ticks(ax.xaxis)
    few_ticks(ax.yaxis)
    ax.set_xlabel(with_units(read.text(x, "name"), read.text(x, "units"), px))
    ax.set_ylabel(with_units(read.text(y, "name"), read.text(y, "units"), py))
    if handles:
        figure.legend(
            [h for h, _ in handles], [t for _, t in handles], loc="lower left",
            bbox_to_anchor=(0.01, 0.0), ncols=2, borderaxespad=0.1, labelspacing=0.3,
            columnspacing=1.2, handlelength=2.2, handletextpad=0.6,
        )  # fmt: skip
    who = read.text(record, "candidate")
    names = f"{read.text(x, 'name')} and {read.text(y, 'name')}"
    words = read.text(record, "words")
    return finish(
        figure, name,
        title=f"Plane of {label(names, 60)}" + (f", {who}" if who else ""),
        alt=_alt(record, names, bands, drawn, trade, (fx, fy)) + (f" {words}" if words else ""),
        caption="Each band: what one run allows with its errors. Bands that lie on one "
        "another fix only one combination of the two constants; where they cross, both."
        + (f" {words}" if words else ""),
    )  # fmt: skip


def _band(
    ax: Any,
    band: Any,
    fx: float,
    fy: float,
    depth: float,
    *,
    first: bool,
    handles: list[tuple[Any, str]],
) -> None:
    """One run's band; ``depth`` is how opaque it and (five times as much) its middle line are."""
    low, high = _points(band.get("low"), fx, fy), _points(band.get("high"), fx, fy)
    if len(low) > 1 and len(high) > 1:
        around = low + high[::-1]
        ax.fill([p[0] for p in around], [p[1] for p in around], color=BLUE, alpha=depth,
                           lw=0, zorder=1)  # fmt: skip
        if first:
            handles.append((Patch(color=BLUE, alpha=0.25, lw=0), "allowed by one run"))
    line = _points(band.get("line"), fx, fy)
    if len(line) > 1:
        ax.plot(
            [p[0] for p in line],
            [p[1] for p in line],
            color=BLUE,
            lw=0.7,
            alpha=min(0.75, 5 * depth),
            zorder=2,
        )


def _contours(
    ax: Any, record: Any, fx: float, fy: float, handles: list[tuple[Any, str]]
) -> list[float]:
    """Contours of the distance from the best fit at its levels; the levels that are in range."""
    import numpy as np
    from matplotlib.lines import Line2D

    grid = read.part(record, "grid")
    gx, gy = read.numbers(grid, "x"), read.numbers(grid, "y")
    rows = [[as_number(v) for v in row] for row in read.items(grid, "distance")
            if isinstance(row, list | tuple)]  # fmt: skip
    if len(gx) < 2 or len(gy) < 2 or len(rows) != len(gy) or any(len(r) != len(gx) for r in rows):
        return []
    if None in gx or None in gy:
        return []
    z = np.array([[np.nan if v is None else v for v in row] for row in rows])
    if not np.isfinite(z).any():
        return []
    low, high = float(np.nanmin(z)), float(np.nanmax(z))
    levels = sorted({v for v in read.numbers(record, "levels") if v is not None and low < v < high})
    strokes: list[Any] = ["solid", (0, (4, 2)), (0, (1, 1.5))]
    for i, level in enumerate(levels[:3]):
        ax.contour(np.array(gx) * fx, np.array(gy) * fy, np.ma.masked_invalid(z), levels=[level],
                   colors=[INK], linewidths=1.5, linestyles=[strokes[i]], zorder=4)  # fmt: skip
        handles.append((Line2D([], [], color=INK, lw=1.5, ls=strokes[i]),
                        f"Q {number(level, 2)} above its least"))  # fmt: skip
    return levels[:3]


def _alt(
    record: Any, names: str, bands: Any, levels: Any, trade: Any, scale: tuple[float, float]
) -> str:
    out = f"Plane of {names} with the bands that {count(len(bands), 'run')} allow."
    best = _points([record.get("best")], 1.0, 1.0)
    if best:
        out += f" Best fit at {number(best[0][0])} and {number(best[0][1])}."
    if levels:
        out += f" Contours where Q is {listed([number(v, 2) for v in levels])} above its least."
    if len(trade) == 2:
        ends = [f"({number(p[0] / scale[0], 3)}, {number(p[1] / scale[1], 3)})" for p in trade]
        out += f" The runs do not fix the combination from {ends[0]} to {ends[1]}."
    return out


def _range(record: Any, key: str) -> tuple[float, float] | None:
    found = read.numbers(record, key)
    if len(found) != 2 or found[0] is None or found[1] is None or found[0] >= found[1]:
        return None
    return found[0], found[1]


def _points(given: Any, fx: float, fy: float) -> list[tuple[float, float]]:
    """The points of a line, scaled; what is not a pair of numbers is left out."""
    out = []
    for p in given if isinstance(given, list | tuple) else []:
        if isinstance(p, list | tuple) and len(p) == 2:
            a, b = as_number(p[0]), as_number(p[1])
            if a is not None and b is not None:
                out.append((a * fx, b * fy))
    return out
