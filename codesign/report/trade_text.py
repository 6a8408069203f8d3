"""Trade-off curves as plain text and as a dictionary for JSON.

``trade_dict`` (schema ``codesign.trade/1``; conventions as in `codesign.report.machine`)

======================== ===========================================================================================
problem                  {"title", "file", "required_cnr"}
curves                   [curve], one per quantity asked for
======================== ===========================================================================================

Each curve is {"against", "unit", "field": what limits it in a problem file, "own_limit": of the problem, or None; the
curve also looks beyond it, "required_cnr", "enough": {"cnr", "value": what a settable recipe needs for it or None,
"bound": with this or less none does} or None, "most": the same for 95 % of the greatest CNR, "gap": proven at each
point, "resolves", "points": [{"used", "limit": the CNR bound holds up to it, "possible", "cnr", "cnr_bound",
"recipe_cnr", "mark": "enough", "own" or "", "settings": of the optimum before rounding, "recipe": settings in whole
steps or None, "binding", "reason"}]}.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from codesign.report.layout import NARROWEST, bar, bullet, heading, labelled, number, percent, table
from codesign.report.output import plain
from codesign.report.study_text import configuration_letters, configuration_words
from codesign.report.text import UNITS
from codesign.study.trade import MOST, Enough, Trade, TradePoint

TRADE_SCHEMA = "codesign.trade/1"
_SETTINGS = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma")
#: Length of the bars, and the narrowest page that has room for them. [characters]
BAR, ROOM_FOR_BARS = 16, 76
#: Values this near to each other are told as one. [1]
SAME = 1e-3
#: What a point is, beside its bar.
MARKS = {"enough": "◄ enough", "own": "◄ limit", "": ""}


def trade_text(curves: Sequence[Trade], width: int = 80) -> str:
    """Return trade-off curves of one problem as plain text.

    Parameters
    ----------
    curves : sequence of Trade
        One at least.
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    letters = configuration_letters([point.optimum for curve in curves for point in curve.points])
    lines = [heading(plain(curves[0].title), width)]
    if curves[0].required_cnr is not None:
        lines += labelled("required", f"CNR {curves[0].required_cnr:g}", width)
    for curve in curves:
        lines += ["", *_curve(curve, letters, width)]
    lines += ["", *_parts(curves, letters, width), "", *_sure(curves, width)]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def in_units(curve: Trade, value: float) -> str:
    """A value of what CNR is traded against, with its unit."""
    return f"{shown_amount(value)} {UNITS.get(curve.quantity.unit, curve.quantity.unit)}".rstrip()


def shown_amount(value: float) -> str:
    """A value in few digits; prices and counts keep one behind the point where they have it."""
    return f"{value:.1f}".removesuffix(".0") if 100 <= value < 1e5 else number(value)


def axis_words(curve: Trade) -> str:
    """Name and unit of what CNR is traded against."""
    unit = UNITS.get(curve.quantity.unit, curve.quantity.unit)
    return curve.quantity.label + (f" [{unit}]" if unit else "")


def _curve(curve: Trade, letters: dict[tuple[str, ...], str], width: int) -> list[str]:
    lines = [heading(f"CNR against {curve.quantity.label}", width)]
    if curve.enough is not None:
        lines += labelled("enough", least_words(curve, curve.enough, f"CNR {curve.enough.cnr:g}"), width)
    lines += labelled("nearly all", least_words(curve, curve.most, nearly_words(curve)), width)
    lines += labelled("most", _top(curve), width)
    if curve.own_limit is not None:
        lines += labelled("your limit", _own(curve), width)
    top = max(point.optimum.cnr for point in curve.possible)
    size = BAR if width >= ROOM_FOR_BARS else 0
    rows = [_row(curve, point, letters, top, size) for point in curve.points]
    header = (axis_words(curve), "CNR", "bound", "in steps", "use", "", "")
    return [*lines, *table(header, rows, width, left=(4, 5, 6))]


def nearly_words(curve: Trade) -> str:
    """Say which CNR is nearly the greatest there is."""
    return f"CNR {number(curve.most.cnr)}, {100 * MOST:g} % of the most"


def least_words(curve: Trade, least: Enough, wanted: str) -> str:
    """Say how little of the quantity is enough for a CNR, and what is proven of less."""
    if not least.reached:
        return f"no recipe reaches {wanted}, however much {curve.quantity.label}"
    if least.value <= 0:
        return f"{wanted} needs none: ambient light is enough"
    text = f"{in_units(curve, least.value)} for {wanted}"
    if least.value <= least.bound * (1 + SAME) or (curve.quantity.whole and least.bound == least.value - 1):
        return f"{text}; no recipe has it with less"
    return f"{text}; none has it with {in_units(curve, least.bound)} or less" if least.bound > 0 else f"{text}, or less"


def _top(curve: Trade) -> str:
    """The end of the curve, and what holds it there."""
    last = curve.possible[-1]
    held = "; ".join(last.optimum.binding)
    text = f"CNR {_cnr(last.optimum.cnr)} with {in_units(curve, last.used)}; more brings nothing"
    return f"{text}, held by {held}" if held else text


def _own(curve: Trade) -> str:
    last = curve.points[-1].limit
    text = f"{in_units(curve, curve.own_limit)} ({curve.quantity.field})"
    return f"{text}; more than can be used" if curve.own_limit > last else f"{text}; the curve looks beyond it"


def _row(
    curve: Trade, point: TradePoint, letters: dict[tuple[str, ...], str], top: float, size: int
) -> tuple[str, ...]:
    if not point.optimum.possible:
        return (f"≤ {shown_amount(point.limit)}", "none", "", "", "", "", MARKS[point.mark])
    optimum = point.optimum
    return (
        shown_amount(point.used),
        _cnr(optimum.cnr),
        _cnr(optimum.bound, 5),
        "none" if point.recipe is None else _cnr(point.recipe_cnr),
        letters[optimum.configuration],
        bar(optimum.cnr / top, size),
        MARKS[point.mark],
    )


def _cnr(value: float, digits: int = 4) -> str:
    return f"{value:#.{digits}g}" if 1e-3 <= value < 1e3 else number(value, digits)


def _parts(curves: Sequence[Trade], letters: dict[tuple[str, ...], str], width: int) -> list[str]:
    """What each letter stands for, and where it is best."""
    lines = [heading("what to use", width)]
    for configuration, letter in letters.items():
        own = [(curve, [p for p in curve.possible if p.optimum.configuration == configuration]) for curve in curves]
        where = [_stretch(curve, points) for curve, points in own if points]
        words = next(configuration_words(points[0].optimum) for _, points in own if points)
        lines += labelled(letter, f"{words}; {', '.join(where)}", width)
    return lines


def _stretch(curve: Trade, points: Sequence[TradePoint]) -> str:
    first, last = in_units(curve, points[0].used), in_units(curve, points[-1].used)
    span = first if first == last else f"{shown_amount(points[0].used)} to {last}"
    return f"{curve.quantity.label} {span}"


def _sure(curves: Sequence[Trade], width: int) -> list[str]:
    gaps = [p.optimum.bound / p.optimum.cnr - 1 for c in curves for p in c.possible if p.optimum.cnr > 0]
    most = percent(max([1e-6, *gaps]))
    solved = sum(curve.resolves for curve in curves)
    lines = [heading("how sure this is", width)]
    text = (
        f"each point is certified: with what it uses, no recipe has a CNR more than {most} above the one shown "
        "before rounding; 'in steps' is what can be dialled in"
    )
    lines += bullet(text, width)
    text = f"a curve never falls, so between two points the CNR lies between theirs; problems solved: {solved}"
    return lines + bullet(text, width)


def trade_dict(curves: Sequence[Trade]) -> dict[str, Any]:
    """Return trade-off curves as a dictionary of plain values; the module says what each key holds."""
    first = curves[0]
    return {
        "schema": TRADE_SCHEMA,
        "problem": {"title": first.title, "file": first.where, "required_cnr": first.required_cnr},
        "curves": [_curve_dict(curve) for curve in curves],
    }


def _curve_dict(curve: Trade) -> dict[str, Any]:
    return {
        "against": curve.quantity.name,
        "unit": curve.quantity.unit,
        "field": curve.quantity.field,
        "own_limit": curve.own_limit,
        "required_cnr": curve.required_cnr,
        "enough": None if curve.enough is None else _enough_dict(curve.enough),
        "most": _enough_dict(curve.most),
        "gap": curve.gap,
        "resolves": curve.resolves,
        "points": [_point_dict(point) for point in curve.points],
    }


def _enough_dict(least: Enough) -> dict[str, Any]:
    return {"cnr": least.cnr, "value": _finite(least.value), "bound": least.bound}


def _point_dict(point: TradePoint) -> dict[str, Any]:
    optimum, recipe = point.optimum, None if point.recipe is None else point.recipe.design
    return {
        "used": point.used,
        "limit": point.limit,
        "possible": optimum.possible,
        "cnr": _finite(optimum.cnr),
        "cnr_bound": _finite(optimum.bound),
        "recipe_cnr": _finite(point.recipe_cnr),
        "mark": point.mark,
        "settings": {name: getattr(optimum, name) for name in _SETTINGS} if optimum.possible else None,
        "recipe": None if recipe is None else {name: getattr(recipe, name) for name in (*_SETTINGS, "emitters")},
        "binding": list(optimum.binding),
        "reason": optimum.reason,
    }


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
