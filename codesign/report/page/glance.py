"""The first screen: what to set, what you get, what limits it, how sure it is."""

from __future__ import annotations

import math

from codesign.design import Performance
from codesign.report.layout import number, percent
from codesign.report.page.content import Subject, state
from codesign.report.page.html import Content, Html, element, joined, name, paragraph, settings
from codesign.report.page.sections_result import compared, error_words, saturated, sign
from codesign.report.text import currents_words, exposure_words

#: Gains below this are told as this. [1]
LEAST_GAIN = 1e-6
#: LEDs and limits named on the first screen; all are in their sections.
AT_A_GLANCE = 4


def glance(subject: Subject) -> Html:
    """Four answers that fit on one screen."""
    cells = (
        ("recipe", "What to set", _set_in_short(subject)),
        ("result", "What you get", _got_in_short(subject)),
        ("limits", "What limits it", _limits_in_short(subject)),
        ("proof", "How sure it is", _sure_in_short(subject)),
    )
    made = (
        element(
            "section",
            element("h2", element("a", title, href=f"#{target}")),
            body,
            class_=f"cell {target}",
            aria_label=f"{title}, in short",
        )
        for target, title, body in cells
    )
    return element("div", made, class_="glance")


def _set_in_short(subject: Subject) -> Html:
    performance = subject.performance
    design = performance.design
    parts = [
        ("camera", (name(design.camera), f", {design.gain_db:+g} dB" if design.gain_db else None)),
        ("filter", name(design.filter)),
        ("lens", f"f/{design.f_number:g}"),
        ("exposure", exposure_words(design)),
    ]
    shown = performance.leds[:AT_A_GLANCE] if len(performance.leds) <= AT_A_GLANCE else performance.leds[:3]
    parts += [(name(led.id), currents_words(design, led)) for led in shown]
    more = len(performance.leds) - len(shown)
    rest = paragraph(f"and {more} more LEDs", class_="more") if more else None
    dark = paragraph("all LEDs off") if not performance.leds else None
    return joined((settings(parts, class_="pairs"), rest, dark))


def _got_in_short(subject: Subject) -> Html:
    performance, required = subject.performance, subject.problem.spec.required_cnr
    cnr = element("p", element("span", "CNR", class_="unit"), " ", number(performance.cnr), class_="figure")
    return joined(
        (
            cnr,
            saturated(performance),
            None if required is None else paragraph(compared(performance.cnr, required)),
            paragraph(sign(performance), class_="more"),
            paragraph(f"{error_words(performance)} missed, as many false alarms", class_="more"),
        )
    )


def _limits_in_short(subject: Subject) -> Html:
    performance = subject.performance
    shown = [limit for limit in subject.by_use() if not limit.met] or [
        limit for limit in subject.by_use() if limit.name in subject.binding
    ]
    if not shown:
        head: Content = paragraph("No limit is reached.")
    elif shown[0].met:
        head = paragraph(state("Reached", "near"), " and holding the CNR down:")
    else:
        head = paragraph(state("Not met", "missed"), f": {len(shown)} of {len(performance.limits)} limits")
    rows = [(name(limit.name), percent(limit.share)) for limit in shown[:AT_A_GLANCE]]
    more = len(shown) - AT_A_GLANCE
    return joined(
        (
            head,
            settings(rows, class_="pairs"),
            paragraph(f"and {more} more", class_="more") if more > 0 else None,
            _largest_noise(performance),
        )
    )


def _largest_noise(performance: Performance) -> Html | None:
    total = sum(map(sum, performance.noise.values()))
    if not total > 0:
        return None
    term, pair = max(performance.noise.items(), key=lambda item: sum(item[1]))
    return paragraph(f"Most of the noise: {term}, {percent(sum(pair) / total)} of the variance", class_="more")


def _sure_in_short(subject: Subject) -> Html:
    solution = subject.solution
    if solution is None:
        return joined(
            (
                paragraph("A prediction for the recipe as it was typed."),
                paragraph("Whether another one is better was not searched: cnr solve does.", class_="more"),
            )
        )
    proof = solution.certificate
    lead = {"proven": ("Proven", "met")}.get(solution.status, ("Stopped early", "near"))
    gain = max(proof.bound / solution.recipe.cnr - 1, 0.0) if solution.recipe.cnr > 0 else math.inf
    return joined(
        (
            paragraph(
                state(*lead),
                f": no other setting of the candidates gains more than {percent(max(gain, LEAST_GAIN))}."
                if gain > 0
                else ": no other setting of the candidates is better.",
            ),
            paragraph(f"{proof.configurations} configurations, a bound for each.", class_="more"),
            paragraph("Bounds worked out again without the solver: passed.", class_="more")
            if subject.verdict
            else None,
            paragraph("For the data stated; measure before you order.", class_="more"),
        )
    )
