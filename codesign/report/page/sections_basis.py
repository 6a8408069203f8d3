"""What the result rests on: everything the problem states or takes by default, and the parts with their sources."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from pydantic import BaseModel

from codesign.catalog import Part
from codesign.problem import Problem
from codesign.problem.choices import JOINT
from codesign.report.layout import number
from codesign.report.page.content import Section, Subject, quantity
from codesign.report.page.html import Content, Html, element, grouped_table, joined, listed, name, paragraph, table

#: Sections of a problem file in the order of the signal chain, and what they are called here.
SECTIONS = {
    "scene": "Scene",
    "lighting": "Light and rig",
    "optics": "Lens and filter",
    "motion": "Motion",
    "timing": "Timing",
    "temperature": "Temperatures",
    "limits": "Limits",
    "averaging": "Averaging",
    "detection": "Detection",
    "build": "What may be built",
    "candidates": "Candidates",
    "grid": "Wavelengths",
    "solver": "Search",
    "tolerance": "Tolerances",
}
#: What the model takes for granted whatever the problem says.
MODEL = (
    "Surfaces reflect like a matt white standard times their measured reflectance, and like a mirror as far as "
    "specular_reflectance and specular_weight say.",
    "The light of an LED falls evenly on the field; its flux and colour follow the data sheet and the junction "
    "temperature it settles at.",
    "The camera is linear up to saturation; its noise is that of EMVA Standard 1288, term by term.",
    "The spread of the measured samples of a surface counts as noise that no averaging removes.",
    "A decision is made pixel by pixel (or on the averages stated) with one threshold.",
)
#: Units as set in text.
TYPESET = (("[deg C]", "[°C]"), ("[deg]", "[°]"), ("[us]", "[µs]"), ("[W/m2]", "[W/m²]"), ("[1/m2]", "[1/m²]"))
#: Left-out parts shown before the list is folded.
LEFT_OUT_SHOWN = 6


def assumptions(subject: Subject) -> Section:
    """Everything in the problem that the result rests on."""
    problem = subject.problem
    spec = problem.spec
    groups = [(title, list(_rows(getattr(spec, key), key))) for key, title in SECTIONS.items()]
    body = (
        paragraph(
            "Every figure of this report is as good as what stands here. ",
            "From ",
            element("em", "file"),
            " means written in the problem file, ",
            element("em", "default"),
            " taken because the file says nothing.",
        ),
        paragraph(element("strong", "Notes of the problem: "), name(spec.notes)) if spec.notes.strip() else None,
        element("h3", "Taken for granted by the model"),
        listed(MODEL),
        element("h3", "Light that reaches the object"),
        _delivery(subject),
        element("h3", "Stated in the problem, or taken by default"),
        grouped_table("Every field that has a value", ("field", "value", "from", "meaning"), groups, class_="fields"),
    )
    return Section(id="assumptions", title="Assumptions", short="Assumptions", body=joined(body))


def _rows(record: BaseModel | None, prefix: str) -> Iterator[tuple[Content, ...]]:
    """A row per field that has a value."""
    if record is None:
        return
    for key, field in type(record).model_fields.items():
        value = getattr(record, key)
        if value is None or value == () or value == {}:
            continue
        stated = key in record.model_fields_set
        if prefix == "tolerance" and not stated:
            continue
        path = f"{prefix}.{key}"
        for label, inner in _split(path, value):
            if isinstance(inner, BaseModel):
                yield from _rows(inner, label)
            else:
                origin = "file" if stated else "default"
                yield element("code", label), name(_shown(inner)), origin, _typeset(field.description or "")


def _split(path: str, value: Any) -> Iterator[tuple[str, Any]]:
    """A field that holds records falls into one entry each."""
    if isinstance(value, Mapping) and any(isinstance(inner, BaseModel) for inner in value.values()):
        yield from ((f"{path}.{key}", inner) for key, inner in value.items())
    elif isinstance(value, tuple) and any(isinstance(inner, BaseModel) for inner in value):
        yield from ((f"{path}[{k}]", inner) for k, inner in enumerate(value))
    else:
        yield path, value


def _typeset(text: str) -> str:
    for plainly, well in TYPESET:
        text = text.replace(plainly, well)
    return text


def _shown(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, tuple):
        return ", ".join(_shown(inner) for inner in value)
    return f"{value:.10g}" if isinstance(value, int | float) else str(value)


def _delivery(subject: Subject) -> Html:
    """How much light of each LED in use reaches the object, and how that is known."""
    problem, performance = subject.problem, subject.performance
    rows = []
    for state in performance.leds:
        channel = problem.channel(state.id)
        share = state.emitters / channel.emitters
        watts = state.optical_w * channel.delivery * share
        rows.append(
            (
                name(state.id),
                number(channel.delivery * share),
                f"{number(watts, 3)} W/m²",
                _known_from(problem, state.id),
            )
        )
    ambient = _ambient(problem)
    if not rows:
        return paragraph("All LEDs are off. ", ambient)
    header = ("LED", "delivery [1/m²]", "at the object, while on", "known from")
    return joined(
        (table("Irradiance per watt of one emitter, all together", header, rows, numbers=(1, 2)), paragraph(ambient))
    )


def _known_from(problem: Problem, led: str) -> str:
    lighting = problem.spec.lighting
    own = lighting.led.get(led)
    if own is not None and own.measured_irradiance_w_per_m2:
        return "measured at the object"
    if (own is not None and own.delivery_per_m2) or lighting.delivery_per_m2 is not None:
        return "stated in the problem"
    return f"beam angle, {lighting.distance_mm:g} mm, {lighting.incidence_deg:g}° incidence; not measured"


def _ambient(problem: Problem) -> str:
    from codesign.spectra import trapezoid_weights

    watts = float(problem.ambient @ trapezoid_weights(problem.grid))
    if not watts > 0:
        return "No ambient light is assumed."
    return f"Ambient light brings {number(watts, 3)} W/m² between {problem.grid[0]:g} and {problem.grid[-1]:g} nm."


# --- parts -----------------------------------------------------------------------------------------------------


def parts(subject: Subject) -> Section:
    """Parts of the recipe with their sources, and candidates that were left out."""
    used = list(_used(subject))
    rows = [(name(part.id), kind, name(part.description or "-"), _price(part), _source(part)) for kind, part in used]
    catalog = subject.problem.catalog
    body = (
        paragraph(
            element("strong", "Invented parts are in use: "),
            "they stand for no product, and nothing can be ordered from this list.",
            class_="notice",
        )
        if any(part.invented for _, part in used)
        else None,
        table(
            "Parts and surfaces of the recipe", ("id", "kind", "what", "price", "source"), rows, numbers=(3,), wide=True
        ),
        paragraph("Catalogue: ", name(catalog.name), ", ", name(catalog.source)),
        element("h3", "Left out"),
        _left_out(subject.problem.left_out),
    )
    return Section(id="parts", title="Parts and where their data come from", short="Parts", body=joined(body))


def _used(subject: Subject) -> Iterator[tuple[str, Part]]:
    problem, design = subject.problem, subject.performance.design
    yield "camera", problem.camera(design.camera)
    catalog = problem.catalog
    for single in design.filter.split(JOINT):
        part = catalog.filters.get(single)
        if part is not None:
            yield "filter", part
    for state in subject.performance.leds:
        yield "LED", problem.channel(state.id).led
    for index, surface in enumerate(problem.surfaces):
        yield f"surface ({problem.role(index)})", surface


def _price(part: Part) -> str:
    return "-" if part.price is None else quantity(part.price, "")


def _source(part: Part) -> Content:
    mark = (element("strong", "invented", class_="state near"), "; ") if part.invented else ()
    return (*mark, name(part.source))


def _left_out(texts: tuple[str, ...]) -> Html:
    if not texts:
        return paragraph("No candidate was left out.")
    items = [name(text) for text in texts]
    if len(items) <= LEFT_OUT_SHOWN:
        return listed(items)
    return element("details", element("summary", f"{len(items)} candidates that do not fit, and why"), listed(items))
