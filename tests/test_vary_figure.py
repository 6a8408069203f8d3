"""Figures of what-ifs: every word on the page whatever the names, ends labelled, nothing told by colour alone."""

import itertools
import math

import numpy as np
import pytest
from figure_checks import check_figure, words

from codesign.report.figures.combinations import sign
from codesign.report.figures.ends import linear_ticks, tick_words
from codesign.report.vary_figure import variation_drawing, variation_figure
from codesign.study.fields import Axis
from codesign.study.vary import Point, Variation

LONG = "a-very-long-name-of-an-led-that-somebody-thought-of"
TITLE = "Brauner Fleck <script>alert('x')</script> unter $\\frac{1}{2}$ \u202eglänzender Haut " * 3


def what_if(axes: list[Axis], kinds: int, *, long: bool = False, lost: int = 0, required: float = 5.0) -> Variation:
    """A what-if that nobody solved, with so many combinations of parts and points without result."""
    points = []
    for number, values in enumerate(itertools.product(*(axis.values for axis in axes))):
        kind = number % kinds if len(axes) == 1 else number * kinds // math.prod(len(a.values) for a in axes)
        leds = [LONG + str(k) for k in range(9)] if long else ["red", "blue"]
        possible = number >= lost
        points.append(
            Point(
                values=values, cnr=2 + 0.31 * number, bound=2.01 + 0.31 * number, camera="camera", channel="mono",
                gain_db=0.0, filter=f"filter-{kind}", f_number=4.0, exposure_us=100.0,
                drive_ma=dict.fromkeys(leds, 10.0),
            )
            if possible
            else Point(values=values, reason="limits in conflict", limits=("rig heat",))
        )  # fmt: skip
    return Variation(
        title=TITLE if long else "Two inks", where="x.toml", required_cnr=required, settings={}, axes=tuple(axes),
        base=points[-1], points=tuple(points), gap=1e-3,
    )  # fmt: skip


def ratio(key: str, low: float, high: float, count: int) -> Axis:
    return Axis(key, tuple(np.geomspace(low, high, count).tolist()), log=True)


@pytest.mark.parametrize("kinds", [1, 2, 5, 8, 12, 14])
@pytest.mark.parametrize("long", [False, True])
def test_all_words_of_a_line_are_on_the_page(kinds, long):
    figure = variation_drawing(what_if([ratio("limits.rig_heat_w", 0.013, 47, 16)], kinds, long=long, lost=2))
    check_figure(figure)
    assert ("2 more combinations, see the table" in words(figure)) == (kinds == 14)
    assert "limits cannot be met" in words(figure)


@pytest.mark.parametrize("kinds", [1, 5, 12, 14])
@pytest.mark.parametrize("long", [False, True])
@pytest.mark.parametrize("width", [110.0, 170.0])
def test_all_words_of_a_map_are_on_the_page(kinds, long, width):
    axes = [ratio("timing.exposure_max_us", 11, 23456, 5), Axis("lighting.distance_mm", (200, 300, 455, 700, 933))]
    figure = variation_drawing(what_if(axes, kinds, long=long, lost=3), width=width)
    check_figure(figure, apart=False)  # contours run where they run
    said = words(figure)
    assert "limits cannot be met" in said and "required CNR 5" in said
    assert ("the parts change" in said) == (kinds > 1)


@pytest.mark.parametrize("form", ["line", "map"])
def test_both_ends_of_a_logarithmic_axis_are_labelled(form):
    axes = [ratio("limits.rig_heat_w", 0.013, 47, 6), ratio("timing.exposure_max_us", 11, 23456, 5)]
    figure = variation_drawing(what_if(axes[: 1 if form == "line" else 2], 2))
    drawn = figure.axes[0]
    which = [drawn.xaxis] if form == "line" else [drawn.yaxis, drawn.xaxis]
    for scale, axis in zip(which, axes, strict=False):
        labels = {text.get_text() for text in scale.get_ticklabels()}
        assert {tick_words(axis.values[0]), tick_words(axis.values[-1])} <= labels
        assert sorted(scale.get_view_interval()) == pytest.approx([axis.values[0], axis.values[-1]])


def test_round_values_swept_are_the_ticks():
    figure = variation_drawing(what_if([Axis("lighting.distance_mm", (200, 300, 400, 500))], 1))
    assert [text.get_text() for text in figure.axes[0].get_xticklabels()] == ["200", "300", "400", "500"]


def test_falling_values_and_words_are_taken_as_they_are():
    falling = variation_drawing(what_if([Axis("lighting.distance_mm", (900, 300, 100), log=True)], 2))
    assert falling.axes[0].get_xlim() == pytest.approx((100, 900))
    named = variation_drawing(what_if([Axis("scene.background", tuple(f"paper-{LONG}-{k}" for k in range(12)))], 3))
    check_figure(named)


def test_required_cnr_off_the_map_is_said():
    axes = [Axis("averaging.frames", (1, 2)), Axis("lighting.distance_mm", (200, 400))]
    assert "required CNR 1: met wherever there is a result" in words(variation_drawing(what_if(axes, 1, required=1)))
    assert "required CNR 99: met nowhere" in words(variation_drawing(what_if(axes, 1, required=99)))


def test_signs_differ_without_colour():
    shapes = [(sign(k)["marker"], sign(k)["markerfacecolor"] == sign(k)["color"]) for k in range(16)]
    assert len(set(shapes)) == 16


@pytest.mark.parametrize(("low", "high"), [(0, 1), (-20, 60), (50, 900), (3, 3.01), (0.2, 0.9)])
def test_linear_ticks_begin_and_stop_at_the_ends(low, high):
    ticks = linear_ticks(low, high, [0.05, 0.07, 0.09, 0.11])
    assert ticks[0] == low and ticks[-1] == high and 2 <= len(ticks) <= 9
    assert all(b > a for a, b in itertools.pairwise(ticks))


def test_files_are_the_same_for_the_same_result():
    found = what_if([ratio("limits.rig_heat_w", 0.01, 10, 5)], 3)
    assert variation_figure(found, "pdf") == variation_figure(found, "pdf")
    assert "rig heat [W]" in variation_figure(found).decode()  # words can be searched
