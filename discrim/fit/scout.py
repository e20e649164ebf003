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


# a gain below this fraction of Q, twice running, ends a start
SMALL_GAIN = 1e-2
# longest step in a logarithm: a factor of about 50
LONGEST = 4.0
ROUNDS = 40
# before this many rounds hardly any start has ended: not worth looking
SETTLING = 4
KEEP = 4
# further, nearly undamped, steps of those that are kept
FINISH = 3
# two points whose predictions differ by less than this many standard errors are one and the same
SAME = 0.05


def scout(
    predictor: Predictor, data: Measurements, weight: np.ndarray, starts: np.ndarray
) -> np.ndarray:
    """The most promising distinct points reached from ``starts``, best first, shape (<= KEEP, p).

    ``weight`` shape (N,): one over the standard deviation of each observation. Constants that may
    be anything above zero move in their logarithm, in which the valleys of rate laws are straight;
    zero itself is reached by the iterations that follow.
    """
    lower, upper = predictor.lower, predictor.upper
    log = (lower == 0.0) & np.isinf(upper)
    n, p = data.n, starts.shape[1]
    plain = bool((weight == weight[0]).all())
    w = weight[0] if plain else weight
    y, c = data.y * (1.0 if plain else weight), data.conditions
    theta = np.clip(starts, lower, upper)
    theta = np.where(log & (theta <= 0), np.maximum(predictor.scale, 1e-300), theta)
    u = np.where(log, np.log(np.where(log, theta, 1.0)), theta)
    low = np.where(log, -600.0, lower)
    high = np.where(log, 600.0, upper)
    bounded = bool(np.isfinite(np.where(log, np.inf, lower)).any() or np.isfinite(upper).any())
    amplitude = _amplitude(predictor, theta, c)
    diag = np.arange(p)
    y_y = float(y @ y)
    every_log = bool(log.all())

    def model(
        u: np.ndarray,
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """u (with the amplitude at its best), predictions, Q, J'J and J'r by u.

        Only inner products are scaled, never the arrays over runs, which is most of the speed; the
        cancellation in Q does not matter here.
        """
        t = np.exp(u) if every_log else np.where(log, np.exp(np.where(log, u, 0.0)), u)
        pred = predictor.predict(t, c)
        f, g = pred.values, pred.by_constants
        assert g is not None
        if not plain:
            f = f * w
            g = g * weight[:, None]
        f_y = f @ y
        f_f = np.einsum("sn,sn->s", f, f)
        size = t if every_log else np.where(log, t, 1.0)
        gt = g.transpose(0, 2, 1)
        if amplitude >= 0:
            # the law is proportional to this constant: its best value is a quotient
            ratio = f_y / f_f
            if not ratio.min() > 0:
                ratio = np.where(ratio > 0, ratio, 1.0)
            u[:, amplitude] += np.log(ratio)
            f = f * ratio[:, None]
            f_y = f_y * ratio
            size = size * ratio[:, None]
            q = y_y - f_y
        else:
            q = y_y - 2.0 * f_y + f_f
        h = (gt @ g) * (size[:, :, None] * size[:, None, :])
        grad = (gt @ (y - f)[:, :, None])[:, :, 0] * size
        return u, f, q, h, grad

    with np.errstate(all="ignore"):
        u, f, q, h, grad = model(u)
        # where a law is not finite no comparison below holds, so such a start never moves or wins
        q[~np.isfinite(q)] = np.inf
        dead = np.isinf(q)
        mu = np.full(len(u), 1e-2)
        quiet = np.zeros(len(u), int)
        eye = np.eye(p)
        parked: list[tuple[np.ndarray, ...]] = []
        for k in range(ROUNDS):
            if bounded:
                blocked = ((u <= low) & (grad <= 0)) | ((u >= high) & (grad >= 0))
                step = _damped_blocked(h, grad, h[:, diag, diag], mu, blocked, diag)
            else:
                step = _solved(h * (1.0 + mu[:, None, None] * eye), grad)
            if every_log:
                step = np.minimum(np.maximum(step, -LONGEST), LONGEST)
            else:
                np.clip(step, -LONGEST, LONGEST, out=step, where=log)
            trial = np.clip(u + step, low, high) if bounded else u + step
            u_t, f_t, q_t, h_t, grad_t = model(trial)
            better = q_t < q
            small = better & (q - q_t <= SMALL_GAIN * q)
            quiet = np.where(small, quiet + 1, np.where(better, 0, quiet))
            mu = np.where(better, np.maximum(mu * 0.1, 1e-7), np.maximum(mu * 8.0, 1e-3))
            if better.all():
                u, f, q, h, grad = u_t, f_t, q_t, h_t, grad_t
            else:
                u[better], f[better], q[better] = u_t[better], f_t[better], q_t[better]
                h[better], grad[better] = h_t[better], grad_t[better]
            if k < SETTLING:
                continue
            ended = (quiet >= 2) | (mu > 1e9) | (q <= 1e-13 * y_y) | dead
            best = int(np.argmin(np.where(ended, q, np.inf)))
            if ended[best]:
                # what predicts the same as an ended and better one has nothing more to tell
                gap = f - f[best]
                near = np.einsum("sn,sn->s", gap, gap) <= q[best]
                ended |= near & (q <= 1.5 * q[best])
                if ended.all():
                    break
                if len(q) > 4 and 2 * int(ended.sum()) >= len(q):
                    # the rest goes on without those that have ended (the best stays to compare with)
                    go = ~ended
                    go[best] = True
                    parked.append((u[~go], f[~go], q[~go], h[~go], grad[~go]))
                    u, f, q, h, grad = u[go], f[go], q[go], h[go], grad[go]
                    mu, quiet, dead = mu[go], quiet[go], dead[go]
        if parked:
            u, f, q, h, grad = (
                np.concatenate(parts) for parts in zip((u, f, q, h, grad), *parked, strict=True)
            )
        theta = np.exp(u) if every_log else np.where(log, np.exp(np.where(log, u, 0.0)), u)
        kept = _distinct(theta, f, q, n)
        if not len(kept):
            return starts[:KEEP]
        u, q, h, grad = u[kept], q[kept], h[kept], grad[kept]
        for _ in range(FINISH):
            # nearly undamped steps: what is left for the QR iterations is to confirm
            if bounded:
                blocked = ((u <= low) & (grad <= 0)) | ((u >= high) & (grad >= 0))
                step = _damped_blocked(
                    h, grad, h[:, diag, diag], np.full(len(u), 1e-9), blocked, diag
                )
            else:
                step = _solved(h * (1.0 + 1e-9 * eye), grad)
            trial = np.clip(u + step, low, high) if bounded else u + step
            u_t, _, q_t, h_t, grad_t = model(trial)
            good = (q_t <= q * (1.0 + 1e-12)) & (np.abs(step) <= LONGEST).all(axis=1)
            if not good.any():
                break
            u, q = np.where(good[:, None], u_t, u), np.where(good, q_t, q)
            h, grad = (
                np.where(good[:, None, None], h_t, h),
                np.where(good[:, None], grad_t, grad),
            )
        theta = np.exp(u) if every_log else np.where(log, np.exp(np.where(log, u, 0.0)), u)
        return _once(theta)


def _distinct(theta: np.ndarray, f: np.ndarray, q: np.ndarray, n: int) -> list[int]:
    """Rows worth keeping, best first: of points with the same predictions the first, and none far
    above the best."""
    sd = np.sqrt(np.maximum(q, 0.0) / n)
    limit = 4.0 * max(float(q.min()), 0.0) + 1e-12
    left = (q <= limit) & np.isfinite(q)
    if not left.any() and np.isfinite(q.min()):
        left[int(np.argmin(q))] = True
    kept: list[int] = []
    while left.any() and len(kept) < KEEP:
        j = int(np.argmin(np.where(left, q, np.inf)))
        kept.append(j)
        gap = np.abs(f - f[j]).max(axis=1)
        alike = (np.abs(theta - theta[j]) <= 0.1 * np.abs(theta[j])).all(axis=1)
        left &= ~((gap <= SAME * sd) | (alike & (gap <= 10 * SAME * sd)))
        left[j] = False
    return kept


def _once(theta: np.ndarray) -> np.ndarray:
    """Rows that the last steps brought together, once."""
    kept = [0]
    for k in range(1, len(theta)):
        if not any((np.abs(theta[k] - theta[j]) <= 1e-3 * np.abs(theta[j])).all() for j in kept):
            kept.append(k)
    return theta[kept] if len(kept) < len(theta) else theta


def _amplitude(predictor: Predictor, theta: np.ndarray, c: np.ndarray) -> int:
    """A positive constant that the whole law is proportional to, or -1."""
    candidates = np.flatnonzero(
        predictor.linear & (predictor.lower == 0.0) & np.isinf(predictor.upper)
    )
    if len(candidates) != 1:
        return -1
    j = int(candidates[0])
    pred = predictor.predict(theta[:1], c)
    assert pred.by_constants is not None
    values = pred.values[0]
    off = np.abs(theta[0, j] * pred.by_constants[0, :, j] - values) > 1e-9 * np.abs(values)
    return -1 if off.any() or not values.any() else j


def _solved(a: np.ndarray, grad: np.ndarray) -> np.ndarray:
    """a^-1 grad, zero where a is not finite or singular."""
    try:
        out = np.linalg.solve(a, grad[:, :, None])[:, :, 0]
    except np.linalg.LinAlgError:
        p = a.shape[1]
        bad = ~np.isfinite(a).all(axis=(1, 2))
        safe = np.where(bad[:, None, None], np.eye(p), a)
        size = np.abs(safe[:, np.arange(p), np.arange(p)]).max(axis=1)
        safe = safe + (1e-12 * size + 1e-300)[:, None, None] * np.eye(p)
        try:
            out = np.linalg.solve(safe, grad[:, :, None])[:, :, 0]
        except np.linalg.LinAlgError:
            out = np.zeros_like(grad)
    if not np.isfinite(out.sum()):
        out[~np.isfinite(out)] = 0.0
    return out


def _damped_blocked(
    h: np.ndarray,
    grad: np.ndarray,
    d2: np.ndarray,
    mu: np.ndarray,
    blocked: np.ndarray,
    diag: np.ndarray,
) -> np.ndarray:
    """(H + mu diag H) step = grad over the constants that are not held on a bound."""
    free = ~blocked
    a = h * free[:, :, None] * free[:, None, :]
    a[:, diag, diag] += np.where(free, mu[:, None] * d2 + 1e-300, 1.0)
    return np.where(free, _solved(a, np.where(free, grad, 0.0)), 0.0)
