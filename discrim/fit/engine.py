"""Bounded weighted least squares for a whole batch of problems at once.

Levenberg-Marquardt with column scaling (Moré, in Numerical Analysis, ed. Watson, Springer 1978,
p. 105) and the damping schedule of Nielsen (IMM report 1999-05, Technical University of Denmark),
steps by QR, bounds by an active set, so that a constant reaches zero exactly and can leave it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from discrim.fit.problem import (
    CONVERGED,
    NOT_FINITE,
    RUNNING,
    STEP_LIMIT,
    Problem,
    Solution,
    joined,
)
from discrim.fit.step import bounded_step, triangle


@dataclass(frozen=True, slots=True)
class Options:
    """How long and how closely to iterate."""

    max_iterations: int = 80
    gradient_tolerance: float = 1e-9  # cosine between residual and any free column
    step_tolerance: float = 1e-11  # relative, in scaled constants
    separate: bool = False  # solve linear constants exactly at each step (exact conditions only)


def solve(
    problem: Problem,
    start: np.ndarray,
    *,
    fixed: np.ndarray | None = None,
    options: Options | None = None,
    conditions: np.ndarray | None = None,
    scale2: np.ndarray | None = None,
) -> Solution:
    """Minimise Q from each row of ``start``.

    Parameters
    ----------
    start : shape (S, p); clipped into the bounds
    fixed : shape (S, p) True for constants held at their start value
    conditions : shape (S, N, m) where to begin reconciling; the nominal ones by default
    scale2 : shape (S,) first guess of s^2 when it is estimated together with condition errors
    """
    opt = options or Options()
    pred, data = problem.predictor, problem.data
    s, p = start.shape
    lower = np.broadcast_to(pred.lower, (s, p))
    upper = np.broadcast_to(pred.upper, (s, p))
    held = np.zeros((s, p), bool) if fixed is None else np.broadcast_to(fixed, (s, p))
    theta = np.where(held, start, np.clip(start, lower, upper))
    if conditions is None:
        conditions = np.broadcast_to(
            data.conditions if data.conditions.ndim == 3 else data.conditions[None],
            (s, *data.conditions.shape[-2:]),
        )
    if scale2 is None:
        scale2 = np.ones(s)
        if problem.joint_scale:
            scale2 = scale2 * np.var(data.y, axis=-1) * 0.01
    everything = np.arange(s)
    n_free = (~held).sum(axis=1)
    best = problem.evaluate(theta, conditions, None, scale2, everything)
    best = joined([best])  # own, writable arrays
    best.state[:] = np.where(np.isfinite(best.objective), RUNNING, NOT_FINITE)
    if problem.joint_scale:  # the guess of s^2 must not outlive a start that needs no step
        best = _rescaled(problem, best, n_free)
    separable = opt.separate and not problem.with_conditions and bool(pred.linear.any())

    # a linear law needs no damping: one step solves it, a second one refines the solution, which in
    # badly conditioned tables restores the digits that the first has lost
    one_step = bool(pred.linear.all()) and not problem.measured
    active = everything[best.state == RUNNING]
    mu = np.full(s, 1e-18 if one_step else 1e-3)
    nu = np.full(s, 2.0)
    d_max = np.zeros((s, p))
    quiet = np.zeros(s, int)
    for _iteration in range(opt.max_iterations):
        if not len(active):
            break
        a = active
        cur = best.take(a)
        low, high, hold = lower[a], upper[a], held[a]
        grad = np.einsum("snp,sn->sp", cur.jacobian, cur.residual)
        norms = np.sqrt(np.einsum("snp,snp->sp", cur.jacobian, cur.jacobian))
        # eliminating linear constants can change them by powers of ten in one step: the largest
        # length seen so far is no scale then
        d_max[a] = norms if separable else np.maximum(d_max[a], norms)
        d = np.where(d_max[a] > 0, d_max[a], 1.0)
        blocked = (
            hold
            | ((cur.theta <= low) & (grad <= 0))
            | ((cur.theta >= high) & (grad >= 0))
            | (norms == 0)
        )
        size = np.sqrt(cur.objective)
        with np.errstate(divide="ignore", invalid="ignore"):
            cosine = np.abs(grad) / (norms * size[:, None])
        cosine = np.where(blocked, 0.0, np.nan_to_num(cosine))
        done = cosine.max(axis=1, initial=0.0) <= opt.gradient_tolerance
        done |= cur.objective <= 1e-28 * _reference(problem, cur, a)
        if one_step:
            done &= best.iterations[a] >= 2
        done |= quiet[a] >= 2
        if done.any():
            best.state[a[done]] = CONVERGED
            keep = ~done
            active = a[keep]
            if not len(active):
                break
            a = active
            cur = cur.take(keep)
            low, high, hold, blocked, d = (
                low[keep],
                high[keep],
                hold[keep],
                blocked[keep],
                d[keep],
            )
        r_mat, q_r = triangle(cur.jacobian, cur.residual)
        step, gain = bounded_step(r_mat, q_r, d, mu[a], blocked, low - cur.theta, high - cur.theta)
        trial_theta = np.clip(cur.theta + step, low, high)
        trial_theta = np.where(hold, cur.theta, trial_theta)
        w = cur.own if problem.moving else None
        there = cur.conditions if problem.following else None
        trial = problem.evaluate(trial_theta, cur.conditions, w, cur.scale2, a, errors_at=there)
        if separable:
            trial = _solve_linear(problem, trial, hold, low, high, w, a)
        drop = cur.objective - trial.objective
        with np.errstate(invalid="ignore", divide="ignore"):
            ratio = drop / gain
        # at the noise floor the sign of the drop is rounding
        flat = np.abs(drop) <= 1e-13 * cur.objective
        take = (drop > 0) | (flat & np.isfinite(trial.objective) & (gain <= 1e-12 * cur.objective))
        moved = np.abs(trial.theta - cur.theta) * d
        extent = np.abs(cur.theta) * d
        small = moved.max(axis=1, initial=0.0) <= opt.step_tolerance * np.maximum(
            extent.max(axis=1, initial=0.0), 1e-300
        ) + 1e-13 * np.sqrt(cur.objective)
        got = a[take]
        if len(got):
            new = trial.take(take)
            if problem.moving:
                new = _refreshed(problem, new, n_free[got], got)
            new.iterations = best.iterations[got]
            best.put(got, new)
        with np.errstate(over="ignore", invalid="ignore"):
            shrink = np.maximum(1.0 / 3.0, 1.0 - (2.0 * np.nan_to_num(ratio) - 1.0) ** 3)
        grew = ~take
        mu_a, nu_a = mu[a], nu[a]
        mu[a] = np.clip(np.where(grew, mu_a * nu_a, mu_a * np.minimum(shrink, 1e3)), 1e-18, 1e18)
        nu[a] = np.where(grew, nu_a * 2.0, 2.0)
        stuck = grew & (mu[a] >= 1e15)
        quiet[a] = np.where((small & (take | flat)) | stuck, quiet[a] + 1, 0)
        quiet[a] = np.where(stuck, 3, quiet[a])
        best.iterations[a] += 1
    best.state[best.state == RUNNING] = STEP_LIMIT
    if problem.measured:
        best = _polished(problem, best, everything, n_free)
    return best


def _reference(problem: Problem, cur: Solution, rows: np.ndarray) -> np.ndarray:
    """Weighted sum of squares of the observations, to tell an exact fit."""
    y, _ = problem.table(rows)
    var = cur.covariance
    if var.ndim == 3:
        var = np.diagonal(var, axis1=1, axis2=2)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.nan_to_num((y**2 / var).sum(axis=1), posinf=0.0)


def _refreshed(problem: Problem, new: Solution, free: np.ndarray, rows: np.ndarray) -> Solution:
    """The same point with W made anew, so that the next comparison uses one and the same W."""
    if problem.joint_scale:
        new.scale2 = problem.updated_scale(new, free)
    return problem.evaluate(new.theta, new.conditions, None, new.scale2, rows)


def _rescaled(problem: Problem, best: Solution, free: np.ndarray) -> Solution:
    """The starts with s^2 from their own residuals, where those are finite."""
    rows = np.flatnonzero(np.isfinite(best.objective))
    if len(rows):
        old = best.take(rows)
        new = _refreshed(problem, old, free[rows], rows)
        new.state, new.iterations = old.state, old.iterations
        good = np.isfinite(new.objective)
        best = joined([best])
        best.put(rows[good], new.take(good))
    return best


def _polished(problem: Problem, best: Solution, rows: np.ndarray, free: np.ndarray) -> Solution:
    """Reconciliation (and s^2, where it is estimated) carried on to convergence at the final constants."""
    for _ in range(12):
        if problem.joint_scale:
            best = _rescaled(problem, best, free)
        new = problem.evaluate(best.theta, best.conditions, None, best.scale2, rows, passes=2)
        shift = 0.0
        for s in problem.measured:
            sd = s.sd(best.conditions[..., s.target])
            with np.errstate(divide="ignore", invalid="ignore"):
                d = np.abs(new.conditions[..., s.target] - best.conditions[..., s.target]) / sd
            shift = max(shift, float(np.nanmax(np.where(np.isfinite(d), d, 0.0), initial=0.0)))
        good = np.isfinite(new.objective)
        new.state, new.iterations = best.state, best.iterations
        if good.all():
            best = new
        else:
            best = joined([best])
            best.put(rows[good], new.take(good))
        if shift < 1e-9:
            break
    return best


def _solve_linear(
    problem: Problem,
    trial: Solution,
    hold: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    w: np.ndarray | None,
    rows: np.ndarray,
) -> Solution:
    """Constants in which the law is linear, solved exactly at the trial point (separable least
    squares in the manner of Ruhe & Wedin, SIAM Review 22 (1980) 318, algorithm 3)."""
    ok = np.isfinite(trial.objective)
    if not ok.any():
        return trial
    blocked = hold | ~problem.predictor.linear[None, :]
    jac = np.where(ok[:, None, None], trial.jacobian, 0.0)
    res = np.where(ok[:, None], trial.residual, 0.0)
    r_mat, q_r = triangle(jac, res)
    norms = np.sqrt(np.einsum("snp,snp->sp", jac, jac))
    step, _ = bounded_step(
        r_mat,
        q_r,
        np.where(norms > 0, norms, 1.0),
        np.full(len(jac), 1e-14),
        blocked,
        low - trial.theta,
        high - trial.theta,
    )
    theta = np.clip(trial.theta + np.where(blocked, 0.0, step), low, high)
    theta = np.where(hold, trial.theta, theta)
    return problem.evaluate(theta, trial.conditions, w, trial.scale2, rows)
