"""The stages wired together: study -> laws -> fits -> evidence -> verdicts."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from discrim.errors import DiscrimError
from discrim.evidence.criteria import weights
from discrim.evidence.pairs import Pairs
from discrim.evidence.rivals import Standing
from discrim.fit.fit import Fit
from discrim.fit.measurements import Measurements
from discrim.fit.responses import Estimate
from discrim.runs.keeping import with_kept
from discrim.study.lookup import unused_constants
from discrim.study.model import Study
from discrim.weigh.adequacy import adequacies
from discrim.weigh.asked import TAKEN_OUT, Answer, answer
from discrim.weigh.asked_constants import (
    ASKED,
    answer_constants,
)
from discrim.weigh.assess import Assessment, assess
from discrim.weigh.bench import Bench, build
from discrim.weigh.bind import Bound, bind
from discrim.weigh.compared import comparisons, inseparable, no_better, pairs_of
from discrim.weigh.findings import findings_of
from discrim.weigh.fitted import (
    common_scale,
    fits_of,
    no_larger_law_worse,
    on_common,
    standings,
)
from discrim.weigh.knock_outs import KnockOuts, knock_outs
from discrim.weigh.laws import CandidateLaw
from discrim.weigh.left_out import Situation, hanging, left_out
from discrim.weigh.magnitudes import magnitudes
from discrim.weigh.margins import with_margins
from discrim.weigh.prepare import prepare
from discrim.weigh.reported import ReportedValue, reported_of
from discrim.weigh.sameness import Relations, relations
from discrim.weigh.variances import with_estimated_errors
from discrim.weigh.weighed import Weighed

Progress = Callable[[str, int, int], None]

# how often the fits are made again because a profile went below one of them
RESTARTS = 4


def with_all_runs(study: Study, *, seed: int) -> Weighed | str | None:
    """The same study with its excluded runs put back, so that the reader sees what that changes.

    None when nothing is excluded; a sentence when the excluded runs cannot be weighed.
    """
    if bool(study.runs.kept.all()):
        return None
    try:
        runs = with_kept(study.runs, np.ones(study.runs.n, bool))
        return run(replace(study, runs=runs), seed=seed, lattices=False, one_by_one=False)
    except DiscrimError as trouble:
        return f"not computed: {trouble.says}"


def run(
    study: Study,
    *,
    seed: int = 1,
    progress: Progress | None = None,
    lattices: bool = True,
    one_by_one: bool = True,
) -> Weighed:
    """Weigh a study. Wrong input raises; numerical misfortune is a status in the record.

    ``lattices`` False leaves out the laws of each mechanism with some of its pathways, ``one_by_one``
    False the verdicts with each single run left out.
    """
    # Trial steps may run to where a law overflows; they are rejected there, so no warning is due.
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        return _run(study, seed, progress, lattices, one_by_one)


def _run(
    study: Study, seed: int, progress: Progress | None, lattices: bool, one_by_one: bool
) -> Weighed:
    say = progress or (lambda words, done, total: None)
    say("deriving rate laws", 0, 1)
    laws, bench, bounds = prepare(study)
    level, alpha = study.level, 1.0 - study.level
    n = len(laws)
    if bench.measurements.n == 0:
        raise DiscrimError(
            f"no run in {study.runs.file} has a measured rate",
            do="`discrim check` judges a planned table; `discrim weigh` needs measured rates.",
        )
    bench = with_estimated_errors(bench, bounds, [c.law.name for c in laws], seed=seed)
    related = relations(bounds, study)
    settled = _settled(study, bench, bounds, related, seed, say)
    fits, common_fits, stands = settled.fits, settled.common_fits, settled.stands
    assessments, readings, common = settled.assessments, settled.readings, settled.common
    in_use = [
        f.ok and not any((j, i) in related.same for j in range(i))
        for i, f in enumerate(a.fit for a in assessments)
    ]
    w = weights([a.criteria for a in assessments], in_use)
    for i, j in related.same:  # a law that appears twice is weighed once and shown twice
        if in_use[i] and not in_use[j]:
            w[j] = w[i]
    order = sorted(range(n), key=lambda i: (assessments[i].criteria.aic, i))
    rank = [order.index(i) + 1 for i in range(n)]
    known = {name: c.value for name, c in study.constants.items() if c.value is not None}
    compared = comparisons(
        bounds,
        fits,
        common_fits,
        related,
        readings[0],
        stands,
        known,
        alpha=alpha,
        seed=seed,
        simulate=lattices,
    )
    two_at_a_time = Pairs()
    if lattices:
        say("drawing tables", 0, 1)
        crit = [a.criteria for a in assessments]
        two_at_a_time = pairs_of(common_fits, crit, related, stands, alpha=alpha, seed=seed)
    answers = []
    asked = [q for q in study.questions if q.asks in TAKEN_OUT]
    for k, q in enumerate(asked):
        say("answering", k, len(asked))
        answers.append(answer(q, study, bench, laws, bounds, fits, stands, seed=seed))
    answers = with_margins(answers, common_fits, readings, alpha=alpha)
    singly = None
    if one_by_one:
        say("leaving out single runs", 0, 1)
        singly = left_out(
            Situation(
                study,
                [c.law.name for c in laws],
                bench.runs,
                common_fits,
                readings,
                list(related.same),
                stands,
                answers,
            ),
            lambda one: _without_run(one, study, laws, fits, related, bench.errors, seed),
        )
        answers = hanging(answers, singly)
    without: tuple[KnockOuts | None, ...] = ()
    if lattices:
        say("taking pathways out", 0, 1)
        own = [a.fit for a in assessments]
        without = knock_outs(laws, bounds, own, stands, bench, common, level=level, seed=seed)
    reported: tuple[tuple[ReportedValue, ...], ...] = ()
    if study.reported:
        say("quantities of the constants", 0, 1)
        every = zip(laws, bounds, assessments, stands, strict=True)
        reported = tuple(reported_of(study, bench, c, b, a, stands=s) for c, b, a, s in every)
    weighed = Weighed(
        study=study,
        bench=bench,
        laws=tuple(laws),
        bounds=tuple(bounds),
        assessments=tuple(assessments),
        relations=related,
        standings=tuple(readings[0]),
        stands=tuple(stands),
        weights=tuple(w),
        rank=tuple(rank),
        inseparable=inseparable(common_fits, related, stands),
        no_better=no_better(compared, stands, alpha),
        comparisons=tuple(compared),
        answers=tuple(answers),
        common=common,
        findings=(),
        seed=seed,
        knock_outs=without,
        adequacy=adequacies(bench, bounds, [a.fit for a in assessments], stands, seed),
        left_out=singly,
        pairs=two_at_a_time,
        reported=reported,
        of_constants={
            k: answer_constants(q, study, bench, laws, bounds, fits, stands, seed=seed)
            for k, q in enumerate(study.questions)
            if q.asks in ASKED
        },
    )
    weighed = replace(weighed, magnitudes=magnitudes(weighed))
    names = {name.split("[")[0] for b in bounds for name in b.names}
    names |= {c.name for law in laws for c in law.law.constants}
    unused = unused_constants(study, names | set(bench.known))
    return replace(weighed, findings=findings_of(weighed, unused))


@dataclass(frozen=True, slots=True, eq=False)
class Settled:
    """The fits of all candidates when no profile goes below them any more, and what follows.

    Attributes
    ----------
    fits : of each candidate, by reading of the errors of conditions
    common_fits : the same with one scale for all candidates, a list of readings each
    readings : which laws stand and why, under each reading; stands : under any of them
    common : the measurements with that scale, under the first reading
    """

    fits: list[dict[str, Fit]]
    common_fits: list[list[Fit]]
    readings: list[list[Standing]]
    stands: list[bool]
    assessments: list[Assessment]
    common: Measurements


def _settled(
    study: Study,
    bench: Bench,
    bounds: Sequence[Bound],
    related: Relations,
    seed: int,
    say: Progress,
) -> Settled:
    """Fit, see which laws stand, and assess; again from wherever a profile found a better fit."""
    n = len(bounds)
    data = bench.measurements
    fits: list[dict[str, Fit]] = []
    for i, b in enumerate(bounds):
        say("fitting", i, n)
        fits.append(fits_of(b, data, seed=seed))
    fits = no_larger_law_worse(bounds, fits, related, study, seed)
    shared = common_scale(fits, data)
    common_fits = [on_common(b, f, shared, data, seed) for b, f in zip(bounds, fits, strict=True)]
    common = shared.as_origin(next(iter(fits[0])))
    assessed: dict[int, Assessment] = {}
    stands: list[bool] = []
    for again in range(RESTARTS + 1):
        say("comparing rivals", 0, 1)
        readings, now = standings(common_fits, related, 1.0 - study.level, seed)
        for i, b in enumerate(bounds):
            if i in assessed and now[i] == stands[i]:
                continue
            say("intervals", i, n)
            assessed[i] = assess(
                b,
                bench,
                fits[i],
                level=study.level,
                common=common,
                common_fit=common_fits[i][0],
                stands=now[i],
            )
        stands = now
        # a profile that goes below the optimum: the starts had missed it
        below = {i: a.below for i, a in assessed.items() if a.below is not None}
        if not below or again == RESTARTS:
            break
        before = list(fits)
        for i, theta in below.items():
            new = fits_of(bounds[i], data, seed=seed, near=theta[None])
            if any(f.badness < fits[i][origin].badness for origin, f in new.items()):
                fits[i] = new
        fits = no_larger_law_worse(bounds, fits, related, study, seed)
        for i, b in enumerate(bounds):
            if fits[i] is not before[i]:
                common_fits[i] = on_common(b, fits[i], shared, data, seed)
                del assessed[i]
        if len(assessed) == n:
            break
    return Settled(fits, common_fits, readings, stands, [assessed[i] for i in range(n)], common)


def _without_run(
    one: int,
    study: Study,
    laws: Sequence[CandidateLaw],
    fits: Sequence[dict[str, Fit]],
    related: Relations,
    errors: Estimate | None,
    seed: int,
) -> tuple[list[bool], list[Answer]]:
    """Which laws stand, and the answers, with run ``one`` excluded as well; fits start at those with
    all runs."""
    kept = np.array(study.runs.kept)
    kept[one] = False
    study = replace(study, runs=with_kept(study.runs, kept))
    bench = build(study, [e for c in laws for e in c.bound], errors=errors)
    bounds = [bind(c.law, bench, c.bound, with_units=False) for c in laws]
    data = bench.measurements
    again = []
    for b, old in zip(bounds, fits, strict=True):
        first = next(iter(old.values()))
        near = first.theta[None] if first.ok and len(first.theta) == len(b.names) else None
        again.append(fits_of(b, data, seed=seed, near=near))
    again = no_larger_law_worse(bounds, again, related, study, seed)
    shared = common_scale(again, data)
    common = [on_common(b, f, shared, data, seed) for b, f in zip(bounds, again, strict=True)]
    readings, stands = standings(common, related, 1.0 - study.level, seed)
    asked = [q for q in study.questions if q.asks in TAKEN_OUT]
    answers = [
        answer(q, study, bench, laws, bounds, again, stands, seed=seed, flips=False) for q in asked
    ]
    return stands, with_margins(answers, common, readings, alpha=1.0 - study.level)
