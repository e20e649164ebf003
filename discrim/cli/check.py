"""Look at the conditioning of the runs before any fit is believed: lockstep, trade-offs, digits
lost, and what the table can and cannot decide. Rates may still be missing."""

from __future__ import annotations

import argparse

HELP = "what the runs can and cannot decide, before any fit"


def add_arguments(parser: argparse.ArgumentParser) -> None:
    from discrim.cli.parser import common

    common(parser)


def run(options: argparse.Namespace) -> int:
    from discrim.cli.output import look, show, show_json
    from discrim.report import text
    from discrim.study import load
    from discrim.weigh import check

    found = check(load(options.study))
    if options.json:
        show_json(found)
    elif options.quiet:
        show("\n".join(found.get("cannot_decide") or ["nothing stands in the way"]))
    else:
        show(text.check(found, **look()))
    return 0
