"""``[[questions]]``: what the study asks."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from discrim.errors import DiscrimError, nearest
from discrim.runs.build import listed
from discrim.runs.columns import CONDITIONS, Declaration
from discrim.runs.model import Role
from discrim.study.candidates import contents
from discrim.study.model import Candidate, Derived, Question
from discrim.study.node import Node
from discrim.units import Unit, check_size, parse_quantity

ASKS = ("participates", "stands", "equal", "constant", "reversible")
KEYS = (*ASKS, "matters_above", "at", "value", "note")


def read_questions(
    nodes: Sequence[Node],
    candidates: Sequence[Candidate],
    derived: Sequence[Derived],
    declared: Sequence[Declaration],
    units: Mapping[str, Unit],
) -> tuple[Question, ...]:
    """The questions; ``units`` are the internal units by name of column or condition."""
    known: set[str] = set()
    for candidate in candidates:
        known |= contents(candidate, derived)
    out = []
    for node in nodes:
        node.check_keys(KEYS)
        asked = [key for key in ASKS if key in node.data]
        if len(asked) != 1:
            found = "none" if not asked else " and ".join(asked)
            raise node.error(
                f"a question asks one of {', '.join(ASKS)}; found {found}",
                'For example participates = "B".',
                key=True,
            )
        out.append(_question(node, asked[0], candidates, known, declared, units))
    return tuple(out)


def _question(
    node: Node,
    asks: str,
    candidates: Sequence[Candidate],
    known: set[str],
    declared: Sequence[Declaration],
    units: Mapping[str, Unit],
) -> Question:
    matters = _matters(node) if "matters_above" in node.data else None
    at = read_at(node, declared, units)
    place = node.place(asks)
    if "value" in node.data and asks != "constant":
        raise node.error('"value" belongs to the question "constant"', "", "value", key=True)
    if asks == "participates":
        about = node.needed("participates")
        _check_contained(node, asks, about, known, declared)
        return Question(asks, about, matters, at, place=place)
    for key in ("matters_above", "at"):
        if key in node.data and asks == "stands":
            raise node.error(f'"{key}" belongs to other questions', "Take it out.", key, key=True)
    if asks == "stands":
        wanted = tuple(name.strip() for name in node.texts("stands"))  # as candidates' names are
        every = [c.name for c in candidates]
        if wanted == ("all",):
            return Question(asks, "all", place=place)
        for name in wanted:
            if name not in every:
                raise node.error(
                    f'there is no candidate "{name}"',
                    f'{nearest(name, every)} There are {listed(every)}; or write "all".'.lstrip(),
                    asks,
                )
        if not wanted:
            raise node.error("no candidate is named", 'Write stands = "all".', asks)
        return Question(asks, ", ".join(wanted), names=wanted, place=place)
    if asks == "equal":
        names = node.texts("equal")
        if len(names) < 2:
            raise node.error("two or more constants are needed", "", asks)
        if len(set(names)) < len(names):
            raise node.error("a constant is named twice", "Name each once.", asks)
        _no_conditions(node, asks)
        return Question(asks, ", ".join(names), matters, names=names, place=place)
    if asks == "constant":
        about = node.needed("constant")
        if "value" not in node.data:
            raise node.error(
                'the question "constant" needs a value', "Write value = 1, for example.", asks
            )
        _no_conditions(node, asks)
        value = parse_quantity(node.quantity_text("value"), node.place("value"))
        return Question(
            asks,
            about,
            matters,
            value=value.value,
            place=place,
            value_units=value.unit,
            value_text=f"{value.number} {value.unit.text}".strip(),
            value_place=node.place("value"),
        )
    return Question(asks, _reversed(node, candidates), matters, at, place=place)


def _no_conditions(node: Node, asks: str) -> None:
    if "at" in node.data:
        raise node.error(
            f'"at" does not belong to the question "{asks}"',
            "A constant is the same at all conditions. Take it out.",
            "at",
            key=True,
        )


def _reversed(node: Node, candidates: Sequence[Candidate]) -> str:
    """The step whose reverse is asked about, "" for the reaction as a whole."""
    if not isinstance(node.data["reversible"], str):
        if not node.flag("reversible"):
            raise node.error("write reversible = true, or take the question out", "", "reversible")
        return ""
    about = node.needed("reversible")
    steps = {s.name: s.reversible for c in candidates if c.mechanism for s in c.mechanism.steps}
    both = sorted(name for name, reversible in steps.items() if reversible)
    if about not in both:
        says = f'there is no step "{about}"'
        if about in steps:
            says = f'the step "{about}" is written one way'
        known = f"Steps written with <=>: {listed(both)}." if both else "No step has <=>."
        raise node.error(says, f"{nearest(about, both)} {known}".lstrip(), "reversible")
    return about


_MATTERS = 'It is the size of an effect, between 0 and 100 % of the rate, for example "5 %".'


def _matters(node: Node) -> float:
    """The smallest effect that matters, as a fraction."""
    written = node.data["matters_above"]
    place = node.place("matters_above")
    if isinstance(written, str):
        try:
            quantity = parse_quantity(written, place, percent=True)
        except DiscrimError as error:
            raise DiscrimError(error.says, place=place, do=_MATTERS) from None
        if quantity.unit.text not in ("%", ""):
            raise DiscrimError(
                f'"{written}" is no fraction', place=place, do='Write for example "5 %".'
            )
        value = quantity.value
    else:
        value = node.number("matters_above", _MATTERS)
    if not 0 < value < 1:
        raise DiscrimError(
            f"matters_above is {written}",
            place=place,
            do=_MATTERS,
        )
    return value


def _check_contained(
    node: Node, key: str, about: str, known: set[str], declared: Sequence[Declaration]
) -> None:
    if about in known:
        return
    columns = {d.name: d.about for d in declared if d.role is Role.SPECIES}
    names = sorted(name for name in known if not name.startswith("*"))
    if about in columns and columns[about] in known:
        do = f'The column "{about}" is the species "{columns[about]}": ask about that.'
    else:
        do = f"{nearest(about, names)} They contain {listed(names)}.".lstrip()
    raise node.error(f'no candidate contains "{about}"', do, key)


def read_at(
    node: Node, declared: Sequence[Declaration], units: Mapping[str, Unit]
) -> dict[str, float]:
    """Conditions that the decision is about, in internal units.

    Species by their name, other conditions (a pH, a total) by the name of their column.
    """
    if "at" not in node.data:
        return {}
    table = node.table("at")
    by_name = {
        (d.about if d.role is Role.SPECIES else d.name): d
        for d in declared
        if d.name in units and d.role in CONDITIONS
    }
    out: dict[str, float] = {}
    for name in table.data:
        if name not in by_name:
            hint = nearest(name, by_name)
            raise table.error(
                f'"{name}" is no condition of the runs',
                f"{hint} The conditions are {listed(sorted(by_name))}.".lstrip(),
                name,
                key=True,
            )
        d = by_name[name]
        quantity = parse_quantity(table.quantity_text(name), table.place(name))
        written = d.value.unit if d.value is not None else d.unit
        if not quantity.unit.text and written is not None and written.text:
            raise table.error(
                f'"{quantity.number}" of what?', f'Write "{quantity.number} {written.text}".', name
            )
        value = quantity.internal(units[d.name])
        check_size(value, quantity.number, table.place(name))
        if value < 0 and d.role is not Role.PH:
            raise table.error(
                f"a negative condition: {quantity.number}", "Amounts are 0 or more.", name
            )
        out[name] = value
    return out
