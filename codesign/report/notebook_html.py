"""The small means of the notebook views: a card, tables, a strip of spectra; readable on light and on dark ground.

A notebook's own style sheet is unknown, so nothing relies on one: every element says its style itself, text keeps the
colour of the notebook, and the few colours used stand out from white and from near-black alike.
"""

from __future__ import annotations

from collections.abc import Container, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from codesign.report.page.html import Content, Html, element, joined, words

Array = NDArray[np.float64]

#: Target, background, filter and the light of the LEDs: middle tones, apart from white and from black by 3 : 1.
TARGET, BACKGROUND, FILTER, LIGHT = "#d2622a", "#3f85c6", "#26917f", "#8a8a8a"
_FAINT = "1px solid rgba(128,128,128,.35)"
_CARD = "max-width:50em;line-height:1.4;padding:.2em 0"
_TABLE = "border-collapse:collapse;border:none;margin:.5em 0;font-variant-numeric:tabular-nums"
_CELL = f"padding:.15em 1em .15em 0;border:none;border-bottom:{_FAINT};vertical-align:top;background:transparent"
_ROW = "background:transparent"
_NOTE = "opacity:.8;margin:.3em 0"
#: Rows of a table shown; the rest is counted.
ROWS = 24
#: Size of the strip and where its plot lies. [px]
WIDTH, HEIGHT, LEFT, RIGHT, TOP, BOTTOM = 460, 132, 8, 452, 8, 104
#: Points of a curve.
POINTS = 160


def card(title: str, head: Content, blocks: Iterable[Content]) -> Html:
    """Return the whole view: a title, the most important line, and what follows."""
    return element(
        "div",
        element("div", element("bdi", words(title)), style="font-weight:600"),
        element("div", head, style="margin:.15em 0 .4em"),
        blocks,
        style=_CARD,
    )


def strong(*content: Content) -> Html:
    """Return what is to be seen first."""
    return element("span", *content, style="font-weight:600")


def note(*content: Content) -> Html:
    """Return a remark."""
    return element("p", *content, style=_NOTE)


def table(header: Sequence[Content], rows: Sequence[Sequence[Content]], numbers: Container[int] = ()) -> Html:
    """Return a table whose first column names the rows; a long one is cut, and what is left out is counted.

    ``numbers`` are the columns set flush right.
    """
    if not rows:
        return Html("")
    head = element("tr", (_cell("th", k, cell, numbers, "col") for k, cell in enumerate(header)), style=_ROW)
    body = [
        element(
            "tr",
            _cell("th", 0, first, numbers, "row"),
            (_cell("td", k, c, numbers, "") for k, c in enumerate(rest, 1)),
            style=_ROW,
        )
        for first, *rest in rows[:ROWS]
    ]
    whole = element("table", element("thead", head), element("tbody", body), style=_TABLE)
    more = len(rows) - ROWS
    return joined((whole, note(f"and {more} more") if more > 0 else None))


def pairs(rows: Sequence[tuple[Content, Content]]) -> Html:
    """Return names with their values, as a table without a header."""
    made = [
        element("tr", _cell("th", 0, key, (), "row"), _cell("td", 1, value, (), ""), style=_ROW) for key, value in rows
    ]
    return element("table", element("tbody", made), style=_TABLE)


def _cell(tag: str, column: int, content: Content, numbers: Container[int], scope: str) -> Html:
    side = "right" if column in numbers else "left"
    weight = ";font-weight:600" if scope == "col" else ";font-weight:normal"
    return element(tag, content, scope=scope or None, style=f"{_CELL};text-align:{side}{weight}")


def bar(share: float) -> Html:
    """Return a bar filled to a share, for the eye only."""
    filled = 100 * min(max(share, 0.0), 1.0) if share == share else 0.0
    inner = element("span", style=f"display:block;height:100%;width:{filled:.0f}%;background:{BACKGROUND}")
    style = "display:inline-block;width:6em;height:.6em;background:rgba(128,128,128,.25)"
    return element("span", inner, style=style, aria_hidden="true")


@dataclass(frozen=True, slots=True, kw_only=True)
class Curve:
    """One curve of a strip: its name, colour, dashes ("" is a full line, "area" a filled one) and values, 0 to 1."""

    name: str
    color: str
    dashes: str
    values: Array


def strip(wavelength_nm: Array, curves: Sequence[Curve], description: str) -> Html:
    """Return curves over wavelength as a small picture with its legend, each curve on a scale of its own.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    curves : sequence of Curve
        Values of (n,).
    description : str
        For screen readers.
    """
    low, high = float(wavelength_nm[0]), float(wavelength_nm[-1])
    at = np.linspace(low, high, POINTS)
    drawn = [_drawn(at, np.interp(at, wavelength_nm, curve.values), curve, (low, high)) for curve in curves]
    picture = element(
        "svg",
        element("title", description),
        drawn,
        _axis(low, high),
        viewBox=f"0 0 {WIDTH} {HEIGHT}",
        width=WIDTH,
        height=HEIGHT,
        role="img",
        style="max-width:100%;height:auto;display:block;background:transparent",
    )
    legend = element("div", (_key(curve) for curve in curves), style="font-size:.85em;margin:.1em 0 .5em")
    return joined((picture, legend))


def _x(nm: float, ends: tuple[float, float]) -> float:
    return LEFT + (RIGHT - LEFT) * (nm - ends[0]) / (ends[1] - ends[0])


def _drawn(at: Array, values: Array, curve: Curve, ends: tuple[float, float]) -> Html:
    y = BOTTOM - (BOTTOM - TOP) * np.clip(values, 0.0, 1.0)
    points = " ".join(f"{_x(nm, ends):.1f},{level:.1f}" for nm, level in zip(at.tolist(), y.tolist(), strict=True))
    if curve.dashes == "area":
        around = f"{LEFT},{BOTTOM} {points} {RIGHT},{BOTTOM}"
        return element("polygon", points=around, fill=curve.color, fill_opacity="0.3")
    return element(
        "polyline", points=points, fill="none", stroke=curve.color, stroke_width="2",
        stroke_dasharray=curve.dashes or None,
    )  # fmt: skip


def _axis(low: float, high: float) -> list[Html]:
    steps = (10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1000.0)
    step = next((s for s in steps if (high - low) / s <= 6), steps[-1])
    ticks = np.arange(np.ceil(low / step) * step, high + 1e-9, step)
    base = element("line", x1=LEFT, x2=RIGHT, y1=BOTTOM, y2=BOTTOM, stroke="currentColor", stroke_opacity="0.6")
    labels = []
    for nm in ticks.tolist():
        x = f"{_x(nm, (low, high)):.1f}"
        labels.append(element("line", x1=x, x2=x, y1=BOTTOM, y2=BOTTOM + 4, stroke="currentColor"))
        labels.append(_label(_x(nm, (low, high)), f"{nm:g}" + (" nm" if nm == ticks[-1] else "")))
    return [base, *labels]


def _label(x: float, text: str) -> Html:
    """A number under the axis, moved inside where it would leave the picture."""
    reach = 4.0 * len(text)
    x = min(max(x, reach), WIDTH - reach)
    return element(
        "text", text, x=f"{x:.1f}", y=BOTTOM + 17, fill="currentColor", font_size="12", font_family="sans-serif",
        text_anchor="middle",
    )  # fmt: skip


def _key(curve: Curve) -> Html:
    sample = (
        element("rect", x="0", y="2", width="22", height="8", fill=curve.color, fill_opacity="0.3")
        if curve.dashes == "area"
        else element(
            "line", x1="0", x2="22", y1="6", y2="6", stroke=curve.color, stroke_width="2",
            stroke_dasharray=curve.dashes or None,
        )
    )  # fmt: skip
    picture = element("svg", sample, width="22", height="12", aria_hidden="true", style="vertical-align:middle")
    return element("span", picture, " ", words(curve.name), style="margin-right:1.2em;white-space:nowrap")
