"""Write the report again from the saved evidence, without fitting. STUDY is the study file, its
results folder, or an evidence.json."""

from __future__ import annotations

import argparse
from pathlib import Path

HELP = "write the report again from the saved evidence"


def add_arguments(parser: argparse.ArgumentParser) -> None:
    from discrim.cli.parser import common, results

    common(parser, study="the study file, its results folder, or an evidence.json")
    results(parser)


def run(options: argparse.Namespace) -> int:
    from discrim.cli.output import results_folder
    from discrim.cli.weigh import finish
    from discrim.report.folder import load_evidence, write_report

    given = Path(options.study)
    if given.is_dir() or given.suffix == ".json":
        found = given
        folder = Path(options.out) if options.out else (given if given.is_dir() else given.parent)
    else:
        folder = results_folder(options)
        found = folder
    document = load_evidence(found)
    written = write_report(document, folder)
    return finish(document, written, options)
