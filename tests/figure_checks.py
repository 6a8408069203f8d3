"""What every figure must hold: words inside the page, none on another, none too small. For all tests of figures."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from itertools import combinations

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.text import Annotation, Text
from matplotlib.transforms import Bbox

from codesign.report.figures.base import SMALL, house_style

#: Letters' boxes hold some air above and below; that much may overlap. [points]
AIR = 1.5
#: Words may reach that far over the edge of the page: rounding. [points]
EDGE = 0.3


def check_figure(figure: Figure, *, smallest: float = SMALL, apart: bool = True) -> str:
    """Draw a figure and fail where words are cut, too small, read as a formula or set on other words.

    Returns all words that can be seen, one line each.

    Parameters
    ----------
    figure : Figure
    smallest : float
        [points]
    apart : bool
        Whether words must not touch each other.
    """
    with house_style():
        figure.draw_without_rendering()
        boxes = dict(_boxes(figure))
        assert boxes, "a figure without words"
        _inside(figure, boxes)
        for text in boxes:
            assert text.get_fontsize() >= smallest - 1e-6, f"{text.get_text()!r} is {text.get_fontsize()} pt"
            assert not text.get_parse_math(), f"{text.get_text()!r} may be read as a formula"
        if apart:
            _apart(figure, boxes)
        return _joined(boxes)


def words(figure: Figure) -> str:
    """All words of a figure that can be seen, one line each."""
    with house_style():
        figure.draw_without_rendering()
        return _joined(dict(_boxes(figure)))


def _joined(boxes: Iterable[Text]) -> str:
    return "\n".join(text.get_text() for text in boxes)


def _visible(text: Text) -> bool:
    """Shown itself and in everything that holds it."""
    return bool(text.get_visible() and text.get_text().strip() and text.get_alpha() != 0)


def _shown(artist, parents_shown: bool = True) -> Iterator[Text]:
    """Texts below an artist, those of hidden parents left out."""
    for child in artist.get_children():
        shown = parents_shown and child.get_visible()
        if isinstance(child, Text) and shown and _visible(child):
            yield child
        if shown:
            yield from _shown(child, shown)


def _boxes(figure: Figure) -> Iterator[tuple[Text, Bbox]]:
    renderer, undrawn = figure.canvas.get_renderer(), set(_undrawn(figure))
    for text in dict.fromkeys(_shown(figure)):
        if text not in undrawn:
            yield text, Text.get_window_extent(text, renderer)


def _undrawn(figure: Figure) -> Iterator[Text]:
    """Labels of ticks that are kept but not drawn: beyond the limits of an axis, or of an axis that is off."""
    for axes in figure.findobj(Axes):
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            slack = 1e-6 * (high - low)
            for tick in (*axis.majorTicks, *axis.minorTicks):
                if not axes.axison or not low - slack <= tick.get_loc() <= high + slack:
                    yield from (tick.label1, tick.label2)


def _inside(figure: Figure, boxes: dict[Text, Bbox]) -> None:
    page, slack = figure.bbox, EDGE * figure.dpi / 72
    kinds: Iterable[tuple[str, Bbox]] = [(f"words {t.get_text()!r}", box) for t, box in boxes.items()]
    legends = [legend for legend in figure.findobj(Legend) if legend.get_visible()]
    for name, box in (*kinds, *(("legend", legend.get_window_extent()) for legend in legends)):
        outside = max(page.x0 - box.x0, page.y0 - box.y0, box.x1 - page.x1, box.y1 - page.y1)
        assert outside <= slack, f"{name} stick out of the page by {outside * 72 / figure.dpi:.1f} points"


def _apart(figure: Figure, boxes: dict[Text, Bbox]) -> None:
    air = AIR * figure.dpi / 72
    for (one, a), (other, b) in combinations(boxes.items(), 2):
        width = min(a.x1, b.x1) - max(a.x0, b.x0)
        height = min(a.y1, b.y1) - max(a.y0, b.y0)
        touching = width > 0.1 * air and height > (2 * air if isinstance(one, Annotation) else air)
        assert not touching, f"{one.get_text()!r} and {other.get_text()!r} are set on each other"
