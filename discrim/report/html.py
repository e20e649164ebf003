"""The report as one HTML page that needs nothing else: no network, no script."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined, select_autoescape
from markupsafe import Markup, escape

from discrim.report.canvas import Picture, inline
from discrim.report.content import build
from discrim.report.formulas import safe_mathml
from discrim.report.read import Document

_EXPONENT = re.compile(r"(?<![\w.])(\d+(?:\.\d+)?)e(-?)(\d+)\b")
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_MINUS = re.compile(r"(?<![\w.)])-(?=[\d.])")


def page(document: Document, pictures: Sequence[Picture] = ()) -> str:
    """The whole page. Everything from the document is escaped; MathML is read and rewritten."""
    environment = Environment(
        loader=PackageLoader("discrim.report", "templates"),
        autoescape=select_autoescape(default=True, default_for_string=True),
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["number"] = numeral
    environment.filters["units"] = lambda text: Markup(numeral(text).removeprefix("1 × "))
    environment.filters["mathml"] = lambda text: Markup(safe_mathml(text))
    environment.filters["slug"] = slug
    content = build(document)
    by_place: dict[str, list[dict[str, Any]]] = {"effects": [], "planes": [], "fit": [],
                                                 "constants": [], "candidates": []}  # fmt: skip
    for picture in pictures:
        by_place[_place(picture.name)].append(
            {"title": picture.title, "caption": picture.caption, "alt": picture.alt,
             "svg": Markup(inline(picture)), "name": picture.name}
        )  # fmt: skip
    text = environment.get_template("report.html.j2").render(c=content, figures=by_place)
    # A lone surrogate (from an odd file) has no UTF-8; show it as the sign for an unknown one.
    return text.encode("utf-8", "replace").decode("utf-8")


def _place(name: str) -> str:
    if name == "effects":
        return "effects"
    places = {"plane": "planes", "intervals": "constants", "lattice": "candidates"}
    return places.get(name.split("-")[0], "fit")


def numeral(text: str) -> Markup:
    """A number as print sets it: ``1.2e-5`` as 1.2 × 10⁻⁵, a true minus sign."""
    out = _EXPONENT.sub(
        lambda m: f"{m[1]} × 10{(m[2] + m[3]).translate(_RAISED)}", str(escape(text))
    )
    return Markup(_MINUS.sub("−", out))


def slug(text: str) -> str:
    """A word that may stand in a class name or an id."""
    return re.sub(r"[^a-z0-9]+", "-", text.lower()).strip("-") or "none"
