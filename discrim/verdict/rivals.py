"""Which rival stands: the printed answer."""

from __future__ import annotations

from collections.abc import Sequence


def sentence_standing(names: Sequence[str], rejected: Sequence[str]) -> str:
    """The printed answer to `stands`."""
    if not names:
        return "No candidate stands: every law is rejected by these runs."
    if len(names) == 1:
        head = f"“{names[0]}” stands"
    else:
        head = f"{len(names)} candidates stand: " + ", ".join(f"“{n}”" for n in names)
    tail = f"; {len(rejected)} rejected" if rejected else ""
    return f"{head}{tail}. These laws are not the only possible ones."
