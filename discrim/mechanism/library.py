"""Mechanisms in files: the shipped library, files beside a study, and renaming their species."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.check import species_of
from discrim.mechanism.model import Mechanism, Species, Step
from discrim.mechanism.parse import parse_mechanism
from discrim.mechanism.step import is_species_name, side_text

MAX_BYTES = 1_000_000
KEYS = ("title", "source", "note", "sites", "catalyst", "steps", "assume", "species")

_HEADER = re.compile(r"\s*\[\s*([^\[\]]+?)\s*\]\s*(#.*)?\Z")
_KEY = re.compile(r"""\s*(?:"([^"]*)"|'([^']*)'|([A-Za-z0-9_-]+))\s*=\s*""")


def folder() -> Path:
    """The shipped library: inside an installed package, or beside it in a checkout."""
    package = Path(__file__).resolve().parent.parent
    inside = package / "_mechanisms"
    return inside if inside.is_dir() else package.parent / "mechanisms"


def names() -> tuple[str, ...]:
    """Names of the shipped mechanisms, in alphabetical order."""
    return tuple(sorted(p.stem for p in folder().glob("*.toml")))


def load_mechanism(name_or_path: str, base: Path, *, place: Place | None = None) -> Mechanism:
    """A mechanism of the shipped library by its name, or a file under ``base`` by its path.

    A text with ``/`` or ending in ``.toml`` is a path, relative to ``base`` and never outside it.
    ``place`` is where the study names it.
    """
    if not isinstance(name_or_path, str) or not name_or_path:
        raise DiscrimError(
            "no name of a mechanism", place=place, do='Write mechanism = "complex-then-product".'
        )
    if name_or_path.endswith(".toml") or "/" in name_or_path or "\\" in name_or_path:
        path = _under(base, name_or_path, place)
        return read_mechanism(path, shown=name_or_path, place=place)
    if name_or_path not in names():
        hint = nearest(name_or_path, names())
        raise DiscrimError(
            f'no mechanism is called "{name_or_path[:60]}"',
            place=place,
            do=f"{hint} There are: {', '.join(names())}. A file is named by its path, ending in "
            ".toml.".strip(),
        )
    path = folder() / f"{name_or_path}.toml"
    return read_mechanism(path, shown=f"mechanisms/{path.name}", place=place)


def _under(base: Path, name: str, place: Place | None) -> Path:
    root = base.resolve()
    clean = name.replace("\\", "/")
    path = (root / clean).resolve()
    if Path(clean).is_absolute() or ":" in clean or not path.is_relative_to(root):
        raise DiscrimError(
            f'"{name[:80]}" leads outside the folder of the study',
            place=place,
            do="Put the mechanism beside the study, or in a folder below it.",
        )
    return path


def read_mechanism(path: Path, *, shown: str, place: Place | None = None) -> Mechanism:
    """Read one file; ``shown`` is its name in messages."""
    try:
        if path.exists() and not path.is_file():  # a pipe or a device could be read for ever
            raise DiscrimError(f'"{shown}" is no file', place=place, do="Give a mechanism's file.")
        if path.stat().st_size > MAX_BYTES:
            raise DiscrimError(
                f'"{shown}" is larger than {MAX_BYTES // 1000} kB',
                place=place,
                do="A mechanism is a short TOML file; check that it is the right one.",
            )
        text = path.read_bytes().decode("utf-8")
    except (FileNotFoundError, NotADirectoryError, IsADirectoryError, PermissionError) as error:
        raise DiscrimError(
            f'"{shown}" cannot be read',
            place=place,
            do="Check the name and that the file exists. Paths are relative to the study.",
        ) from error
    except UnicodeDecodeError as error:
        raise DiscrimError(
            f'"{shown}" is not text in UTF-8', place=place, do="Save it as UTF-8 text."
        ) from error
    return mechanism_from_toml(text, file=shown, name=path.stem)


def mechanism_from_toml(text: str, *, file: str, name: str) -> Mechanism:
    """The mechanism that the text of a TOML file holds."""
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
    for key in content:
        if key not in KEYS:
            raise DiscrimError(
                f'unknown key "{key[:40]}"',
                place=lines.get(("", key), lines.get((key, ""), top)),
                do=f"{nearest(key, KEYS)} Known: {', '.join(KEYS)}.".strip(),
            )
    for key in ("title", "source", "note"):
        if not isinstance(content.get(key, ""), str):
            raise DiscrimError(
                f"{key} is not text", place=lines.get(("", key), top), do="Write it in quotes."
            )
    for key in ("steps", "assume", "species"):
        if not isinstance(content.get(key, {}), Mapping):
            raise DiscrimError(
                f"{key} is not a table",
                place=lines.get(("", key), top),
                do=f"Begin it with [{key}] on a line of its own.",
            )
    steps = content.get("steps", {})
    return parse_mechanism(
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


def bind(mechanism: Mechanism, names_of: Mapping[str, str]) -> Mechanism:
    """The mechanism with species renamed, on sites too: ``{"A": "H2"}`` makes ``A*`` ``H2*``.

    Names of steps, and so of constants, stay as they are.
    """
    every = species_of(mechanism)
    bodies = {_body(s): None for s in every if s.name != s.site}
    for old, new in names_of.items():
        if old not in bodies:
            raise DiscrimError(
                f'bind renames "{str(old)[:40]}", which is no species of the mechanism',
                place=mechanism.place,
                do=f"{nearest(str(old), bodies)} Species: {', '.join(bodies)}.".strip(),
            )
        if not isinstance(new, str) or not is_species_name(new):
            raise DiscrimError(
                f'bind gives {old} the name "{str(new)[:40]}", which is no name of a species',
                place=mechanism.place,
                do="A name begins with a letter or digit and holds letters, digits and "
                "_ - + ^ ( ) . , ' only; the site sign stays with the mechanism.",
            )
    renamed = {old: names_of.get(old, old) for old in bodies}
    seen: dict[str, str] = {}
    for old, new in renamed.items():
        if new in seen:
            raise DiscrimError(
                f'bind makes "{seen[new]}" and "{old}" one species "{new}"',
                place=mechanism.place,
                do="Give each species of the mechanism a name of its own, or write the steps out "
                "in the study.",
            )
        seen[new] = old

    def moved(species: Species) -> Species:
        if species.name == species.site:
            return species
        return replace(species, name=renamed[_body(species)] + species.site * species.occupies)

    by_name = {s.name: moved(s).name for s in every}

    def step(old: Step) -> Step:
        left = tuple((moved(s), n) for s, n in old.left)
        right = tuple((moved(s), n) for s, n in old.right)
        arrow = "<=>" if old.reversible else "->"
        return replace(
            old, left=left, right=right, text=f"{side_text(left)} {arrow} {side_text(right)}"
        )

    return replace(
        mechanism,
        steps=tuple(step(s) for s in mechanism.steps),
        catalyst=tuple(by_name[n] for n in mechanism.catalyst),
        steady=None if mechanism.steady is None else tuple(by_name[n] for n in mechanism.steady),
        formulas={by_name[n]: f for n, f in mechanism.formulas.items()},
        charges={by_name[n]: c for n, c in mechanism.charges.items()},
    )


def _body(species: Species) -> str:
    return (
        species.name.removesuffix(species.site * species.occupies)
        if species.site
        else (species.name)
    )
