"""The stages wired together: study -> laws -> fits -> evidence -> verdicts."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from discrim.errors import DiscrimError, Place
from discrim.evidence.criteria import weights
from discrim.evidence.pairs import Pairs
from discrim.evidence.rivals import Standing, standing
from discrim.fit.fit import Fit, fit
from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
from discrim.fit.responses import Estimate
from discrim.ratelaw.model import amount
from discrim.runs.keeping import with_kept
from discrim.runs.model import Role
from discrim.study.lookup import check_measured, unused_constants
from discrim.study.model import Study
from discrim.weigh.adequacy import Adequacy, adequacies
from discrim.weigh.asked import TAKEN_OUT, Answer, answer, check_questions
from discrim.weigh.asked_constants import (
    ASKED,
    ConstantAnswer,
    answer_constants,
    check_constant_questions,
)
from discrim.weigh.assess import Assessment, assess, fits_of
from discrim.weigh.bench import Bench, build
from discrim.weigh.bind import Bound, bind
from discrim.weigh.compared import Comparison, comparisons, inseparable, no_better, pairs_of
from discrim.weigh.embedded import embedded
from discrim.weigh.knock_outs import KnockOuts, knock_outs
from discrim.weigh.laws import CandidateLaw, laws_of
from discrim.weigh.left_out import LeftOut, Situation, hanging, left_out
from discrim.weigh.magnitudes import Magnitude, magnitudes
from discrim.weigh.margins import with_margins
from discrim.weigh.reported import ReportedValue, check_reported, reported_of
from discrim.weigh.sameness import Relations, relations
from discrim.weigh.variances import with_estimated_errors

Progress = Callable[[str, int, int], None]

# how often the fits are made again because a profile went below one of them
RESTARTS = 4


@dataclass(frozen=True, slots=True, eq=False)
class Weighed:
    """Everything that one run of `weigh` found out."""

    study: Study
    bench: Bench
    laws: tuple[CandidateLaw, ...]
    bounds: tuple[Bound, ...]
    assessments: tuple[Assessment, ...]
    relations: Relations
    standings: tuple[Standing, ...]
    stands: tuple[bool, ...]
    weights: tuple[float, ...]
    rank: tuple[int, ...]
    inseparable: tuple[tuple[int, ...], ...]
    no_better: tuple[int | None, ...]
    comparisons: tuple[Comparison, ...]
    answers: tuple[Answer, ...]
    common: Measurements
    findings: tuple[tuple[str, str, str], ...]
    seed: int
    knock_outs: tuple[KnockOuts | None, ...] = ()
    adequacy: tuple[Adequacy | None, ...] = ()
    magnitudes: tuple[tuple[Magnitude, ...], ...] = ()
    left_out: LeftOut | None = None
    pairs: Pairs = field(default_factory=Pairs)
    reported: tuple[tuple[ReportedValue, ...], ...] = ()
    # answers about constants, by the number of the question
    of_constants: Mapping[int, ConstantAnswer] = field(default_factory=dict)


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


def prepare(
    study: Study, *, planned: bool = False
) -> tuple[list[CandidateLaw], Bench, list[Bound]]:
    """Laws derived and checked, and bound to the runs."""
    if not study.candidates:
        raise DiscrimError(
            "the study has no candidates",
            place=Place(file=str(study.path)),
            do="Write each mechanism or law that could explain the runs under [[candidates]].",
        )
    laws = laws_of(study)
    for c in laws:
        # k_obs of S is the rate divided by [S], which a law of first order in S then lacks
        cancelled = [
            column.about
            for column in study.runs.observations()
            if column.role is Role.K_OBS_OF
            and not any(amount(column.about) in e.free_symbols for e in c.bound)
        ]
        check_measured(c.law, study, place=c.candidate.place, cancelled=cancelled)
    check_questions(study, laws)
    bench = build(study, [e for c in laws for e in c.bound], planned=planned)
    bounds = [bind(c.law, bench, c.bound) for c in laws]
    for c, b in zip(laws, bounds, strict=True):
        if not b.names:
            raise DiscrimError(
                f'nothing in the law of "{c.law.name}" is left to estimate',
                place=c.candidate.place,
                do="Leave at least one constant of each candidate open: start = in place of "
                "value =, or a constant in front of the law.",
            )
    check_reported(study, bench, laws, bounds)
    check_constant_questions(study, bench, laws, bounds)
    return laws, bench, bounds


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
    data = bench.measurements
    if data.n == 0:
        raise DiscrimError(
            f"no run in {study.runs.file} has a measured rate",
            do="`discrim check` judges a planned table; `discrim weigh` needs measured rates.",
        )
    bench = with_estimated_errors(bench, bounds, [c.law.name for c in laws], seed=seed)
    data = bench.measurements
    related = relations(bounds, study)
    fits: list[dict[str, Fit]] = []
    for i, b in enumerate(bounds):
        say("fitting", i, n)
        fits.append(fits_of(b, data, seed=seed))
    fits = _no_larger_law_worse(bounds, fits, related, study, seed)
    shared = _common_scale(fits, data)
    common_fits = [_on_common(b, f, shared, data, seed) for b, f in zip(bounds, fits, strict=True)]
    common = shared.as_origin(next(iter(fits[0])))
    assessed: dict[int, Assessment] = {}
    stands: list[bool] = []
    for again in range(RESTARTS + 1):
        say("comparing rivals", 0, 1)
        readings, now = _standing(common_fits, related, alpha, seed)
        for i, b in enumerate(bounds):
            if i in assessed and now[i] == stands[i]:
                continue
            say("intervals", i, n)
            assessed[i] = assess(
                b,
                bench,
                fits[i],
                level=level,
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
        fits = _no_larger_law_worse(bounds, fits, related, study, seed)
        for i, b in enumerate(bounds):
            if fits[i] is not before[i]:
                common_fits[i] = _on_common(b, fits[i], shared, data, seed)
                del assessed[i]
        if len(assessed) == n:
            break
    assessments = [assessed[i] for i in range(n)]
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
    from discrim.weigh.findings import findings_of

    weighed = Weighed(
        study,
        bench,
        tuple(laws),
        tuple(bounds),
        tuple(assessments),
        related,
        tuple(readings[0]),
        tuple(stands),
        tuple(w),
        tuple(rank),
        inseparable(common_fits, related, stands),
        no_better(compared, stands, alpha),
        tuple(compared),
        tuple(answers),
        common,
        (),
        seed,
        without,
        left_out=singly,
        pairs=two_at_a_time,
        adequacy=adequacies(bench, bounds, [a.fit for a in assessments], stands, seed),
    )
    weighed = replace(weighed, magnitudes=magnitudes(weighed))
    weighed = replace(
        weighed,
        of_constants={
            k: answer_constants(q, study, bench, laws, bounds, fits, stands, seed=seed)
            for k, q in enumerate(study.questions)
            if q.asks in ASKED
        },
    )
    if study.reported:
        say("quantities of the constants", 0, 1)
        every = zip(laws, bounds, assessments, stands, strict=True)
        weighed = replace(
            weighed,
            reported=tuple(reported_of(study, bench, c, b, a, stands=s) for c, b, a, s in every),
        )
    names = {name.split("[")[0] for b in bounds for name in b.names}
    names |= {c.name for law in laws for c in law.law.constants}
    unused = unused_constants(study, names | set(bench.known))
    return replace(weighed, findings=findings_of(weighed, unused))


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
    again = _no_larger_law_worse(bounds, again, related, study, seed)
    shared = _common_scale(again, data)
    common = [_on_common(b, f, shared, data, seed) for b, f in zip(bounds, again, strict=True)]
    readings, stands = _standing(common, related, 1.0 - study.level, seed)
    asked = [q for q in study.questions if q.asks in TAKEN_OUT]
    answers = [
        answer(q, study, bench, laws, bounds, again, stands, seed=seed, flips=False) for q in asked
    ]
    return stands, with_margins(answers, common, readings, alpha=1.0 - study.level)


def _no_larger_law_worse(
    bounds: Sequence[Bound],
    fits: list[dict[str, Fit]],
    related: Relations,
    study: Study,
    seed: int,
) -> list[dict[str, Fit]]:
    """A law that contains another must fit at least as well: if not, start it from there."""
    out = list(fits)
    known = {n: c.value for n, c in study.constants.items() if c.value is not None}
    for larger, smaller, nesting in related.embeddings():
        for origin, big in out[larger].items():
            small = out[smaller].get(origin)
            if small is None or not small.ok:
                continue
            if big.ok and big.badness <= small.badness * (1 + 1e-9) + 1e-12:
                continue
            near = embedded(
                bounds[smaller], bounds[larger], small.theta, nesting, big.data.conditions, known
            )
            again = fit(bounds[larger].predictor, big.data, seed=seed + 1, starts=32, near=near)
            if again.ok and (not big.ok or again.badness < big.badness):
                out[larger] = {**out[larger], origin: again}
    return out


def _common_scale(fits: Sequence[dict[str, Fit]], data: Measurements) -> Measurements:
    """The measurements with one scale for all candidates, for criteria and rivals.

    Where the variance of the rates is unknown and conditions have errors, s^2 is taken from the
    candidate with the most constants (the best of those), once for all; its degrees of freedom make
    the reference a t.
    """
    if data.scale is not Scale.ESTIMATED or data.exact_conditions:
        return data
    first = [next(iter(f.values())) for f in fits]
    good = [f for f in first if f.ok] or first
    most = max(f.p for f in good)
    general = min((f for f in good if f.p == most), key=lambda f: f.scale2)
    df = max(general.degrees_of_freedom, 1)
    typical = float(np.var(data.y)) * 1e-12
    sd = float(np.sqrt(max(general.scale2, typical, 1e-300)))
    return replace(
        data,
        sources=(*data.of_conditions, source(OBSERVATION, data.n, absolute=sd)),
        scale=Scale.REPLICATES,
        scale_df=df,
    )


def _on_common(
    bound: Bound, fits: dict[str, Fit], common: Measurements, data: Measurements, seed: int
) -> list[Fit]:
    """One law fitted to the measurements with the common scale, one fit for each reading."""
    if common is data:
        return list(fits.values())
    return [
        fit(
            bound.predictor,
            common.as_origin(origin),
            seed=seed,
            starts=4,
            near=f.theta[None] if f.ok else None,
        )
        for origin, f in fits.items()
    ]


def _standing(
    common_fits: Sequence[Sequence[Fit]], related: Relations, alpha: float, seed: int
) -> tuple[list[list[Standing]], list[bool]]:
    """Under each reading of the condition errors, and in all: a candidate stands if it does under any
    of them."""
    contains = dict.fromkeys(related.contains, True)
    same = dict.fromkeys(related.same, True)
    readings = [
        standing([f[r] for f in common_fits], contains, same, alpha=alpha, seed=seed)
        for r in range(len(common_fits[0]))
    ]
    first = readings[0]
    stands = [any(r[i].stands for r in readings) for i in range(len(first))]
    for i, j in related.same:
        stands[i] = stands[j] = stands[i] or stands[j]
    return readings, stands
