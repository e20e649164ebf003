"""Steady state of the full mass-action equations of a mechanism, found numerically.

An independent reference for derived laws: nothing here comes from :mod:`discrim.ratelaw`. Every
step runs at the rate of mass action, order = coefficient. Equilibrated steps are simply fast ones:
their rate constants are ``FAST`` times the largest of the others. The amounts of the intermediates
solve sum_s nu_is r_s = 0 for each of them and one total for each conserved family; Newton's method
on their logarithms in multiple precision (mpmath), from a state reached by implicit Euler steps of
growing length in double precision, which follows the transient onto the steady state.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import mpmath
import numpy as np

from discrim.mechanism.model import Mechanism, Species

DIGITS = 100  # carried; differences of fast rates lose about 25 of them
FAST = mpmath.mpf(10) ** 25  # forward constant of an equilibrated step over the largest other one
MILD = 1e4  # the same in double precision, for the start
SMALL = mpmath.mpf(10) ** -45  # of the last Newton step, in the logarithms


class NoSteadyState(Exception):
    """The equations reach no steady state, or more than one."""


@dataclass(frozen=True, slots=True)
class Values:
    """Numbers for a mechanism: natural logarithms of constants, amounts as they are.

    ``forward`` log k of each step; ``equilibrium`` log K of each reversible step as written;
    ``totals`` of the families, one each when not given.
    """

    forward: Mapping[str, Any]
    equilibrium: Mapping[str, Any]
    amounts: Mapping[str, Any]
    totals: Sequence[float] = ()


@dataclass(frozen=True, slots=True)
class Steady:
    """``rates`` net, by step; ``production`` net, by fluid species; ``shares`` intermediates."""

    rates: Mapping[str, Any]
    production: Mapping[str, Any]
    shares: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class _System:
    """Stoichiometry and orders as plain lists; n intermediates, m steps."""

    change: list[list[int]]  # (n, m)
    ahead: list[list[tuple[int, int]]]  # by step: (intermediate, order)
    back: list[list[tuple[int, int]]]
    totals: list[list[int]]  # by family: units that each intermediate holds
    amounts: list[float]  # by family: what they add up to
    kept: list[int]  # intermediates whose balances are independent of each other


def steady_state(
    mechanism: Mechanism,
    values: Values,
    *,
    families: Sequence[Mapping[str, int]],
    steady: Sequence[str],
    equilibrated: Sequence[str],
    near: Mapping[str, Any] | None = None,
) -> Steady:
    """The steady state with fixed amounts of all species that are no intermediates.

    Parameters
    ----------
    families : members of each conserved total (sites, catalyst) with the units each holds
    steady : further intermediates, in no family
    equilibrated : names of the steps that are fast
    near : shares at a steady state close by, to start from

    Raises
    ------
    NoSteadyState
        when Newton does not converge, or two starts lead to different states
    """
    inner = [name for family in families for name in family] + list(steady)
    index = {name: i for i, name in enumerate(inner)}
    system = _system(mechanism, index, families, values.totals or [1.0] * len(families))
    names = [s.name for s in mechanism.steps]
    with mpmath.workdps(DIGITS):
        ahead, back = _constants(mechanism, values, index, equilibrated, FAST)
        if near is not None:
            logs = [_newton(system, ahead, back, [near[name] for name in inner])]
        else:
            mild = [
                np.array([float(k) for k in side])
                for side in _constants(mechanism, values, index, equilibrated, mpmath.mpf(MILD))
            ]
            logs = [
                _newton(system, ahead, back, _transient(system, mild[0], mild[1], start))
                for start in _starts(system, len(inner))
            ]
            if any(abs(x - y) > SMALL for x, y in zip(logs[0], logs[1], strict=True)):
                raise NoSteadyState("two starts lead to different steady states")
        x = [mpmath.exp(v) for v in logs[0]]
        gross = _gross(system, ahead, back, x)
        rates = [f - b for f, b in gross]
        production: dict[str, Any] = {}
        for step, rate in zip(mechanism.steps, rates, strict=True):
            for sign, side in ((-1, step.left), (1, step.right)):
                for species, n in side:
                    if species.name not in index:
                        so_far = production.get(species.name, mpmath.mpf(0))
                        production[species.name] = so_far + sign * n * rate
    return Steady(
        dict(zip(names, rates, strict=True)), production, dict(zip(inner, x, strict=True))
    )


def _system(
    mechanism: Mechanism,
    index: Mapping[str, int],
    families: Sequence[Mapping[str, int]],
    amounts: Sequence[float],
) -> _System:
    n, m = len(index), len(mechanism.steps)
    change = [[0] * m for _ in range(n)]
    sides: tuple[list[list[tuple[int, int]]], ...] = ([], [])
    for j, step in enumerate(mechanism.steps):
        for sign, side, out in ((-1, step.left, sides[0]), (1, step.right, sides[1])):
            inside = [(index[s.name], k) for s, k in side if s.name in index]
            out.append(inside)
            for i, k in inside:
                change[i][j] += sign * k
    totals = [[family.get(name, 0) for name in index] for family in families]
    for total in totals:
        for j in range(m):
            if sum(w * change[i][j] for i, w in enumerate(total)):
                raise ValueError(f"step {mechanism.steps[j].name} changes a conserved total")
    kept: list[int] = []
    for i in range(n):
        trial = np.array([change[k] for k in [*kept, i]], dtype=float)
        if np.linalg.matrix_rank(trial) == len(trial):
            kept.append(i)
    if len(kept) + len(totals) != n:
        raise NoSteadyState("the balances and totals are not as many as the intermediates")
    return _System(change, sides[0], sides[1], totals, list(amounts), kept)


def _constants(
    mechanism: Mechanism,
    values: Values,
    index: Mapping[str, int],
    equilibrated: Sequence[str],
    fast: Any,
) -> tuple[list[Any], list[Any]]:
    """Constants of the steps ahead and back, times the fixed amounts that they meet."""
    exp, mpf = mpmath.exp, mpmath.mpf
    slow = [exp(mpf(values.forward[s.name])) for s in mechanism.steps if s.name not in equilibrated]
    slow += [
        exp(mpf(values.forward[s.name]) - mpf(values.equilibrium[s.name]))
        for s in mechanism.steps
        if s.name not in equilibrated and s.reversible
    ]
    top = fast * max(slow)

    def fixed(side: Sequence[tuple[Species, int]]) -> Any:
        out = mpf(1)
        for species, n in side:
            if species.name not in index:
                out *= mpf(values.amounts[species.name]) ** n
        return out

    ahead, back = [], []
    for step in mechanism.steps:
        k = top if step.name in equilibrated else exp(mpf(values.forward[step.name]))
        ahead.append(k * fixed(step.left))
        reverse = k * exp(-mpf(values.equilibrium[step.name])) if step.reversible else mpf(0)
        back.append(reverse * fixed(step.right))
    return ahead, back


def _gross(system: _System, ahead: Any, back: Any, x: Any) -> list[Any]:
    out = []
    for j in range(len(ahead)):
        f, b = ahead[j], back[j]
        for i, n in system.ahead[j]:
            f = f * x[i] ** n
        for i, n in system.back[j]:
            b = b * x[i] ** n
        out.append((f, b))
    return out


def _starts(system: _System, n: int) -> list[np.ndarray]:
    """All members alike; and nearly all in the first of each family."""
    alike, first = np.full(n, 0.1), np.full(n, 1e-3)
    for total, amount in zip(system.totals, system.amounts, strict=True):
        w = np.array(total, dtype=float)
        members = w > 0
        alike[members] = amount / w.sum()
        at = int(np.argmax(members))
        first[members] = 1e-3 * amount
        first[at] = amount * (1 - 1e-3 * (w.sum() - w[at])) / w[at]
    return [alike, first]


def _transient(
    system: _System, ahead: np.ndarray, back: np.ndarray, start: np.ndarray
) -> np.ndarray:
    """Implicit Euler with growing steps, to times when nothing changes any more."""
    n, m = len(start), len(ahead)
    if not n:
        return start
    change = np.array(system.change, dtype=float)

    def slopes(x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        pairs = _gross(system, ahead, back, x)
        rates = np.array([f - b for f, b in pairs])
        by_x = np.zeros((m, n))
        for j, (f, b) in enumerate(pairs):
            for i, order in system.ahead[j]:
                by_x[j, i] += order * f / x[i]
            for i, order in system.back[j]:
                by_x[j, i] -= order * b / x[i]
        return change @ rates, change @ by_x

    x, dt = start.copy(), 0.01 / max(ahead.max(), back.max())
    longest = 1e6 / min(ahead.min(), *back[back > 0], 1.0)
    for _ in range(200):
        y = x.copy()
        for _ in range(12):
            f, by_x = slopes(y)
            try:
                move = np.linalg.solve(np.eye(n) - dt * by_x, x + dt * f - y)
            except np.linalg.LinAlgError:
                raise NoSteadyState("singular") from None
            step = min(1.0, 0.9 / max(1e-300, float(np.max(-move / y))))  # stays positive
            y = np.maximum(y + step * move, 1e-100)
            if step == 1.0 and np.max(np.abs(move) / y) < 1e-6:
                break
        else:
            dt /= 4
            continue
        still = np.max(np.abs(y - x) / y) < 1e-6
        x = y
        if still and dt == longest:
            return x
        dt = min(4 * dt, longest)  # longer ones would only add up errors in the totals
    raise NoSteadyState("the transient comes to no rest")


def _newton(
    system: _System, ahead: Sequence[Any], back: Sequence[Any], start: Sequence[Any] | np.ndarray
) -> list[Any]:
    """Logarithms of the amounts of the intermediates at the steady state."""
    logs = [mpmath.log(mpmath.mpf(v)) for v in start]
    n = len(logs)
    for _ in range(60 if n else 0):
        x = [mpmath.exp(v) for v in logs]
        pairs = _gross(system, ahead, back, x)
        by_log: list[dict[int, Any]] = []
        for j, (f, b) in enumerate(pairs):
            slope: dict[int, Any] = {}
            for i, order in system.ahead[j]:
                slope[i] = slope.get(i, 0) + order * f
            for i, order in system.back[j]:
                slope[i] = slope.get(i, 0) - order * b
            by_log.append(slope)
        matrix = [[mpmath.mpf(0)] * n for _ in range(n)]
        right = []
        for r, i in enumerate(system.kept):
            residual = mpmath.mpf(0)
            for j, nu in enumerate(system.change[i]):
                if nu:
                    residual += nu * (pairs[j][0] - pairs[j][1])
                    for c, d in by_log[j].items():
                        matrix[r][c] += nu * d
            right.append(-residual)
        for k, total in enumerate(system.totals):
            r = len(system.kept) + k
            for c, w in enumerate(total):
                matrix[r][c] = w * x[c]
            right.append(system.amounts[k] - sum(matrix[r]))
        move = _linear(matrix, right)
        largest = max(abs(v) for v in move)
        factor = 1 if largest < 2 else 2 / largest
        logs = [v + factor * d for v, d in zip(logs, move, strict=True)]
        if largest < SMALL:
            return logs
    if not n:
        return logs
    raise NoSteadyState("Newton's method does not converge")


def _linear(matrix: list[list[Any]], right: list[Any]) -> list[Any]:
    """Gaussian elimination with scaled partial pivoting."""
    n = len(right)
    rows = []
    for row, b in zip(matrix, right, strict=True):
        scale = max(abs(v) for v in row)
        if not scale:
            raise NoSteadyState("singular")
        rows.append([v / scale for v in row] + [b / scale])
    for c in range(n):
        p = max(range(c, n), key=lambda r: abs(rows[r][c]))
        if not rows[p][c]:
            raise NoSteadyState("singular")
        rows[c], rows[p] = rows[p], rows[c]
        for r in range(c + 1, n):
            if rows[r][c]:
                f = rows[r][c] / rows[c][c]
                rows[r] = [u - f * v for u, v in zip(rows[r], rows[c], strict=True)]
    out = [mpmath.mpf(0)] * n
    for c in reversed(range(n)):
        tail = sum((rows[c][k] * out[k] for k in range(c + 1, n)), mpmath.mpf(0))
        out[c] = (rows[c][n] - tail) / rows[c][c]
    return out
