"""The ground of all figures: words as typed, legends that fit, files that come out the same, elements for a page."""

import re
from xml.etree import ElementTree

import matplotlib
import pytest
from figure_checks import check_figure, words
from hostile import STRINGS, assert_inert

from codesign.errors import CodesignError, ProblemError
from codesign.report.figures.base import (
    FORMATS,
    SMALL,
    describe,
    dress,
    figure_bytes,
    figure_format,
    in_house_style,
    legend_above,
    legend_below,
    new_figure,
    save_figure,
    scale_of,
    shortened,
    signed,
    svg_fragment,
    text_width,
    wrapped,
    write,
)


@in_house_style
def drawn(names=("one", "two"), title="A title", place=legend_below, **size):
    """A figure with a line for each name and everything the ground offers."""
    figure = new_figure(**size)
    axes = dress(figure.add_subplot(), x="wavelength [nm]", y="share")
    lines = [axes.plot([0, 1], [0, k])[0] for k in range(len(names))]
    entries = list(zip(lines, names, strict=True))
    if place is legend_below:
        axes.set_title(shortened(figure, title, 140.0, 8.5, "bold"))
        legend_below(figure, entries)
    else:
        legend_above(axes, title, entries)
    return describe(figure, title, f"Lines: {', '.join(names)}.")


@pytest.mark.parametrize("place", [legend_below, legend_above])
@pytest.mark.parametrize("names", [["a"], ["part"] * 3, [f"part-{k:02d} of the mix" for k in range(25)]])
def test_a_legend_fits_whatever_it_holds(names, place):
    check_figure(drawn(names, place=place, height_mm=140.0))


@pytest.mark.parametrize("place", [legend_below, legend_above])
def test_a_long_name_keeps_both_ends(place):
    name = "the-name-of-this-part-" + "goes-on-and-on-" * 30 + "until-850-nm"
    figure = drawn([name, "short"], place=place)
    check_figure(figure)
    assert re.search(r"the-name-of-this.*….*-nm$", words(figure), re.MULTILINE)


@pytest.mark.parametrize("kind", STRINGS)
def test_hostile_words_are_shown_as_they_are(kind):
    text = STRINGS[kind]
    figure = drawn([text, "_" + text], title=text)
    check_figure(figure)
    page = f"<!doctype html><title>x</title>{svg_fragment(figure, letters='text')}"
    assert_inert(page, shown=False)
    assert "<script" not in page


def test_dollar_signs_underscores_and_right_to_left_words_are_words():
    names = ["costs $5 or $6", "_first", "שלום עולם", "100 % $\\frac{1}{2}$"]
    found = words(drawn(names))
    assert all(name in found for name in names)


def test_letters_the_font_lacks_bring_no_warning():
    figure = drawn(["光学検査"])
    assert figure_bytes(figure, "png")[:4] == b"\x89PNG"
    assert "光学検査" in svg_fragment(figure, letters="text")


@pytest.mark.parametrize("form", FORMATS)
def test_the_same_figure_is_the_same_file(form):
    assert figure_bytes(drawn(), form) == figure_bytes(drawn(), form)


def test_matplotlib_is_left_as_it_was():
    before = dict(matplotlib.rcParams)
    figure_bytes(drawn())
    assert dict(matplotlib.rcParams) == before


def test_figures_of_one_page_do_not_share_ids():
    first, second = svg_fragment(drawn(["one"])), svg_fragment(drawn(["another"]))
    ids = [re.findall(r'\bid="([^"]+)"', each) for each in (first, second)]
    assert len(set(ids[0])) == len(ids[0]) > 10
    assert not set(ids[0]) & set(ids[1])
    for each, own in zip((first, second), ids, strict=True):
        references = re.findall(r'href="#([^"]+)"|url\(#([^)]+)\)', each)
        assert references
        assert {a or b for a, b in references} <= set(own)


def test_an_element_for_a_page_has_words_for_readers_and_no_styles_or_links():
    fragment = svg_fragment(drawn(["one"], title="Use & <limits>"), prefix="own-")
    root = ElementTree.fromstring(fragment)
    space = "{http://www.w3.org/2000/svg}"
    assert root.get("role") == "img"
    assert root.get("aria-labelledby") == "own-title own-desc"
    assert root.find(f"{space}title").text == "Use & <limits>"
    assert root.find(f"{space}desc").text == "Lines: one."
    assert not {element.tag for element in root.iter()} & {f"{space}{name}" for name in ("style", "script", "metadata")}
    assert " style=" not in fragment
    assert "xlink" not in fragment
    assert not re.search(r'href="(?!#)', fragment)
    assert root.get("viewBox").split()[2] == pytest.approx("481.889764")


def test_a_saved_picture_is_as_large_in_print_as_asked_for():
    root = ElementTree.fromstring(figure_bytes(drawn(width_mm=100.0, height_mm=50.0)))
    assert float(root.get("width")) == pytest.approx(100 / 25.4 * 96, abs=0.5)
    assert float(root.get("height")) == pytest.approx(50 / 25.4 * 96, abs=0.5)


def test_a_figure_is_written_whole_or_the_place_named(tmp_path):
    save_figure(drawn(), tmp_path / "a.pdf")
    assert (tmp_path / "a.pdf").read_bytes()[:5] == b"%PDF-"
    with pytest.raises(CodesignError, match="does not exist"):
        save_figure(drawn(), tmp_path / "nowhere" / "a.svg")
    with pytest.raises(ProblemError, match=r"must be one of \.svg, \.png, \.pdf"):
        figure_format("picture.bmp")


def test_text_is_measured_as_it_is_set():
    """A line of twenty letters is twenty times as wide as one, but for what letters share at the ends."""
    figure = new_figure()
    assert text_width(figure, "n" * 20) == pytest.approx(20 * text_width(figure, "n"), rel=0.1)
    assert text_width(figure, "word", 14.0) == pytest.approx(2 * text_width(figure, "word", 7.0), rel=0.02)


def test_shortened_and_wrapped_words_fit():
    figure, text = new_figure(), "several words that are too wide for the room they have been given here"
    assert text_width(figure, shortened(figure, text, 30.0)) <= 30.0
    lines = wrapped(figure, text, 30.0).splitlines()
    assert " ".join(lines) == text
    assert all(text_width(figure, line) <= 30.0 for line in lines)
    assert len(wrapped(figure, text, 30.0, lines=2).splitlines()) == 2


def test_numbers_are_set_with_a_true_minus_and_a_scale_in_words():
    assert (signed(-2439.6), signed(0.5, plus=True)) == ("−2440", "+0.5")
    assert scale_of(2.5e6) == (1e6, "10⁶ ")
    assert scale_of(40.0) == (1.0, "")
    assert scale_of(3e-4) == (1e-6, "10⁻⁶ ")
    assert scale_of(0.0) == (1.0, "")


# --- the checks themselves -------------------------------------------------------------------------------------


@in_house_style
def spoilt(x=0.5, size=SMALL):
    figure = new_figure(layout=None)
    axes = figure.add_axes((0.1, 0.1, 0.8, 0.8))
    write(axes, 0.5, 0.5, "some words in the middle")
    write(axes, x, 0.9, "further words", fontsize=size)
    return figure


def test_the_checks_pass_a_sound_figure():
    check_figure(spoilt())


@pytest.mark.parametrize(
    ("figure", "why"),
    [
        (lambda: spoilt(x=1.08), "stick out"),
        (lambda: formula(), "read as a formula"),
        (lambda: spoilt(size=5.0), "is 5.0 pt"),
        (lambda: overlapping(), "set on each other"),
    ],
)
def test_the_checks_catch_what_they_are_for(figure, why):
    with pytest.raises(AssertionError, match=why):
        check_figure(figure())


def overlapping():
    figure = spoilt()
    write(figure.axes[0], 0.52, 0.51, "on top")
    return figure


def formula():
    figure = spoilt()
    figure.axes[0].texts[0].set_parse_math(True)
    return figure
