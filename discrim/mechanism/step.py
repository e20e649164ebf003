"""Text of one elementary step -> :class:`~discrim.mechanism.model.Step`.

Own small grammar; nothing is ever evaluated::

    step    = side arrow side           arrow is "->" or "<=>", with a space on either side
    side    = term (" + " term)*
    term    = [coefficient " "] species
    species = name [site signs] | site sign

``+`` separates species only with a space on either side, so ``H+`` and ``OH-`` are names.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import replace

from discrim.errors import DiscrimError, Place
from discrim.mechanism.model import Species, Step

MAX_STEP_TEXT = 500  # characters; an elementary step is far shorter
MAX_NAME = 80
MAX_COEFFICIENT = 9  # common practice, no source: no elementary step has ten equal partners
SITE_SIGNS = "*#@&§†‡~!%$|?"

_ARROW = re.compile(r"<=+>|<-+>|<-+|-+>|=+>|<=+|=+|[→⇌⇄⇋↔⇔⟶⟷←⇒]")
_STEP_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*\Z")
_COEFFICIENT = re.compile(r"\d+\Z")
_NUMBER = re.compile(r"\d*[.,/]?\d+\Z")
_NAME = re.compile(r"[^\W_](?:[^\W]|[-_^().,'·:+])*\Z")


def is_name(text: object) -> bool:
    """Whether ``text`` can be the name of a step, and so part of the name of a constant."""
    return isinstance(text, str) and len(text) <= MAX_NAME and bool(_STEP_NAME.match(text))


def parse_step(
    name: str, text: str, *, sites: Sequence[str] = ("*",), place: Place | None = None
) -> Step:
    """One step from its text; ``place`` (if any) is where the text stands."""
    base = place or Place(what=f"step {name}")
    if not is_name(name):
        raise DiscrimError(
            f'"{clipped(name)}" is no name for a step',
            place=base,
            do="Constants take their name from the step (k_NAME), so use letters, digits and "
            "underscores, beginning with a letter.",
        )
    if not isinstance(text, str):
        raise DiscrimError(
            f"a step is written as text, found {type(text).__name__}",
            place=base,
            do='Write it in quotes, for example "A + B -> C".',
        )
    if len(text) > MAX_STEP_TEXT:
        raise DiscrimError(
            f"the text of the step has {len(text)} characters, at most {MAX_STEP_TEXT} are read",
            place=replace(base, text="", column=0),
            do="Write one elementary step, for example A + B -> C.",
        )
    if any(not ch.isprintable() for ch in text):
        raise DiscrimError(
            "the step holds a line break, a tab or another character that cannot be printed",
            place=base,
            do="Write one elementary step on one line.",
        )
    reader = _Reader(text, base, tuple(sites))
    arrow = reader.arrow()
    left = reader.side(0, arrow.start(), "left")
    right = reader.side(arrow.end(), len(text), "right")
    if dict(left) == dict(right):
        raise reader.error(
            "nothing changes in this step", 0, len(text), "Both sides are the same; leave it out."
        )
    return Step(name, left, right, arrow.group() == "<=>", text, reader.place(0, len(text)))


def is_species_name(text: str) -> bool:
    """Whether ``text`` can be the name of a fluid species."""
    if not text:
        return False
    try:
        found = _Reader(text, Place(), ()).species(text, 0)
    except DiscrimError:
        return False
    return found.name == text and " " not in text


class _Reader:
    """The text of one step, with the means to point at any part of it."""

    def __init__(self, text: str, place: Place, sites: tuple[str, ...]) -> None:
        self.text = text
        self.base = place
        self.sites = sites
        found = place.text.find(text) if place.text else -1
        self.offset = max(found, 0)
        self.line = place.text if found >= 0 else text

    def place(self, start: int, end: int) -> Place:
        return replace(
            self.base,
            text=self.line,
            column=self.offset + start + 1,
            length=max(1, end - start),
        )

    def error(self, says: str, start: int, end: int, do: str) -> DiscrimError:
        return DiscrimError(says, place=self.place(start, end), do=do)

    def arrow(self) -> re.Match[str]:
        found = list(_ARROW.finditer(self.text))
        real = [m for m in found if m.group() in ("->", "<=>")]
        wrong = [m for m in found if m.group() not in ("->", "<=>")]
        if wrong:
            m = wrong[0]
            raise self.error(
                f'"{m.group()}" is no arrow here',
                m.start(),
                m.end(),
                "Write -> for a step in one direction and <=> for a reversible one.",
            )
        if not real:
            raise self.error(
                "no arrow",
                0,
                len(self.text),
                "Write -> for a step in one direction and <=> for a reversible one, "
                "for example A + B -> C.",
            )
        if len(real) > 1:
            m = real[1]
            raise self.error(
                "more than one arrow",
                m.start(),
                m.end(),
                "Write each elementary step on its own, with a name of its own.",
            )
        m = real[0]
        before, after = self.text[: m.start()], self.text[m.end() :]
        if (before and not before.endswith(" ")) or (after and not after.startswith(" ")):
            raise self.error(
                "no space beside the arrow",
                m.start(),
                m.end(),
                f"Put a space on either side of it: {before.strip()} {m.group()} {after.strip()}",
            )
        return m

    def words(self, start: int, end: int) -> Iterator[tuple[str, int]]:
        for m in re.finditer(r"\S+", self.text[start:end]):
            yield m.group(), start + m.start()

    def side(self, start: int, end: int, which: str) -> tuple[tuple[Species, int], ...]:
        words = list(self.words(start, end))
        if not words:
            at = min(start, max(0, len(self.text) - 1))
            raise self.error(
                f"the {which} side is empty",
                at,
                at + 1,
                "An elementary step has at least one species on either side.",
            )
        counts: dict[Species, int] = {}
        coefficient: int | None = None
        expect_species = True
        last = words[-1]
        for word, at in words:
            if word == "+":
                if expect_species:
                    raise self.error(
                        "a species is missing before this +", at, at + 1, "Write A + B."
                    )
                expect_species = True
                continue
            if not expect_species:
                raise self.error(*self._two_names(word, at, words))
            if coefficient is None and _NUMBER.match(word):
                coefficient = self._coefficient(word, at)
                continue
            found = self.species(word, at)
            counts[found] = counts.get(found, 0) + (coefficient or 1)
            if counts[found] > MAX_COEFFICIENT:
                raise self._too_many(at, at + len(word))
            coefficient = None
            expect_species = False
        if coefficient is not None:
            raise self.error(
                "a coefficient without a species",
                last[1],
                last[1] + len(last[0]),
                "Write the species after it, separated by a space: 2 A.",
            )
        if expect_species:
            raise self.error(
                "a species is missing after this +",
                last[1],
                last[1] + 1,
                "Write A + B, or remove the +.",
            )
        return tuple(counts.items())

    def _two_names(
        self, word: str, at: int, words: list[tuple[str, int]]
    ) -> tuple[str, int, int, str]:
        before = next(w for w, where in reversed(words) if where < at)
        first = before.rstrip("+") or before
        second = word.lstrip("+") or word
        start = at - len(before) - 1 if before.endswith("+") else at
        return (
            f'"{before} {word}" has no + with a space on either side',
            max(0, start),
            at + len(word),
            f"If two species are meant, write {first} + {second}. A + that belongs to a name "
            "(H+, Na+) stands directly behind it, and another + then follows.",
        )

    def _too_many(self, start: int, end: int) -> DiscrimError:
        return self.error(
            f"a coefficient above {MAX_COEFFICIENT}",
            start,
            end,
            f"An elementary step has coefficients of 1 to {MAX_COEFFICIENT}; "
            "write the elementary steps of the reaction instead.",
        )

    def _coefficient(self, word: str, at: int) -> int:
        if not _COEFFICIENT.match(word) or int(word[:10]) == 0:
            raise self.error(
                f"a coefficient of {clipped(word)}",
                at,
                at + len(word),
                "An elementary step has whole coefficients from 1; multiply the step if needed: "
                "A2 + 2 * <=> 2 A*.",
            )
        if int(word[:10]) > MAX_COEFFICIENT:
            raise self._too_many(at, at + len(word))
        return int(word)

    def species(self, word: str, at: int) -> Species:
        end = at + len(word)
        if word in self.sites:
            return Species(word, word, 1)
        body = word.rstrip("".join(set(SITE_SIGNS) | set(self.sites)))
        signs = word[len(body) :]
        if not body:
            if len(set(word)) == 1 and word[0] in self.sites:
                raise self.error(
                    f'"{word}" is no species',
                    at,
                    end,
                    f"For {len(word)} vacant sites write {len(word)} {word[0]}.",
                )
            raise self._undeclared(word, signs, at)
        m = re.match(r"(\d+)([^\W\d_].*)\Z", body)
        if m:
            raise self.error(
                f'"{clipped(word)}" begins with a number',
                at,
                end,
                f"Separate a coefficient by a space: write {m.group(1)} {m.group(2)}{signs}",
            )
        if body.isdigit() and signs and set(signs) <= set(self.sites):
            raise self.error(
                f'"{clipped(word)}" is a number on a site',
                at,
                end,
                f"For {clipped(body)} vacant sites write {clipped(body)} {signs}",
            )
        if word[0] in self.sites:
            raise self.error(
                f'"{clipped(word)}" begins with the sign of a site',
                at,
                end,
                f"Write the sign behind the name: {word.lstrip(word[0])}{word[0]}",
            )
        if len(body) > MAX_NAME:
            raise self.error(
                f"a name of {len(body)} characters",
                at,
                end,
                f"Names of species have at most {MAX_NAME} characters.",
            )
        if re.search(r"\+(?![-+)\]]|\Z)", body) and not body.startswith("+"):
            parts = [p for p in body.split("+") if p]
            raise self.error(
                f'"{clipped(word)}" has a + inside',
                at,
                end,
                f"Separate species by a + with a space on either side: {' + '.join(parts)}{signs}",
            )
        if not _NAME.match(body):
            raise self.error(
                f'"{clipped(word)}" is no name of a species',
                at,
                end,
                "A name begins with a letter or digit and holds letters, digits and _ - + ^ ( ) "
                ". , ' only; a charge stands at its end (SO4^2-).",
            )
        if not signs:
            return Species(body)
        if len(set(signs)) > 1:
            raise self.error(
                f'"{clipped(word)}" sits on more than one kind of site',
                at + len(body),
                end,
                "One species on two kinds of site is not yet supported; give it one sign.",
            )
        if signs[0] not in self.sites:
            raise self._undeclared(word, signs, at)
        if len(signs) > MAX_COEFFICIENT:
            raise self._too_many(at + len(body), end)
        return Species(word, signs[0], len(signs))

    def _undeclared(self, word: str, signs: str, at: int) -> DiscrimError:
        unknown = [ch for ch in signs if ch not in self.sites]
        sign = unknown[0] if unknown else signs[0]
        declared = ", ".join(f'"{s}"' for s in (*self.sites, sign))
        return self.error(
            f'"{clipped(word)}" uses the site sign {sign}, which is not declared',
            at,
            at + len(word),
            f"Declare the kinds of site: sites = [{declared}]",
        )


def clipped(text: object, width: int = 40) -> str:
    """The beginning of a text, printable, for a message."""
    shown = "".join(ch if ch.isprintable() else " " for ch in str(text)[: width + 1])
    return shown if len(shown) <= width else shown[:width] + "…"


def side_text(parts: Sequence[tuple[Species, int]]) -> str:
    """One side of a step as a chemist writes it."""
    return " + ".join(s.name if n == 1 else f"{n} {s.name}" for s, n in parts)
