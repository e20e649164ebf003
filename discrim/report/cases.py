"""Limiting cases of a law as lines to read, from the keys ``limits`` and ``apparent_orders``."""

from __future__ import annotations

from dataclasses import dataclass, replace
from html import escape
from typing import Any

from discrim.report import read, tables


@dataclass(frozen=True, slots=True)
class Case:
    """What a law becomes in one range of one amount: "low [A]", "first order", "r = k*[A]"."""

    where: str
    order: str
    text: str
    mathml: str
    starts: bool = False  # the first line of its species


def groups(candidate: Any) -> tuple[tuple[str, tuple[Case, ...]], ...]:
    """Heading and lines: of the law, or of the forward part of a reversible one and its net rate.

    Nothing is said twice: ends where the law is the same are one line, and of the net rate only
    what differs from the forward reaction is told.
    """
    limits = read.records(candidate, "limits")
    orders = {read.text(o, "species"): o for o in read.records(candidate, "apparent_orders")}
    ahead = {_key(x): _law(x) for x in limits if x.get("forward") is True}
    first = [x for x in limits if x.get("forward") is True] or limits
    net = [
        x
        for x in limits
        if ahead and x.get("forward") is not True and _law(x) != ahead.get(_key(x))
    ]
    heading = "Limiting cases of the forward reaction" if ahead else "Limiting cases"
    found = [
        (heading, _lines(first, orders)),
        ("The net rate, where it differs", _lines(net, {})),
    ]
    return tuple((words, lines) for words, lines in found if lines)


def _key(limit: Any) -> tuple[str, str]:
    return read.text(limit, "species"), read.text(limit, "where")


def _law(limit: Any) -> str:
    return read.text(limit, "law")


def _told(limit: Any) -> str:
    """The law, or why there is none."""
    return _law(limit) or read.text(limit, "words")


def _lines(limits: list[Any], orders: dict[str, Any]) -> tuple[Case, ...]:
    out: list[Case] = []
    starts: list[int] = []
    for species in dict.fromkeys(read.text(x, "species") for x in limits):
        here = [x for x in limits if read.text(x, "species") == species]
        starts.append(len(out))
        if len(here) == 2 and _told(here[0]) == _told(here[1]):
            exact = here[0].get("exact") is True
            out.append(_case(here[0], "any" if exact else "low and high", bare=exact))
            continue
        out += [_case(x, read.text(x, "where")) for x in here]
        if species in orders and len(here) == 2:
            out.append(_between(orders[species], species))
    return tuple(replace(c, starts=i in starts) for i, c in enumerate(out))


def _case(limit: Any, where: str, *, bare: bool = False) -> Case:
    species = read.text(limit, "species")
    order = read.text(limit, "words").replace(f" in {species}", "")
    law, mathml = _law(limit), read.text(limit, "law_mathml")
    if bare or not law:  # the law itself, or none
        return Case(f"{where} [{species}]", order, "", "")
    drawn = f"<mrow><mi>r</mi><mo>=</mo>{mathml}</mrow>" if mathml else ""
    return Case(f"{where} [{species}]", order, tables.equation(law), drawn)


def _between(item: Any, species: str) -> Case:
    text, mathml = read.text(item, "order"), read.text(item, "order_mathml")
    words = f"order in {species}"
    drawn = f"<mrow><mtext>{escape(words)}</mtext><mo>=</mo>{mathml}</mrow>" if mathml else ""
    return Case("in between", "", f"{words} = {text}", drawn)
