"""The results folder: written beside its place, then moved into it, so that a crash leaves the old.

A folder is only replaced when discrim made it (it holds an ``evidence.json`` of ours); what the
user has added to it is carried over.
"""

from __future__ import annotations

import csv
import json
import os
import secrets
import shutil
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from discrim.errors import DiscrimError, Place
from discrim.report import read
from discrim.report.constants import KINDS
from discrim.report.read import Document

EVIDENCE = "evidence.json"
#: Names at the top of a results folder that are ours to replace.
OURS = (
    EVIDENCE,
    "report.html",
    "candidates.csv",
    "constants.csv",
    "quantities.csv",
    "runs.csv",
    "figures",
)


def write_report(document: Document, folder: str | os.PathLike[str]) -> Path:
    """Write report, evidence, tables and figures to ``folder`` and return its path.

    Raises
    ------
    DiscrimError
        If something stands at ``folder`` that discrim did not make, or it cannot be written.
    ValueError
        If the document holds a number that JSON has no word for (nan, infinity).
    """
    out = Path(folder).expanduser()
    out = out.resolve() if out.is_symlink() else out.absolute()
    check_free(out)
    staged = out.with_name(f".{out.name}.new-{secrets.token_hex(4)}")
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        staged.mkdir()
        try:
            _fill(document, staged)
            _move_into_place(staged, out)
        finally:
            shutil.rmtree(staged, ignore_errors=True)
    except OSError as problem:
        raise DiscrimError(
            f"the results cannot be written: {problem.strerror or problem}",
            place=Place(file=str(folder)),
            do="Free some space or choose another folder with --out. Nothing was overwritten.",
        ) from problem
    return out


def check_free(out: Path) -> None:
    """Raise a ``DiscrimError`` unless ``out`` is absent, empty, or a results folder of ours."""
    if not out.exists():
        _check_parent(out)
        return
    if not out.is_dir():
        raise DiscrimError(
            "a file stands where the results folder should be",
            place=Place(file=str(out)),
            do="Choose another folder with --out.",
        )
    if any(out.iterdir()) and not _is_ours(out):
        raise DiscrimError(
            "this folder holds files that discrim did not make, and is left alone",
            place=Place(file=str(out)),
            do="Choose a new or empty folder with --out.",
        )
    _check_parent(out)


def load_evidence(path: Path) -> dict[str, Any]:
    """The document saved in a results folder (or in the file itself).

    Raises
    ------
    DiscrimError
        If there is none, or it is not a document of discrim.
    """
    file = path / EVIDENCE if path.is_dir() else path
    place = Place(file=str(file))
    again = "Run `discrim weigh` on the study to make it."
    try:
        if file.exists() and not file.is_file():  # a pipe or a device could be read for ever
            raise OSError("no file")
        text = file.read_text(encoding="utf-8")
        document = json.loads(text, parse_constant=_no_number)
    except FileNotFoundError:
        raise DiscrimError("there is no saved evidence here", place=place, do=again) from None
    except (OSError, ValueError, RecursionError) as problem:
        words = "this is not a file of saved evidence"
        raise DiscrimError(f"{words} ({_short(problem)})", place=place, do=again) from None
    if not isinstance(document, dict) or "format" not in document:
        raise DiscrimError(
            'this is not saved evidence: it has no "format"', place=place, do=again
        ) from None
    if document["format"] != 1:
        raise DiscrimError(
            f"this evidence has format {read.clean(document['format'])[:40]}; "
            "this version of discrim reads format 1",
            place=place,
            do="Use the version of discrim that wrote it, or run `discrim weigh` again.",
        )
    return document


def _no_number(word: str) -> Any:
    raise ValueError(f"it holds {word}")


def _short(problem: Exception) -> str:
    return " ".join(str(problem).split())[:120] or type(problem).__name__


def _check_parent(out: Path) -> None:
    """Raise unless the folder that would hold ``out`` is one, or can be made."""
    holder = next((p for p in out.parents if p.exists()), out.parent)
    if not holder.is_dir():
        says = "a file stands where a folder of the results should be"
    elif not os.access(holder, os.W_OK | os.X_OK):
        says = "nothing can be written in this folder"
    else:
        return
    raise DiscrimError(says, place=Place(file=str(holder)), do="Choose another folder with --out.")


def _is_ours(out: Path) -> bool:
    try:
        load_evidence(out / EVIDENCE)
    except DiscrimError as problem:
        return "this evidence has format" in problem.says
    return True


def _fill(document: Document, folder: Path) -> None:
    """All files of a results folder into the empty ``folder``."""
    from discrim.report.figures import draw
    from discrim.report.html import page

    text = as_json(document)
    pictures = draw(document)
    (folder / EVIDENCE).write_text(text, encoding="utf-8", newline="\n")
    (folder / "report.html").write_text(page(document, pictures), encoding="utf-8", newline="\n")
    (folder / "figures").mkdir()
    for picture in pictures:
        (folder / "figures" / f"{picture.name}.svg").write_text(
            picture.svg, encoding="utf-8", newline="\n"
        )
        (folder / "figures" / f"{picture.name}.png").write_bytes(picture.png())
    _write_csv(folder / "candidates.csv", candidate_rows(document))
    _write_csv(folder / "constants.csv", constant_rows(document))
    _write_csv(folder / "runs.csv", run_rows(document))
    if any(read.records(c, "reported") for c in read.records(document, "candidates")):
        _write_csv(folder / "quantities.csv", constant_rows(document, "reported"))


def _move_into_place(staged: Path, out: Path) -> None:
    """Swap the folders; the old one is kept until the new one stands in its place."""
    if not out.exists():
        staged.rename(out)
        return
    old = out.with_name(f".{out.name}.old-{secrets.token_hex(4)}")
    out.rename(old)
    try:
        staged.rename(out)
    except BaseException:  # an interruption too
        old.rename(out)
        raise
    for entry in list(old.iterdir()):
        if entry.name not in OURS:
            entry.rename(out / entry.name)
    shutil.rmtree(old, ignore_errors=True)


def as_json(document: Any) -> str:
    """JSON with one record a line and lists of numbers kept on one; refuses nan and infinity."""
    return _json(document, 0) + "\n"


def _json(item: Any, depth: int) -> str:
    pad, end = " " * (depth + 1), " " * depth
    if isinstance(item, dict) and item:
        inner = (f"{pad}{json.dumps(str(k))}: {_json(v, depth + 1)}" for k, v in item.items())
        return "{\n" + ",\n".join(inner) + f"\n{end}}}"
    if isinstance(item, list | tuple) and any(isinstance(x, dict | list | tuple) for x in item):
        return "[\n" + ",\n".join(pad + _json(x, depth + 1) for x in item) + f"\n{end}]"
    return json.dumps(item, ensure_ascii=False, allow_nan=False)


def cell(item: Any) -> Any:
    """A cell that a spreadsheet will not run: text that starts like a formula gets a mark."""
    if item is None:
        return ""
    if isinstance(item, bool):
        return "true" if item else "false"
    if isinstance(item, int | float):
        return repr(item)
    text = "; ".join(map(read.clean, item)) if isinstance(item, list | tuple) else read.clean(item)
    return "'" + text if text.startswith(("=", "+", "-", "@")) and not _numeric(text) else text


def _numeric(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _write_csv(path: Path, rows: Iterable[Sequence[Any]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        for row in rows:
            writer.writerow([cell(item) for item in row])


_CANDIDATE_KEYS = (
    "name", "outcome", "status", "law", "n_constants", "degrees_of_freedom", "objective", "rss",
    "fit_p", "log_likelihood", "aic", "aicc", "bic", "weight", "condition_number", "digits_lost",
    "inseparable_from", "same_law_as", "no_better_than", "reasons",
)  # fmt: skip


def candidate_rows(document: Document) -> list[list[Any]]:
    """Rows of ``candidates.csv``, the head first."""
    found = read.records(document, "candidates")
    return [list(_CANDIDATE_KEYS), *([c.get(k) for k in _CANDIDATE_KEYS] for c in found)]


def constant_rows(document: Document, key: str = "constants") -> list[list[Any]]:
    """Rows of ``constants.csv``, the head first: both ends of each interval and how they ended.

    With ``key`` "reported" those of ``quantities.csv``.
    """
    own = key == "constants"
    head = ["candidate", "constant" if own else "quantity", "units", "value", "standard_error"]
    head.append("at_bound" if own else "formula")
    for kind in KINDS:
        head += [f"{kind}_low", f"{kind}_low_end", f"{kind}_high", f"{kind}_high_end"]
    rows: list[list[Any]] = [[*head, "meaning" if own else "remark"]]
    for c in read.records(document, "candidates"):
        for k in read.records(c, key):
            row = [c.get("name"), *(k.get(key) for key in ("name", "units", "value"))]
            row += [k.get("standard_error"), k.get("at_bound" if own else "formula")]
            for kind in KINDS:
                ends = [*read.items(read.part(k, "intervals"), kind), None, None]
                how = [*read.items(read.part(k, "interval_ends"), kind), None, None]
                row += [ends[0], how[0], ends[1], how[1]]
            rows.append([*row, k.get("meaning" if own else "reason")])
    return rows


def run_rows(document: Document) -> list[list[Any]]:
    """Rows of ``runs.csv``, the head first: the table, then each candidate's fit to it."""
    runs = read.part(document, "runs")
    labels, kept = read.items(runs, "labels"), read.items(runs, "kept")
    shown = read.records(runs, "columns")
    head = ["run", "kept", *(_with_units(read.text(c, "name"), c) for c in shown)]
    rows: list[list[Any]] = [
        [label, kept[i] if i < len(kept) else None, *(_at(c, i) for c in shown)]
        for i, label in enumerate(labels)
    ]
    for c in read.records(document, "candidates"):
        fitted = read.records(c, "fitted")
        for observed in dict.fromkeys(read.text(f, "column") for f in fitted):
            found = {read.text(f, "run"): f for f in fitted if read.text(f, "column") == observed}
            of = f"{observed}, {read.text(c, 'name')}"
            first = next(iter(found.values()))
            head += [_with_units(f"predicted {of}", first), _with_units(f"residual {of}", first)]
            head.append(f"standardised residual {of}")
            head += [_with_units(f"band {end} {of}", first) for end in ("low", "high")]
            for label, row in zip(labels, rows, strict=True):
                f = found.get(read.clean(label), {})
                row += [f.get("predicted"), f.get("residual"), f.get("standardised")]
                row += [f.get("fit_low"), f.get("fit_high")]
    return [head, *rows]


def _with_units(name: str, record: Any) -> str:
    units = read.text(record, "units")
    return f"{name} [{units}]" if units not in ("", "1") else name


def _at(column: Any, i: int) -> Any:
    values, labels = read.items(column, "values"), read.items(column, "labels")
    found = values[i] if i < len(values) else None
    return labels[i] if found is None and i < len(labels) else found
