"""The look of figures and pages in one place: colours that colour-blind readers can tell apart, and their meaning.

Colour never stands alone: line style, marker, hatch or a written label always says the same.
"""

from __future__ import annotations

from collections.abc import Mapping

#: Ground, text and rules.
PAPER, CARD, INK, MUTED, RULE = "#fbfaf6", "#ffffff", "#1d2733", "#55606e", "#d8d3c7"
#: What a colour means wherever it appears.
TARGET, BACKGROUND, FILTER, SENSOR, AMBIENT = "#c04a16", "#24507f", "#1f8074", "#14222c", "#c79a12"
#: One thing beside another, in this order; told apart in grey print as well.
SERIES = (BACKGROUND, TARGET, FILTER, AMBIENT, SENSOR, "#9a8877", "#6fb1e8", "#cf9abf")
#: Line styles and markers that go with ``SERIES``.
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (1, 1)), (0, (8, 2)), (0, (3, 1)))
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "*")
#: How a limit or a requirement stands; always with a word or sign beside it.
MET, NEAR, MISSED = "#2b7a4b", "#8f5a00", "#b3261e"
#: Dark variants of the ground for screens that ask for it.
DARK: Mapping[str, str] = {
    "paper": "#14191f", "card": "#1b222a", "ink": "#eceae4", "muted": "#a4adb8", "rule": "#39434e",
    "target": "#f08a52", "background": "#7fb2e5", "filter": "#5cc4b3", "sensor": "#dfe6ea", "ambient": "#e3bd4b",
    "met": "#6fc48d", "near": "#e0a84a", "missed": "#ff8a80",
}  # fmt: skip


def css_properties() -> str:
    """Return the colours as CSS custom properties (``--ink``, ``--target`` ..), light and dark."""
    light = {
        "paper": PAPER, "card": CARD, "ink": INK, "muted": MUTED, "rule": RULE, "target": TARGET,
        "background": BACKGROUND, "filter": FILTER, "sensor": SENSOR, "ambient": AMBIENT, "met": MET, "near": NEAR,
        "missed": MISSED,
    }  # fmt: skip
    text = "".join(f"--{name}:{value};" for name, value in light.items())
    dark = "".join(f"--{name}:{value};" for name, value in DARK.items())
    return f":root{{{text}}}@media screen and (prefers-color-scheme:dark){{:root{{{dark}}}}}"
