"""The spectral story of a recipe: its light, what the light meets, and where contrast and noise come from."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from codesign.design import Performance
from codesign.design_spectra import Spectra, spectra
from codesign.problem import Problem
from codesign.report.figures.base import (
    TEXT_WIDTH,
    blank,
    describe,
    dress,
    in_house_style,
    legend_above,
    new_figure,
    scale_of,
    signed,
)
from codesign.report.figures.peaks import Peak, name_peaks
from codesign.report.figures.spectral_electrons import (
    BEYOND,
    area,
    curve,
    draw_contrast,
    draw_electrons,
    draw_noise,
    surface_lines,
)
from codesign.report.house import AMBIENT, DASHES, FILTER, INK, MUTED, RULE, SENSOR
from codesign.report.layout import number

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from codesign.design_spectra import Array
    from codesign.report.figures.base import Panel

    Entries = list[tuple[Artist, str]]

#: Wavelengths shown beside those, and least range shown. [nm]
MARGIN, NARROWEST_RANGE = 15.0, 120.0
#: Heights of the panels to each other: light, parts, electrons, contrast, noise.
HEIGHTS = (1.1, 1.5, 1.1, 1.0, 1.0)


@in_house_style
def spectral_story(problem: Problem, performance: Performance, *, width: float = TEXT_WIDTH) -> Figure:
    """Draw light, parts, electrons, contrast and noise of a recipe over one wavelength axis.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        What `codesign.design.evaluate` said of the recipe.
    width : float
        Width in print. [mm]
    """
    figure = new_figure(width, 205.0)
    draw_spectral_story(figure, problem, performance)
    return describe(figure, "Spectral story of the recipe", story_in_words(problem, performance))


def draw_spectral_story(
    panel: Panel, problem: Problem, performance: Performance, *, noise: bool = True, keys: bool = True
) -> dict[str, int]:
    """Draw the story into a figure or a part of one.

    ``noise`` says whether with the last panel. Returns the number of each LED where numbers stand for the names over
    the light, else nothing; ``keys`` says whether they are explained above it.
    """
    found = spectra(problem, performance)
    heights = HEIGHTS[: 5 if noise else 4]
    every = panel.subplots(len(heights), 1, sharex=True, height_ratios=heights)
    every[0].set_xlim(*shown_range(found))
    numbers = _draw_light(every[0], problem, found, performance, keys)
    _draw_parts(every[1], problem, found, performance)
    draw_electrons(every[2], problem, found)
    draw_contrast(every[3], problem, found, performance)
    if noise:
        draw_noise(every[4], found)
    every[-1].set_xlabel("wavelength [nm]")
    return numbers


def shown_range(found: Spectra) -> tuple[float, float]:
    """First and last wavelength that matter: light of the LEDs and electrons, but for `BEYOND` of each. [nm]"""
    curves = [light for reading in found.readings for light in reading.leds.values()]
    curves += [row for reading in found.readings for row in (reading.led_e + reading.ambient_e)[list(found.pair)]]
    ends = [_core(found.wavelength_nm, curve) for curve in curves if curve.sum() > 0]
    low = min((a for a, _ in ends), default=found.wavelength_nm[0]) - MARGIN
    high = max((b for _, b in ends), default=found.wavelength_nm[-1]) + MARGIN
    widen = max(NARROWEST_RANGE - (high - low), 0.0) / 2
    return max(low - widen, float(found.wavelength_nm[0])), min(high + widen, float(found.wavelength_nm[-1]))


def _core(grid: Array, curve: Array) -> tuple[float, float]:
    """Wavelengths between which all but `BEYOND` of a curve lies. [nm]"""
    share = np.cumsum(curve) / curve.sum()
    first, last = np.searchsorted(share, (BEYOND / 2, 1 - BEYOND / 2))
    return float(grid[first]), float(grid[min(last, grid.size - 1)])


# --- light and parts -------------------------------------------------------------------------------------------


def _draw_light(axes: Axes, problem: Problem, found: Spectra, performance: Performance, keys: bool) -> dict[str, int]:
    grid, entries, peaks, shots = found.wavelength_nm, [], {}, _light_of_shots(found, performance)
    unit, sign = scale_of(max((float(light.max()) for _, leds in shots for light in leds.values()), default=1.0))
    for index, (name, leds) in enumerate(shots):
        line = None
        for led, own in leds.items():
            light = own / unit
            line = curve(axes, grid, light, color=INK, linestyle=DASHES[index % len(DASHES)], linewidth=1.0)
            area(axes, grid, 0 * light, light, color=RULE, alpha=0.6)
            peak = Peak(float(grid[np.argmax(light)]), float(light.max()), led, _drive_words(performance, led))
            peaks[led] = max(peaks.get(led, peak), peak, key=lambda p: p.height)
        if line is not None and performance.design.shots:
            entries.append((line, f"LEDs in {name}"))
    if np.any(problem.ambient):
        entries.append(
            (
                curve(axes, grid, problem.ambient / unit, color=AMBIENT, linestyle=DASHES[5], linewidth=1.6),
                "ambient light",
            )
        )
    dress(axes, y=f"{sign}W m⁻² nm⁻¹")
    numbered = name_peaks(axes, list(peaks.values()))
    entries += [(blank(), f"{key}  {words}") for key, _, words in numbered if keys]
    legend_above(axes, "Light at the object" + (" during the exposure" if problem.strobe else ""), entries)
    return {led: key for key, led, _ in numbered}


def _light_of_shots(found: Spectra, performance: Performance) -> list[tuple[str, dict[str, Array]]]:
    """Light of each shot; channels read together share it."""
    readings = found.readings if performance.design.shots else found.readings[:1]
    return [(reading.name, dict(reading.leds)) for reading in readings]


def _drive_words(performance: Performance, led: str) -> str:
    """Current of an LED; none where it differs from shot to shot."""
    return "" if performance.design.shots else f"{performance.design.drive_ma[led]:.10g} mA"


def _draw_parts(axes: Axes, problem: Problem, found: Spectra, performance: Performance) -> None:
    grid, entries = found.wavelength_nm, []
    for index, dash, color, width in surface_lines(problem, found.pair):
        mean, spread = found.reflectance[index], found.spread[index]
        line = curve(axes, grid, mean, color=color, linestyle=dash, linewidth=width)
        area(axes, grid, mean - spread, mean + spread, color=color, alpha=0.22)
        entries.append((line, problem.surfaces[index].id))
    if performance.design.filter != "none":
        area(axes, grid, 0 * found.filter, found.filter, color=FILTER, alpha=0.12)
        line = curve(axes, grid, found.filter, color=FILTER, linestyle=DASHES[2], linewidth=1.2)
        entries.append((line, f"filter {performance.design.filter}"))
    for k, reading in enumerate(found.readings if not performance.design.shots else found.readings[:1]):
        line = curve(
            axes, grid, reading.quantum_efficiency, color=SENSOR, linestyle=DASHES[(3, 4, 6)[k % 3]], linewidth=1.2
        )
        which = f", {reading.name}" if len(found.readings) > 1 and not performance.design.shots else ""
        entries.append((line, f"sensor, electrons per photon{which}"))
    entries.append((curve(axes, grid, found.lens, color=MUTED, linestyle=DASHES[7], linewidth=0.9), "lens"))
    dress(axes, y="share")
    axes.set_ylim(0, max(1.02, 1.05 * float(np.max(found.reflectance[list(found.pair)]))))
    legend_above(axes, "What the light meets (bands: spread of the samples)", entries)


def story_in_words(problem: Problem, performance: Performance) -> str:
    """Say what the figure shows, for those who cannot see it."""
    found = spectra(problem, performance)
    low, high = shown_range(found)
    lit = ", ".join(f"{state.id} at {state.drive_ma:.10g} mA" for state in performance.leds) or "none"
    target, background = (problem.surfaces[index].id for index in found.pair)
    return (
        f"Curves from {low:.0f} to {high:.0f} nm. LEDs lit: {lit}. Filter: {performance.design.filter}. "
        f"{target} differs from {background} by {signed(performance.signal_e)} electrons; "
        f"CNR {number(performance.cnr)}."
    )
