"""What could be had without much thought: one white LED (or any one LED), no filter, set as well as can be."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.catalog import Led
from codesign.design import Performance
from codesign.errors import CodesignError
from codesign.problem import Problem
from codesign.solve import solve
from codesign.study.fields import varied

#: Blue, green and red in the visible; an LED is white when each holds at least `LEAST_SHARE` of the light in them. [nm]
BANDS = ((430.0, 490.0), (500.0, 570.0), (590.0, 660.0))
LEAST_SHARE = 0.08
#: What makes a problem one of plain light, besides the LEDs: no filter, one LED, one reading, whatever it costs.
PLAIN = {
    "candidates.filters": "none", "candidates.no_filter": True, "candidates.filter_pairs": False,
    "build": None, "detection": None,
}  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class PlainLight:
    """The certified best recipe with one LED and no filter.

    ``words`` say what it is; ``problem`` is the one it belongs to, with the same scene, cameras, rig and limits.
    """

    words: str
    problem: Problem
    performance: Performance


def plain_light(problem: Problem) -> PlainLight | None:
    """Find the best recipe with one white LED and no filter, else with any one LED; None where nothing can be seen.

    White LEDs are those among the candidates, else those of the whole catalogue.

    Parameters
    ----------
    problem : Problem

    Examples
    --------
    >>> from codesign import load_problem
    >>> plain_light(load_problem("yellow-stain")).words
    'white-6500k-a alone, no filter'
    """
    candidates = [channel.led for channel in problem.channels]
    for leds in (whites(candidates), whites(list(problem.catalog.leds.values())), candidates):
        found = _best(problem, leds)
        if found is not None:
            return found
    return None


def whites(leds: list[Led]) -> list[Led]:
    """Those LEDs that hold blue, green and red light."""
    return [led for led in leds if is_white(led)]


def is_white(led: Led) -> bool:
    """Whether an LED holds blue, green and red light."""
    if not BANDS[0][0] <= led.peak() <= BANDS[-1][1]:
        return False
    bands = [np.arange(low, high + 1.0) for low, high in BANDS]
    shares = np.array([led.spectrum(band, 0.0).sum() for band in bands])
    return bool(shares.min() >= LEAST_SHARE * shares.sum())


def _best(problem: Problem, leds: list[Led]) -> PlainLight | None:
    """Best recipe with one of some LEDs and no filter, None where none shows anything within the limits."""
    if not leds:
        return None
    try:
        plain = varied(problem, {"candidates.leds": [led.id for led in leds], **PLAIN})
        plain = varied(plain, {"build.max_led_channels": 1})
        performance = solve(plain, alternatives=0).recipe
    except CodesignError:
        return None
    if not performance.cnr > 0 or not performance.leds:  # ambient light alone shows more than these LEDs would add
        return None
    words = f"{performance.leds[0].id} alone, no filter"
    return PlainLight(words=words, problem=plain, performance=performance)
