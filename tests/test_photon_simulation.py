"""Each demo recipe, photon by photon: the forward model's mean, variance and CNR against a simulated camera.

Nothing of `codesign.noise` or of the forward model's arithmetic is used. Spectra of the parts come from the catalogue
records; the optics, the statistics of light and the camera are written out here:

- A decision sees one spot of the surface. The spot has one reflectance curve, drawn from a normal distribution with
  the mean and the covariance of the measured samples, common to all pixels and frames that are averaged.
- A pixel has its own gain error (PRNU) and dark offset (DSNU), kept over the frames. PRNU multiplies the light that
  is collected, ambient light included, dark electrons not.
- In each frame a pixel collects a Poisson number of photo-electrons and of dark electrons, gets normal read noise,
  is multiplied by the gain K, lifted by the black level and rounded to a whole grey value that the bits can hold.
"""

from dataclasses import dataclass

import numpy as np
import pytest
from demo_names import DEMOS
from numpy.typing import NDArray

Array = NDArray[np.float64]

DECISIONS = 100_000
#: Allowed distance in standard errors of the simulation: chance alone exceeds it once in 16,000 comparisons.
STANDARD_ERRORS = 4.0
PLANCK, LIGHT_SPEED = 6.62607015e-34, 2.99792458e8  # SI, exact


def trapezoid(values: Array, grid_nm: Array) -> Array:
    """Integrate over wavelength, last axis."""
    return np.sum((values[..., 1:] + values[..., :-1]) / 2 * np.diff(grid_nm), axis=-1)


@dataclass
class Light:
    """Mean electrons per frame of a surface, and what the reflectance samples add around the mean."""

    photo: float
    samples: Array
    dark: float


def light_on(solution, surface) -> Light:
    """Electrons that one pixel collects of a surface under the recipe, from the spectra."""
    problem, recipe = solution.problem, solution.recipe
    design, optics, grid = recipe.design, problem.spec.optics, problem.grid
    camera = problem.camera(design.camera)
    t = design.exposure_us * 1e-6
    diffuse, mirrored = np.array(problem.ambient), np.zeros(grid.size)
    for state in recipe.leds:
        channel = problem.channel(state.id)
        led = channel.led
        current, flux, _ = led.operating_points()
        warming = state.junction_c - led.reference_junction_c
        spectrum = led.spectrum(grid, led.peak_shift_nm_per_k * warming)
        strength = np.interp(state.drive_ma / 1000, current, flux)
        strength *= 1 + led.flux_temperature_coefficient_per_k * warming
        irradiance = spectrum * strength * channel.delivery
        diffuse += irradiance
        mirrored += irradiance * channel.specular_weight
    # Camera equation: E = L pi tau / (4 N^2 (1+m)^2) with L = rho E_object / pi; photons carry h c / lambda.
    chain = problem.lens / (4 * design.f_number**2 * (1 + optics.magnification) ** 2)
    chain = chain * filter_curve(problem, design) * camera.quantum_efficiency(design.channel, grid)
    chain = chain * (camera.pixel_pitch_um * 1e-6) ** 2 * grid * 1e-9 / (PLANCK * LIGHT_SPEED) * t
    curves = np.atleast_2d(surface.samples.resample(grid))
    electrons = trapezoid(curves * chain * diffuse, grid)
    electrons = electrons + surface.specular_reflectance * trapezoid(chain * mirrored, grid)
    doublings = (problem.spec.temperature.sensor_c - camera.dark_reference_c) / camera.dark_doubling_k
    dark = camera.dark_current(camera.dark_reference_c) * 2**doublings * t
    return Light(photo=float(electrons.mean()), samples=electrons - electrons.mean(), dark=float(dark))


def filter_curve(problem, design) -> Array:
    """Transmittance over the cone of rays: pupil rays drawn evenly over its disc as seen from the image point."""
    part, optics = problem.filter(design.filter), problem.spec.optics
    if optics.filter_position == "front":
        return part.transmittance(problem.grid, np.array([optics.field_angle_deg]), np.ones(1), problem.catalog)
    half = np.arctan(1 / (2 * design.f_number * (1 + optics.magnification)))
    sine = np.sin(half) * np.sqrt((np.arange(40) + 0.5) / 40)  # equal steps of sin^2: equal flux
    turn = 2 * np.pi * (np.arange(24) + 0.5) / 24
    chief = np.radians(optics.field_angle_deg)
    cosine = np.cos(chief) * np.sqrt(1 - sine**2)[:, None] + np.sin(chief) * np.outer(sine, np.cos(turn))
    angles = np.degrees(np.arccos(np.clip(cosine, -1, 1))).ravel()
    return part.transmittance(problem.grid, angles, np.full(angles.size, 1 / angles.size), problem.catalog)


def simulate(solution, light: Light, rng: np.random.Generator, clutter: bool = True) -> Array:
    """Averaged grey values of `DECISIONS` spots, as the detection would get them. [DN]"""
    problem, design = solution.problem, solution.recipe.design
    camera, averaging = problem.camera(design.camera), problem.spec.averaging
    gain = next(g for g in camera.gain_settings() if g.gain_db == design.gain_db)
    spot = np.full(DECISIONS, light.photo)
    if clutter and light.samples.size > 1:
        deviates = rng.standard_normal((DECISIONS, light.samples.size))
        spot += deviates @ light.samples / np.sqrt(light.samples.size - 1)
    shape = (DECISIONS, averaging.pixels)
    photo = spot[:, None] * (1 + camera.prnu_percent / 100 * rng.standard_normal(shape))
    offset = camera.dsnu_e * rng.standard_normal(shape)
    total = np.zeros(DECISIONS)
    for _ in range(averaging.frames):
        electrons = rng.poisson(photo) + rng.poisson(light.dark, shape) + offset
        electrons += gain.read_noise_e * rng.standard_normal(shape)
        grey = np.rint(camera.black_level_dn + gain.conversion_gain_dn_per_e * electrons)
        total += np.clip(grey, 0, 2**camera.bits - 1).mean(axis=1)
    return total / averaging.frames


@dataclass
class Estimate:
    """A simulated quantity and its standard error."""

    value: float
    error: float

    def agrees(self, expected: float) -> bool:
        return abs(self.value - expected) <= STANDARD_ERRORS * self.error


def estimate_mean(grey: Array) -> Estimate:
    return Estimate(grey.mean(), grey.std(ddof=1) / np.sqrt(grey.size))


def estimate_variance(grey: Array) -> Estimate:
    """Sample variance; its standard error from the fourth moment."""
    variance = grey.var(ddof=1)
    fourth = np.mean((grey - grey.mean()) ** 4)
    return Estimate(variance, np.sqrt((fourth - variance**2) / grey.size))


def estimate_cnr(target: Array, background: Array) -> Estimate:
    """|difference of means| over the root of the mean variance; errors propagated to first order."""
    means = estimate_mean(target), estimate_mean(background)
    spreads = estimate_variance(target), estimate_variance(background)
    difference = abs(means[0].value - means[1].value)
    variance = (spreads[0].value + spreads[1].value) / 2
    of_mean = np.hypot(means[0].error, means[1].error) / difference
    of_spread = np.hypot(spreads[0].error, spreads[1].error) / 2 / variance / 2
    value = difference / np.sqrt(variance)
    return Estimate(value, value * np.hypot(of_mean, of_spread))


def gain_of(solution) -> float:
    design = solution.recipe.design
    gains = solution.problem.camera(design.camera).gain_settings()
    return next(g for g in gains if g.gain_db == design.gain_db).conversion_gain_dn_per_e


@pytest.mark.oracle
@pytest.mark.parametrize("name", DEMOS)
def test_simulated_camera_agrees_with_the_forward_model(solved, name):
    solution = solved(name)
    problem, recipe = solution.problem, solution.recipe
    rng = np.random.default_rng([2024, *name.encode()])
    grey = [simulate(solution, light_on(solution, s), rng) for s in (problem.target, problem.background)]
    for index, side in enumerate(grey):
        mean, variance = estimate_mean(side), estimate_variance(side)
        predicted = sum(pair[index] for pair in recipe.noise.values()) * gain_of(solution) ** 2
        assert mean.agrees(recipe.surfaces[index].grey_dn)
        assert variance.agrees(predicted)
    assert estimate_cnr(*grey).agrees(recipe.cnr)


@pytest.mark.oracle
@pytest.mark.parametrize("name", DEMOS)
def test_electrons_from_the_spectra_agree_with_the_forward_model(solved, name):
    """The chain written out above against the forward model: no chance involved, so a tight tolerance.

    At the sensor the forward model takes a few angles of the cone where 960 rays are traced here.
    """
    solution = solved(name)
    tolerance = 1e-9 if solution.problem.spec.optics.filter_position == "front" else 2e-4
    for surface, reading in zip(solution.problem.surfaces, solution.recipe.surfaces, strict=True):
        light = light_on(solution, surface)
        assert light.photo == pytest.approx(reading.led_e + reading.ambient_e, rel=tolerance)
        assert light.dark == pytest.approx(reading.dark_e, rel=1e-9)


@pytest.mark.oracle
def test_simulation_without_clutter_is_caught(solved):
    """The comparison has teeth: a camera that looks at perfectly even cloth misses by far more than chance."""
    solution = solved("yellow-stain")
    light = light_on(solution, solution.problem.target)
    variance = estimate_variance(simulate(solution, light, np.random.default_rng(7), clutter=False))
    predicted = sum(pair[0] for pair in solution.recipe.noise.values()) * gain_of(solution) ** 2
    assert abs(variance.value - predicted) > 5 * STANDARD_ERRORS * variance.error
