"""Figures as elements of the page: drawn when asked for, fit for a page whose policy allows no style attributes."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from codesign.report.page.html import Html, element, trusted

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.page.content import Subject

    Drawing = tuple[Figure, str]


def drawn(subject: Subject, key: str) -> Html | None:
    """Return the figure of a section with its caption, None where there is none for this subject."""
    found = DRAWN[key](subject) if key in DRAWN else None
    return None if found is None else framed(*found)


def _story(subject: Subject) -> Drawing | None:
    from codesign.report.figures.spectral import spectral_story

    return spectral_story(subject.problem, subject.performance), (
        "Read from the top: the light at the object, what surfaces, filter and sensor make of it, the electrons it "
        "becomes, and which wavelengths bring contrast and which bring noise."
    )


def framed(figure: Figure, caption: str) -> Html:
    """Return a figure of matplotlib with a caption, scaled to the width of the page."""
    from codesign.report.figures.base import svg_fragment

    picture = trusted(svg_fragment(figure, letters="text"))
    return element("figure", element("div", picture, class_="picture"), element("figcaption", caption))


#: Figures by section; each with its caption, or None where there is nothing to draw.
DRAWN: dict[str, Callable[[Subject], Drawing | None]] = {"story": _story}
