"""Cautions and the radiation screening: aids to warn, with all judgement left to local codes and licensed practice."""

from __future__ import annotations

from codesign.report.cautions import cautions
from codesign.report.page.content import Section, Subject
from codesign.report.page.html import element, joined, listed, name, paragraph, table
from codesign.report.radiation_text import DEFERENCE, DISCLAIMER, radiation_rows, reached_words
from codesign.study.radiation import screening


def safety(subject: Subject) -> Section | None:
    """What to beware of with this light; nothing where all LEDs are off."""
    found = cautions(subject.problem, subject.performance)
    if not found:
        return None
    *warnings, deference = found
    body = (listed(warnings, class_="cautions"), paragraph(element("strong", deference)))
    return Section(id="cautions", title="Cautions", short="Cautions", body=joined(body))


def radiation(subject: Subject) -> Section | None:
    """Hazard-weighted light at a distance against published limits; nothing where all LEDs are off."""
    found = screening(subject.problem, subject.performance)
    if not found.exposures:
        return None
    rows = [
        (
            row["quantity"],
            f"{row['value']} {row['unit']}",
            row["limit"],
            row["share"],
            row["time"].removeprefix("reached "),
            row["note"],
        )
        for row in radiation_rows(found)
    ]
    reached = reached_words(found) or ["reaches none of the limits below within 8 h, as far as this model goes"]
    head, _, rest = DISCLAIMER.partition(": ")
    header = ("weighted for", "at the eye", "published limit", "of the long limit", "reached", "note, source")
    body = (
        paragraph(element("strong", head, ": "), rest),
        paragraph(f"An eye that looks into the bare emitters from {found.distance_mm:g} mm:"),
        listed(reached, class_="cautions"),
        table("Weighted light against published limits", header, rows, numbers=(3,), wide=True),
        element("h3", "Assumed in the screening"),
        listed(name(text) for text in found.assumptions),
        paragraph(element("strong", DEFERENCE)),
    )
    return Section(id="radiation", title="Radiation screening", short="Radiation", body=joined(body))
