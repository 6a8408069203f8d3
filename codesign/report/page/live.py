"""The live page: a part of the HTML report in which every setting can be moved, with the forward model in the browser.

It is plain HTML, CSS and scripts that the document embeds. The scripts read the data as JSON from the element
``live-data``; names of parts reach the page as text only.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cache
from importlib import resources
from typing import TYPE_CHECKING, Any

from codesign.report.page.live_data import live_data
from codesign.report.page.live_parts import kept_parts

if TYPE_CHECKING:
    from codesign.solve import Solution

#: In the order in which they run.
SCRIPTS = (
    "model_light.js", "model.js", "model_limits.js", "model_combined.js",
    "live_text.js", "live_plots.js", "live_controls.js", "live_show.js", "live.js",
)  # fmt: skip

_LEFT_OUT = (
    '<section class="live" id="live"><h2>Try it</h2><p class="live-none">The page to play with is left out here: its '
    "data would take more room than a file to be mailed can have. <code>cnr check</code> tells what a recipe does.</p>"
    "</section>"
)


@dataclass(frozen=True, slots=True, kw_only=True)
class LiveFragment:
    """What a document embeds: markup, style, scripts in order, data for JSON; the last two empty without live page."""

    html: str
    css: str
    scripts: tuple[str, ...] = ()
    data: dict[str, Any] = field(default_factory=dict)


def live_fragment(solution: Solution) -> LiveFragment:
    """Return the live page of a solution.

    Parameters
    ----------
    solution : Solution

    Returns
    -------
    LiveFragment
        Colours are the custom properties of `codesign.report.house.css_properties`. Where the data would not fit, one
        line says so and there are no scripts.
    """
    css = _asset("live.css")
    kept = kept_parts(solution)
    if kept is None:
        return LiveFragment(html=_LEFT_OUT, css=css)
    scripts = tuple(_asset(name) for name in SCRIPTS)
    return LiveFragment(html=_asset("live.html"), css=css, scripts=scripts, data=live_data(solution, kept))


@cache
def _asset(name: str) -> str:
    return resources.files("codesign.report.page").joinpath("assets", name).read_text(encoding="utf-8")
