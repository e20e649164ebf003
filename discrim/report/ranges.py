"""Figures of lines with ends: the effects asked about, and the intervals of the constants."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from discrim.report import read
from discrim.report.canvas import (
    BLUE,
    GREEN,
    MOST_PANELS,
    MUTED,
    OCHRE,
    PAPER,
    PLUM,
    RULE,
    SHADE,
    Picture,
    few_ticks,
    finish,
    label,
    panels,
    scale_of,
    sheet,
    with_units,
)
from discrim.report.constants import KINDS
from discrim.report.numbers import interval, percent
from discrim.report.read import Document


def effects(name: str, document: Document) -> Picture | None:
    """The effect asked about in each question, against the smallest effect that matters."""
    rows = []
    for q in read.records(document, "questions"):
        effect = read.part(q, "effect")
        low, high = read.value(effect, "low"), read.value(effect, "high")
        if low is not None and high is not None:
            about, verdict = read.text(q, "about"), read.text(q, "verdict")
            rows.append((about, verdict, low, read.value(effect, "value"), high,
                         read.value(effect, "matters_above")))  # fmt: skip
    if not rows:
        return None
    rows = rows[:MOST_PANELS]
    height = 0.62 + 0.52 * len(rows)
    figure = sheet(height)
    ax: Any = figure.add_axes((0.04, 0.45 / height, 0.92, 0.52 * len(rows) / height))
    ends = [0.0] + [x for r in rows for x in (r[2], r[4])]
    matter = [r[5] for r in rows if r[5]]
    low, high = 100 * min(ends + [-m for m in matter]), 100 * max(ends + matter)
    pad = 0.04 * (high - low or 1)
    for i, (about, verdict, *fractions) in enumerate(rows):
        y = len(rows) - 1 - i
        lo, best, hi, m = (None if v is None else 100 * v for v in fractions)
        if m:
            ax.fill_between([-m, m], y - 0.30, y + 0.12, color=SHADE, lw=0, zorder=0)
        decided = verdict in ("participates", "negligible")
        ax.plot([lo, hi], [y - 0.09] * 2, color=BLUE, lw=2.4,
                ls="-" if decided else (0, (2.5, 1)), solid_capstyle="butt")  # fmt: skip
        ax.plot([lo, hi], [y - 0.09] * 2, "|", color=BLUE, ms=9, mew=1.6)
        if best is not None:
            ax.plot([best], [y - 0.09], "o", color=BLUE, ms=6, mfc=BLUE if decided else PAPER,
                    mew=1.6)  # fmt: skip
        ax.text(0, y + 0.22, label(f"{about}: {verdict}", 48), va="center", ha="left",
                transform=ax.get_yaxis_transform())  # fmt: skip
        ax.plot([0, 0], [y - 0.30, y + 0.12], color=MUTED, lw=0.8, zorder=1)
    ax.set_xlim(low - pad, high + pad)
    ax.set_ylim(-0.4, len(rows) - 0.55)
    ax.set_yticks([])
    ax.spines["left"].set_visible(False)
    few_ticks(ax.xaxis, 6)
    ax.set_xlabel("effect on the rate (%)")
    alt = "Effect on the rate, its interval and the range too small to matter. " + " ".join(
        f"{about}: {percent(best)}, interval {percent(lo)} to {percent(hi)}, {verdict}."
        for about, verdict, lo, best, hi, _ in rows
    )
    return finish(
        figure, name, title="Effect on the rate", alt=alt,
        caption="Line: interval of the effect, broken where the verdict is undecided. Shaded: too "
        "small to matter.",
    )  # fmt: skip


_KIND_STYLE: dict[str, tuple[str, Any, float]] = {
    "linearised": (PLUM, (0, (1.2, 1)), 2.0),
    "profile": (OCHRE, (0, (5, 1.5)), 2.0),
    "reconciled": (BLUE, "-", 3.2),
    "guaranteed": (GREEN, "-", 1.4),
}


def intervals(name: str, candidate: Any) -> Picture | None:
    """The four kinds of interval side by side, one panel a constant, each with its own axis."""
    shown = [k for k in read.records(candidate, "constants") if _finite_ends(k)][:MOST_PANELS]
    if not shown:
        return None
    figure, axes = panels(len(shown), height=1.0, left=0.92, gap=0.3, below=0.36,
                          above=0.3)  # fmt: skip
    kinds = list(KINDS)
    for i, (ax, k) in enumerate(zip(axes, shown, strict=True)):
        ends = _finite_ends(k)
        value = read.value(k, "value")
        every = ends + ([value] if value is not None else [])
        factor, power = scale_of(every)
        low, high = min(every) * factor, max(every) * factor
        pad = 0.09 * ((high - low) or abs(high) or 1)
        low, high = low - pad, high + pad
        if value is not None:
            ax.axvline(value * factor, color=MUTED, lw=0.8, zorder=0)
        if low < 0 < high:
            ax.axvline(0, color=RULE, lw=0.8, zorder=0)
        found, how = read.part(k, "intervals"), read.part(k, "interval_ends")
        for y, kind in enumerate(reversed(kinds)):
            two = [*read.numbers(found, kind), None, None]
            ended = [*read.texts(how, kind), "", ""]
            _one_interval(ax, y, kind, [None if v is None else v * factor for v in two[:2]],
                          ended, low, high)  # fmt: skip
        ax.set_xlim(low, high)
        ax.set_ylim(-0.6, len(kinds) - 0.4)
        side = i % 2 == 0
        ax.set_yticks(range(len(kinds)), list(reversed(kinds)) if side else [""] * len(kinds))
        ax.tick_params(axis="y", length=0)
        few_ticks(ax.xaxis, 4)
        title = with_units(read.text(k, "name"), read.text(k, "units"), power)
        ax.set_title(label(title, 34))
    words = [f"{read.text(k, 'name')}: {_in_words(k)}." for k in shown]
    who = read.text(candidate, "name")
    return finish(
        figure, name, title=f"Intervals of the constants, {who}",
        alt=f"Four kinds of interval for the constants of “{who}”. " + " ".join(words),
        caption="Bar end: crossed. Square: at a bound. Arrow: open. Thin upright line: the value.",
    )  # fmt: skip


def _one_interval(
    ax: Any, y: float, kind: str, two: Sequence[float | None], how: Sequence[str],
    low: float, high: float,
) -> None:  # fmt: skip
    colour, stroke, width = _KIND_STYLE[kind]
    if two[0] is None and two[1] is None and "open" not in how:
        said = "not found" if "failed" in how else "not computed"
        ax.text((low + high) / 2, y, said, color=MUTED, ha="center", va="center")
        return
    left = two[0] if two[0] is not None else low
    right = two[1] if two[1] is not None else high
    ax.plot([left, right], [y, y], color=colour, lw=width, ls=stroke, solid_capstyle="butt",
            dash_capstyle="butt")  # fmt: skip
    for at, end, given, arrow in ((left, how[0], two[0], "<"), (right, how[1], two[1], ">")):
        if given is None:
            ax.plot([at], [y], arrow, color=colour, ms=7, clip_on=False)
        elif end == "bound":
            ax.plot([at], [y], "s", color=colour, ms=5)
        elif end == "failed":
            ax.plot([at], [y], "x", color=colour, ms=6, mew=1.6)
        else:
            ax.plot([at], [y], "|", color=colour, ms=9, mew=1.8)


def _finite_ends(k: Any) -> list[float]:
    found = read.part(k, "intervals")
    return [v for kind in KINDS for v in read.numbers(found, kind)[:2] if v is not None]


def _in_words(k: Any) -> str:
    found, how = read.part(k, "intervals"), read.part(k, "interval_ends")
    out = []
    for kind in KINDS:
        two = read.items(found, kind)
        if len(two) == 2:
            out.append(f"{kind} {interval(two[0], two[1], how.get(kind))}")
    return ", ".join(out)
