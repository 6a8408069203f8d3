"""Where electrons, contrast and noise come from by wavelength: the lower panels of the spectral story."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from codesign.design import Performance
from codesign.design_spectra import Spectra
from codesign.problem import Problem
from codesign.report.figures.base import (
    ROOM_BESIDE,
    TITLE,
    blank,
    dress,
    legend_above,
    scale_of,
    shortened,
    signed,
    width_mm,
)
from codesign.report.house import AMBIENT, BACKGROUND, DASHES, FILTER, INK, MUTED, TARGET
from codesign.report.layout import number, percent

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

    from codesign.design_spectra import Array

    Entries = list[tuple[Artist, str]]

#: Share of the electrons and of the LEDs' light that may lie beyond the wavelengths shown. [1]
BEYOND = 2e-3
#: Noise terms that take less of the variance have no line. [1]
LEAST_NOISE = 1e-3
#: Differences below this share of the electrons are what rounding left. [1]
DUST = 1e-12
#: Pairs whose difference is drawn beside that of the worst.
MOST_PAIRS = 2
#: Points of a curve; more would only make files larger.
POINTS_DRAWN = 400
#: Colours of the noise terms that grow with light, wherever they are shown.
NOISE_COLORS = {
    "light shot noise": INK, "ambient shot noise": AMBIENT, "photo-response fixed pattern": FILTER,
    "surface clutter": TARGET,
}  # fmt: skip


def curve(axes: Axes, grid: Array, values: Array, **look: Any) -> Any:
    """Draw a curve over wavelength, as finely as can be seen; returns the line."""
    at = _drawn(axes, grid)
    return axes.plot(grid[at], values[at], **look)[0]


def area(axes: Axes, grid: Array, low: Array, high: Array, **look: Any) -> Any:
    """Fill between two curves over wavelength, as finely as can be seen."""
    at = _drawn(axes, grid)
    return axes.fill_between(grid[at], low[at], high[at], **{"linewidth": 0, **look})


def _drawn(axes: Axes, grid: Array) -> Array:
    """Positions of the wavelengths to draw: those shown and one beyond, at most about `POINTS_DRAWN`."""
    low, high = axes.get_xlim()
    first, last = np.searchsorted(grid, (low, high))
    first, last = max(first - 1, 0), min(last + 1, grid.size)
    return np.arange(first, last, max((last - first) // POINTS_DRAWN, 1))


def surface_lines(problem: Problem, pair: tuple[int, int]) -> list[tuple[int, object, str, float]]:
    """Position, dash, colour and width of each target and background; the pair that counts is drawn boldest."""
    found = []
    for index in range(len(problem.targets) + len(problem.backgrounds)):
        is_target = index < len(problem.targets)
        rank = index if is_target else index - len(problem.targets)
        dash = (DASHES[0], DASHES[4], DASHES[6])[rank % 3] if is_target else (DASHES[1], DASHES[5], DASHES[7])[rank % 3]
        found.append((index, dash, TARGET if is_target else BACKGROUND, 1.8 if index in pair else 1.0))
    return found


def draw_electrons(axes: Axes, problem: Problem, found: Spectra) -> None:
    """Electrons of targets and backgrounds, and what of them ambient light brings."""
    grid, entries, many = found.wavelength_nm, [], len(found.readings) > 1
    lines = [line for line in surface_lines(problem, found.pair) if not many or line[0] in found.pair]
    curves = [
        (reading.led_e[index] + reading.ambient_e[index], index, k, dash, color, width)
        for k, reading in enumerate(found.readings)
        for index, dash, color, width in lines
    ]
    unit, sign = scale_of(max(float(density.max()) for density, *_ in curves))
    for density, index, k, dash, color, width in curves:
        style = DASHES[k % len(DASHES)] if many else dash
        line = curve(axes, grid, density / unit, color=color, linestyle=style, linewidth=width)
        which = f", {found.readings[k].name}" if many else ""
        entries.append((line, problem.surfaces[index].id + which))
    ambient = sum(reading.ambient_e[found.pair[1]] for reading in found.readings)
    if np.any(ambient):
        filled = area(axes, grid, 0 * ambient, ambient / unit, color=AMBIENT, alpha=0.6, linewidth=0.5)
        share = float(found.integral(ambient) / found.integral(_background_e(found)))
        entries.append((filled, f"of these by ambient light, {percent(share, 1e-4)}"))
    dress(axes, y=f"{sign}e⁻ per nm")
    axes.set_ylim(0, None if any(np.any(density) for density, *_ in curves) else 1.0)
    legend_above(axes, f"Electrons in one pixel{_beyond_words(axes, found)}", entries)


def _background_e(found: Spectra) -> Array:
    """Electrons of the background that counts, in all readings. (n,) [e⁻/nm]"""
    return np.asarray(sum(r.led_e[found.pair[1]] + r.ambient_e[found.pair[1]] for r in found.readings))


def _beyond_words(axes: Axes, found: Spectra) -> str:
    """Say which share of the electrons the range shown does not hold, where it is worth saying."""
    low, high = axes.get_xlim()
    outside = (found.wavelength_nm < low) | (found.wavelength_nm > high)
    total = _background_e(found)
    share = float(found.integral(total * outside) / max(float(found.integral(total)), 1e-300))
    return f" ({percent(share)} of them beyond the range shown)" if share > 2 * BEYOND else ""


def draw_contrast(axes: Axes, problem: Problem, found: Spectra, performance: Performance) -> None:
    """Target minus background with its sign."""
    grid, others = found.wavelength_nm, _other_pairs(problem, found, performance)
    signal = _without_dust(found.signal_e, _background_e(found))
    unit, sign = scale_of(max(float(np.abs(each).max()) for each in (signal, *others.values())))
    signal = signal / unit
    area(axes, grid, 0 * signal, np.maximum(signal, 0), color=TARGET, alpha=0.45)
    area(axes, grid, np.minimum(signal, 0), 0 * signal, color=BACKGROUND, alpha=0.45)
    curve(axes, grid, signal, color=INK, linewidth=1.0)
    axes.axhline(0, color=MUTED, linewidth=0.7)
    dress(axes, y=f"{sign}e⁻ per nm")
    beside = [
        (curve(axes, grid, each / unit, color=MUTED, linestyle=DASHES[1 + k], linewidth=1.2), words)
        for k, (words, each) in enumerate(others.items())
    ]
    shown = [signal, *(each / unit for each in others.values())]
    top, bottom = max(0.0, *(float(each.max()) for each in shown)), min(0.0, *(float(each.min()) for each in shown))
    reach = top - bottom if top > bottom else 1.0
    axes.set_ylim(bottom - 0.08 * reach, top + 0.08 * reach)
    target, background = (problem.surfaces[index].id for index in found.pair)
    weighted = ", weighted" if len(found.readings) > 1 else ""
    panel = axes.get_figure(root=False)
    title = shortened(
        panel, f"Contrast: {target} minus {background}{weighted},", width_mm(panel) - ROOM_BESIDE, TITLE, "bold",
        tail=f"in all {signed(performance.signal_e)} e⁻",
    )  # fmt: skip
    against = _against(found, signal)
    notes = [(blank(), f"{percent(against)} of it has the other sign and works against the rest")]
    legend_above(axes, title, [*(notes if against > 1e-3 else []), *beside])


def _without_dust(signal: Array, light: Array) -> Array:
    """A difference without what is left of it by rounding where the two are the same."""
    return np.where(np.abs(signal) > DUST * np.abs(light), signal, 0.0)


def _other_pairs(problem: Problem, found: Spectra, performance: Performance) -> dict[str, Array]:
    """Differences of the pairs next worst, which decide beside the worst what the light has to show. [e⁻/nm]"""
    if len(found.readings) > 1 or len(performance.pairs) < 2:
        return {}
    (reading,) = found.readings
    electrons = reading.led_e + reading.ambient_e
    ordered = sorted(zip(performance.pairs, problem.pairs, strict=True), key=lambda both: both[0].cnr)
    others = [(pair, places) for pair, places in ordered if places != found.pair][:MOST_PAIRS]
    return {
        f"{pair.target} minus {pair.background}, CNR {number(pair.cnr)}": electrons[i] - electrons[j]
        for pair, (i, j) in others
    }


def _against(found: Spectra, signal: Array) -> float:
    """Share of the contrast, without signs, that has the sign of the lesser part. [1]"""
    whole = float(found.integral(np.abs(signal)))
    return (1 - abs(float(found.integral(signal))) / whole) / 2 if whole > 0 else 0.0


def draw_noise(axes: Axes, found: Spectra) -> None:
    """Variance of the terms that grow with light; the others in words."""
    mean = {name: density.mean(axis=0) for name, density in found.noise.items()}
    steady = sum(float(value.mean()) for value in found.steady.values())
    whole = max(sum(float(found.integral(each)) for each in mean.values()) + steady, 1e-300)
    unit, sign = scale_of(max(float(each.max()) for each in mean.values()))
    entries, small = [], []
    for index, (name, density) in enumerate(mean.items()):
        share = float(found.integral(density)) / whole
        if share < LEAST_NOISE:
            small += [name] if share > 0 else []
            continue
        color = NOISE_COLORS.get(name, MUTED)
        line = curve(axes, found.wavelength_nm, density / unit, color=color, linestyle=DASHES[index % len(DASHES)])
        entries.append((line, f"{name}, {percent(share)}"))
    if small:
        entries.append((blank(), f"below {percent(LEAST_NOISE)} each: {', '.join(small)}"))
    entries.append((blank(), f"without wavelength (dark, read, rounding): {percent(steady / whole, 1e-5)}"))
    dress(axes, y=f"{sign}e⁻² per nm")
    legend_above(axes, "Noise: variance, mean of target and background", entries)
