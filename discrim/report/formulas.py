"""MathML from a saved document, made safe for a page: known elements only, no scripts, no links.

The document may have been edited by anyone, so its MathML is read as XML and written again from
the elements below; what cannot be read is left out and the plain text of the formula is shown.
"""

from __future__ import annotations

from html import escape
from xml.etree import ElementTree

# fmt: off
_ELEMENTS = frozenset((
    "math", "mrow", "mi", "mn", "mo", "mtext", "mspace", "ms", "mfrac", "msqrt", "mroot", "mstyle",
    "merror", "mpadded", "mphantom", "msub", "msup", "msubsup", "munder", "mover", "munderover",
    "mmultiscripts", "mprescripts", "none", "mtable", "mtr", "mtd",
))
_ATTRIBUTES = frozenset((
    "mathvariant", "stretchy", "fence", "separator", "form", "lspace", "rspace", "width",
    "linethickness", "columnalign", "displaystyle", "accent",
))
# fmt: on
_LONGEST, _DEEPEST = 200_000, 120


def safe_mathml(text: str) -> str:
    """The formula as one ``<math>`` element, or "" if it is not plain presentation MathML."""
    if not text or len(text) > _LONGEST or "<!" in text or "<?" in text:
        return ""
    try:
        root = ElementTree.fromstring(f"<x>{text}</x>")
        inner = _inside(root, 0)
    except (ElementTree.ParseError, _NotAllowed, RecursionError):
        return ""
    return f'<math display="block">{inner}</math>' if inner else ""


class _NotAllowed(Exception):
    pass


def _inside(element: ElementTree.Element, depth: int) -> str:
    out = [escape(element.text or "")]
    for child in element:
        out.append(_element(child, depth + 1))
        out.append(escape(child.tail or ""))
    return "".join(out)


def _element(element: ElementTree.Element, depth: int) -> str:
    name = str(element.tag).rpartition("}")[2]
    if depth > _DEEPEST:
        raise _NotAllowed
    if name == "math":
        return _inside(element, depth)
    if name == "mfenced":  # not drawn by today's browsers
        return _fenced(element, depth)
    if name not in _ELEMENTS:
        raise _NotAllowed
    attributes = "".join(
        f' {key}="{escape(value)}"' for key, value in element.attrib.items() if key in _ATTRIBUTES
    )
    return f"<{name}{attributes}>{_inside(element, depth)}</{name}>"


def _fenced(element: ElementTree.Element, depth: int) -> str:
    left, right = element.get("open", "("), element.get("close", ")")
    marks = element.get("separators", ",").strip()
    parts = [_element(child, depth + 1) for child in element]
    between = f"<mo>{escape(marks[:1])}</mo>" if marks else ""
    return f"<mrow><mo>{escape(left)}</mo>{between.join(parts)}<mo>{escape(right)}</mo></mrow>"
