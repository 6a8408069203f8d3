"""One recipe on many rigs at once: the forward model of `codesign.design`, vectorised over draws of the parts.

Each rig has its own LEDs, filter, camera and surroundings. All that depends on wavelength is integrated for a block of
rigs together, (rigs × wavelengths). The result equals `codesign.evaluate` of the nudged problems to 1e-9, with one
difference on purpose: the sign of the contrast is that of the nominal rig, for the threshold is set once. A rig whose
contrast has turned round has a CNR of 0 here.

An LED's shifted spectrum is interpolated between Chebyshev nodes of the shift: the model spectrum is an entire function
of it, so that some 40 nodes reach round-off and all rigs follow from one matrix product.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Filter
from codesign.design import JOINT, Design, Performance, evaluate, setting_of
from codesign.errors import ProblemError
from codesign.limits import junction_limit
from codesign.noise import noise_model
from codesign.physics.filters import cone_quadrature, tilt_factor
from codesign.physics.optics import cone_half_angle_deg
from codesign.problem import LedChannel, Problem
from codesign.radiometry import electrons_per_irradiance, reflectances
from codesign.study.draws import Draws
from codesign.study.rigs import Rigs, balance, filter_pieces, lit_channels, rigs_of

Array = NDArray[np.float64]

#: Rigs integrated together: rows that fit the cache.
RIGS_TOGETHER = 128
#: Multiplications in one matrix product at most.
SMALL_PRODUCT = 200_000
#: Light below this share of an LED's peak is left out: below round-off even behind a filter that blocks the peak.
NO_LIGHT = 1e-18


@dataclass(frozen=True, slots=True)
class Light:
    """Rates of B rigs at their exposures (B,).

    Electrons ``led`` and ``ambient`` (B, S) and clutter amplitudes (B, C) [e⁻/s]; light and junction of each lit LED
    (B, K) [W], [deg C].
    """

    exposure_s: Array
    led: Array
    ambient: Array
    clutter: Array
    optical_w: Array
    junction_c: Array


class Fleet:
    """A recipe and the rigs it is set on.

    Parameters
    ----------
    problem : Problem
    design : Design
    draws : Draws
        How each rig differs.
    """

    def __init__(self, problem: Problem, design: Design, draws: Draws) -> None:
        if design.shots or JOINT in design.channel:
            raise ProblemError(
                f"{design.where}: readings combined by weights have no tolerance study; give a recipe with one reading"
            )
        self.problem, self.design = problem, design
        self.nominal: Performance = evaluate(problem, design)
        self.setting = setting_of(problem, design)
        self.rigs = rigs_of(problem, design, self.setting, draws)
        self.pieces = [piece for _, piece in filter_pieces(problem, design.filter)]
        weight = electrons_per_irradiance(problem, self.setting.camera, design.channel, design.f_number)
        self.scene = reflectances(problem)
        lamps = [self._lamp(k, channel) for k, (channel, _) in enumerate(lit_channels(problem, design))]
        lit = problem.ambient > 0
        for lamp in lamps:
            lit = lit | ((problem.grid >= lamp.low) & (problem.grid <= lamp.high))
        kept = np.flatnonzero(lit & (weight > 0))
        self.grid, self.weight, self.ambient = problem.grid[kept], weight[kept], problem.ambient[kept]
        self.curves = np.concatenate([self.scene.mean, self.scene.clutter])[:, kept]
        self.lamps = [lamp.on(self.grid) for lamp in lamps]

    def _lamp(self, k: int, channel: LedChannel) -> Lamp:
        """An LED and the range of its shifts and wavelengths over all rigs and exposures."""
        led = channel.led
        now = np.full(self.rigs.size, self.design.exposure_us * 1e-6)
        hottest = max(junction_limit(self.problem, channel), float(self.balance(now, self.rigs)[0][:, k].max()))
        temperatures = np.array([self.rigs.air_c.min(), hottest])
        warming = led.peak_shift_nm_per_k * (temperatures - led.reference_junction_c)
        shifts = self.rigs.peak_nm[:, k]
        emitters = self.design.emitters.get(led.id, channel.emitters) / channel.emitters
        span = (shifts.min() + warming.min(), shifts.max() + warming.max())
        return Lamp(k, channel, emitters, *span, *_shine(channel, self.problem.grid, span))

    def balance(self, exposure_s: Array, rigs: Rigs) -> tuple[Array, Array]:
        """Junction temperatures and relative flux of the lit LEDs of some rigs. (B, K)"""
        return balance(self.problem, self.design, rigs, exposure_s)

    def blocks(self) -> Iterator[tuple[slice, Block]]:
        """The rigs some at a time."""
        for start in range(0, self.rigs.size, RIGS_TOGETHER):
            part = slice(start, min(start + RIGS_TOGETHER, self.rigs.size))
            yield part, Block(self, self.rigs.take(part))


def _shine(channel: LedChannel, grid: Array, span: tuple[float, float]) -> tuple[float, float]:
    """Wavelengths between which an LED shines at any shift of a span. [nm]"""
    reach = max(200.0, 2 * (span[1] - span[0]))
    wide = np.arange(grid[0] - reach, grid[-1] + reach, 1.0)
    spectrum = channel.led.spectrum(wide)
    shining = wide[spectrum > NO_LIGHT * spectrum.max()]
    if not shining.size:
        return np.inf, -np.inf
    return shining[0] + span[0] - 1.0, shining[-1] + span[1] + 1.0


class Lamp:
    """A lit LED of a fleet: shifts from ``least`` to ``most``, light from ``low`` to ``high``. [nm]"""

    def __init__(
        self, k: int, channel: LedChannel, emitters: float, least: float, most: float, low: float, high: float
    ) -> None:
        self.k, self.channel, self.emitters = k, channel, emitters
        self.least, self.most, self.low, self.high = least, most, low, high

    def on(self, grid: Array) -> Lamp:
        """Take the wavelengths used, and prepare the nodes."""
        self.used = slice(*np.searchsorted(grid, (self.low, self.high)))
        self.grid, led, self.nodes = grid[self.used], self.channel.led, None
        if led.fwhm_nm is not None and self.most > self.least:
            half = (self.most - self.least) / 2
            count = 24 + int(np.ceil(24 * half / led.fwhm_nm))  # falls to round-off as the Bernstein ellipse grows
            self.angle = (np.arange(count) + 0.5) * np.pi / count
            self.nodes = (self.most + self.least) / 2 + half * np.cos(self.angle)
            self.table = np.stack([led.spectrum(self.grid, shift) for shift in self.nodes])
        return self

    def spectra(self, shift: Array, scale: Array) -> Array:
        """Spectra at shifts (B,), times ``scale`` (B,). (B, n) [W/nm]"""
        if self.nodes is None:
            shifted = self.grid - shift[:, None]
            return self.channel.led.spectrum(shifted.ravel()).reshape(shifted.shape) * scale[:, None]
        # Barycentric formula at Chebyshev points of the first kind: J.-P. Berrut, L. N. Trefethen, SIAM Rev. 46, 501.
        away = shift[:, None] - self.nodes
        away = np.where(away == 0, 1e-300, away)
        share = np.where(np.arange(self.nodes.size) % 2, -1.0, 1.0) * np.sin(self.angle) / away
        return _product(share * (scale / share.sum(axis=1))[:, None], self.table)


class Block:
    """Some rigs of a fleet: their filters are worked out once, the light as often as the exposure changes."""

    def __init__(self, fleet: Fleet, rigs: Rigs) -> None:
        self.fleet, self.rigs, self.problem = fleet, rigs, fleet.problem

    @cached_property
    def seen(self) -> Array:
        """Electron rate per unit of light leaving the object, filter included. (B, n), or (1, n) where all are alike"""
        rigs, position = self.rigs, self.problem.spec.optics.filter_position
        state = np.concatenate([rigs.field_deg[:, None], rigs.filter_nm], axis=1)
        own, which = np.unique(state, axis=0, return_inverse=True)
        field, shifts = own[:, 0], own[:, 1:]
        product = self.fleet.weight[None, :]
        for j, piece in enumerate(self.fleet.pieces):
            if piece.kind in ("none", "neutral"):
                product = product * piece.transmittance(self.fleet.grid)
            elif piece.effective_index is None:
                product = product * _normal(piece, self.fleet.grid - shifts[:, j, None])
            else:
                angles, weights = self._front(field) if position == "front" else self._cones(field)
                product = product * _tilted(piece, self.fleet.grid, shifts[:, j], angles, weights)
        return product if len(product) == 1 else product[which.ravel()]

    @staticmethod
    def _front(field_deg: Array) -> tuple[Array, Array]:
        """In front of the lens all rays of an image point meet the filter at the field angle. (B, 1)"""
        return field_deg[:, None], np.ones((field_deg.size, 1))

    def _cones(self, field_deg: Array) -> tuple[Array, Array]:
        """Angles of the rays through a filter at the sensor and weights, 0 where a rig needs fewer rays. (B, k)"""
        half = float(cone_half_angle_deg(self.fleet.design.f_number, self.problem.spec.optics.magnification))
        cones = [cone_quadrature(half, angle) for angle in field_deg]
        shape = len(cones), max(angles.size for angles, _ in cones)
        angles, weights = np.zeros(shape), np.zeros(shape)
        for row, (own, weight) in enumerate(cones):
            angles[row, : own.size], weights[row, : own.size] = own, weight
        return angles, weights

    def light(self, exposure_s: Array) -> Light:
        """Rates of all rigs at their exposures (B,)."""
        fleet, rigs, scene = self.fleet, self.rigs, self.fleet.scene
        junction, factor = fleet.balance(exposure_s, rigs)
        diffuse, gloss = self._spectra(junction, factor)
        count = len(scene.mean)
        rows = [i for i, part in enumerate(scene.rows_of) for _ in range(part.stop - part.start)]
        factors = np.concatenate([rigs.reflectance, rigs.reflectance[:, rows]], axis=1) * rigs.gain[:, None]
        led = _product(self.seen * diffuse, fleet.curves.T) * factors
        ambient = self._from_ambient * factors * rigs.ambient[:, None]
        clutter = led[:, count:] + ambient[:, count:]
        led = led[:, :count]
        if gloss is not None:
            led = led + np.multiply.outer(np.sum(self.seen * gloss, axis=1) * rigs.gain, scene.specular)
        return Light(exposure_s, led, ambient[:, :count], clutter, rigs.reference_w * factor, junction)

    @cached_property
    def _from_ambient(self) -> Array:
        """Rates under nominal ambient light. (B or 1, S + C) [e⁻/s]"""
        if not np.any(self.fleet.ambient > 0):
            return np.zeros((1, len(self.fleet.curves)))
        return _product(self.seen, (self.fleet.ambient * self.fleet.curves).T)

    def _spectra(self, junction_c: Array, factor: Array) -> tuple[Array, Array | None]:
        """Irradiance at the object and, where something shines, its mirror-like part. (B, n) [W m⁻² nm⁻¹]"""
        shape = (self.rigs.size, self.fleet.grid.size)
        weights = [lamp.channel.specular_weight for lamp in self.fleet.lamps]
        shines = bool(np.any(self.fleet.scene.specular > 0) and any(weights))
        diffuse, gloss = np.zeros(shape), np.zeros(shape) if shines else None
        for lamp, weight in zip(self.fleet.lamps, weights, strict=True):
            k, led = lamp.k, lamp.channel.led
            shift = self.rigs.peak_nm[:, k] + led.peak_shift_nm_per_k * (junction_c[:, k] - led.reference_junction_c)
            delivery = self.rigs.delivery[:, k] * (lamp.channel.delivery * lamp.emitters)
            own = lamp.spectra(shift, factor[:, k] * self.rigs.share[:, k] * delivery)
            diffuse[:, lamp.used] += own
            if gloss is not None and weight:
                gloss[:, lamp.used] += own * weight
        return diffuse, gloss

    def electrons(self, light: Light) -> Array:
        """All electrons on each surface. (B, S) [e⁻]"""
        return (light.led + light.ambient + self.rigs.dark_rate[:, None]) * light.exposure_s[:, None]

    def contrast(self, light: Light) -> Array:
        """CNR of the worst pair, 0 where it has the other sign than the nominal rig. (B,)"""
        variance = self._variance(light)
        photo = (light.led + light.ambient) * light.exposure_s[:, None]
        direction = 1.0 if self.fleet.nominal.sign == "brighter" else -1.0
        worst = np.full(self.rigs.size, np.inf)
        for target, background in self.problem.pairs:
            signal = direction * (photo[:, target] - photo[:, background])
            mean = (variance[:, target] + variance[:, background]) / 2
            worst = np.minimum(worst, signal / np.sqrt(np.where(mean > 0, mean, np.inf)))
        return np.maximum(worst, 0.0)

    def _variance(self, light: Light) -> Array:
        """Noise variance on each surface. (B, S) [e⁻²]"""
        noise = noise_model(self.rigs.sensor, self.problem.spec.averaging)
        t = light.exposure_s[:, None]
        led, ambient, dark = light.led * t, light.ambient * t, self.rigs.dark_rate[:, None] * t
        variance = noise.linear[0] * led + noise.linear[1] * ambient + noise.linear[2] * dark
        relative = np.asarray(noise.relative)[..., None] * (led + ambient)
        variance += np.asarray(noise.constant)[..., None] + relative**2
        for surface, rows in enumerate(self.fleet.scene.rows_of):
            variance[:, surface] += noise.clutter_share * np.sum((light.clutter[:, rows] * t) ** 2, axis=1)
        return variance


def _product(left: Array, right: Array) -> Array:
    """Matrix product in pieces so small that no library spreads them over threads, which costs more than it saves."""
    rows = max(SMALL_PRODUCT // right.size, 1)
    whole = len(left) // rows * rows
    found = np.empty((len(left), right.shape[1]))
    np.matmul(left[:whole].reshape(-1, rows, left.shape[1]), right, out=found[:whole].reshape(-1, rows, right.shape[1]))
    np.matmul(left[whole:], right, out=found[whole:])
    return found


def _normal(piece: Filter, wavelength_nm: Array) -> Array:
    """Transmittance at normal incidence, at any wavelengths; the ends of a curve are held."""
    known, flat = piece.range(), wavelength_nm.ravel()
    return piece.transmittance(flat if known is None else np.clip(flat, *known)).reshape(wavelength_nm.shape)


def _tilted(piece: Filter, grid: Array, shift: Array, angles: Array, weights: Array) -> Array:
    """Transmittance averaged over each rig's rays. (B, n)"""
    factor, total = tilt_factor(angles, piece.effective_index), np.zeros((shift.size, grid.size))
    for k in range(angles.shape[1]):
        rays = np.flatnonzero(weights[:, k] > 0)
        total[rays] += weights[rays, k, None] * _normal(piece, grid / factor[rays, k, None] - shift[rays, None])
    return total
