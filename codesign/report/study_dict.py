"""What-ifs and worths of parts as plain dictionaries for JSON; conventions as in `codesign.report.machine`.

``variation_dict`` (schema ``codesign.variation/1``)

======================== ===========================================================================================
problem                  {"title", "file", "required_cnr"}
settings                 {field: value}, set at all points
axes                     [{"field", "label": with unit, "values", "log": whether spaced by ratios}]
gap                      relative gap proven at each point
base                     the problem as it is: a point
points                   [point], in row-major order of the axes: {"values": on the axes, "possible", "cnr" and
                         "cnr_bound": None where nothing is possible, "settings": {"camera", "channel", "gain_db",
                         "filter", "f_number", "exposure_us", "drive_ma"} before rounding to steps, "binding":
                         [limit], "reason": why nothing is possible, "limits": [those in conflict]}
======================== ===========================================================================================

``worth_dict`` (schema ``codesign.worth/1``)

======================== ===========================================================================================
problem                  {"title", "file"}
cnr, cnr_bound           of the problem as it is
parts                    [part in use]: {"kind", "id", "cnr" and "cnr_bound": without it, "change": CNR lost,
                         "certain": whether that is more than the proofs leave open, "substitute": [text], "reason"}
additions                [part that helps]: the same with it, "change" the CNR gained, "substitute" what it replaces
tried                    number of parts tried as additions
======================== ===========================================================================================
"""

from __future__ import annotations

import math
from typing import Any

from codesign.study.vary import Point, Variation
from codesign.study.worth import PartWorth, Worths

VARIATION_SCHEMA = "codesign.variation/1"
WORTH_SCHEMA = "codesign.worth/1"


def variation_dict(found: Variation) -> dict[str, Any]:
    """Return a what-if as a dictionary of plain values; the module says what each key holds."""
    return {
        "schema": VARIATION_SCHEMA,
        "problem": {"title": found.title, "file": found.where, "required_cnr": found.required_cnr},
        "settings": dict(found.settings),
        "axes": [
            {"field": axis.key, "label": axis.label, "values": list(axis.values), "log": axis.log}
            for axis in found.axes
        ],
        "gap": found.gap,
        "base": _point(found.base),
        "points": [_point(point) for point in found.points],
    }


def worth_dict(found: Worths) -> dict[str, Any]:
    """Return the worth of each part as a dictionary of plain values; the module says what each key holds."""
    return {
        "schema": WORTH_SCHEMA,
        "problem": {"title": found.title, "file": found.where},
        "cnr": found.cnr,
        "cnr_bound": found.bound,
        "parts": [_part(part) for part in found.parts],
        "additions": [_part(part) for part in found.additions],
        "tried": found.tried,
    }


def _point(point: Point) -> dict[str, Any]:
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma")
    return {
        "values": list(point.values),
        "possible": point.possible,
        "cnr": _number(point.cnr),
        "cnr_bound": _number(point.bound),
        "settings": {name: getattr(point, name) for name in names} if point.possible else None,
        "binding": list(point.binding),
        "reason": point.reason,
        "limits": list(point.limits),
    }


def _part(part: PartWorth) -> dict[str, Any]:
    return {
        "kind": part.kind,
        "id": part.id,
        "cnr": _number(part.cnr),
        "cnr_bound": _number(part.bound),
        "change": _number(part.change),
        "certain": part.certain,
        "substitute": list(part.substitute),
        "reason": part.reason,
    }


def _number(value: float) -> float | None:
    return value if math.isfinite(value) else None
