"""The figures of the report, each drawn from the saved document alone.

:func:`draw` makes all that the document has data for. Nothing raises on missing entries: a figure
without its data is left out.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from functools import partial
from typing import Any

from discrim.report import read
from discrim.report.canvas import (
    HATCHES,
    INK,
    MOST_PANELS,
    MUTED,
    PAPER,
    SHADE,
    STYLES,
    Picture,
    few_ticks,
    finish,
    label,
    log_ticks,
    panels,
    scale_of,
    style,
    with_units,
)
from discrim.report.knock_outs import with_pathways
from discrim.report.lattice import lattice
from discrim.report.numbers import count, listed, number, percent
from discrim.report.planes import plane
from discrim.report.ranges import effects, intervals
from discrim.report.read import Document

MOST_PLANES = 3


def draw(document: Document) -> list[Picture]:
    """All figures of the report, in the order in which they are shown."""
    ordered = read.candidates_first_standing(document)
    standing = [c for c in ordered if read.is_standing(c)] or ordered[:1]
    jobs: dict[str, Callable[[str], Picture | None]] = {
        "effects": partial(effects, document=document)
    }
    for i, record in enumerate(read.records(document, "planes")[:MOST_PLANES]):
        jobs[f"plane-{i + 1}"] = partial(plane, record=record)
    jobs["measured-predicted"] = partial(measured_predicted, standing=standing)
    jobs["residuals"] = partial(residuals, document=document, standing=standing)
    for i, c in enumerate(standing[:2]):
        jobs[f"intervals-{i + 1}"] = partial(intervals, candidate=c)
    jobs["pathways"] = partial(pathways, standing=standing)
    alpha = 1.0 - (read.value(document, "confidence") or 0.95)
    for i, c in enumerate(with_pathways(document)):
        jobs[f"lattice-{i + 1}"] = partial(lattice, candidate=c, alpha=alpha)
    found = []
    for name, job in jobs.items():
        with style(name):
            picture = job(name)
        if picture is not None:
            found.append(picture)
    return found


def measured_predicted(name: str, standing: Sequence[Any]) -> Picture | None:
    """Measured against predicted, one panel a candidate, on the same axes."""
    shown = [(c, _pairs(c)) for c in standing]
    shown = [(c, pairs) for c, pairs in shown if pairs][:6]
    if not shown:
        return None
    every = [v for _, pairs in shown for p in pairs for v in p[:2]]
    factor, power = scale_of(every)
    positive = min(every) > 0 and max(every) / min(every) > 20
    low, high = min(every) * factor, max(every) * factor
    if positive:
        low, high = max(low / 1.25, 1e-300), min(high * 1.25, 1e300)
    else:
        pad = 0.06 * ((high - low) or abs(high) or 1)
        low, high = low - pad, high + pad
    one = len(shown) == 1
    figure, axes = panels(len(shown), height=2.6 if one else 1.85, left=0.74, gap=0.66,
                          below=0.5)  # fmt: skip
    units = next((read.text(f, "units") for f in read.records(shown[0][0], "fitted")), "")
    for i, (ax, (c, pairs)) in enumerate(zip(axes, shown, strict=True)):
        colour, marker, _ = STYLES[i % len(STYLES)]
        if positive:
            ax.set_xscale("log")
            ax.set_yscale("log")
        ax.plot([low, high], [low, high], color=MUTED, lw=1)
        x, y = [p[1] * factor for p in pairs], [p[0] * factor for p in pairs]
        bars = [(p[2] or 0.0) * factor for p in pairs]
        ax.errorbar(x, y, yerr=bars, fmt=marker, color=colour, ms=4.2, mfc=PAPER, mew=1.2,
                    elinewidth=1, capsize=0)  # fmt: skip
        ax.set_xlim(low, high)
        ax.set_ylim(low, high)
        for axis in (ax.xaxis, ax.yaxis):
            if positive:
                log_ticks(axis, low, high)
            else:
                few_ticks(axis, 4)
        ax.set_title(label(read.text(c, "name"), 52 if one else 26))
        if i >= len(shown) - 2 or one:
            ax.set_xlabel(with_units("predicted", units, power))
        if i % 2 == 0:
            ax.set_ylabel(with_units("measured", units, power))
    names = [f"“{read.text(c, 'name')}”" for c, _ in shown]
    worst = [max((abs(p[3]) for p in pairs if p[3] is not None), default=None)
             for _, pairs in shown]  # fmt: skip
    alt = f"Measured against predicted values for {listed(names)}. " + " ".join(
        f"{n}: largest residual {number(w, 2)} standard deviations."
        for n, w in zip(names, worst, strict=True)
        if w is not None
    )
    return finish(
        figure, name, title="Measured against predicted", alt=alt,
        caption="Bars: one standard deviation, the errors of the conditions included. Line: equal.",
    )  # fmt: skip


def _pairs(c: Any) -> list[tuple[float, float, float | None, float | None]]:
    """Observed, predicted, standard deviation, standardised residual of each fitted run."""
    out = []
    for f in read.records(c, "fitted"):
        observed, predicted = read.value(f, "observed"), read.value(f, "predicted")
        if observed is not None and predicted is not None:
            out.append((observed, predicted, read.value(f, "sd"), read.value(f, "standardised")))
    return out


def residuals(name: str, document: Document, standing: Sequence[Any]) -> Picture | None:
    """Standardised residuals of the standing candidates against every column."""
    runs = read.part(document, "runs")
    where = {read.clean(x): i for i, x in enumerate(read.items(runs, "labels"))}
    shown = []
    for c in standing[:3]:
        points = [
            (where[read.text(f, "run")], value)
            for f in read.records(c, "fitted")
            if (value := read.value(f, "standardised")) is not None and read.text(f, "run") in where
        ]
        if points:
            shown.append((read.text(c, "name"), points))
    columns = [axis for axis in (_axis(c) for c in read.records(runs, "columns")) if axis]
    if not shown or not columns:
        return None
    columns = columns[:MOST_PANELS]
    figure, axes = panels(len(columns), height=1.35, left=0.58, gap=0.44, below=0.55,
                          above=0.12)  # fmt: skip
    legend = len(shown) > 1
    most = max(abs(v) for _, points in shown for _, v in points)
    top = max(3.0, 1.15 * most)
    for i, (ax, (title, places, words)) in enumerate(zip(axes, columns, strict=True)):
        ax.axhspan(-2, 2, color=SHADE, lw=0, zorder=0)
        ax.axhline(0, color=MUTED, lw=0.8, zorder=1)
        for j, (who, points) in enumerate(shown):
            colour, marker, _ = STYLES[j]
            xy = [(places[k], v) for k, v in points if k < len(places) and places[k] is not None]
            ax.plot([p[0] for p in xy], [p[1] for p in xy], marker, color=colour, mfc="none",
                    ms=4.2, mew=1.1, label=label(who, 34), ls="none")  # fmt: skip
        ax.set_ylim(-top, top)
        few_ticks(ax.yaxis, 4)
        if words:
            ax.set_xticks(range(len(words)), [label(w, 9) for w in words])
            ax.set_xlim(-0.5, len(words) - 0.5)
        else:
            few_ticks(ax.xaxis, 4)
        ax.set_xlabel(label(title, 32))
        if i % 2 == 0:
            ax.set_ylabel("residual / sd")
    if legend:
        _legend_below(figure, axes[0], len(shown))
    names = listed([f"“{who}”" for who, _ in shown])
    alt = (
        f"Residuals in standard deviations of {names} against "
        f"{listed([t for t, _, _ in columns])}. The largest is {number(most, 2)}."
    )
    return finish(
        figure, name, title="Residuals against conditions and other columns", alt=alt,
        caption="Residuals in standard deviations; shaded: within two. A slope or a bend "
        "means that the law misses something that moves with this column.",
    )  # fmt: skip


def _axis(c: Mapping[str, Any]) -> tuple[str, list[float | None], list[str]] | None:
    """A column as title, places and, for a text column, the words at 0, 1, ...; None if useless."""
    values = read.numbers(c, "values")
    name, units = read.text(c, "name"), read.text(c, "units")
    known = [v for v in values if v is not None]
    if known:
        if min(known) == max(known):
            return None
        factor, power = scale_of(known)
        places = [None if v is None else v * factor for v in values]
        return with_units(name, units, power), places, []
    labels = [read.clean(x) for x in read.items(c, "labels")]
    words = sorted({w for w in labels if w})
    if not 2 <= len(words) <= 6:
        return None
    return name, [float(words.index(w)) if w else None for w in labels], words


def _legend_below(figure: Any, ax: Any, n: int) -> None:
    """Make room under the panels and put the legend there; panels keep their size."""
    width, height = figure.get_size_inches()
    extra = 0.06 + 0.2 * n
    total = height + extra
    for one in figure.axes:
        box = one.get_position()
        one.set_position(
            (box.x0, (box.y0 * height + extra) / total, box.width, box.height * height / total)
        )
    figure.set_size_inches(width, total)
    handles, names = ax.get_legend_handles_labels()
    figure.legend(handles, names, loc="lower left", bbox_to_anchor=(0.01, 0.0), borderaxespad=0.1,
                  labelspacing=0.25, handletextpad=0.5)  # fmt: skip


def pathways(name: str, standing: Sequence[Any]) -> Picture | None:
    """What each pathway carries in each run, stacked, one panel a candidate."""
    shown = []
    for c in standing:
        parts = [(read.text(p, "name"), [v or 0.0 for v in read.numbers(p, "values")])
                 for p in read.records(c, "pathways")]  # fmt: skip
        fitted = read.records(c, "fitted")
        n = min((len(v) for _, v in parts), default=0)
        if len(parts) > 1 and n:
            runs = [read.text(f, "run") for f in fitted][:n]
            runs += [str(i + 1) for i in range(len(runs), n)]
            units = read.text(fitted[0], "units") if fitted else ""
            shown.append((c, [(who, v[:n]) for who, v in parts[:4]], runs, units))
    shown = shown[:3]
    if not shown:
        return None
    figure, axes = panels(len(shown), across=1, height=1.6, below=0.5, above=0.5)
    words = []
    for ax, (c, parts, runs, units) in zip(axes, shown, strict=True):
        factor, power = scale_of([v for _, values in parts for v in values])
        floor, under = [0.0] * len(runs), [0.0] * len(runs)
        for j, (who, values) in enumerate(parts):
            colour = STYLES[j][0]
            base = [f if v >= 0 else u for v, f, u in zip(values, floor, under, strict=True)]
            heights = [v * factor for v in values]
            ax.bar(range(len(runs)), heights, bottom=base, width=0.78, color=colour,
                   edgecolor=PAPER, hatch=HATCHES[j], lw=0.4, label=label(who, 20))  # fmt: skip
            floor = [f + max(h, 0) for f, h in zip(floor, heights, strict=True)]
            under = [u + min(h, 0) for u, h in zip(under, heights, strict=True)]
        step = math.ceil(len(runs) / 14)
        ax.set_xticks(range(0, len(runs), step), [label(r, 6) for r in runs[::step]])
        ax.set_xlabel("run")
        ax.axhline(0, color=INK, lw=0.8)
        few_ticks(ax.yaxis, 4)
        ax.set_ylabel(with_units("rate", units, power))
        ax.set_title(label(read.text(c, "name"), 50), pad=17)
        ax.legend(loc="lower left", bbox_to_anchor=(-0.01, 0.98), ncols=len(parts),
                  borderaxespad=0, handlelength=1.6, columnspacing=1.2)  # fmt: skip
        total = [sum(v) or 1.0 for v in zip(*(values for _, values in parts), strict=True)]
        for who, values in parts:
            share = [v / t for v, t in zip(values, total, strict=True)]
            words.append(f"{who} carries {percent(min(share))} to {percent(max(share))}")
    alt = f"What each pathway carries over {count(len(shown[0][2]), 'run')}: {'; '.join(words)}."
    return finish(
        figure, name, title="What each pathway carries", alt=alt,
        caption="Parts of the predicted rate at the fitted constants, run by run. In lockstep "
        "these parts are not fixed by the runs: see the intervals.",
    )  # fmt: skip
