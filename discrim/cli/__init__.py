"""The command line: one command a file, each thin.

Exit codes. 0: it ran, whatever the verdicts. 1: it ran, but something asked for could not be
computed. 2: the input is wrong. 130: interrupted.

Nothing numerical is imported here: ``discrim --version`` and ``--help`` must stay quick.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence

from discrim.errors import DiscrimError

OK, NOT_COMPUTED, WRONG_INPUT, INTERRUPTED = 0, 1, 2, 130


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    from discrim.cli.parser import build

    try:
        options = build().parse_args(arguments)
    except SystemExit as finished:  # how argparse says "help was printed" or "wrong option"
        return finished.code if isinstance(finished.code, int) else WRONG_INPUT
    try:
        code = _run(options)
        sys.stdout.flush()
        return code
    except DiscrimError as problem:
        _complain(problem.message())
        return WRONG_INPUT
    except KeyboardInterrupt:
        _complain("Interrupted. Results from before stand as they were; nothing was overwritten.")
        return INTERRUPTED
    except BrokenPipeError:
        # Whoever read the output has closed it. Point standard output elsewhere, or the
        # interpreter would complain once more when it flushes at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return OK


def _run(options: argparse.Namespace) -> int:
    run = options.run
    code: int = run(options)
    return code


def _complain(text: str) -> None:
    from discrim.report.paper import write

    write(text + "\n", sys.stderr)
