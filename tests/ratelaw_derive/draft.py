"""A mechanism while it is being drawn at random, and how its parts are chosen."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np


@dataclass(slots=True)
class Draft:
    """A mechanism as text, with what its drawing knows of it."""

    kind: str
    steps: dict[str, str] = field(default_factory=dict)
    families: list[dict[str, int]] = field(default_factory=list)
    steady: list[str] = field(default_factory=list)
    catalyst: list[str] = field(default_factory=list)
    sites: list[str] = field(default_factory=list)
    equilibrated: list[str] = field(default_factory=list)
    limiting: str = ""

    def add(self, text: str, *, equilibrated: bool = False, name: str = "") -> str:
        name = name or f"s{len(self.steps) + 1}"
        self.steps[name] = text
        if equilibrated:
            self.equilibrated.append(name)
        return name

    def on(self, family: int, form: str, holds: int = 1) -> str:
        """``form`` as a member of the family, with the sign of its site."""
        self.families[family][form] = holds
        return form

    def keywords(self) -> dict[str, Any]:
        """For :func:`discrim.mechanism.parse.parse_mechanism`."""
        assume: dict[str, Any] = {}
        if self.equilibrated:
            assume["equilibrated"] = self.equilibrated
        if self.limiting:
            assume["limiting"] = self.limiting
        if self.steady:
            assume["steady"] = self.steady
        return {
            "steps": self.steps,
            "sites": self.sites,
            "catalyst": self.catalyst,
            "assume": assume,
        }


def pick(rng: np.random.Generator, options: Any) -> Any:
    """One of the options, each as likely."""
    return options[int(rng.integers(len(options)))]


def chance(rng: np.random.Generator, p: float) -> bool:
    """True with probability p."""
    return bool(rng.random() < p)


def arrow(rng: np.random.Generator, reversible: float) -> str:
    """Of a step that goes back too with this probability."""
    return "<=>" if chance(rng, reversible) else "->"
