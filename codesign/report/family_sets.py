"""Few rigs for a family, or a filter wheel, as plain text and as plain values.

``rig_set_dict`` (schema ``codesign.rigs/1``) and ``wheel_dict`` (schema ``codesign.wheel/1``) hold ``summary``,
``variants``, ``recipe_table``, ``left_out`` and ``own`` as ``codesign.shared/1`` does; each variant has a "place": the
letter of its rig, or its filter. Besides:

======================== ===========================================================================================
number, bound, status    rigs or filters found; no fewer serve all; "proven" where these are equal, else "open" or
                         "stopped" at a time limit
rigs                     only rigs/1: [{"place": letter, "camera", "filter", "f_number", "leds", "variants": [names]}]
rig                      only wheel/1: {"camera", "f_number", "leds"}
filters                  only wheel/1: [{"id", "variants": [names]}]
======================== ===========================================================================================
"""

from __future__ import annotations

from typing import Any

from codesign.family.shared import SharedFamily, rig_letter
from codesign.report.family_common import after, head_dict, numbered, variant_table, variants_dict
from codesign.report.family_text import need_sentence
from codesign.report.layout import NARROWEST, bullet, counted, heading, labelled
from codesign.report.output import plain

RIGS_SCHEMA, WHEEL_SCHEMA = "codesign.rigs/1", "codesign.wheel/1"


def rig_set_text(found: SharedFamily, width: int = 80) -> str:
    """Return a set of rigs as plain text.

    Parameters
    ----------
    found : SharedFamily
        With a `RigSet`.
    width : int
        Page width, at least 60. [characters]
    """
    width, rigs = max(width, NARROWEST), found.rig.rigs
    lines = [heading(plain(found.own.title), width), *_summary(found, "rig", width), "", heading("rigs", width)]
    for number, rig in enumerate(rigs):
        parts = f"{rig.camera}, filter {rig.filter}, f/{rig.f_number:g}, LEDs {numbered(rig.leds)}"
        names = ", ".join(map(plain, rig.variants))
        lines += labelled(rig_letter(number), parts, width)
        lines += labelled("", f"{counted(len(rig.variants), 'variant')}: {names}", width)
    return _finished(found, lines, "rig", width)


def wheel_text(found: SharedFamily, width: int = 80) -> str:
    """Return a filter wheel as plain text; ``found`` with a `FilterWheel`, ``width`` as of `rig_set_text`."""
    width, wheel = max(width, NARROWEST), found.rig
    lines = [heading(plain(found.own.title), width), *_summary(found, "filter", width)]
    lines += labelled("camera", wheel.camera, width)
    lines += labelled("f-number", f"{wheel.f_number:g}", width)
    lines += labelled("LEDs", numbered(wheel.leds), width)
    lines += ["", heading("filters of the wheel", width)]
    for name, users in users_of(found).items():
        lines += bullet(f"{name}: {counted(len(users), 'variant')}: {', '.join(map(plain, users))}", width)
    return _finished(found, lines, "filter", width)


def users_of(found: SharedFamily) -> dict[str, list[str]]:
    """Variants by the filter of the wheel that they use."""
    wheel = found.rig
    return {name: [v for v, own in wheel.filter_of.items() if own == name] for name in wheel.filters}


def _summary(found: SharedFamily, thing: str, width: int) -> list[str]:
    beside = " of a wheel, the rest in common" if thing == "filter" else ""
    lines = labelled("variants", f"{len(found.entries)} on {counted(found.rig.number, thing)}{beside}", width)
    if found.max_led_channels is not None:
        lines += labelled("LEDs", f"at most {counted(found.max_led_channels, 'channel')} on a rig", width)
    need = need_sentence(found.entries)
    return lines + (labelled("required", need, width) if need else [])


def _finished(found: SharedFamily, lines: list[str], thing: str, width: int) -> str:
    lines += ["", heading("each variant", width), *variant_table(found, width, thing)]
    lines += ["", heading("how sure this is", width), *bullet(_sure(found, thing), width), *after(found, width)]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _sure(found: SharedFamily, thing: str) -> str:
    rig = found.rig
    if rig.number <= rig.bound:
        fewer = f"no fewer {thing}s serve all variants at the CNR they need" if rig.number > 1 else "one is enough"
        return f"{fewer}, proven over all choices of parts"
    why = "the search stopped at its time limit" if rig.status == "stopped" else "the proof leaves this open"
    return f"at least {counted(rig.bound, thing)} needed, {rig.number} found; {why}"


def rig_set_dict(found: SharedFamily) -> dict[str, Any]:
    """Return a set of rigs as plain values; the module says what each key holds."""
    rigs = [
        {
            "place": rig_letter(number),
            "camera": rig.camera,
            "filter": rig.filter,
            "f_number": rig.f_number,
            "leds": list(rig.leds),
            "variants": list(rig.variants),
        }
        for number, rig in enumerate(found.rig.rigs)
    ]
    return {**head_dict(found, RIGS_SCHEMA), **_numbers(found), "rigs": rigs, **variants_dict(found)}


def wheel_dict(found: SharedFamily) -> dict[str, Any]:
    """Return a filter wheel as plain values; the module says what each key holds."""
    wheel = found.rig
    rig = {"camera": wheel.camera, "f_number": wheel.f_number, "leds": list(wheel.leds)}
    filters = [{"id": name, "variants": users} for name, users in users_of(found).items()]
    return {**head_dict(found, WHEEL_SCHEMA), **_numbers(found), "rig": rig, "filters": filters, **variants_dict(found)}


def _numbers(found: SharedFamily) -> dict[str, Any]:
    rig = found.rig
    return {
        "number": rig.number,
        "bound": rig.bound,
        "status": rig.status,
        "max_led_channels": found.max_led_channels,
    }
