"""Figures as elements of the page: drawn when asked for, fit for a page whose policy allows no style attributes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from codesign.report.page.html import Html, element, trusted

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.page.content import Subject


def drawn(subject: Subject, key: str) -> Html | None:
    """Return the figure of a section with its caption, None where there is none for this subject."""
    return None


def framed(figure: Figure, caption: str) -> Html:
    """Return a figure of matplotlib with a caption, scaled to the width of the page."""
    from codesign.report.figures.base import svg_fragment

    picture = trusted(svg_fragment(figure))
    return element("figure", element("div", picture, class_="picture"), element("figcaption", caption))
