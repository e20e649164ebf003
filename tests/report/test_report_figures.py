"""The figures: which there are, that names do no harm, and what their descriptions say."""

import sys

import pytest

from discrim.report.canvas import label, scale_of, with_units
from discrim.report.figures import draw
from tests.report import sample


def by_name(document):
    return {picture.name: picture for picture in draw(document)}


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("lockstep", ["effects", "plane-1", "measured-predicted", "residuals", "intervals-1",
                      "intervals-2", "pathways"]),
        ("catalyst", ["effects", "measured-predicted", "residuals", "intervals-1", "intervals-2"]),
        ("empty", []),
        ("bare", []),
    ],
)  # fmt: skip
def test_a_figure_for_each_thing_that_has_data(name, expected):
    assert list(by_name(sample.ALL[name]())) == expected


def test_descriptions_hold_the_numbers():
    found = by_name(sample.two_amines())
    assert "B: 31 %, interval 0 % to 100 %, undecided." in found["effects"].alt
    plane = found["plane-1"].alt
    assert "the bands that 8 runs allow" in plane
    assert "Best fit at 3e-4 and 5.5e-5." in plane
    assert "do not fix the combination from (4.3e-4, 0) to (0, 1.74e-4)" in plane
    assert "reconciled from 0 (bound), open above" in found["intervals-2"].alt
    assert "by_a carries 75 % to 75 %; by_b carries 25 % to 25 %" in found["pathways"].alt


def test_names_are_drawn_as_they_are():
    document = sample.two_amines()
    candidate = document["candidates"][0]
    candidate["name"] = r"$\frac{1 & <x> 分子"
    candidate["constants"][0]["name"] = "k_$a$"
    document["planes"][0]["x"]["name"] = "k_$a$"
    document["runs"]["columns"][1]["name"] = "conc_$"
    found = by_name(document)
    assert r"$\frac{1 &amp; &lt;x&gt;" in found["measured-predicted"].svg
    assert "k_$a$" in found["plane-1"].svg
    assert found["measured-predicted"].png().startswith(b"\x89PNG")


def test_no_window_is_ever_asked_for():
    before = set(sys.modules)
    draw(sample.two_amines())
    assert "matplotlib.pyplot" not in set(sys.modules) - before


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        ([3e-4, 1e-4], (1e6, "10⁻⁶ ")),
        ([0.5, 20.0], (1.0, "")),
        ([2.5e7], (1e-6, "10⁶ ")),
        ([0.0, None], (1.0, "")),
        ([], (1.0, "")),
    ],
)
def test_the_power_of_ten_goes_to_the_label(values, expected):
    factor, words = scale_of(values)
    assert (pytest.approx(factor), words) == expected


def test_labels():
    assert with_units("k", "s⁻¹", "10⁻⁶ ") == "k (10⁻⁶ s⁻¹)"
    assert with_units("x", "1") == "x"
    assert label("a" * 50, 10) == "a" * 9 + "…"


@pytest.mark.parametrize("far", [1e200, 1.7e308])
def test_a_prediction_far_out_of_the_runs_is_drawn(far):
    """Warnings are errors here, and an axis over hundreds of decades has few ticks."""
    document = sample.ALL["lockstep"]()
    for candidate in document["candidates"]:
        for fitted in candidate["fitted"]:
            fitted["predicted"] = far
    picture = by_name(document)["measured-predicted"]
    assert picture.png().startswith(b"\x89PNG")
    assert all(len(ax.get_xticks()) <= 8 for ax in picture.figure.axes)
