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

from codesign.family.shared import SharedFamily
from codesign.report.family_common import after, finite, head_dict, numbered, variant_table, variants_dict
from codesign.report.family_text import cnr_words, need_sentence
from codesign.report.layout import NARROWEST, bullet, counted, heading, labelled, number, percent
from codesign.report.output import plain

SHARED_SCHEMA = "codesign.shared/1"
#: Changes that are told.
MOST_HELPS = 5


def shared_text(found: SharedFamily, width: int = 80) -> str:
    """Return a rig in common as plain text: the rig, what limits it, what it costs each variant, what would help.

    Parameters
    ----------
    found : SharedFamily
        With a `SharedRig`.
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    lines = [heading(plain(found.own.title), width), *_rig(found, width), "", heading("each variant on it", width)]
    lines += variant_table(found, width, by_cnr=found.rig.goal == "worst")
    lines += ["", heading("what would help most", width), *_helps(found, width)]
    lines += ["", heading("how sure this is", width), *_sure(found, width), *after(found, width)]
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
    lines += labelled("LEDs", f"{numbered(rig.leds)}{allowed}", width)
    lines += labelled("goal", goal_words(found), width)
    need = need_sentence(found.entries)
    lines += labelled("required", need, width) if need else []
    return lines + labelled("limited by", plain(rig.limiting), width)


def _helps(found: SharedFamily, width: int) -> list[str]:
    if not found.rig.helps:
        return bullet("none of the changes tried helps", width)
    lines = []
    for change in found.rig.helps[:MOST_HELPS]:
        gain = f"worst CNR {cnr_words(change.worst_cnr)} ({100 * change.worst_gain:+.1f} %)"
        lines += bullet(f"{plain(change.change)}: helps {counted(change.helped, 'variant')}, {gain}", width)
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
    settings = "shared are camera, filter, f-number and LEDs, set anew for each variant gain, exposure and currents"
    return bullet(f"{what}; {settings}", width)


def shared_dict(found: SharedFamily) -> dict[str, Any]:
    """Return a rig in common as plain values; the module says what each key holds."""
    rig = found.rig
    names = ("camera", "filter", "f_number", "goal", "status", "limiting")
    numbers = {name: finite(getattr(rig, name)) for name in ("value", "bound", "gap", "residual_k")}
    parts = {name: getattr(rig, name) for name in names}
    return {
        **head_dict(found, SHARED_SCHEMA),
        "rig": {**parts, **numbers, "leds": list(rig.leds), "max_led_channels": found.max_led_channels},
        **variants_dict(found),
        "helps": [
            {"change": h.change, "helped": h.helped, "worst_cnr": h.worst_cnr, "worst_gain": h.worst_gain}
            for h in rig.helps
        ],
    }
