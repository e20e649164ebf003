"""``[[candidates]]``: steps, a mechanism from the library or a file, or a bare rate law."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from discrim.errors import DiscrimError, Place
from discrim.mechanism.model import Mechanism, WrittenLaw
from discrim.study.file import inside
from discrim.study.formulas import Names, bare_names, harmonised
from discrim.study.model import Candidate, Derived
from discrim.study.node import Node

KEYS = (
    "name",
    "steps",
    "sites",
    "assume",
    "catalyst",
    "species",
    "mechanism",
    "bind",
    "law",
    "overall",
    "title",
    "source",
    "note",
)
_WAYS = ("steps", "mechanism", "law")
_BELONGS = {
    "sites": "steps",
    "assume": "steps",
    "catalyst": "steps",
    "species": "steps",
    "bind": "mechanism",
    "overall": "law",
}
MAX_NAME = 120


def read_candidates(
    nodes: Sequence[Node], names: Names, derived: Sequence[Derived], folder: Path
) -> tuple[Candidate, ...]:
    """All candidates of a study; two of the same name are an error."""
    out: list[Candidate] = []
    for node in nodes:
        name = node.needed("name", 'Give each candidate a name: name = "two pathways".').strip()
        if len(name) > MAX_NAME:
            raise node.error(f"a name of {len(name)} characters", f"At most {MAX_NAME}.", "name")
        if any(c.name == name for c in out):
            raise node.error(
                f'two candidates are called "{name}"', "Give each its own name.", "name"
            )
        named = Node(node.data, node.path, node.doc, f'candidate "{name}"')
        out.append(_candidate(named, name, names, derived, folder))
    return tuple(out)


def _candidate(
    node: Node, name: str, names: Names, derived: Sequence[Derived], folder: Path
) -> Candidate:
    node.check_keys(KEYS)
    ways = [key for key in _WAYS if key in node.data]
    if len(ways) != 1:
        found = "none" if not ways else " and ".join(ways)
        raise node.error(
            f"a candidate needs one of steps, mechanism, law; found {found}",
            "Write its steps, or name a mechanism, or write a bare law.",
            key=True,
        )
    for key, way in _BELONGS.items():
        if key in node.data and way != ways[0]:
            raise node.error(
                f'"{key}" belongs to a candidate with {way}, this one has {ways[0]}',
                "Take it out.",
                key,
                key=True,
            )
    place, note = node.place("name"), node.text("note")
    if ways[0] == "law":
        text = node.needed("law")
        law = names.parse(text, node.place("law"), bare_names(derived))
        overall = _overall(node, name) if "overall" in node.data else None
        # complaints about the law point at its text, with all of it underlined
        return Candidate(
            name, None, _one_symbol_each(law, derived), text, overall, node.place("law"), note
        )
    record = _steps(node, name) if ways[0] == "steps" else _library(node, folder)
    if isinstance(record, Mechanism):
        return Candidate(name, record, None, "", None, place, note, record.source)
    from discrim.ratelaw.bare import written_expression, written_overall

    law = _one_symbol_each(written_expression(record, names.quantities), derived)
    overall = written_overall(record)
    place = node.place("mechanism")
    return Candidate(name, None, law, record.text, overall, place, note, record.source)


def _one_symbol_each(law: Any, derived: Sequence[Derived]) -> Any:
    """The law with one symbol for a constant that it shares with derived quantities."""
    return law.xreplace(harmonised([law, *(d.formula for d in derived)]))


def _steps(node: Node, name: str) -> Mechanism:
    from discrim.mechanism.parse import ASSUME_KEYS, parse_mechanism

    node.table("assume").check_keys(ASSUME_KEYS)
    species = node.table("species")
    for key in species.data:
        species.table(key).check_keys(("formula", "charge"))
    steps = node.table("steps")
    texts = {key: steps.needed(key) for key in steps.data}
    return parse_mechanism(
        name=name,
        steps=texts,
        places={
            key: steps.doc.place((*steps.path, key), what=f"{node.what}, step {key}")
            for key in texts
        },
        sites=node.texts("sites"),
        catalyst=node.texts("catalyst"),
        assume=dict(node.table("assume").data),
        species=dict(species.data),
        title=node.text("title"),
        source=node.text("source"),
        note=node.text("note"),
        place=node.place("name"),
    )


def _library(node: Node, folder: Path) -> Mechanism | WrittenLaw:
    written = node.needed("mechanism")
    place = node.place("mechanism")
    if "/" in written or "\\" in written or written.endswith(".toml") or written.startswith("~"):
        inside(folder, written, place)
    from discrim.mechanism.library import load
    from discrim.mechanism.rename import bind

    try:
        record = load(written, base=folder, place=place)
    except DiscrimError as error:
        raise _placed(error, place) from None
    if "bind" not in node.data:
        return record
    table = node.table("bind")
    names = {key: table.needed(key) for key in table.data}
    try:
        return bind(record, names)
    except DiscrimError as error:
        raise error.at(node.place("bind")) from None


def _placed(error: DiscrimError, place: Place) -> DiscrimError:
    """A complaint that does not know its file is made to point at the study."""
    return error if error.place is not None and error.place.file else error.at(place)


def _overall(node: Node, name: str) -> Mapping[str, int]:
    """Net stoichiometric coefficients of ``overall = "A -> P"``."""
    from discrim.mechanism.parse import parse_mechanism

    text, place = node.needed("overall"), node.place("overall")
    step = parse_mechanism(
        name=name, steps={"overall": text}, places={"overall": place}, place=place
    ).steps[0]
    net: dict[str, int] = {}
    for species, coefficient in step.left:
        net[species.name] = net.get(species.name, 0) - coefficient
    for species, coefficient in step.right:
        net[species.name] = net.get(species.name, 0) + coefficient
    return {species: coefficient for species, coefficient in net.items() if coefficient}


def contents(candidate: Candidate, derived: Sequence[Derived]) -> set[str]:
    """Species, steps, constants and columns that a question about this candidate can name."""
    out: set[str] = set()
    if candidate.mechanism is not None:
        for step in candidate.mechanism.steps:
            out.add(step.name)
            out |= {species.name for species, _ in (*step.left, *step.right)}
    else:
        out |= _symbols(candidate.law)
        out |= set(candidate.overall or {})
    for d in derived:
        if d.name in out:
            out |= _symbols(d.formula)
    return out


def _symbols(expression: Any) -> set[str]:
    return {symbol.name.strip("[]{}") for symbol in expression.free_symbols}
