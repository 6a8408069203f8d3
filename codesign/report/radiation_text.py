"""The radiation screening as plain text, as rows for any page, and as a dictionary for JSON.

A warning aid and never a classification: it says after what time a published limit would be reached, and leaves every
judgement to local codes and licensed practice. `DISCLAIMER` and `DEFERENCE` belong beside the rows wherever they stand.

``radiation_dict`` (schema ``codesign.radiation/1``; conventions as in `codesign.report.machine`)

======================== ===========================================================================================
problem                  {"title", "file"}
distance_mm              from the emitters to the eye
disclaimer, deference    text that belongs beside the numbers
confidence               how far the limits could be checked
exposures                [{"hazard", "quantity", "unit", "while_on", "mean", "counts": "mean" or "while on", "limit":
                         for exposures of "limit_seconds" or more, "ratio": what counts divided by it, "seconds":
                         after which the published limit is reached or None, "published": the limit in words,
                         "source", "note"}]
reached                  {hazard: seconds} of the limits reached within 8 h, soonest first
assumptions              [text]
======================== ===========================================================================================
"""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from codesign.problem import Problem
from codesign.report.layout import NARROWEST, bullet, duration, heading, labelled, number, percent, table
from codesign.report.output import plain
from codesign.study.radiation import CONFIDENCE, Exposure, Screening

RADIATION_SCHEMA = "codesign.radiation/1"
DISCLAIMER = (
    "A warning aid, never a classification: computed from data-sheet values, for bare emitters, under the assumptions "
    "listed. Weightings and limits were read in secondary sources; check them in the standards before you rely on them."
)
DEFERENCE = (
    "Local codes hold. Have the finished light measured and assessed by a licensed professional before people work "
    "near it, whatever is said here."
)
#: Units and limits as set in text; JSON keeps to ASCII.
TYPESET = (("m2", "m²"), ("^(1/4)", "^¼"), ("^(3/4)", "^¾"), (" x ", " · "), (" us ", " µs "))


def radiation_rows(found: Screening) -> list[dict[str, str]]:
    """Return the screening as rows of text, for any kind of table.

    Returns
    -------
    list of dict
        ``quantity`` (hazard and what is measured), ``value`` with what counts of pulsed light, ``unit``, ``limit`` as
        published, ``share`` of the limit for long exposures, ``time`` after which the limit is reached, ``note`` with
        the source.
    """
    return [
        {
            "quantity": f"{row.hazard}, {row.quantity}",
            "value": _value(row),
            "unit": typeset(row.unit),
            "limit": typeset(row.published),
            "share": percent(row.ratio, least=0.001),
            "time": f"reached after {duration(row.seconds)}" if math.isfinite(row.seconds) else "not reached",
            "note": "; ".join(text for text in (row.note, row.source) if text),
        }
        for row in found.exposures
    ]


def radiation_dict(problem: Problem, found: Screening) -> dict[str, Any]:
    """Return the screening as a dictionary of plain values; the module says what each key holds."""
    exposures = [asdict(row) for row in found.exposures]
    for row in exposures:
        row["seconds"] = row["seconds"] if math.isfinite(row["seconds"]) else None
    return {
        "schema": RADIATION_SCHEMA,
        "problem": {"title": problem.spec.title, "file": problem.where},
        "distance_mm": found.distance_mm,
        "disclaimer": DISCLAIMER,
        "deference": DEFERENCE,
        "confidence": CONFIDENCE,
        "exposures": exposures,
        "reached": found.reached,
        "assumptions": list(found.assumptions),
    }


def radiation_text(problem: Problem, found: Screening, width: int = 80) -> str:
    """Return the screening as plain text, no wider than ``width``, at least 60 characters."""
    width = max(width, NARROWEST)
    title = [*labelled("title", plain(problem.spec.title), width), *labelled("problem", plain(problem.where), width)]
    title += labelled("seen from", f"{found.distance_mm:g} mm, looking into the bare emitters", width)
    if not found.exposures:
        return "\n".join([*title, *labelled("LEDs", "all off", width)]) + "\n"
    blocks = [title, _verdict(found, width), _table(found, width), _limits(found, width), _assumed(found, width)]
    return "\n\n".join("\n".join(line.rstrip() for line in block) for block in blocks) + "\n"


def reached_words(found: Screening) -> list[str]:
    """Return one sentence for each published limit reached within 8 h, soonest first."""
    return [f"reaches the published limit of {name} after {duration(t)}" for name, t in found.reached.items()]


def typeset(text: str) -> str:
    """Return units and formulas with the signs that text can show."""
    for plainly, well in TYPESET:
        text = text.replace(plainly, well)
    return text


def _value(row: Exposure) -> str:
    if row.while_on == row.mean:
        return _rounded(row.mean)
    shown = row.mean if row.counts == "mean" else row.while_on
    return f"{_rounded(shown)} ({row.counts})"


def _rounded(value: float) -> str:
    """Three digits, which is more than such an estimate is worth."""
    return number(float(f"{value:.3g}"), 3)


def _verdict(found: Screening, width: int) -> list[str]:
    lines = [heading("screening, a warning aid and never a classification", width)]
    said = reached_words(found) or ["reaches none of the published limits below within 8 h, as far as this model goes"]
    return [*lines, *(line for text in said for line in bullet(text, width)), *bullet(DEFERENCE, width)]


def _table(found: Screening, width: int) -> list[str]:
    rows = [
        (
            row.hazard,
            _rounded(row.while_on),
            _rounded(row.mean),
            typeset(row.unit),
            percent(row.ratio, least=0.001),
            duration(row.seconds) if math.isfinite(row.seconds) else "-",
        )
        for row in found.exposures
    ]
    header = ("weighted for", "while on", "mean", "unit", "of limit", "reached after")
    lines = [heading("weighted light, against the limit for long exposures", width)]
    return lines + table(header, rows, width, left=(0, 3))


def _limits(found: Screening, width: int) -> list[str]:
    lines = [heading("published limits", width)]
    for row in found.exposures:
        note = f"; {row.note}" if row.note else ""
        lines += bullet(f"{row.hazard}, {row.quantity}: {typeset(row.published)}{note} [{row.source}]", width)
    return lines


def _assumed(found: Screening, width: int) -> list[str]:
    texts = (*found.assumptions, DISCLAIMER)
    return [heading("assumed", width), *(line for text in texts for line in bullet(text, width))]
