"""Where to begin: many starts carried a short way together, the distinct best of them kept.

Conditions are taken as exact and the weights as fixed here, so one evaluation is one array
expression. The steps solve the small damped normal equations, which is fast and good enough to find
the basin; every result comes from the QR iterations of `engine` that follow.
"""

from __future__ import annotations

import numpy as np

from discrim.fit.measurements import Measurements
from discrim.reactor.model import Predictor


def starting_values(predictor: Predictor, count: int, seed: int) -> np.ndarray:
    """``count`` starts: the user's, then each constant spread over its typical magnitude.

    Positive constants are spread log-uniformly over 10^-2.5 to 10^2.5 times their typical scale,
    free ones uniformly over -2 to 2 times it, bounded ones inside their bounds, by a seeded Latin
    hypercube. Shape (count, p).
    """
    p = len(predictor.names)
    rng = np.random.default_rng(seed)
    cells = np.argsort(rng.random((p, count)), axis=1).T + rng.random((count, p))
    u = cells / count
    lower, upper, scale = predictor.lower, predictor.upper, predictor.scale
    out = np.empty((count, p))
    for j in range(p):
        positive = lower[j] >= 0
        if positive:
            out[:, j] = scale[j] * 10.0 ** (5.0 * u[:, j] - 2.5)
        else:
            out[:, j] = scale[j] * (4.0 * u[:, j] - 2.0)
        if np.isfinite(lower[j]) and np.isfinite(upper[j]):
            outside = (out[:, j] < lower[j]) | (out[:, j] > upper[j])
            inside = lower[j] + (upper[j] - lower[j]) * u[:, j]
            out[:, j] = np.where(outside, inside, out[:, j])
    out = np.clip(out, lower, upper)
    user = predictor.starts[:count]
    if len(user):
        out[: len(user)] = np.where(np.isnan(user), out[: len(user)], user)
    return out


@np.errstate(over="ignore", invalid="ignore", divide="ignore")  # a wild start is dropped, not reported
def scout(
    predictor: Predictor,
    data: Measurements,
    weight: np.ndarray,
    starts: np.ndarray,
    *,
    rounds: int = 60,
    keep: int = 4,
) -> np.ndarray:
    """The most promising distinct points reached from ``starts``, best first, shape (<= keep, p).

    ``weight`` shape (N,): one over the standard deviation of each observation.
    """
    lower, upper = predictor.lower, predictor.upper
    y, c = data.y * weight, data.conditions
    w3 = weight[None, :, None]
    theta = np.clip(starts, lower, upper)
    diag = np.arange(theta.shape[1])

    def model(t: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        pred = predictor.predict(t, c)
        assert pred.by_constants is not None
        r = y - pred.values * weight
        q = (r * r).sum(axis=1)
        q[~np.isfinite(q)] = np.inf
        return r, pred.by_constants * w3, q

    linear = np.flatnonzero(predictor.linear)
    r, g, q = model(theta)
    if len(linear):
        theta = _linear_first(theta, r, g, q, linear, lower, upper)
        r, g, q = model(theta)
    total = float((y * y).sum())
    mu = np.full(len(theta), 1e-2)
    done_theta: list[np.ndarray] = []
    done_q: list[float] = []

    def leave(rows: np.ndarray) -> None:
        for k in np.flatnonzero(rows):
            done_theta.append(theta[k])
            done_q.append(float(q[k]))

    gt = np.swapaxes(g, 1, 2)
    h = gt @ g
    grad = (gt @ r[:, :, None])[:, :, 0]
    still = np.zeros(len(theta), int)
    for _ in range(rounds):
        d2 = h[:, diag, diag]
        blocked = ((theta <= lower) & (grad <= 0)) | ((theta >= upper) & (grad >= 0)) | (d2 <= 0)
        step = _damped(h, grad, d2, mu, blocked, diag)
        trial = theta + step
        crossed = (trial < lower) | (trial > upper)
        if crossed.any():
            # put those that cross on their bound and solve the rest again, once
            fixed = np.where(crossed, np.clip(trial, lower, upper) - theta, 0.0)
            rhs = grad - (h @ fixed[:, :, None])[:, :, 0]
            again = _damped(h, rhs, d2, mu, blocked | crossed, diag)
            trial = np.clip(theta + np.where(crossed, fixed, again), lower, upper)
        r_t, g_t, q_t = model(trial)
        better = q_t < q
        gain = np.where(better, q - q_t, 0.0)
        small = gain <= 1e-4 * q
        mu = np.clip(np.where(better, mu * 0.2, mu * 5.0), 1e-12, 1e12)
        if better.any():
            up = better[:, None]
            theta = np.where(up, trial, theta)
            q = np.where(better, q_t, q)
            gt = np.swapaxes(g_t, 1, 2)
            h_t = gt @ g_t
            grad_t = (gt @ r_t[:, :, None])[:, :, 0]
            h = np.where(better[:, None, None], h_t, h)
            grad = np.where(up, grad_t, grad)
        still = np.where(small & better, still + 1, np.where(better, 0, still))
        finished = (still >= 2) | (mu >= 1e10) | (q <= 1e-24 * total) | ~np.isfinite(q)
        if finished.any():
            leave(finished)
            go = ~finished
            # one that follows another into the same basin has nothing more to tell
            theta, q, mu, still, h, grad = theta[go], q[go], mu[go], still[go], h[go], grad[go]
        if len(q) and done_q:
            best = min(done_q)
            near = np.abs(theta - np.array(done_theta)[int(np.argmin(done_q))])
            close = (near <= 0.05 * np.abs(theta) + 1e-12).all(axis=1) & (q <= 1.2 * best)
            if close.any():
                go = ~close
                theta, q, mu, still, h, grad = theta[go], q[go], mu[go], still[go], h[go], grad[go]
        if not len(q):
            break
    leave(np.ones(len(q), bool))
    order = np.argsort(done_q, kind="stable")
    kept: list[np.ndarray] = []
    kept_q: list[float] = []
    for k in order:
        t, qk = done_theta[k], done_q[k]
        if not np.isfinite(qk):
            continue
        new = all(
            abs(qk - q0) > 1e-3 * max(q0, 1e-12 * total)
            or not np.allclose(t, t0, rtol=0.05, atol=1e-300)
            for t0, q0 in zip(kept, kept_q, strict=True)
        )
        if new:
            kept.append(t)
            kept_q.append(qk)
        if len(kept) == keep:
            break
    if not kept:
        return starts[:keep]
    return np.array(kept)


def _damped(
    h: np.ndarray,
    grad: np.ndarray,
    d2: np.ndarray,
    mu: np.ndarray,
    blocked: np.ndarray,
    diag: np.ndarray,
) -> np.ndarray:
    """(H + mu diag H) step = grad over the free constants, scaled to unit diagonal."""
    s = np.where(blocked, 0.0, 1.0 / np.sqrt(np.where(d2 > 0, d2, 1.0)))
    a = h * s[:, :, None] * s[:, None, :]
    a[:, diag, diag] += np.where(blocked, 1.0, mu[:, None] + 1e-14)
    bad = ~np.isfinite(a).all(axis=(1, 2))
    if bad.any():
        a[bad] = np.eye(len(diag))
    z = np.linalg.solve(a, (grad * s)[:, :, None])[:, :, 0]
    out = z * s
    out[~np.isfinite(out)] = 0.0
    return np.where(blocked, 0.0, out)


def _linear_first(
    theta: np.ndarray,
    r: np.ndarray,
    g: np.ndarray,
    q: np.ndarray,
    linear: np.ndarray,
    lower: np.ndarray,
    upper: np.ndarray,
) -> np.ndarray:
    """Constants that enter linearly, from the linear solution at each start."""
    gl = g[:, :, linear]
    ok = np.isfinite(q) & np.isfinite(gl).all(axis=(1, 2))
    gl = np.where(ok[:, None, None], gl, 0.0)
    ht = np.swapaxes(gl, 1, 2)
    h = ht @ gl
    grad = (ht @ np.where(ok[:, None], r, 0.0)[:, :, None])[:, :, 0]
    diag = np.arange(len(linear))
    d2 = h[:, diag, diag]
    step = _damped(h, grad, d2, np.full(len(theta), 1e-10), d2 <= 0, diag)
    new = theta.copy()
    new[:, linear] = np.clip(theta[:, linear] + step, lower[linear], upper[linear])
    # all linear constants at a bound of zero says nothing: keep the start then
    dead = (new[:, linear] <= lower[linear]).all(axis=1)
    new[dead] = theta[dead]
    return np.where(ok[:, None], new, theta)
