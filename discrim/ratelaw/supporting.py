r"""The derivation of a law as one block of LaTeX, for the supporting information of a paper.

Plain text and the ``align*`` of amsmath; nothing else is needed. Long sums are broken at their
signs, long fractions are written as numerator and denominator with lines of their own.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from typing import Any

import sympy

from discrim.ratelaw.implicit import balances_of
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
from discrim.ratelaw.limits import LOW, ApparentOrder, Case, Limit, told
from discrim.ratelaw.model import RateLaw, amount
from discrim.ratelaw.printing import latex, latex_layout

#: Characters of a formula that fit one line of a page, with indices counted as half.
ROOM = 62
_SHORT = 12  # what stays in a broken fraction

_SPECIAL = {
    "\\": r"\textbackslash{}", "~": r"\textasciitilde{}", "^": r"\textasciicircum{}",
    "<": r"\textless{}", ">": r"\textgreater{}", "|": r"\textbar{}", '"': r"\textquotedbl{}",
    "“": "``", "”": "''", "–": "--",
}  # fmt: skip
_ARROW = {"<=>": r"$\rightleftharpoons$", "->": r"$\rightarrow$", "<-": r"$\leftarrow$"}


def supporting(law: RateLaw, limits: Sequence[Limit], orders: Sequence[ApparentOrder]) -> str:
    """The whole argument: steps, assumptions, derivation, law, limiting cases."""
    name = "".join(c if c.isprintable() else " " for c in law.name)
    out: list[str] = [f"% {name}; needs amsmath", r"\begingroup\allowdisplaybreaks"]
    if law.steps:
        rows = [rf"\text{{{text(n)}}}\colon\quad & {equation(t)}" for n, t in law.steps.items()]
        out += [r"\paragraph{Steps}", *_aligned(rows)]
    if law.routes:
        rows = [rf"\text{{{text(r.words())}}}\colon\quad & {equation(r.text)}" for r in law.routes]
        out += [r"\paragraph{Pathways}", *_aligned(rows)]
    if law.steps:
        out += [
            r"\paragraph{Assumptions}",
            *(text(s) for s in (*law.assumptions, *law.conventions)),
        ]
    if law.derivation:
        out += [r"\paragraph{Derivation}", *_argument(law)]
    if not law.derivation or law.derivation[-1][1] != law.rate:
        out += [r"\paragraph{Rate law}", *_aligned(_rows(law.rate, "r"))]
    balances = balances_of(law.rate)
    if balances:
        rows = [row for _, e in balances for row in _rows(e, "0")]
        out += [
            "Here " + ", ".join(f"${latex(u)}$" for u, _ in balances) + " from",
            *_aligned(rows),
        ]
    ahead = any(x.forward for x in limits)
    for heading, forward in (
        ("Limiting cases of the forward reaction", True),
        ("Limiting cases of the net rate, where they differ" if ahead else "Limiting cases", False),
    ):
        cases = [_case(c) for c in told(limits) if c.limits[0].forward == forward]
        if cases:
            out += [rf"\paragraph{{{heading}}}", *_aligned(cases)]
    if orders:
        rows = []
        for item in orders:
            x = latex(amount(item.species))
            rows += _rows(item.order, rf"\frac{{\mathrm{{d}}\ln r}}{{\mathrm{{d}}\ln {x}}}")
        out += [r"\paragraph{Apparent orders}", *_aligned(rows)]
    return "\n".join([*out, r"\endgroup"]) + "\n"


def _argument(law: RateLaw) -> list[str]:
    """Words and formulas in turn; formulas that follow one another share one alignment."""
    out: list[str] = []
    rows: list[str] = []
    for words, e in law.derivation:
        if e is None:
            out += [*_aligned(rows), text(words) + "."]
            rows = []
            continue
        here = _rows(e, "r" if e in (law.rate, law.step_rate) else _left_of(words))
        if rows:
            here[0] = rf"\intertext{{{text(words)}:}}" + "\n  " + here[0]
        else:
            out.append(text(words) + ":")
        rows += here
    return out + _aligned(rows)


def text(words: str) -> str:
    """Words with everything escaped that LaTeX would read as a command."""
    pieces = re.split(r"(<=>|<-|->)", words)
    return "".join(
        _ARROW.get(p) or "".join(_SPECIAL.get(c, "\\" + c if c in "#$%&_{}" else c) for c in p)
        for p in pieces
    )


def equation(step: str) -> str:
    r"""A step or overall equation in mathematics mode, such as ``2\,\mathrm{A} \rightarrow ...``.

    Species and arrows stand apart by blanks, as in the text of a step.
    """
    arrows = {"<=>": r"\rightleftharpoons", "->": r"\rightarrow"}
    out = []
    for word in step.split(" "):
        if not word:
            continue
        if word in arrows or word == "+" or word.isdigit():
            out.append(arrows.get(word) or (rf"{word}\," if word.isdigit() else word))
        else:
            out.append(_species(word))
    return " ".join(out)


def _species(name: str) -> str:
    return latex(amount(name))[1:-1]


def _left_of(words: str) -> str:
    """What the formula of a line is, where it is no equation itself."""
    step = re.match(r"(?:Net rate|Rate) of step (\w+)", words)
    if step:
        return latex(sympy.Symbol(f"r_{step[1]}"))
    return ""


def _case(case: Case) -> str:
    first = case.limits[0]
    x = latex(amount(first.species))
    if len(case.limits) == 2:
        when = rf"\text{{any }} {x}" if first.exact else rf"{x} \to 0 \text{{ or }} \infty"
        lead = rf"{when}\colon\quad r {'=' if first.exact else chr(92) + 'to '}{{}} & "
    else:
        end = "0" if first.where == LOW else r"\infty"
        lead = rf"{x} \to {end}\colon\quad r \to {{}} & "
    order = str(first.order) if first.order.is_Rational else latex(first.order)
    return rf"{lead}{latex(first.law)} && \text{{order }} {order}"


def _aligned(rows: Iterable[str]) -> list[str]:
    lines = list(rows)
    if not lines:
        return []
    inner = [f"  {row} \\\\" for row in lines[:-1]] + [f"  {lines[-1]}"]
    return [r"\begin{align*}", *inner, r"\end{align*}"]


def _rows(e: Any, left: str) -> list[str]:
    """The lines of one formula; with ``left`` before it where it is no equation itself."""
    node = lay_out(e)
    if isinstance(node, Equation):
        # what is computed stands on the left: 0 = balance, [A*] = ...
        left, node = latex_layout(node.left), node.right
    lead = f"{left} ={{}} & " if left else "& "
    return _broken(lead, node)


def _broken(lead: str, node: Layout) -> list[str]:
    if width(node) <= ROOM:
        return [lead + latex_layout(node)]
    if isinstance(node, Sum):
        return _sum(lead, node)
    if isinstance(node, Power):
        node = Product((node,), ())
    if isinstance(node, Product) and node.below:
        sides = {r"\mathcal{N}": node.above, r"\mathcal{D}": node.below}
        shown, rows = [], []
        for name, factors in sides.items():
            side = _product(factors)
            if width(side) <= _SHORT:
                shown.append(latex_layout(side))
            elif isinstance(side, Power) and isinstance(side.base, Sum):
                shown.append(f"{name}^{{{latex_layout(side.exponent)}}}")
                rows += _side(name, side.base)
            else:
                shown.append(name)
                rows += _side(name, side)
        return [lead + rf"\frac{{{shown[0]}}}{{{shown[1]}}}", *rows]
    if isinstance(node, Product):
        wide = max(range(len(node.above)), key=lambda i: width(node.above[i]))
        inner = node.above[wide]
        base = inner.base if isinstance(inner, Power) else inner
        if isinstance(base, Sum):
            name = r"\mathcal{S}"
            power = f"^{{{latex_layout(inner.exponent)}}}" if isinstance(inner, Power) else ""
            others = [f for i, f in enumerate(node.above) if i != wide]
            before = rf"{latex_layout(_product(tuple(others)))}\," if others else ""
            head = lead + before + name + power
            return [head, *_sum(f"{name} ={{}} & ", base)]
    return [lead + latex_layout(node)]


def _product(factors: tuple[Layout, ...]) -> Layout:
    if not factors:
        return Number("1")
    return factors[0] if len(factors) == 1 else Product(factors, ())


def _side(name: str, node: Layout) -> list[str]:
    rows = _broken(f"{name} ={{}} & ", node)
    # a sum inside of the numerator and one inside of the denominator get different names
    mark = name[-2]
    return [r.replace(r"\mathcal{S}", rf"\mathcal{{S}}_{{\mathcal{{{mark}}}}}") for r in rows]


def _sum(lead: str, node: Sum) -> list[str]:
    rows, line, used = [], lead, 0.0
    for i, (minus, term) in enumerate(node.terms):
        here = width(term) + 3
        sign = ("-" if minus else "") if i == 0 else ("- " if minus else "+ ")
        if used and used + here > ROOM:
            rows.append(line.rstrip())
            line, used = r"& \quad {}", 0.0
        line += sign + latex_layout(Sum(((False, term),)) if isinstance(term, Sum) else term) + " "
        used += here
    return [*rows, line.rstrip()]


def width(node: Layout) -> float:
    """About how many characters wide the typeset formula is; indices and exponents count half."""
    if isinstance(node, Number):
        return len(node.text)
    if isinstance(node, Name):
        if node.text.startswith("["):
            return len(node.text)
        return 1 + 0.55 * max(0, len(node.text) - 1)
    if isinstance(node, Sum):
        return sum(width(t) + 3 for _, t in node.terms) - 2
    if isinstance(node, Product):
        above = sum(width(f) + (2 if isinstance(f, Sum) else 0.3) for f in node.above) or 1
        below = sum(width(f) + (2 if isinstance(f, Sum) else 0.3) for f in node.below)
        return max(above, below)
    if isinstance(node, Power):
        return width(node.base) + 2 + 0.6 * width(node.exponent)
    if isinstance(node, Call):
        return len(node.function) + 2 + sum(width(p) for p in node.parts)
    return width(node.left) + 3 + width(node.right)
