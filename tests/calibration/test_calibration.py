"""A short seeded part of the calibration, and checks of its own tools.

Simulated tables; the truth is known because it is drawn. Bounds are binomial and generous, as there are few
studies: the long run is `python -m tests.calibration.run`.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
from scipy import stats
from statsmodels.stats.multitest import multipletests

from discrim.fit.problem import Problem
from tests.calibration.bars import LEVEL, too_often
from tests.calibration.cells import COVERAGE_CELLS, NEGLIGIBLE_CELLS, SIZE_GROUPS, Cell
from tests.calibration.coverage import run_coverage, run_negligible
from tests.calibration.laws import LAWS
from tests.calibration.methods import oracle
from tests.calibration.power import run_power
from tests.calibration.record import COLUMNS, HERE, keep, kept_sections
from tests.calibration.rivals import RIVAL_CELLS, RivalCell, family, run_rivals
from tests.calibration.simulate import draw
from tests.calibration.size import run_size
from tests.calibration.trial import one
from tests.calibration.trial_design import draw as draw_study

SIZES = [
    Cell("two pathways", 5, 0.003, 0.03, 0.003),
    Cell("two pathways", 12, 0.05, 0.03, 0.003, "set", shared=3),
    Cell("two pathways", 12, 0.02, 0.01, 0.02, scale="replicates", scale_df=3),
    Cell("third column aligned", 12, 0.05, 0.03),
    Cell("rate maximum", 12, 0.1, 0.03),
    Cell("stirred tank", 12, 0.1, 0.03, origin="mixed"),
    Cell("order", 12, 0.1, 0.03),
]


@pytest.mark.parametrize("cell", SIZES, ids=lambda c: c.law)
def test_absent_terms_are_claimed_no_more_often_than_stated(cell: Cell) -> None:
    found = run_size(cell, 200, 11)
    assert found.missing == 0
    assert found.contrary == 0
    assert stats.binom.sf(found.false["discrim"] - 1, 200, 0.06) > 0.001


def test_the_textbook_f_fails_in_lockstep() -> None:
    found = run_size(Cell("two pathways", 12, 0.01, 0.03, 0.003), 200, 12)
    assert found.rate("textbook F") > 0.3
    assert found.rate("likelihood ratio") > 0.15
    assert stats.binom.sf(found.false["discrim"] - 1, 200, 0.06) > 0.001


def test_intervals_hold_the_truth_and_small_effects_are_not_invented() -> None:
    held = run_coverage(Cell("two pathways", 12, 0.02, 0.02, share=0.3), 300, 13, 2)
    assert stats.binom.sf(held.false["discrim"] - 1, 300, 0.06) > 0.001
    under = run_negligible(Cell("two pathways", 12, 0.1, 0.01, share=0.2), 300, 14, 2)
    assert stats.binom.sf(under.false["discrim"] - 1, 300, 0.06) > 0.001
    assert held.contrary == under.contrary == 0


def test_power_is_near_that_of_an_oracle() -> None:
    """In well-spread runs; the oracle's own power is what it was set to, 80 %."""
    found = run_power(Cell("two pathways", 12, 0.5, 0.01), 120, 15)
    assert 0.8 - 0.1 < found.rate("oracle") < 0.8 + 0.1
    assert found.false["discrim"] >= 0.9 * found.false["oracle"]


def test_the_oracle_is_standard_normal_without_an_effect() -> None:
    """Set or measured: its e is linear in normal errors that its sensitivities do not depend on, so its z
    is exactly normal for a linear law (4,000 studies)."""
    for origin in ("set", "measured"):
        z, _ = oracle(draw(Cell(spread=0.05, origin=origin), 4000, np.random.default_rng(16)))
        assert stats.kstest(z, "norm").pvalue > 0.001


def test_the_true_law_stands_among_rivals() -> None:
    found = run_rivals(RivalCell("A adsorbed", 3), 25, 17)
    assert stats.binom.sf(25 - found.stands - 1, 25, 0.06) > 0.001


def test_studies_of_the_trial_are_weighed() -> None:
    """Those with a large effect over well-spread runs, and one without an effect."""
    for number in (4, 19):
        design = draw_study(1, number)
        outcome = one(1, number)
        assert outcome.decided
        assert not outcome.wrong
        assert outcome.verdict == ("participates" if design.truth[0] > 0 else "negligible")


def test_cells_are_as_many_as_asked_and_differ() -> None:
    """At least 120 cells; a study is drawn from its cell and the seed alone."""
    cells = [c for group in SIZE_GROUPS.values() for c in group]
    assert len(cells) == len(set(cells)) >= 120
    every = [*cells, *COVERAGE_CELLS, *NEGLIGIBLE_CELLS]
    assert {c.law for c in every} == set(LAWS)
    a, b = (run_size(SIZES[1], 40, 18) for _ in range(2))
    assert a == b
    assert len({tuple(c.seeds(1, "size")) for c in cells}) == len(cells)


@pytest.mark.parametrize("name", LAWS)
def test_drawn_tables_obey_their_law(name: str) -> None:
    """Without any error the observations are what the law says at the true constants."""
    cell = Cell(name, 6, 0.3, 1e-12, 1e-12, share=0.2)
    drawn = draw(cell, 3, np.random.default_rng(19))
    problem: Problem = drawn.problem
    f = problem.predictor.predict(drawn.truth, drawn.conditions, constants=False).values
    size = np.abs(f).max() if name != "stirred tank" else 3.75
    own = (
        0.02 if name == "stirred tank" else 1e-9
    )  # the reading of a tank keeps an error of its own
    assert np.abs(problem.data.y - f).max() < own * size
    assert (drawn.conditions > 0).all()


def test_rival_family() -> None:
    """A hundred laws to choose from; a law contains another where constants of it can be zero, which
    the values confirm."""
    forms = family()
    assert len(forms) == len(set(forms)) >= 100
    assert max(c.number for c in RIVAL_CELLS) == 100
    rng = np.random.default_rng(20)
    x = 10 ** rng.uniform(-1, 0.7, (20, 3))
    pairs = [(f, g) for f in forms[:30] for g in forms[:30] if f.contains(g)]
    assert pairs
    for large, small in pairs:
        k = rng.uniform(0.5, 2.0, len(small.adsorbed) + 1)
        by_amount = dict(zip(small.adsorbed, k[1:], strict=True))
        same = np.array([k[0], *(by_amount.get(j, 0.0) for j in large.adsorbed)])
        a = small.predictor().predict(k[None], x, constants=False).values
        b = large.predictor().predict(same[None], x, constants=False).values
        assert np.allclose(a, b, rtol=1e-12)


def test_bars_are_holm_adjusted_binomial_tests() -> None:
    """Against statsmodels' multipletests on scipy's binomtest."""
    counts, studies = [70, 100, 95, 150, 40, 96], [1500] * 6
    p = [
        stats.binomtest(c, n, 0.06, alternative="greater").pvalue
        for c, n in zip(counts, studies, strict=True)
    ]
    expected = multipletests(p, LEVEL, method="holm")[0]
    assert (too_often(counts, studies, 0.06) == expected).all()
    assert expected.any()
    assert not expected.all()


def test_one_part_is_replaced_and_the_others_stay(tmp_path: Path) -> None:
    order = ["size", "power"]
    row: dict[str, object] = dict.fromkeys(COLUMNS, "x")
    keep("power", ["## Power", "old"], [{**row, "part": "power"}], order, tmp_path)
    keep("size", ["## Size", "first"], [{**row, "part": "size"}], order, tmp_path)
    keep("power", ["## Power", "new"], [{**row, "part": "power", "count": 7}], order, tmp_path)
    assert kept_sections(tmp_path / "figures.md") == {
        "size": "## Size\nfirst",
        "power": "## Power\nnew",
    }
    lines = (tmp_path / "figures.csv").read_text(encoding="utf-8").splitlines()
    assert len(lines) == 3
    assert lines[1].startswith("size")
    assert ",7," in lines[2]


def test_kept_figures_say_whether_each_bar_is_met() -> None:
    """The kept table has a mark in every row of the parts with a bar, and the trial its two lines."""
    sections = kept_sections(HERE / "figures.md")
    for part in ("size", "coverage", "negligible", "rivals"):
        rows = [x for x in sections[part].splitlines() if x.startswith("| ")]
        marked = [x for x in rows if re.search(r"\| (within|over|no bar) \|$", x)]
        assert len(marked) >= len(rows) / 2 > 5
    assert len(re.findall(r"\b(?:NOT MET|met)\b", sections["trial"])) >= 2
