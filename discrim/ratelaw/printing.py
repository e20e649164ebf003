"""A law as text for the terminal, as LaTeX and as MathML, all in the same reading order."""

from __future__ import annotations

import re
import unicodedata
from html import escape

import sympy

from discrim.ratelaw.layout import (
    Call,
    Equation,
    Layout,
    Name,
    Number,
    Power,
    Product,
    Sum,
    lay_out,
)

# What binds how tightly; a looser piece inside a tighter one needs brackets.
_SUM, _PRODUCT, _POWER, _ATOM = 1, 2, 3, 4

_GREEK_SMALL = (
    "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi pi rho sigma tau "
    "upsilon phi chi psi omega"
)
_GREEK_CAPITAL = "Gamma Delta Theta Lambda Xi Pi Sigma Phi Psi Omega"
_GREEK = frozenset(f"{_GREEK_SMALL} {_GREEK_CAPITAL}".split())


def plain(expr: sympy.Basic) -> str:
    """One line of text, in the grammar of :mod:`discrim.ratelaw.expression`.

    Reading it back gives an equal expression, if quantities are given by their names.
    """
    return _plain(lay_out(expr))


def latex(expr: sympy.Basic) -> str:
    r"""LaTeX for mathematics mode, such as ``\frac{k\,K_{\mathrm{A}}\,[\mathrm{A}]}{...}``."""
    return _latex(lay_out(expr))


def latex_layout(node: Layout) -> str:
    """LaTeX of a piece that is laid out already."""
    return _latex(node)


def mathml(expr: sympy.Basic) -> str:
    """A ``<math>`` element in presentation MathML; every name from a file is escaped."""
    return (
        '<math xmlns="http://www.w3.org/1998/Math/MathML"><mrow>'
        f"{_mathml(lay_out(expr))}</mrow></math>"
    )


# Plain text


def _plain(node: Layout) -> str:
    if isinstance(node, Number):
        return node.text
    if isinstance(node, Name):
        if ratio_parts(node.text):
            return f"({node.text})"
        return node.text[1:-1] if node.text.startswith("{") else node.text
    if isinstance(node, Sum):
        out = ""
        for i, (minus, term) in enumerate(node.terms):
            sign = ("-" if minus else "") if i == 0 else (" - " if minus else " + ")
            out += sign + _plain_in(term, _PRODUCT)
        return out
    if isinstance(node, Product):
        top = "*".join(_plain_in(f, _PRODUCT) for f in node.above) or "1"
        if not node.below:
            return top
        bottom = "*".join(_plain_in(f, _PRODUCT) for f in node.below)
        return f"{top}/({bottom})" if len(node.below) > 1 else f"{top}/{bottom}"
    if isinstance(node, Power):
        return f"{_plain_in(node.base, _ATOM)}^{_plain_in(node.exponent, _ATOM)}"
    if isinstance(node, Call):
        return f"{node.function}({', '.join(_plain(p) for p in node.parts)})"
    return f"{_plain(node.left)} = {_plain(node.right)}"


def _plain_in(node: Layout, needed: int) -> str:
    text = _plain(node)
    return text if _binds(node) >= needed else f"({text})"


def _is_called(node: Layout) -> bool:
    return isinstance(node, Call) and node.function != "sqrt"


def _binds(node: Layout) -> int:
    if isinstance(node, Sum | Equation):
        return _SUM
    if isinstance(node, Product):
        return _PRODUCT
    return _POWER if isinstance(node, Power) else _ATOM


# LaTeX


def _latex(node: Layout) -> str:
    if isinstance(node, Number):
        mantissa, _, exponent = node.text.partition("e")
        return f"{mantissa} \\times 10^{{{exponent}}}" if exponent else mantissa
    if isinstance(node, Name):
        return _latex_name(node.text)
    if isinstance(node, Sum):
        out = ""
        for i, (minus, term) in enumerate(node.terms):
            sign = ("-" if minus else "") if i == 0 else (" - " if minus else " + ")
            out += sign + _latex_in(term, _PRODUCT)
        return out
    if isinstance(node, Product):
        top = _latex_factors(node.above)
        return rf"\frac{{{top}}}{{{_latex_factors(node.below)}}}" if node.below else top
    if isinstance(node, Power):
        lone = isinstance(node.exponent, Product) and not _plain(node.exponent).strip("0123456789/")
        exponent = _plain(node.exponent) if lone else _latex(node.exponent)
        base = _latex_in(node.base, _ATOM)
        if _is_called(node.base):  # log(x)^2 could be read as log(x^2)
            base = rf"\left({base}\right)"
        return f"{base}^{{{exponent}}}"
    if isinstance(node, Call):
        inner = ", ".join(_latex(p) for p in node.parts)
        if node.function == "sqrt":
            return rf"\sqrt{{{inner}}}"
        return rf"\{node.function}\left({inner}\right)"
    return f"{_latex(node.left)} = {_latex(node.right)}"


def _latex_factors(factors: tuple[Layout, ...]) -> str:
    if not factors:
        return "1"
    if len(factors) == 1:
        return _latex(factors[0])
    return r"\,".join(_latex_in(f, _PRODUCT) for f in factors)


def _latex_in(node: Layout, needed: int) -> str:
    text = _latex(node)
    return text if _binds(node) >= needed else rf"\left({text}\right)"


def _latex_text(text: str) -> str:
    special = {"\\": r"\backslash ", "~": r"\sim ", "^": r"\wedge ", " ": r"\ "}
    return "".join(special.get(c, "\\" + c if c in "#$%&_{}" else c) for c in text)


def _latex_name(name: str) -> str:
    ratio = ratio_parts(name)
    if ratio:
        return rf"\left({_latex_name(ratio[0])}/{_latex_name(ratio[1])}\right)"
    if name.startswith("["):
        parts = []
        for kind, text in species_parts(name[1:-1]):
            inner = _latex_text(text)
            parts.append({"sub": f"_{{{inner}}}", "sup": f"^{{{inner}}}"}.get(kind, inner))
        return rf"[\mathrm{{{''.join(parts)}}}]"
    if name.startswith("{"):
        return rf"\mathrm{{{_latex_text(name[1:-1])}}}"
    upright, letter, below = name_parts(name)
    if letter in _GREEK:
        head = f"\\{letter}"
    else:
        head = letter if len(letter) == 1 else rf"\mathrm{{{_latex_text(letter)}}}"
    if upright:
        head = rf"\mathrm{{{upright}}}{head}"
    if not below:
        return head
    inner = _latex_text(below)
    return f"{head}_{{{inner}}}" if below.isdigit() else rf"{head}_{{\mathrm{{{inner}}}}}"


# MathML


def _mathml(node: Layout) -> str:
    if isinstance(node, Number):
        mantissa, _, exponent = node.text.partition("e")
        if exponent:
            ten = f"<msup><mn>10</mn><mn>{exponent.replace('-', '−')}</mn></msup>"
            return f"<mrow><mn>{mantissa}</mn><mo>×</mo>{ten}</mrow>"
        return f"<mn>{escape(mantissa)}</mn>"
    if isinstance(node, Name):
        return _mathml_name(node.text)
    if isinstance(node, Sum):
        out = ""
        for i, (minus, term) in enumerate(node.terms):
            if i or minus:
                out += f"<mo>{'−' if minus else '+'}</mo>"
            out += _mathml_in(term, _PRODUCT)
        return f"<mrow>{out}</mrow>"
    if isinstance(node, Product):
        top = _mathml_factors(node.above)
        return f"<mfrac>{top}{_mathml_factors(node.below)}</mfrac>" if node.below else top
    if isinstance(node, Power):
        base = _mathml_in(node.base, _ATOM)
        if _is_called(node.base):
            base = f"<mrow><mo>(</mo>{base}<mo>)</mo></mrow>"
        return f"<msup>{base}{_mathml(node.exponent)}</msup>"
    if isinstance(node, Call):
        inner = "<mo>,</mo>".join(_mathml(p) for p in node.parts)
        if node.function == "sqrt":
            return f"<msqrt>{inner}</msqrt>"
        return f"<mrow><mi>{escape(node.function)}</mi><mo>(</mo>{inner}<mo>)</mo></mrow>"
    return f"<mrow>{_mathml(node.left)}<mo>=</mo>{_mathml(node.right)}</mrow>"


def _mathml_factors(factors: tuple[Layout, ...]) -> str:
    if not factors:
        return "<mn>1</mn>"
    if len(factors) == 1:
        return _mathml(factors[0])
    gap = '<mspace width="0.17em"/>'
    return f"<mrow>{gap.join(_mathml_in(f, _PRODUCT) for f in factors)}</mrow>"


def _mathml_in(node: Layout, needed: int) -> str:
    text = _mathml(node)
    return text if _binds(node) >= needed else f"<mrow><mo>(</mo>{text}<mo>)</mo></mrow>"


def _upright(text: str) -> str:
    return f'<mi mathvariant="normal">{escape(text)}</mi>'


def _mathml_name(name: str) -> str:
    ratio = ratio_parts(name)
    if ratio:
        inner = f"{_mathml_name(ratio[0])}<mo>/</mo>{_mathml_name(ratio[1])}"
        return f"<mrow><mo>(</mo>{inner}<mo>)</mo></mrow>"
    if name.startswith("["):
        out = ""
        parts = species_parts(name[1:-1])
        i = 0
        while i < len(parts):
            text = _upright(parts[i][1])
            sub = sup = ""
            if i + 1 < len(parts) and parts[i + 1][0] == "sub":
                i += 1
                sub = f"<mn>{escape(parts[i][1])}</mn>"
            if i + 1 < len(parts) and parts[i + 1][0] == "sup":
                i += 1
                sup = f"<mtext>{escape(parts[i][1].replace('-', '−'))}</mtext>"
            if sub and sup:
                text = f"<msubsup>{text}{sub}{sup}</msubsup>"
            elif sub or sup:
                text = f"<msub>{text}{sub}</msub>" if sub else f"<msup>{text}{sup}</msup>"
            out += text
            i += 1
        return f"<mrow><mo>[</mo>{out}<mo>]</mo></mrow>"
    if name.startswith("{"):
        return _upright(name[1:-1])
    upright, letter, below = name_parts(name)
    if letter in _GREEK:
        head = f"<mi>{_greek(letter)}</mi>"
    else:
        head = f"<mi>{escape(letter)}</mi>" if len(letter) == 1 else _upright(letter)
    if below:
        head = f"<msub>{head}{_upright(below)}</msub>"
    return f"<mrow>{_upright(upright)}{head}</mrow>" if upright else head


def _greek(letter: str) -> str:
    case = "CAPITAL" if letter[0].isupper() else "SMALL"
    spelled = {"lambda": "lamda"}.get(letter.lower(), letter.lower())
    return unicodedata.lookup(f"GREEK {case} LETTER {spelled.upper()}")


# Names


def ratio_parts(name: str) -> tuple[str, str] | None:
    """The two names of an unknown that stands relative to another, such as [A*]/[*]."""
    over = name.find("]/[")
    if not name.startswith("[") or over < 0:
        return None
    return name[: over + 1], name[over + 2 :]


def name_parts(name: str) -> tuple[str, str, str]:
    """(upright prefix, letter, subscript) of a constant's name.

    ``K_ads_A`` -> K with subscript ads,A; ``k1`` -> k, 1; ``Vmax`` -> V, max; ``pKa`` -> p K, a.
    """
    head, *rest = name.split("_")
    if not head:  # a name that starts with an underscore
        return "", name, ""
    prefix = ""
    if re.fullmatch(r"pK\w*", head):
        prefix, head = "p", head[1:]
    split = re.fullmatch(r"([kKV])([a-z]\w*)", head) or re.fullmatch(r"([^\W\d]+?)(\d+)", head)
    if split:
        head, rest = split[1], [split[2], *rest]
    return prefix, head, ",".join(r for r in rest if r)


def species_parts(name: str) -> list[tuple[str, str]]:
    """A species' name in pieces: ("", text), ("sub", digits), ("sup", charge).

    A charge is what follows ``^``, or a sign at the end. Digits after a letter or a bracket are
    numbers of atoms. Names stay names: nothing here is taken as a formula anywhere else.
    """
    charge = ""
    found = re.fullmatch(r"(.*?[^\s^])\^?(\d*[+-]+)", name) if "^" in name else None
    if found is None:
        found = re.fullmatch(r"(.*[^\s+-])([+-]{1,3})", name)
    if found is not None:
        name, charge = found[1], found[2]
    out: list[tuple[str, str]] = []
    if "_" in name or " " in name:
        out.append(("", name))  # a word, not a formula
    else:
        for piece in re.finditer(r"(^\d+)|(\D+)(\d*)", name):
            out.append(("", piece[1] or piece[2]))
            if piece[3]:
                out.append(("sub", piece[3]))
    if charge:
        out.append(("sup", charge))
    return out
