"""Records of units: powers of kinds, units as written, the internal set of a study."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from discrim.errors import DiscrimError, Place

# Order in which kinds are written: what is counted first, then per what, then per time.
_ORDER = (
    "amount",
    "mass",
    "energy",
    "charge",
    "pressure",
    "volume",
    "area",
    "length",
    "temperature",
    "time",
)
_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@dataclass(frozen=True, slots=True)
class Base:
    """The internal size of one kind: ``stem ** power``, for example ``("volume", "cm", 3)``.

    ``size`` is in the coherent SI unit of the kind (for a unit of its own kind: 1).
    """

    kind: str
    stem: str
    power: int = 1
    size: Fraction = Fraction(1)


_DEFAULT_BASES = {
    base.kind: base
    for base in (
        Base("amount", "mol"),
        Base("mass", "kg"),
        Base("energy", "J"),
        Base("charge", "C"),
        Base("pressure", "Pa"),
        Base("volume", "L", 1, Fraction(1, 1000)),
        Base("area", "m", 2),
        Base("length", "m"),
        Base("temperature", "K"),
        Base("time", "s"),
    )
}


def default_base(kind: str) -> Base:
    return _DEFAULT_BASES.get(kind, Base(kind, kind))


def _clean(powers: Mapping[str, Fraction]) -> tuple[tuple[str, Fraction], ...]:
    return tuple(sorted((kind, power) for kind, power in powers.items() if power))


@dataclass(frozen=True, slots=True)
class Unit:
    """A product of powers of kinds, in the internal sizes of one study.

    Two units are equal when their powers are; ``bases`` only says how to write and convert them.
    Units of different studies are not to be mixed. ``Unit()`` is dimensionless.
    """

    powers: tuple[tuple[str, Fraction], ...] = ()
    bases: tuple[Base, ...] = field(default=(), compare=False, repr=False)

    @classmethod
    def of(cls, powers: Mapping[str, int | Fraction], bases: Iterable[Base] | None = None) -> Unit:
        """From a mapping kind -> power; without ``bases`` in mol, L, kg, s, Pa, K, J."""
        exact = _clean({kind: Fraction(power) for kind, power in powers.items()})
        given = {base.kind: base for base in bases or ()}
        return cls(exact, tuple(given.get(kind) or default_base(kind) for kind, _ in exact))

    @property
    def exponents(self) -> dict[str, Fraction]:
        return dict(self.powers)

    @property
    def is_dimensionless(self) -> bool:
        return not self.powers

    def base(self, kind: str) -> Base:
        for base in self.bases:
            if base.kind == kind:
                return base
        return default_base(kind)

    def _combined(self, other: Unit, sign: int) -> Unit:
        powers = dict(self.powers)
        for kind, power in other.powers:
            powers[kind] = powers.get(kind, Fraction(0)) + sign * power
        bases = {base.kind: base for base in (*other.bases, *self.bases)}
        return Unit.of(powers, bases.values())

    def __mul__(self, other: Unit) -> Unit:
        return self._combined(other, 1)

    def __truediv__(self, other: Unit) -> Unit:
        return self._combined(other, -1)

    def __pow__(self, power: int | Fraction) -> Unit:
        exact = Fraction(power)
        return Unit.of({kind: p * exact for kind, p in self.powers}, self.bases)

    def _parts(self) -> list[tuple[str, Fraction]]:
        """(stem, power) in the order of writing: numerators first."""

        def rank(item: tuple[str, Fraction]) -> tuple[bool, int, str]:
            kind, power = item
            # A unit of its own kind ("counts") stands for what is counted, so it comes first.
            return (power < 0, _ORDER.index(kind) if kind in _ORDER else -1, kind)

        parts = []
        for kind, power in sorted(self.powers, key=rank):
            base = self.base(kind)
            parts.append((base.stem, power * base.power))
        return parts

    def text(self) -> str:
        """For people: ``mol kg⁻¹ s⁻¹``; "" when dimensionless."""
        out = []
        for stem, power in self._parts():
            if power == 1:
                out.append(stem)
            elif power.denominator == 1:
                out.append(stem + str(power).translate(_SUPERSCRIPT))
            else:
                out.append(f"{stem}^{_decimal(power)}")
        return " ".join(out)

    def ascii(self) -> str:
        """Plain characters that :func:`parse_unit` reads back: ``mol kg-1 s-1``."""
        out = []
        for stem, power in self._parts():
            if power == 1:
                out.append(stem)
            elif power.denominator == 1:
                out.append(f"{stem}{power}")
            else:
                out.append(f"{stem}^{_decimal(power)}")
        return " ".join(out)

    def latex(self) -> str:
        r"""``\mathrm{mol\,kg^{-1}\,s^{-1}}``; "" when dimensionless."""
        out = []
        for stem, power in self._parts():
            safe = re.sub(r"([%_#&$])", r"\\\1", stem).replace("°", r"{}^{\circ}")
            out.append(safe if power == 1 else f"{safe}^{{{_decimal(power)}}}")
        return r"\mathrm{" + r"\,".join(out) + "}" if out else ""

    def __str__(self) -> str:
        return self.text() or "1"


def _decimal(power: Fraction) -> str:
    """``-1``, ``0.5``, or ``(1/3)`` where a decimal would not be exact."""
    if power.denominator == 1:
        return str(power.numerator)
    as_float = float(power)
    if Fraction(repr(as_float)) == power:
        return repr(as_float)
    return f"({power.numerator}/{power.denominator})"


@dataclass(frozen=True, slots=True)
class ParsedUnit:
    """A unit as the user wrote it: ``scale * product(base ** power)``, with its place.

    ``offset`` is added before scaling and is zero but for °C and °F standing alone.
    """

    text: str
    atoms: tuple[tuple[Base, Fraction], ...] = ()
    scale: Fraction = Fraction(1)
    offset: Fraction = Fraction(0)
    place: Place | None = field(default=None, compare=False)

    def exponents(self) -> dict[str, Fraction]:
        """Net power of each kind; kinds that cancel are left out."""
        powers: dict[str, Fraction] = {}
        for base, power in self.atoms:
            powers[base.kind] = powers.get(base.kind, Fraction(0)) + power
        return {kind: power for kind, power in powers.items() if power}

    @property
    def is_dimensionless(self) -> bool:
        return not self.exponents()

    def fits(self, unit: Unit) -> bool:
        """Whether it measures the same kind of thing."""
        return _clean(self.exponents()) == unit.powers

    def factor(self, unit: Unit) -> float:
        """How many internal units one written unit is; offsets left out (for differences).

        Raises ``DiscrimError`` when the two do not measure the same kind of thing.
        """
        if not self.fits(unit):
            raise DiscrimError(
                f'"{self.text or "1"}" does not fit: units of the kind of "{unit}" are needed',
                place=self.place,
                do="Write a unit of the same kind, or mend the units of the column.",
            )
        exact = self.scale
        inexact = 1.0
        net = self.exponents()
        for base, power in self.atoms:
            ratio = base.size / (unit.base(base.kind).size if base.kind in net else 1)
            if power.denominator == 1:
                exact *= ratio ** int(power)
            else:
                inexact *= float(ratio) ** float(power)
        return float(exact) * inexact

    def to_internal(self, values: Any, unit: Unit) -> Any:
        """Written values (a number or an array) in internal units."""
        factor = self.factor(unit)
        if self.offset:
            values = values + float(self.offset)
        return values if factor == 1.0 else values * factor

    def from_internal(self, values: Any, unit: Unit) -> Any:
        """Internal values in the units as written."""
        factor = self.factor(unit)
        if factor != 1.0:
            values = values / factor
        return values - float(self.offset) if self.offset else values


@dataclass(frozen=True, slots=True)
class UnitSet:
    """The internal units of one study: one size for each kind."""

    bases: tuple[Base, ...] = ()

    @classmethod
    def choose(cls, units: Iterable[ParsedUnit]) -> UnitSet:
        """The first unit that uses a kind gives it its size; temperatures are always in K."""
        chosen = cls()
        for unit in units:
            chosen = chosen.extended(unit)
        return chosen

    def extended(self, unit: ParsedUnit) -> UnitSet:
        """With the kinds that ``unit`` brings and the set does not have yet."""
        have = {base.kind: base for base in self.bases}
        needed = unit.exponents()
        for base, _ in unit.atoms:
            if base.kind in needed and base.kind not in have:
                fixed = default_base("temperature") if base.kind == "temperature" else base
                have[base.kind] = fixed
        return UnitSet(tuple(have.values()))

    def unit(self, parsed: ParsedUnit) -> Unit:
        """The internal unit of what ``parsed`` measures."""
        return Unit.of(parsed.exponents(), self.bases)

    def of(self, powers: Mapping[str, int | Fraction]) -> Unit:
        """The internal unit with the given powers of kinds."""
        return Unit.of(powers, self.bases)
