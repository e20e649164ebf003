"""Numbers as they are printed: how many digits, and what stands where there is no number.

JCGM 100:2008 (7.2.6): an uncertainty to at most two significant digits, the value to the same
place. Every function takes None for "open or unknown" and never raises on a number.
"""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_UP, Context, Decimal
from typing import Any

MISSING = "–"
#: Digits of a number that comes without an uncertainty.
DIGITS = 4
# Outside these powers of ten a number is written with an exponent.
_FIXED_FROM, _FIXED_TO = -3, 6
_CONTEXT = Context(prec=60, rounding=ROUND_HALF_UP)


def as_number(x: Any) -> float | None:
    """``x`` as a finite float, else None (text, None, nan, infinity, a truth value)."""
    if isinstance(x, bool) or not isinstance(x, int | float):
        return None
    try:
        value = float(x)
    except OverflowError:
        return None
    return value if math.isfinite(value) else None


def rounded(value: Any, uncertainty: Any = None) -> tuple[str, str]:
    """The value and its standard uncertainty as text, by JCGM 100.

    Without an uncertainty (None or 0) the value has four significant digits and the second text
    is "".

    Examples
    --------
    >>> rounded(10.05762, 0.0272)
    ('10.058', '0.027')
    >>> rounded(3.0)
    ('3', '')
    """
    v, u = as_number(value), as_number(uncertainty)
    if v is None:
        return MISSING, MISSING if u is None else number(u, 2)
    if not u:
        return number(v), ""
    place = _place(abs(u))
    shown = _at_place(v, place)
    # Both in the same notation, so that their places can be compared at a glance.
    alike = "e" not in shown and -9 <= place <= 0
    return shown, f"{_quantized(abs(u), place):f}" if alike else _at_place(abs(u), place)


def number(x: Any, digits: int = DIGITS) -> str:
    """A number to so many significant digits, without trailing zeros after the point."""
    v = as_number(x)
    if v is None:
        return MISSING
    if v == 0:
        return "0"
    text = _at_place(v, _exponent(v) - digits + 1)
    mantissa, e, power = text.partition("e")
    if "." in mantissa:
        mantissa = mantissa.rstrip("0").rstrip(".")
    return mantissa + e + power


def tiny_is_zero(x: Any, below: float = 1e-9) -> float | None:
    """The number, or 0 where only the noise of the arithmetic is left of it."""
    v = as_number(x)
    return 0.0 if v is not None and abs(v) < below else v


def as_read(x: Any) -> str:
    """A reading from the table: its digits up to seven, no noise of the conversion of units."""
    return number(x, 7)


def interval(
    low: Any, high: Any, how: Any = None, *, outward: bool = False, digits: int | None = None
) -> str:
    """An interval as text; says of each end when it is not an ordinary crossing.

    ``how`` holds how each end was found: crossed, bound, open, failed. With ``outward`` the ends
    are rounded away from the middle, so that a guarantee stays one: with ``digits``
    digits, or to the place of three digits of the width.
    """
    lo, hi = as_number(low), as_number(high)
    ends = list(how) if isinstance(how, list | tuple) and len(how) == 2 else ["", ""]
    if lo is None and hi is None:
        if "failed" in ends:
            return "not found"
        return "open both ways" if "open" in ends else MISSING
    texts = _outward(lo, hi, digits) if outward else _ends(lo, hi)
    marks = [{"bound": " (bound)", "failed": " (not found)"}.get(str(end), "") for end in ends]
    if lo is None:
        return f"up to {texts[1]}{marks[1]}, {_no_end(ends[0])} below"
    if hi is None:
        return f"from {texts[0]}{marks[0]}, {_no_end(ends[1])} above"
    return f"{texts[0]}{marks[0]} to {texts[1]}{marks[1]}"


def _no_end(how: Any) -> str:
    return "not found" if how == "failed" else "open"


def _outward(lo: float | None, hi: float | None, digits: int | None) -> tuple[str, str]:
    out = []
    width = abs(hi - lo) if lo is not None and hi is not None else 0.0
    for v, rounding in ((lo, ROUND_FLOOR), (hi, ROUND_CEILING)):
        if not v:
            out.append(number(v))
            continue
        shown = digits or 6
        if digits is None and width > 0:
            shown = min(max(_exponent(v) - _exponent(width) + 3, 1), 6)
        # A double that is one step beside 3.0036 means 3.0036, hence the twelve digits first.
        near = Context(prec=12).create_decimal(repr(v))
        out.append(number(float(Context(prec=shown, rounding=rounding).plus(near)), shown))
    return out[0], out[1]


def _ends(lo: float | None, hi: float | None) -> tuple[str, str]:
    """Both ends to the place of two digits of half the width, but never under three digits."""
    if lo is None or hi is None or lo == hi:
        return number(lo, 3), number(hi, 3)
    width_place = _place(abs(hi - lo) / 2)
    out = []
    for v in (lo, hi):
        place = min(width_place, _exponent(v) - 2) if v else width_place
        out.append("0" if v == 0 else _at_place(v, max(place, width_place - 4)))
    return out[0], out[1]


def percent(x: Any, digits: int = 2) -> str:
    """A fraction in per cent, two significant digits, at most one place after the point."""
    v = tiny_is_zero(x)
    if v is None:
        return MISSING
    if v == 0:
        return "0 %"
    place = max(_exponent(v * 100) - digits + 1, -1)
    text = _at_place(v * 100, place)
    if Decimal(text) == 0:
        return ("under " if v > 0 else "above −") + "0.1 %"
    return (text.rstrip("0").rstrip(".") if "." in text else text) + " %"


def probability(p: Any) -> str:
    """A p-value: two significant digits, and no more zeros than can be read at a glance."""
    v = as_number(p)
    if v is None:
        return MISSING
    if v < 1e-4:
        return "< 0.0001"
    if v > 0.99:
        return "> 0.99"
    return f"{_quantized(v, max(_exponent(v) - 1, -4)):f}"


def factor(x: Any) -> str:
    """A pure number such as a condition number: two or three digits."""
    v = as_number(x)
    return MISSING if v is None else number(v, 3 if abs(v) < 1000 else 2)


def count(n: int, one: str, many: str | None = None) -> str:
    """``1 run``, ``3 runs``, ``no runs``."""
    noun = one if n == 1 else (many or one + "s")
    return f"{n if n else 'no'} {noun}"


def listed(words: list[str], joint: str = "and") -> str:
    """``a, b and c``."""
    if len(words) < 2:
        return "".join(words)
    return f"{', '.join(words[:-1])} {joint} {words[-1]}"


def _exponent(x: float) -> int:
    """Power of ten of the first digit."""
    return Decimal(repr(abs(x))).adjusted() if x else 0


def _place(u: float) -> int:
    """Power of ten of the second significant digit of ``u``, after rounding."""
    place = _exponent(u) - 1
    return _exponent(float(_quantized(u, place))) - 1


def _quantized(x: float, place: int) -> Decimal:
    return Decimal(repr(x)).quantize(Decimal((0, (1,), place)), context=_CONTEXT)


def _at_place(x: float, place: int) -> str:
    """``x`` rounded at 10**place; fixed where readable, else with an exponent."""
    spread = _exponent(x) - place
    if spread > 15:  # more digits than a double carries
        place = _exponent(x) - 15
    d = _quantized(x, place)
    top = d.adjusted() if d else place
    if _FIXED_FROM <= top < _FIXED_TO and place >= -9:
        text = f"{d:f}"
        return text.lstrip("-") if not d and text.startswith("-") else text
    if not d:
        return "0"
    digits = "".join(map(str, d.as_tuple().digits)) if place <= top else "0"
    keep = max(top - place + 1, 1)
    digits = digits[:keep].ljust(keep, "0")
    mantissa = digits[0] + ("." + digits[1:] if len(digits) > 1 else "")
    return f"{'-' if d < 0 else ''}{mantissa}e{top}"
