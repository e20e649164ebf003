"""Which constants make the terms of one law those of another: linear algebra on exponents.

A law in lowest terms is a tuple of polynomials in the amounts up to one common factor: (numerator,
denominator), or the coefficients of the equation of second degree that a root obeys. The smaller
law is the larger one, or a limit of it, if and only if suitably scaled coefficients of the larger
law go to g times the smaller tuple, with one polynomial g in the amounts. Where each coefficient
of the larger law is a product of powers of its constants, that is linear in their logarithms:

* for a term with a partner, E·x - s = log c (x: logs of the constants, s: log of the scale);
* for a term without one, a direction w with E·w less than the scale's: x + t*w, t -> infinity.

Both are decided exactly (`loglinear`), so "no" is a proof as well, as long as every g that could
fit has been tried. Coefficients that are sums are shared out among their terms; then "no" is
claimed only if leaving them out altogether already contradicts.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from itertools import permutations, product
from typing import Any

from discrim.ratelaw.loglinear import Echelon, Log, Row, direction, plus, restricted, simplest
from discrim.ratelaw.polynomials import coprime
from discrim.ratelaw.shifts import Amounts, factors_that_fit, moved
from discrim.ratelaw.terms import (
    Coefficient,
    Larger,
    Layout,
    NotMonomial,
    Smaller,
    Term,
    coefficients_of,
    log_of_number,
    terms_of,
)

_MOST_NODES = 4000  # ways of sharing coefficients out that are followed
_MOST_COMBINATIONS = 300  # of common factors g of several expressions
_ENOUGH = 8  # solutions among which the best is chosen


@dataclass(frozen=True, slots=True)
class Solution:
    """Logs of the unknowns as x + t*along, t -> infinity (or t = 0 where ``along`` is empty).

    Attributes
    ----------
    logs : of each unknown at t = 0
    along : direction, in whole numbers
    vanish : unknowns without effect in the limit
    redundant : unknowns that the smaller law leaves open together with others
    combinations : products of powers of unknowns that go to zero or infinity, with the
        logarithm of the value that they keep
    """

    logs: Mapping[int, Log]
    along: Mapping[int, int]
    vanish: tuple[int, ...]
    redundant: tuple[int, ...]
    combinations: tuple[tuple[Row, Log], ...]


@dataclass(slots=True)
class Outcome:
    """Solutions found; if none, whether that is a proof, and what stands against it."""

    solutions: list[Solution] = field(default_factory=list)
    complete: bool = True
    reason: str = ""


def match(
    larger: Sequence[Sequence[Any]], smaller: Sequence[Sequence[Any]], layout: Layout
) -> Outcome:
    """Every way that is found to make the larger tuples of polynomials the smaller ones.

    Parameters
    ----------
    larger, smaller : for each observed expression a tuple of polynomials of one ring; the smaller
        ones without unknowns, and free of common factors as far as could be proven
    """
    out = Outcome()
    try:
        big = [tuple(terms_of(p, layout) for p in polys) for polys in larger]
        small = [tuple(coefficients_of(p, layout) for p in polys) for polys in smaller]
    except NotMonomial as reason:
        return Outcome(complete=False, reason=str(reason))
    amounts = range(layout.n_constant, layout.n)
    in_lowest_terms = all(coprime(polys, amounts) for polys in smaller)
    out.complete = in_lowest_terms and all(
        c.generic for polys in small for d in polys for c in d.values()
    )
    options = []
    for ours, theirs in zip(big, small, strict=True):
        shifts, complete, missing = factors_that_fit(
            [set(d) for d in ours], [set(d) for d in theirs]
        )
        if not shifts:
            return Outcome(complete=in_lowest_terms and complete, reason=missing)
        if len(ours) == 1:  # a balance: a sum as common factor could bring roots of its own
            shifts = [s for s in shifts if len(s) == 1]
        out.complete = out.complete and complete
        options.append(shifts)
    out.reason = "no constants of the other one, zero and infinity included, give its coefficients"
    budget = [_MOST_NODES]
    for k, factors in enumerate(product(*options)):
        if k >= _MOST_COMBINATIONS or budget[0] <= 0:
            out.complete = False
            break
        task = _Task(big, small, factors, layout)
        if not task.possible:
            continue
        found = list(task.solve(budget))
        out.solutions += found
        if any(not s.along and not s.vanish for s in found) or len(out.solutions) >= _ENOUGH:
            break
        if not found and out.complete and not out.solutions and not task.refuted(budget):
            out.complete = False
    return out


@dataclass(frozen=True, slots=True)
class _Group:
    """Terms of the larger law that meet one coefficient of the smaller one."""

    scale: int  # column of the log of the scale of the expression
    more: int | None  # column of the log of this part of g, beside the scale
    terms: tuple[Term, ...]
    target: Coefficient
    sign: int

    def row(self, term: Term, log: Log | None = None) -> tuple[Row, Log]:
        """The equation that says that the term goes to the coefficient, or to what is given."""
        log = self.target.log if log is None else log
        assert log is not None
        row = dict(term.exponents)
        row[self.scale] = -1
        if self.more is not None:
            row[self.more] = -1
        return row, plus(log, term.log, Fraction(-1))


@dataclass(frozen=True, slots=True)
class _State:
    """Equations taken in so far.

    ``rows`` all of them; ``tangent`` the same with those of a coefficient that is shared out
    replaced by their mean; ``gone`` terms that must go to zero, with their scale.
    """

    known: Echelon
    rows: tuple[tuple[Row, Log], ...] = ()
    tangent: tuple[Row, ...] = ()
    gone: tuple[Row, ...] = ()


class _Task:
    """One choice of the monomials of g for each expression."""

    def __init__(
        self,
        larger: Sequence[Larger],
        smaller: Sequence[Smaller],
        factors: Sequence[tuple[Amounts, ...]],
        layout: Layout,
    ) -> None:
        self.n = layout.n_unknown
        self.scales = [self.n + i for i in range(len(larger))]
        self.more: list[int] = []  # columns of the logs of the parts of g, beside the first
        self.fixed: list[_Group] = []  # one term of the larger law for one coefficient
        self.shared: list[_Group] = []  # several terms for one coefficient
        self.gone: list[Row] = []  # terms without a partner
        self.loose = False  # parts of g add up somewhere
        # what is sure of terms that go to zero, and of those that stay finite: of terms of opposite
        # sign in one coefficient nothing is, they may cancel
        self.sure_gone: list[Row] = []
        self.sure_finite: list[Row] = []
        self.possible = True
        for scale, ours, theirs, shifts in zip(self.scales, larger, smaller, factors, strict=True):
            parts: list[int | None] = [None]
            for _ in shifts[1:]:
                parts.append(self.n + len(larger) + len(self.more))
                self.more.append(self.n + len(larger) + len(self.more))
            turned: dict[int, int] = {}  # the sign of each part of g
            groups: list[tuple[int, list[Term], Coefficient]] = []
            for terms, targets in zip(ours, theirs, strict=True):
                groups += self._take(terms, targets, shifts, scale, turned)
            for k, met, target in groups:
                group = _Group(scale, parts[k], tuple(met), target, turned.get(k, 1))
                alone = len(met) == 1 and target.log is not None
                (self.fixed if alone else self.shared).append(group)

    def _take(
        self,
        larger: dict[Amounts, list[Term]],
        smaller: dict[Amounts, Coefficient],
        shifts: tuple[Amounts, ...],
        scale: int,
        turned: dict[int, int],
    ) -> list[tuple[int, list[Term], Coefficient]]:
        """The terms of one polynomial, sorted by what they meet: (part of g, terms, coefficient)."""
        groups: list[tuple[int, list[Term], Coefficient]] = []
        met: dict[Amounts, list[tuple[int, Coefficient]]] = {}
        for amounts, target in smaller.items():
            for k, shift in enumerate(shifts):
                met.setdefault(moved(amounts, shift), []).append((k, target))
        for amounts, terms in larger.items():
            lines = [self._less(t, scale) for t in terms]
            one_sign = len({t.sign for t in terms}) == 1
            here = met.pop(amounts, [])
            if not here:
                self.gone += lines
                self.sure_gone += lines if one_sign else []
            elif len(here) > 1:
                self.loose = True
                self.sure_finite += lines if one_sign else []
            else:
                ((k, target),) = here
                if one_sign and target.sign:
                    sign = terms[0].sign * target.sign
                    self.possible = self.possible and turned.setdefault(k, sign) == sign
                groups.append((k, terms, target))
        if any(len(here) == 1 for here in met.values()):
            self.possible = False  # a term that the larger law does not have
        return groups

    @staticmethod
    def _less(term: Term, scale: int) -> Row:
        return {**term.exponents, scale: -1}

    def _begin(self) -> _State | None:
        # scales and parts of g first: they are eliminated from the rest
        order = [*self.scales, *self.more, *range(self.n)]
        state = _State(Echelon(order), gone=tuple(self.gone))
        for group in self.fixed:
            new = self._with(state, [group.row(group.terms[0])])
            if new is None:
                return None
            state = new
        return state

    @staticmethod
    def _with(
        state: _State, rows: Sequence[tuple[Row, Log]], gone: Sequence[Row] = (),
        weights: Sequence[int] = (),
    ) -> _State | None:  # fmt: skip
        known = state.known.copy()
        for row, log in rows:
            if not known.add(row, log):
                return None
        tangent = [row for row, _ in rows]
        if weights:
            total: Row = {}
            for row, weight in zip(tangent, weights, strict=True):
                for c, e in row.items():
                    total[c] = total.get(c, 0) + weight * e
            tangent = [{c: e for c, e in total.items() if e}]
        return _State(known, (*state.rows, *rows), (*state.tangent, *tangent), (*state.gone, *gone))

    def solve(self, budget: list[int]) -> Iterator[Solution]:
        """Solutions, those that leave most terms in place first."""
        state = None if self.loose else self._begin()
        if state is None:
            return
        found = 0
        for leaf in self._shared_out(state, 0, budget):
            solution = self._solution(leaf)
            if solution is not None:
                yield solution
                found += 1
                if found >= _ENOUGH or not (solution.along or solution.vanish):
                    return

    def _shared_out(self, state: _State, k: int, budget: list[int]) -> Iterator[_State]:
        budget[0] -= 1
        if budget[0] <= 0:
            return
        if k == len(self.shared):
            yield state
            return
        group = self.shared[k]
        for rows, gone, weights in self._ways(group):
            new = self._with(state, rows, gone, weights)
            if new is not None:
                yield from self._shared_out(new, k + 1, budget)

    def _ways(self, group: _Group) -> Iterator[tuple[list[tuple[Row, Log]], list[Row], list[int]]]:
        """Ways for the terms of a group to add up to its coefficient: equations, terms that go to
        zero, and the weights with which the terms count (in any proportion, term by term)."""
        terms, target = group.terms, group.target
        m, r = len(terms), len(target.terms)
        if 1 < r <= m <= 4:  # term by term
            for chosen in permutations(range(m), r):
                pairs = [(terms[i], *target.terms[j]) for j, i in enumerate(chosen)]
                if all(t.sign == sign * group.sign for t, sign, _ in pairs):
                    yield (
                        [group.row(t, log) for t, _, log in pairs],
                        [self._less(terms[i], group.scale) for i in range(m) if i not in chosen],
                        [j * j + 1 for j in range(r)],
                    )
        if target.log is None:
            return
        fitting = [t for t in terms if t.sign == target.sign * group.sign]
        if len(fitting) == m:  # in equal parts
            share = log_of_number(m)
            rows = [group.row(t, plus(target.log, share, Fraction(-1))) for t in terms]
            yield rows, [], [1] * m
        for t in fitting:  # one alone
            rest = [self._less(u, group.scale) for u in terms if u is not t]
            yield [group.row(t)], rest, []

    def refuted(self, budget: list[int]) -> bool:
        """Whether it is proven that this choice of g leads to no solution."""
        state = self._begin()
        if state is None:
            return True
        finite, shared = list(self.sure_finite), []
        for group in self.shared:
            if len({t.sign for t in group.terms}) == 1:
                if group.target.log is None:
                    finite += [self._less(t, group.scale) for t in group.terms]
                else:
                    shared.append(group)
        sure = replace(state, gone=tuple(self.sure_gone))
        return self._none_left(sure, shared, finite, budget)

    def _none_left(
        self, state: _State, shared: Sequence[_Group], weak: list[Row], budget: list[int]
    ) -> bool:
        """No values for the groups that are left; several terms of one may add up in any way."""
        budget[0] -= 1
        if budget[0] <= 0:
            return False
        if not shared:
            return direction(self._moves(state.known), state.gone, weak) is None
        group, rest = shared[0], shared[1:]
        lines = [self._less(t, group.scale) for t in group.terms]
        if not self._none_left(state, rest, weak + lines, budget):
            return False
        for i, t in enumerate(group.terms):
            new = self._with(state, [group.row(t)], lines[:i] + lines[i + 1 :])
            if new is not None and not self._none_left(new, rest, weak, budget):
                return False
        return True

    def _moves(self, known: Echelon) -> list[dict[int, Fraction]]:
        """Directions that change no term with a partner; the parts of g keep their proportions."""
        return restricted(known.kernel(), self.more)

    def _solution(self, state: _State) -> Solution | None:
        moves = self._moves(state.known)
        along = simplest(moves, state.gone, self.scales, self.n)
        if along is None:
            return None
        moving = [i for i in range(self.n) if along.get(i)]
        still = [i for i in range(self.n) if not along.get(i)]
        order = [*self.scales, *self.more, *moving, *still]
        values, tangent = Echelon(order), Echelon(order)
        for row, log in state.rows:
            values.add(row, log)
        for row in state.tangent:
            tangent.add(row, {})
        solved, open_ = values.solved(), tangent.solved()
        held = {c for pivot, (row, _) in open_.items() if pivot < self.n for c in row}
        logs: dict[int, Log] = {i: {} for i in range(self.n)}
        combined = []
        for pivot, (row, log) in solved.items():
            if pivot >= self.n:
                continue
            logs[pivot] = {a: e / row[pivot] for a, e in log.items()}
            if along.get(pivot):
                size = 1 if row[pivot] > 0 else -1
                combined.append(
                    ({c: size * e for c, e in row.items()}, {a: size * e for a, e in log.items()})
                )
        vanish = tuple(i for i in still if i not in held)
        redundant = tuple(i for i in still if i in held and i not in open_)
        return Solution(
            {i: log for i, log in logs.items() if i not in vanish},
            {i: e for i, e in along.items() if i < self.n},
            vanish,
            redundant,
            tuple(combined),
        )
