"""One look for all figures: colours, strokes, type, and how a figure becomes SVG or PNG bytes.

Colour never carries a meaning alone: each has a marker, a stroke or a hatch that goes with it.
Figures are drawn with matplotlib's object interface and no pyplot; the same document gives the
same bytes.
"""

from __future__ import annotations

import io
import math
import re
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator, NullLocator

from discrim.report.numbers import number

INK, MUTED, RULE, PAPER = "#20242c", "#5d6673", "#ccd2da", "#fefefe"
BLUE, OCHRE, GREEN, PLUM = "#1f5fa8", "#b4570b", "#12796a", "#7d4a97"
SHADE = "#dfe5ec"
#: Colour, marker and stroke that go together, for the first, second, ... of several things.
STYLES: tuple[tuple[str, str, Any], ...] = (
    (BLUE, "o", "-"),
    (OCHRE, "s", (0, (5, 2))),
    (GREEN, "^", (0, (1, 1.4))),
    (PLUM, "D", (0, (6, 2, 1, 2))),
)
HATCHES = ("", "////", "....", "xxxx")
#: What each colour is called in the page's style sheet, which has a dark value for each.
NAMES = {
    INK: "ink",
    MUTED: "muted",
    RULE: "rule",
    PAPER: "paper",
    BLUE: "blue",
    OCHRE: "ochre",
    GREEN: "green",
    PLUM: "plum",
    SHADE: "shade",
}
#: No more panels than this in one figure; the rest is in the tables.
MOST_PANELS = 8
WIDTH = 5.0  # inches; type stays readable when this is shown at half its size
_RC: dict[str, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 9.5,
    "axes.titlesize": 9.5,
    "axes.titleweight": "normal",
    "axes.titlelocation": "left",
    "axes.labelsize": 9.5,
    "xtick.labelsize": 9,
    "ytick.labelsize": 9,
    "legend.fontsize": 9,
    "legend.frameon": False,
    "text.color": INK,
    "text.parse_math": False,  # names come from the user: a dollar sign is a dollar sign
    "axes.edgecolor": MUTED,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.formatter.useoffset": False,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "grid.color": RULE,
    "grid.linewidth": 0.6,
    "hatch.linewidth": 0.7,
    "figure.facecolor": PAPER,
    "axes.facecolor": "none",
    "savefig.facecolor": PAPER,
    "svg.fonttype": "none",
    "path.simplify": True,
}


@dataclass(frozen=True, slots=True, eq=False)
class Picture:
    """A finished figure: file name without its ending, caption, description in words, SVG text."""

    name: str
    title: str
    caption: str
    alt: str
    svg: str
    figure: Figure

    def png(self) -> bytes:
        with style(self.name):
            FigureCanvasAgg(self.figure)
            out = io.BytesIO()
            self.figure.savefig(out, format="png", dpi=130, metadata={"Software": None}, **_FAST)
        return out.getvalue()


# the default compression takes as long as drawing the figure, for a few per cent of its size
_FAST: Any = {"pil_kwargs": {"compress_level": 3}}


@contextmanager
def style(name: str) -> Iterator[None]:
    """The look of the figures, in force inside the block only."""
    settings: Any = _RC | {"svg.hashsalt": name}
    # the margins of an axis over hundreds of decades overflow where nothing is drawn
    quiet = np.errstate(over="ignore")
    with quiet, warnings.catch_warnings(), matplotlib.rc_context(settings):
        # Names in a script that the font lacks are drawn as boxes in the PNG; that is no reason
        # to lose the report.
        warnings.filterwarnings("ignore", message=".*[Gg]lyph.*")
        yield


def finish(figure: Figure, name: str, *, title: str, caption: str, alt: str) -> Picture:
    """Turn the figure into a picture; call inside :func:`style`."""
    FigureCanvasSVG(figure)
    out = io.StringIO()
    figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    text = out.getvalue()
    return Picture(name, title, caption, alt, text[text.index("<svg") :], figure)


def inline(picture: Picture) -> str:
    """The SVG for a page: colours from the page's style sheet, ids that are the figure's own."""
    text = re.sub(r"<metadata>.*?</metadata>", "", picture.svg, flags=re.DOTALL)
    text = re.sub(r'\bid="', f'id="{picture.name}-', text)
    text = re.sub(r'(url\(|href=")#', rf"\1#{picture.name}-", text)
    for colour, name in NAMES.items():
        text = text.replace(f": {colour}", f": var(--{name})")
        text = text.replace(f'fill="{colour}"', f'style="fill: var(--{name})"')
    text = text.replace("'DejaVu Sans'", "var(--type)")
    # The page sets the size; the viewBox keeps the shape.
    head, rest = text.split(">", 1)
    return re.sub(r' (width|height)="[^"]*"', "", head) + ">" + rest


def sheet(height: float, *, width: float = WIDTH) -> Figure:
    return Figure(figsize=(width, height))


def panels(
    n: int,
    *,
    across: int = 2,
    height: float = 1.9,
    left: float = 0.62,
    gap: float = 0.62,
    below: float = 0.5,
    above: float = 0.28,
) -> tuple[Figure, list[Any]]:
    """A figure with ``n`` panels, at most ``across`` side by side; all lengths in inches.

    Set out by hand, because measuring the text to do so takes longer than drawing.
    """
    across = min(across, n)
    down = math.ceil(n / across)
    total = down * (height + below + above) + 0.02
    figure = sheet(total)
    wide = (WIDTH - left * across - 0.12 - (gap - left) * (across - 1)) / across
    axes = []
    for i in range(n):
        row, col = divmod(i, across)
        x = left + col * (wide + gap)
        y = total - (row + 1) * (height + above) - row * below
        axes.append(figure.add_axes((x / WIDTH, y / total, wide / WIDTH, height / total)))
    return figure, axes


def label(text: str, longest: int = 30) -> str:
    """A name short enough for its place."""
    return text if len(text) <= longest else text[: longest - 1].rstrip() + "…"


_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def scale_of(values: Sequence[float | None]) -> tuple[float, str]:
    """A factor and its name, such as (1e6, "10⁻⁶ "), so that tick labels stay short."""
    largest = max((abs(v) for v in values if v is not None and math.isfinite(v)), default=0.0)
    if largest == 0 or 0.01 <= largest < 1e4:
        return 1.0, ""
    power = 3 * math.floor(math.log10(largest) / 3)
    if abs(power) > 290:
        return 1.0, ""
    return 10.0**-power, f"10{str(power).translate(_RAISED)} "


def with_units(name: str, units: str, power: str = "") -> str:
    """``k_a (10⁻⁶ s⁻¹)``."""
    inside = (power + ("" if units in ("", "1") else units)).strip()
    return f"{name} ({inside})" if inside else name


def few_ticks(axis: Any, n: int = 5) -> None:
    axis.set_major_locator(MaxNLocator(n))
    axis.set_major_formatter(FuncFormatter(lambda x, _: number(round(float(x), 12))))


def log_ticks(axis: Any, low: float, high: float) -> None:
    """Ticks at 1, 2 and 5 of each decade in range (1 alone when there are many decades, and of a few
    of them when there are very many)."""
    first, last = math.floor(math.log10(low)), min(math.ceil(math.log10(high)), 307)
    decades = range(first, last + 1, 1 + (last - first) // 5)
    steps = (1,) if len(decades) > 4 else (1, 3) if len(decades) > 2 else (1, 2, 5)
    at = [s * 10.0**d for d in decades for s in steps if low <= s * 10.0**d <= high]
    axis.set_major_locator(FixedLocator(at))
    axis.set_minor_locator(NullLocator())
    axis.set_major_formatter(FuncFormatter(lambda x, _: number(x, 3)))
