"""What happens when something strays or is changed: sensitivities and trade-offs."""

from __future__ import annotations

from typing import TYPE_CHECKING

from codesign.report.layout import number
from codesign.report.page.content import Section, Subject, quantity
from codesign.report.page.figures import drawn
from codesign.report.page.html import Content, Html, element, joined, listed, name, paragraph, table
from codesign.report.sensitivity_text import (
    NEGLIGIBLE,
    bound_gain,
    changes,
    missed,
    slope,
    tolerance,
    weight,
    worst_end,
)
from codesign.report.trade_text import least_words, nearly_words
from codesign.study.sensitivity import LimitPrice, Sensitivities

if TYPE_CHECKING:
    from codesign.study.trade import Trade, TradePoint

#: What a marked point of a trade-off curve is.
MARKS = {"own": " (limit of the problem)", "enough": " (enough for the CNR required)"}


def sensitivities(subject: Subject) -> Section | None:
    """Shadow prices, tolerances, and what changes within them."""
    found = subject.sensitivities
    if found is None:
        return _absent(subject, "sensitivities", "Sensitivities")
    body = (
        paragraph(
            "How the best CNR answers when a limit is moved or a data-sheet value strays. ",
            element("em", "Re-tuned"),
            " means currents and exposure are set anew for the changed value, ",
            element("em", "fixed"),
            " that the recipe stays as it is.",
            class_="lead",
        ),
        drawn(subject, "sensitivities"),
        element("h3", "What loosening a limit brings"),
        _prices(found),
        element("h3", "What the tolerances of the parts do"),
        _tolerances(found),
        _changed(found),
        _missed(found),
    )
    return Section(id="sensitivities", title="Sensitivities", short="Sensitivities", body=joined(body))


def _prices(found: Sensitivities) -> Html:
    priced = [limit for limit in found.limits if limit.binds and limit.price is not None]
    whole = [limit.name for limit in found.limits if limit.binds and limit.price is None]
    said = [paragraph(name(each), " binds too; it moves in whole steps and has no price.") for each in whole]
    if not priced:
        return joined((paragraph("No limit with a price binds: moving one a little changes nothing."), said))
    rows = [
        (
            name(limit.name),
            quantity(limit.bound, limit.unit),
            f"{number(limit.price, 3)} {_per(limit.unit)}",
            _one_per_cent(limit, found.cnr),
        )
        for limit in priced
    ]
    header = ("limit", "bound", "CNR gained", "bound +1 %")
    return joined((table("Limits at their bounds, and their shadow prices", header, rows, numbers=(1, 2, 3)), said))


def _per(unit: str) -> str:
    return f"per {quantity(1, unit).removeprefix('1 ')}" if unit else "per unit"


def _one_per_cent(limit: LimitPrice, cnr: float) -> str:
    return bound_gain((limit.price or 0.0) * 0.01 * limit.bound / cnr)


def _tolerances(found: Sensitivities) -> Html:
    weighty = sorted((x for x in found.parameters if weight(x) >= NEGLIGIBLE), key=weight, reverse=True)
    small = list(dict.fromkeys(x.parameter for x in found.parameters if weight(x) < NEGLIGIBLE))
    with_ends = any(x.low is not None or x.high is not None for x in weighty)
    rows = [
        (
            (x.parameter, ", ", name(x.part)) if x.part else x.parameter,
            tolerance(x),
            slope(x.retuned, x.unit),
            slope(x.fixed, x.unit),
            *((worst_end(x, found.cnr, "cnr_retuned"), worst_end(x, found.cnr, "cnr_fixed")) if with_ends else ()),
        )
        for x in weighty
    ]
    header: tuple[Content, ...] = ("quantity", "tolerance (σ)", "re-tuned", "fixed")
    header += ("worst, re-tuned", "worst, fixed") if with_ends else ()
    note = "Re-tuned, fixed: change of the CNR in % for 1 % (or 1 nm, degree, kelvin) more of the quantity. "
    if with_ends:
        note += "Worst: the lower CNR at either end of the tolerance, each end solved again with proof. "
    if small:
        note += f"Below {100 * NEGLIGIBLE:g} % of the CNR within tolerance, and not listed: {', '.join(small)}."
    return joined(
        (
            table(
                "Data-sheet values that stray, the weightiest first", header, rows, numbers=(1, 2, 3, 4, 5), wide=True
            )
            if rows
            else paragraph("No tolerance moves the CNR noticeably."),
            paragraph(note, class_="more"),
        )
    )


def _changed(found: Sensitivities) -> Html | None:
    told = changes(found)
    if not told:
        return None
    return joined((element("h3", "What changes within the tolerances"), listed(name(text) for text in told)))


def _missed(found: Sensitivities) -> Html | None:
    by_limit = missed(found)
    if not by_limit:
        return None
    items = [(name(limit), ": ", name("; ".join(why))) for limit, why in by_limit.items()]
    return joined(
        (
            element("h3", "Limits the recipe misses if it is held fixed"),
            paragraph("At the end of a tolerance, with nothing tuned again; leave room, or tune each rig."),
            listed(items),
        )
    )


def trade(subject: Subject) -> Section | None:
    """Best CNR against what it costs, one curve after another; nothing where no curve was asked for."""
    failed = [
        (key.removeprefix("trade-off "), why) for key, why in subject.notes.items() if key.startswith("trade-off")
    ]
    if not subject.trade and not failed:
        return None
    body = (
        paragraph(
            "Each point is the best recipe there is when the quantity is held to what the point uses, found and proven "
            "like the one above; the limit the problem itself sets on it is put aside."
        ),
        drawn(subject, "trade") if subject.trade else None,
        (_curve(curve) for curve in subject.trade),
        (paragraph(f"No curve against {name_}: ", name(why), ".") for name_, why in failed),
    )
    return Section(id="trade", title="Trade-offs", short="Trade-offs", body=joined(body))


def _curve(curve: Trade) -> Html:
    label, unit = curve.quantity.label, curve.quantity.unit
    header = (label, "CNR", "proven: none above", "recipe in steps", "parts", "LEDs lit")
    rows = [
        (
            (quantity(point.used, unit), MARKS.get(point.mark)),
            number(point.optimum.cnr),
            number(point.optimum.bound),
            number(point.recipe_cnr),
            (name(point.optimum.camera), ", ", name(point.optimum.filter), f", f/{point.optimum.f_number:g}"),
            _lit(point),
        )
        for point in curve.possible
    ]
    return joined(
        (
            element("h3", f"CNR against {label}"),
            listed(_enough(curve)),
            table(f"Best CNR for each {label}", header, rows, numbers=(1, 2, 3), wide=True),
        )
    )


def _lit(point: TradePoint) -> Content:
    return [(", " if k else "", name(led)) for k, led in enumerate(point.optimum.drive_ma)]


def _enough(curve: Trade) -> list[str]:
    """How little is enough for the CNR required, and for nearly all there is."""
    found = [least_words(curve, curve.most, nearly_words(curve))]
    if curve.enough is not None:
        found.insert(0, least_words(curve, curve.enough, f"CNR {number(curve.enough.cnr)}"))
    return [f"{text[0].upper()}{text[1:]}." for text in found]


def _absent(subject: Subject, key: str, title: str) -> Section | None:
    """A section that only says why it is empty; none where nobody asked for it."""
    why = subject.notes.get(key)
    if why is None:
        return None
    return Section(id=key, title=title, short=title, body=paragraph("Not in this report: ", name(why), "."))
