"""Ticks of a logarithmic axis with both ends labelled, so that nobody has to guess where it begins and stops."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from codesign.report.figures.base import SMALL, text_width

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Steps within a decade, the finest that leave no more labels than fit.
STEPS = ((1, 2, 5), (1, 3), (1,))
#: Round numbers that an axis may end at.
ROUND = (1, 1.5, 2, 3, 4, 5, 6, 8, 10)
#: Free room between two labels side by side, and from one line of labels to the next. [mm]
APART, LINE = 2.0, 4.0


def tick_words(value: float) -> str:
    """Return a value on an axis in three digits, without powers of ten in everyday ranges."""
    return f"{value:.0f}" if 1000 <= abs(value) < 1e7 else f"{value:.3g}"


def rounded_out(low: float, high: float) -> tuple[float, float]:
    """Return the nearest round numbers at or beyond two positive values.

    Examples
    --------
    >>> rounded_out(0.00053, 16.5)
    (0.0005, 20.0)
    """
    return _round(low, below=True), _round(high, below=False)


def _round(value: float, *, below: bool) -> float:
    exponent = math.floor(math.log10(value) + 1e-12)
    mantissa, slack = value / 10.0**exponent, 1e-9
    if below:
        step = max(step for step in ROUND if step <= mantissa * (1 + slack))
    else:
        step = min(step for step in ROUND if step >= mantissa * (1 - slack))
    return float(f"{step}e{exponent}")


def log_ticks(low: float, high: float, needs: Sequence[float] | None = None) -> list[float]:
    """Return ticks from ``low`` to ``high``, both ends among them, those between as fine as fits.

    Parameters
    ----------
    low, high : float
    needs : (share per label,) or None
        Room that a label of 1, 2, 3 .. characters takes beside another, as share of the axis; the last holds for
        longer ones. 0.1 for all by default.

    Examples
    --------
    >>> log_ticks(3, 400)
    [3, 5, 10, 20, 50, 100, 200, 400]
    """
    span = math.log(high / low)
    if span <= 0:
        return [low]
    for steps in STEPS:
        found = [low, *_inner(low, high, steps, needs or [0.1]), high]
        if all(_far(a, b, span, needs or [0.1]) for a, b in itertools.pairwise(found)):
            return found
    return [low, high]


def _inner(low: float, high: float, steps: Sequence[int], needs: Sequence[float]) -> list[float]:
    """Round values between the ends and not too near to these."""
    first, last, span = math.floor(math.log10(low)), math.ceil(math.log10(high)), math.log(high / low)
    every = [step * 10**k if k >= 0 else step / 10**-k for k in range(first, last + 1) for step in steps]
    return [x for x in every if low < x < high and _far(low, x, span, needs) and _far(x, high, span, needs)]


def _far(a: float, b: float, span: float, needs: Sequence[float]) -> bool:
    """Whether the labels of two values leave each other room."""
    room = sum(needs[min(len(tick_words(each)), len(needs)) - 1] for each in (a, b)) / 2
    return math.log(b / a) >= room * span


def log_axis(axes: Axes, which: str, low: float, high: float, length_mm: float) -> None:
    """Make an axis ("x" or "y") logarithmic from ``low`` to ``high``, its ends labelled.

    Parameters
    ----------
    axes : Axes
    which : {"x", "y"}
    low, high : float
    length_mm : float
        About how long the axis is in print. [mm]
    """
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

    wide = text_width(axes.get_figure(root=False), "0", SMALL)
    needs = [(count * wide + APART if which == "x" else LINE) / length_mm for count in range(1, 12)]
    ticks = log_ticks(low, high, needs)
    getattr(axes, f"set_{which}scale")("log")
    axis = getattr(axes, f"{which}axis")
    axis.set_major_locator(FixedLocator(ticks))
    axis.set_major_formatter(FixedFormatter([tick_words(x) for x in ticks]))
    axis.set_minor_locator(NullLocator())
    getattr(axes, f"set_{which}lim")(low, high)
