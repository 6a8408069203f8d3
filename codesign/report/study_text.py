"""What-ifs and worths of parts as plain text."""

from __future__ import annotations

from collections.abc import Sequence
from string import ascii_uppercase
from typing import Any

from codesign.report.layout import NARROWEST, bullet, heading, labelled, number, percent, table
from codesign.report.output import plain
from codesign.study.fields import Axis
from codesign.study.vary import Point, Variation
from codesign.study.worth import PartWorth, Worths

#: Where limits cannot be met.
NOTHING = "·"
#: Changes of the CNR below this share read as none.
SMALLEST_SHARE = 1e-5


def variation_text(found: Variation, width: int = 80) -> str:
    """Return a what-if as plain text: a line per point, or a map of two axes, then the configurations.

    Parameters
    ----------
    found : Variation
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    letters = configuration_letters(found.points)
    lines = [heading(plain(found.title), width)]
    lines += labelled("as it is", _sentence(found.base), width)
    for key, value in found.settings.items():
        lines += labelled("set", f"{plain(key)} = {shown_value(value)}", width)
    if found.required_cnr is not None:
        lines += labelled("required", f"CNR {found.required_cnr:g}", width)
    body = _map(found, letters, width) if len(found.axes) == 2 else _rows(found, letters, width)
    lines += ["", *body, "", *_configurations(found, letters, width), *_conflicts(found, width)]
    lines += ["", heading("how sure this is", width)]
    gaps = [point.bound / point.cnr - 1 for point in found.points if point.possible]
    most = percent(max(gaps, default=0.0), 1e-6)
    sure = f"each point is certified on its own: no configuration has a CNR more than {most} above the one shown"
    lines += bullet(f"{sure}; before rounding to setting steps", width)
    return "\n".join(line.rstrip() for line in lines) + "\n"


def configuration_letters(points: Sequence[Point]) -> dict[tuple[str, ...], str]:
    """A short name for each configuration (camera, channel, filter, LEDs), in the order they appear."""
    seen = dict.fromkeys(point.configuration for point in points if point.possible)
    return {each: _letter(index) for index, each in enumerate(seen)}


def _letter(index: int) -> str:
    more, last = divmod(index, len(ascii_uppercase))
    return (_letter(more - 1) if more else "") + ascii_uppercase[last]


def shown_value(value: Any) -> str:
    """A value on an axis in few characters."""
    if value is None:
        return "none"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, int | float):
        return number(value, 5)
    return plain(", ".join(map(str, value)) if isinstance(value, list | tuple) else str(value))


def configuration_words(point: Point) -> str:
    """Camera, filter and LEDs of a point in words."""
    channel = "" if point.channel == "mono" else f" ({plain(point.channel)})"
    part = "no filter" if point.filter == "none" else point.filter
    return f"{point.camera}{channel}, {part}, {' + '.join(point.leds) or 'no LED'}"


def _cnr(value: float, digits: int = 4) -> str:
    """A CNR with trailing zeros, so that columns line up."""
    return f"{value:#.{digits}g}" if 1e-3 <= value < 1e3 else number(value, digits)


def _sentence(point: Point) -> str:
    if not point.possible:
        return point.reason
    return f"CNR {_cnr(point.cnr)}, none above {_cnr(point.bound, 5)}: {configuration_words(point)}"


def _rows(found: Variation, letters: dict[tuple[str, ...], str], width: int) -> list[str]:
    """One line per point."""
    if not found.axes:
        return labelled("then", _sentence(found.points[0]), width)
    axis = found.axes[0]
    rows = [
        (
            shown_value(point.values[0]),
            _cnr(point.cnr) if point.possible else "none",
            _cnr(point.bound, 5) if point.possible else "",
            letters.get(point.configuration, NOTHING),
            "; ".join(point.binding if point.possible else point.limits) or ("" if point.possible else point.reason),
        )
        for point in found.points
    ]
    header = (axis.label, "CNR", "bound", "use", "limits reached")
    return [heading(axis.key, width), *table(header, rows, width, left=(3, 4), flow=4)]


def _map(found: Variation, letters: dict[tuple[str, ...], str], width: int) -> list[str]:
    """CNR over two axes, as many columns as fit."""
    first, second = found.axes
    rows, columns = len(first.values), len(second.values)
    cells = [
        f"{_cnr(point.cnr)} {letters[point.configuration]}" if point.possible else f"none {NOTHING}"
        for point in found.points
    ]
    names = [shown_value(value) for value in second.values]
    left = max(len(shown_value(value)) for value in first.values)
    size = max(map(len, [*cells, *names])) + 2
    step = -(-columns // max((width - left - 1) // size, 1))
    kept = range(0, columns, step)
    lines = [heading("CNR and what to use", width)]
    lines += labelled("down", _axis_words(first), width)
    lines += labelled("across", _axis_words(second) + (f" (one column in {step} shown)" if step > 1 else ""), width)
    header = ["", *(names[k] for k in kept)]
    body = [[shown_value(first.values[i]), *(cells[i * columns + k] for k in kept)] for i in range(rows)]
    return [*lines, *table(header, body, width, left=())]


def _axis_words(axis: Axis) -> str:
    return f"{axis.label}, {axis.key}"


def _configurations(found: Variation, letters: dict[tuple[str, ...], str], width: int) -> list[str]:
    """What each letter stands for."""
    lines = [heading("what to use", width)] if letters else []
    for configuration, letter in letters.items():
        own = [point for point in found.points if point.possible and point.configuration == configuration]
        best = max(own, key=lambda point: point.cnr)
        points = f"{len(own)} point" + ("s" if len(own) > 1 else "")
        text = f"{configuration_words(best)}; {points}, CNR up to {_cnr(best.cnr)}"
        lines += labelled(letter, text, width)
    return lines


def _conflicts(found: Variation, width: int) -> list[str]:
    """Why some points have no result: each reason once."""
    lost = [point for point in found.points if not point.possible]
    if not lost:
        return []
    lines = ["", heading(f"limits that cannot be met: {len(lost)} of {len(found.points)} points", width)]
    kinds: dict[tuple[str, ...], list[Point]] = {}
    for point in lost:
        kinds.setdefault(point.limits or (point.reason,), []).append(point)
    for own in kinds.values():
        where = ", ".join(
            f"{axis.label} {shown_value(value)}" for axis, value in zip(found.axes, own[0].values, strict=True)
        )
        lines += bullet(f"{len(own)} points, e.g. at {where}: {own[0].reason}" if where else own[0].reason, width)
    return lines


def worth_text(found: Worths, width: int = 80) -> str:
    """Return the worth of each part as plain text.

    Parameters
    ----------
    found : Worths
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    lines = [heading(plain(found.title), width)]
    lines += labelled("as it is", f"CNR {_cnr(found.cnr)}, none above {_cnr(found.bound, 5)}", width)
    lines += ["", heading("if it were not in stock", width)]
    header = ("part", "CNR then", "lost", "what comes in for it")
    lines += table(header, [_loss(part, found.cnr) for part in found.parts], width, left=(0, 3))
    for part in found.parts:
        if part.reason:
            lines += bullet(f"without {part.kind} {part.id}: {part.reason}", width)
    if found.tried:
        lines += ["", heading(f"if it were in stock: {found.tried} further parts tried", width)]
        rows = [_gain(part, found.cnr) for part in found.additions]
        lines += (
            table(("part", "CNR then", "gained", "instead of"), rows, width, left=(0, 3))
            if rows
            else bullet(f"none of them raises the CNR above {_cnr(found.cnr)}", width)
        )
    if any(not part.certain for part in (*found.parts, *found.additions)):
        lines += ["", *bullet("≈ marks changes within what the proofs leave open", width)]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _loss(part: PartWorth, cnr: float) -> tuple[str, ...]:
    if part.reason:
        return (f"{part.kind} {part.id}", "none", "all" if part.change == part.change else "", "nothing")
    return (
        f"{part.kind} {part.id}",
        _cnr(part.cnr),
        _share(part, cnr),
        ", ".join(part.substitute) or "more of the parts in use",
    )


def _gain(part: PartWorth, cnr: float) -> tuple[str, ...]:
    return (
        f"{part.kind} {part.id}",
        _cnr(part.cnr),
        _share(part, cnr),
        ", ".join(part.substitute) or "nothing",
    )


def _share(part: PartWorth, cnr: float) -> str:
    if part.change < SMALLEST_SHARE * cnr:
        return "≈ 0"
    mark = "" if part.certain else "≈ "
    return f"{mark}{number(part.change, 3)} ({percent(part.change / cnr)})"
