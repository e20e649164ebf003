"""Remarks on conditions: temperature, pH and ionic strength that vary beside the law, blanks, zeros."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

import numpy as np

from discrim.ratelaw.knockout import KnockOutKind
from discrim.ratelaw.model import quantity
from discrim.runs.model import Column, Role
from discrim.units import Unit
from discrim.verdict.thresholds import (
    FAR_FROM_ZERO,
    KEPT_PH,
    NEXT_TO_NOTHING,
    TYPICAL_ACTIVATION,
    VARIES,
)
from discrim.weigh.chemistry import Finding, Scene, share
from discrim.weigh.magnitudes import GAS_CONSTANT, si_factor

# Debye-Hückel constant A of water at 25 °C, log10 and (mol/L)^-1/2 (Atkins, Physical Chemistry; from
# memory)
DEBYE_HUCKEL = 0.509


def conditions_findings(at: Scene) -> Iterator[Finding]:
    yield from _temperature(at)
    yield from _ph(at)
    yield from _ionic_strength(at)
    yield from _nothing_read(at)
    yield from _blank(at)
    yield from _never_without(at)


def _varies(c: Column, at: Scene) -> np.ndarray | None:
    """Its values over the observations, where they vary by more than its error."""
    x = c.values[at.bench.runs]
    if not np.isfinite(x).all():
        return None
    variance = sum((np.asarray(e.absolute)[at.bench.runs] ** 2 for e in c.errors), np.zeros(len(x)))
    variance += sum(((e.relative * x) ** 2 for e in c.errors), np.zeros(len(x)))
    return x if float(np.ptp(x)) > VARIES * float(np.sqrt(variance.max(initial=0.0))) else None


def _without(at: Scene, c: Column) -> list[int]:
    """Candidates whose law does not hold the column."""
    return [i for i, used in enumerate(at.used) if quantity(c.name) not in used]


def _temperature(at: Scene) -> Iterator[Finding]:
    c = at.column(Role.TEMPERATURE)
    t = None if c is None else _varies(c, at)
    if c is None or t is None or float(t.min()) <= 0:
        return
    missing = [i for i in _without(at, c) if not _one_value_each(at, i, t)]
    step = TYPICAL_ACTIVATION / GAS_CONSTANT * (1.0 / t.min() - 1.0 / t.max())
    change = float(np.expm1(min(step, 50.0)))
    if not missing or change <= float(np.median(at.error)):
        return
    yield (
        "warning",
        f"column “{c.name}”",
        f"the temperature varies by {np.ptp(t):.2g} K and is not in the law of "
        f"{at.candidates(missing)}: at an activation energy of {TYPICAL_ACTIVATION / 1e3:.0f} kJ/mol, to "
        f"judge by, a rate changes by {share(change)} over that range; write the constants with "
        "temperature, or compare runs at one temperature",
    )


def _one_value_each(at: Scene, i: int, t: np.ndarray) -> bool:
    """Whether the candidate has constants of their own for every temperature."""
    column_of = at.bounds[i].column_of
    split = [q for q in range(column_of.shape[1]) if len(np.unique(column_of[:, q])) > 1]
    return any(
        all(float(np.ptp(t[column_of[:, q] == j])) == 0.0 for j in np.unique(column_of[:, q]))
        for q in split
    )


def _ph(at: Scene) -> Iterator[Finding]:
    c = at.column(Role.PH)
    x = None if c is None else _varies(c, at)
    if c is None or x is None or float(np.ptp(x)) < KEPT_PH:
        return
    missing = _without(at, c)
    if len(missing) == len(at.used):
        yield (
            "note",
            f"column “{c.name}”",
            f"the pH varies from {x.min():.3g} to {x.max():.3g} and is in no law: acids, bases and "
            "their forms change with it; a candidate or [derived] formula with pH is missing, or a "
            "reason why it does not matter",
        )


def _ionic_strength(at: Scene) -> Iterator[Finding]:
    charges = {
        name: z
        for law in at.laws
        if law.candidate.mechanism is not None
        for name, z in law.candidate.mechanism.charges.items()
        if z
    }
    ions = sorted({s for law in at.laws for s in law.law.species if s in charges})
    if not ions:
        return
    pair = _charged_pair(at, charges)
    product = charges[pair[0]] * charges[pair[1]] if pair else 0
    named = " and ".join(pair) if pair else ", ".join(ions)
    c = at.column(Role.IONIC_STRENGTH)
    if c is None:
        if not at.control("ionic strength"):
            yield (
                "warning" if product else "note",
                "ionic strength",
                f"{named} {'are ions that meet in one step' if pair else 'carry charge'} and no "
                "column, condition or control gives the ionic strength: rate and equilibrium "
                "constants of ions change with it; hold it with an inert salt, or record it",
            )
        return
    x = _varies(c, at)
    if x is None or not _without(at, c) or not product:
        return
    strength = molar(x, c.unit)
    if strength is None:
        return
    change = salt_effect(float(strength.min()), float(strength.max()), product)
    if abs(np.expm1(change)) > float(np.median(at.error)):
        yield (
            "warning",
            f"column “{c.name}”",
            f"the ionic strength varies from {strength.min():.2g} to {strength.max():.2g} mol/L and is "
            f"not in the law of {at.candidates(_without(at, c))}, while {named} (charges "
            f"{charges[named.split(' and ')[0]]:+d} and {charges[named.split(' and ')[-1]]:+d}) meet: "
            f"their rate constant changes by about {share(abs(float(np.expm1(change))))} (primary "
            "salt effect, Brønsted 1922, with Debye and Hückel's limiting law cut off as by Güntelberg, "
            "water at 25 °C); hold it with an inert salt, or put it into the law",
        )


def _charged_pair(at: Scene, charges: dict[str, int]) -> tuple[str, str] | None:
    """The two ions of highest charges that react in one step."""
    pairs: list[tuple[int, str, str]] = []
    for law in at.laws:
        if law.candidate.mechanism is None:
            continue
        for step in law.candidate.mechanism.steps:
            for side in (step.left, step.right) if step.reversible else (step.left,):
                names = [s.name for s, n in side for _ in range(n) if s.name in charges]
                pairs += [
                    (abs(charges[a] * charges[b]), min(a, b), max(a, b))
                    for a, b in combinations(names, 2)
                ]
    return max(pairs)[1:] if pairs else None


def salt_effect(low: float, high: float, product: int) -> float:
    """Change of ln k of two ions with the given product of charges between two ionic strengths in
    mol/L: 2 A z z ln(10) sqrt(I)/(1 + sqrt(I)) (Brønsted, Z. phys. Chem. 102 (1922) 169, with the
    activity coefficients of Güntelberg 1926; from memory)."""
    a, b = np.sqrt(low), np.sqrt(high)
    return float(2.0 * DEBYE_HUCKEL * product * np.log(10.0) * (b / (1.0 + b) - a / (1.0 + a)))


def molar(x: np.ndarray, unit: Unit) -> np.ndarray | None:
    """In mol/L (or mol/kg, which is nearly the same in water); None in other units."""
    powers = dict(unit.powers)
    if powers == {"amount": 1, "volume": -1}:
        return np.asarray(x * si_factor(unit) / 1e3)
    return np.asarray(x * si_factor(unit)) if powers == {"amount": 1, "mass": -1} else None


def _nothing_read(at: Scene) -> Iterator[Finding]:
    """Rates of nothing whose error is only relative: next to no error, so they rule the fit."""
    for k, c in enumerate(at.bench.responses):
        if not c.errors or any(np.asarray(e.absolute).any() for e in c.errors):
            continue
        measured = np.isfinite(at.bench.measurements.y)
        mine = np.flatnonzero((at.bench.response == k) & measured)
        if not len(mine):
            continue
        y = at.bench.measurements.y[mine]
        small = mine[y <= NEXT_TO_NOTHING * float(np.median(np.abs(y)))]
        if len(small):
            yield (
                "warning",
                at.runs(small),
                f"“{c.name}” is next to zero there and its error is only relative, so it comes out "
                "as next to none and these readings rule the fit: state an absolute part too, for "
                'example error = "2 % + ' + f'{_absolute(c)}"',
            )


def _absolute(c: Column) -> str:
    """An example of an absolute error: a hundredth of a usual reading, in the user's units."""
    from discrim.study.lookup import to_shown

    shown = float(np.median(np.abs(to_shown(c, c.values[np.isfinite(c.values)]))))
    return f"{0.01 * shown:.1g} {c.shown}".strip()


def _blank(at: Scene) -> Iterator[Finding]:
    if at.control("blank"):
        return
    for c in at.study.runs.columns:
        if c.role is not Role.CATALYST and not _is_catalyst(at, c):
            continue
        x = c.values[at.bench.runs]
        if len(x) and float(x.min()) > 0:
            yield (
                "note",
                f"column “{c.name}”",
                "no run is without catalyst and no blank is stated under [controls]: a rate without "
                "it would count as catalysed",
            )


def _is_catalyst(at: Scene, c: Column) -> bool:
    return c.role is Role.TOTAL and any(
        law.candidate.mechanism is not None and c.about in law.candidate.mechanism.catalyst
        for law in at.laws
    )


def _never_without(at: Scene) -> Iterator[Finding]:
    """Questions about an additive term whose species is plentiful in every run."""
    added = (KnockOutKind.ZERO, KnockOutKind.VANISH, KnockOutKind.SEVERAL)
    for answer in at.answers:
        about = answer.question.about
        if answer.what != "species" or not any(
            k.knock_out is not None and k.knock_out.kind in added for k in answer.per_candidate
        ):
            continue
        x = at.amounts(about)
        if x is None or not len(x) or not np.isfinite(x).all():
            continue
        if float(x.min()) > FAR_FROM_ZERO * float(x.max()):
            yield (
                "note",
                f"question about {about}",
                f"the least {about} in any run is {share(float(x.min() / x.max()))} of the most: a "
                f"rate without {about} is extrapolated. Runs with less of it would say more, if a "
                f"review of their hazards allows them: {about} may be a stabiliser, an inhibitor or "
                "a diluent",
            )
