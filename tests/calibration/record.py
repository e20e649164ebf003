"""The kept figures: `figures.md` by parts, `figures.csv` by cells and methods, replaced part by part."""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping, Sequence
from pathlib import Path

HERE = Path(__file__).parent
HEAD = """# Calibration

How often verdicts are false, intervals miss and effects are found, on simulated studies. Made by
`python -m tests.calibration.run`; every part says with which seed and when. The answer does not depend on
the number of processes. `figures.csv` holds every cell by every method.

![False claims by spread](size_by_spread.svg)
"""
COLUMNS = (
    "part law runs spread condition_error rate_error origin shared share scale scale_df drawn "
    "studies method count rate bar"
).split()
_MARK = re.compile(r"<!-- part: (\w+) -->\n(.*?)(?=<!-- part: |\Z)", re.DOTALL)


def kept_sections(path: Path) -> dict[str, str]:
    """The parts of a `figures.md` that is there already."""
    if not path.exists():
        return {}
    return {m[1]: m[2].strip() for m in _MARK.finditer(path.read_text(encoding="utf-8"))}


def keep(
    part: str,
    lines: Sequence[str],
    rows: Sequence[Mapping[str, object]],
    order: Sequence[str],
    folder: Path = HERE,
) -> None:
    """Replace one part in both files; parts that are not of ``order`` are dropped."""
    text = folder / "figures.md"
    sections = {**kept_sections(text), part: "\n".join(lines).strip()}
    body = [HEAD]
    body += [f"<!-- part: {p} -->\n{sections[p]}\n" for p in order if p in sections]
    text.write_text("\n".join(body), encoding="utf-8")

    table = folder / "figures.csv"
    every: dict[str, list[Mapping[str, object]]] = {}
    if table.exists():
        with open(table, newline="", encoding="utf-8") as file:
            for row in csv.DictReader(file):
                if set(row) == set(COLUMNS):
                    every.setdefault(row["part"], []).append(row)
    if rows:
        every[part] = list(rows)
    with open(table, "w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, COLUMNS, lineterminator="\n")
        writer.writeheader()
        for p in order:
            writer.writerows({c: row.get(c, "") for c in COLUMNS} for row in every.get(p, []))
