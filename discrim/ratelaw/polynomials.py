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
from math import comb, gcd, lcm, prod
from typing import Any

import sympy
from sympy.polys.domains import ZZ
from sympy.polys.rings import PolyRing

from discrim.ratelaw.printing import plain

# A piece of the law: ("number", p, q), ("variable", key, power), ("add" | "mul", pieces),
# or ("pow", piece, integer).
_Tree = tuple[Any, ...]
_PRIME = 2**31 - 1

Key = tuple[sympy.Basic, sympy.Basic]  # base and the symbolic part of the exponent


class NotRational(Exception):
    """The law holds an unknown where no polynomial can hold it; the message is that piece."""


@dataclass(frozen=True, slots=True)
class Variables:
    """The independent variables of a set of laws, and the ring of their polynomials.

    ``roots`` gives for each key the q for which the variable stands for key^(1/q).
    """

    keys: tuple[Key, ...]
    roots: dict[Key, int]
    ring: Any
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
    ring = PolyRing(names, ZZ, "lex")
    return Variables(keys, roots, ring, dict(zip(keys, ring.gens, strict=False)))


def ratio(tree: _Tree, variables: Variables) -> tuple[Any, dict[Any, int]]:
    """Numerator, and the factors of the denominator with their powers, in the ring.

    Nothing is cancelled, so that no common divisor has to be searched for; see `reduced`.
    Raises `ZeroDivisionError` where a denominator is zero.
    """
    op, ring = tree[0], variables.ring
    if op == "number":
        return ring(tree[1]), {} if tree[2] == 1 else {ring(tree[2]): 1}
    if op == "variable":
        _, key, power = tree
        generator, n = variables.generators[key], int(power * variables.roots[key])
        return (generator**n, {}) if n >= 0 else (ring.one, {generator: -n})
    if op == "pow":
        return _raised(tree[1], tree[2], variables)
    parts = [ratio(t, variables) for t in tree[1]]
    bottom: dict[Any, int] = {}
    for _, below in parts:
        for factor, power in below.items():
            have = bottom.get(factor, 0)
            bottom[factor] = max(have, power) if op == "add" else have + power
    top = ring.zero if op == "add" else ring.one
    for above, below in parts:
        if op == "add":
            for factor, power in bottom.items():
                above = above * factor ** (power - below.get(factor, 0))
            top = top + above
        else:
            top = top * above
    return top, bottom


def _raised(tree: _Tree, n: int, variables: Variables) -> tuple[Any, dict[Any, int]]:
    """A power of a piece; of a product, the power of each of its factors."""
    if tree[0] == "mul":
        return ratio(("mul", [("pow", t, n) for t in tree[1]]), variables)
    if tree[0] == "pow":
        return _raised(tree[1], tree[2] * n, variables)
    above, below = ratio(tree, variables)
    if n >= 0:
        return above**n, {factor: power * n for factor, power in below.items()}
    if not above:
        raise ZeroDivisionError
    top = variables.ring.one
    for factor, power in below.items():
        top = top * factor ** (power * -n)
    return top, {above: -n}


def reduced(top: Any, bottom: dict[Any, int]) -> tuple[Any, Any]:
    """Numerator and denominator without the factors that they visibly share."""
    below = top.ring.one
    for factor, power in bottom.items():
        left = power
        while left and len(factor) > 1 and top:
            quotient = divided(top, factor)
            if quotient is None:
                break
            top, left = quotient, left - 1
        below = below * factor**left
    top, below = without_common((top, below))
    if below.LC < 0 and top:
        return -top, -below
    return top, below


def divided(poly: Any, by: Any) -> Any | None:
    """The exact quotient, or None."""
    if any(a > b for a, b in zip(by.degrees(), poly.degrees(), strict=True)):
        return None
    quotient, rest = poly.div(by)
    return None if rest else quotient


def without_common(polys: Sequence[Any]) -> tuple[Any, ...]:
    """Polynomials divided by the product of powers and the number that all share."""
    some = [p for p in polys if p]
    if not some:
        return tuple(polys)
    low = [min(col) for col in zip(*(m for p in some for m in p), strict=True)]
    number = gcd(*(int(c) for p in some for c in p.values()))
    if number == 1 and not any(low):
        return tuple(polys)
    return tuple(
        p.ring.from_dict(
            {tuple(a - b for a, b in zip(m, low, strict=True)): c // number for m, c in p.items()}
        )
        for p in polys
    )


def coprime(polys: Sequence[Any], generators: Sequence[int]) -> bool:
    """Whether it is proven that the polynomials share no factor that holds one of the generators.

    For each generator x the others are set to integers: what the polynomials share then still
    divides all of them, and keeps its degree in x if one leading coefficient is not zero, so a
    greatest common divisor of degree zero there is a proof (modulo a prime, likewise).
    """
    some = [p for p in polys if p]
    return all(_coprime_in(some, i) for i in generators)


def odd_somewhere(poly: Any, generators: Sequence[int]) -> bool:
    """Whether it is proven that the polynomial is no constant times a square, in the generators.

    With the others at integers, a square h^2 and its derivative would share h, of half its degree.
    """
    if not poly:
        return False
    for i in generators:
        degree = max(m[i] for m in poly)
        row = _at_numbers(poly, i, 0)
        if not degree or len(row) <= degree:
            continue
        slope = [k * c % _PRIME for k, c in enumerate(row)][1:]
        if 2 * (len(_gcd_mod(row, slope)) - 1) < degree:
            return True
    return False


def _coprime_in(polys: Sequence[Any], i: int) -> bool:
    if any(all(m[i] == 0 for m in p) for p in polys):
        return True
    for attempt in range(3):
        rows = [_at_numbers(p, i, attempt) for p in polys]
        # _at_numbers drops zeros at the top: then the degree fell and proves nothing
        if all(len(row) <= max(m[i] for m in p) for row, p in zip(rows, polys, strict=True)):
            continue
        rows = [row for row in rows if row]
        shared = rows[0]
        for row in rows[1:]:
            shared = _gcd_mod(shared, row)
        if len(shared) == 1:
            return True
    return False


def _at_numbers(poly: Any, i: int, attempt: int) -> list[int]:
    """Coefficients by powers of generator ``i``, the other generators at integers, mod a prime."""
    points = [pow(3 + attempt, 7 * j + 5, _PRIME) for j in range(poly.ring.ngens)]
    out: list[int] = []
    for monomial, c in poly.items():
        value = int(c) % _PRIME
        for j, e in enumerate(monomial):
            if e and j != i:
                value = value * pow(points[j], e, _PRIME) % _PRIME
        out += [0] * (monomial[i] + 1 - len(out))
        out[monomial[i]] = (out[monomial[i]] + value) % _PRIME
    while out and not out[-1]:
        out.pop()
    return out


def _gcd_mod(a: list[int], b: list[int]) -> list[int]:
    while b:
        inverse = pow(b[-1], -1, _PRIME)
        while len(a) >= len(b):
            times, shift = a[-1] * inverse % _PRIME, len(a) - len(b)
            a = [(c - times * b[k - shift]) % _PRIME if k >= shift else c for k, c in enumerate(a)]
            while a and not a[-1]:
                a.pop()
        a, b = b, a
    return a


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
