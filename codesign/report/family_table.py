"""Recipes of a family as a table for a line controller: a row per variant, a column per setting."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from codesign.family.batch import Entry
from codesign.family.outcome import Outcome, Reading

if TYPE_CHECKING:
    import pandas as pd

#: Columns before those of LEDs and surfaces.
SETTINGS = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us")


def recipe_rows(entries: Sequence[Entry]) -> list[dict[str, Any]]:
    """Return the recipe of each variant as plain values, the same keys for all.

    ``drive_ma.<LED>`` is 0 where the LED is off. ``threshold_dn`` is the grey value midway between target and
    background (the nearest two of several). Cells that do not apply are None: no recipe, or several readings combined,
    whose threshold is no grey value.
    """
    outcomes = [entry.outcome for entry in entries]
    leds = sorted({led for outcome in outcomes for led in outcome.leds})
    shots = max((len(outcome.shots) for outcome in outcomes), default=0)
    counted = sorted({led for outcome in outcomes for led in outcome.emitters})
    return [_row(entry, leds, counted, shots) for entry in entries]


def recipe_table(entries: Sequence[Entry]) -> pd.DataFrame:
    """The same as a table."""
    import pandas as pd

    return pd.DataFrame(recipe_rows(entries))


def threshold(outcome: Outcome) -> float | None:
    """Grey value midway between the nearest target and background; None where there is none. [DN]"""
    if not outcome.solved or outcome.weights or outcome.shots:
        return None
    by_role: dict[str, list[float]] = {"target": [], "background": []}
    for reading in outcome.readings:
        by_role.get(reading.role, []).append(reading.grey_dn)
    if not all(by_role.values()):
        return None
    brighter = outcome.sign == "brighter"
    target = (min if brighter else max)(by_role["target"])
    background = (max if brighter else min)(by_role["background"])
    return (target + background) / 2


def _row(entry: Entry, leds: list[str], counted: list[str], shots: int) -> dict[str, Any]:
    outcome, known = entry.outcome, entry.outcome.solved
    row: dict[str, Any] = {"variant": entry.name, "status": outcome.status, "cnr": outcome.cnr}
    row |= {"cnr_bound": outcome.bound, "required_cnr": entry.required_cnr, "required_met": entry.met}
    row |= {name: getattr(outcome, name) if known else None for name in SETTINGS}
    if not shots:
        row |= _drives("drive_ma.", outcome.drive_ma, leds, known)
    for number in range(1, shots + 1):
        shot = outcome.shots[number - 1] if known and number <= len(outcome.shots) else None
        row[f"exposure_us.shot-{number}"] = shot["exposure_us"] if shot else None
        row |= _drives(f"drive_ma.shot-{number}.", shot["drive_ma"] if shot else {}, leds, shot is not None)
    for led in counted:
        row[f"emitters.{led}"] = outcome.emitters.get(led, 0) if known else None
    row |= _greys(outcome)
    row["limits_reached"] = "; ".join(outcome.binding) or None
    row["reason"] = outcome.reason or None
    return row


def _drives(prefix: str, drives: Mapping[str, float], leds: list[str], known: bool) -> dict[str, float | None]:
    return {f"{prefix}{led}": drives.get(led, 0.0) if known else None for led in leds}


def _greys(outcome: Outcome) -> dict[str, Any]:
    """Grey values of the first target and background; of the others as text."""
    first: dict[str, Reading] = {}
    others = []
    for reading in () if outcome.weights or outcome.shots else outcome.readings:
        if first.setdefault(reading.role, reading) is not reading or reading.role == "guard":
            others.append(f"{reading.surface} {reading.grey_dn:.6g}")
    cells: dict[str, Any] = {}
    for role in ("target", "background"):
        reading = first.get(role)
        cells[role] = reading.surface if reading else None
        cells[f"{role}_grey_dn"] = reading.grey_dn if reading else None
    return {**cells, "threshold_dn": threshold(outcome), "other_grey_dn": "; ".join(others) or None}
