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

from discrim.ratelaw.one_unknown import smallest_root

_CLOSE = 1e-6  # difference of the two logarithms below which the last exact steps are left
_PLAIN = 1e-10  # balance, relative to the sum of its terms, that a solution must hold
_ROUNDS = 14  # of Newton's method from one start
_FAR = 12.0  # longest step in a logarithm (five powers of ten)
_SHIFT = 14.0  # of later starts, in logarithms
_GRIDS = (np.arange(-100.0, 101.0, 5.0), np.arange(-140.0, 141.0, 1.0))  # see _nested; logarithms
_HALVED = 10  # times that a step of this grid is halved before Newton's method goes on


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
        self._smaller: dict[bytes, tuple[Balances, list[int], list[int], list[int]] | None] = {}
        self._free = ~self.exponents.any(axis=1)  # terms without an unknown
        # one unknown: terms of one power together, lowest first
        self._powers, term = np.unique(self.exponents[:, 0], return_inverse=True)
        self._of_power = [np.flatnonzero(term == k) for k in range(len(self._powers))]

    def delicate(self, coefficients: np.ndarray) -> np.ndarray:
        """Points, shape (P,), at which a coefficient of zero may let an unknown vanish or escape.

        Elsewhere a term that is zero leaves a solution that the others fix.
        """
        zero = coefficients == 0.0
        if not zero.any():
            return np.zeros(coefficients.shape[1], bool)
        if self.n == 1:
            return np.asarray(zero[self._of_power[0]].all(axis=0))
        lost = [
            ~((coefficients[r] > 0).any(axis=0) & (coefficients[r] < 0).any(axis=0))
            for r in self.rows
        ]
        return np.asarray((np.any(lost, axis=0) & zero.any(axis=0)) | zero[self._free].any(axis=0))

    def without(self, coefficients: np.ndarray) -> np.ndarray:
        """The solution where unknowns must be zero, shape (n, P); NaN where none must be.

        A balance of terms of one sign holds only where each term is zero, and so the unknowns that
        stand alone in one. The others follow from what is left.
        """
        sign = np.sign(coefficients).astype(np.int8)
        out = np.full((self.n, coefficients.shape[1]), np.nan)
        alike: dict[bytes, list[int]] = {}
        for k in range(sign.shape[1]):
            alike.setdefault(sign[:, k].tobytes(), []).append(k)
        for key, points in alike.items():
            if key not in self._smaller:
                self._smaller[key] = self._reduced(sign[:, points[0]])
            found = self._smaller[key]
            if found is not None:
                smaller, terms, gone, left = found
                out[np.ix_(gone, points)] = 0.0
                if left:
                    out[np.ix_(left, points)] = smaller.solve(coefficients[np.ix_(terms, points)])
        return out

    def _reduced(self, sign: np.ndarray) -> tuple[Balances, list[int], list[int], list[int]] | None:
        """The balances that are left for coefficients of these signs, the places of their terms,
        the unknowns that are zero and the others."""
        there = sign != 0
        gone: set[int] = set()
        while True:
            alone: set[int] = set()
            for r in self.rows:
                here = [t for t in range(r.start, r.stop) if there[t]]
                if len({int(sign[t]) for t in here}) == 1:
                    held = [np.flatnonzero(self.exponents[t]) for t in here]
                    alone |= {int(h[0]) for h in held if len(h) == 1}
            if not alone - gone:
                break
            gone |= alone
            there &= ~self.exponents[:, sorted(gone)].any(axis=1)
        left = [j for j in range(self.n) if j not in gone]
        rows = [[t for t in range(r.start, r.stop) if there[t]] for r in self.rows]
        rows = [r for r in rows if r]
        if not gone or len(rows) != len(left):
            return None
        terms = [t for r in rows for t in r]
        smaller = Balances([self.exponents[np.ix_(r, left)] for r in rows]) if left else self
        return smaller, terms, sorted(gone), left

    def solve(self, coefficients: np.ndarray, *, thorough: bool = True) -> np.ndarray:
        """The positive solution at each point.

        ``coefficients`` shape (terms, P). Returns shape (n, P), NaN where none is found. Of
        several solutions for one unknown it is the smallest (which need not be the one that a
        surface or a chain reaches in time, where several unknowns were eliminated to leave it); for
        several unknowns the first that is found from fixed starts and, if ``thorough``, by trying
        one unknown after the other on a grid.
        """
        finite = np.isfinite(coefficients).all(axis=0)
        if not finite.all():
            out = np.full((self.n, coefficients.shape[1]), np.nan)
            if finite.any():
                out[:, finite] = self.solve(coefficients[:, finite], thorough=thorough)
            return out
        with np.errstate(all="ignore"):
            if self.n == 1:
                return self._single(coefficients)
            return self._polished(coefficients, self._several(coefficients, thorough))

    # ---- one unknown ----------------------------------------------------------------------

    def _single(self, coefficients: np.ndarray) -> np.ndarray:
        e, c = self._powers, coefficients
        if len(e) < len(c):
            c = np.array([c[k].sum(axis=0) for k in self._of_power])
        elif not (np.diff(self.exponents[:, 0]) > 0).all():
            c = c[np.concatenate(self._of_power)]
        return smallest_root(c, e)[None]

    # ---- several unknowns -----------------------------------------------------------------

    def _several(self, coefficients: np.ndarray, thorough: bool) -> np.ndarray:
        size = np.log(np.abs(coefficients))
        made = coefficients > 0
        out = np.full((self.n, coefficients.shape[1]), np.nan)
        sides = np.array(
            [made[r].any(axis=0) & (coefficients[r] < 0).any(axis=0) for r in self.rows]
        )
        left = np.flatnonzero(sides.all(axis=0))
        start = self._level(size[:, left], made[:, left])
        everywhere = np.full((self.n, 1), _SHIFT)
        apart = [-_SHIFT * np.eye(self.n)[:, j : j + 1] for j in range(self.n)]
        for shift in (0.0 * everywhere, -everywhere, *apart, everywhere):
            if not len(left):
                break
            w, ok = self._newton(size[:, left], made[:, left], start + shift)
            out[:, left[ok]] = np.exp(w[:, ok])
            left, start = left[~ok], start[:, ~ok]
        pairs = [(i, k) for i in range(self.n) for k in range(self.n)] if thorough else []
        for grid in _GRIDS:
            for outer, equation in pairs:
                if len(left):
                    z = self._nested(coefficients[:, left], outer, equation, grid)
                    ok = np.isfinite(z).all(axis=0)
                    out[:, left[ok]] = z[:, ok]
                    left = left[~ok]
        return out

    def _nested(self, c: np.ndarray, outer: int, equation: int, grid: np.ndarray) -> np.ndarray:
        """One unknown on a grid and the others from all equations but one, which must then change
        its sign between two places of the grid. Slow and sure; for the few points that need it.
        """
        others = [j for j in range(self.n) if j != outer]
        rows = [r for k, r in enumerate(self.rows) if k != equation]
        inner = Balances([self.exponents[r][:, others] for r in rows])
        power = self.exponents[:, outer, None]

        def at(w: np.ndarray, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
            scaled = c[:, points] * np.exp(power * w)
            z = np.empty((self.n, len(w)))
            z[outer] = np.exp(w)
            z[others] = inner.solve(np.concatenate([scaled[r] for r in rows]), thorough=False)
            terms = self._terms(c[:, points], z)[self.rows[equation]]
            return z, terms.sum(axis=0) / np.abs(terms).sum(axis=0)

        count = c.shape[1]
        points = np.repeat(np.arange(count), len(grid))
        sign = np.sign(at(np.tile(grid, count), points)[1]).reshape(count, -1)
        crossed = sign[:, :-1] * sign[:, 1:] < 0
        found = np.flatnonzero(crossed.any(axis=1))
        z = np.full((self.n, count), np.nan)
        if not len(found):
            return z
        first = crossed[found].argmax(axis=1)
        low, high, below = grid[first], grid[first + 1], sign[found, first]
        for _ in range(_HALVED):
            middle = 0.5 * (low + high)
            same = np.sign(at(middle, found)[1]) == below
            low, high = np.where(same, middle, low), np.where(same, high, middle)
        near = np.log(at(0.5 * (low + high), found)[0])
        w, ok = self._newton(np.log(np.abs(c[:, found])), c[:, found] > 0, near)
        ok &= np.abs(w - near).max(axis=0) < 1.0  # else it has gone to another
        z[:, found[ok]] = self._polished(c[:, found[ok]], np.exp(w[:, ok]))
        return z

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
        """Newton's method on log(made) - log(consumed): logarithms, and whether they solve it.

        Steps are shortened but never searched along: the two sides bend where another term takes
        over, so the way to the solution often leads through larger differences.
        """
        w = np.array(start)
        done = np.zeros(w.shape[1], bool)
        go = np.arange(w.shape[1])
        for _ in range(_ROUNDS):
            f, jac = self._logs(size[:, go], made[:, go], w[:, go])
            close = np.abs(f).max(axis=0) < _CLOSE
            done[go[close]] = True
            step = -solved(jac, f.T[..., None])[..., 0].T
            longest = np.abs(step).max(axis=0)
            keep = ~close & np.isfinite(longest)
            if not keep.any():
                break
            go, step = go[keep], step[:, keep] * np.minimum(1.0, _FAR / longest[keep])
            w[:, go] += step
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
