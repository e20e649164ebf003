"""Reading published laws and comparing them with the laws of the library, by exact algebra."""

from pathlib import Path

import sympy

from discrim.errors import Place
from discrim.mechanism.library import load
from discrim.mechanism.model import Mechanism
from discrim.ratelaw.bare import law_as_written
from discrim.ratelaw.derive import derive
from discrim.ratelaw.expression import parse_expression
from discrim.ratelaw.model import constant_symbol


def library_law(name):
    """The law of a file of the library, derived from its steps or as it is written."""
    record = load(name, Path())
    return derive(record) if isinstance(record, Mechanism) else law_as_written(record)


def read(text):
    """A published form with the symbols of the laws; all constants zero or positive."""
    expression = parse_expression(text, Place(text=text))
    return expression.xreplace(
        {s: constant_symbol(s.name) for s in expression.free_symbols if s.name[0] not in "[{"}
    )


def in_steps(law, expression, keep=("K_eq",)):
    """Combinations written out in the constants of the steps; those in ``keep`` stay."""
    known = {
        c.symbol: c.definition
        for c in law.constants
        if c.definition is not None and c.name not in keep
    }
    return expression.xreplace(known)


def is_zero(expression):
    """Whether an expression with fractional powers and roots of sums vanishes, decided exactly.

    Every symbol is the square of a positive one, so that powers become whole; each root of a sum
    is an algebraic number over what it holds, so the numerator is reduced by its square.
    """
    squares = {
        s: sympy.Symbol(f"r_{i}", positive=True) ** 2
        for i, s in enumerate(sorted(expression.free_symbols, key=str))
    }
    top, _ = sympy.fraction(sympy.together(expression.xreplace(squares)))
    for n in range(4):
        roots = [
            p for p in top.atoms(sympy.Pow) if p.exp.is_Rational and p.exp.q == 2 and p.base.is_Add
        ]
        if not roots:
            return sympy.expand(top) == 0
        inside = roots[0].base
        z = sympy.Symbol(f"root_{n}", positive=True)
        swapped = top.replace(
            lambda p, a=inside: p.is_Pow and p.exp.is_Rational and p.base == a,
            lambda p, z=z: z ** (2 * p.exp),
        )
        top, _ = sympy.fraction(sympy.together(swapped))
        top = sympy.rem(sympy.expand(top), z**2 - inside, z).xreplace({z: sympy.sqrt(inside)})
        top = sympy.expand(top)
        if top == 0:
            return True
        if top.has(sympy.sqrt(inside)):
            return False  # a + b*root with b not zero
    return False


def same(a, b):
    """Whether two laws are equal for all positive amounts and constants."""
    return is_zero(a - b)


def symbols(law, *names):
    """Symbols of constants of the steps by name, for limits."""
    found = {s.name: s for s in in_steps(law, law.rate).free_symbols}
    return [found[name] for name in names]
