"""Properties of the data and of the fits that the reader must know, as sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from discrim.evidence.intervals import CROSSED, OPEN
from discrim.fit.fit import FitStatus
from discrim.fit.measurements import Scale
from discrim.runs.model import ErrorBasis, Role
from discrim.weigh.adequacy_said import adequacy_findings
from discrim.weigh.chemistry import chemistry_findings
from discrim.weigh.left_out import findings_left_out
from discrim.weigh.magnitudes import magnitude_findings
from discrim.weigh.proxies import alike_labels
from discrim.weigh.variances import error_findings

if TYPE_CHECKING:
    from discrim.weigh.weighed import Weighed

# a profile interval this much wider or narrower than the linearised one is a strong disagreement
DISAGREE = 2.0

Finding = tuple[str, str, str]


def findings_of(w: Weighed, unused: tuple[str, ...]) -> tuple[Finding, ...]:
    """(severity, where, says) in the order in which a reader needs them."""
    out: list[Finding] = []
    for c, a, stands in zip(w.laws, w.assessments, w.stands, strict=True):
        where = f"candidate “{c.law.name}”"
        if a.fit.status is not FitStatus.CONVERGED:
            out.append(("warning", where, a.fit.status.value))
        out += [("warning", where, s) for s in c.law.warnings]
        out += [("note", where, s) for s in (*c.law.findings, *a.bound.findings)]
        zero = [n for n, b in zip(a.bound.names, a.fit.at_bound, strict=True) if b]
        if zero:
            out.append(
                (
                    "note",
                    where,
                    f"{', '.join(zero)} ended on a bound; intervals are one-sided there",
                )
            )
        out += _intervals(where, a, stands)
        if a.fit.degrees_of_freedom <= 0:
            out.append(
                (
                    "warning",
                    where,
                    f"{a.fit.p} constants for {a.fit.n} observations: the fit tests nothing",
                )
            )
    out += findings_left_out(w.left_out, w.answers)
    out += _same(w)
    out += _weak(w)
    out += adequacy_findings(w)
    out += magnitude_findings(w)
    out += chemistry_findings(w)
    out += _columns(w)
    out += _labels(w)
    out += error_findings(w.bench)
    out += [("note", "constants", f"[constants] {n} is in no law and was not used") for n in unused]
    out += [("note", "study", s) for s in w.study.findings]
    return tuple(dict.fromkeys(out))


def _same(w: Weighed) -> list[Finding]:
    """Candidates that are one law, written in two ways: no error, but the reader must know."""
    out: list[Finding] = []
    for (i, j), substitution in w.relations.same.items():
        words = substitution.words()
        out.append(
            (
                "note",
                f"candidates “{w.laws[i].law.name}” and “{w.laws[j].law.name}”",
                "two ways to write the same law"
                + (f" ({words})" if words else "")
                + ": they count once, and no rate can tell them apart",
            )
        )
    return out


def _weak(w: Weighed) -> list[Finding]:
    """Laws whose other constants are in lockstep with one another: what that does to intervals."""
    out: list[Finding] = []
    for answer in w.answers:
        for k in answer.per_candidate:
            if any(r.weak for r in k.by_origin.values()):
                out.append(
                    (
                        "note",
                        f"candidate “{w.laws[k.index].law.name}”",
                        "some of its constants are in lockstep with one another: tests and reconciled "
                        "intervals allow for that, the others shown may be too short",
                    )
                )
    return out


def _intervals(where: str, a: object, stands: bool) -> list[Finding]:
    out: list[Finding] = []
    for name, kinds in zip(a.bound.names, a.intervals, strict=True):  # type: ignore[attr-defined]
        lin, prof = kinds.get("linearised"), kinds.get("profile")
        recon = kinds.get("reconciled")
        if recon is not None and recon.note and stands:
            out.append(("note", where, f"reconciled interval of {name}: {recon.note}"))
        if lin is None or prof is None:
            continue
        if prof.high.end == OPEN and lin.high.end == CROSSED:
            out.append(
                (
                    "warning",
                    where,
                    f"the linearised interval of {name} is closed, but the runs set it no upper "
                    "limit: its profile is open",
                )
            )
            continue
        ends = (lin.low, lin.high, prof.low, prof.high)
        if any(s.end != CROSSED for s in ends):
            continue
        x = float(a.fit.theta[a.bound.names.index(name)])  # type: ignore[attr-defined]
        # a law that is linear in its constants does not bend: there a bound of another ends the way
        linear = bool(a.bound.predictor.linear.all())  # type: ignore[attr-defined]
        up = (prof.high.value - x) / max(lin.high.value - x, 1e-300)
        down = (x - prof.low.value) / max(x - lin.low.value, 1e-300)
        for ratio, side in ((up, "upward"), (down, "downward")):
            if ratio > DISAGREE or ratio < 1 / DISAGREE:
                out.append(
                    (
                        "note",
                        where,
                        f"the profile interval of {name} reaches {ratio:.2g} times as far {side} as "
                        "the linearised one: "
                        + (
                            "another constant reaches its bound on the way"
                            if linear
                            else "the law bends there, and standard errors mislead"
                        ),
                    )
                )
    return out


def _columns(w: Weighed) -> list[Finding]:
    out: list[Finding] = []
    used = {s.name for s in w.bench.symbols}
    for col in w.study.runs.columns:
        if col.role is not Role.SPECIES:
            continue
        if col.basis is ErrorBasis.ASSUMED and f"[{col.about}]" in used:
            out.append(
                (
                    "warning",
                    f"column “{col.name}”",
                    "its error is not stated and was assumed (the smaller of its digits and 1 %)",
                )
            )
    sources = [
        c
        for c in w.study.runs.columns
        if c.role is Role.SPECIES
        and any(e.origin is None for e in c.errors)
        and f"[{c.about}]" in used
    ]
    if sources:
        names = ", ".join(f"“{c.name}”" for c in sources)
        out.append(
            (
                "note",
                "errors",
                f"the study does not say whether {names} were set or measured: both were computed, "
                "and a decided verdict needs both to agree",
            )
        )
    if w.bench.measurements.scale is Scale.ESTIMATED:
        s2 = [a.fit.scale2 for a in w.assessments if np.isfinite(a.fit.scale2)]
        if s2:
            out.append(
                (
                    "note",
                    "errors",
                    "the error of the rate is not stated; its variance was estimated from the fits, "
                    "so lack of fit cannot be told from noise",
                )
            )
    return out


def _labels(w: Weighed) -> list[Finding]:
    """Text columns that the study does not declare, yet whose labels go with a species asked about."""
    out: list[Finding] = []
    for answer in w.answers:
        if answer.what != "species" or answer.verdict.outcome != "participates":
            continue
        for name in alike_labels(answer.question.about, w.study, w.bench):
            out.append(
                (
                    "note",
                    f"column “{name}”",
                    f"its labels split the runs as the amounts of {answer.question.about} do: if they "
                    "stand for anything else (a batch, a day, an operator), that could be the cause; "
                    'declared with is = "group" it is tried as a stand-in',
                )
            )
    return out
