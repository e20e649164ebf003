"""Where output goes: results on standard output, progress on standard error."""

from __future__ import annotations

import argparse
import json
import os
import shutil
import sys
from pathlib import Path
from typing import Any

from discrim.errors import DiscrimError, Place
from discrim.report.paper import WIDTH, is_terminal, wants_colour, write


def show(text: str) -> None:
    """Print results."""
    write(text if text.endswith("\n") else text + "\n", sys.stdout)


def show_json(record: Any) -> None:
    """Print a record as JSON; nan and infinity would be a bug and raise."""
    ascii_only = (sys.stdout.encoding or "").lower().replace("-", "") != "utf8"
    show(json.dumps(record, ensure_ascii=ascii_only, allow_nan=False, indent=1))


def look() -> dict[str, Any]:
    """Width and colour for text on standard output: the terminal's, 80 columns elsewhere."""
    width = WIDTH
    if is_terminal(sys.stdout):
        width = min(max(shutil.get_terminal_size((WIDTH, 24)).columns, 60), 100)
    return {"width": width, "colour": wants_colour(sys.stdout, os.environ)}


class Progress:
    """One line on a terminal's standard error, rewritten; elsewhere it does nothing.

    Called as ``progress(words, done, total)``.
    """

    def __init__(self, *, quiet: bool = False) -> None:
        self.on = not quiet and is_terminal(sys.stderr)
        self.shown = 0

    def __call__(self, words: str, done: int = 0, total: int = 0) -> None:
        if not self.on:
            return
        line = f"{done}/{total} {words}" if total else words
        line = "".join(ch if ch.isprintable() else " " for ch in line)[: WIDTH - 1]
        write("\r" + line.ljust(self.shown), sys.stderr)
        sys.stderr.flush()
        self.shown = len(line)

    def close(self) -> None:
        if self.on and self.shown:
            sys.stderr.write("\r" + " " * self.shown + "\r")
            sys.stderr.flush()
        self.shown = 0


def results_folder(options: argparse.Namespace) -> Path:
    """Where the results of the study go: ``--out``, or ``results/<study name>`` beside it."""
    if options.out is not None:
        if not options.out.strip():
            raise DiscrimError("--out is empty", do="Name a folder, or leave --out away.")
        return Path(options.out)
    study = Path(options.study)
    if not study.stem.strip("."):
        raise DiscrimError(
            "this is not the name of a study file",
            place=Place(file=options.study),
            do="Name the study's TOML file.",
        )
    return study.parent / "results" / study.stem


def shown_path(path: Path) -> str:
    """The path from here if it lies below, else in full."""
    try:
        return str(path.relative_to(Path.cwd()))
    except ValueError:
        return str(path)
