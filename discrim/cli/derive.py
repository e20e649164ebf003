"""Print each rate law, how it was derived, what it assumes, and which candidates are the same."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import Any

HELP = "print the rate laws and how they follow from the steps"


def add_arguments(parser: argparse.ArgumentParser) -> None:
    from discrim.cli.parser import common

    common(parser, study="a study or mechanism file (TOML), or a mechanism of the library by name")


def run(options: argparse.Namespace) -> int:
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
    elif options.quiet:
        show("\n".join(f"{c.get('name', '')}: {c.get('law', '')}" for c in found))
    else:
        show(laws(found, **look()))
    return 0


def is_mechanism(path: Path) -> bool:
    """Whether the file is a mechanism (it has steps at the top and no table, as a study has).

    Anything that cannot be read as TOML counts as a study, whose reader says what is wrong.
    """
    import tomllib

    try:
        if not path.is_file() or path.stat().st_size > 2_000_000:
            return False
        top = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return False
    return "steps" in top and not {"table", "candidates", "columns"} & top.keys()
