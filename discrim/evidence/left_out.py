"""Every run left out, one at a time, in one batch: tests of a term and of a law without it.

Nothing is approximated by a leverage here: the law is fitted again without each run (the batch
axis holds the runs), because the run on which an answer hangs is often the one that a linearised
update serves worst. What is carried over from all runs is the direction of a test that needs a
search of its own (a term whose constants vanish with it, a factor, a rival), and what the whole
test adds to the plain score.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from discrim.evidence.distributions import (
    chi2_tail,
    normal_of_tail,
    normal_quantile,
    normal_upper,
)
from discrim.evidence.effect import t_of
from discrim.evidence.intervals import guard_level
from discrim.evidence.rivals import SHARE_OVERALL, Standing, studentised
from discrim.evidence.score import NO_INFORMATION, basis, score, to_normal, without
from discrim.evidence.several import several
from discrim.evidence.term import Kind, Participation, Term
from discrim.evidence.term_effect import chosen_point, in_effect
from discrim.evidence.term_tests import vanishing
from discrim.fit.covariance import Whitener
from discrim.fit.engine import Options, solve
from discrim.fit.fit import Fit
from discrim.fit.freedom import adjusted, on_bounds
from discrim.fit.measurements import Measurements, Scale
from discrim.fit.problem import Problem, Solution
from discrim.reactor.model import Predictor

# a score this far below its limit leaves the test with wider errors alone
MAY_REJECT = 0.5
# how many times what matters the bound of an effect may be for one run to be what keeps it there
FAR_ABOVE = 10.0
_OPTIONS = Options(max_iterations=60, gradient_tolerance=1e-6, step_tolerance=1e-9)


@dataclass(frozen=True, slots=True, eq=False)
class Batch:
    """Tables with one run left out of each: which runs, shape (R,), and the marked measurements."""

    members: np.ndarray
    data: Measurements


@dataclass(frozen=True, slots=True, eq=False)
class TermLeftOut:
    """One term of one law, errors read one way, with each of R runs left out.

    Attributes
    ----------
    z : shape (R,) equivalent normal of the test that the term is absent, as `Participation.z`
    wider : shape (R,) the same with all errors of conditions ``factor`` times as large
    below : shape (R,) equivalent normal of the test that its effect is as large as what matters,
        positive towards a smaller one; nan where nothing matters or it cannot be tested
    """

    z: np.ndarray
    wider: np.ndarray
    below: np.ndarray


@dataclass(frozen=True, slots=True, eq=False)
class LawLeftOut:
    """One law as the truth with each of R runs left out: equivalent normals of what could reject it.

    ``fit`` of the objective (nan: its scale is not known), ``along`` of the largest score along the
    rivals; shape (R,) each.
    """

    fit: np.ndarray
    along: np.ndarray


def batches(data: Measurements, run_of: np.ndarray) -> tuple[np.ndarray, list[Batch]]:
    """The runs, and tables without each, runs with as many observations together.

    ``run_of``: shape (N,) the run of each observation.
    """
    runs, counts = np.unique(run_of, return_counts=True)
    out = []
    for size in np.unique(counts):
        members = np.flatnonzero(counts == size)
        absent = run_of[None, :] == runs[members][:, None]
        out.append(Batch(members, replace(data, absent=absent)))
    return runs, out


def term_left_out(
    term: Term,
    data: Measurements,
    full: Fit,
    reduced: Fit,
    whole: Participation,
    run_of: np.ndarray,
    *,
    alpha: float,
    matters_above: float | None,
    factor: float,
) -> TermLeftOut:
    """Tests of ``term`` with each run left out; ``whole`` what they are with all runs."""

    n_runs = len(np.unique(run_of))
    if whole.information < NO_INFORMATION:  # fewer runs never bring what all runs lack
        z = np.full(n_runs, whole.z)
        return TermLeftOut(z, z, np.full(n_runs, np.nan))

    def absence(table: Measurements) -> np.ndarray:
        return _absence(term, table, full, reduced, whole, alpha)

    z = _each(data, run_of, absence)
    plain = float(absence(replace(data, absent=np.zeros((1, data.n), bool)))[0])
    # what projecting, or another statistic on the same score, takes from it or adds to it
    shift = whole.z - plain if np.isfinite(whole.z) and np.isfinite(plain) else 0.0
    wider = z
    need = normal_quantile(1.0 - (alpha / 2 if whole.two_sided else alpha))
    if not data.exact_conditions and bool((np.abs(z + shift) > need - MAY_REJECT).any()):
        wider = _each(data.with_condition_errors_times(factor), run_of, absence)
    below = np.full(n_runs, np.nan)
    if matters_above is not None and _may_be_small(term, data, whole, matters_above):
        below = _each(data, run_of, lambda d: still_below(term, d, full, matters_above))
    return TermLeftOut(z + shift, wider + shift, below)


def _may_be_small(
    term: Term, data: Measurements, whole: Participation, matters_above: float
) -> bool:
    """Whether leaving out a run could bring the effect below what matters, so far as that was not so.

    With stated errors every run narrows the bound; where they are estimated one that lies off widens it.
    """
    if whole.effect is None or term.knocked is None or len(term.psi) != 1:
        return False
    if data.scale is Scale.STATED:
        return whole.effect.bound < FAR_ABOVE * matters_above
    return whole.effect.bound < 1.0


def law_left_out(
    fit: Fit, whole: Standing, run_of: np.ndarray, *, factor: float = 1.0
) -> LawLeftOut:
    """What could reject a law with each run left out, along the directions that it has with all, the
    errors of conditions ``factor`` times as large."""
    data = fit.data if factor == 1.0 else fit.data.with_condition_errors_times(factor)

    def both(table: Measurements) -> np.ndarray:
        found = law_again(fit, whole, table)
        return np.stack([found.fit, found.along], axis=1)

    out = _each(data, run_of, both)
    return LawLeftOut(out[:, 0], out[:, 1])


def law_again(fit: Fit, whole: Standing, table: Measurements) -> LawLeftOut:
    """What could reject a law on each table of a batch, along the directions that ``whole`` has."""
    data = fit.data
    estimated = data.scale is Scale.ESTIMATED and not fit.problem.with_conditions
    lines = np.array([a.direction for a in whole.against]).reshape(-1, data.n).T
    sol = _solved(Problem(fit.predictor, table), fit, None)
    df = table.count - fit.p
    q = sol.objective
    of_fit = np.full(len(q), np.nan)
    if data.scale is Scale.STATED and whole.p_fit is not None:
        of_fit = normal_of_tail(chi2_tail(q, _objective_df(sol, fit.predictor, table)))
    z = np.abs(_along(sol, _unwhitened(fit, lines), np.arange(fit.p)))
    if estimated:
        z = to_normal(studentised(z, q[:, None], df), float(max(df - 1, 1)))
    elif data.scale is Scale.REPLICATES:
        z = to_normal(z, float(data.scale_df))
    return LawLeftOut(of_fit, z.max(axis=1, initial=0.0))


def slack_of(left: LawLeftOut, whole: Standing, fit: Fit, alpha: float) -> np.ndarray:
    """By how many standard deviations a law stands, shape (R,); negative where it is rejected."""
    spend = alpha if whole.p_fit is None else alpha * (1.0 - SHARE_OVERALL)
    slack = np.full(len(left.fit), np.inf)
    if whole.p_fit is not None:
        slack = float(normal_of_tail(alpha * SHARE_OVERALL)) - left.fit
    if whole.against:
        df = float("inf")
        if fit.data.scale is Scale.REPLICATES:
            df = float(fit.data.scale_df)
        elif fit.data.scale is Scale.ESTIMATED and not fit.problem.with_conditions:
            df = float(max(fit.degrees_of_freedom - 1, 1))
        # several directions count as this many independent ones
        largest = float(to_normal(np.array([whole.largest]), df)[0])
        single = 2.0 * float(normal_upper(largest))
        several = float(np.clip(whole.p_joint / max(single, 1e-300), 1.0, len(whole.against)))
        slack = np.fmin(slack, float(normal_of_tail(spend / several / 2.0)) - left.along)
    return np.where(np.isnan(slack), np.inf, slack)


# ---- pieces -----------------------------------------------------------------------------------


def _each(
    data: Measurements, run_of: np.ndarray, tested: Callable[[Measurements], np.ndarray]
) -> np.ndarray:
    runs, groups = batches(data, run_of)
    out: np.ndarray | None = None
    for group in groups:
        found = tested(group.data)
        if out is None:
            out = np.full((len(runs), *found.shape[1:]), np.nan)
        out[group.members] = found
    assert out is not None
    return out


def _solved(problem: Problem, fit: Fit, held: dict[int, float] | None) -> Solution:
    """A law fitted again to each table of a batch, from the fit to all runs."""
    absent = problem.data.absent
    assert absent is not None
    s = len(absent)
    start = np.tile(fit.theta, (s, 1))
    fixed = np.zeros(start.shape, bool)
    for j, value in (held or {}).items():
        start[:, j] = value
        fixed[:, j] = True
    return _from(problem, start, fixed, fit)


def _from(problem: Problem, start: np.ndarray, fixed: np.ndarray, fit: Fit) -> Solution:
    scale2 = conditions = None
    if problem.joint_scale:
        scale2 = np.full(len(start), max(float(fit.scale2), 1e-300))
    if problem.measured:
        conditions = np.repeat(fit.conditions[None], len(start), axis=0)
    return solve(
        problem, start, fixed=fixed, options=_OPTIONS, scale2=scale2, conditions=conditions
    )


def _along(sol: Solution, lines: np.ndarray, nuisance: np.ndarray) -> np.ndarray:
    """Scores, shape (S, k), along k changes of the predictions, ``lines`` of shape (N, k)."""
    s = len(sol.theta)
    if not lines.shape[1]:
        return np.zeros((s, 0))
    white = Whitener(sol.covariance)
    g = white.matrix(np.broadcast_to(lines, (s, *lines.shape)))
    space = basis(sol.jacobian[:, :, nuisance])
    out = np.zeros((s, lines.shape[1]))
    for k in range(lines.shape[1]):
        d = without(space, g[:, :, k])
        size = np.sqrt(np.einsum("sn,sn->s", d, d))
        whole = np.sqrt(np.einsum("sn,sn->s", g[:, :, k], g[:, :, k]))
        with np.errstate(divide="ignore", invalid="ignore"):
            z = np.einsum("sn,sn->s", d, sol.residual) / size
        out[:, k] = np.where(size > 1e-8 * whole, z, 0.0)
    return out


def _unwhitened(fit: Fit, lines: np.ndarray) -> np.ndarray:
    """Whitened directions, shape (N, k), as changes of the predictions."""
    v = fit.covariance
    if v.ndim == 1:
        return np.asarray(np.sqrt(v)[:, None] * lines)
    return np.asarray(np.linalg.cholesky(v + 1e-12 * np.trace(v) / len(v) * np.eye(len(v))) @ lines)


def _absence(
    term: Term, table: Measurements, full: Fit, reduced: Fit, whole: Participation, alpha: float
) -> np.ndarray:
    """Equivalent normal of the test that the term is absent, for each table of a batch."""
    if term.kind in (Kind.ZERO, Kind.ORDER):
        psi = term.psi[0]
        problem = Problem(term.full, table)
        sol = _solved(problem, full, {psi: 0.0})
        z = score(problem, sol, psi).z
        return _or_objective(z, sol, table, full.p - 1, problem, psi, alpha)
    if term.kind is Kind.SEVERAL:
        return _several(term, table, full)
    null = reduced
    problem = Problem(term.reduced, table)
    sol = _solved(problem, null, None)
    if term.kind is Kind.FACTOR:
        lines = (full.values - null.values)[:, None]
    else:
        lines = np.array(vanishing(term, null)).T
    z = _along(sol, lines, np.arange(null.p))
    df = table.count - null.p
    estimated = table.scale is Scale.ESTIMATED and not problem.with_conditions
    if df < 1 or (estimated and df < 2):
        return np.full(len(z), np.nan)
    if estimated:
        z = to_normal(studentised(z, sol.objective[:, None], df), float(df - 1))
    if term.kind is Kind.FACTOR:
        return np.asarray(z[:, 0] * (np.sign(whole.z) or 1.0))
    return np.asarray(z.max(axis=1))


def _or_objective(
    z: np.ndarray,
    sol: Solution,
    table: Measurements,
    p_nuisance: int,
    problem: Problem,
    psi: int,
    alpha: float,
) -> np.ndarray:
    """The score, or the objective where that alone excludes the law without the term."""
    if table.scale is not Scale.STATED or not problem.with_conditions:
        return z
    df = table.count - p_nuisance + _others_on_bounds(sol, problem.predictor, psi)
    tails = chi2_tail(np.where(np.isfinite(sol.objective), sol.objective, 0.0), np.maximum(df, 1))
    tails = np.where(np.isfinite(sol.objective) & (df > 0), tails, 1.0)
    alone = normal_of_tail(tails)
    return np.where((tails < guard_level(alpha)) & ~(np.abs(z) > alone), alone, z)


def _others_on_bounds(sol: Solution, predictor: Predictor, psi: int) -> np.ndarray:
    """How many constants but ``psi`` are on a bound, shape (S,): they were not adjusted."""
    on = on_bounds(sol.theta, predictor.lower, predictor.upper)
    return np.asarray(on.sum(axis=1) - on[:, psi])


def _objective_df(sol: Solution, predictor: Predictor, table: Measurements) -> np.ndarray:
    """Of Q in each member of a batch, shape (S,), as `Fit.objective_df`; at least 1."""
    on = on_bounds(sol.theta, predictor.lower, predictor.upper)
    return np.maximum(table.count - adjusted(sol.jacobian, on), 1)


def _several(term: Term, table: Measurements, full: Fit) -> np.ndarray:
    problem = Problem(term.full, table)
    sol = _solved(problem, full, dict.fromkeys(term.psi, 0.0))
    return several(problem, sol, term.psi)[0]


def still_below(term: Term, table: Measurements, full: Fit, matters_above: float) -> np.ndarray:
    """Equivalent normal of the test of an effect of ``matters_above``, towards a smaller one."""
    assert table.absent is not None
    wrapped = in_effect(term, full.theta, chosen_point(term, full.theta))
    problem = Problem(wrapped, table)
    start = wrapped.from_inner(full.theta[None])
    out = np.full(len(table.absent), np.inf)
    for sign in (1.0, -1.0):
        if wrapped.sign not in (0, int(sign)):
            continue
        held = start.copy()
        held[:, wrapped.psi] = float(t_of(sign * matters_above))
        fixed = np.zeros(len(start[0]), bool)
        fixed[wrapped.psi] = True
        sol = _from(problem, np.tile(held, (len(out), 1)), fixed, full)
        out = np.minimum(out, -sign * score(problem, sol, wrapped.psi).z)
    return out
