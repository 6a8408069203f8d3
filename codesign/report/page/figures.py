"""Figures as elements of the page: drawn when asked for, fit for a page whose policy allows no style attributes."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import TYPE_CHECKING

from codesign.report.page.html import Html, element, trusted

#: Figures below this width are not stretched to the width of the page. [mm]
NARROW = 120.0
_COORDINATES = re.compile(r' (?:d|x|y|points)="[^"]*"')
_FURTHER_DIGITS = re.compile(r"(\.\d\d)\d+")

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.page.content import Subject

    Drawing = tuple[Figure, str]


def drawn(subject: Subject, key: str) -> Html | None:
    """Return the figure of a section with its caption, None where there is none for this subject."""
    found = DRAWN[key](subject) if key in DRAWN else None
    return None if found is None else framed(*found, key)


def _story(subject: Subject) -> Drawing | None:
    from codesign.report.figures.spectral import spectral_story

    return spectral_story(subject.problem, subject.performance), (
        "Read from the top: the light at the object, what surfaces, filter and sensor make of it, the electrons it "
        "becomes, and which wavelengths bring contrast and which bring noise."
    )


def framed(figure: Figure, caption: str, key: str) -> Html:
    """Return a figure of matplotlib with a caption, scaled to the width of the page; ``key`` begins its ids."""
    from codesign.report.figures.base import INCH, svg_fragment

    picture = trusted(lighter(svg_fragment(figure, prefix=f"figure-{key}-", letters="text")))
    # Narrow pages scroll a figure sideways to keep its words legible, so it has to be reachable by keyboard.
    kind = "picture small" if figure.get_figwidth() * INCH < NARROW else "picture"
    box = element("div", picture, class_=kind, role="region", aria_label=caption, tabindex="0")
    return element("figure", box, element("figcaption", caption))


def _view(subject: Subject) -> Drawing | None:
    from codesign.report.figures.view import simulated_view

    if not subject.performance.cnr > 0:
        return None
    figure = simulated_view(subject.problem, subject.performance, subject.plain)
    beside = "" if subject.plain is None else " Left: one LED and no filter, set as well as can be."
    return (
        figure,
        f"Simulated at the electrons and the noise predicted; defects of this size and shape are invented.{beside}",
    )


def _noise(subject: Subject) -> Drawing | None:
    from codesign.report.figures.noise import noise_budget

    if not sum(map(sum, subject.performance.noise.values())) > 0:
        return None
    return noise_budget(
        subject.problem, subject.performance
    ), "Every source of noise, down to a millionth of the variance."


def _sensitivities(subject: Subject) -> Drawing | None:
    from codesign.report.figures.sensitivity import sensitivity_figure

    if subject.sensitivities is None:
        return None
    return sensitivity_figure(
        subject.sensitivities
    ), "What tolerances do to the CNR, and what loosening a limit would bring."


def _trade(subject: Subject) -> Drawing | None:
    from codesign.report.figures.trade import trade_figure

    if not subject.trade:
        return None
    return trade_figure(
        subject.trade
    ), "Reached, proven impossible, and the room between; where the parts to use change."


def lighter(svg: str) -> str:
    """Return an ``<svg>`` with coordinates to a hundredth of a point: half the size, and nobody sees it."""
    return _COORDINATES.sub(lambda found: _FURTHER_DIGITS.sub(r"\1", found[0]), svg)


#: Figures by section; each with its caption, or None where there is nothing to draw.
DRAWN: dict[str, Callable[[Subject], Drawing | None]] = {
    "story": _story,
    "view": _view,
    "noise": _noise,
    "sensitivities": _sensitivities,
    "trade": _trade,
}
