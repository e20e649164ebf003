"""The text of a mechanism file (TOML) -> its record: steps, or a law where no steps give one."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.model import Mechanism, Step, WrittenLaw
from discrim.mechanism.parse import ASSUME_KEYS, parse_mechanism
from discrim.mechanism.step import parse_step

TEXTS = ("title", "field", "source", "note", "law", "overall")
OF_STEPS = ("sites", "catalyst", "steps", "assume", "species")
OF_LAWS = ("law", "overall")
KEYS = ("title", "field", "source", "note", *OF_STEPS, *OF_LAWS)

_HEADER = re.compile(r"\s*\[\s*([^\[\]]+?)\s*\]\s*(#.*)?\Z")
_KEY = re.compile(r"""\s*(?:"([^"]*)"|'([^']*)'|([A-Za-z0-9_-]+))\s*=\s*""")


def from_toml(text: str, *, file: str, name: str) -> Mechanism | WrittenLaw:
    """The record of what the text of a file holds; ``file`` is its name in messages.

    Raises
    ------
    DiscrimError
        for text that is no TOML, keys that are unknown or do not belong together, and whatever is
        wrong with the steps.
    """
    try:
        content = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise DiscrimError(
            f"no valid TOML: {str(error)[:120]}",
            place=_toml_place(str(error), text, file),
            do="Text stands in quotes, a table begins with [name].",
        ) from error
    lines = _lines(text, file, name)
    top = Place(file=file, what=f'mechanism "{name}"')
    _check(content, lines, top)
    if "law" in content:
        return _law(content, name, lines, top)
    steps = content.get("steps", {})
    mechanism = parse_mechanism(
        name=name,
        steps=steps,
        places={s: lines[("steps", s)] for s in steps if ("steps", s) in lines},
        sites=content.get("sites", ()),
        catalyst=content.get("catalyst", ()),
        assume=content.get("assume"),
        species=content.get("species"),
        title=content.get("title", ""),
        source=content.get("source", ""),
        note=content.get("note", ""),
        place=top,
    )
    return replace(mechanism, field=content.get("field", ""))


def _check(content: Mapping[str, Any], lines: Mapping[tuple[str, str], Place], top: Place) -> None:
    """Keys that are known, of the right kind, and of one of the two kinds of file."""
    for key in content:
        place = lines.get(("", key), lines.get((key, ""), top))
        if key not in KEYS:
            raise DiscrimError(
                f'unknown key "{key[:40]}"',
                place=place,
                do="Write it under [assume]."
                if key in ASSUME_KEYS
                else f"{nearest(key, KEYS)} Known: {', '.join(KEYS)}.".strip(),
            )
        if key in TEXTS and not isinstance(content[key], str):
            raise DiscrimError(f"{key} is not text", place=place, do="Write it in quotes.")
        if key in ("steps", "assume", "species") and not isinstance(content[key], Mapping):
            raise DiscrimError(
                f"{key} is not a table",
                place=place,
                do=f"Begin it with [{key}] on a line of its own.",
            )
        if key in OF_STEPS and "law" in content:
            raise DiscrimError(
                f'"{key}" belongs to a mechanism with steps, this file has a law',
                place=place,
                do="A file holds either steps or a law. Take one of them out.",
            )
        if key == "overall" and "law" not in content:
            raise DiscrimError(
                '"overall" belongs to a law; of steps it follows by itself',
                place=place,
                do="Take it out.",
            )


def _law(
    content: Mapping[str, Any],
    name: str,
    lines: Mapping[tuple[str, str], Place],
    top: Place,
) -> WrittenLaw:
    overall: Step | None = None
    if "overall" in content:
        place = lines.get(("", "overall"), top)
        overall = parse_step("overall", content["overall"], sites=(), place=place)
    return WrittenLaw(
        name=name,
        title=content.get("title", ""),
        text=content["law"],
        overall=overall,
        source=content.get("source", ""),
        note=content.get("note", ""),
        place=lines.get(("", "law"), top),
        field=content.get("field", ""),
    )


def _toml_place(message: str, text: str, file: str) -> Place:
    m = re.search(r"line (\d+), column (\d+)", message)
    rows = text.splitlines()
    line, column = (int(m.group(1)), int(m.group(2))) if m else (len(rows), 1)
    shown = rows[line - 1] if 0 < line <= len(rows) else ""
    return Place(file=file, line=line, column=min(column, len(shown) + 1), text=shown)


def _lines(text: str, file: str, name: str) -> dict[tuple[str, str], Place]:
    """Where each key stands: (table, key) -> place; a table itself is (table, "")."""
    out: dict[tuple[str, str], Place] = {}
    section = ""
    for number, line in enumerate(text.splitlines(), start=1):
        header = _HEADER.match(line)
        if header:
            section = header.group(1).strip()
            out.setdefault((section, ""), Place(file, number, 1, len(line.strip()), line))
            continue
        m = _KEY.match(line)
        if m:
            key = next(g for g in m.groups() if g is not None)
            what = f"step {key}" if section == "steps" else f'mechanism "{name}"'
            column = line.index(key) + 1
            out.setdefault((section, key), Place(file, number, column, len(key), line, what))
    return out
