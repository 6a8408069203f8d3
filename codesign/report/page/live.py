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
SCRIPTS = ("model.js", "model_limits.js", "live_text.js", "live_plots.js", "live_controls.js", "live.js")

_LEFT_OUT = '<section class="live" id="live"><h2>Try it</h2><p class="live-none">{}</p></section>'
_COMBINED = (
    "The page to play with shows single readings. This problem combines several with weights, so it is left out here; "
    "<code>cnr check</code> tells what any recipe does."
)
_TOO_LARGE = (
    "The page to play with is left out here: the measured samples of the surfaces take more room than a file to be "
    "mailed can have. <code>cnr check</code> tells what any recipe does."
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
        Colours are the custom properties of `codesign.report.house.css_properties`. Where readings are combined, or the
        data would not fit, one line says so and there are no scripts.
    """
    css = _asset("live.css")
    if solution.problem.combined:
        return LiveFragment(html=_LEFT_OUT.format(_COMBINED), css=css)
    kept = kept_parts(solution)
    if kept is None:
        return LiveFragment(html=_LEFT_OUT.format(_TOO_LARGE), css=css)
    scripts = tuple(_asset(name) for name in SCRIPTS)
    return LiveFragment(html=_asset("live.html"), css=css, scripts=scripts, data=live_data(solution, kept))


@cache
def _asset(name: str) -> str:
    return resources.files("codesign.report.page").joinpath("assets", name).read_text(encoding="utf-8")
