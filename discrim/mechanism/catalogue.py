"""What the shipped library holds: a line for each file, and a search in them."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from discrim.errors import nearest
from discrim.mechanism.library import folder, names, read_file
from discrim.mechanism.model import WrittenLaw
from discrim.mechanism.rename import species_names

#: Branches of kinetics, in the order in which they are listed.
FIELDS = (
    "orders and simple schemes",
    "surface catalysis",
    "acid-base catalysis",
    "homogeneous catalysis",
    "enzymes",
    "chain reactions",
    "gas-phase reactions",
    "reactions in solution",
    "solid-state reactions",
)
_WORD = re.compile(r"[^\W_]+")


@dataclass(frozen=True, slots=True)
class Entry:
    """One file of the library. ``holds`` is "steps" or "law"."""

    name: str
    title: str
    field: str
    species: tuple[str, ...]
    holds: str
    source: str
    note: str

    @property
    def texts(self) -> tuple[str, ...]:
        return (self.name, self.title, self.field, self.note)


def entries() -> tuple[Entry, ...]:
    """Every file, by field in the order of :data:`FIELDS`, then by name."""
    out = []
    for name in names():
        path = folder() / f"{name}.toml"
        record = read_file(path, shown=f"mechanisms/{path.name}")
        holds = "law" if isinstance(record, WrittenLaw) else "steps"
        out.append(
            Entry(
                name=name,
                title=record.title,
                field=record.field,
                species=species_names(record),
                holds=holds,
                source=record.source,
                note=record.note,
            )
        )
    place = {field: n for n, field in enumerate(FIELDS)}
    return tuple(sorted(out, key=lambda e: (place.get(e.field, len(place)), e.field, e.name)))


def search(words: Sequence[str], among: Sequence[Entry]) -> tuple[Entry, ...]:
    """The entries that every word matches.

    A word matches a species by its whole name as written, and the name, title, field and note of a
    file where it begins a word there, in small or capital letters. A single letter stands for a
    species alone. Where nothing matches so, the sources are searched too (for an author).
    """
    for with_source in (False, True):
        found = tuple(e for e in among if all(_matches(w, e, with_source) for w in words))
        if found:
            return found
    return ()


def _matches(word: str, entry: Entry, with_source: bool) -> bool:
    if word in entry.species:
        return True
    parts = [p.lower() for p in _WORD.findall(word)]
    if len("".join(parts)) < 2:
        return False
    texts = (*entry.texts, entry.source) if with_source else entry.texts
    found = [w.lower() for text in texts for w in _WORD.findall(text)]
    return all(any(w.startswith(part) for w in found) for part in parts)


def suggestions(words: Sequence[str], among: Sequence[Entry]) -> list[str]:
    """What to try when the words together match nothing: full sentences, the fields last."""
    vocabulary = sorted(
        {
            w.lower()
            for e in among
            for text in (*e.texts, e.source)
            for w in _WORD.findall(text)
            if len(w) > 3
        }
    )
    out = []
    for word in words:
        alone = len(search([word], among))
        if alone and len(words) > 1:
            out.append(f'"{word}" alone is in {alone}.')
        elif not alone:
            out.append(f'"{word}" is in none. {nearest(word.lower(), vocabulary)}'.rstrip())
    return [*out, f"Fields: {', '.join(FIELDS)}."]
