"""A small study, and a folder with results from before in which commands go wrong.

The study and its numbers are invented.
"""

from __future__ import annotations

import re
from itertools import pairwise
from pathlib import Path
from typing import Any

from discrim import cli

TABLE = """\
run,a,b,lot,rate
1,10.0,2.0,x,1.31
2,10.0,8.0,x,2.22
3,20.0,2.0,x,2.29
4,20.0,8.0,y,3.24
5,40.0,2.0,y,4.31
6,40.0,8.0,y,5.22
7,15.0,5.0,y,2.25
"""
STUDY = """\
title = "Does B open a pathway of its own?"
table = "runs.csv"

[reactor]
kind = "rates"

[columns.run]
is = "run"

[columns.a]
is = "A"
units = "mmol/L"
error = { sd = "0.5 %", origin = "set" }

[columns.b]
is = "B"
units = "mmol/L"
error = "1 %"

[columns.rate]
is = "rate of P"
units = "umol/L/s"
error = "2 %"

[conditions.W]
value = "55.5 mol/L"
error = "exact"

[derived]
AB = { formula = "[A]*[B]/([A] + [B])", units = "mmol/L" }

[constants]
k_by_a = { start = "1e-4 1/s", at_most = "1e3 1/s" }

[[candidates]]
name = "two pathways"
[candidates.steps]
by_a = "A -> P"
by_b = "B -> P"

[[candidates]]
name = "A alone"
law = "k*[A]"
overall = "A -> P"

[[questions]]
participates = "B"
matters_above = "5 %"
at = { A = "20 mmol/L" }

[[questions]]
stands = "all"

[[exclude]]
where = { run = 7 }
reason = "valve not flushed"

[controls]
transport = { done = "two stirrer speeds" }

[[other_evidence]]
says = "no label in the product"
source = "notebook 12"
against = ["A alone"]

[confidence]
level = 0.95
"""


class Desk:
    """A folder with a study, its table and results from before; runs commands in it."""

    def __init__(self, folder: Path, capsys: Any) -> None:
        self.folder = folder
        self.capsys = capsys
        self.before: dict[str, bytes] = {}

    def write(self, study: str | bytes = STUDY, table: str | bytes = TABLE) -> None:
        for name, content in (("study.toml", study), ("runs.csv", table)):
            data = content if isinstance(content, bytes) else content.encode()
            (self.folder / name).write_bytes(data)

    def everything(self) -> dict[str, bytes]:
        """Every file in the folders below."""
        return {
            str(path.relative_to(self.folder)): path.read_bytes()
            for path in sorted(self.folder.rglob("*"))
            if path.is_file() and path.parent != self.folder
        }

    def run(self, *arguments: str) -> tuple[int, str, str]:
        code = cli.main(list(arguments) or ["weigh", "study.toml"])
        out, err = self.capsys.readouterr()
        return code, out, err

    def refused(self, *arguments: str) -> str:
        """The message of a command that must be refused and change nothing."""
        names = {p.name for p in self.folder.iterdir()}
        code, out, err = self.run(*arguments)
        assert (code, out) == (2, ""), err
        assert self.everything() == self.before
        assert {p.name for p in self.folder.iterdir()} == names
        assert len(err) < 2500
        assert all(ch.isprintable() or ch == "\n" for ch in err)
        assert "Traceback" not in err
        return err


def underlined(message: str) -> str:
    """The characters that a message underlines, "" if none."""
    lines = message.splitlines()
    for shown, marks in pairwise(lines):
        if re.fullmatch(r"    \s*\^+", marks):
            return shown[marks.index("^") : len(marks)]
    return ""
