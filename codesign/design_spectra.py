"""Where electrons come from by wavelength: the integrands of the forward model.

Each density, integrated over the problem's wavelength grid by the trapezoid rule, gives the number of
`codesign.design.evaluate`: electrons of every surface, the difference of the pair that counts, and the variance of
every noise term that has a wavelength. Read noise, quantisation and dark electrons have none and stand apart.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from codesign.design import JOINT, Design, Performance, led_irradiance, sensitivity, setting_of
from codesign.limit_use import LedState
from codesign.limits import Setting, dark_rate
from codesign.noise import NOISE_TERMS, NoiseTerm, Sensor
from codesign.problem import Problem
from codesign.radiometry import filter_transmittance, reflectances
from codesign.spectra import trapezoid_weights

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Exposure:
    """One reading of a recipe as it is taken: a channel and a shot, and its weight in the decision.

    ``states`` are the LEDs lit, at their drive in this shot and the junction temperatures of the recipe.
    """

    name: str
    weight: float
    channel: str
    states: tuple[LedState, ...]
    exposure_us: float


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadingSpectra:
    """Electrons of one reading by wavelength.

    Attributes
    ----------
    name : str
        Of the channel, or of the shot.
    weight : float
        In the decision; 1 for a single reading. [1]
    quantum_efficiency : (n,) array
        [1]
    leds : mapping of str to (n,) array
        Light of each lit LED at the object. [W m⁻² nm⁻¹]
    led_e, ambient_e : (S, n) array
        Electrons by surface from LEDs and from ambient light. [e⁻/nm]
    dark_e : float
        Dark electrons, which have no wavelength. [e⁻]
    clutter_e : (C, n) array
        Clutter amplitudes by row of `codesign.radiometry.Reflectances`. [e⁻/nm]
    """

    name: str
    weight: float
    quantum_efficiency: Array
    leds: Mapping[str, Array]
    led_e: Array
    ambient_e: Array
    dark_e: float
    clutter_e: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Spectra:
    """The spectral story of a recipe.

    Attributes
    ----------
    wavelength_nm : (n,) array
    filter, lens : (n,) array
        Transmittances, the filter's over the cone of rays at the recipe's f-number. [1]
    reflectance, spread : (S, n) array
        Mean and standard deviation of the samples of each surface; no spread for guards and single samples. [1]
    readings : tuple of ReadingSpectra
    pair : (int, int)
        The target and background that count, as positions among the surfaces.
    signal_e : (n,) array
        Target minus background, weighted over the readings. [e⁻/nm]
    noise : mapping of str to (2, n) array
        Variance at target and background by term, for terms that grow with light. [e⁻²/nm]
    steady : mapping of str to (2,) array
        Variance that has no wavelength, by term. [e⁻²]
    """

    wavelength_nm: Array
    filter: Array
    lens: Array
    reflectance: Array
    spread: Array
    readings: tuple[ReadingSpectra, ...]
    pair: tuple[int, int]
    signal_e: Array
    noise: Mapping[str, Array]
    steady: Mapping[str, Array]

    def integral(self, density: Array) -> Array:
        """Integrate densities over wavelength, the last axis."""
        return density @ trapezoid_weights(self.wavelength_nm)


def exposures(problem: Problem, performance: Performance) -> tuple[Exposure, ...]:
    """Return the readings a recipe takes: one, or one for each channel or shot that is combined."""
    design, states = performance.design, {state.id: state for state in performance.leds}
    shots = design.shots or (design,)
    found = []
    for number, shot in enumerate(shots, start=1):
        lit = tuple(replace(states[led], drive_ma=ma) for led, ma in shot.drive_ma.items() if ma > 0)
        for channel in design.channel.split(JOINT):
            name = f"shot {number}" if design.shots else channel
            weight = performance.weights.get(name, 1.0)
            found.append(Exposure(name=name, weight=weight, channel=channel, states=lit, exposure_us=shot.exposure_us))
    return tuple(found)


def worst_pair(problem: Problem, performance: Performance) -> tuple[int, int]:
    """Return the target and background whose CNR the performance states, as positions among the surfaces."""
    if performance.weights:  # readings are combined for one pair
        return problem.pairs[0]
    sign = 1 if performance.sign == "brighter" else -1
    signed = [sign * np.copysign(pair.cnr, pair.signal_e) for pair in performance.pairs]
    return problem.pairs[int(np.argmin(signed))]


def spectra(problem: Problem, performance: Performance) -> Spectra:
    """Return light, parts, electrons and noise of a recipe by wavelength.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        What `codesign.design.evaluate` said of the recipe.

    Examples
    --------
    >>> from codesign import load_problem, solve
    >>> solution = solve(load_problem("yellow-stain"))
    >>> found = spectra(solution.problem, solution.recipe)
    >>> bool(abs(found.integral(found.signal_e) / solution.recipe.signal_e - 1) < 1e-9)
    True
    """
    design, scene = performance.design, reflectances(problem)
    setting = setting_of(problem, design)
    readings = tuple(_reading(problem, setting, design, taken) for taken in exposures(problem, performance))
    pair = worst_pair(problem, performance)
    signal = sum(
        r.weight * (r.led_e[pair[0]] + r.ambient_e[pair[0]] - r.led_e[pair[1]] - r.ambient_e[pair[1]]) for r in readings
    )
    spread = [np.sqrt(np.sum(scene.clutter[rows] ** 2, axis=0)) for rows in scene.rows_of]
    found = Spectra(
        wavelength_nm=problem.grid,
        filter=filter_transmittance(problem, problem.filter(design.filter), design.f_number),
        lens=problem.lens,
        reflectance=scene.mean,
        spread=np.stack(spread),
        readings=readings,
        pair=pair,
        signal_e=np.asarray(signal),
        noise={},
        steady={},
    )
    return _with_noise(problem, setting, found, bool(design.shots))


def _reading(problem: Problem, setting: Setting, design: Design, taken: Exposure) -> ReadingSpectra:
    scene, t = reflectances(problem), taken.exposure_us * 1e-6
    weighted = sensitivity(problem, design.camera, taken.channel, design.filter, design.f_number)
    response = weighted / trapezoid_weights(problem.grid) * t
    leds = {state.id: led_irradiance(problem, state) for state in taken.states}
    diffuse, gloss = np.zeros(problem.grid.size), np.zeros(problem.grid.size)
    for led, light in leds.items():
        diffuse += light
        gloss += light * problem.channel(led).specular_weight
    return ReadingSpectra(
        name=taken.name,
        weight=taken.weight,
        quantum_efficiency=setting.camera.quantum_efficiency(taken.channel, problem.grid),
        leds=leds,
        led_e=(scene.mean * diffuse + scene.specular[:, None] * gloss) * response,
        ambient_e=scene.mean * problem.ambient * response,
        dark_e=dark_rate(problem, setting) * t,
        clutter_e=scene.clutter * (diffuse + problem.ambient) * response,
    )


def _with_noise(problem: Problem, setting: Setting, found: Spectra, same_pixels: bool) -> Spectra:
    """The same with the variance of every term by wavelength; shots of the same pixels share their fixed pattern."""
    sensor, averaging = Sensor.of(setting.camera, setting.gain), problem.spec.averaging
    noise, steady = {}, {}
    for term in NOISE_TERMS:
        lasting = term.lasting(same_pixels)
        by_wavelength = np.stack([_variance(problem, found, term, sensor, index, lasting) for index in found.pair])
        constant = _constant(term, sensor, found.readings, lasting)
        divisor = term.divisor(averaging)
        lit = term.linear[0] or term.linear[1] or term.relative(sensor) or term.clutter
        if lit:
            noise[term.name] = by_wavelength / divisor
        if constant or not lit:
            steady[term.name] = np.full(2, constant / divisor)
    return replace(found, noise=noise, steady=steady)


def _constant(term: NoiseTerm, sensor: Sensor, readings: tuple[ReadingSpectra, ...], lasting: bool) -> float:
    """Variance of a term without light, weighted over the readings, before averaging. [e⁻²]"""
    if lasting:
        return term.constant(sensor) * sum(r.weight for r in readings) ** 2
    return sum(r.weight**2 * (term.constant(sensor) + term.linear[2] * r.dark_e) for r in readings)


def _variance(problem: Problem, found: Spectra, term: NoiseTerm, sensor: Sensor, surface: int, lasting: bool) -> Array:
    """Variance of a term at a surface by wavelength, weighted over the readings, before averaging. (n,) [e⁻²/nm]"""
    total = np.zeros(found.wavelength_nm.size)
    for r in found.readings:
        total += r.weight**2 * (term.linear[0] * r.led_e[surface] + term.linear[1] * r.ambient_e[surface])
    photo = [r.weight * (r.led_e[surface] + r.ambient_e[surface]) for r in found.readings]
    for own in [sum(photo)] if lasting else photo:
        # A square of an integral, shared out in proportion to what each wavelength brings.
        total += term.relative(sensor) ** 2 * found.integral(own) * own
    if term.clutter:
        rows = reflectances(problem).rows_of[surface]
        amplitude = sum((r.weight * r.clutter_e[rows] for r in found.readings), np.zeros(1))
        total = total + found.integral(amplitude) @ amplitude
    return total
