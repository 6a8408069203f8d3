"""The recipe in full: what to set, what you get, what limits it, where the noise comes from."""

from __future__ import annotations

from dataclasses import replace

from codesign.design import Performance
from codesign.limit_use import LimitUse
from codesign.report.layout import number, percent
from codesign.report.page.content import Section, Subject, quantity, root_mean_square, state
from codesign.report.page.figures import drawn
from codesign.report.page.html import (
    BAR_HEADER,
    Content,
    Html,
    bar,
    download,
    element,
    joined,
    lines,
    name,
    paragraph,
    settings,
    table,
)
from codesign.report.recipe_file import recipe_toml
from codesign.report.text import CNR_DEFINITION, currents_words, exposure_words, light_words, rate_words


def recipe(subject: Subject) -> Section:
    """Everything that is set by hand."""
    performance = subject.performance
    design = performance.design
    rows: list[tuple[Content, Content]] = [
        ("camera", (name(design.camera), ", channel ", name(design.channel))),
        ("gain", f"{design.gain_db:g} dB"),
        ("filter", name(design.filter) if design.filter != "none" else "none"),
        ("f-number", f"f/{design.f_number:g}"),
        ("exposure", exposure_words(design)),
        ("light", light_words(subject.problem, performance)),
    ]
    if performance.weights:
        weights = [
            (", " if k else "", name(key), f" {value:+.4f}")
            for k, (key, value) in enumerate(performance.weights.items())
        ]
        rows.append(("weights", ("readings added up as ", weights)))
    header = ("LED", "current", "emitters", "junction", "power and light of one emitter while on")
    leds = [
        (
            name(led.id),
            currents_words(design, led),
            f"× {led.emitters}",
            f"{led.junction_c:.1f} °C",
            f"{number(led.electrical_w, 3)} W in, {number(led.optical_w, 3)} W of light",
        )
        for led in performance.leds
    ]
    text = recipe_toml(replace(design, weights=performance.weights), f"predicted CNR {performance.cnr:.6g}")
    body = (
        settings(rows, class_="pairs wide"),
        table("Current of each LED; all others are off", header, leds, numbers=(1, 2, 3))
        if leds
        else paragraph("All LEDs are off."),
        paragraph(download("Save as recipe file", text, "recipe.toml"), class_="actions"),
        element("pre", lines(text.rstrip("\n")), class_="file whole"),
    )
    return Section(id="recipe", title="What to set", short="What to set", body=joined(body))


def sign(performance: Performance) -> str:
    """How the target shows."""
    return f"target {performance.sign} than background" if performance.cnr > 0 else "no usable contrast"


def compared(cnr: float, required: float) -> Html:
    """A CNR against the one required."""
    if cnr >= required:
        return joined((f"needed {required:g}: ", state("met", "met"), f", {cnr / required:.2f} times"))
    return joined((f"needed {required:g}: ", state("not met", "missed"), f", {percent(1 - cnr / required)} short"))


def error_words(performance: Performance) -> str:
    """How often a decision is wrong."""
    return rate_words(performance.error_rate).replace("10^12", "10¹²")


def saturated(performance: Performance) -> Html | None:
    """Say that the camera clips where it does: the CNR is then that of a camera without an end to its well."""
    clipped = [s.id for s in performance.surfaces if s.role != "guard" and s.saturation_share > 1]
    if not clipped:
        return None
    names = [(", " if k else "", name(each)) for k, each in enumerate(clipped)]
    return paragraph(state("Saturated", "missed"), ": ", names, "; a picture does not show this CNR.")


def result(subject: Subject) -> Section:
    """Contrast, errors, grey values."""
    problem, performance = subject.problem, subject.performance
    noise = root_mean_square(map(sum, zip(*performance.noise.values(), strict=True)))
    rows: list[tuple[Content, Content]] = [
        ("CNR", (element("strong", number(performance.cnr)), f", {sign(performance)}")),
        ("that is", CNR_DEFINITION),
        ("in numbers", _in_numbers(subject, noise)),
    ]
    if problem.spec.required_cnr is not None:
        rows.append(("required", compared(performance.cnr, problem.spec.required_cnr)))
    rows.append(
        (
            "errors",
            f"{error_words(performance)} missed and as many false alarms, threshold midway, noise normally distributed",
        )
    )
    header = ("surface", "role", "grey value [DN]", "electrons", "from ambient light", "of saturation", BAR_HEADER)
    surfaces = [
        (
            name(s.id),
            s.role,
            f"{s.grey_dn:.1f}",
            number(s.total_e),
            percent(s.ambient_e / s.total_e) if s.total_e > 0 else "0 %",
            percent(s.saturation_share),
            bar(s.saturation_share, s.role),
        )
        for s in performance.surfaces
    ]
    body = (
        saturated(performance),
        settings(rows, class_="pairs wide"),
        _pairs(performance),
        table(
            "Mean of one pixel on each surface", header, surfaces, numbers=(2, 3, 4, 5), class_="with-bars", wide=True
        ),
        paragraph(
            "Compare the grey values with those of a first picture before parts are ordered: they tell more quickly "
            "than anything else whether the rig is the one described here."
        ),
        _beside_plain(subject),
        drawn(subject, "view"),
    )
    return Section(id="result", title="What you get", short="What you get", body=joined(body))


def _beside_plain(subject: Subject) -> Html | None:
    """The recipe against one white LED without a filter."""
    plain = subject.plain
    if plain is None or not plain.performance.cnr > 0:
        return None
    return paragraph(
        name(plain.words),
        f", set as well as can be within the same limits, reaches CNR {number(plain.performance.cnr)}: the recipe has "
        f"{number(subject.performance.cnr / plain.performance.cnr, 3)} times that.",
    )


def _in_numbers(subject: Subject, noise: float) -> str:
    """Difference and noise; in grey values too where there is one reading."""
    problem, performance = subject.problem, subject.performance
    said = f"{number(abs(performance.signal_e))} e⁻ of difference over {number(noise)} e⁻ of noise"
    if performance.weights:
        return said + ", both of the weighted sum"
    gain = next(
        g.conversion_gain_dn_per_e
        for g in problem.camera(performance.design.camera).gain_settings()
        if abs(g.gain_db - performance.design.gain_db) < 1e-9
    )
    averaging = problem.spec.averaging
    said += f", {number(abs(performance.signal_e) * gain)} DN over {number(noise * gain)} DN"
    if averaging.pixels * averaging.frames > 1:
        said += f", after averaging {_counted(averaging.pixels, 'pixel')} in {_counted(averaging.frames, 'frame')}"
    return said


def _counted(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def _pairs(performance: Performance) -> Html | None:
    if len(performance.pairs) < 2:
        return None
    ordered = sorted(performance.pairs, key=lambda pair: pair.cnr)
    rows = [(name(p.target), name(p.background), number(p.cnr), number(p.signal_e)) for p in ordered]
    header = ("target", "background", "CNR", "difference [e⁻]")
    return table("Every pair, the worst first: it is the one that counts", header, rows, numbers=(2, 3))


def limits(subject: Subject) -> Section:
    """Use of every limit."""
    rows = [_limit_row(limit, subject.binding) for limit in subject.by_use()]
    header = ("limit", "value", "allowed", "used", BAR_HEADER, "state")
    note = (
        "Binds: the best recipe touches this limit, so loosening it can raise the CNR."
        if subject.solution is not None
        else "Reached: used to 99.9 % or more."
    )
    missed = [limit for limit in subject.performance.limits if not limit.met]
    body = (
        [paragraph(state("Not met", "missed"), ": ", name(limit.shortfall())) for limit in missed],
        paragraph(note, class_="more lead") if subject.binding else None,
        table("All limits, the most used first", header, rows, numbers=(1, 2, 3), class_="with-bars", wide=True),
    )
    return Section(id="limits", title="What limits it", short="Limits", body=joined(body))


def _limit_row(limit: LimitUse, binding: tuple[str, ...]) -> tuple[Content, ...]:
    word: Content = None
    kind = ""
    if not limit.met:
        word, kind = state("exceeded", "missed"), "missed"
    elif limit.name in binding:
        word, kind = state("binds", "near"), "near"
    allowed = f"{'≥' if limit.floor else '≤'} {quantity(limit.bound, limit.unit)}"
    return (
        name(limit.name),
        number(limit.value),
        allowed,
        percent(limit.share, least=0.001),
        bar(limit.share, kind),
        word,
    )


def noise(subject: Subject) -> Section:
    """Noise term by term."""
    performance = subject.performance
    total = sum(map(sum, performance.noise.values()))
    ordered = sorted(performance.noise.items(), key=lambda item: -sum(item[1]))
    rows = [
        (
            term,
            number(pair[0] ** 0.5, 3),
            number(pair[1] ** 0.5, 3),
            percent(sum(pair) / total, least=0.001),
            NOISE_WORDS.get(term),
        )
        for term, pair in ordered
        if total > 0 and sum(pair) > 0
    ]
    header = ("source", "target [e⁻]", "background [e⁻]", "of the variance", "what lowers it")
    body = (
        table("Standard deviation by source, in electrons", header, rows, numbers=(1, 2, 3), wide=True)
        if rows
        else paragraph("There is no noise to list."),
        drawn(subject, "noise"),
    )
    return Section(id="noise", title="Noise budget", short="Noise", body=joined(body))


def story(subject: Subject) -> Section | None:
    """Where contrast and noise come from, by wavelength; nothing without light."""
    if not subject.performance.leds:
        return None
    body = drawn(subject, "story")
    if body is None:
        return None
    return Section(id="story", title="Where the contrast comes from", short="By wavelength", body=body)


#: What a practitioner can do about each source of noise.
NOISE_WORDS = {
    "read noise": "more electrons, averaging, another camera or gain",
    "quantisation": "more bits, more electrons, averaging",
    "light shot noise": "more electrons (well, frames, pixels), averaging",
    "ambient shot noise": "a narrower filter, a shorter flash, a hood",
    "dark shot noise": "a cooler sensor, a shorter exposure",
    "dark fixed pattern": "dark-frame correction, averaging over pixels",
    "photo-response fixed pattern": "flat-field correction, averaging over pixels",
    "surface clutter": "other wavelengths; more light or averaging does not help",
}
