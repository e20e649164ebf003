"""Positive solutions of polynomial balances that have no closed form, for many points at once.

Each equation is sorted into what is added (made) and what is subtracted (consumed), both sums of
products of powers of the unknowns. At the solution they are equal, so log(made) = log(consumed).
In the logarithms of the unknowns each side is nearly a straight line wherever one of its terms
prevails, which makes Newton's method on this form get through many powers of ten where on the
balances themselves it would crawl.

The order of trials is fixed and no point depends on another: the same input gives the same bytes.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

_CLOSE = 1e-6  # difference of the two logarithms below which the last exact steps are left
_PLAIN = 1e-10  # balance, relative to the sum of its terms, that a solution must hold
_ROUNDS = 60  # of Newton's method from one start
_HALVINGS = 12  # of a step that does not lead closer
_FAR = 12.0  # longest step in a logarithm (five powers of ten)
_SHIFTS = (-14.0, 14.0, -35.0, 35.0)  # of later starts, in logarithms
_GRID = 600  # points at which a balance with several solutions is looked at


class Balances:
    """A system of n equations sum_t c_t prod_j z_j^e_tj = 0.

    Parameters
    ----------
    exponents : for each equation an array (terms, n), not negative; fractions are allowed

    ``solve`` takes the coefficients c of all terms of all equations, in that order.
    """

    def __init__(self, exponents: Sequence[np.ndarray]) -> None:
        self.n = len(exponents)
        ends = np.cumsum([len(e) for e in exponents])
        self.rows = [
            slice(int(end) - len(e), int(end)) for end, e in zip(ends, exponents, strict=True)
        ]
        self.exponents = np.concatenate(exponents).astype(float)
        self._whole = [
            [int(x) if float(x).is_integer() else float(x) for x in row] for row in self.exponents
        ]

    def solve(self, coefficients: np.ndarray) -> np.ndarray:
        """The positive solution at each point.

        ``coefficients`` shape (terms, P). Returns shape (n, P), NaN where none is found. Of
        several solutions for one unknown it is the smallest, which is the one reached when the
        amount builds up from nothing; for several unknowns the first that is found from fixed
        starts, low ones before high ones.
        """
        finite = np.isfinite(coefficients).all(axis=0)
        if not finite.all():
            out = np.full((self.n, coefficients.shape[1]), np.nan)
            if finite.any():
                out[:, finite] = self.solve(coefficients[:, finite])
            return out
        with np.errstate(all="ignore"):
            z = self._one(coefficients) if self.n == 1 else self._several(coefficients)
            z = self._polished(coefficients, z)
        return z

    # ---- one unknown ----------------------------------------------------------------------

    def _one(self, coefficients: np.ndarray) -> np.ndarray:
        order = np.argsort(self.exponents[:, 0], kind="stable")
        c, e = coefficients[order], self.exponents[order, 0]
        sign = np.sign(c)
        first = np.zeros(c.shape[1])
        last = np.zeros(c.shape[1])
        changes = np.zeros(c.shape[1], int)
        for s in sign:
            first = np.where(first == 0, s, first)
            changes += (s != 0) & (last != 0) & (s != last)
            last = np.where(s != 0, s, last)
        z = np.full((1, c.shape[1]), np.nan)
        single = changes == 1
        if single.all():
            z[0] = _unique(c * first, e)
        elif single.any():
            z[0, single] = _unique(c[:, single] * first[single], e)
        more = changes > 1
        if more.any():
            z[0, more] = _smallest(c[:, more] * first[more], e)
        return z

    # ---- several unknowns -----------------------------------------------------------------

    def _several(self, coefficients: np.ndarray) -> np.ndarray:
        size = np.log(np.abs(coefficients))
        made = coefficients > 0
        out = np.full((self.n, coefficients.shape[1]), np.nan)
        sides = np.array(
            [made[r].any(axis=0) & (coefficients[r] < 0).any(axis=0) for r in self.rows]
        )
        left = np.flatnonzero(sides.all(axis=0))
        start = self._level(size[:, left], made[:, left])
        for shift in (0.0, *_SHIFTS):
            if not len(left):
                break
            w, ok = self._newton(size[:, left], made[:, left], start + shift)
            out[:, left[ok]] = np.exp(w[:, ok])
            left, start = left[~ok], start[:, ~ok]
        return out

    def _level(self, size: np.ndarray, made: np.ndarray) -> np.ndarray:
        """Logarithms at which the two sides of each equation have terms of one size on average."""
        n, p = self.n, size.shape[1]
        a, b = np.empty((p, n, n)), np.empty((p, n))
        for k, r in enumerate(self.rows):
            there = np.isfinite(size[r])
            up, down = there & made[r], there & ~made[r]
            weight = up / up.sum(axis=0) - down / down.sum(axis=0)
            a[:, k] = weight.T @ self.exponents[r]
            b[:, k] = -(weight * np.where(there, size[r], 0.0)).sum(axis=0)
        # shortest correction of "all are of size one"; never singular
        at = a.transpose(0, 2, 1)
        w = np.linalg.solve(at @ a + 1e-3 * np.eye(n), at @ b[..., None])[..., 0]
        return np.clip(w, -600.0, 600.0).T

    def _newton(
        self, size: np.ndarray, made: np.ndarray, start: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """Damped Newton's method on log(made) - log(consumed); solutions and whether each is one."""
        w = np.array(start)
        total = w.shape[1]
        done = np.zeros(total, bool)
        go = np.arange(total)
        f, jac = self._logs(size, made, w)
        merit = np.abs(f).max(axis=0)
        for _ in range(_ROUNDS):
            close = merit < _CLOSE
            done[go[close]] = True
            keep = np.isfinite(merit) & ~close
            if not keep.any():
                break
            if not keep.all():
                go, f, jac, merit = go[keep], f[:, keep], jac[keep], merit[keep]
            step = -solved(jac, f.T[..., None])[..., 0].T
            step[:, ~np.isfinite(step).all(axis=0)] = 0.0
            longest = np.abs(step).max(axis=0)
            step *= np.minimum(1.0, _FAR / np.maximum(longest, 1e-300))
            here = w[:, go]
            f_new, jac_new = self._logs(size[:, go], made[:, go], here + step)
            merit_new = np.abs(f_new).max(axis=0)
            for _ in range(_HALVINGS):
                worse = ~(merit_new < merit)
                if not worse.any():
                    break
                step[:, worse] *= 0.5
                at = go[worse]
                f_try, jac_try = self._logs(
                    size[:, at], made[:, at], here[:, worse] + step[:, worse]
                )
                f_new[:, worse], jac_new[worse] = f_try, jac_try
                merit_new[worse] = np.abs(f_try).max(axis=0)
            w[:, go] = here + step
            stuck = ~(merit_new < merit)
            f, jac, merit = f_new, jac_new, np.where(stuck, np.inf, merit_new)
        return w, done

    def _logs(
        self, size: np.ndarray, made: np.ndarray, w: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """log(made) - log(consumed), shape (n, P), and its derivatives by w, shape (P, n, n)."""
        x = size + self.exponents @ w
        f, jac = np.empty(w.shape), np.empty((w.shape[1], self.n, self.n))
        for k, r in enumerate(self.rows):
            up = np.where(made[r], x[r], -np.inf)
            down = np.where(made[r], -np.inf, x[r])
            top, low = up.max(axis=0), down.max(axis=0)
            t = np.exp(x[r] - np.where(made[r], top, low))
            t_up = np.where(made[r], t, 0.0)
            t_down = t - t_up
            s_up, s_down = t_up.sum(axis=0), t_down.sum(axis=0)
            f[k] = (top - low) + np.log(s_up / s_down)
            jac[:, k] = (t_up / s_up - t_down / s_down).T @ self.exponents[r]
        return f, jac

    # ---- the last digits ------------------------------------------------------------------

    def _polished(self, c: np.ndarray, z: np.ndarray) -> np.ndarray:
        """Newton's method on the balances themselves, which loses nothing to logarithms; NaN where
        they do not hold in the end."""
        balance = np.full(z.shape[1], np.inf)
        for k in range(4):
            terms = self._terms(c, z)
            scale = np.array([np.abs(terms[r]).sum(axis=0) for r in self.rows])
            left = np.array([terms[r].sum(axis=0) for r in self.rows]) / scale
            if not np.isfinite(left).all():
                # too large or small for plain products: what the logarithms gave must do
                usable = np.isfinite(left).all(axis=0)
                left[:, ~usable] = 0.0
                terms[:, ~usable] = 0.0
            balance = np.abs(left).max(axis=0)
            if k == 3:
                break
            if self.n == 1:
                slope = (self.exponents.T @ terms)[0] / scale[0]
                step = -left[0:1] / slope
            else:
                jac = np.stack(
                    [
                        (terms[r] / s).T @ self.exponents[r]
                        for r, s in zip(self.rows, scale, strict=True)
                    ],
                    axis=1,
                )
                step = -solved(jac, left.T[..., None])[..., 0].T
            good = np.isfinite(step).all(axis=0) & (np.abs(step).max(axis=0) < 0.1)
            z = np.where(good, z * (1.0 + step), z)
        return np.where(balance < _PLAIN, z, np.nan)

    def _terms(self, c: np.ndarray, z: np.ndarray) -> np.ndarray:
        out = np.array(c)
        for t, powers in enumerate(self._whole):
            for j, e in enumerate(powers):
                if isinstance(e, int) and e <= 4:
                    for _ in range(e):
                        out[t] *= z[j]
                else:
                    out[t] *= z[j] ** e
        return out


def solved(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """a^-1 b for shapes (P, n, n) and (P, n, k); not finite where a is singular."""
    n = a.shape[-1]
    with np.errstate(all="ignore"):
        if n == 1:
            return np.asarray(b / a)
        if n == 2:
            # rows of one size first, and the larger pivot: as exact as elimination is
            size = np.abs(a).max(axis=-1, keepdims=True)
            a, b = a / size, b / size
            swap = np.abs(a[:, 1, 0]) > np.abs(a[:, 0, 0])
            if swap.any():
                a = np.where(swap[:, None, None], a[:, ::-1], a)
                b = np.where(swap[:, None, None], b[:, ::-1], b)
            m = a[:, 1, 0] / a[:, 0, 0]
            pivot = a[:, 1, 1] - m * a[:, 0, 1]
            y = (b[:, 1] - m[:, None] * b[:, 0]) / pivot[:, None]
            x = (b[:, 0] - a[:, 0, 1, None] * y) / a[:, 0, 0, None]
            return np.stack([x, y], axis=1)
        size = np.abs(a).max(axis=-1, keepdims=True)
        a, b = a / size, b / size
        bad = ~np.isfinite(a).all(axis=(1, 2))
        if not bad.any():
            try:
                return np.asarray(np.linalg.solve(a, b))
            except np.linalg.LinAlgError:
                pass
        bad |= ~(np.abs(np.linalg.det(np.where(bad[:, None, None], np.eye(n), a))) > 0)
        x = np.linalg.solve(np.where(bad[:, None, None], np.eye(n), a), b)
        return np.where(bad[:, None, None], np.nan, x)


def _unique(c: np.ndarray, e: np.ndarray) -> np.ndarray:
    """The root of sum_t c_t z^e_t with coefficients first >= 0, then <= 0: one sign change.

    ``c`` shape (T, P), ``e`` rising. Let z* be where the largest terms of both signs are equal;
    the root is within a factor (number of terms)^(1/least gap of exponents) of it.
    """
    size = np.log(np.abs(c))
    up = c > 0
    w = np.full(c.shape[1], np.inf)
    for j in range(1, len(e)):
        reach = np.full(c.shape[1], -np.inf)
        for i in range(j):
            if e[j] > e[i]:
                crossing = (size[i] - size[j]) / (e[j] - e[i])
                reach = np.maximum(reach, np.where(up[i], crossing, -np.inf))
        w = np.minimum(w, np.where(c[j] < 0, reach, np.inf))
    # terms over the largest one there; u = z/z*
    x = size + e[:, None] * w
    d = np.exp(x - x.max(axis=0))
    positive = np.where(up, d, 0.0)
    negative = d - positive
    width = np.log(len(e)) / max(float(np.diff(np.unique(e)).min()), 1e-3) + 1e-9
    low, high = np.full(len(w), -width), np.full(len(w), width)
    v = np.zeros(len(w))
    going = np.ones(len(w), bool)
    for _ in range(_ROUNDS):
        powers = np.exp(e[:, None] * v)
        p, q = positive * powers, negative * powers
        p_sum, q_sum = p.sum(axis=0), q.sum(axis=0)
        f = np.log(q_sum / p_sum)  # rises with v
        slope = (e @ q) / q_sum - (e @ p) / p_sum
        high = np.where(f >= 0, v, high)
        low = np.where(f <= 0, v, low)
        new = v - f / slope
        outside = ~((new >= low) & (new <= high))
        if outside.any():
            new = np.where(outside, 0.5 * (low + high), new)
        moving = ~(np.abs(new - v) <= _CLOSE) & going
        v = np.where(going, new, v)
        going = moving
        if not going.any():
            break
    return np.asarray(np.exp(w + v))


def _smallest(c: np.ndarray, e: np.ndarray) -> np.ndarray:
    """The smallest positive root where signs change more than once; NaN where there is none.

    ``c`` shape (T, P), its first coefficients that are not zero positive. The balance is looked at
    on a grid between bounds of all roots, and at its lowest places between grid points.
    """
    size = np.log(np.abs(c))
    sign = np.sign(c)
    p = c.shape[1]
    low, high = np.full(p, np.inf), np.full(p, -np.inf)
    spare = np.log(2.0 * len(e))
    for i in range(len(e)):
        for j in range(i + 1, len(e)):
            if e[j] > e[i]:
                apart = e[j] - e[i]
                against = (sign[i] * sign[j]) < 0
                crossing = np.where(against, (size[i] - size[j]) / apart, np.nan)
                low = np.fmin(low, crossing - spare / apart)
                high = np.fmax(high, crossing + spare / apart)

    def balance(w: np.ndarray) -> np.ndarray:
        x = size + e[:, None] * w
        return np.asarray((sign * np.exp(x - x.max(axis=0))).sum(axis=0))

    at = np.linspace(0.0, 1.0, _GRID)[:, None]
    w = low + at * (high - low)
    s = np.array([balance(x) for x in w])
    root = np.full(p, np.nan)
    for k in range(p):
        crossed = np.flatnonzero(s[:, k] < 0)
        end = int(crossed[0]) if len(crossed) else _GRID - 1
        inside = s[1 : max(end, 1), k]
        dips = 1 + np.flatnonzero(
            (inside <= s[: len(inside), k]) & (inside <= s[2 : 2 + len(inside), k])
        )
        bracket = (w[end - 1, k], w[end, k]) if len(crossed) and end else None
        one = (size[:, k : k + 1], sign[:, k : k + 1])
        for dip in dips[:3]:
            lowest = _lowest(one, e, w[dip - 1, k], w[dip + 1, k])
            if lowest is not None:
                bracket = (w[dip - 1, k], lowest)
                break
        if bracket is None:
            continue
        a, b = bracket
        for _ in range(80):
            middle = 0.5 * (a + b)
            if _relative(one, e, middle) > 0:
                a = middle
            else:
                b = middle
        root[k] = 0.5 * (a + b)
    return np.asarray(np.exp(root))


def _relative(one: tuple[np.ndarray, np.ndarray], e: np.ndarray, w: float) -> float:
    x = one[0][:, 0] + e * w
    return float((one[1][:, 0] * np.exp(x - x.max())).sum())


def _lowest(one: tuple[np.ndarray, np.ndarray], e: np.ndarray, a: float, b: float) -> float | None:
    """Where the balance is lowest between a and b, if it is not above zero there."""
    golden = 0.5 * (5**0.5 - 1.0)
    for _ in range(60):
        x, y = b - golden * (b - a), a + golden * (b - a)
        if _relative(one, e, x) <= 0:
            return x
        if _relative(one, e, x) < _relative(one, e, y):
            b = y
        else:
            a = x
    return None
