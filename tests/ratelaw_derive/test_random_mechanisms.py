"""Derived laws against the steady state of the full mass-action equations, for drawn mechanisms."""

from __future__ import annotations

from collections import Counter
from functools import cache, lru_cache
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy

from discrim.errors import DiscrimError
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.compile import CompiledLaw
from discrim.ratelaw.derive import derive
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.model import Constant, RateLaw, amount
from tests.ratelaw_derive.full_mass_action import Values, steady_state
from tests.ratelaw_derive.random_mechanisms import CLASSES, Case, cases, equilibrated_steps

SEED = 20240611
COUNT = 208  # sixteen of each class
AGREE = 1e-8
EXACT_DIGITS = 60  # for laws that are not implicit

# Well-posed cases, by number, that are refused, with the reason.
REFUSED: dict[int, str] = {}


@lru_cache(maxsize=1)
def drawn() -> tuple[Case, ...]:
    return tuple(cases(SEED, COUNT))


def numbers(case: Case) -> dict[str, Any]:
    """Values of the constants of the steps by name, from the drawn logarithms."""
    out: dict[str, Any] = {}
    for step in case.mechanism.steps:
        log_k = mpmath.mpf(case.values.forward[step.name])
        out[f"k_{step.name}"] = mpmath.exp(log_k)
        if step.reversible:
            log_big_k = mpmath.mpf(case.values.equilibrium[step.name])
            out[f"K_{step.name}"] = mpmath.exp(log_big_k)
            out[f"k_rev_{step.name}"] = mpmath.exp(log_k - log_big_k)
    return out


def evaluate(expression: Any, values: dict[sympy.Symbol, Any]) -> Any:
    """In many digits where the law is explicit; as the fits do where it is not."""
    expression = sympy.sympify(expression)
    if not expression.has(ImplicitValue):
        return _exact(expression, values)
    used = sorted(expression.free_symbols, key=str)
    law = CompiledLaw(expression, used, [])
    theta = np.array([[[float(values[s]) for s in used]]])
    found = law(theta, np.zeros((1, 0)), constants=False, conditions_too=False, both=False)[0]
    return mpmath.mpf(float(found[0, 0]))


def _exact(e: Any, values: dict[sympy.Symbol, Any]) -> Any:
    """Plain recursion over sums, products and powers, in the digits of the context."""
    if e.is_Symbol:
        return values[e]
    if e.is_Rational:
        return mpmath.mpf(int(e.p)) / int(e.q)
    if e.is_Add:
        return mpmath.fsum(_exact(x, values) for x in e.args)
    if e.is_Mul:
        return mpmath.fprod(_exact(x, values) for x in e.args)
    assert e.is_Pow, e
    assert e.exp.is_Rational, e
    power = int(e.exp) if e.exp.is_Integer else _exact(e.exp, values)
    return _exact(e.base, values) ** power


def errors_of(
    case: Case,
    constants: tuple[Constant, ...],
    production: dict[str, Any],
    *,
    stretched: tuple[str, Any] | None = None,
) -> dict[str, float]:
    """Relative error of the production of each fluid species.

    ``stretched`` names a constant whose value is multiplied by a factor first.
    """
    with mpmath.workdps(EXACT_DIGITS):
        of_steps = numbers(case)
        by_symbol: dict[sympy.Symbol, Any] = {}
        for c in constants:
            if c.definition is None:
                by_symbol[c.symbol] = of_steps[c.name]
            else:
                inside = {s: of_steps[s.name] for s in c.definition.free_symbols}
                by_symbol[c.symbol] = evaluate(c.definition, inside)
            if stretched and c.name == stretched[0]:
                by_symbol[c.symbol] *= stretched[1]
        by_symbol |= {amount(s): mpmath.mpf(v) for s, v in case.values.amounts.items()}
        per = 1.0  # a law is per total catalyst unless the total stands in it
        for name, total in zip(case.draft.catalyst, case.values.totals, strict=False):
            symbol = amount(f"total {name}")
            by_symbol[symbol] = mpmath.mpf(total)
            if not any(sympy.sympify(e).has(symbol) for e in production.values()):
                per = total
        largest = max(abs(r) for r in case.steady.rates.values()) / per
        out = {}
        known: dict[Any, Any] = {}  # productions are often multiples of one another
        for species, whole in case.steady.production.items():
            expected = whole / per
            factor, rest = sympy.sympify(production.get(species, 0)).as_coeff_Mul()
            if rest not in known:
                known[rest] = evaluate(rest, by_symbol)
            got = _exact(factor, {}) * known[rest]
            scale = abs(expected) if abs(expected) > 1e-20 * largest else largest
            out[species] = float(abs(got - expected) / scale)
        return out


def law_of(case: Case) -> RateLaw:
    return derive(case.mechanism, measured=frozenset(case.fluid))


@cache
def of_class(place: int) -> list[tuple[Case, RateLaw]]:
    """Cases of one class with their laws; a refusal that is not listed fails the test."""
    out = []
    for case in drawn()[place :: len(CLASSES)]:
        try:
            out.append((case, law_of(case)))
        except DiscrimError as refused:
            if case.number not in REFUSED:
                raise AssertionError(f"refused: {refused}\n{case.text()}") from None
    return out


def test_drawn_as_described():
    kinds = Counter(case.draft.kind for case in drawn())
    assert len(kinds) == len(CLASSES)
    assert min(kinds.values()) >= 16
    assert kinds.total() >= 200 + len(REFUSED)
    sizes = [len(c.mechanism.steps) for c in drawn()]
    assert max(sizes) >= 12
    assert len({repr(c.draft.keywords()) for c in drawn()}) == COUNT


@pytest.mark.parametrize("place", range(len(CLASSES)), ids=list(CLASSES))
def test_law_agrees_with_full_equations(place):
    """Production of every fluid species, from the constants that the law is fitted with."""
    for case, law in of_class(place):
        errors = errors_of(case, law.constants, dict(law.production))
        assert max(errors.values()) < AGREE, f"{errors}\n{case.text()}\n{law.rate}"


@pytest.mark.parametrize("place", range(len(CLASSES)), ids=list(CLASSES))
def test_law_of_the_steps_agrees(place):
    """The same law before constants are combined."""
    for case, law in of_class(place):
        if law.stoichiometry is None:
            continue
        production = {s: law.stoichiometry.get(s, 0) * law.step_rate for s in law.production}
        errors = errors_of(case, law.step_constants, production)
        assert max(errors.values()) < AGREE, f"{errors}\n{case.text()}\n{law.step_rate}"


@pytest.mark.parametrize("place", range(len(CLASSES)), ids=list(CLASSES))
def test_wrong_constant_is_noticed(place):
    """The comparison can fail: one constant a millionth too large."""
    noticed = 0
    for case, law in of_class(place)[:6]:
        stretched = (law.constants[0].name, mpmath.mpf("1.000001"))
        errors = errors_of(case, law.constants, dict(law.production), stretched=stretched)
        noticed += max(errors.values()) > AGREE
    assert noticed > 0


def relations(case: Case) -> tuple[list[str], list[list[int]]]:
    """What closed cycles say of the constants: rows of powers whose product is one.

    A cycle is a combination of reversible steps without net change of any species; the product of
    (k/k_rev), or K where a step is equilibrated, over it is one.
    """
    reversible = [s for s in case.mechanism.steps if s.reversible]
    every = sorted({x.name for s in reversible for x, _ in (*s.left, *s.right)})
    change = sympy.zeros(len(every), len(reversible))
    for j, step in enumerate(reversible):
        for sign, side in ((-1, step.left), (1, step.right)):
            for species, n in side:
                change[every.index(species.name), j] += sign * n
    fast = set(equilibrated_steps(case.draft, case.mechanism))
    names: list[str] = []
    for s in reversible:
        names += [f"K_{s.name}"] if s.name in fast else [f"k_{s.name}", f"k_rev_{s.name}"]
    rows = []
    for v in change.nullspace():
        row: list[int] = []
        for s, power in zip(reversible, v * sympy.ilcm(*(x.q for x in v)), strict=True):
            row += [int(power)] if s.name in fast else [int(power), -int(power)]
        rows.append(row)
    return names, rows


@pytest.mark.parametrize("place", range(len(CLASSES)), ids=list(CLASSES))
def test_closed_cycles_leave_no_relation_between_the_constants(place):
    """Wegscheider 1901 (from memory): a relation is used to eliminate a constant, not ignored."""
    for case, law in of_class(place):
        names, rows = relations(case)
        if not rows:
            continue
        kept = {c.name for c in law.step_constants}
        outside = [[x for n, x in zip(names, row, strict=True) if n not in kept] for row in rows]
        assert sympy.Matrix(outside).rank() == len(rows), f"{sorted(kept)}\n{case.text()}"


def test_there_are_closed_cycles():
    assert sum(len(relations(case)[1]) for case in drawn()) >= 30


def reference(steps, families, values, **kw):
    mechanism = parse_mechanism(name="x", steps=steps, **kw.pop("parse", {}))
    return steady_state(
        mechanism,
        values,
        families=families,
        steady=kw.get("steady", ()),
        equilibrated=kw.get("equilibrated", ()),
    )


def test_reference_langmuir():
    """Adsorption in halves beside whole, three sites in the limiting step (Langmuir's isotherm)."""
    values = Values(
        {"a": 0, "h": 0, "s": 0.3}, {"a": 0.7, "h": -0.5}, {"A": 1.3, "H2": 0.8, "P": 1}
    )
    found = reference(
        {"a": "A + * <=> A*", "h": "H2 + 2 * <=> 2 H*", "s": "A* + 2 H* -> P + 3 *"},
        [{"*": 1, "A*": 1, "H*": 1}],
        values,
        equilibrated=["a", "h"],
    )
    a, h = 1.3 * np.exp(0.7), np.sqrt(0.8 * np.exp(-0.5))
    assert float(found.production["P"]) == pytest.approx(
        np.exp(0.3) * a * h**2 / (1 + a + h) ** 3, rel=1e-12
    )
    assert found.production["P"] == pytest.approx(-found.production["H2"], rel=1e-12)


def test_reference_chain():
    """Radicals from M, ended in pairs: [X] = sqrt(k_i [M]/k_t), closed form of one balance."""
    values = Values({"i": -1.0, "p": 0.4, "t": 1.5}, {}, {"M": 0.7, "A": 2.0, "P": 1, "T": 1})
    found = reference(
        {"i": "M -> 2 X", "p": "X + A -> P + X", "t": "2 X -> T"},
        [],
        values,
        steady=["X"],
        parse={"assume": {"steady": ["X"]}},
    )
    x = np.sqrt(np.exp(-1.0) * 0.7 / np.exp(1.5))
    assert float(found.shares["X"]) == pytest.approx(x, rel=1e-12)
    assert float(found.production["P"]) == pytest.approx(np.exp(0.4) * 2.0 * x, rel=1e-12)


def test_reference_reversible_enzyme():
    """Haldane 1930, Enzymes (from memory): one substrate, reversible, at steady state."""
    k1, k2 = np.exp(0.8), np.exp(-0.2)
    r1, r2 = k1 * np.exp(-0.5), k2 * np.exp(0.9)
    values = Values({"a": 0.8, "b": -0.2}, {"a": 0.5, "b": -0.9}, {"S": 1.7, "P": 0.3})
    found = reference(
        {"a": "E + S <=> ES", "b": "ES <=> E + P"},
        [{"E": 1, "ES": 1}],
        values,
        parse={"catalyst": ["E"]},
    )
    s, p = 1.7, 0.3
    expected = (k1 * k2 * s - r1 * r2 * p) / (r1 + k2 + k1 * s + r2 * p)
    assert float(found.production["P"]) == pytest.approx(expected, rel=1e-12)
