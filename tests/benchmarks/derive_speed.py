"""Speed of derivation beside the plain route: the same equations given to ``sympy.solve``.

The plain route is what a chemist who knows sympy would write: the balances of the forms and the
equilibria as equations in the shares, already solved for a share where an adsorption step gives
it, ``sympy.solve`` for all shares, the rate of the product with these put in and simplified: by
``sympy.simplify``, or by ``sympy.cancel`` (one fraction in lowest terms) if the user knows that it
is quicker. Neither lumps constants, which the derived law does. Setting the equations up is not
timed, and every plain run has a process of its own, which is stopped at a limit. Times are of the
processor. Both routes' laws are compared at random values.
"""

from __future__ import annotations

import multiprocessing
import resource
import time
import tracemalloc
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import sympy

from discrim.mechanism.check import net
from discrim.mechanism.library import load, names
from discrim.mechanism.model import Mechanism, Species
from discrim.mechanism.parse import parse_mechanism
from discrim.ratelaw.derive import derive
from discrim.ratelaw.derive_network import Network, classify
from discrim.ratelaw.implicit import ImplicitValue
from discrim.ratelaw.model import RateLaw, amount, constant_symbol
from tests.benchmarks.networks import NETWORKS, network
from tests.ratelaw_derive.drawn_surfaces import adsorbed_then_reaction

SEED = 11
LIMIT = 60.0  # seconds for a plain run
QUICK = 2.0  # seconds of plain runs that are repeated
DIFFERENT = 1000  # mechanisms derived one after the other
AGREE = 1e-9


@dataclass(frozen=True, slots=True)
class Plain:
    """Equations in ``unknowns``; ``rate`` is the production of ``species``, or the limiting step."""

    equations: list[Any]
    unknowns: list[Any]
    rate: Any
    species: str


def plain_problem(
    mechanism: Mechanism, measured: frozenset[str] | None = None, *, as_written: bool = False
) -> Plain | None:
    """The equations as a chemist would write them down; None if the rate is not one of slow steps.

    ``as_written``: K [A][*] = [A*] stays an equation between products, as the law of mass action
    has it; else it is solved for the share of A* beforehand.

    Nothing of how :func:`derive` solves is used, only which species are intermediates.
    """
    parts = classify(mechanism, measured)
    share = {s: sympy.Symbol(f"x{i}", positive=True) for i, s in enumerate(parts.intermediates)}

    def side(constant: Any, pairs: Any) -> Any:
        return sympy.Mul(constant, *((share.get(s) or amount(s.name)) ** n for s, n in pairs))

    rates = {}
    for step in parts.kinetic:
        rates[step.name] = side(constant_symbol(f"k_{step.name}"), step.left)
        if step.reversible:
            rates[step.name] -= side(constant_symbol(f"k_rev_{step.name}"), step.right)
    made_of = _mass_action if as_written else _equilibrium
    equations = [made_of(parts, step, share) for step in parts.equilibrated]
    equations += [sum(w * share[s] for s, w in f.weights.items()) - 1 for f in parts.families]
    unknowns = list(share.values())
    if len(equations) < len(unknowns):
        # what an equilibrated step runs at is unknown too, once there are balances
        for step in parts.equilibrated:
            rates[step.name] = sympy.Symbol(f"w_{step.name}")
            unknowns.append(rates[step.name])
        spare = {f.reference for f in parts.families}
        for s in parts.intermediates:
            if s not in spare:
                steps = mechanism.steps
                equations.append(sum(net(t).get(s, 0) * rates[t.name] for t in steps))
    made = _slow_product(parts)
    if made is not None:
        rate = sum(net(t).get(made, 0) * rates[t.name] for t in parts.kinetic)
        return Plain(equations, unknowns, rate, made.name)
    if mechanism.limiting:
        return Plain(equations, unknowns, rates[mechanism.limiting], "")
    return None


def _mass_action(parts: Network, step: Any, share: Mapping[Species, Any]) -> Any:
    left, right = (
        sympy.Mul(*((share.get(s) or amount(s.name)) ** m for s, m in dict(one).items()))
        for one in (step.left, step.right)
    )
    return sympy.Symbol(f"K_{step.name}", nonnegative=True) * left - right


def _equilibrium(parts: Network, step: Any, share: Mapping[Species, Any]) -> Any:
    """Solved for the form that the step makes from vacant sites or the free catalyst."""
    vacant = {f.reference for f in parts.families}
    k = sympy.Symbol(f"K_{step.name}", nonnegative=True)
    sides = [dict(step.left), dict(step.right)]
    for at, turn in ((1, 1), (0, -1)):
        forms = [s for s in sides[at] if s in share and s not in vacant]
        if len(forms) == 1 and forms[0] not in sides[1 - at]:
            form, n = forms[0], sides[at][forms[0]]
            value = k**turn
            for s, m in sides[1 - at].items():
                value *= (share.get(s) or amount(s.name)) ** m
            for s, m in sides[at].items():
                if s != form:
                    value /= (share.get(s) or amount(s.name)) ** m
            return share[form] - sympy.powdenest(sympy.root(value, n))
    return _mass_action(parts, step, share)


def _slow_product(parts: Network) -> Species | None:
    """A product, else a reactant, that no equilibrated step touches."""
    fast = {s for t in parts.equilibrated for s in net(t)}
    for sign in (1, -1):
        for s in parts.fluid:
            changes = [net(t).get(s, 0) for t in parts.kinetic]
            if s not in fast and any(changes) and all(sign * c >= 0 for c in changes):
                return s
    return None


def plain_rate(problem: Plain, finish: Callable[[Any], Any]) -> list[Any]:
    """The timed part: one law for each solution that ``sympy.solve`` finds."""
    found = sympy.solve(problem.equations, problem.unknowns, dict=True)
    return [finish(problem.rate.subs(solution)) for solution in found]


def _run(problem: Plain, finish: Callable[[Any], Any], limit: float, pipe: Any) -> None:
    used = time.process_time()
    most = int(used + limit) + 1
    resource.setrlimit(resource.RLIMIT_CPU, (most, most + 1))
    took: list[float] = []
    while not took or (sum(took) < QUICK and len(took) < 5):
        sympy.core.cache.clear_cache()
        start = time.process_time()
        laws = plain_rate(problem, finish)
        took.append(time.process_time() - start)
    pipe.send((float(np.median(took)), laws))


def plain_seconds(
    problem: Plain, finish: Callable[[Any], Any], limit: float = LIMIT
) -> tuple[float, list[Any] | None]:
    """Processor time and laws; the limit and None when it was reached.

    Caches of sympy empty, as for a law not met before; the median of five when that is quick.
    """
    context = multiprocessing.get_context("fork")
    here, there = context.Pipe(duplex=False)
    process = context.Process(target=_run, args=(problem, finish, limit, there))
    process.start()
    there.close()
    try:
        if here.poll(20 * limit):
            took, laws = here.recv()
            return float(took), laws
        return limit, None
    except EOFError:  # stopped by the limit of processor time
        return limit, None
    finally:
        process.kill()
        process.join()


def agree(problem: Plain, laws: list[Any], law: RateLaw) -> bool:
    """Whether one of the plain laws has the value of the derived one at a random point."""
    ours = law.production[problem.species] if problem.species else law.rate
    known = {c.symbol: c.definition for c in law.constants if c.definition is not None}
    ours = sympy.sympify(ours).xreplace(known)
    rng = np.random.default_rng(SEED)
    symbols = ours.free_symbols.union(*(e.free_symbols for e in laws))
    point = {s: sympy.Float(rng.uniform(0.5, 2), 40) for s in sorted(symbols, key=str)}
    value = ours.xreplace(point).evalf(30)
    return any(abs(e.subs(point).evalf(30) / value - 1) < AGREE for e in laws)


def median_seconds(work: Callable[[], object], times: int) -> float:
    took = []
    for _ in range(times):
        start = time.process_time()
        work()
        took.append(time.process_time() - start)
    return float(np.median(took))


def fresh_seconds(work: Callable[[], object]) -> float:
    """The same for a law not met before: sympy's caches are emptied before each of up to five."""
    took: list[float] = []
    while not took or (sum(took) < QUICK and len(took) < 5):
        sympy.core.cache.clear_cache()
        took.append(median_seconds(work, 1))
    return float(np.median(took))


@dataclass(frozen=True, slots=True)
class Row:
    """Seconds for one mechanism: derive with empty caches and again; the plain route.

    ``cancelled`` and ``simplified`` are None where not tried, ``written`` is the plain route with
    the equilibria as they are written; at the limit they are infinite.
    """

    name: str
    first: float
    again: float
    cancelled: float | None = None
    simplified: float | None = None
    written: float | None = None


def compare(
    name: str,
    mechanism: Mechanism,
    measured: frozenset[str] | None,
    limit: float,
    *,
    simplify: bool = True,
) -> Row:
    """Both routes on one mechanism, their laws compared."""

    def ours() -> RateLaw:
        return derive(mechanism, measured=measured)

    first = fresh_seconds(ours)
    again = median_seconds(ours, 5 if first < 1 else 1)
    problem = plain_problem(mechanism, measured)
    if problem is None:
        return Row(name, first, again)
    law = ours()
    found: list[float | None] = []
    for finish in (sympy.cancel, sympy.simplify) if simplify else (sympy.cancel,):
        took, laws = plain_seconds(problem, finish, limit)
        if laws is not None and not agree(problem, laws, law):
            raise AssertionError(f"{name}: the two routes give different laws")
        found.append(took if laws is not None else float("inf"))
    verbatim = plain_problem(mechanism, measured, as_written=True) if simplify else None
    if verbatim is not None:
        took, laws = plain_seconds(verbatim, sympy.simplify, limit)
        found.append(took if laws is not None else float("inf"))
    return Row(name, first, again, *found)


def networks(limit: float = LIMIT) -> list[Row]:
    """The networks of :mod:`tests.benchmarks.networks`."""
    fluid = frozenset("ABCPQR")
    return [compare(name, network(name), fluid, limit, simplify=False) for name in NETWORKS]


def library() -> dict[str, Mechanism]:
    """The mechanisms of the library that are written in steps."""
    records = {n: load(n, Path()) for n in names()}
    return {n: r for n, r in records.items() if isinstance(r, Mechanism)}


def library_rows(limit: float = 20.0) -> tuple[list[Row], list[float]]:
    """Both routes on the mechanisms with sites whose law is explicit; and all, derived warm."""
    every = library()
    rows = []
    for name, mechanism in every.items():
        if mechanism.sites and not derive(mechanism).rate.has(ImplicitValue):
            rows.append(compare(name, mechanism, None, limit))
    warm = [median_seconds(lambda m=m: derive(m), 5) for m in every.values()]  # type: ignore[misc]
    return rows, warm


def different(count: int = DIFFERENT) -> list[Mechanism]:
    """Adsorption-reaction mechanisms drawn at random, each another one."""
    rng = np.random.default_rng(SEED)
    drawn: dict[str, Mechanism] = {}
    while len(drawn) < count:
        keywords = adsorbed_then_reaction(rng).keywords()
        text = repr(keywords)
        if text not in drawn:
            drawn[text] = parse_mechanism(name="drawn", **keywords)
    return list(drawn.values())


def throughput(count: int = DIFFERENT) -> dict[str, float]:
    """Laws a second over different mechanisms, and what memory they leave behind."""
    mechanisms = different(count)
    fluid = [
        frozenset(s.name for t in m.steps for s, _ in (*t.left, *t.right) if not s.site)
        for m in mechanisms
    ]
    pairs = list(zip(mechanisms, fluid, strict=True))
    for m, f in pairs[: count // 10]:
        derive(m, measured=f)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    took = []
    for m, f in pairs:
        start = time.process_time()
        derive(m, measured=f)
        took.append(time.process_time() - start)
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return {
        "median": float(np.median(took)),
        "slowest": max(took),
        "a second": count / sum(took),
        "growth, MB": (after - before) / 1024,
    }


def peak_megabytes(mechanism: Mechanism, measured: frozenset[str] | None = None) -> float:
    """Largest memory that one derivation holds at a time."""
    tracemalloc.start()
    derive(mechanism, measured=measured)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak / 2**20


def lines() -> list[str]:
    """The section of the kept figures."""
    nets = networks()
    rows, warm = library_rows()
    flow = throughput()
    peak = max(peak_megabytes(network(n), frozenset("ABCPQR")) for n in NETWORKS)
    again = float(np.median([r.again for r in rows]))
    first = float(np.median([r.first for r in rows]))
    short = [r.cancelled / r.first for r in rows if r.cancelled is not None]
    usual = [r.simplified / r.first for r in rows if r.simplified is not None]
    written = [r.written / r.first for r in rows if r.written is not None]
    out = [
        "## Derivation of laws",
        "",
        "Plain: the same equations given to `sympy.solve`, its result put into the rate, then "
        "`sympy.cancel` or `sympy.simplify`; it lumps no constants. Times faster: both with sympy's "
        "caches empty, as for a law not met before. Processor time, so that other work on the "
        "machine does not count. Where the plain route ends, both laws are compared at "
        f"random values. Drawings with seed {SEED}.",
        "",
        "| 12 steps, eight intermediates | discrim, caches empty | again | plain, `cancel` | times faster |",
        "| --- | --- | --- | --- | --- |",
    ]
    for r in nets:
        assert r.cancelled is not None
        ended = np.isfinite(r.cancelled)
        plain = f"{r.cancelled:.1f} s" if ended else f"stopped after {LIMIT:.0f} s"
        times = f"{r.cancelled / r.first:.0f}" if ended else f"over {LIMIT / r.first:.0f}"
        out.append(f"| {r.name} | {r.first:.2f} s | {r.again:.2f} s | {plain} | {times} |")
    out += [
        "",
        "| what | figure | asked |",
        "| --- | --- | --- |",
        f"| network of 12 steps, slowest of {len(nets)} | {max(r.first for r in nets):.2f} s | 1 s |",
        f"| mechanisms of the library on sites ({len(rows)}), median | {1e3 * again:.1f} ms | 5 ms |",
        f"| the same, caches of sympy empty | {1e3 * first:.1f} ms | |",
        f"| every mechanism of the library ({len(warm)}), median | "
        f"{1e3 * float(np.median(warm)):.1f} ms | |",
        f"| slowest of them | {1e3 * max(warm):.0f} ms | |",
        f"| times faster than `solve` and `simplify` on sites, median (least) | "
        f"{np.median(usual):.0f} ({min(usual):.1f}) | 20 |",
        f"| the same, equilibria given as they are written, median (least) | "
        f"{np.median(written):.0f} ({min(written):.1f}) | 20 |",
        f"| times faster than `solve` and `cancel`, median (least) | "
        f"{np.median(short):.0f} ({min(short):.1f}) | |",
        f"| {DIFFERENT} different adsorption-reaction mechanisms, median | "
        f"{1e3 * flow['median']:.1f} ms | 5 ms |",
        f"| the slowest of them | {1e3 * flow['slowest']:.0f} ms | |",
        f"| laws a second | {flow['a second']:.0f} | |",
        f"| memory that grows over them | {flow['growth, MB']:.0f} MB | |",
        f"| most memory of one network | {peak:.0f} MB | |",
    ]
    return out


if __name__ == "__main__":
    print("\n".join(lines()))
