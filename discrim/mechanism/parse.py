"""Steps and assumptions as written -> :class:`~discrim.mechanism.model.Mechanism`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from discrim.errors import DiscrimError, Place, nearest
from discrim.mechanism.check import check_mechanism
from discrim.mechanism.claims import check_claims
from discrim.mechanism.model import Mechanism, Step
from discrim.mechanism.step import SITE_SIGNS, clipped, is_name, parse_step

MAX_STEPS = 60  # the largest mechanism for which a law in closed form is of use
ASSUME_KEYS = ("equilibrated", "limiting", "steady", "overall_equilibrium")


def parse_mechanism(
    *,
    name: str,
    steps: Mapping[str, str],
    places: Mapping[str, Place] | None = None,
    sites: Sequence[str] = (),
    catalyst: Sequence[str] = (),
    assume: Mapping[str, Any] | None = None,
    species: Mapping[str, Any] | None = None,
    title: str = "",
    source: str = "",
    note: str = "",
    place: Place | None = None,
) -> Mechanism:
    """Read the steps, check their balances and what is assumed of them.

    Parameters
    ----------
    name : of the mechanism or candidate
    steps : text of each step by its name
    places : where each step is written; ``Place.text`` may hold the whole line of the file
    sites : signs of the kinds of site; ``("*",)`` when not given and some step uses ``*``
    catalyst : free forms of dissolved catalysts whose total is conserved
    assume : ``equilibrated`` (names of steps), ``limiting`` (one step), ``steady`` (names of
        intermediates), ``overall_equilibrium`` (name of the constant to write the law with)
    species : ``formula`` and ``charge`` by species

    Raises
    ------
    DiscrimError
        for text that is no step, steps that do not balance, and contradictory assumptions.
    """
    where = place or Place(what=f'mechanism "{name}"' if name else "mechanism")
    if not isinstance(steps, Mapping) or not steps:
        raise DiscrimError(
            "no steps",
            place=where,
            do='Write at least one step, for example [steps] by_a = "A -> P".',
        )
    if len(steps) > MAX_STEPS:
        raise DiscrimError(
            f"{len(steps)} steps, at most {MAX_STEPS} are read", place=where, do="Split it."
        )
    signs = _site_signs(sites, steps, where)
    parsed = []
    for step_name, text in steps.items():
        given = (places or {}).get(step_name)
        at = _step_place(given, where, name, step_name)
        parsed.append(parse_step(step_name, text, sites=signs, place=at))
    _distinct_constants(parsed)
    equilibrated, limiting, steady, equilibrium = _assumed(assume, where)
    formulas, charges = _species(species, where)
    mechanism = Mechanism(
        name=name,
        title=title,
        steps=tuple(parsed),
        sites=signs,
        catalyst=_names(catalyst, "catalyst", where),
        equilibrated=equilibrated,
        limiting=limiting,
        steady=steady,
        source=source,
        note=note,
        formulas=formulas,
        charges=charges,
        place=place,
        overall_equilibrium=equilibrium,
    )
    check_mechanism(mechanism)
    check_claims(mechanism)
    return mechanism


def _step_place(given: Place | None, where: Place, mechanism: str, step: str) -> Place:
    what = f'mechanism "{mechanism}", step {step}' if mechanism else f"step {step}"
    if given is None:
        return replace(where, text="", column=0, length=1, what=what)
    return given if given.what else replace(given, what=what)


def _site_signs(sites: Sequence[str], steps: Mapping[str, str], where: Place) -> tuple[str, ...]:
    signs = _names(sites, "sites", where)
    for sign in signs:
        if len(sign) != 1 or sign not in SITE_SIGNS:
            raise DiscrimError(
                f'"{clipped(sign)}" cannot be the sign of a site',
                place=where,
                do=f"Use one of these characters for each kind of site: {' '.join(SITE_SIGNS)}",
            )
    if not signs and any(isinstance(t, str) and "*" in t for t in steps.values()):
        return ("*",)
    return signs


def _distinct_constants(steps: Sequence[Step]) -> None:
    names = {s.name for s in steps}
    for step in steps:
        if step.reversible and f"rev_{step.name}" in names:
            raise DiscrimError(
                f'steps "{step.name}" and "rev_{step.name}" would share the constant '
                f"k_rev_{step.name}",
                place=step.place,
                do="Rename one of them.",
            )


def _assumed(
    assume: Mapping[str, Any] | None, where: Place
) -> tuple[tuple[str, ...], str, tuple[str, ...] | None, str]:
    given = dict(assume or {})
    for key in given:
        if key not in ASSUME_KEYS:
            hint = nearest(str(key), ASSUME_KEYS)
            raise DiscrimError(
                f'unknown key "{clipped(key)}" in assume',
                place=where,
                do=f"{hint} Known: {', '.join(ASSUME_KEYS)}.".strip(),
            )
    limiting = given.get("limiting", "")
    if isinstance(limiting, Sequence) and not isinstance(limiting, str):
        raise DiscrimError(
            "limiting names more than one step",
            place=where,
            do="Name one limiting step; steps that are neither limiting nor equilibrated are "
            "followed by their balances.",
        )
    equilibrium = given.get("overall_equilibrium", "")
    for key, value in (("limiting", limiting), ("overall_equilibrium", equilibrium)):
        if not isinstance(value, str):
            raise DiscrimError(f"{key} is not text", place=where, do="Write one name in quotes.")
    if equilibrium and not is_name(equilibrium):
        raise DiscrimError(
            f'"{clipped(equilibrium)}" is no name for a constant',
            place=where,
            do='Write, for example, overall_equilibrium = "K_eq".',
        )
    steady = given.get("steady")
    return (
        _names(given.get("equilibrated", ()), "equilibrated", where),
        limiting,
        None if steady is None else _names(steady, "steady", where),
        equilibrium,
    )


def _names(value: Any, key: str, where: Place) -> tuple[str, ...]:
    if isinstance(value, str):
        value = (value,)
    if not isinstance(value, Sequence) or not all(isinstance(v, str) for v in value):
        raise DiscrimError(
            f"{key} is not a list of names", place=where, do=f'Write {key} = ["...", "..."].'
        )
    for n, item in enumerate(value):
        if item in value[:n]:
            raise DiscrimError(
                f'{key} names "{clipped(item)}" twice', place=where, do="Name it once."
            )
    return tuple(value)


def _species(
    given: Mapping[str, Any] | None, where: Place
) -> tuple[dict[str, str], dict[str, int]]:
    formulas: dict[str, str] = {}
    charges: dict[str, int] = {}
    known = ("formula", "charge")
    for name, facts in (given or {}).items():
        if not isinstance(facts, Mapping):
            raise DiscrimError(
                f"species.{clipped(name)} is not a table",
                place=where,
                do=f'Write [species.{clipped(name)}] formula = "C4H8O2", charge = 0.',
            )
        for key, value in facts.items():
            if key not in known:
                raise DiscrimError(
                    f'unknown key "{clipped(key)}" for species {clipped(name)}',
                    place=where,
                    do=f"{nearest(str(key), known)} Known: formula, charge.".strip(),
                )
            if key == "formula":
                if not isinstance(value, str):
                    raise DiscrimError(
                        f"the formula of {clipped(name)} is not text",
                        place=where,
                        do='Write it in quotes, for example "C4H8O2".',
                    )
                formulas[name] = value
            elif isinstance(value, bool) or not isinstance(value, int) or abs(value) > 99:
                raise DiscrimError(
                    f"the charge of {clipped(name)} is not a whole number",
                    place=where,
                    do="Write charge = -2.",
                )
            else:
                charges[name] = value
    return formulas, charges
