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
from discrim.fit.measurements import Scale
from discrim.ratelaw.model import amount
from discrim.runs.model import Column, Role
from discrim.weigh.bench import Bench, fixed_put_in, put_in

if TYPE_CHECKING:
    from discrim.weigh.run import Weighed

Finding = tuple[str, str, str]


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """What the remarks are made from.

    Attributes
    ----------
    best : index of the candidate whose fit says how large errors and orders are
    error : shape (N,) relative standard deviation of each observation; inf where nothing is predicted
    used : conditions in the law of each candidate, as symbols
    """

    w: Weighed
    best: int
    error: np.ndarray
    used: tuple[frozenset[Any], ...]

    @property
    def fit(self) -> Fit:
        return self.w.assessments[self.best].fit

    @property
    def bench(self) -> Bench:
        return self.w.bench

    def runs(self, observations: Sequence[int] | np.ndarray) -> str:
        """Runs by name: ``run 3`` or ``runs 3, 4 and 2 more``."""
        labels = self.w.study.runs.labels
        names = list(dict.fromkeys(labels[self.bench.runs[int(k)]] for k in observations))
        if len(names) == 1:
            return f"run {names[0]}"
        if len(names) > 6:
            return f"runs {', '.join(names[:5])} and {len(names) - 5} more"
        return f"runs {', '.join(names[:-1])} and {names[-1]}"

    def candidates(self, which: Sequence[int]) -> str:
        """Candidates by name, not too many; "every candidate" where it is all of several."""
        names = [f"“{self.w.laws[i].law.name}”" for i in which]
        if len(names) == len(self.w.laws) > 1:
            return "every candidate"
        if len(names) > 3:
            return f"{', '.join(names[:3])} and {len(names) - 3} more"
        return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)

    def column(self, role: Role) -> Column | None:
        return next((c for c in self.w.study.runs.columns if c.role is role), None)

    def control(self, word: str) -> bool:
        """Whether the study says something on it under [controls]."""
        return any(word in name.lower() for name in self.w.study.controls)

    def amounts(self, species: str) -> np.ndarray | None:
        """Of a measured or derived species over the observations, shape (N,); None if not known."""
        column = self.w.study.runs.species().get(species)
        if column is not None:
            return column.values[self.bench.runs]
        symbol = amount(species)
        e = fixed_put_in(put_in(symbol, self.w.study), self.w.study)
        if e == symbol or not e.free_symbols <= set(self.bench.symbols):
            return None
        f = sympy.lambdify(list(self.bench.symbols), e, modules="numpy")
        values = np.asarray(f(*self.bench.measurements.conditions.T), float)
        return np.broadcast_to(values, (self.bench.measurements.n,))


def scene(w: Weighed) -> Scene | None:
    """None where no candidate could be fitted."""
    fitted = [i for i, a in enumerate(w.assessments) if a.fit.ok]
    if not fitted:
        return None
    best = min([i for i in fitted if w.stands[i]] or fitted, key=lambda i: w.rank[i])
    fit = w.assessments[best].fit
    size = np.abs(fit.values)
    variance = np.zeros(fit.n)
    for s in fit.data.of_observations:
        variance += s.sd(size) ** 2
    if fit.data.scale is Scale.ESTIMATED:
        variance += fit.scale2
    with np.errstate(divide="ignore", invalid="ignore"):
        error = np.where(size > 0, np.sqrt(variance) / size, np.inf)
    used = tuple(
        frozenset(s for e in b.expressions for s in e.free_symbols if s.name[0] in "[{")
        for b in w.bounds
    )
    return Scene(w, best, error, used)


def chemistry_findings(w: Weighed) -> list[Finding]:
    """All remarks, those on amounts first."""
    from discrim.weigh.chemistry_amounts import amounts_findings
    from discrim.weigh.chemistry_conditions import conditions_findings

    at = scene(w)
    return [] if at is None else [*amounts_findings(at), *conditions_findings(at)]


def share(x: float) -> str:
    """A fraction in percent, two digits."""
    percent = f"{100 * x:.2g}"
    return f"{float(percent):.0f} %" if "e" in percent else f"{percent} %"
