"""What README.md and demo/README.md quote, and the same made again.

A quotation follows a comment line that says where it comes from::

    <!-- file: demo/buffer-hydrolysis/first.toml -->
    <!-- printed: discrim weigh demo/buffer-hydrolysis/first.toml; from "Does HA" to "Flip" -->

The first quotes a whole file, the second the printed lines from the first that begins with one text
to the next that begins with the other (``before`` leaves that one out).
``python -m tests.demo.quotes`` writes the quotations again.
"""

from __future__ import annotations

import contextlib
import io
import re
import tempfile
from collections.abc import Mapping
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
PAGES = (ROOT / "README.md", ROOT / "demo" / "README.md")

_QUOTATION = re.compile(
    r"^<!-- (?P<kind>file|printed): (?P<what>.*?) -->\n(?P<fence>```\w*\n)(?P<body>.*?)^```$",
    re.MULTILINE | re.DOTALL,
)
_LINES = re.compile(
    r'(?P<command>discrim \S+ \S+); from "(?P<first>[^"]+)" (?P<how>to|before) "(?P<last>[^"]+)"'
)


def results_of(study: str, folder: Path) -> Path:
    """Where :func:`printed` writes the results of a study."""
    return folder / study.replace("/", "-")


def printed(command: str, folder: Path) -> str:
    """Standard output of a command line, with its results in ``folder``."""
    from discrim.cli import main

    _, verb, study = command.split()
    words = [verb, str(ROOT / study)]
    if verb == "weigh":
        words += ["--out", str(results_of(study, folder))]
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        code = main(words)
    if code != 0:
        raise RuntimeError(f"{command} ended with {code}")
    return out.getvalue()


def lines_of(text: str, first: str, last: str, *, inclusive: bool = True) -> str:
    """The lines from the one that begins with ``first`` to the next that begins with ``last``."""
    lines = [line.rstrip() for line in text.splitlines()]
    heads = [line.lstrip(" -") for line in lines]
    start = next((i for i, head in enumerate(heads) if head.startswith(first)), None)
    if start is None:
        raise ValueError(f"no line begins with {first!r}")
    end = next((i for i in range(start + 1, len(lines)) if heads[i].startswith(last)), None)
    if end is None:
        raise ValueError(f"no line after {first!r} begins with {last!r}")
    return "\n".join(lines[start : end + inclusive]).rstrip() + "\n"


def renewed(page: str, printed_by: Mapping[str, str]) -> str:
    """The page with every quotation made again; ``printed_by``: output by command line."""

    def again(found: re.Match[str]) -> str:
        what = found["what"]
        if found["kind"] == "file":
            body = (ROOT / what).read_text(encoding="utf-8")
        else:
            asked = _LINES.fullmatch(what)
            if asked is None:
                raise ValueError(f"no such quotation: {what}")
            body = lines_of(
                printed_by[asked["command"]],
                asked["first"],
                asked["last"],
                inclusive=asked["how"] == "to",
            )
        return f"<!-- {found['kind']}: {what} -->\n{found['fence']}{body}```"

    return _QUOTATION.sub(again, page)


class Printed(dict[str, str]):
    """Output by command line, made when it is first asked for; results stay in ``folder``."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def __missing__(self, command: str) -> str:
        self[command] = printed(command, self.folder)
        return self[command]


def write() -> None:
    """Write every page again."""
    with tempfile.TemporaryDirectory() as folder:
        said = Printed(Path(folder))
        for page in PAGES:
            text = page.read_text(encoding="utf-8")
            page.write_text(renewed(text, said), encoding="utf-8")


if __name__ == "__main__":
    write()
