"""One damped step of least squares within bounds, for a whole batch: by QR, bounds by an active set."""

from __future__ import annotations

import numpy as np


def triangle(jacobian: np.ndarray, residual: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """R and Q'r of the whitened Jacobian, shapes (S, p, p) and (S, p)."""
    s, n, p = jacobian.shape
    both = np.concatenate([jacobian, residual[..., None]], axis=2)
    if n < p + 1:
        both = np.concatenate([both, np.zeros((s, p + 1 - n, p + 1))], axis=1)
    r = np.asarray(np.linalg.qr(both, mode="r"))
    return r[:, :p, :p], r[:, :p, p]


def bounded_step(
    r_mat: np.ndarray,
    q_r: np.ndarray,
    d: np.ndarray,
    mu: np.ndarray,
    blocked: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Damped step within bounds: constants that would cross are put on their bound, the rest solved
    again. Returns the step (S, p) and the decrease of the linearised objective (S,)."""
    s, p = q_r.shape
    step = np.zeros((s, p))
    blocked = blocked.copy()
    grad = np.einsum("sij,si->sj", r_mat, q_r)
    idx = np.arange(p)
    for _ in range(p + 1):
        rhs = q_r - np.einsum("sij,sj->si", r_mat, np.where(blocked, step, 0.0))
        upper_part = np.where(blocked[:, None, :], 0.0, r_mat)
        stacked = np.zeros((s, 2 * p, p + 1))
        stacked[:, :p, :p] = upper_part
        stacked[:, :p, p] = rhs
        stacked[:, p + idx, idx] = np.where(blocked, 1.0, np.sqrt(mu)[:, None] * d)
        tri = np.asarray(np.linalg.qr(stacked, mode="r"))
        free = np.linalg.solve(tri[:, :p, :p], tri[:, :p, p : p + 1])[..., 0]
        step = np.where(blocked, step, free)
        out = ~blocked & ((step < low) | (step > high))
        if not out.any():
            break
        step = np.where(out, np.clip(step, low, high), step)
        blocked |= out
    linear = np.einsum("sij,sj->si", r_mat, step)
    gain = 2.0 * np.einsum("sj,sj->s", grad, step) - np.einsum("si,si->s", linear, linear)
    return step, gain
