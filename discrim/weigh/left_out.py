"""Verdicts with every single run left out, and which runs they hang on.

First every test is made again without each run, all runs in one batch (`evidence.left_out`). Only
where that changes a verdict, or comes near to it, are the runs weighed again as if the study excluded
that run; what is said then is what the study would say with it under [[exclude]].
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import product
from typing import Any

import numpy as np

from discrim.errors import DiscrimError
from discrim.evidence.distributions import normal_upper
from discrim.evidence.left_out import TermLeftOut, law_left_out, slack_of, term_left_out
from discrim.evidence.rivals import Standing
from discrim.fit.fit import Fit
from discrim.study.model import Study
from discrim.verdict import ERROR_MARGIN, CandidateFacts, with_one_run
from discrim.verdict.words import listed
from discrim.weigh.asked import Answer
from discrim.weigh.document_values import number

# what is within this of a limit, in standard deviations, is weighed again exactly
NEAR = 0.25
# a rejected law that comes to stand at this many times the margin that is asked is far from it
FAR_FROM_MARGIN = 2.0
# runs weighed again exactly, those that change most first; beyond, the batch is believed
MOST_EXACT = 3


@dataclass(frozen=True, slots=True)
class Changed:
    """What leaving out one run makes of an answer.

    ``run`` its label; ``p`` that the term is absent, the largest of the candidates that stand;
    ``standing`` the candidates that then stand; ``exact`` whether the runs were weighed again
    without it (else it comes from the batch).
    """

    run: str
    verdict: str
    p: float
    standing: tuple[str, ...]
    exact: bool


@dataclass(frozen=True, slots=True)
class LeftOut:
    """``tried`` runs; for each participation answer, and for the laws that stand, what changes."""

    tried: int
    answers: tuple[tuple[Changed, ...], ...]
    standing: tuple[Changed, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Situation:
    """What the stages before found, all runs in: see `weigh.run`."""

    study: Study
    names: Sequence[str]
    runs: np.ndarray
    common_fits: Sequence[Sequence[Fit]]
    readings: Sequence[Sequence[Standing]]
    same: Sequence[tuple[int, int]]
    stands: Sequence[bool]
    answers: Sequence[Answer]


Again = Callable[[int], tuple[Sequence[bool], Sequence[Answer]]]


def left_out(s: Situation, again: Again) -> LeftOut:
    """Which single runs the answers hang on.

    ``again`` weighs the study without one run (index in the table): which laws stand, and the answers.
    """
    labels = s.study.runs.labels
    runs = np.unique(s.runs)
    if len(runs) < 2:
        return LeftOut(0, tuple(() for _ in s.answers), ())
    slack = _standing_slack(s)
    # rejected laws that larger errors bring back, where that is what a verdict turns on
    returning = sorted(
        {
            i
            for a in s.answers
            for i, c in enumerate(a.facts)
            if not c.stands and c.stands_at < FAR_FROM_MARGIN * ERROR_MARGIN
        }
    )
    wide = _standing_slack(s, factor=ERROR_MARGIN, only=returning) if returning else None
    tests = [_tests(s, a) for a in s.answers]
    fallen = [_stand_in_slack(s, a) for a in s.answers]
    now = _outcome(s.stands, s.answers)
    suspects: list[tuple[float, int]] = []
    batch: dict[int, tuple[Outcome, list[float]]] = {}
    for r in range(len(runs)):
        plain = _predicted(s, slack, wide, tests, fallen, r, 0.0, 0.0)
        shifted = [
            _predicted(s, slack, wide, tests, fallen, r, a, b)[0]
            for a, b in product((-NEAR, 0.0, NEAR), repeat=2)
        ]
        if plain[0] != now:
            suspects.append((-_moved(s, slack, tests, r), r))
            batch[r] = plain
        elif any(other != now for other in shifted):
            suspects.append((1.0 - _moved(s, slack, tests, r), r))
    found: dict[int, tuple[Outcome, list[float], bool]] = {}
    for rank, (_, r) in enumerate(sorted(suspects)):
        if rank < MOST_EXACT:
            try:
                stands, answers = again(int(runs[r]))
            except DiscrimError:  # the study is none without this run
                continue
            found[r] = (_outcome(stands, answers), [_p(a) for a in answers], True)
        elif r in batch:
            found[r] = (*batch[r], False)
    per: list[tuple[Changed, ...]] = []
    for k in range(len(s.answers)):
        changed = []
        for r, (outcome, ps, exact) in sorted(found.items()):
            if outcome[1][k] != now[1][k]:
                standing = tuple(s.names[i] for i in outcome[0])
                changed.append(Changed(labels[int(runs[r])], outcome[1][k], ps[k], standing, exact))
        per.append(tuple(changed))
    of_laws = [
        Changed(
            labels[int(runs[r])],
            "",
            float("nan"),
            tuple(s.names[i] for i in outcome[0]),
            exact,
        )
        for r, (outcome, _, exact) in sorted(found.items())
        if outcome[0] != now[0]
    ]
    return LeftOut(len(runs), tuple(per), tuple(of_laws))


# the laws that stand, and the verdicts
Outcome = tuple[tuple[int, ...], tuple[str, ...]]


def _outcome(stands: Sequence[bool], answers: Sequence[Answer]) -> Outcome:
    return (
        tuple(i for i, ok in enumerate(stands) if ok),
        tuple(a.verdict.outcome for a in answers),
    )


def _p(a: Answer) -> float:
    return max(
        (r.p for c in a.facts if c.stands and c.contains for r in c.readings),
        default=float("nan"),
    )


# ---- the laws --------------------------------------------------------------------------------


def _standing_slack(
    s: Situation, *, factor: float = 1.0, only: Sequence[int] | None = None
) -> np.ndarray:
    """By how many standard deviations each law stands without each run, shape (R, laws); negative
    where it is rejected. Under several readings of the errors the one that it stands by most.

    ``factor`` on all errors of conditions; -inf for laws that are not in ``only``.
    """
    alpha = 1.0 - s.study.level
    n_runs = len(np.unique(s.runs))
    out = np.full((n_runs, len(s.names)), -np.inf)
    for i, fits in enumerate(s.common_fits):
        for r, fit in enumerate(fits):
            if not fit.ok or (only is not None and i not in only):
                continue
            whole = s.readings[r][i]
            left = law_left_out(fit, whole, s.runs, factor=factor)
            out[:, i] = np.maximum(out[:, i], slack_of(left, whole, fit, alpha))
    for i, j in s.same:
        out[:, i] = out[:, j] = np.maximum(out[:, i], out[:, j])
    return out


def _stand_in_slack(s: Situation, a: Answer) -> np.ndarray:
    """The same of stand-ins that fell, shape (R, stand-ins), where they alone are what a verdict needs."""
    out = np.full((len(np.unique(s.runs)), len(a.tried)), -np.inf)
    if a.verdict.outcome != "participates":
        return out
    for k, t in enumerate(a.tried):
        for fit, whole in t.judged:
            slack = slack_of(law_left_out(fit, whole, s.runs), whole, fit, 1.0 - s.study.level)
            out[:, k] = np.maximum(out[:, k], slack)
    return out


# ---- the answers -----------------------------------------------------------------------------


def _tests(s: Situation, a: Answer) -> dict[tuple[int, str], TermLeftOut]:
    """The tests of one question without each run, by candidate and reading of the errors."""
    out = {}
    for k in a.per_candidate:
        if k.term is None or not s.stands[k.index]:
            continue
        for origin, whole in k.by_origin.items():
            full = k.with_it[origin]
            out[k.index, origin] = term_left_out(
                k.term,
                full.data,
                full,
                k.without[origin],
                whole,
                s.runs,
                alpha=1.0 - s.study.level,
                matters_above=a.question.matters_above,
                factor=ERROR_MARGIN,
            )
    return out


def _predicted(
    s: Situation,
    slack: np.ndarray,
    wide: np.ndarray | None,
    tests: Sequence[dict[tuple[int, str], TermLeftOut]],
    fallen: Sequence[np.ndarray],
    r: int,
    of_laws: float,
    of_tests: float,
) -> tuple[Outcome, list[float]]:
    """Laws and verdicts without run ``r``, every test moved by so many standard deviations."""
    stands = [bool(x + of_laws >= 0) for x in slack[r]]
    verdicts: list[str] = []
    ps: list[float] = []
    for a, found, others in zip(s.answers, tests, fallen, strict=True):
        assert a.judge is not None
        facts = [
            _facts(a, c, k.index, stands[k.index], found, r, of_tests, s)
            for c, k in zip(a.facts, a.per_candidate, strict=True)
        ]
        if wide is not None:
            facts = [
                replace(c, stands_at=1.0 if x + of_laws >= 0 else float("inf"))
                if np.isfinite(x)
                else c
                for c, x in zip(facts, wide[r], strict=True)
            ]
        again = {}
        if len(a.tried):
            tried = [
                replace(t.stand_in, stands=t.stand_in.stands or bool(x + of_laws >= 0))
                for t, x in zip(a.tried, others[r], strict=True)
            ]
            again = {"stand_ins": tried}
        verdicts.append(a.judge(facts, **again).outcome)
        ps.append(
            max(
                (x.p for c in facts if c.stands and c.contains for x in c.readings),
                default=float("nan"),
            )
        )
    return (tuple(i for i, ok in enumerate(stands) if ok), tuple(verdicts)), ps


def _facts(
    a: Answer,
    c: CandidateFacts,
    index: int,
    stands: bool,
    found: dict[tuple[int, str], TermLeftOut],
    r: int,
    shift: float,
    s: Situation,
) -> CandidateFacts:
    alpha = 1.0 - s.study.level
    matters = a.question.matters_above
    participation = a.per_candidate[index].by_origin
    readings = []
    for reading in c.readings:
        left = found.get((index, reading.origin))
        if left is None:
            readings.append(reading)
            continue
        two = participation[reading.origin].two_sided
        p = _p_of(float(left.z[r]) + shift, two)
        wider = _p_of(float(left.wider[r]) + shift, two)
        margin = reading.margin
        if not c.exact_conditions:
            margin = float("inf") if wider < alpha else 1.0
        bound = reading.bound
        below = float(left.below[r])
        if matters is not None and np.isfinite(below):
            bound = 0.0 if normal_upper(below - shift) < alpha else 1.0
        readings.append(replace(reading, p=p, margin=margin, bound=bound))
    return replace(c, stands=stands, readings=tuple(readings))


def _p_of(z: float, two_sided: bool) -> float:
    if z != z:
        return 1.0
    return float(2 * normal_upper(abs(z)) if two_sided else normal_upper(z))


def _moved(
    s: Situation,
    slack: np.ndarray,
    tests: Sequence[dict[tuple[int, str], TermLeftOut]],
    r: int,
) -> float:
    """How far, between 0 and 1, leaving out a run moves what is nearest to its limit."""
    moves = [0.0]
    for found in tests:
        for left in found.values():
            spread = left.z - np.nanmedian(left.z) if np.isfinite(left.z).any() else left.z * 0
            moves.append(abs(float(np.nan_to_num(spread[r]))))
    middle = np.median(slack, axis=0)
    gap = np.abs(slack[r] - middle)
    moves.append(float(np.max(np.where(np.isfinite(gap), gap, 0.0), initial=0.0)))
    return 1.0 - 1.0 / (1.0 + max(moves))


def hanging(answers: Sequence[Answer], found: LeftOut) -> list[Answer]:
    """The answers with what they owe to single runs said beside them."""
    out = []
    for a, changed in zip(answers, found.answers, strict=True):
        words = sentences(changed, a.verdict.outcome)
        out.append(replace(a, verdict=with_one_run(a.verdict, a.question.about, words)))
    return out


# ---- words -----------------------------------------------------------------------------------


def sentences(changed: Sequence[Changed], before: str) -> tuple[str, ...]:
    """What to say beside a verdict, one sentence for each verdict that it could become."""
    out = []
    for verdict in dict.fromkeys(c.verdict for c in changed):
        runs = [c.run for c in changed if c.verdict == verdict]
        out.append(
            f"leaving out {runs_in_words(runs)} changes the verdict from {before} to {verdict}"
        )
    return tuple(out)


def standing_sentences(
    found: LeftOut | None, before: Sequence[str], about: Sequence[str]
) -> tuple[str, ...]:
    """What single runs decide of the laws that stand: ``before`` those of ``about`` that stand."""
    groups: dict[str, list[str]] = {}
    for c in found.standing if found is not None else ():
        parts = []
        gone = [f"“{n}”" for n in before if n not in c.standing]
        new = [f"“{n}”" for n in about if n in c.standing and n not in before]
        if new:
            parts.append(f"{listed(new)} {'stands' if len(new) == 1 else 'stand'} as well")
        if gone:
            parts.append(f"{listed(gone)} {'is' if len(gone) == 1 else 'are'} rejected")
        if parts:
            groups.setdefault(" and ".join(parts), []).append(c.run)
    return tuple(f"without {runs_in_words(runs)} {what}" for what, runs in groups.items())


def standing_keys(
    found: LeftOut | None, before: Sequence[str], about: Sequence[str]
) -> dict[str, Any]:
    """Keys of the document for a question which laws stand."""
    if found is None:
        return {"left_out": [], "left_out_runs": 0}
    records = []
    for c in found.standing:
        standing = [n for n in about if n in c.standing]
        if standing != list(before):
            verdict = "stands" if standing else "rejected"
            records.append({**_record(c), "verdict": verdict, "standing": standing})
    return {"left_out": records, "left_out_runs": found.tried}


def answer_keys(found: LeftOut | None, k: int) -> dict[str, Any]:
    """Keys of the document for participation answer ``k``."""
    if found is None:
        return {"left_out": [], "left_out_runs": 0}
    return {"left_out": [_record(c) for c in found.answers[k]], "left_out_runs": found.tried}


def runs_in_words(runs: Sequence[str]) -> str:
    if len(runs) == 1:
        return f"run {runs[0]}"
    return f"any one of runs {listed(runs)}"


def _record(c: Changed) -> dict[str, Any]:
    """One entry of ``left_out`` in the document."""
    return {
        "run": c.run,
        "verdict": c.verdict,
        "p": number(c.p),
        "standing": list(c.standing),
        "exact": c.exact,
    }


def findings_left_out(
    found: LeftOut | None, answers: Sequence[Answer]
) -> list[tuple[str, str, str]]:
    """(severity, where, says): a decided verdict that hangs on one run is a warning."""
    out: list[tuple[str, str, str]] = []
    if found is None:
        return out
    for a, changed in zip(answers, found.answers, strict=True):
        where = f"question about {a.question.about}"
        decided = a.verdict.outcome != "undecided"
        for words in sentences(changed, a.verdict.outcome):
            out.append(("warning" if decided else "note", where, words))
    return out
