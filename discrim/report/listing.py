"""The library of mechanisms as a list for the terminal."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import groupby

from discrim.mechanism.catalogue import Entry
from discrim.report.paper import WIDTH, Paper

_LEAD = 38  # the most characters that names take; a longer one pushes its description on


def listing(
    found: Sequence[Entry],
    words: Sequence[str],
    hints: Sequence[str],
    *,
    width: int = WIDTH,
    colour: bool = False,
) -> str:
    """Name and description of each entry, by field; ``hints`` where nothing was found.

    Parameters
    ----------
    found : in the order of their fields
    words : what was searched for, if anything
    """
    paper = Paper(width=width, colour=colour)
    about = " ".join(words)
    if not found:
        paper.say(f"Nothing in the library matches “{about[:60]}”.")
        paper.bullets(hints)
        return str(paper)
    column = 2 + min(_LEAD, 2 + max(len(e.name) for e in found))
    for field, group in groupby(found, key=lambda e: e.field):
        paper.heading(field[:1].upper() + field[1:] or "Other")
        for entry in group:
            gap = max(2, column - 2 - len(entry.name))
            paper.say(entry.name + " " * gap + entry.title, indent=2, hang=column)
    n = len(found)
    paper.blank()
    paper.say(
        f"{n} {'mechanism' if n == 1 else 'mechanisms'}"
        + (f" for “{about[:60]}”" if about else "")
        + ". `discrim derive NAME` prints the law and how it follows; a study takes one with "
        'mechanism = "NAME".'
    )
    return str(paper)
