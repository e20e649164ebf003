"""Reading a unit: a small grammar of our own, factors from pint, ambiguous units asked about."""

from __future__ import annotations

import re
from fractions import Fraction
from functools import cache
from typing import Any

from discrim.errors import DiscrimError, Place
from discrim.units.model import Base, ParsedUnit, default_base

MAX_UNIT_LENGTH = 200
MAX_POWER = 20

_FROM_SUPERSCRIPT = str.maketrans("⁻⁺⁰¹²³⁴⁵⁶⁷⁸⁹", "-+0123456789")
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
        return [(amount, power), (default_base("volume"), -power)], Fraction(1)
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
            (default_base("time"), -power),
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
