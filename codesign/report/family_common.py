"""What reports of rigs in common share, whether one for all, a set of few, or a filter wheel."""

from __future__ import annotations

import math
from typing import Any

import codesign
from codesign.family.batch import Entry
from codesign.family.shared import SharedFamily
from codesign.report.family_dict import entry_dict, summary_dict
from codesign.report.family_table import recipe_rows
from codesign.report.family_text import MISSED, by_need, cnr_words, failures
from codesign.report.layout import bullet, percent, table
from codesign.report.output import plain

#: Share of the CNR whose loss reads as none.
LEAST_LOST = 5e-4


def numbered(leds: tuple[str, ...]) -> str:
    """LED channels with the numbers by which the rows of variants name them."""
    return ", ".join(f"{number} {led}" for number, led in enumerate(leds, 1))


def variant_table(found: SharedFamily, width: int, place: str = "", *, by_cnr: bool = False) -> list[str]:
    """A row for each variant, worst off first; ``place`` heads the column of rigs or filters, where there are several.

    ``by_cnr`` orders by CNR rather than by CNR against what is needed.
    """
    need = any(entry.required_cnr is not None for entry in found.entries)
    ordered = sorted(found.entries, key=lambda entry: _standing(entry, by_cnr))
    rows = [_row(found, entry, need=need, place=bool(place)) for entry in ordered]
    places = (place,) if place else ()
    header = ("variant", *places, "CNR", *(("needs",) if need else ()), "own rig", "lost", "gain", "exposure", "LEDs")
    lines = table(header, rows, width, left=(0, *((1,) if place else ()), len(header) - 1))
    return lines + (bullet(MISSED, width) if any(entry.met is False for entry in found.entries) else [])


def after(found: SharedFamily, width: int) -> list[str]:
    """What ends each of these reports: parts that were no choice, and variants that were left out."""
    lines = []
    for part in found.rig.left_out:
        lines += bullet(f"no choice, since not all variants have it: {plain(part)}", width)
    return lines + failures(found.own.failed, width)


def head_dict(found: SharedFamily, schema: str) -> dict[str, Any]:
    """What opens the plain values of each."""
    return {
        "schema": schema,
        "program": {"name": "codesign", "version": codesign.__version__},
        "family": {"title": found.own.title, "file": found.own.where},
    }


def variants_dict(found: SharedFamily) -> dict[str, Any]:
    """Variants, their recipes as a table, and the own rigs of all."""
    names = ("status", "reason", "cnr")
    own = [{"variant": entry.name, **{name: entry_dict(entry)[name] for name in names}} for entry in found.own.entries]
    return {
        "summary": summary_dict(found.entries),
        "variants": [_entry_dict(found, entry) for entry in found.entries],
        "recipe_table": recipe_rows(found.entries),
        "left_out": list(found.rig.left_out),
        "own": own,
    }


def finite(value: float) -> float | None:
    """A number, or None where JSON has none for it."""
    return float(value) if math.isfinite(value) else None


def _standing(entry: Entry, by_cnr: bool) -> float:
    if not entry.outcome.solved:
        return 0.0
    return entry.outcome.cnr if by_cnr else by_need(entry)


def _row(found: SharedFamily, entry: Entry, *, need: bool, place: bool) -> tuple[str, ...]:
    outcome, other = entry.outcome, found.rig.outcomes[entry.name]
    wanted = "" if entry.required_cnr is None else f"{entry.required_cnr:g}" + (" !" if entry.met is not True else "")
    known = not math.isnan(other.own_cnr)
    lost = "0 %" if other.regret < LEAST_LOST else percent(other.regret)
    own = (cnr_words(other.own_cnr), lost) if known else ("", "")
    name = (plain(entry.name), *((found.place_of(entry.name),) if place else ()))
    if not outcome.solved:
        return (*name, "none", *((wanted,) if need else ()), *own, "", "", "")
    lit = " ".join(str(number) for number, led in enumerate(found.leds_of(entry.name), 1) if led in outcome.leds)
    settings = (f"{outcome.gain_db:g} dB", f"{outcome.exposure_us:g} µs", lit)
    return (*name, cnr_words(outcome.cnr), *((wanted,) if need else ()), *own, *settings)


def _entry_dict(found: SharedFamily, entry: Entry) -> dict[str, Any]:
    outcome = found.rig.outcomes[entry.name]
    own = {"own_cnr": finite(outcome.own_cnr), "regret": finite(outcome.regret)}
    place = found.place_of(entry.name)
    return {**entry_dict(entry), **own, **({"place": place} if place else {})}
