"""Results as they show themselves in a notebook (`html`) and at a prompt (`line`); found by `codesign.display`.

Every class of results has one entry in `RENDERERS`, by its full name: a function that returns a `View`. Names typed by
people are words in the view, never markup.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from codesign.report.layout import counted, cut, number, percent
from codesign.report.notebook_html import (
    BACKGROUND,
    FILTER,
    LIGHT,
    TARGET,
    Curve,
    bar,
    card,
    note,
    pairs,
    strip,
    strong,
    table,
)
from codesign.report.notebook_study import STUDIES
from codesign.report.output import plain
from codesign.report.page.html import Content, Html, joined, name
from codesign.report.text import UNITS

if TYPE_CHECKING:
    from codesign.design import Design, LimitUse, Performance
    from codesign.least_cost import LeastCost
    from codesign.problem import Problem
    from codesign.solve import Solution

#: Longest title in one line. [columns]
TITLE = 60
#: Limits shown, the most used first; those missed are all shown.
LIMITS = 5


@dataclass(frozen=True, slots=True, kw_only=True)
class View:
    """What a result shows: ``title``, the line that matters most, and the blocks below, made only when asked for."""

    kind: str
    title: str
    summary: str
    blocks: Callable[[], list[Content]]


def html(value: Any) -> str:
    """Return a result as compact HTML for a notebook."""
    view = _view(value)
    return str(card(view.title, strong(view.summary), view.blocks()))


def line(value: Any) -> str:
    """Return a result as one line of text."""
    view = _view(value)
    title = f" {cut(plain(view.title), TITLE)!r}" if view.title != view.kind else ""
    return f"<{view.kind}{title}: {plain(view.summary)}>"


def _view(value: Any) -> View:
    for kind in type(value).__mro__:
        found = RENDERERS.get(f"{kind.__module__}.{kind.__qualname__}")
        if found is not None:
            return found(value)
    raise TypeError(f"{type(value).__name__} has no entry in RENDERERS")


# --- recipes ---------------------------------------------------------------------------------------------------


def solution_view(found: Solution) -> View:
    """The recipe, what it reaches and the proof."""
    proof, recipe = found.certificate, found.recipe
    state = "proven" if found.status == "proven" else f"search stopped, {percent(proof.gap)} left open"
    summary = f"CNR {number(recipe.cnr)}, none above {number(proof.bound, 5)} ({state}); {short(recipe.design)}"

    def blocks() -> list[Content]:
        return [
            _required(found.problem, recipe.cnr),
            settings(recipe),
            spectra_strip(found.problem, recipe),
            limits(recipe, found.binding),
            note(
                f"{proof.configurations} configurations bounded in {found.seconds:.1f} s; the recipe in settable "
                f"steps is {percent(found.rounding_loss, least=1e-6)} below the bound"
            ),
        ]

    return View(kind="Solution", title=found.problem.spec.title, summary=summary, blocks=blocks)


def performance_view(found: Performance) -> View:
    """What a recipe achieves."""
    missed = f", {counted(len(found.violated), 'limit')} NOT met" if found.violated else ""
    summary = f"CNR {number(found.cnr)}, target {found.sign}{missed}; {short(found.design)}"

    def blocks() -> list[Content]:
        rows = [
            (name(r.id), r.role, f"{r.grey_dn:.1f}", number(r.total_e), percent(r.saturation_share))
            for r in found.surfaces
        ]
        header = ("surface", "role", "grey value [DN]", "electrons", "of saturation")
        return [settings(found), table(header, rows, numbers=(2, 3, 4)), limits(found, None)]

    return View(kind="Performance", title="Performance", summary=summary, blocks=blocks)


def least_cost_view(found: LeastCost) -> View:
    """The least of something, with the recipe that needs no more."""
    value = f"{found.value:.6g} {UNITS.get(found.unit, found.unit)}".rstrip()
    below = f"; none does with {found.bound:.6g} or less ({found.status})" if found.bound > 0 else ""
    summary = f"CNR {found.required_cnr:g} is reached with {value}{below}"

    def blocks() -> list[Content]:
        inner = solution_view(found.solution)
        return [note(inner.summary), *inner.blocks()]

    title = f"Least {found.quantity}: {found.solution.problem.spec.title}"
    return View(kind="LeastCost", title=title, summary=summary, blocks=blocks)


def problem_view(problem: Problem) -> View:
    """What is looked at, with which candidates."""
    parts = (("LED", problem.channels), ("filter", problem.filters), ("camera", problem.cameras))
    summary = ", ".join(counted(len(listed), kind) for kind, listed in parts) + " to choose from"

    def blocks() -> list[Content]:
        stated = {
            key: value for key, value in problem.spec.limits.model_dump(exclude_none=True).items() if value is not None
        }
        rows: list[tuple[Content, Content]] = [
            ("file", name(problem.where)),
            ("target", _names(problem.targets)),
            ("background", _names(problem.backgrounds)),
            ("guards", _names(problem.guards) if problem.guards else "none"),
            ("wavelengths", f"{problem.grid[0]:.0f} to {problem.grid[-1]:.0f} nm, {problem.grid.size} points"),
            ("light", problem.spec.lighting.mode),
            ("limits", ", ".join(f"{key} = {value:g}" for key, value in stated.items())),
            ("required", f"CNR {problem.spec.required_cnr:g}" if problem.spec.required_cnr else "no CNR stated"),
        ]
        left = f"{len(problem.left_out)} candidates could not be used, see left_out" if problem.left_out else None
        return [pairs(rows), note(left) if left else None]

    return View(kind="Problem", title=problem.spec.title, summary=summary, blocks=blocks)


# --- pieces ----------------------------------------------------------------------------------------------------


def short(design: Design) -> str:
    """A design in a few words."""
    every = (design.drive_ma, *(shot.drive_ma for shot in design.shots))
    lit = {led for drives in every for led, ma in drives.items() if ma > 0}
    light = counted(len(lit), "LED") if len(lit) > 2 else " + ".join(sorted(lit)) or "LEDs off"
    part = "no filter" if design.filter == "none" else design.filter
    return f"{design.camera}, {part}, f/{design.f_number:g}, {number(design.exposure_us)} µs, {light}"


def settings(found: Performance) -> Html:
    """What is dialled in."""
    design = found.design
    rows: list[tuple[Content, Content]] = [
        ("camera", (name(design.camera), ", channel ", name(design.channel), f", gain {design.gain_db:g} dB")),
        ("filter", name(design.filter)),
        ("f-number, exposure", f"f/{design.f_number:g}, {_exposure(design)}"),
    ]
    for state in found.leds:
        drive = f"{state.drive_ma:.10g} mA"
        if design.shots:
            drive = ", ".join(f"{shot.drive_ma.get(state.id, 0.0):.10g}" for shot in design.shots) + " mA"
        rows.append((name(state.id), f"{drive} × {state.emitters}, junction {state.junction_c:.1f} °C"))
    return pairs(rows if found.leds else [*rows, ("LEDs", "all off")])


def _exposure(design: Design) -> str:
    if not design.shots:
        return f"{design.exposure_us:.10g} µs"
    return f"{len(design.shots)} shots of " + ", ".join(f"{shot.exposure_us:.10g}" for shot in design.shots) + " µs"


def limits(found: Performance, binding: tuple[str, ...] | None) -> Html:
    """The limits used most, all that are missed among them."""
    ordered = sorted(found.limits, key=lambda limit: -limit.share)
    shown = [limit for k, limit in enumerate(ordered) if k < LIMITS or not limit.met]
    rows = [(_limit_name(limit, binding), number(limit.value), _allowed(limit), percent(limit.share), bar(limit.share))
            for limit in shown]  # fmt: skip
    left = len(ordered) - len(shown)
    more = note(f"and {counted(left, 'limit')} used less") if left > 0 else None
    return joined((table(("limit", "value", "allowed", "used", ""), rows, numbers=(1, 2, 3)), more))


def _limit_name(limit: LimitUse, binding: tuple[str, ...] | None) -> Content:
    if not limit.met:
        return strong(name(limit.name), " NOT met")
    return (name(limit.name), " (binds)") if binding is not None and limit.name in binding else name(limit.name)


def _allowed(limit: LimitUse) -> str:
    return f"{'≥' if limit.floor else '≤'} {number(limit.bound)} {UNITS.get(limit.unit, limit.unit)}"


def _required(problem: Problem, cnr: float) -> Content:
    required = problem.spec.required_cnr
    if required is None:
        return None
    return note(f"required CNR {required:g}: {'met' if cnr >= required else 'NOT met'}, {cnr / required:.2f} times")


def _names(surfaces: Any) -> list[Content]:
    return [piece for k, surface in enumerate(surfaces) for piece in ([", "] if k else []) + [name(surface.id)]]


def spectra_strip(problem: Problem, performance: Performance) -> Html:
    """Light, filter and the electrons of target and background over wavelength, as a small picture."""
    from codesign.design_spectra import spectra
    from codesign.report.figures.spectral import shown_range

    if not performance.leds:
        return Html("")
    found = spectra(problem, performance)
    low, high = shown_range(found)
    inside = (found.wavelength_nm >= low) & (found.wavelength_nm <= high)
    light = sum(curve for reading in found.readings for curve in reading.leds.values())
    electrons = np.sum([reading.led_e + reading.ambient_e for reading in found.readings], axis=0)[list(found.pair)]
    top = max(float(electrons[:, inside].max()), 1e-300)
    target, background = (problem.surfaces[k].id for k in found.pair)
    curves = [
        Curve(name="light of the LEDs", color=LIGHT, dashes="area", values=_scaled(light)[inside]),
        Curve(name=f"electrons, {background}", color=BACKGROUND, dashes="6 3", values=electrons[1, inside] / top),
        Curve(name=f"electrons, {target}", color=TARGET, dashes="", values=electrons[0, inside] / top),
    ]
    if performance.design.filter != "none":
        curves.append(Curve(name="filter", color=FILTER, dashes="2 3", values=found.filter[inside]))
    words = "Light of the LEDs and electrons of target and background by wavelength, each on its own scale"
    return strip(found.wavelength_nm[inside], curves, words)


def _scaled(values: Any) -> Any:
    return values / max(float(np.max(values)), 1e-300)


RENDERERS: Mapping[str, Callable[[Any], View]] = {
    "codesign.solve.Solution": solution_view,
    "codesign.design.Performance": performance_view,
    "codesign.least_cost.LeastCost": least_cost_view,
    "codesign.problem.model.Problem": problem_view,
    **STUDIES,
}
