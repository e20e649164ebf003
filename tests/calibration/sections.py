"""Words and tables of the parts."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import asdict

from tests.calibration.bars import MARGIN, too_often
from tests.calibration.cells import Cell
from tests.calibration.methods import ALPHA
from tests.calibration.rivals import RivalResult
from tests.calibration.size import Counts
from tests.calibration.trial import Outcome
from tests.calibration.verdicts import VerdictResult

BAR = ALPHA + MARGIN
Row = dict[str, object]
_METHODS = {
    "discrim": "discrim",
    "K": "K",
    "conditional": "conditional LR",
    "textbook F": "textbook F",
    "likelihood ratio": "errors-in-variables LR",
    "AIC by 2": "AIC by 2",
    "AIC by 4": "AIC by 4",
}
_MET = {True: "over", False: "within"}


def percent(x: float, digits: int = 1) -> str:
    return "" if x != x else f"{100 * x:.{digits}f} %"


def _cell_words(c: Cell) -> list[str]:
    origin = c.origin
    if c.shared != 1:
        origin += ", A shared by " + ("all runs" if c.shared == 0 else f"{c.shared} runs")
    rate = percent(c.rate_error) if c.law != "stirred tank" else "computed"
    if c.scale == "estimated":
        rate += ", unknown"
    if c.scale == "replicates":
        rate += f", replicates ({c.scale_df} df)"
    error = f"{100 * c.condition_error:g} %"
    if c.drawn != 1:
        error += f", truly {100 * c.condition_error * c.drawn:g} %"
    return [c.law, str(c.runs), f"{100 * c.spread:g} %", error, origin, rate]


_CELL_HEAD = ["law", "runs", "spread", "condition error", "origin", "rate error"]


def table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    lines = ["| " + " | ".join(head) + " |", "| " + " | ".join("---" for _ in head) + " |"]
    return lines + ["| " + " | ".join(r) + " |" for r in rows]


def csv_rows(part: str, results: Sequence[Counts], bar: float | None = BAR) -> list[Row]:
    out: list[Row] = []
    for r in results:
        for method, count in r.false.items():
            barred = method == "discrim" and r.cell.barred and bar is not None
            out.append(
                {
                    "part": part,
                    **asdict(r.cell),
                    "studies": r.studies,
                    "method": method,
                    "count": count,
                    "rate": f"{count / r.studies:.4f}",
                    "bar": bar if barred else "",
                }
            )
    return out


def _verdict_line(over: Sequence[bool], results: Sequence[Counts], what: str) -> str:
    held = [r for r in results if r.cell.barred]
    worst = max(held, key=lambda r: r.rate("discrim"))
    return (
        f"{len(held)} cells with a bar, {sum(over)} over it (one-sided binomial test of at most "
        f"{100 * BAR:g} %, Holm over the cells). The largest rate of {what} is "
        f"{percent(worst.rate('discrim'))} ({', '.join(_cell_words(worst.cell)[:5])})."
    )


def cells_section(
    intro: Sequence[str],
    groups: Mapping[str, Sequence[Counts]],
    methods: Sequence[str],
    what: str,
    *,
    with_share: bool = False,
) -> list[str]:
    """Rates by method, with what is over the bar."""
    results = [r for g in groups.values() for r in g]
    held = [r for r in results if r.cell.barred]
    over = too_often([r.false["discrim"] for r in held], [r.studies for r in held], BAR)
    marks = {r.cell: _MET[bool(o)] for r, o in zip(held, over, strict=True)}
    lines = [*intro, "", _verdict_line(over.tolist(), results, what), ""]
    for name, group in groups.items():
        if len(groups) > 1:
            lines += [f"### {name[0].upper()}{name[1:]}", ""]
        head = _CELL_HEAD + (["share"] if with_share else []) + [_METHODS[m] for m in methods]
        rows = []
        for r in group:
            row = _cell_words(r.cell) + ([percent(r.cell.share, 0)] if with_share else [])
            row += [percent(r.rate(m)) for m in methods]
            row.append(marks.get(r.cell, "no bar"))
            rows.append(row)
        lines += [*table([*head, "bar"], rows), ""]
    whole = sum(r.whole for r in results)
    if whole:
        contrary = sum(r.contrary for r in results)
        lines.append(
            f"Put through the whole of it besides, in {whole} studies: {contrary} against what the "
            "table counts."
        )
    missing = sum(r.missing for r in results)
    if missing:
        lines.append(f"{missing} studies could not be tested; they count as not claimed.")
    return lines


def power_section(intro: Sequence[str], results: Sequence[Counts]) -> list[str]:
    methods = ("oracle", "discrim", "K", "conditional", "likelihood ratio")
    names = ["oracle", "discrim", "K", "conditional LR", "errors-in-variables LR (size unbounded)"]
    rows = []
    under = barred = 0
    for r in results:
        ratio = r.false["discrim"] / max(r.false["oracle"], 1)
        bar = r.cell.well_spread and r.cell.scale == "stated"
        barred += bar
        under += bar and ratio < 0.9
        mark = "no bar" if not bar else ("under" if ratio < 0.9 else "met")
        rows.append(
            _cell_words(r.cell) + [percent(r.rate(m)) for m in methods] + [f"{ratio:.2f}", mark]
        )
    head = [*_CELL_HEAD, *names, "discrim over oracle", "at least 0.9"]
    verdict = f"{barred} well-spread cells with stated errors, {under} under 0.9 of the oracle."
    return [*intro, "", verdict, "", *table(head, rows)]


def rivals_section(
    intro: Sequence[str], results: Sequence[RivalResult]
) -> tuple[list[str], list[Row]]:
    missed = [r.studies - r.stands for r in results]
    over = too_often(missed, [r.studies for r in results], BAR)
    rows, kept = [], []
    for r, lost, o in zip(results, missed, over, strict=True):
        c = r.cell
        spread = "apart" if c.spread is None else f"B/A {100 * c.spread:g} %"
        rows.append(
            [
                c.true,
                str(c.number),
                "stated" if c.stated else "estimated",
                f"{100 * c.condition_error:g} %",
                spread,
                str(r.studies),
                f"{r.stands / r.studies:.3f}",
                percent(r.behind / r.studies),
                _MET[bool(o)],
            ]
        )
        for method, count in (("discrim", lost), ("AIC by 4", r.behind)):
            kept.append(
                {
                    "part": "rivals",
                    "law": f"{c.true}, {c.number} laws",
                    "runs": 20,
                    "spread": c.spread or "",
                    "condition_error": c.condition_error,
                    "rate_error": c.rate_error,
                    "scale": "stated" if c.stated else "estimated",
                    "studies": r.studies,
                    "method": method,
                    "count": count,
                    "rate": f"{count / r.studies:.4f}",
                    "bar": BAR if method == "discrim" else "",
                }
            )
    head = (
        "true law|laws|rate error|condition error|amounts|studies|true law stands|"
        "true law behind by AIC 4|bar"
    ).split("|")
    verdict = (
        f"{len(results)} cells, {sum(over)} over the bar (the true law rejected in more than "
        f"{100 * BAR:g} %, Holm). Over all of them the true law is rejected in "
        f"{percent(sum(missed) / sum(r.studies for r in results))} of the studies."
    )
    return [*intro, "", verdict, "", *table(head, rows)], kept


def verdicts_section(intro: Sequence[str], results: Sequence[VerdictResult]) -> list[str]:
    over = too_often([r.wrong_count for r in results], [r.studies for r in results], BAR)
    rows = []
    for r, o in zip(results, over, strict=True):
        c = r.cell
        shares = [
            percent(r.counts[w] / r.studies, 0) for w in ("participates", "negligible", "undecided")
        ]
        rows.append(
            [
                percent(c.share, 0),
                f"{100 * c.spread:g} %",
                f"{100 * c.condition_error:g} %, {c.origin}",
                *shares,
                percent(r.wrong),
                _MET[bool(o)],
            ]
        )
    head = (
        "B carries|spread of B/A|condition error, origin|participates|negligible|undecided|wrong|bar"
    ).split("|")
    return [*intro, "", *table(head, rows)]


def trial_section(intro: Sequence[str], seed: int, results: Sequence[Outcome]) -> list[str]:
    n = len(results)
    failed = [r for r in results if r.verdict.startswith("failed")]
    decided = [r for r in results if r.decided]
    wrong = [r for r in decided if r.wrong]
    limit = 0.05 + 2 * (0.05 * 0.95 / max(len(decided), 1)) ** 0.5
    share = len(wrong) / max(len(decided), 1)
    spread = [r for r in results if r.well_spread and r.oracle != "undecided"]
    found = [r for r in spread if r.decided]
    ratio = len(found) / max(len(spread), 1)
    counts = Counter(r.verdict if not r.verdict.startswith("failed") else "failed" for r in results)
    lines = [
        *intro,
        "",
        f"{n} studies: "
        + ", ".join(f"{counts[w]} {w}" for w in ("participates", "negligible", "undecided"))
        + f", {len(failed)} failed.",
        "",
        f"- Wrong among the {len(decided)} decided verdicts: {len(wrong)} ({percent(share)}); at most 5 % "
        f"and two binomial errors, {percent(limit)}: {'met' if share <= limit else 'NOT MET'}. Of all "
        f"{n} studies {percent(len(wrong) / max(n, 1))} are decided wrongly.",
        f"- Decided among the {len(spread)} well-spread studies that the oracle decides: {len(found)} "
        f"({percent(ratio)}); at least 85 %: {'met' if ratio >= 0.85 else 'NOT MET'}.",
        f"- In the {n - sum(r.well_spread for r in results)} studies that are not well spread the oracle "
        f"decides {sum(r.oracle != 'undecided' for r in results if not r.well_spread)}, discrim "
        f"{sum(r.decided for r in results if not r.well_spread)}.",
        "",
    ]
    told = [r for r in results if r.wrong or r.verdict.startswith("failed")]
    told += [r for r in spread if not r.decided and not r.verdict.startswith("failed")]
    if told:
        rows = [
            [
                f"{seed}, {r.number}",
                "wrong" if r.wrong else r.verdict if not r.decided else "",
                str(r.runs),
                f"`{'`, `'.join(r.candidates)}`",
                f"{100 * r.spread:.1f} %",
                f"{100 * r.condition_error:g} %, {r.origin}",
                f"{100 * r.rate_error:g} %, {r.scale}",
                f"{100 * r.effect:.1f} % (matters {100 * r.matters:g} %)",
                f"{r.verdict} ({r.oracle})",
            ]
            for r in told
        ]
        head = (
            "seed, study|why listed|runs|candidates|spread|condition error|rate error|effect|"
            "verdict (oracle)"
        ).split("|")
        lines += [*table(head, rows)]
    return lines
