"""Mechanism files: the shipped library by name, files beside a study by path."""

from __future__ import annotations

from pathlib import Path

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.model import Mechanism, WrittenLaw
from discrim.mechanism.written import from_toml

MAX_BYTES = 1_000_000


def folder() -> Path:
    """The shipped library: inside an installed package, or beside it in a checkout."""
    package = Path(__file__).resolve().parent.parent
    inside = package / "_mechanisms"
    return inside if inside.is_dir() else package.parent / "mechanisms"


def names() -> tuple[str, ...]:
    """Names of the shipped mechanisms, in alphabetical order."""
    return tuple(sorted(p.stem for p in folder().glob("*.toml")))


def load(name_or_path: str, base: Path, *, place: Place | None = None) -> Mechanism | WrittenLaw:
    """What a file of the shipped library holds, or one under ``base``: steps or a law.

    A text with ``/`` or ending in ``.toml`` is a path, relative to ``base`` and never outside it.
    ``place`` is where the study names it.
    """
    if not isinstance(name_or_path, str) or not name_or_path:
        raise DiscrimError(
            "no name of a mechanism", place=place, do='Write mechanism = "complex-then-product".'
        )
    if name_or_path.endswith(".toml") or "/" in name_or_path or "\\" in name_or_path:
        path = _under(base, name_or_path, place)
        return read_file(path, shown=name_or_path, place=place)
    known = names()
    if name_or_path not in known:
        hint = nearest(name_or_path, known)
        raise DiscrimError(
            f'no mechanism is called "{name_or_path[:60]}"',
            place=place,
            do=f"{hint} `discrim derive --library` lists the {len(known)} that there are. A file "
            "is named by its path, ending in .toml.".strip(),
        )
    path = folder() / f"{name_or_path}.toml"
    return read_file(path, shown=f"mechanisms/{path.name}", place=place)


def load_mechanism(name_or_path: str, base: Path, *, place: Place | None = None) -> Mechanism:
    """As :func:`load`, for whoever needs steps: a file with a law is refused."""
    record = load(name_or_path, base, place=place)
    if isinstance(record, WrittenLaw):
        raise DiscrimError(
            f'"{name_or_path[:60]}" holds a law, not steps',
            place=place,
            do="Its law is taken as it is, there is nothing to derive it from.",
        )
    return record


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


def read_file(path: Path, *, shown: str, place: Place | None = None) -> Mechanism | WrittenLaw:
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
    return from_toml(text, file=shown, name=path.stem)
