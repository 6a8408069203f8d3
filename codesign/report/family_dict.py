"""A family as plain dictionaries for JSON: stable keys, units in their names, plain numbers.

``own_rigs_dict`` (schema ``codesign.family/1``)

======================== ===========================================================================================
schema                   "codesign.family/1"; a change that could break a reader raises the version
program                  {"name": "codesign", "version": text}
family                   {"title": text, "file": text}
summary                  {"variants", "solved", "impossible": limits in conflict, "bad": data or run failed, "met":
                         number at the CNR they need, "judged": number that state one, "cnr_worst", "cnr_median",
                         "cnr_best"}; numbers of CNR are None where nothing is solved
variants                 [{"variant": name, "row": where it is written, "status": "solved" | "impossible" | "bad",
                         "reason": text or None, "cnr": of the recipe, "cnr_optimum": before rounding to steps,
                         "cnr_bound": none has more, "gap": cnr_bound / cnr_optimum - 1, "proven": whether the gap
                         asked for is, "required_cnr", "required_met", "settings": as in codesign.performance/1,
                         "sign", "error_rate", "surfaces": [{"id", "role", "grey_dn", "saturation_share"}],
                         "threshold_dn": grey value midway, "binding": [limits reached]}], numbers and settings None
                         where there is no recipe
recipe_table             the rows of --csv, the same keys in each
parts                    {"camera" | "filter" | "led": [{"id", "variants": number it serves}]}, most used first
======================== ===========================================================================================

``shared`` and the other sections of a rig in common are described in `codesign.report.family_shared`.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import Any

import numpy as np

import codesign
from codesign.family.batch import Entry, OwnRigs
from codesign.report.family_table import recipe_rows, threshold

FAMILY_SCHEMA = "codesign.family/1"


def own_rigs_dict(found: OwnRigs) -> dict[str, Any]:
    """Return a family with the own rig of each variant as plain values; the module says what each key holds."""
    return {
        "schema": FAMILY_SCHEMA,
        "program": {"name": "codesign", "version": codesign.__version__},
        "family": {"title": found.title, "file": found.where},
        "summary": summary_dict(found.entries),
        "variants": [entry_dict(entry) for entry in found.entries],
        "recipe_table": recipe_rows(found.entries),
        "parts": _parts(found.solved),
    }


def summary_dict(entries: Sequence[Entry]) -> dict[str, Any]:
    """Counts, and the CNR of the worst, middle and best."""
    values = np.array([entry.outcome.cnr for entry in entries if entry.outcome.solved])
    count = Counter(entry.outcome.status for entry in entries)
    judged = [entry.met for entry in entries if entry.met is not None]
    return {
        "variants": len(entries),
        **{status: count[status] for status in ("solved", "impossible", "bad")},
        "met": sum(judged),
        "judged": len(judged),
        "cnr_worst": float(values.min()) if values.size else None,
        "cnr_median": float(np.median(values)) if values.size else None,
        "cnr_best": float(values.max()) if values.size else None,
    }


def entry_dict(entry: Entry) -> dict[str, Any]:
    """One variant."""
    outcome, known = entry.outcome, entry.outcome.solved
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma", "emitters")
    settings = {name: getattr(outcome, name) for name in names}
    settings |= {"shots": list(outcome.shots)} if outcome.shots else {}
    settings |= {"weights": dict(outcome.weights)} if outcome.weights else {}
    return {
        "variant": entry.name,
        "row": entry.variant.where,
        "status": outcome.status,
        "reason": outcome.reason or None,
        "conflict": list(outcome.limits),
        "cnr": outcome.cnr,
        "cnr_optimum": outcome.best_cnr,
        "cnr_bound": outcome.bound,
        "gap": outcome.gap,
        "proven": outcome.proven,
        "required_cnr": entry.required_cnr,
        "required_met": entry.met,
        "settings": settings if known else None,
        "sign": outcome.sign or None,
        "error_rate": outcome.error_rate,
        "surfaces": [
            {"id": r.surface, "role": r.role, "grey_dn": r.grey_dn, "saturation_share": r.saturation_share}
            for r in outcome.readings
        ],
        "threshold_dn": threshold(outcome),
        "binding": list(outcome.binding),
    }


def _parts(entries: Sequence[Entry]) -> dict[str, Any]:
    kinds = {
        "camera": Counter(entry.outcome.camera for entry in entries),
        "filter": Counter(entry.outcome.filter for entry in entries),
        "led": Counter(led for entry in entries for led in entry.outcome.leds),
    }
    return {
        kind: [{"id": name, "variants": number} for name, number in count.most_common()]
        for kind, count in kinds.items()
    }
