"""Pictures as the camera would take them: random light, a noisy camera, whole grey values, pieces that differ.

After the camera model of EMVA Standard 1288. Photons and dark electrons arrive by chance (Poisson); the gain of each
pixel and its dark offset stray and stay, over the frames that are averaged and over the shots that are combined, while
colour channels have pixels of their own; the well and the grey scale end. Each piece looked at has its own reflectance
curve, drawn from the spread of the measured samples.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from codesign.design import Light, Performance, electrons, setting_of
from codesign.design_spectra import Exposure, exposures, worst_pair
from codesign.limits import Setting, saturation_electrons
from codesign.noise import Sensor
from codesign.physics.sensor import quantization_variance_e2
from codesign.problem import Problem
from codesign.problem.schema import Averaging

Array = NDArray[np.float64]

#: Raw pixels drawn one by one at most; beyond, the pixels a decision averages are drawn as a sum.
MOST_PIXELS = 3_000_000


@dataclass(frozen=True, slots=True)
class Pattern:
    """How the response and the dark offset of pixels stray, in standard deviations; of sums of pixels where those are
    drawn as a sum. Both shaped like the cells, with an axis of pixels behind where each is drawn. [1]
    """

    response: Array
    offset: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Expected:
    """Mean and standard deviation of what a decision sees at (target, background), for the pair that counts. [e⁻]

    Weighted over the readings where several are combined, dark electrons included.
    """

    mean_e: tuple[float, float]
    deviation_e: tuple[float, float]

    @property
    def middle_e(self) -> float:
        """Midway between target and background."""
        return sum(self.mean_e) / 2

    @property
    def noise_e(self) -> float:
        """The noise that CNR divides by: root of the mean of both variances."""
        return float(np.sqrt(sum(x**2 for x in self.deviation_e) / 2))


def expected(problem: Problem, performance: Performance) -> Expected:
    """Return mean and standard deviation at target and background that the forward model predicts."""
    lit = _lights(problem, performance)
    means = [
        float(sum(taken.weight * light.electrons[index].sum() for taken, light in lit))
        for index in worst_pair(problem, performance)
    ]
    variances = [sum(values[side] for values in performance.noise.values()) for side in (0, 1)]
    return Expected(mean_e=(means[0], means[1]), deviation_e=(variances[0] ** 0.5, variances[1] ** 0.5))


def simulate(problem: Problem, performance: Performance, coverage: Array, rng: np.random.Generator) -> Array:
    """Draw what the decision sees of pieces with a defect, cell by cell.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        What `codesign.design.evaluate` said of the recipe; its pair that counts is looked at.
    coverage : (P, ...) array
        Share of the target in each cell of each of P pieces, 0 (background) to 1. Every piece has its own target and
        its own background, drawn from the spread of the samples. [1]
    rng : numpy.random.Generator

    Returns
    -------
    array like ``coverage``
        Electrons over the black level, averaged over the pixels and frames of a decision; where readings are combined
        their weighted sum. [e⁻]
    """
    setting, averaging = setting_of(problem, performance.design), problem.spec.averaging
    pair = worst_pair(problem, performance)
    taken, lights = zip(*_lights(problem, performance), strict=True)
    # One draw per piece and direction of clutter, the same in all readings: it is the piece that differs.
    deviates = [rng.standard_normal((len(coverage), lights[0].clutter[index].size)) for index in pair]
    total, pattern = np.zeros(coverage.shape), None
    for exposure, light in zip(taken, lights, strict=True):
        sides = [
            light.electrons[index, :2].sum() + own @ light.clutter[index]
            for index, own in zip(pair, deviates, strict=True)
        ]
        target, background = (side.reshape(-1, *[1] * (coverage.ndim - 1)) for side in sides)
        photo = np.maximum(coverage * target + (1 - coverage) * background, 0.0)
        one = replace(setting, channel=exposure.channel)
        if pattern is None or not performance.design.shots:
            pattern = drawn_pattern(averaging, coverage.shape, rng)
        dark = float(light.electrons[pair[0], 2])
        total += exposure.weight * camera_reading(one, averaging, photo, dark, rng, pattern)
    return total


def drawn_pattern(averaging: Averaging, cells: tuple[int, ...], rng: np.random.Generator) -> Pattern:
    """Draw the fixed pattern of the pixels behind some cells."""
    shape = (*cells, averaging.pixels) if _each_pixel(averaging, cells) else cells
    return Pattern(rng.standard_normal(shape), rng.standard_normal(shape))


def _each_pixel(averaging: Averaging, cells: tuple[int, ...]) -> bool:
    """Whether pixels are drawn one by one."""
    return int(np.prod(cells)) * averaging.pixels * averaging.frames <= MOST_PIXELS


def camera_reading(
    setting: Setting,
    averaging: Averaging,
    photo_e: Array,
    dark_e: float,
    rng: np.random.Generator,
    pattern: Pattern | None = None,
) -> Array:
    """Draw grey values, averaged as the detection does and counted in electrons over the black level.

    Parameters
    ----------
    setting : Setting
        Camera and gain.
    averaging : Averaging
    photo_e : array
        Mean photo-electrons of each cell. [e⁻]
    dark_e : float
        Mean dark electrons. [e⁻]
    rng : numpy.random.Generator
    pattern : Pattern, optional
        Fixed pattern of the pixels, by `drawn_pattern` for these cells; by default that of new ones.
    """
    draw = _pixel_by_pixel if _each_pixel(averaging, photo_e.shape) else _summed
    return draw(setting, averaging, photo_e, dark_e, rng, pattern or drawn_pattern(averaging, photo_e.shape, rng))


def _pixel_by_pixel(
    setting: Setting, averaging: Averaging, photo_e: Array, dark_e: float, rng: np.random.Generator, pattern: Pattern
) -> Array:
    camera, sensor = setting.camera, Sensor.of(setting.camera, setting.gain)
    shape = (*photo_e.shape, averaging.pixels)
    lit = photo_e[..., None] * np.maximum(1 + sensor.prnu * pattern.response, 0.0)
    offset = sensor.dsnu_e * pattern.offset
    total = np.zeros(photo_e.shape)
    for _ in range(averaging.frames):
        charge = np.minimum(rng.poisson(lit) + rng.poisson(dark_e, shape), setting.gain.full_well_e)
        level = charge + offset + sensor.read_noise_e * rng.standard_normal(shape)
        grey = np.rint(camera.black_level_dn + sensor.conversion_gain_dn_per_e * level)
        total += np.clip(grey, 0, 2**camera.bits - 1).mean(axis=-1)
    return (total / averaging.frames - camera.black_level_dn) / sensor.conversion_gain_dn_per_e


def _summed(
    setting: Setting, averaging: Averaging, photo_e: Array, dark_e: float, rng: np.random.Generator, pattern: Pattern
) -> Array:
    """The same where a decision averages so many pixels that drawing each would take long: their sums are drawn.

    Sums of Poisson numbers are Poisson numbers; rounding errors of many pixels add up like normal ones. Wells and the
    grey scale end where the mean does.
    """
    sensor, pixels, count = (
        Sensor.of(setting.camera, setting.gain),
        averaging.pixels,
        averaging.pixels * averaging.frames,
    )

    lit = np.maximum(photo_e * (pixels + sensor.prnu * np.sqrt(pixels) * pattern.response), 0.0)
    charge = rng.poisson(averaging.frames * (lit + pixels * dark_e)) / count
    temporal = sensor.read_noise_e**2 + quantization_variance_e2(sensor.conversion_gain_dn_per_e)
    level = charge + sensor.dsnu_e * pattern.offset / np.sqrt(pixels)
    level = level + np.sqrt(temporal / count) * rng.standard_normal(photo_e.shape)
    return np.minimum(level, saturation_electrons(setting.camera, setting.gain))


def _lights(problem: Problem, performance: Performance) -> list[tuple[Exposure, Light]]:
    """Each reading and the light it collects of every surface."""
    design, setting = performance.design, setting_of(problem, performance.design)
    found = []
    for taken in exposures(problem, performance):
        one = replace(design, channel=taken.channel)
        own = replace(setting, channel=taken.channel)
        found.append((taken, electrons(problem, own, one, taken.states, taken.exposure_us * 1e-6)))
    return found
