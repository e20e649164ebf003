"""Derive, check, fit, compare and answer every question of the study; print the verdicts and write
the results folder."""

from __future__ import annotations

import argparse

HELP = "the main job: answer the study's questions and write the results"


def add_arguments(parser: argparse.ArgumentParser) -> None:
    from discrim.cli.parser import common, results, whole

    common(parser)
    results(parser)
    parser.add_argument(
        "--workers",
        type=whole(1),
        default=1,
        metavar="N",
        help="processes to use; weigh still runs in one, and answers never depend on it",
    )
    parser.add_argument(
        "--seed", type=whole(0), default=1, metavar="N", help="seed of random numbers (default 1)"
    )


def run(options: argparse.Namespace) -> int:
    from discrim.cli.output import Progress, results_folder
    from discrim.report.folder import check_free, write_report
    from discrim.study import load
    from discrim.weigh import weigh

    folder = results_folder(options)
    study = load(options.study)
    check_free(folder.expanduser().absolute())  # before the work, not after it
    progress = Progress(quiet=options.quiet)
    try:
        document = weigh(study, seed=options.seed, workers=options.workers, progress=progress)
        progress("writing the results")
        written = write_report(document, folder)
    finally:
        progress.close()
    return finish(document, written, options)


def finish(document: dict[str, object], folder: object, options: argparse.Namespace) -> int:
    """Print what was found and where it is, and return the exit code."""
    from pathlib import Path

    from discrim.cli.output import look, show, show_json, shown_path
    from discrim.report.content import not_computed
    from discrim.report.text import summary, verdicts

    assert isinstance(folder, Path)
    if options.json:
        show_json(document)
    elif options.quiet:
        show(verdicts(document, width=look()["width"]))
    else:
        show(summary(document, **look()))
        show(f"\nReport: {shown_path(folder / 'report.html')}")
    return 1 if not_computed(document) else 0
