"""Ticks with both ends of an axis labelled, so that nobody has to guess where it begins and stops."""

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
#: Ticks of a linear axis at most, beside its ends.
MOST = 6
#: Free room between two labels side by side, and from one line of labels to the next. [mm]
APART, LINE = 2.0, 4.0


def tick_words(value: float) -> str:
    """Return a value on an axis in three digits, without powers of ten in everyday ranges."""
    text = f"{abs(value):.0f}" if 1000 <= abs(value) < 1e7 else f"{abs(value):.3g}"
    return f"−{text}" if value < 0 else text


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
    return math.log(b / a) >= _room((a, b), needs) * span


def linear_ticks(low: float, high: float, needs: Sequence[float]) -> list[float]:
    """Return round ticks from ``low`` to ``high`` and both ends; ``needs`` as for `log_ticks`.

    Examples
    --------
    >>> linear_ticks(50, 900, [0.1])
    [50, 150.0, 300.0, 450.0, 600.0, 750.0, 900]
    """
    from matplotlib.ticker import MaxNLocator

    for count in range(min(int(1 / needs[0]), MOST), 1, -1):
        inner = [float(x) for x in MaxNLocator(count).tick_values(low, high) if low < x < high]
        found = [low, *(x for x in inner if _clear((x - low) / (high - low), (low, x, high), needs)), high]
        shares = [(x - low) / (high - low) for x in found]
        if all(
            b - a >= _room((x, y), needs)
            for (a, b), (x, y) in zip(itertools.pairwise(shares), itertools.pairwise(found), strict=True)
        ):
            return found
    return [low, high]


def _clear(share: float, values: tuple[float, float, float], needs: Sequence[float]) -> bool:
    """Whether the label of a value leaves those of both ends room."""
    low, x, high = values
    return share >= _room((low, x), needs) and 1 - share >= _room((x, high), needs)


def _room(values: Sequence[float], needs: Sequence[float]) -> float:
    """Distance that the labels of two values need, as share of the axis."""
    return sum(needs[min(len(tick_words(each)), len(needs)) - 1] for each in values) / 2


def tick_axis(
    axes: Axes, which: str, values: Sequence[float], ends: tuple[float, float], length_mm: float, *, log: bool
) -> None:
    """Set scale, ends and ticks of an axis on which something was worked out at a few values.

    The values themselves are the ticks where they are round and their labels fit; else round values and both ends.

    Parameters
    ----------
    axes : Axes
    which : {"x", "y"}
    values : sequence of float
    ends : (float, float)
        Limits of the axis, in either order.
    length_mm : float
        About how long the axis is in print. [mm]
    log : bool
    """
    getattr(axes, f"set_{which}scale")("log" if log else "linear")
    low, high = sorted(ends)
    needs = _needs(axes, which, length_mm)
    own = sorted(set(map(float, values)))
    round_ = all(math.isclose(float(tick_words(x).replace("−", "-")), x, rel_tol=1e-9, abs_tol=1e-12) for x in own)
    place = math.log if log else float
    apart = all(
        place(b) - place(a) >= _room((a, b), needs) * (place(high) - place(low)) for a, b in itertools.pairwise(own)
    )
    first, last = min(own), max(own)
    if not (round_ and apart) and len(own) > 1:
        own = log_ticks(first, last, needs) if log else linear_ticks(first, last, needs)
    _set(axes, which, own)
    getattr(axes, f"set_{which}lim")(*ends)


def _needs(axes: Axes, which: str, length_mm: float) -> list[float]:
    """Room of labels of 1, 2, 3 .. characters as share of an axis."""
    wide = text_width(axes.get_figure(root=False), "0", SMALL)
    return [(count * wide + APART if which == "x" else LINE) / length_mm for count in range(1, 12)]


def _set(axes: Axes, which: str, ticks: Sequence[float]) -> None:
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

    axis = getattr(axes, f"{which}axis")
    axis.set_major_locator(FixedLocator(list(ticks)))
    axis.set_major_formatter(FixedFormatter([tick_words(x) for x in ticks]))
    axis.set_minor_locator(NullLocator())


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
    getattr(axes, f"set_{which}scale")("log")
    _set(axes, which, log_ticks(low, high, _needs(axes, which, length_mm)))
    getattr(axes, f"set_{which}lim")(low, high)
