"""The study file as TOML: size, encoding, syntax; and paths that must stay in its folder."""

from __future__ import annotations

import hashlib
import re
import tomllib
from dataclasses import dataclass
from pathlib import Path, PureWindowsPath

from discrim.errors import DiscrimError, Place
from discrim.study.locate import Locator
from discrim.study.node import Node

MAX_BYTES = 2_000_000
# Reading a dotted key takes tomllib a time that grows with the square of its parts. The repeats are
# possessive and start at the beginning of a word, so that the search itself takes linear time.
_LONG_KEY = re.compile(
    r"""(?<![\w.-])(?:(?:[\w-]++|"[^"\n]{0,80}+"|'[^'\n]{0,80}+')[ \t]*+\.[ \t]*+){41}"""
)


@dataclass(frozen=True, slots=True)
class StudyFile:
    """The root table of a study, the folder that its paths count from, its SHA-256."""

    path: Path
    root: Node
    sha256: str

    @property
    def folder(self) -> Path:
        return self.path.parent


def read_toml(path: Path, shown: str) -> StudyFile:
    """Read a study file.

    Raises
    ------
    DiscrimError
        Missing, larger than 2 MB, not UTF-8, not TOML (with line and column).
    """
    here = Place(shown)
    try:
        if path.is_dir():
            raise DiscrimError("this is a folder", place=here, do="Give the study file in it.")
        if not path.exists():
            raise DiscrimError(
                "there is no such file",
                place=here,
                do="Give the path of a study file (.toml).",
            )
        if not path.is_file():  # a pipe or a device could be read for ever
            raise DiscrimError("this is no file", place=here, do="Give a study file (.toml).")
        size = path.stat().st_size
        if size > MAX_BYTES:
            raise DiscrimError(
                f"the study has {size / 1e6:.1f} MB, at most {MAX_BYTES / 1e6:.0f} MB are read",
                place=here,
                do="Keep the runs in a table of their own.",
            )
        data = path.read_bytes()
    except OSError as error:
        raise DiscrimError(
            f"the file cannot be read ({error.strerror or error})", place=here
        ) from None
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise DiscrimError(
            "not UTF-8 text",
            place=Place(shown, line),
            do="A study is a text file; save it with the encoding UTF-8.",
        ) from None
    if found := _LONG_KEY.search(text):
        raise DiscrimError(
            "a key with more than 40 dots",
            place=Place(shown, text.count("\n", 0, found.start()) + 1),
            do="Keys of a study have a few parts, as columns.rate.units.",
        )
    try:
        root = tomllib.loads(text)
        locator = Locator(shown, text)
    except tomllib.TOMLDecodeError as error:
        raise _syntax(error, shown, text) from None
    except (ValueError, RecursionError) as error:
        says = "nested too deeply" if isinstance(error, RecursionError) else str(error)
        raise DiscrimError(f"not valid TOML: {says[:200]}", place=here) from None
    digest = hashlib.sha256(data).hexdigest()
    return StudyFile(path, Node(root, (), locator, ""), digest)


_QUOTES = 'Texts stand in quotes, tables in [brackets], for example is = "rate of P".'
_REPEATED = "A name can stand only once in its table: rename one of the two, or take it out."


def _syntax(error: tomllib.TOMLDecodeError, shown: str, text: str) -> DiscrimError:
    says = re.sub(r"\s*\(at .*\)$", "", str(error))
    place = Place(shown)
    if found := re.search(r"at line (\d+), column (\d+)", str(error)):
        number, column = int(found[1]), int(found[2])
        lines = text.split("\n")
        line = lines[number - 1].rstrip("\r") if number <= len(lines) else ""
        place = Place(shown, number, column, 1, line)
    return DiscrimError(
        f"not valid TOML: {says[:1].lower()}{says[1:200]}",
        place=place,
        do=_REPEATED if re.search("twice|overwrite|already", says) else _QUOTES,
    )


def inside(folder: Path, written: str, place: Place) -> Path:
    """A path that a study names, kept within the study's folder, links followed.

    Raises
    ------
    DiscrimError
        For an absolute path, one with ``..`` that leaves the folder, or a link out of it.
    """
    if not written or "\0" in written:
        raise DiscrimError("a path is empty or holds a zero byte", place=place)
    refused = DiscrimError(
        "a path outside what the user gave",
        place=place,
        do="Tables and mechanisms must lie in the folder of the study or below it; write the path "
        "relative to that folder, with /.",
    )
    windows = PureWindowsPath(written)
    if Path(written).is_absolute() or windows.drive or windows.root or written.startswith("~"):
        raise refused
    root = folder.resolve()
    try:
        target = (folder / written).resolve()
    except (OSError, RuntimeError, ValueError):
        raise refused from None
    if not target.is_relative_to(root):
        raise refused
    return target
