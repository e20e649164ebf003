"""Laws as plain records: text, LaTeX, MathML, derivation, assumptions."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import sympy

from discrim.ratelaw.implicit import balances_of
from discrim.ratelaw.limits import Limit, apparent_orders, limits_of, order_text
from discrim.ratelaw.model import RateLaw
from discrim.ratelaw.printing import latex, mathml, plain
from discrim.ratelaw.supporting import supporting
from discrim.study.model import Study
from discrim.weigh.laws import CandidateLaw, laws_of
from discrim.weigh.sameness import relations_of_laws


def law_keys(c: CandidateLaw) -> dict[str, Any]:
    """The keys of a candidate that come from its law alone."""
    out = _of_law(c.law)
    place = c.candidate.place
    file = Path(place.file).name  # the same from any folder
    out["place"] = f"{file}, line {place.line}" if place.line else file
    if c.candidate.law_text:
        out["as_written"] = c.candidate.law_text
    return out


def _of_law(law: RateLaw) -> dict[str, Any]:
    limits, orders = limits_of(law), apparent_orders(law)
    lumped = law.step_rate is not None and any(c.definition is not None for c in law.constants)
    return {
        "name": law.name,
        "law": plain(law.rate),
        "law_latex": latex(law.rate),
        "law_mathml": mathml(law.rate),
        "step_law": plain(law.step_rate) if lumped else "",
        "step_law_latex": latex(law.step_rate) if lumped else "",
        "step_law_mathml": mathml(law.step_rate) if lumped else "",
        "balances": _balances(law.rate),
        "steps": dict(law.steps),
        "source": law.source,
        "assumptions": list(law.assumptions),
        "conventions": list(law.conventions),
        "combinations": [
            {
                "name": c.name,
                "definition": plain(c.definition),
                "definition_latex": latex(c.definition),
                "definition_mathml": mathml(c.definition),
                "words": c.meaning,
            }
            for c in law.constants
            if c.definition is not None
        ],
        "derivation": [
            {
                "words": words,
                "text": "" if e is None else plain(e),
                "latex": "" if e is None else latex(e),
                "mathml": "" if e is None else mathml(e),
            }
            for words, e in law.derivation
        ],
        "constants_of_law": [
            {"name": c.name, "kind": c.kind.value, "meaning": c.meaning} for c in law.constants
        ],
        "derivation_latex": supporting(law, limits, orders),
        "routes": [
            {
                "name": r.name,
                "equation": r.text,
                "steps": dict(r.steps),
                "words": r.words(),
                "overall": dict(r.overall),
            }
            for r in law.routes
        ],
        "limits": [_limit(x) for x in limits],
        "apparent_orders": [
            {
                "species": o.species,
                "order": plain(o.order),
                "order_latex": latex(o.order),
                "order_mathml": mathml(o.order),
                "forward": o.forward,
            }
            for o in orders
        ],
        "production": {k: plain(e) for k, e in law.production.items()},
        "findings": list(law.findings),
        "warnings": list(law.warnings),
    }


def _balances(rate: Any) -> list[dict[str, Any]]:
    """What the law's unknowns solve, where it has no closed form: one equation for each."""
    out = []
    for unknown, balance in balances_of(rate):
        equation = sympy.Eq(0, balance, evaluate=False)
        out.append(
            {
                "unknown": str(unknown.name),
                "text": plain(equation),
                "latex": latex(equation),
                "mathml": mathml(equation),
            }
        )
    return out


def _limit(x: Limit) -> dict[str, Any]:
    given = x.law is not None
    return {
        "species": x.species,
        "where": x.where,
        "order": order_text(x.order) if given else "",
        "words": x.words,
        "forward": x.forward,
        "reverse": x.reverse,
        "exact": x.exact,
        "law": plain(x.law) if given else "",
        "law_latex": latex(x.law) if given else "",
        "law_mathml": mathml(x.law) if given else "",
    }


def derive_study(study: Study) -> list[dict[str, Any]]:
    """Each candidate's law, which are the same, and how each is related to the others."""
    laws = laws_of(study)
    related = relations_of_laws(laws, study)
    names = [c.law.name for c in laws]
    records = related.records(names)
    out = [law_keys(c) for c in laws]
    for i, d in enumerate(out):
        twins = [j for pair in related.same for j in pair if i in pair and j != i]
        d["same_law_as"] = [names[j] for j in sorted(twins)]
        d["relations"] = [r for r in records if names[i] in (r["a"], r["b"])]
    return out


def derive_file(path: str) -> dict[str, Any]:
    """The law of one mechanism file, or of one in the library by name."""
    from discrim.mechanism.library import load
    from discrim.mechanism.model import Mechanism
    from discrim.ratelaw.bare import law_as_written
    from discrim.ratelaw.derive import derive

    p = Path(path)
    if p.suffix == ".toml" or p.parent != Path():
        record = load("./" + p.name, base=p.parent.resolve())
    else:
        record = load(path, base=Path.cwd())
    law = derive(record) if isinstance(record, Mechanism) else law_as_written(record)
    out = _of_law(law)
    out["title"] = record.title
    out["note"] = [text for text in (record.title and f"{record.title}.", record.note) if text]
    out["same_law_as"] = []
    return out
