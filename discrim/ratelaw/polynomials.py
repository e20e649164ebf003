"""Rate laws as exact rational functions, for proofs that two laws agree.

A law is a rational function of its species and constants once roots and symbolic powers are given
names of their own: with u = [A]^(1/2), sqrt([A])/(1 + K*[A]) is u/(1 + K*u^2); [A]^n with a
symbolic order is an independent variable beside [A]. Such a replacement can hide an identity (the
variables may be related) but never make a false one: what vanishes identically in independent
variables vanishes for the values that they stand for. So it is sound for proofs of agreement.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from math import comb, lcm, prod
from typing import Any

import sympy
from sympy.polys.domains import ZZ
from sympy.polys.fields import FracField

from discrim.ratelaw.printing import plain

# A piece of the law: ("number", p, q), ("variable", key, power), ("add" | "mul", pieces),
# or ("pow", piece, integer).
_Tree = tuple[Any, ...]
Key = tuple[sympy.Basic, sympy.Basic]  # base and the symbolic part of the exponent


class NotRational(Exception):
    """The law holds an unknown where no polynomial can hold it; the message is that piece."""


@dataclass(frozen=True, slots=True)
class Variables:
    """The independent variables of a set of laws, and the field of their rational functions.

    ``roots`` gives for each key the q for which the variable stands for key^(1/q).
    """

    keys: tuple[Key, ...]
    roots: dict[Key, int]
    field: Any
    generators: dict[Key, Any]


def as_trees(exprs: Iterable[sympy.Expr], unknown: frozenset[sympy.Symbol]) -> list[_Tree]:
    """The pieces of each law. Raises `NotRational` for an unknown in a function or exponent.

    An unknown to a symbolic power that is itself known, c^n, is a variable of its own.
    """
    return [_tree(e, unknown) for e in exprs]


def collect(trees: Sequence[_Tree], ordering: Any) -> Variables:
    """The variables of all ``trees``; ``ordering`` is a sort key, on `Key`."""
    roots: dict[Key, int] = {}
    for tree in trees:
        _roots(tree, roots)
    keys = tuple(sorted(roots, key=ordering))
    names = [f"v{i}" for i in range(len(keys))] or ["v0"]
    field = FracField(names, ZZ, "lex")
    return Variables(keys, roots, field, dict(zip(keys, field.gens, strict=False)))


def evaluate(tree: _Tree, variables: Variables) -> Any:
    """The rational function, cancelled, as an element of the field."""
    op = tree[0]
    if op == "number":
        return variables.field(tree[1]) / variables.field(tree[2])
    if op == "variable":
        _, key, power = tree
        return variables.generators[key] ** int(power * variables.roots[key])
    if op == "pow":
        return evaluate(tree[1], variables) ** tree[2]
    parts = [evaluate(t, variables) for t in tree[1]]
    out = parts[0]
    for part in parts[1:]:
        out = out + part if op == "add" else out * part
    return out


def n_terms(tree: _Tree) -> int:
    """At most so many terms numerator and denominator have once multiplied out."""
    above, below = _sizes(tree)
    return above + prod(comb(n + power - 1, power) for n, power in below.values())


def _sizes(tree: _Tree) -> tuple[int, dict[str, tuple[int, int]]]:
    """Terms of the numerator; terms and power of each factor of the denominator."""
    op = tree[0]
    if op == "number" or op == "variable":
        return 1, {}
    if op == "pow":
        above, below = _sizes(tree[1])
        power = abs(tree[2])
        raised = {name: (n, p * power) for name, (n, p) in below.items()}
        if tree[2] >= 0:
            return comb(above + power - 1, power), raised
        out = {} if above == 1 else {str(tree[1]): (above, power)}
        return prod(comb(n + p - 1, p) for n, p in raised.values()), out
    parts = [_sizes(t) for t in tree[1]]
    shared: dict[str, tuple[int, int]] = {}
    for _, below in parts:
        for name, (n, power) in below.items():
            known = shared.get(name, (n, 0))[1]
            shared[name] = n, (max(known, power) if op == "add" else known + power)
    if op == "mul":
        return prod(above for above, _ in parts), shared
    total = 0
    for above, below in parts:
        missing = {name: p - below.get(name, (n, 0))[1] for name, (n, p) in shared.items()}
        total += above * prod(comb(shared[name][0] + p - 1, p) for name, p in missing.items())
    return total, shared


def _roots(tree: _Tree, out: dict[Key, int]) -> None:
    op = tree[0]
    if op == "variable":
        out[tree[1]] = lcm(out.get(tree[1], 1), int(tree[2].q))
    elif op == "pow":
        _roots(tree[1], out)
    elif op != "number":
        for part in tree[1]:
            _roots(part, out)


_ONE = sympy.Integer(1)


def _tree(expr: sympy.Expr, unknown: frozenset[sympy.Symbol]) -> _Tree:
    if expr.is_Rational:
        return ("number", int(expr.p), int(expr.q))
    if expr.is_Float:
        exact = sympy.Rational(str(expr))
        return ("number", int(exact.p), int(exact.q))
    if expr.is_Symbol:
        return ("variable", (expr, _ONE), _ONE)
    if expr.is_Add or expr.is_Mul:
        return ("add" if expr.is_Add else "mul", [_tree(a, unknown) for a in expr.args])
    if isinstance(expr, sympy.exp):
        return _power(sympy.E, expr.args[0], unknown)
    if expr.is_Pow:
        return _power(expr.base, expr.exp, unknown)
    return _variable((expr, _ONE), _ONE, unknown)


def _power(base: sympy.Expr, exponent: sympy.Expr, unknown: frozenset[sympy.Symbol]) -> _Tree:
    if exponent.is_Integer and base is not sympy.E:
        return ("pow", _tree(base, unknown), int(exponent))
    if base.is_Mul and all(f.as_base_exp()[0].is_nonnegative for f in base.args):
        return ("mul", [_power(f, exponent, unknown) for f in base.args])
    if base.is_Pow and base.base.is_nonnegative:
        return _power(base.base, sympy.expand(base.exp * exponent), unknown)
    parts: list[_Tree] = []
    for term in sympy.Add.make_args(sympy.expand(exponent)):
        number, symbolic = term.as_coeff_Mul(rational=True)
        if symbolic == 1 and base is not sympy.E and base.is_Symbol:
            parts.append(("variable", (base, _ONE), number))
        elif symbolic == 1 and number.is_Integer and base is not sympy.E:
            parts.append(("pow", _tree(base, unknown), int(number)))
        else:
            parts.append(_variable((base, symbolic), number, unknown))
    return parts[0] if len(parts) == 1 else ("mul", parts)


def _variable(key: Key, power: sympy.Rational, unknown: frozenset[sympy.Symbol]) -> _Tree:
    held = key[1].free_symbols if key[0] in unknown else key[0].free_symbols | key[1].free_symbols
    if held & unknown:
        raise NotRational(plain(key[0] ** key[1]))
    return ("variable", key, power)
