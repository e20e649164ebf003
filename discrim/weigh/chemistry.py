"""What a chemist would remark on the runs of a study, each with what it means and what to do.

Nothing here changes a verdict. Each remark rests on what the study declares; nothing is guessed from
names. `columns` of conditions are looked at in :mod:`discrim.weigh.chemistry_conditions`, amounts that
run short or near equilibrium in :mod:`discrim.weigh.chemistry_amounts`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import sympy

from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements, Scale
from discrim.ratelaw.model import amount
from discrim.runs.model import Column, Role
from discrim.study.model import Study
from discrim.weigh.asked import Answer
from discrim.weigh.bench import Bench, fixed_put_in, put_in
from discrim.weigh.bind import Bound
from discrim.weigh.laws import CandidateLaw

if TYPE_CHECKING:
    from discrim.weigh.weighed import Weighed

Finding = tuple[str, str, str]


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """What the remarks are made from.

    Attributes
    ----------
    fit : of the best candidate, which says what the orders are; None before any fit
    error : shape (N,) relative standard deviation of each observation; inf where nothing is predicted
    used : conditions in the law of each candidate, as symbols
    """

    study: Study
    bench: Bench
    laws: tuple[CandidateLaw, ...]
    bounds: tuple[Bound, ...]
    answers: tuple[Answer, ...]
    fit: Fit | None
    error: np.ndarray
    used: tuple[frozenset[Any], ...]

    def runs(self, observations: Sequence[int] | np.ndarray) -> str:
        """Runs by name: ``run 3`` or ``runs 3, 4 and 2 more``."""
        labels = self.study.runs.labels
        names = list(dict.fromkeys(labels[self.bench.runs[int(k)]] for k in observations))
        if len(names) == 1:
            return f"run {names[0]}"
        if len(names) > 6:
            return f"runs {', '.join(names[:5])} and {len(names) - 5} more"
        return f"runs {', '.join(names[:-1])} and {names[-1]}"

    def candidates(self, which: Sequence[int]) -> str:
        """Candidates by name, not too many; "every candidate" where it is all of several."""
        names = [f"“{self.laws[i].law.name}”" for i in which]
        if len(names) == len(self.laws) > 1:
            return "every candidate"
        if len(names) > 3:
            return f"{', '.join(names[:3])} and {len(names) - 3} more"
        return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)

    def column(self, role: Role) -> Column | None:
        return next((c for c in self.study.runs.columns if c.role is role), None)

    def control(self, word: str) -> bool:
        """Whether the study says something on it under [controls]."""
        return any(word in name.lower() for name in self.study.controls)

    def amounts(self, species: str) -> np.ndarray | None:
        """Of a measured or derived species over the observations, shape (N,); None if not known."""
        column = self.study.runs.species().get(species)
        if column is not None:
            return column.values[self.bench.runs]
        symbol = amount(species)
        e = fixed_put_in(put_in(symbol, self.study), self.study)
        if e == symbol or not e.free_symbols <= set(self.bench.symbols):
            return None
        f = sympy.lambdify(list(self.bench.symbols), e, modules="numpy")
        with np.errstate(all="ignore"):
            values = np.asarray(f(*self.bench.measurements.conditions.T), float)
        return np.broadcast_to(values, (self.bench.measurements.n,))


def scene(w: Weighed) -> Scene | None:
    """None where no candidate could be fitted."""
    fitted = [i for i, a in enumerate(w.assessments) if a.fit.ok]
    if not fitted:
        return None
    best = min([i for i in fitted if w.stands[i]] or fitted, key=lambda i: w.rank[i])
    fit = w.assessments[best].fit
    error = _relative(fit.data, np.abs(fit.values), fit.scale2)
    return Scene(w.study, w.bench, w.laws, w.bounds, w.answers, fit, error, _used(w.bounds))


def scene_before(
    study: Study, bench: Bench, laws: Sequence[CandidateLaw], bounds: Sequence[Bound]
) -> Scene:
    """Before any fit: errors at the readings, where there are any; 1 % where none is stated."""
    y = np.abs(bench.measurements.y)
    usual = float(np.median(y[np.isfinite(y)])) if np.isfinite(y).any() else 1.0
    error = _relative(bench.measurements, np.where(np.isfinite(y), y, usual), (0.01 * usual) ** 2)
    return Scene(study, bench, tuple(laws), tuple(bounds), (), None, error, _used(bounds))


def _relative(data: Measurements, size: np.ndarray, scale2: float) -> np.ndarray:
    """Error of the observations over their size, shape (N,)."""
    variance = np.zeros(data.n)
    for s in data.of_observations:
        variance += s.sd(size) ** 2
    if data.scale is Scale.ESTIMATED and np.isfinite(scale2):
        variance += scale2
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.where(size > 0, np.sqrt(variance) / size, np.inf))


def _used(bounds: Sequence[Bound]) -> tuple[frozenset[Any], ...]:
    return tuple(
        frozenset(s for e in b.expressions for s in e.free_symbols if s.name[0] in "[{")
        for b in bounds
    )


def chemistry_findings(w: Weighed) -> list[Finding]:
    """All remarks, those on amounts first."""
    at = scene(w)
    return [] if at is None else remarks(at)


def remarks(at: Scene) -> list[Finding]:
    """All that can be said of a scene."""
    from discrim.weigh.chemistry_amounts import amounts_findings
    from discrim.weigh.chemistry_conditions import conditions_findings

    return [*amounts_findings(at), *conditions_findings(at)]


def share(x: float) -> str:
    """A fraction in percent, two digits."""
    percent = f"{100 * x:.2g}"
    return f"{float(percent):.0f} %" if "e" in percent else f"{percent} %"
