"""Ticks of a logarithmic axis with both ends labelled, so that nobody has to guess where it begins and stops."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from codesign.report.layout import number

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Ticks nearer to an end than this share of the axis give way to it.
CROWDED = 0.07
#: Steps within a decade, the finest that leave no more labels than fit.
STEPS = ((1, 2, 5), (1, 3), (1,))


def log_ticks(low: float, high: float, most: int = 8) -> list[float]:
    """Return ticks from ``low`` to ``high``, both ends among them, at most about ``most``.

    Examples
    --------
    >>> log_ticks(3, 400)
    [3, 5, 10, 20, 50, 100, 200, 400]
    """
    first, last = math.floor(math.log10(low)), math.ceil(math.log10(high))
    span = math.log(high / low)
    if span <= 0:
        return [low]
    for steps in STEPS:
        inner = [step * 10**k if k >= 0 else step / 10**-k for k in range(first, last + 1) for step in steps]
        inner = [x for x in inner if math.log(x / low) > CROWDED * span and math.log(high / x) > CROWDED * span]
        if len(inner) + 2 <= most:
            break
    return [low, *inner, high]


def log_axis(axes: Axes, which: str, low: float, high: float, most: int = 8) -> None:
    """Make an axis ("x" or "y") logarithmic from ``low`` to ``high``, its ends labelled."""
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

    getattr(axes, f"set_{which}scale")("log")
    axis, ticks = getattr(axes, f"{which}axis"), log_ticks(low, high, most)
    axis.set_major_locator(FixedLocator(ticks))
    axis.set_major_formatter(FixedFormatter([number(x, 3) for x in ticks]))
    axis.set_minor_locator(NullLocator())
    getattr(axes, f"set_{which}lim")(low, high)
