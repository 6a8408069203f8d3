"""The chain from LED current to photo-electrons, assembled from the equations in `codesign.physics`.

Everything is linear in light, so one matrix product per camera channel gives the electron rate of every surface
under every LED behind every filter.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, Filter
from codesign.physics.filters import cone_quadrature
from codesign.physics.light import flux_at_temperature, photons_per_joule
from codesign.physics.optics import cone_half_angle_deg, image_irradiance, radiance_of_diffuse
from codesign.problem import LedChannel, Problem
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
    shift = led.peak_shift_nm_per_k * (junction_c - led.reference_junction_c)
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


def electrons_per_irradiance(problem: Problem, camera: Camera, channel: str, f_number: float) -> Array:
    """Electron rate per unit of (spectral irradiance × reflectance × filter), with the integral's weights.

    ``rate = Σ_λ weight(λ)·E(λ)·ρ(λ)·T(λ)``. Returns (n,). [e⁻/s per W m⁻² nm⁻¹]
    """
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


def main_rows(scene: Reflectances, surface: int) -> slice:
    """The strongest clutter rows of a surface, holding all but `_MINOR_CLUTTER` of its clutter energy."""
    rows = scene.rows_of[surface]
    energy = np.sum(scene.clutter[rows] ** 2, axis=1)
    if not energy.size:
        return rows
    left = 1.0 - np.cumsum(energy) / energy.sum()
    return slice(rows.start, rows.start + int(np.argmax(left <= _MINOR_CLUTTER)) + 1)


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
        scene = reflectances(problem)
        light = np.stack([channel_irradiance(problem, c, t) for c, t in zip(problem.channels, junction_c, strict=True)])
        gloss = np.array([channel.specular_weight for channel in problem.channels])
        curves = np.concatenate([scene.mean, scene.clutter])
        shine = np.concatenate([scene.specular, np.zeros(len(scene.clutter))])
        # (S+C, L, n): each LED's light as it leaves each surface, as if from a diffuser
        self._from_leds = (curves[:, None, :] + np.outer(shine, gloss)[:, :, None]) * light
        self._from_ambient = curves * problem.ambient
        self._filters: dict[float, Array] = {}

    def _transmittances(self, f_number: float) -> Array:
        """(F, n) transmittances; a filter in front of the lens does not care about the f-number."""
        key = f_number if self.problem.spec.optics.filter_position == "sensor" else 0.0
        if key not in self._filters:
            self._filters[key] = np.stack(
                [filter_transmittance(self.problem, f, f_number) for f in self.problem.filters]
            )
        return self._filters[key]

    def rates(self, camera: Camera, channel: str, f_number: float) -> Rates:
        """Return the rates of one camera channel at one f-number: one matrix product."""
        weight = electrons_per_irradiance(self.problem, camera, channel, f_number)
        seen = np.flatnonzero(weight)
        transmittance = self._transmittances(f_number)[:, seen] * weight[seen]
        rows, leds, _ = self._from_leds.shape
        led = transmittance @ self._from_leds[:, :, seen].reshape(rows * leds, -1).T
        ambient = transmittance @ self._from_ambient[:, seen].T
        return Rates(led=led.reshape(-1, rows, leds), ambient=ambient)
