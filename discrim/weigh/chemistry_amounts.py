"""Remarks on amounts: what a catalyst binds, what is used up meanwhile, how near equilibrium is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import sympy

from discrim.mechanism.model import Mechanism
from discrim.ratelaw.model import RateLaw, amount
from discrim.runs.model import Column, Role
from discrim.verdict.thresholds import CATALYST_SHARE, NEAR_EQUILIBRIUM
from discrim.weigh.chemistry import Finding, Scene, share


def amounts_findings(at: Scene) -> Iterator[Finding]:
    yield from _bound_by_catalyst(at)
    yield from _flooded(at)
    yield from _conversion(at)
    yield from _near_equilibrium(at)


def _bound_by_catalyst(at: Scene) -> Iterator[Finding]:
    """More than a tenth of a species can sit on the catalyst, while its amount is taken as free."""
    done: set[tuple[str, str]] = set()
    species = at.study.runs.species()
    for law in at.laws:
        mechanism = law.candidate.mechanism
        if mechanism is None:
            continue
        for catalyst in mechanism.catalyst:
            total = _total_of(at, catalyst, mechanism)
            for name in sorted(_bound(mechanism, catalyst, set(species))):
                if total is None or (total.name, name) in done:
                    continue
                done.add((total.name, name))
                if total.unit != species[name].unit:
                    continue
                e, x = total.values[at.bench.runs], species[name].values[at.bench.runs]
                have = (x > 0) & (e > CATALYST_SHARE * x)
                if not have.any():
                    continue
                worst = float((e[have] / x[have]).max())
                yield (
                    "warning",
                    at.runs(np.flatnonzero(have)),
                    f"the catalyst in all (“{total.name}”) is up to {share(worst)} of {name}, which it "
                    f"binds: that much of {name} may not be free, while the law takes it as free "
                    f"(limit {share(CATALYST_SHARE)}); give the free amount under [derived], or use "
                    "less catalyst",
                )


def _total_of(at: Scene, catalyst: str, mechanism: Mechanism) -> Column | None:
    columns = at.study.runs.columns
    for c in columns:
        if c.role is Role.TOTAL and c.about == catalyst:
            return c
    alone = len(mechanism.catalyst) == 1
    return next((c for c in columns if c.role is Role.CATALYST), None) if alone else None


def _bound(mechanism: Mechanism, catalyst: str, measured: set[str]) -> set[str]:
    """Measured species that join a form of the catalyst in some step, read either way."""
    forms = {catalyst}
    out: set[str] = set()
    for _ in mechanism.steps:  # each pass finds at least one new form, or is the last
        before = len(forms), len(out)
        for step in mechanism.steps:
            for ahead, other in ((step.left, step.right), (step.right, step.left)):
                names = [s.name for s, n in ahead for _ in range(n)]
                joined = [s.name for s, n in other for _ in range(n)]
                if len(names) != 2 or len(joined) != 1 or joined[0] in measured:
                    continue
                a, b = names
                for form, partner in ((a, b), (b, a)):
                    if form in forms and partner in measured:
                        forms.add(joined[0])
                        out.add(partner)
        if (len(forms), len(out)) == before:
            break
    return out


def _changes(law: RateLaw) -> Mapping[str, float]:
    """Overall stoichiometry, by species; empty where it is not one fixed ratio."""
    return {} if law.stoichiometry is None else {s: float(n) for s, n in law.stoichiometry.items()}


def _sd(c: Column, at: Scene) -> np.ndarray:
    x = c.values[at.bench.runs]
    total = np.zeros(len(x))
    for e in c.errors:
        total += np.asarray(e.absolute)[at.bench.runs] ** 2 + (e.relative * x) ** 2
    return np.sqrt(total)


def _used(at: Scene) -> Iterator[tuple[str, np.ndarray]]:
    """(species, amount of it that reacts during a run over the observations) where the table says."""
    columns = at.study.runs.columns
    first = {c.about: c for c in columns if c.role is Role.SPECIES}
    first |= {c.about: c for c in columns if c.role in (Role.INITIAL, Role.INLET)}
    n = at.bench.measurements.n
    for k, c in enumerate(at.bench.responses):
        if c.role is Role.K_OBS_OF and c.about in first:
            x = np.array(first[c.about].values[at.bench.runs])
            yield c.about, np.where(at.bench.response == k, x, np.zeros(n))
    for c in columns:
        if c.role is Role.CONVERSION and c.about in first:
            yield c.about, (first[c.about].values * c.values)[at.bench.runs]


def _flooded(at: Scene) -> Iterator[Finding]:
    """A reagent taken as constant, of which more reacts than its error."""
    species = at.study.runs.species()
    done: set[tuple[str, str]] = set()
    for about, used in _used(at):
        for law in at.laws:
            changes = _changes(law.law)
            per = changes.get(about, 0.0)
            for name, n in changes.items():
                if name == about or name not in species or n >= 0 or per >= 0:
                    continue
                if (about, name) in done or name not in law.law.species:
                    continue
                column = species[name]
                x = column.values[at.bench.runs]
                gone = used * n / per
                if column.unit != species.get(about, column).unit:
                    continue
                far = (x > 0) & (gone > np.maximum(_sd(column, at), 1e-9 * x))
                if not far.any():
                    continue
                done.add((about, name))
                worst = float((gone[far] / x[far]).max())
                yield (
                    "warning",
                    at.runs(np.flatnonzero(far)),
                    f"up to {share(worst)} of {name} reacts with {about} while its amount is taken as "
                    "constant, more than the error stated for it: start with a larger excess, "
                    "give its mean amount, or state an error that covers the change",
                )


def _conversion(at: Scene) -> Iterator[Finding]:
    """Conversions at which a rate is no longer that at the stated amounts: |n| X/2 over its error."""
    for c in at.study.runs.columns:
        if c.role is not Role.CONVERSION:
            continue
        order = _order_in(at, c.about)
        if order is None:
            continue
        x = c.values[at.bench.runs]
        change = np.abs(order) * x / 2.0
        far = np.isfinite(change) & (change > at.error)
        if not far.any():
            continue
        worst = int(np.argmax(np.where(far, change, -1.0)))
        along = "along the bed" if at.study.reactor == "differential" else "while it is measured"
        yield (
            "warning",
            at.runs(np.flatnonzero(far)),
            f"at a conversion of {share(float(x[worst]))} and an order of {order[worst]:.2g} in "
            f"{c.about} the rate changes by about nX/2 = {share(float(change[worst]))} {along}, more than "
            f"its error ({share(float(at.error[worst]))}): lower the conversion, or see that the amounts "
            "given are means over it",
        )


def _order_in(at: Scene, species: str) -> np.ndarray | None:
    """Apparent order of the best law in a species, d ln r/d ln [species], shape (N,)."""
    symbol = amount(species)
    if at.fit is None or symbol not in at.bench.symbols:
        return None
    data = at.fit.data
    pred = at.fit.predictor.predict(at.fit.theta[None], data.conditions, conditions_too=True)
    assert pred.by_conditions is not None
    j = at.bench.condition(symbol)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(
            pred.by_conditions[0][:, j] * data.conditions[:, j] / pred.values[0], dtype=float
        )


def _near_equilibrium(at: Scene) -> Iterator[Finding]:
    """Laws without a reverse reaction in runs near an equilibrium that another candidate knows."""
    known = {
        n: s.value for n, s in at.study.constants.items() if s.value is not None and s.value > 0
    }
    if not known:
        return
    for name, value in known.items():
        overall = next(
            (law.law for law in at.laws if _is_equilibrium_constant(law.law, name)), None
        )
        if overall is None:
            continue
        changes = _changes(overall)
        q = np.ones(at.bench.measurements.n)
        for s, n in changes.items():
            x = at.amounts(s)
            if x is None:
                return  # a product that nothing measures: Q is not known
            with np.errstate(divide="ignore", invalid="ignore"):
                q = q * x**n
        near = np.isfinite(q) & (q > NEAR_EQUILIBRIUM * value)
        one_way = [
            i
            for i, law in enumerate(at.laws)
            if _alike(_changes(law.law), changes) and not _goes_back(law.law)
        ]
        if near.any() and one_way:
            yield (
                "warning",
                at.runs(np.flatnonzero(near)),
                f"the reaction is at up to {share(float(q[near].max() / value))} of its equilibrium "
                f"(Q/{name}), where the reverse reaction counts; the law of {at.candidates(one_way)} "
                f"has none (limit {share(NEAR_EQUILIBRIUM)}): compare only runs far from "
                "equilibrium, or give these candidates their reverse step",
            )


def _is_equilibrium_constant(law: RateLaw, name: str) -> bool:
    """Whether the law's rate vanishes where the amounts' quotient Q equals the constant, by numbers."""
    symbol = next((s for s in law.rate.free_symbols if s.name == name), None)
    changes = _changes(law)
    if symbol is None or not changes:
        return False
    rng = np.random.default_rng(1)
    for _ in range(2):
        at = {
            s: sympy.Float(rng.uniform(0.5, 2.0)) for s in law.rate.free_symbols if s is not symbol
        }
        q = sympy.Integer(1)
        for s, n in changes.items():
            q *= at.get(amount(s), sympy.Float(rng.uniform(0.5, 2.0))) ** sympy.Float(n)
        try:
            there = complex(law.rate.xreplace({**at, symbol: q}))
            far = complex(law.rate.xreplace({**at, symbol: q * 1e6}))
        except (TypeError, ValueError, ZeroDivisionError, NotImplementedError):
            return False
        if not abs(there) < 1e-9 * abs(far):
            return False
    return True


def _alike(a: Mapping[str, float], b: Mapping[str, float]) -> bool:
    """The same overall reaction, whatever it is multiplied by."""
    if not a or set(a) != set(b):
        return False
    ratios = {round(a[s] / b[s], 9) for s in a}
    return len(ratios) == 1 and ratios.pop() > 0


def _goes_back(law: RateLaw) -> bool:
    """Whether the rate has a term against it."""
    top: Any = sympy.numer(sympy.together(law.rate))
    return any(term.could_extract_minus_sign() for term in sympy.Add.make_args(sympy.expand(top)))
