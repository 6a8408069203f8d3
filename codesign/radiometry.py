"""The chain from LED current to photo-electrons, assembled from the equations in `codesign.physics`.

Everything is linear in light, so one matrix product per camera channel gives the electron rate of every surface
under every LED behind every filter.
"""

from __future__ import annotations

import itertools
from copy import copy
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, Filter
from codesign.physics.filters import cone_quadrature
from codesign.physics.light import flux_at_temperature, photons_per_joule
from codesign.physics.optics import cone_half_angle_deg, image_irradiance, radiance_of_diffuse
from codesign.problem import LedChannel, Problem
from codesign.problem.choices import FilterChoices
from codesign.spectra import trapezoid_weights

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Reflectances:
    """What the light meets: mean curves of the surfaces and the clutter of targets and backgrounds.

    Attributes
    ----------
    mean : (S, n) array
        Targets, backgrounds, further guards. [1]
    specular : (S,) array
        Mirror-like reflectance. [1]
    clutter : (C, n) array
        Rows whose products give the covariance of each surface's samples, surface after surface, strongest first. [1]
    rows_of : tuple of slice
        Which clutter rows belong to each surface (none for guards).
    """

    mean: Array
    specular: Array
    clutter: Array
    rows_of: tuple[slice, ...]


@lru_cache(maxsize=16)
def reflectances(problem: Problem) -> Reflectances:
    """Resample all surfaces onto the problem's grid."""
    surfaces = problem.surfaces
    none = np.zeros((0, problem.grid.size))
    clutter = [
        none if problem.role(index) == "guard" else surface.clutter_factor(problem.grid)
        for index, surface in enumerate(surfaces)
    ]
    ends = np.cumsum([0, *(len(rows) for rows in clutter)])
    return Reflectances(
        mean=np.stack([surface.mean(problem.grid) for surface in surfaces]),
        specular=np.array([surface.specular_reflectance for surface in surfaces]),
        clutter=np.concatenate(clutter),
        rows_of=tuple(slice(int(a), int(b)) for a, b in itertools.pairwise(ends)),
    )


def channel_irradiance(problem: Problem, channel: LedChannel, junction_c: float) -> Array:
    """Spectral irradiance at the object with one LED channel at rated current. (n,) [W m⁻² nm⁻¹]

    The junction temperature scales the flux and shifts the peak.
    """
    led = channel.led
    shift = channel.peak_shift_nm + led.peak_shift_nm_per_k * (junction_c - led.reference_junction_c)
    flux = flux_at_temperature(junction_c, led.flux_temperature_coefficient_per_k, led.reference_junction_c)
    return led.spectrum(problem.grid, shift) * (float(flux) * channel.delivery)


def cone_angles(problem: Problem, f_number: float) -> tuple[Array, Array]:
    """Angles at which rays cross the filter, and their weights. [deg], [1]

    In front of the lens all rays of one image point are parallel at the field angle; at the sensor they fill
    the cone of the f-number around the chief ray.
    """
    optics = problem.spec.optics
    if optics.filter_position == "front":
        return np.array([optics.field_angle_deg]), np.array([1.0])
    half = float(cone_half_angle_deg(f_number, optics.magnification))
    return cone_quadrature(half, optics.field_angle_deg)


def filter_transmittance(problem: Problem, part: Filter, f_number: float) -> Array:
    """Transmittance of one filter averaged over the rays the sensor sees. (n,) [1]"""
    return part.transmittance(problem.grid, *cone_angles(problem, f_number), problem.catalog)


@lru_cache(maxsize=8)
def _all_transmittances(problem: Problem, f_number: float) -> Array:
    """`filter_transmittance` of every single filter, kept for all junction temperatures. (F₀, n) [1]"""
    base = FilterChoices.of(problem.filters).base
    found = np.stack([filter_transmittance(problem, part, f_number) for part in base])
    found.setflags(write=False)
    return found


def transmittances(problem: Problem, f_number: float, filters: slice | Array = slice(None)) -> Array:
    """Transmittances of some filters, by position; of a pair the product. (F, n), not to be written to. [1]

    A filter in front of the lens does not care about the f-number.
    """
    base = problem.spec.optics.f_numbers[0] if problem.spec.optics.filter_position == "front" else f_number
    table = _all_transmittances(problem, base)
    first, second = FilterChoices.of(problem.filters).members[filters].T
    stacked = np.flatnonzero(second >= 0)
    if not stacked.size and np.array_equal(first, np.arange(first[0], first[0] + first.size)):
        return table[first[0] : first[-1] + 1]  # as it stands: a copy costs as much as the product to come
    found = table[first]
    if stacked.size:
        found[stacked] *= table[second[stacked]]
    return found


def electrons_per_irradiance(problem: Problem, camera: Camera, channel: str, f_number: float) -> Array:
    """Electron rate per unit of (spectral irradiance × reflectance × filter), with the integral's weights.

    ``rate = Σ_λ weight(λ)·E(λ)·ρ(λ)·T(λ)``. Returns (n,). [e⁻/s per W m⁻² nm⁻¹]
    """
    if any(camera is own for own in problem.cameras):
        return _weights_of(problem, camera.id, channel, f_number)
    return _weights(problem, camera, channel, f_number)


@lru_cache(maxsize=64)
def _weights_of(problem: Problem, camera: str, channel: str, f_number: float) -> Array:
    """The same of a candidate camera, kept for all junction temperatures."""
    found = _weights(problem, problem.camera(camera), channel, f_number)
    found.setflags(write=False)
    return found


def _weights(problem: Problem, camera: Camera, channel: str, f_number: float) -> Array:
    optics = problem.spec.optics
    at_sensor = image_irradiance(radiance_of_diffuse(1.0, 1.0), problem.lens, f_number, optics.magnification)
    photons = at_sensor * photons_per_joule(problem.grid) * camera.pixel_area
    return photons * camera.quantum_efficiency(channel, problem.grid) * trapezoid_weights(problem.grid)


@dataclass(frozen=True, slots=True, kw_only=True)
class Rates:
    """Electron rates of one camera channel at one f-number, for F filters.

    Attributes
    ----------
    led : (F, S + C, L) array
        By surface (then clutter row) and LED channel at rated current. [e⁻/s]
    ambient : (F, S + C) array
        Under ambient light. [e⁻/s]
    """

    led: Array
    ambient: Array

    def scaled(self, factor: float) -> Rates:
        """Return the rates with all light scaled."""
        return self if factor == 1.0 else Rates(led=self.led * factor, ambient=self.ambient * factor)


#: Clutter directions that hold all but this share of the clutter energy serve the quick bounds.
_MINOR_CLUTTER = 5e-3
#: Light below this share of an LED's peak is left out: far below round-off even behind a filter that blocks the peak.
_NO_LIGHT = 1e-18
#: LEDs whose light is integrated over one range together.
_LEDS_TOGETHER = 10
#: Memory for rates that may serve again at other junction temperatures. [byte]
_KEPT_BYTES = 128_000_000


@lru_cache(maxsize=16)
def main_reflectances(problem: Problem) -> Reflectances:
    """`reflectances` with each surface's strongest clutter rows only: all but `_MINOR_CLUTTER` of the energy."""
    scene = reflectances(problem)
    kept = [scene.clutter[rows][: _main(scene.clutter[rows])] for rows in scene.rows_of]
    ends = np.cumsum([0, *(len(rows) for rows in kept)])
    return Reflectances(
        mean=scene.mean,
        specular=scene.specular,
        clutter=np.concatenate(kept),
        rows_of=tuple(slice(int(a), int(b)) for a, b in itertools.pairwise(ends)),
    )


def _main(clutter: Array) -> int:
    """How many of a surface's clutter rows are enough."""
    energy = np.sum(clutter**2, axis=1)
    if not energy.size:
        return 0
    left = 1.0 - np.cumsum(energy) / energy.sum()
    return int(np.argmax(left <= _MINOR_CLUTTER)) + 1


@dataclass(frozen=True, slots=True)
class _Band:
    """The light of some LEDs as it leaves each surface, over the wavelengths where they shine: (rows·leds, n_band)."""

    leds: NDArray[np.intp]
    start: int
    light: Array


class RateTable:
    """Electron rates for all filters, camera channels and f-numbers of a problem at given junction temperatures.

    Parameters
    ----------
    problem : Problem
    junction_c : (L,) array
        Junction temperature of each LED channel. [deg C]
    """

    def __init__(self, problem: Problem, junction_c: Array) -> None:
        self.problem = problem
        self.junction_c = np.asarray(junction_c, dtype=float)
        self._light = np.stack([self._irradiance(index) for index in range(self.junction_c.size)])
        self._bands: dict[bool, list[_Band]] = {}
        #: Rates of whole blocks of filters, and the LEDs that have come to another temperature since.
        self._kept: dict[tuple, tuple[Array, NDArray[np.bool_]]] = {}

    def _irradiance(self, index: int) -> Array:
        return channel_irradiance(self.problem, self.problem.channels[index], self.junction_c[index])

    def at(self, junction_c: Array, *, hand_over: bool = False) -> RateTable:
        """Return the rates at other junction temperatures.

        With ``hand_over`` the blocks of filters worked out here go with them, and there only the LEDs whose temperature
        moves are worked out anew.
        """
        other = copy(self)
        other.junction_c = np.asarray(junction_c, dtype=float)
        moved = other.junction_c != self.junction_c
        other._light, other._bands = self._light.copy(), {}
        for index in np.flatnonzero(moved):
            other._light[index] = other._irradiance(index)
        other._kept = {}
        if hand_over:
            other._kept = {key: (led, stale | moved) for key, (led, stale) in self._kept.items()}
            self._kept = {}
        return other

    def _room(self, size: int) -> bool:
        return size + sum(led.nbytes for led, _ in list(self._kept.values())) <= _KEPT_BYTES

    def _scene(self, main: bool) -> Reflectances:
        return main_reflectances(self.problem) if main else reflectances(self.problem)

    def bands(self, main: bool) -> list[_Band]:
        """LEDs in groups of neighbouring spectra, each group cut to the wavelengths where it shines."""
        if main not in self._bands:
            self._bands[main] = self._banded(np.arange(len(self._light)), main)
        return self._bands[main]

    def _banded(self, leds: NDArray[np.intp], main: bool) -> list[_Band]:
        scene, light = self._scene(main), self._light[leds]
        gloss = np.array([channel.specular_weight for channel in self.problem.channels])
        curves = np.concatenate([scene.mean, scene.clutter])
        shine = np.concatenate([scene.specular, np.zeros(len(scene.clutter))])
        lit = light > _NO_LIGHT * light.max(axis=1, keepdims=True)
        order = np.lexsort((np.argmax(light, axis=1), lit.sum(axis=1) > 0.75 * lit.shape[1]))
        return [
            self._band(leds[group], lit[group].any(axis=0), curves, np.outer(shine, gloss[leds[group]]))
            for group in np.array_split(order, max(1, round(order.size / _LEDS_TOGETHER)))
        ]

    def _band(self, leds: NDArray[np.intp], lit: NDArray[np.bool_], curves: Array, shine: Array) -> _Band:
        """As if from a diffuser, mirror-like part included."""
        where = np.flatnonzero(lit)
        span = slice(int(where[0]), int(where[-1]) + 1) if where.size else slice(0, 1)
        light = (curves[:, None, span] + shine[:, :, None]) * self._light[leds, span]
        return _Band(leds, span.start, light.reshape(-1, light.shape[2]))

    def rates(
        self, camera: Camera, channel: str, f_number: float, filters: slice | Array = slice(None), main: bool = False
    ) -> Rates:
        """Return the rates of one camera channel at one f-number for some filters: matrix products, band by band.

        ``main`` leaves out the weak clutter rows, see `main_reflectances`. The arrays are not to be written to.
        """
        weight = electrons_per_irradiance(self.problem, camera, channel, f_number)
        transmittance = transmittances(self.problem, f_number, filters)
        scene = self._scene(main)
        rows, ambient = len(scene.mean) + len(scene.clutter), self.problem.ambient
        key = (camera.id, channel, f_number, filters.start, filters.stop, main) if isinstance(filters, slice) else None
        if key in self._kept:
            led, stale = self._kept[key]
            bands = self._banded(np.flatnonzero(stale), main) if stale.any() else []
        else:
            led, bands = np.empty((len(transmittance), rows, len(self._light))), self.bands(main)
        for band in bands:
            span = slice(band.start, band.start + band.light.shape[1])
            part, light = transmittance[:, span], band.light
            if len(part) > len(light):  # weigh what is smaller
                light = light * weight[span]
            else:
                part = part * weight[span]
            led[:, :, band.leds] = (part @ light.T).reshape(len(part), rows, -1)
        if key is not None and (key in self._kept or self._room(led.nbytes)):
            self._kept[key] = led, np.zeros(len(self._light), dtype=bool)
        curves = np.concatenate([scene.mean, scene.clutter])
        return Rates(
            led=led,
            ambient=transmittance @ (curves * (ambient * weight)).T
            if np.any(ambient)
            else np.zeros((len(transmittance), rows)),
        )
