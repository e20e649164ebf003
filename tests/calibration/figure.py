"""Size by spread, as an SVG file: how the methods fail in lockstep."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from tests.calibration.size import Counts

SHOWN = (
    ("textbook F", "textbook F, conditions exact", "#b3261e", "s"),
    ("likelihood ratio", "likelihood ratio, errors in variables", "#c77700", "^"),
    ("AIC by 4", "AIC lower by 4", "#6a6a6a", "v"),
    ("discrim", "discrim", "#1f4e9c", "o"),
)


def size_by_spread(results: Sequence[Counts], path: Path) -> None:
    """False claims against spread: two pathways, 12 runs, conditions measured, one panel for each of
    their errors."""
    import matplotlib as mpl
    from matplotlib.figure import Figure

    chosen = [
        r
        for r in results
        if r.cell.law == "two pathways"
        and r.cell.runs == 12
        and r.cell.origin == "measured"
        and r.cell.shared == 1
        and r.cell.scale == "stated"
        and r.cell.rate_error == 0.003
        and r.cell.barred
    ]
    errors = sorted({r.cell.condition_error for r in chosen})
    with mpl.rc_context({"svg.hashsalt": "calibration", "font.size": 9}):
        figure = Figure(figsize=(7.2, 3.5), layout="constrained")
        panels = figure.subplots(1, len(errors), sharey=True, squeeze=False)[0]
        for panel, error in zip(panels, errors, strict=True):
            line = sorted(
                (r for r in chosen if r.cell.condition_error == error), key=lambda r: r.cell.spread
            )
            x = [100 * r.cell.spread for r in line]
            for method, name, colour, marker in SHOWN:
                y = [100 * r.rate(method) for r in line]
                panel.plot(x, y, color=colour, marker=marker, markersize=4, lw=1.2, label=name)
            panel.axhline(5, color="black", lw=0.6, ls=":")
            panel.set_xscale("log")
            panel.set_xticks(x, [f"{value:g}" for value in x])
            panel.minorticks_off()
            panel.set_xlabel("spread of B/A, %")
            panel.set_title(f"condition errors {100 * error:g} %", fontsize=9)
            for side in ("top", "right"):
                panel.spines[side].set_visible(False)
        # once all panels are drawn: limits that are set earlier hold for the first one alone
        panels[0].set_ylim(0, 105 * max(r.rate(m) for r in chosen for m, *_ in SHOWN))
        panels[0].set_ylabel("false claims that B takes part, %")
        handles, names = panels[0].get_legend_handles_labels()
        figure.legend(
            handles, names, loc="outside lower center", ncols=4, frameon=False, fontsize=8
        )
        figure.savefig(path, format="svg", metadata={"Date": None})
