"""Print each rate law, how it was derived, what it assumes, and which candidates are the same.

With --library: list the mechanisms that come with discrim, or those that all the words match.
"""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import Any

from discrim.errors import DiscrimError

HELP = "print the rate laws and how they follow from the steps"


def add_arguments(parser: argparse.ArgumentParser) -> None:
    from discrim.cli.parser import common

    common(
        parser,
        study="a study or mechanism file (TOML), or a mechanism of the library by name",
        needed=False,
    )
    parser.add_argument(
        "--latex",
        action="store_true",
        help="print each derivation as LaTeX, for the supporting information of a paper",
    )
    parser.add_argument(
        "--library",
        nargs="*",
        metavar="WORD",
        help="list the library; with words, what matches all of them: by name, description, "
        "field, source or species",
    )


def run(options: argparse.Namespace) -> int:
    if options.library is not None:
        return _library(options)
    if options.study is None:
        raise DiscrimError(
            "derive what?",
            do="Name a study, a mechanism file or a mechanism of the library, as in `discrim derive "
            "enzyme-competitive`. `discrim derive --library` lists the library.",
        )
    from discrim.cli.output import look, show, show_json
    from discrim.report.text import laws
    from discrim.weigh import derive_all, derive_mechanism

    given = Path(options.study)
    of_library = not given.exists() and not given.suffix and len(given.parts) == 1
    if of_library or is_mechanism(given):
        found: list[dict[str, Any]] = [derive_mechanism(options.study)]
    else:
        from discrim.study import load

        found = derive_all(load(options.study))
    if options.json:
        show_json(found)
    elif options.latex:
        show("\n".join(c.get("derivation_latex", "") for c in found))
    elif options.quiet:
        show("\n".join(f"{c.get('name', '')}: {c.get('law', '')}" for c in found))
    else:
        show(laws(found, **look()))
    return 0


def _library(options: argparse.Namespace) -> int:
    from dataclasses import asdict

    from discrim.cli.output import look, show, show_json
    from discrim.mechanism.catalogue import entries, search, suggestions
    from discrim.report.listing import listing

    words = [w for w in (options.study, *options.library) if w and w.strip()]
    every = entries()
    found = search(words, every)
    if options.json:
        show_json([asdict(e) for e in found])
    elif options.quiet:
        if found:
            show("\n".join(e.name for e in found))
    else:
        hints = [] if found else suggestions(words, every)
        show(listing(found, words, hints, **look()))
    return 0


def is_mechanism(path: Path) -> bool:
    """Whether the file is a mechanism (it has steps or a law at the top and nothing of a study).

    Anything that cannot be read as TOML counts as a study, whose reader says what is wrong.
    """
    import tomllib

    try:
        if not path.is_file() or path.stat().st_size > 2_000_000:
            return False
        top = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return False
    return (
        bool({"steps", "law"} & top.keys()) and not {"table", "candidates", "columns"} & top.keys()
    )
