"""Chemical formulas as text -> count of each element; own small parser."""

from __future__ import annotations

import re

from discrim.errors import DiscrimError, Place

MAX_FORMULA = 200
MAX_DEPTH = 10

# Symbols of the 118 elements, IUPAC periodic table (release of 4 May 2022, from memory).
_SYMBOLS = """
    H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As Se Br
    Kr Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe Cs Ba La Ce Pr Nd Pm Sm Eu Gd Tb Dy Ho
    Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn Fr Ra Ac Th Pa U Np Pu Am Cm Bk Cf Es
    Fm Md No Lr Rf Db Sg Bh Hs Mt Ds Rg Cn Nh Fl Mc Lv Ts Og D
"""
ELEMENTS = frozenset(_SYMBOLS.split())

_TOKEN = re.compile(r"([A-Z][a-z]?)(\d{0,4})|([(\[])|([)\]])(\d{0,4})")


def elements(formula: str, place: Place | None = None) -> dict[str, int]:
    """Atoms of each element in ``formula``, for example ``Al2(SO4)3.18H2O``.

    Round and square brackets may be nested; ``.`` or ``·`` joins parts, each with a leading number.
    ``D`` is accepted for deuterium. Raises :class:`~discrim.errors.DiscrimError`.
    """
    if not formula or len(formula) > MAX_FORMULA:
        raise _error(formula[:20], "is empty or too long", place)
    total: dict[str, int] = {}
    for part in re.split(r"[.·]", formula):
        lead = re.match(r"\d{0,4}", part)
        assert lead is not None
        factor = int(lead.group() or 1)
        for symbol, n in _part(part[lead.end() :], formula, place).items():
            total[symbol] = total.get(symbol, 0) + factor * n
    return total


def _part(text: str, formula: str, place: Place | None) -> dict[str, int]:
    stack: list[dict[str, int]] = [{}]
    at = 0
    if not text:
        raise _error(formula, "has an empty part", place)
    while at < len(text):
        m = _TOKEN.match(text, at)
        if m is None:
            raise _error(formula, f'has "{text[at]}", which is not read', place)
        symbol, count, opens, closes, group_count = m.groups()
        if symbol:
            if symbol not in ELEMENTS:
                raise _error(formula, f'has "{symbol}", which is no element', place)
            stack[-1][symbol] = stack[-1].get(symbol, 0) + int(count or 1)
        elif opens:
            stack.append({})
            if len(stack) > MAX_DEPTH:
                raise _error(formula, "is nested too deeply", place)
        elif closes:
            if len(stack) == 1:
                raise _error(formula, "closes a bracket that was not opened", place)
            inner = stack.pop()
            for s, n in inner.items():
                stack[-1][s] = stack[-1].get(s, 0) + n * int(group_count or 1)
        at = m.end()
    if len(stack) > 1:
        raise _error(formula, "leaves a bracket open", place)
    return stack[0]


def _error(formula: str, says: str, place: Place | None) -> DiscrimError:
    return DiscrimError(
        f'the formula "{formula}" {says}',
        place=place,
        do="Write element symbols with counts, for example C4H8O2 or Ca(OH)2; the charge is given "
        "apart, as charge = -1.",
    )
