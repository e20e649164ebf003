"""Other names for the species of a mechanism or a law: what ``bind`` in a study asks for."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import overload

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.check import species_of
from discrim.mechanism.model import Mechanism, Species, Step, WrittenLaw
from discrim.mechanism.step import is_species_name, side_text

_BRACKETED = re.compile(r"\[([^\[\]]*)\]")


def species_names(record: Mechanism | WrittenLaw) -> tuple[str, ...]:
    """Names that ``bind`` can change: species without the signs of their sites, in reading order.

    A vacant site has none.
    """
    if isinstance(record, Mechanism):
        return tuple(dict.fromkeys(_body(s) for s in species_of(record) if s.name != s.site))
    overall = record.overall
    sides = (*overall.left, *overall.right) if overall else ()
    in_law = (name.strip() for name in _BRACKETED.findall(record.text))
    return tuple(dict.fromkeys((*in_law, *(s.name for s, _ in sides))))


@overload
def bind(record: Mechanism, names_of: Mapping[str, str]) -> Mechanism: ...
@overload
def bind(record: WrittenLaw, names_of: Mapping[str, str]) -> WrittenLaw: ...
def bind(record: Mechanism | WrittenLaw, names_of: Mapping[str, str]) -> Mechanism | WrittenLaw:
    """The record with species renamed, on sites too: ``{"A": "H2"}`` makes ``A*`` ``H2*``.

    Names of steps and of constants stay as they are.

    Raises
    ------
    DiscrimError
        for a species that is not there, a name that is none, and two species made one.
    """
    renamed = _renamed(species_names(record), names_of, record.place)
    if isinstance(record, Mechanism):
        return _mechanism(record, renamed)
    text = _BRACKETED.sub(lambda m: f"[{renamed[m[1].strip()]}]", record.text)
    overall = record.overall
    return replace(record, text=text, overall=overall and _step(overall, renamed))


def _renamed(
    known: Iterable[str], names_of: Mapping[str, str], place: Place | None
) -> dict[str, str]:
    """The new name of every species."""
    known = tuple(known)
    for old, new in names_of.items():
        if old not in known:
            raise DiscrimError(
                f'bind renames "{str(old)[:40]}", which is no species of the mechanism',
                place=place,
                do=f"{nearest(str(old), known)} Species: {', '.join(known) or 'none'}.".strip(),
            )
        if not isinstance(new, str) or not is_species_name(new):
            raise DiscrimError(
                f'bind gives {old} the name "{str(new)[:40]}", which is no name of a species',
                place=place,
                do="A name begins with a letter or digit and holds letters, digits and "
                "_ - + ^ ( ) . , ' only; the site sign stays with the mechanism.",
            )
    renamed = {old: names_of.get(old, old) for old in known}
    seen: dict[str, str] = {}
    for old, new in renamed.items():
        if new in seen:
            raise DiscrimError(
                f'bind makes "{seen[new]}" and "{old}" one species "{new}"',
                place=place,
                do="Give each species of the mechanism a name of its own, or write the steps out "
                "in the study.",
            )
        seen[new] = old
    return renamed


def _mechanism(mechanism: Mechanism, renamed: Mapping[str, str]) -> Mechanism:
    by_name = {s.name: _moved(s, renamed).name for s in species_of(mechanism)}
    return replace(
        mechanism,
        steps=tuple(_step(s, renamed) for s in mechanism.steps),
        catalyst=tuple(by_name[n] for n in mechanism.catalyst),
        steady=None if mechanism.steady is None else tuple(by_name[n] for n in mechanism.steady),
        formulas={by_name[n]: f for n, f in mechanism.formulas.items()},
        charges={by_name[n]: c for n, c in mechanism.charges.items()},
    )


def _step(old: Step, renamed: Mapping[str, str]) -> Step:
    left = tuple((_moved(s, renamed), n) for s, n in old.left)
    right = tuple((_moved(s, renamed), n) for s, n in old.right)
    arrow = "<=>" if old.reversible else "->"
    text = f"{side_text(left)} {arrow} {side_text(right)}"
    return replace(old, left=left, right=right, text=text)


def _moved(species: Species, renamed: Mapping[str, str]) -> Species:
    if species.name == species.site:
        return species
    return replace(species, name=renamed[_body(species)] + species.site * species.occupies)


def _body(species: Species) -> str:
    """The name without the signs of the sites."""
    signs = species.site * species.occupies
    return species.name.removesuffix(signs) if signs else species.name
