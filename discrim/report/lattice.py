"""The figure of the laws of a mechanism with some of its pathways, and how they nest."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from matplotlib.lines import Line2D
from matplotlib.patches import FancyBboxPatch

from discrim.report import read
from discrim.report.canvas import (
    INK,
    MUTED,
    PAPER,
    RULE,
    SHADE,
    WIDTH,
    Picture,
    finish,
    label,
    sheet,
)
from discrim.report.knock_outs import LatticeNode, edges_of, nodes_of
from discrim.report.numbers import count, listed, probability

_LETTERS = "abcdefghijklmnopqrstuvwxyz"
_HIGH = 0.5  # inches, a node
_GAP = 0.42  # inches, between two rows


def lattice(name: str, candidate: Any, alpha: float) -> Picture | None:
    """Sets of pathways, few below and all above, joined where one law is a case of the other."""
    nodes = nodes_of(candidate)
    if len(nodes) < 2:
        return None
    edges = edges_of(candidate, len(nodes))
    levels = sorted({len(n.pathways) for n in nodes})
    rows = [[i for i, n in enumerate(nodes) if len(n.pathways) == k] for k in levels]
    widest = max(map(len, rows))
    every = list(dict.fromkeys(p for n in nodes for p in n.pathways))
    letters = widest > 3 or len(every) > 3
    shown = {p: _LETTERS[i] if letters else label(p, 20) for i, p in enumerate(every[:26])}
    lines = 1 if letters else max(levels)
    high = _HIGH + 0.145 * (lines - 1) if widest <= 8 else 0.26
    key = [f"{shown[p]}  {label(p, 44)}" for p in shown] if letters else []
    legend = 0.46 + 0.2 * ((len(key) + 1) // 2)
    total = len(rows) * high + (len(rows) - 1) * _GAP + legend + 0.14
    figure = sheet(total)
    ax = figure.add_axes((0, 0, 1, 1))
    ax.set_xlim(0, WIDTH)
    ax.set_ylim(0, total)
    ax.set_axis_off()
    at = _places(rows, high, legend)
    crowded = len(nodes) > 20
    for a, b, p in edges:
        lost = p is not None and p < alpha
        heavy = not lost and nodes[b].enough is True
        ax.add_line(
            Line2D(
                [at[a][0], at[b][0]], [at[a][1] + high / 2, at[b][1] - high / 2],
                color=INK if heavy else RULE if crowded else MUTED, lw=1.6 if heavy else 0.8,
                ls=(0, (3, 2.5)) if lost else "-", zorder=1.5 if heavy else 1,
            )
        )  # fmt: skip
    for row in rows:
        wide = (WIDTH - 0.2) / len(row) - (0.1 if len(row) <= 8 else 0.03)
        for i in row:
            _draw(ax, nodes[i], at[i], min(0.78 if letters else 1.55, wide), high, shown, letters)
    _legend(ax, legend, key)
    who = read.text(candidate, "name")
    said = read.text(read.part(candidate, "knock_outs"), "words")
    return finish(
        figure, name,
        title=f"Pathways that “{label(who, 60)}” needs",
        alt=_alt(nodes, edges, every, said),
        caption=(said + " " if said else "") + "Each box is the law with some of the pathways, "
        "fewer below, joined where one is proven to be a case of the other; p: how likely a fit "
        "worse by this much is if the pathways left out carry nothing.",
    )  # fmt: skip


def _places(rows: Sequence[Sequence[int]], high: float, floor: float) -> dict[int, Any]:
    at = {}
    for r, row in enumerate(rows):
        y = floor + 0.06 + high / 2 + r * (high + _GAP)
        for k, i in enumerate(row):
            at[i] = (WIDTH * (k + 0.5) / len(row) if len(row) < 3 else
                     0.1 + (WIDTH - 0.2) * (k + 0.5) / len(row), y)  # fmt: skip
    return at


def _draw(
    ax: Any,
    node: LatticeNode,
    at: tuple[float, float],
    wide: float,
    high: float,
    shown: Mapping[str, str],
    letters: bool,
) -> None:
    """A square-cornered heavy box where the pathways are enough, a round light one where not."""
    x, y = at
    good = node.enough is True
    stroke: Any = "-" if node.enough is not None else (0, (1, 1.6))
    ax.add_patch(
        FancyBboxPatch(
            (x - wide / 2, y - high / 2), wide, high,
            boxstyle="square,pad=0" if good else f"round,pad=0,rounding_size={min(high, wide) / 2.6}",
            fc=SHADE if good else PAPER, ec=INK if good else MUTED, lw=1.8 if good else 0.9,
            ls=stroke, zorder=2,
        )
    )  # fmt: skip
    names = [shown.get(p, "…") for p in node.pathways]
    mark = "✓" if good else "✗" if node.enough is False else "?"
    small = high < _HIGH
    text = ("" if letters else "\n").join(names)
    if small:
        words = f"{text}{mark}" if wide > 0.42 else text
        ax.text(x, y, words, ha="center", va="center", fontsize=7, zorder=3)
        return
    under = "all" if node.full else f"p {probability(node.p)}" if node.p is not None else "no test"
    if letters:
        text = f"{text} {mark}"
    else:
        under = f"{mark} {under}"
    ax.text(x, y + 0.095, text, ha="center", va="center", fontsize=9, linespacing=1.1, zorder=3)
    ax.text(x, y - high / 2 + 0.13, under, ha="center", va="center",
            fontsize=7.5 if letters else 8.5, zorder=3)  # fmt: skip


def _legend(ax: Any, top: float, key: Sequence[str]) -> None:
    y = top - 0.14
    for good, words in ((True, "✓  not worse than all pathways together"), (False, "✗  worse")):
        x = 0.1 if good else 3.2
        ax.add_patch(
            FancyBboxPatch((x, y - 0.05), 0.26, 0.12,
                           boxstyle="square,pad=0" if good else "round,pad=0,rounding_size=0.05",
                           fc=SHADE if good else PAPER, ec=INK if good else MUTED,
                           lw=1.8 if good else 0.9)
        )  # fmt: skip
        ax.text(x + 0.36, y, words, va="center", fontsize=8.5)
    y -= 0.2
    for lost, words in ((False, "one pathway fewer is no worse"), (True, "it is worse")):
        x = 3.2 if lost else 0.1
        ax.add_line(Line2D([x, x + 0.26], [y, y], color=MUTED if lost else INK,
                           lw=0.9 if lost else 1.6, ls=(0, (3, 2.5)) if lost else "-"))  # fmt: skip
        ax.text(x + 0.36, y, words, va="center", fontsize=8.5)
    for k, words in enumerate(key):
        ax.text(0.1 + 2.5 * (k % 2), y - 0.22 - 0.2 * (k // 2), words, va="center", fontsize=8.5)


def _alt(
    nodes: Sequence[LatticeNode], edges: Sequence[Any], every: Sequence[str], said: str
) -> str:
    out = (
        f"{count(len(nodes), 'law')} from sets of the pathways {listed(list(every))}, joined by "
        f"{count(len(edges), 'proven special case')}. "
        f"{count(sum(n.enough is True and not n.full for n in nodes), 'set')} of fewer pathways "
        "not worse than all together."
    )
    return out + (f" {said}" if said else "")
