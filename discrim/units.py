"""Units: one internal, coherent set a study, and conversion where files are read and written.

A :class:`Unit` is a product of powers of *kinds* (amount, volume, pressure, ...). Volume, area and
length are kept apart, since a chemist's litre is no cubed length. Each kind has one internal size
in a study, taken from the first column that uses it (:class:`UnitSet`), so that constants come out
in the user's own units. Factors and dimensions of single units come from pint; the grammar is ours.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cache
from typing import Any

from discrim.errors import DiscrimError, Place

MAX_UNIT_LENGTH = 200
MAX_POWER = 20

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
_FROM_SUPERSCRIPT = str.maketrans("⁻⁺⁰¹²³⁴⁵⁶⁷⁸⁹", "-+0123456789")


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


def _default_base(kind: str) -> Base:
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
        return cls(exact, tuple(given.get(kind) or _default_base(kind) for kind, _ in exact))

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
        return _default_base(kind)

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
                fixed = _default_base("temperature") if base.kind == "temperature" else base
                have[base.kind] = fixed
        return UnitSet(tuple(have.values()))

    def unit(self, parsed: ParsedUnit) -> Unit:
        """The internal unit of what ``parsed`` measures."""
        return Unit.of(parsed.exponents(), self.bases)

    def of(self, powers: Mapping[str, int | Fraction]) -> Unit:
        """The internal unit with the given powers of kinds."""
        return Unit.of(powers, self.bases)


# --- reading a unit ------------------------------------------------------------------------------

_NAME = r"[^\W\d_]+(?:_[^\W_]+)*"
_TOKEN = re.compile(
    rf"\s*(?:(?P<number>\d+(?:\.\d+)?(?:[eE][+-]?\d+)?)|(?P<name>°?{_NAME}|°|%|‰)|"
    r"(?P<op>\*\*|[*·⋅×./^()]|[⁺⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+|[-−+]))"
)

_ALIASES = {
    "sec": "s",
    "secs": "s",
    "mins": "min",
    "hr": "h",
    "hrs": "h",
    "l": "L",
    "ml": "mL",
    "ul": "uL",
    "dl": "dL",
    "Torr": "torr",
    "mTorr": "mtorr",
    "mole": "mol",
    "moles": "mol",
    "mmole": "mmol",
    "gram": "g",
    "grams": "g",
    "ATM": "atm",
}
_LENGTH_KINDS = {Fraction(2): ("area", 2), Fraction(3): ("volume", 3)}
_MOLAR = {"M": 1, "mM": 1000, "uM": 10**6, "nM": 10**9, "pM": 10**12}
_MOLAR_STEM = {"M": "mol", "mM": "mmol", "uM": "umol", "nM": "nmol", "pM": "pmol"}
# Dimensionless in pint, but a count of something is a unit of its own to whoever counts it.
_FRACTIONS = {
    "mole_percent": Fraction(1, 100),
    "ppm_mole": Fraction(1, 10**6),
    "ppb_mole": Fraction(1, 10**9),
}
_MASS_FRACTIONS = {
    "mass_percent": ("%(mass)", Fraction(1, 100)),
    "ppm_mass": ("ppm(mass)", Fraction(1, 10**6)),
    "ppb_mass": ("ppb(mass)", Fraction(1, 10**9)),
}
_DIMENSIONLESS_WORDS = ("-", "–", "dimensionless", "fraction", "mole fraction")
_REWRITES = (
    (re.compile(r"\b(ppm|ppb)\s*\(\s*(?:mole|molar|mol|v|vol)\s*\)"), r"\1_mole"),
    (re.compile(r"\b(ppm|ppb)\s*\(\s*(?:mass|weight|wt|w)\s*\)"), r"\1_mass"),
    (re.compile(r"%\s*\(\s*(?:mole|molar|mol)\s*\)|\bmole?\s?%"), "mole_percent"),
    (re.compile(r"%\s*\(\s*(?:mass|weight|wt)\s*\)|\b(?:mass|wt|weight)\.?\s?%"), "mass_percent"),
    (
        re.compile(r"\b(psi|[munkM]?bar|[mkM]?Pa|atm)\s*(?:\(\s*a(?:bs(?:olute)?)?\s*\)|\s+abs)"),
        r"\1a",
    ),
    (re.compile(r"\ba\.u\.|\barb\.?\s*units?\b"), "arbitrary"),
)
_GAUGE = re.compile(
    r"\b(?:psi|[munkM]?bar|[mkM]?Pa|atm|inHg|torr)(?:g\b|\s*\(\s*g(?:auge)?\s*\)|\s+gauge)"
)
_REFERENCE_FLOW = re.compile(
    r"\b(?:s(?:cc|l|cf|cm3|mL)[mhs]?(?:pm|ph)?|sl(?:pm|ph)?|scc(?:m|s|h)?|N(?:mL|ml|L|l|m3|cm3|dm3)|"
    r"(?:mL|L|ml|cm3)n)(?=$|[\s/^*·.()-])"
)
_ABSOLUTE = re.compile(r"(?:psi|[munkM]?bar|[mkM]?Pa|atm)a")


def parse_unit(text: str, place: Place | None = None) -> ParsedUnit:
    """Read a unit: ``mol L-1 s-1``, ``mol/(kg s)``, ``umol/L/s``, ``kPa^-0.5``, ``ppm (mole)``.

    A word that is no known unit is taken as it is, a kind of its own.

    Raises
    ------
    DiscrimError
        For what cannot be read, and, as a question, for what could mean two things: gauge
        pressure, flows without a reference state, bare ``ppm``, ``psi`` and ``%``, ``mol/L s``.
    """
    written = text.strip()
    if len(written) > MAX_UNIT_LENGTH:
        raise DiscrimError(
            f"a unit of {len(written)} characters",
            place=place,
            do=f"At most {MAX_UNIT_LENGTH} characters are read.",
        )
    _refuse_ambiguous(written, place)
    rewritten = written.replace("µ", "u").replace("μ", "u")
    if written in _DIMENSIONLESS_WORDS:
        return ParsedUnit(written, place=place)
    for pattern, word in _REWRITES:
        rewritten = pattern.sub(word, rewritten)
    parser = _UnitParser(rewritten, written, place)
    atoms, scale = parser.whole()
    offset = Fraction(0)
    if len(atoms) == 1 and atoms[0][0].kind in ("degC", "degF"):
        base, power = atoms[0]
        if power != 1:
            raise DiscrimError(f'"{written}" is a power of a temperature scale', place=place)
        degree = Fraction(1) if base.kind == "degC" else Fraction(5, 9)
        offset = Fraction("273.15") if base.kind == "degC" else Fraction("459.67")
        atoms = ((Base("temperature", "K", 1, degree), Fraction(1)),)
    elif any(base.kind in ("degC", "degF") for base, _ in atoms):
        raise DiscrimError(
            f'"{written}" has a temperature scale inside a compound unit',
            place=place,
            do="Write K there.",
        )
    return ParsedUnit(written, atoms, scale, offset, place)


def _refuse_ambiguous(text: str, place: Place | None) -> None:
    def ask(says: str, do: str) -> DiscrimError:
        return DiscrimError(says, place=place, do=do)

    if found := _GAUGE.search(text):
        raise ask(
            f'"{found[0]}" is a gauge pressure: absolute or gauge?',
            "Rates depend on absolute pressure. Add the atmospheric pressure of the day to the "
            "values and write an absolute unit (kPa, bar, psia).",
        )
    if re.search(r"\bpsi\b(?!\s*(?:\(\s*a|abs))", text):
        raise ask(
            '"psi": absolute or gauge?',
            "Write psia when the values are absolute; add the atmospheric pressure to "
            "gauge values.",
        )
    if found := _REFERENCE_FLOW.search(text):
        raise ask(
            f'"{found[0]}" holds a reference state: which temperature and pressure?',
            "Reference states differ (0, 15, 20 or 25 °C; 1 atm or 1 bar). Convert to mol per time "
            "with the state of your instrument and write for example mol/s.",
        )
    if found := re.search(r"\bpp[mbt]\b(?!\s*\(\s*[a-z])", text):
        raise ask(
            f'"{found[0]}" by what?',
            f'Write "{found[0]} (mole)" or "{found[0]} (mass)".',
        )
    if re.search(r"%(?!\s*\()", text) and not re.search(r"\b(?:mole?|mass|wt|weight)\.?\s?%", text):
        raise ask('"%" of what?', 'Write "mol %" or "mass %", or another unit.')


class _UnitParser:
    """``unit = product {'/' factor}``; ``product = factor {['·'] factor}``."""

    def __init__(self, text: str, written: str, place: Place | None) -> None:
        self.written = written
        self.place = place
        self.tokens: list[tuple[str, str]] = []
        position = 0
        text = text.rstrip()
        while position < len(text):
            match = _TOKEN.match(text, position)
            if match is None:
                raise self.error(f'"{text[position : position + 10]}" cannot be read in a unit')
            kind = match.lastgroup or "op"
            self.tokens.append((kind, match[kind]))
            position = match.end()
        self.at = 0

    def error(self, says: str, do: str = "") -> DiscrimError:
        return DiscrimError(
            f'{says} ("{self.written}")' if self.written not in says else says,
            place=self.place,
            do=do or "Write units like mol/L, mol L-1 s-1, mol/(kg s), kPa, 1/h.",
        )

    def peek(self) -> tuple[str, str]:
        return self.tokens[self.at] if self.at < len(self.tokens) else ("end", "")

    def take(self) -> tuple[str, str]:
        token = self.peek()
        self.at += 1
        return token

    def whole(self) -> tuple[tuple[tuple[Base, Fraction], ...], Fraction]:
        if not self.tokens:
            return (), Fraction(1)
        atoms, scale = self.chain(0)
        if self.peek()[0] != "end":
            raise self.error(f'"{self.peek()[1]}" is not expected here')
        return tuple(atoms), scale

    def chain(self, depth: int) -> tuple[list[tuple[Base, Fraction]], Fraction]:
        if depth > 10:
            raise self.error("brackets nested too deeply")
        atoms, scale = self.factor(depth)
        divided = False
        while True:
            kind, value = self.peek()
            if value == "/":
                self.take()
                more, more_scale = self.factor(depth)
                atoms += [(base, -power) for base, power in more]
                scale /= more_scale
                divided = True
            elif value in ("*", "·", "⋅", "×", ".") or kind in ("name", "number") or value == "(":
                if divided:
                    raise self.error(
                        f'"{self.written}" can be read in two ways',
                        "Write what is below the line in brackets, mol/(L s), or with powers, "
                        "mol L-1 s-1.",
                    )
                if value in ("*", "·", "⋅", "×", "."):
                    self.take()
                more, more_scale = self.factor(depth)
                atoms += more
                scale *= more_scale
            else:
                return atoms, scale

    def factor(self, depth: int) -> tuple[list[tuple[Base, Fraction]], Fraction]:
        kind, value = self.take()
        if value == "(":
            atoms, scale = self.chain(depth + 1)
            if self.take()[1] != ")":
                raise self.error("a bracket is not closed")
            power = self.power()
            if scale != 1 and power.denominator != 1:
                raise self.error("a number with a broken power")
            if scale != 1:
                scale = scale ** int(power)
            return [(base, p * power) for base, p in atoms], scale
        if kind == "number":
            number = Fraction(value) if abs(_exponent(value)) <= 300 else Fraction(0)
            if number == 0:
                raise self.error(f'"{value}" is no factor for a unit')
            power = self.power()
            if power.denominator != 1:
                raise self.error("a number with a broken power")
            return [], number ** int(power)
        if kind == "name":
            return _atom(value, self.power(), self)
        raise self.error(f'a unit is missing at "{value}"' if value else "a unit is missing")

    def power(self) -> Fraction:
        """An exponent after a unit, if one stands there: ``2``, ``-1``, ``^-0.5``, ``⁻¹``."""
        kind, value = self.peek()
        if value == "**":
            raise self.error('"**" is not read', "Write ^ or just the power: s^-1, s-1.")
        if kind == "op" and value[0] in "⁺⁻⁰¹²³⁴⁵⁶⁷⁸⁹":
            self.take()
            try:
                return self.checked(Fraction(value.translate(_FROM_SUPERSCRIPT)))
            except ValueError:
                raise self.error(f'"{value}" is no power') from None
        caret = value == "^"
        if caret:
            self.take()
            kind, value = self.peek()
            if value == "(":
                return self.bracketed_power()
        sign = 1
        if value in ("-", "−", "+"):
            self.take()
            sign = 1 if value == "+" else -1
            kind, value = self.peek()
            caret = True
        if kind == "number" and len(value) < 20 and "e" not in value.lower():
            self.take()
            return self.checked(sign * Fraction(value))
        if caret:
            raise self.error("a power is missing")
        return Fraction(1)

    def bracketed_power(self) -> Fraction:
        self.take()
        sign = 1
        if self.peek()[1] in ("-", "−", "+"):
            sign = -1 if self.take()[1] != "+" else 1
        kind, above = self.take()
        below = "1"
        if self.peek()[1] == "/":
            self.take()
            _, below = self.take()
        closed = self.take()[1] == ")"
        if kind != "number" or not closed or not re.fullmatch(r"\d{1,4}", below):
            raise self.error("a power that cannot be read", "Write for example kPa^(1/2).")
        if int(below) == 0 or len(above) > 10:
            raise self.error("a power that cannot be read", "Write for example kPa^(1/2).")
        return self.checked(sign * Fraction(above) / int(below))

    def checked(self, power: Fraction) -> Fraction:
        if abs(power) > MAX_POWER or power == 0:
            raise self.error(f"a power of {power}")
        return power


def _exponent(number: str) -> int:
    _, _, exponent = number.lower().partition("e")
    return int(exponent[:6]) if exponent else 0


def _atom(
    name: str, power: Fraction, parser: _UnitParser
) -> tuple[list[tuple[Base, Fraction]], Fraction]:
    """One unit word to some power, as sizes of kinds and a factor."""
    if name in _FRACTIONS:
        if power.denominator != 1:
            return [(Base("", "", 1, _FRACTIONS[name]), power)], Fraction(1)
        return [], _FRACTIONS[name] ** int(power)
    if name in _MASS_FRACTIONS:
        stem, size = _MASS_FRACTIONS[name]
        return [(Base("mass fraction", stem, 1, size), power)], Fraction(1)
    if name in _MOLAR:
        amount = Base("amount", _MOLAR_STEM[name], 1, Fraction(1, _MOLAR[name]))
        return [(amount, power), (_default_base("volume"), -power)], Fraction(1)
    if name in ("°C", "degC", "celsius"):
        return [(Base("degC", "°C"), power)], Fraction(1)
    if name in ("°F", "degF"):
        return [(Base("degF", "°F"), power)], Fraction(1)
    if name == "arbitrary":
        return [(Base("a.u.", "a.u."), power)], Fraction(1)
    known = _ALIASES.get(name, name)
    looked_up = known[:-1] if _ABSOLUTE.fullmatch(known) else known
    kind, size = _look_up(looked_up)
    if kind == "length" and abs(power) in _LENGTH_KINDS:
        kind, stem_power = _LENGTH_KINDS[abs(power)]
        base = Base(kind, known, stem_power, size**stem_power)
        return [(base, Fraction(1 if power > 0 else -1))], Fraction(1)
    if kind == "power":
        return [
            (Base("energy", f"{known} s", 1, size), power),
            (_default_base("time"), -power),
        ], Fraction(1)
    return [(Base(kind, known, 1, size), power)], Fraction(1)


# Dimensions, as powers of (length, mass, time, amount, temperature, current), of each kind.
_DIMENSIONS = {
    (0, 0, 0, 1, 0, 0): "amount",
    (1, 0, 0, 0, 0, 0): "length",
    (2, 0, 0, 0, 0, 0): "area",
    (3, 0, 0, 0, 0, 0): "volume",
    (0, 1, 0, 0, 0, 0): "mass",
    (0, 0, 1, 0, 0, 0): "time",
    (-1, 1, -2, 0, 0, 0): "pressure",
    (2, 1, -2, 0, 0, 0): "energy",
    (0, 0, 0, 0, 1, 0): "temperature",
    (0, 0, 1, 0, 0, 1): "charge",
}
_AXES = ("[length]", "[mass]", "[time]", "[substance]", "[temperature]", "[current]")


@cache
def _registry() -> Any:
    """pint's registry, made once and only when a unit is read (importing pint takes a while)."""
    import pint

    return pint.UnitRegistry(autoconvert_offset_to_baseunit=False)


@cache
def _look_up(name: str) -> tuple[str, Fraction]:
    """Kind and SI size of one unit word; (name, 1) when it is not known."""
    if len(name) > 40 or not re.fullmatch(r"[^\W\d_]+", name):
        return name, Fraction(1)
    registry = _registry()
    try:
        factor, root = registry.get_base_units(name)
        dimensions = dict(root.dimensionality)
    except Exception:  # pint raises many kinds; any of them means: not a unit it knows
        return name, Fraction(1)
    if any(axis not in _AXES for axis in dimensions):
        return name, Fraction(1)
    powers = tuple(dimensions.get(axis, 0) for axis in _AXES)
    kind = _DIMENSIONS.get(powers)
    if kind is None:
        return name, Fraction(1)
    # 15 digits: what pint's chain of float products leaves beyond them is rounding.
    size = Fraction(f"{float(factor):.15g}")
    # pint's base unit of mass is the gram in some systems; kinds are kept in coherent SI.
    if (
        kind in ("mass", "pressure", "energy")
        and "gram" in str(root)
        and "kilogram" not in str(root)
    ):
        size /= 1000
    return kind, size


# --- quantities ----------------------------------------------------------------------------------

_NUMBER = re.compile(r"[-+−]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+−]?\d{1,4})?")


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit, as written; ``number`` keeps its digits."""

    value: float
    number: str
    unit: ParsedUnit
    percent: bool = False  # of something else: ``value`` is then the fraction

    def internal(self, unit: Unit) -> float:
        return float(self.unit.to_internal(self.value, unit))


def parse_number(text: str, place: Place | None = None) -> float:
    """A finite decimal number; messages name decimal commas, nan and overflow."""
    clean = text.strip()
    if _NUMBER.fullmatch(clean):
        value = float(clean.replace("−", "-"))
        if math.isfinite(value):
            return value
        raise DiscrimError(f'"{_short(clean)}" is too large for a number', place=place)
    if re.fullmatch(r"[-+−]?\d{1,3}(,\d{3})+(\.\d+)?|[-+−]?\d*,\d+(?:[eE][-+−]?\d+)?", clean):
        raise DiscrimError(
            f'"{_short(clean)}" has a comma in a number',
            place=place,
            do="Write decimals with a point (0.5, not 0,5) and no separators of thousands.",
        )
    if re.fullmatch(r"[-+−]?(?:nan|inf(?:inity)?|n/?a|null|none)", clean, re.IGNORECASE):
        raise DiscrimError(
            f'"{clean}" is not a measured value',
            place=place,
            do="Leave the cell empty where a rate is not measured yet; else give the number.",
        )
    raise DiscrimError(f'"{_short(clean)}" stands where a number belongs', place=place)


def parse_quantity(text: str, place: Place | None = None, *, percent: bool = False) -> Quantity:
    """A number and a unit, ``2.5 mmol/L``; with ``percent`` also ``5 %`` (of something else)."""
    clean = text.strip()
    match = _NUMBER.match(clean)
    rest = clean[match.end() :] if match else ""
    if match is None or rest[:1] in (",", "_") or rest[:1].isdigit():
        parse_number(clean.split(" ")[0] if clean else "", place)
        raise DiscrimError(f'"{_short(clean)}" is no number with a unit', place=place)
    value = parse_number(match[0], place)
    unit = rest.strip()
    if unit == "%" and percent:
        return Quantity(value / 100, match[0], ParsedUnit("%", place=place), percent=True)
    return Quantity(value, match[0], parse_unit(unit, place))


def parse_sum(text: str, place: Place | None = None) -> tuple[Quantity, ...]:
    """Terms joined by ``+``: ``1 % + 0.02 umol/L/s``."""
    return tuple(
        parse_quantity(term, place, percent=True) for term in re.split(r"\s\+\s", text.strip())
    )


def _short(text: str, most: int = 40) -> str:
    return text if len(text) <= most else text[:most] + "…"
