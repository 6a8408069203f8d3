"""The rig in common of a family as plain text and as plain values.

``shared_dict`` (schema ``codesign.shared/1``) holds what ``codesign.family/1`` does, with these differences:

======================== ===========================================================================================
schema                   "codesign.shared/1"
rig                      {"camera", "filter", "f_number", "leds": [ids], "goal": "worst" | "count" | "cost", "value",
                         "bound", "gap", "status": "proven" | "stopped", "max_led_channels": or None, "limiting":
                         variant, "residual_k": largest difference of junction temperatures assumed and reached}
variants                 with the recipes on the rig in common, and also "own_cnr": with the rig best for it alone,
                         and "regret": share of that given up
helps                    [{"change": text, "helped": number of variants, "worst_cnr": then, "worst_gain": share}]
left_out                 [text: part that not all variants have]
own                      [{"variant", "status", "reason", "cnr"}] of all variants, each with its own rig
======================== ===========================================================================================
"""

from __future__ import annotations

from typing import Any

import codesign
from codesign.family.batch import Entry
from codesign.family.shared import SharedFamily
from codesign.report.family_dict import entry_dict, summary_dict
from codesign.report.family_table import recipe_rows
from codesign.report.family_text import MISSED, by_need, cnr_words, failures, need_sentence
from codesign.report.layout import NARROWEST, bullet, counted, heading, labelled, number, percent, table
from codesign.report.output import plain

SHARED_SCHEMA = "codesign.shared/1"
#: Changes that are told.
MOST_HELPS = 5


def shared_text(found: SharedFamily, width: int = 80) -> str:
    """Return a rig in common as plain text: the rig, what limits it, what it costs each variant, what would help.

    Parameters
    ----------
    found : SharedFamily
    width : int
        Page width, at least 60. [characters]
    """
    width, rig = max(width, NARROWEST), found.rig
    lines = [heading(plain(found.own.title), width), *_rig(found, width), "", heading("each variant on it", width)]
    lines += _variants(found, width)
    lines += ["", heading("what would help most", width), *_helps(found, width)]
    lines += ["", heading("how sure this is", width), *_sure(found, width)]
    for part in rig.left_out:
        lines += bullet(f"no choice, since not all variants have it: {plain(part)}", width)
    lines += failures(found.own.failed, width)
    return "\n".join(line.rstrip() for line in lines) + "\n"


def goal_words(found: SharedFamily) -> str:
    """What the rig was chosen for, and how well that is met."""
    rig = found.rig
    if rig.goal == "worst":
        return f"greatest CNR of the worst variant: {cnr_words(rig.value)}, none above {cnr_words(rig.bound, 5)}"
    if rig.goal == "count":
        reached = f"{rig.value:.0f} of {len(rig.outcomes)}"
        return f"most variants at the CNR they need: {reached}, no rig more than {rig.bound:.0f}"
    return f"least price with which all have the CNR they need: {number(rig.value)}, none below {number(rig.bound)}"


def _rig(found: SharedFamily, width: int) -> list[str]:
    rig = found.rig
    allowed = "" if found.max_led_channels is None else f" (at most {found.max_led_channels})"
    lines = labelled("variants", f"{len(rig.outcomes)} with one rig for all", width)
    lines += labelled("camera", rig.camera, width)
    lines += labelled("filter", rig.filter, width)
    lines += labelled("f-number", f"{rig.f_number:g}", width)
    numbered = ", ".join(f"{number} {led}" for number, led in enumerate(rig.leds, 1))
    lines += labelled("LEDs", f"{numbered}{allowed}", width)
    lines += labelled("goal", goal_words(found), width)
    need = need_sentence(found.entries)
    lines += labelled("required", need, width) if need else []
    return lines + labelled("limited by", plain(rig.limiting), width)


def _variants(found: SharedFamily, width: int) -> list[str]:
    """A row for each variant, those worst off first; all of them, since the rig is one decision for all."""
    need = any(entry.required_cnr is not None for entry in found.entries)
    rows = [_row(found, entry, need) for entry in sorted(found.entries, key=lambda entry: _standing(found, entry))]
    header = ("variant", "CNR", *(("needs",) if need else ()), "own rig", "lost", "gain", "exposure", "LEDs lit")
    lines = table(header, rows, width, left=(0, len(header) - 1))
    return lines + (bullet(MISSED, width) if any(entry.met is False for entry in found.entries) else [])


def _standing(found: SharedFamily, entry: Entry) -> float:
    if not entry.outcome.solved:
        return 0.0
    return entry.outcome.cnr if found.rig.goal == "worst" else by_need(entry)


def _row(found: SharedFamily, entry: Entry, need: bool) -> tuple[str, ...]:
    outcome, other = entry.outcome, found.rig.outcomes[entry.name]
    wanted = "" if entry.required_cnr is None else f"{entry.required_cnr:g}" + (" !" if entry.met is not True else "")
    own = (cnr_words(other.own_cnr), percent(other.regret)) if other.own_cnr == other.own_cnr else ("", "")
    if not outcome.solved:
        return (plain(entry.name), "none", *((wanted,) if need else ()), *own, "", "", "")
    lit = " ".join(str(number) for number, led in enumerate(found.rig.leds, 1) if led in outcome.leds)
    settings = (f"{outcome.gain_db:g} dB", f"{outcome.exposure_us:g} µs", lit)
    return (plain(entry.name), cnr_words(outcome.cnr), *((wanted,) if need else ()), *own, *settings)


def _helps(found: SharedFamily, width: int) -> list[str]:
    if not found.rig.helps:
        return bullet("no single change to the rig was found to help more than one variant in a hundred", width)
    lines = []
    for change in found.rig.helps[:MOST_HELPS]:
        gain = f"worst CNR {cnr_words(change.worst_cnr)} ({100 * change.worst_gain:+.1f} %)"
        lines += bullet(f"{plain(change.change)}: {counted(change.helped, 'variant')} gain, {gain}", width)
    return lines


def _sure(found: SharedFamily, width: int) -> list[str]:
    rig = found.rig
    if rig.status != "proven":
        return bullet(f"stopped before the gap asked for: {percent(rig.gap)} is proven", width)
    what = {
        "worst": f"no rig with these parts gives the worst variant a CNR more than {percent(rig.gap, 1e-6)} above it",
        "count": "no rig with these parts serves more variants" if rig.gap == 0 else f"at most {rig.bound:.0f} can be",
        "cost": f"no rig that serves all is more than {percent(rig.gap, 1e-6)} cheaper",
    }[rig.goal]
    text = (
        f"{what}; shared are camera, filter, f-number and LEDs, set anew for each variant gain, exposure and currents"
    )
    return bullet(text, width)


def shared_dict(found: SharedFamily) -> dict[str, Any]:
    """Return a rig in common as plain values; the module says what each key holds."""
    rig = found.rig
    names = ("camera", "filter", "f_number", "goal", "value", "bound", "gap", "status", "limiting", "residual_k")
    return {
        "schema": SHARED_SCHEMA,
        "program": {"name": "codesign", "version": codesign.__version__},
        "family": {"title": found.own.title, "file": found.own.where},
        "rig": {
            **{name: getattr(rig, name) for name in names},
            "leds": list(rig.leds),
            "max_led_channels": found.max_led_channels,
        },
        "summary": summary_dict(found.entries),
        "variants": [_shared_entry(found, entry) for entry in found.entries],
        "recipe_table": recipe_rows(found.entries),
        "helps": [
            {"change": h.change, "helped": h.helped, "worst_cnr": h.worst_cnr, "worst_gain": h.worst_gain}
            for h in rig.helps
        ],
        "left_out": list(rig.left_out),
        "own": [
            {
                "variant": entry.name,
                "status": entry.outcome.status,
                "reason": entry.outcome.reason or None,
                "cnr": entry.outcome.cnr,
            }
            for entry in found.own.entries
        ],
    }


def _shared_entry(found: SharedFamily, entry: Entry) -> dict[str, Any]:
    outcome = found.rig.outcomes[entry.name]
    known = outcome.own_cnr == outcome.own_cnr
    own = {"own_cnr": outcome.own_cnr, "regret": outcome.regret} if known else {"own_cnr": None, "regret": None}
    return {**entry_dict(entry), **own}
