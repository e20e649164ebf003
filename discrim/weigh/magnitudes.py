"""Rate constants against what nature allows: findings, never constraints.

An elementary step cannot be faster than its partners meet, nor than a bond moves:

- two particles in a liquid: k <= 8 R T/(3 eta), after Smoluchowski (Z. phys. Chem. 92 (1917) 129) with
  the diffusion coefficients of Stokes and Einstein (Atkins, Physical Chemistry, on diffusion-controlled
  reactions: 7.4e9 L/mol/s in water at 25 °C; from memory). Ions of opposite charge exceed it, H+ with
  OH- most of all: 1.4e11 L/mol/s (Eigen, Angew. Chem. Int. Ed. 3 (1964) 1; from memory);
- two molecules in a gas: the collision rate constant, about 3e-10 cm3 a molecule and second
  (Atkins, on collision theory: sigma (8 k T/(pi mu))^(1/2) N_A with 0.4 nm2; from memory);
- one particle: k T/h, the pre-factor of transition-state theory without a gain of entropy (Eyring,
  J. Chem. Phys. 3 (1935) 107; from memory).

They are orders of magnitude. Which medium the runs were made in, the study does not say; so the words
do. A constant of the law is held against them where it is the constant of a step, and a combination
where it provably cannot exceed one (k_cat/K_m cannot exceed the constant of the first encounter).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from itertools import permutations
from typing import TYPE_CHECKING, Any

import numpy as np
import sympy

from discrim.mechanism.model import Mechanism
from discrim.ratelaw.model import constant_symbol
from discrim.runs.model import Role
from discrim.units import Unit
from discrim.verdict.words import measure
from discrim.weigh.document_values import number

if TYPE_CHECKING:
    from discrim.weigh.weighed import Weighed

GAS_CONSTANT = 8.314462618  # J/mol/K, CODATA 2018, exact to these digits
BOLTZMANN_OVER_PLANCK = 1.380649e-23 / 6.62607015e-34  # 1/K/s, both exact by definition
ROOM = 298.15  # K
# cm3 a molecule and second, of molecules of some 0.4 nm2 at about 700 m/s
COLLISION = 3e-10
AVOGADRO = 6.02214076e23
FASTEST_IONS = 1.4e11  # L/mol/s, H+ with OH- in water at 25 °C

Finding = tuple[str, str, str]


@dataclass(frozen=True, slots=True)
class Magnitude:
    """A constant, or a combination of two, beside the largest value that its step allows.

    ``value``, ``low`` (of its interval) and ``limit`` in the same unit, ``units`` as text.
    """

    name: str
    step: str
    value: float
    low: float
    limit: float
    units: str
    words: str

    @property
    def above(self) -> bool:
        return self.value > self.limit


def diffusion_limit(kelvin: float, viscosity: float) -> float:
    """8 R T/(3 eta) in m3/mol/s; ``viscosity`` in Pa s."""
    return 8.0 * GAS_CONSTANT * kelvin / (3.0 * viscosity)


def water_viscosity(kelvin: float) -> float:
    """Of liquid water in Pa s, 273 to 373 K within about 3 %: the formula of Vogel with the figures
    in common use (2.414e-5 Pa s, 247.8 K, 140 K; from memory)."""
    return float(2.414e-5 * 10.0 ** (247.8 / (kelvin - 140.0)))


def collision_limit() -> float:
    """m3/mol/s, nearly the same at all temperatures."""
    return COLLISION * 1e-6 * AVOGADRO


def first_order_limit(kelvin: float) -> float:
    """k T/h in 1/s."""
    return BOLTZMANN_OVER_PLANCK * kelvin


def magnitudes(w: Weighed) -> tuple[tuple[Magnitude, ...], ...]:
    """For each candidate the constants of its steps that have a limit, and the combinations above one."""
    kelvin, known = temperature(w)
    return tuple(tuple(_of_candidate(w, i, kelvin, known)) for i in range(len(w.laws)))


def temperature(w: Weighed) -> tuple[float, bool]:
    """The highest of the runs, and whether the study says it."""
    for c in w.study.runs.columns:
        if c.role is Role.TEMPERATURE:
            x = c.values[w.bench.runs]
            x = x[np.isfinite(x) & (x > 0)]
            if len(x):
                return float(x.max()), True
    return ROOM, False


def _of_candidate(w: Weighed, i: int, kelvin: float, known: bool) -> Iterator[Magnitude]:
    mechanism = w.laws[i].candidate.mechanism
    if mechanism is None or not w.assessments[i].fit.ok:
        return
    steps = {
        name: kind for name, side in _sides(mechanism) if (kind := _molecularity(side)) is not None
    }
    bound = w.bounds[i]
    for j in range(len(bound.names)):
        base = bound.base_constant(j)
        unit = bound.unit_of.get(base.name)
        if base.name in steps and unit is not None:
            one = _judged(w, i, [(j, 1)], unit, steps[base.name], kelvin, known)
            if one is not None:
                yield _with(one, base.name)
        elif base.definition is not None and unit is not None:
            yield from _bounded(w, i, [(j, 1)], unit, steps, kelvin, known)
    for j, k in permutations(range(len(bound.names)), 2):
        pair = _units_of_pair(w, i, j, k)
        if pair is None:
            continue
        a, b = pair
        yield from _bounded(w, i, [(j, 1), (k, -1)], a / b, steps, kelvin, known)
        if j < k:
            yield from _bounded(w, i, [(j, 1), (k, 1)], a * b, steps, kelvin, known)


def _units_of_pair(w: Weighed, i: int, j: int, k: int) -> tuple[Unit, Unit] | None:
    """Of two constants of which at least one is a combination of those of the steps, where known."""
    bound = w.bounds[i]
    a, b = bound.base_constant(j), bound.base_constant(k)
    if a.definition is None and b.definition is None:
        return None
    if bound.names[j].partition("[")[2] != bound.names[k].partition("[")[2]:
        return None  # values of different groups
    first, second = bound.unit_of.get(a.name), bound.unit_of.get(b.name)
    return None if first is None or second is None else (first, second)


def _sides(mechanism: Mechanism) -> Iterator[tuple[str, tuple[tuple[Any, int], ...]]]:
    """Each rate constant of a step with what reacts in it."""
    for step in mechanism.steps:
        yield f"k_{step.name}", step.left
        if step.reversible:
            yield f"k_rev_{step.name}", step.right


def _molecularity(side: tuple[tuple[Any, int], ...]) -> int | None:
    """1 for one particle, 2 for two that meet in the fluid, else None: no general limit."""
    count = sum(n for _, n in side)
    if count == 1:
        return 1
    return 2 if count == 2 and all(species.site == "" for species, _ in side) else None


def si_factor(unit: Unit) -> float:
    """How many SI units (mol, kg, m3, Pa, s, ...) one internal unit is."""
    out = 1.0
    for kind, power in unit.powers:
        out *= float(unit.base(kind).size) ** float(power)
    return out


def as_second_order(unit: Unit, kelvin: float) -> float | None:
    """Factor to m3/mol/s of a constant for two molecules; amounts may be pressures (of an ideal gas).
    None where the unit is another."""
    powers = dict(unit.powers)
    none = Fraction(0)
    n = -powers.get("pressure", none)
    for kind, power in (("pressure", n), ("volume", n), ("amount", -n)):
        powers[kind] = powers.get(kind, none) + power
    if {k: p for k, p in powers.items() if p} != {"volume": 1, "amount": -1, "time": -1}:
        return None
    return si_factor(unit) * float((GAS_CONSTANT * kelvin) ** float(n))


def _judged(
    w: Weighed,
    i: int,
    which: list[tuple[int, int]],
    unit: Unit,
    molecules: int,
    kelvin: float,
    known: bool,
) -> Magnitude | None:
    """A constant (or product of powers of two) beside the limit for so many particles."""
    at = f"{kelvin:.0f} K" if known else "25 °C, the study gives no temperature"
    if molecules == 1:
        if dict(unit.powers) != {"time": -1}:
            return None
        factor, limit = si_factor(unit), first_order_limit(kelvin)
        words = f"k T/h at {at}: the pre-factor of transition-state theory (Eyring 1935)"
    else:
        found = as_second_order(unit, kelvin)
        if found is None:
            return None
        factor = found
        if "pressure" in dict(unit.powers):
            limit = collision_limit()
            words = "the rate at which molecules of a gas collide (collision theory), order of magnitude"
        else:
            t = min(max(kelvin, 273.15), 373.15)
            limit = diffusion_limit(t, water_viscosity(t))
            words = (
                f"8RT/(3η), the rate at which two molecules meet by diffusion in water at {at} "
                "(Smoluchowski 1917)"
            )
    a, bound = w.assessments[i], w.bounds[i]
    value = float(np.prod([a.fit.theta[j] ** p for j, p in which]))
    name = bound.names[which[0][0]]
    if len(which) == 2:
        name += ("·" if which[1][1] > 0 else "/") + bound.names[which[1][0]]
    return Magnitude(name, "", value, _low(w, i, which, value), limit / factor, unit.text(), words)


def _with(m: Magnitude, step: str) -> Magnitude:
    return Magnitude(m.name, step, m.value, m.low, m.limit, m.units, m.words)


def _low(w: Weighed, i: int, which: list[tuple[int, int]], value: float) -> float:
    """The lower end of the interval; of a combination the linearised one, in logarithms."""
    a = w.assessments[i]
    if len(which) == 1:
        kinds = a.intervals[which[0][0]]
        for kind in ("reconciled", "profile", "linearised"):
            found = kinds.get(kind)
            if found is not None and not found.empty and np.isfinite(found.low.value):
                return float(found.low.value)
        return 0.0
    se = a.standard_errors
    index = [j for j, _ in which]
    root = np.linalg.pinv(a.fit.jacobian)
    size = np.sqrt((root**2).sum(axis=1))
    if not (np.isfinite(se[index]).all() and (size[index] > 0).all()) or value <= 0:
        return 0.0
    relative = [p * se[j] / a.fit.theta[j] / size[j] * root[j] for j, p in which]
    spread = float(np.sqrt((np.sum(relative, axis=0) ** 2).sum()))
    return float(value * np.exp(-min(1.96 * spread, 700.0)))


def _bounded(
    w: Weighed,
    i: int,
    which: list[tuple[int, int]],
    unit: Unit,
    steps: dict[str, int],
    kelvin: float,
    known: bool,
) -> Iterator[Magnitude]:
    """A combination above a limit, if the constant of a step is proven to be at least as large."""
    bound = w.bounds[i]
    for molecules in (1, 2):
        one = _judged(w, i, which, unit, molecules, kelvin, known)
        if one is None or not one.above:
            continue
        expr = sympy.Integer(1)
        for j, p in which:
            base = bound.base_constant(j)
            expr *= (base.symbol if base.definition is None else base.definition) ** p
        for name, kind in steps.items():
            if kind == molecules and never_above(expr, constant_symbol(name)):
                yield _with(one, name)
                return


def never_above(expr: Any, constant: Any) -> bool:
    """Whether expr <= constant for all positive values of its symbols, proven by signs: the quotient
    is a fraction whose numerator is part of its denominator."""
    if constant not in expr.free_symbols or not expr.is_rational_function():
        return False
    top, bottom = sympy.fraction(sympy.cancel(expr / constant))
    symbols = sorted(top.free_symbols | bottom.free_symbols, key=str)
    if not symbols:
        return bool(top <= bottom)
    a, b = sympy.Poly(top, *symbols), sympy.Poly(bottom, *symbols)
    return all(c >= 0 for c in a.coeffs()) and all(c >= 0 for c in (b - a).coeffs())


def magnitude_findings(w: Weighed) -> list[Finding]:
    """Constants above their limit: a warning where the whole interval is, else a note."""
    out: list[Finding] = []
    for i, found in enumerate(w.magnitudes):
        for m in found:
            if not m.above:
                continue
            sure = m.low > m.limit
            low = (
                f" (at least {measure(m.low, digits=3)})"
                if sure
                else f" (its interval begins at {measure(m.low, digits=3)})"
            )
            is_of = "" if m.step == m.name else f", which cannot exceed {m.step},"
            value, limit = measure(m.value, m.units, 2), measure(m.limit, m.units, 2)
            says = f"{m.name} = {value}{low}{is_of} is above {limit}, {m.words}"
            out.append(
                ("warning" if sure else "note", f"candidate “{w.laws[i].law.name}”",
                 f"{says}. {_do(m)}")
            )  # fmt: skip
    return out


def _do(m: Magnitude) -> str:
    again = "check the units and the steps; the step may stand for several"
    if "Smoluchowski" in m.words:
        return (
            "In another solvent the limit goes with 1/viscosity; ions of opposite charge go beyond "
            f"it (H+ with OH- to {measure(FASTEST_IONS)} L/mol/s), molecules of a gas to about "
            f"2 × 10¹¹ L/mol/s. Otherwise {again}"
        )
    return again[0].upper() + again[1:]


def magnitudes_record(w: Weighed, i: int) -> list[dict[str, Any]]:
    """The key ``magnitudes`` of a candidate."""
    return [
        {
            "name": m.name,
            "step_constant": m.step,
            "value": number(m.value),
            "low": number(m.low),
            "limit": number(m.limit),
            "units": m.units,
            "limit_is": m.words,
            "above": m.above,
        }
        for m in (w.magnitudes[i] if i < len(w.magnitudes) else ())
    ]
