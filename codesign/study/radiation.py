"""Radiation screening: what the emitters of a recipe send into an eye that looks at them from near.

A WARNING AID AND NEVER A CLASSIFICATION. It compares hazard-weighted irradiance and radiance at a distance with
published exposure limits, under assumptions on geometry that rather overstate than understate, see
`Screening.assumptions`. Local codes and licensed practice decide.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from codesign.design import Performance, Shot
from codesign.design_combined import optical_power
from codesign.display import Displayed
from codesign.errors import ProblemError
from codesign.limits_eye import STANDARD_M, own_light
from codesign.physics import radiation as hazard
from codesign.physics.light import delivery_from_beam
from codesign.problem import LedChannel, Problem
from codesign.spectra import FloatArray

#: Distance of the eye where none is stated. [mm]
STANDARD_MM = 1e3 * STANDARD_M
NEAREST_MM, FARTHEST_MM = 20.0, 1e5

NAMES = (
    "actinic ultraviolet",
    "ultraviolet A",
    "blue light",
    "retinal heat",
    "retinal heat, infrared",
    "infrared on the eye",
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Exposure:
    """One weighted quantity against one published limit; angles in rad, times in s.

    Attributes
    ----------
    hazard : str
        One of `NAMES`; several rows may share it, and the limit is then reached once all of them are.
    quantity, unit : str
        What is held against the limit.
    while_on, mean : float
        During a pulse, and averaged over the frame; the same for steady light.
    counts : str
        Which of the two the limit is held against, "mean" or "while on".
    limit : float
        For exposures of ``limit_seconds`` or more. In ``unit``.
    limit_seconds : float
        [s]
    seconds : float
        Exposure after which the published limit is reached; infinity where it never is. [s]
    ratio : float
        What counts divided by ``limit``.
    published : str
        The whole limit in words.
    source, note : str
        Where the limit is published; what to know about the row. How far limits could be checked: `CONFIDENCE`.
    """

    hazard: str
    quantity: str
    unit: str
    while_on: float
    mean: float
    counts: str
    limit: float
    limit_seconds: float
    seconds: float
    ratio: float
    published: str
    source: str
    note: str = ""


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Screening(Displayed):
    """What `screening` found: the rows, the distance [mm] and the assumptions made."""

    distance_mm: float
    exposures: tuple[Exposure, ...]
    assumptions: tuple[str, ...]

    def seconds(self, name: str) -> float:
        """Time after which the published limit of a hazard is reached, infinity where never. [s]"""
        return max((row.seconds for row in self.exposures if row.hazard == name), default=math.inf)

    @property
    def reached(self) -> dict[str, float]:
        """Hazards whose limit is reached within 8 h, with the time [s], soonest first."""
        times = {name: self.seconds(name) for name in NAMES}
        return {name: t for name, t in sorted(times.items(), key=lambda item: item[1]) if t <= hazard.DAY_S}


def screening(problem: Problem, performance: Performance, distance_mm: float = STANDARD_MM) -> Screening:
    """Hazard-weighted light of a recipe's emitters at a distance, against published exposure limits.

    Light of the LEDs at their currents and junction temperatures, looked into from the axis; ambient light left out.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        Of the recipe, from `codesign.evaluate` or a solution.
    distance_mm : float
        From the emitters to the eye. [mm]

    Returns
    -------
    Screening
        Without rows when all LEDs are off.

    Raises
    ------
    ProblemError
        When the distance is not a number from 20 to 100,000 mm.

    References
    ----------
    .. [1] Weightings and limits: `codesign.physics.radiation`, each with its source and confidence.
    """
    require_distance(distance_mm)
    if not performance.leds:
        return Screening(distance_mm=distance_mm, exposures=(), assumptions=())
    light = _Light(problem, performance, distance_mm * 1e-3)
    rows = tuple(row for build in _ROWS for row in build(light))
    return Screening(distance_mm=distance_mm, exposures=rows, assumptions=_assumptions(light))


def require_distance(distance_mm: float) -> None:
    """Raise ProblemError when a distance to the eye is no use. [mm]"""
    if not NEAREST_MM <= distance_mm <= FARTHEST_MM:
        raise ProblemError(
            f"distance of the eye is {distance_mm:g} mm, must be {NEAREST_MM:g} to {FARTHEST_MM:g}; "
            f"{STANDARD_MM:g} mm is usual"
        )


class _Light:
    """Light of the lit channels: on-axis intensity of all emitters of each, by hazard. (L lit channels, K shots)"""

    def __init__(self, problem: Problem, performance: Performance, distance_m: float) -> None:
        self.distance = distance_m
        self.channels = [problem.channel(state.id) for state in performance.leds]
        junction = {state.id: state.junction_c for state in performance.leds}
        emitters = np.array([state.emitters for state in performance.leds])
        design = performance.design
        shots = design.shots or (Shot(exposure_us=design.exposure_us, drive_ma=design.drive_ma),)
        seconds = np.array([shot.exposure_us * 1e-6 for shot in shots])
        duty = np.array([problem.duty(t) for t in seconds])
        watts = np.array(
            [[optical_power(c, shot.drive_ma.get(c.id, 0.0), junction[c.id]) for c in self.channels] for shot in shots]
        )
        per_watt = np.array([delivery_from_beam(c.led.beam_half_angle_deg, 1.0) for c in self.channels])
        self.on = watts * emitters * per_watt  # (K, L) [W/sr]
        self.mean = duty @ self.on  # (L,) [W/sr]
        self.pulse = float(seconds.sum()) if problem.strobe else math.inf
        self.spectra = [_spectrum(channel, junction[channel.id]) for channel in self.channels]
        areas = [channel.led.emitting_area_mm2 for channel in self.channels]
        self.known = None not in areas
        self.area = np.array([area or 0.0 for area in areas]) * 1e-6 * emitters  # (L,) [m²]
        self.emitters = int(emitters.sum())

    def share(self, weight: Callable[[FloatArray], FloatArray]) -> FloatArray:
        """Weighted light per watt of each channel. (L,)"""
        return np.array([hazard.weighted(shape, weight(nm), nm) for nm, shape in self.spectra])

    def irradiance(self, weight: Callable[[FloatArray], FloatArray]) -> tuple[float, float]:
        """Of all emitters as one point: while on (the strongest shot), and mean. [W/m²]"""
        share = self.share(weight) / self.distance**2
        return float((self.on @ share).max()), float(self.mean @ share)

    def radiance(self, weight: Callable[[FloatArray], FloatArray]) -> tuple[float, float]:
        """Of the brightest channel: while on, and mean; infinity where an area is not known. [W m⁻² sr⁻¹]"""
        if not self.known:
            return math.inf, math.inf
        share = self.share(weight) / self.area
        return float((self.on * share).max()), float((self.mean * share).max())

    def worst_spot(self, intensity: FloatArray, least_rad: float) -> tuple[float, float]:
        """Radiance and angle of the part of the light with the greatest product of the two, (L,) [W/sr] given.

        Emitters lie side by side without gaps, the brightest together. Without areas: a spot of the least angle.
        """
        irradiance = intensity / self.distance**2
        if not self.known:
            return hazard.seen_radiance(math.inf, float(irradiance.sum()), least_rad), least_rad
        order = np.argsort(-intensity / self.area)
        light, area = np.cumsum(intensity[order]), np.cumsum(self.area[order])
        found = []
        for watts, size in zip(light.tolist(), area.tolist(), strict=True):
            seen = hazard.seen_radiance(watts / size, watts / self.distance**2, least_rad)
            angle = min(max(math.sqrt(size) / self.distance, least_rad), hazard.LARGEST_RAD)
            found.append((seen, angle))
        return max(found, key=lambda spot: spot[0] * spot[1])


def _spectrum(channel: LedChannel, junction_c: float) -> tuple[FloatArray, FloatArray]:
    """Wavelengths [nm] and light per watt [1/nm] of an LED at a junction temperature, on a grid of its own."""
    led = channel.led
    return own_light(led, channel.peak_shift_nm + led.peak_shift_nm_per_k * (junction_c - led.reference_junction_c))


def _assumptions(light: _Light) -> tuple[str, ...]:
    found = [
        f"an eye {light.distance * 1e3:g} mm from the bare emitters, on the axis of all of them: no cover, no diffuser",
        f"all {light.emitters} lit emitters count as one source at that distance; ambient light is left out",
    ]
    unstated = [c.id for c in light.channels if "beam_half_angle_deg" not in c.led.model_fields_set]
    if unstated:
        found.append(f"no beam angle stated, taken as Lambertian: {', '.join(unstated)}")
    if light.known:
        found.append("emitting areas as stated, side by side without gaps, the brightest together")
    else:
        without = [c.id for c in light.channels if c.led.emitting_area_mm2 is None]
        found.append(
            f"no emitting area stated ({', '.join(without)}): all light is taken to come from the smallest spot that "
            f"counts, {1e3 * hazard.GLANCE_RAD:g} mrad at a glance, {1e3 * hazard.GAZE_RAD:g} mrad in a long look"
        )
    modelled = [c.id for c in light.channels if not c.led.curve]
    if modelled:
        found.append(f"no measured spectrum, so nothing is known of light far from the peak: {', '.join(modelled)}")
    if math.isfinite(light.pulse):
        found.append("pulsed light: doses by the mean over the frame, heat of the retina by one pulse and by the mean")
    return tuple(found)


_Weight = Callable[[FloatArray], FloatArray]
_EYE = "IEC 62471:2006, {}"
#: How far the limits could be checked.
CONFIDENCE = "A-B: read in secondary sources, standard not read"


def _simple(
    name: str, weight: _Weight, clause: str, level: tuple[float, float, str], time: Callable[[float], float]
) -> Callable[[_Light], list[Exposure]]:
    """A row of irradiance, held against its limit by the mean; ``level``: long limit, its time, the whole in words."""
    limit, limit_seconds, published = level

    def row(light: _Light) -> list[Exposure]:
        on, mean = light.irradiance(weight)
        return [
            Exposure(
                hazard=name, quantity="irradiance", unit="W/m2", while_on=on, mean=mean, counts="mean", limit=limit,
                limit_seconds=limit_seconds, seconds=time(mean), ratio=mean / limit, published=published,
                source=_EYE.format(clause),
            )
        ]  # fmt: skip

    return row


def _band(band_nm: tuple[float, float], weight: _Weight | None = None) -> _Weight:
    return lambda nm: hazard.in_band(nm, band_nm) * (1.0 if weight is None else weight(nm))


def _blue_radiance(light: _Light) -> list[Exposure]:
    """Radiance of the brightest emitters where areas are known; the limit is reached once this one is too."""
    if not light.known:
        return []
    on, mean = light.radiance(hazard.blue_light_weight)
    return [
        Exposure(
            hazard=NAMES[2], quantity="radiance", unit="W/m2/sr", while_on=on, mean=mean, counts="mean",
            limit=hazard.BLUE_LEVEL, limit_seconds=hazard.LONG_BLUE_S, seconds=hazard.blue_light_time(mean),
            ratio=mean / hazard.BLUE_LEVEL, published="1 MJ/m2/sr to 10000 s, 100 W/m2/sr beyond",
            source=_EYE.format("4.3.3"), note="of the brightest emitters; reached only once the row above is, too",
        )
    ]  # fmt: skip


def _retinal_heat(light: _Light) -> list[Exposure]:
    """The pulse by itself, or the mean over many, whichever uses more of its limit."""
    share = light.share(hazard.retinal_thermal_weight)
    spots = [light.worst_spot(row * share, hazard.GLANCE_RAD) for row in light.on]
    on, wide = max(spots, key=lambda spot: spot[0] * spot[1])
    mean, angle = light.worst_spot(light.mean * share, hazard.GLANCE_RAD)
    in_pulse = min(light.pulse, hazard.LONG_RETINAL_S)
    pulse_limit, long_limit = (
        hazard.retinal_thermal_limit(wide, in_pulse),
        hazard.retinal_thermal_limit(angle, hazard.LONG_RETINAL_S),
    )
    by_pulse = on / pulse_limit > mean / long_limit
    value, alpha, limit = (on, wide, pulse_limit) if by_pulse else (mean, angle, long_limit)
    seconds = hazard.retinal_thermal_time(value, alpha)
    return [
        Exposure(
            hazard=NAMES[3], quantity="radiance", unit="W/m2/sr", while_on=on, mean=mean,
            counts="while on" if by_pulse else "mean", limit=limit,
            limit_seconds=in_pulse if by_pulse else hazard.LONG_RETINAL_S,
            seconds=seconds if value > limit else math.inf, ratio=value / limit,
            published="50000 / (angle x time^(1/4)) W/m2/sr, 10 us to 10 s", source=_EYE.format("4.3.5"),
            note=f"angle of the source {1e3 * alpha:.3g} mrad",
        )
    ]  # fmt: skip


def _retinal_infrared(light: _Light) -> list[Exposure]:
    share = light.share(_band(hazard.RETINAL_INFRARED_NM, hazard.retinal_thermal_weight))
    spots = [light.worst_spot(row * share, hazard.GAZE_RAD) for row in light.on]
    on, _ = max(spots, key=lambda spot: spot[0] * spot[1])
    mean, angle = light.worst_spot(light.mean * share, hazard.GAZE_RAD)
    limit = hazard.retinal_infrared_limit(angle)
    return [
        Exposure(
            hazard=NAMES[4], quantity="radiance", unit="W/m2/sr", while_on=on, mean=mean, counts="mean", limit=limit,
            limit_seconds=hazard.LONG_RETINAL_S, seconds=hazard.LONG_RETINAL_S if mean > limit else math.inf,
            ratio=mean / limit, published="6000 / angle W/m2/sr beyond 10 s", source=_EYE.format("4.3.6"),
            note=f"angle of the source {1e3 * angle:.3g} mrad; meant for light that hardly looks bright",
        )
    ]  # fmt: skip


_ACTINIC = hazard.ACTINIC_DOSE / hazard.DAY_S, hazard.DAY_S, "30 J/m2 in 8 h"
_UVA = hazard.UVA_LEVEL, hazard.LONG_UVA_S, "10 kJ/m2 to 1000 s, 10 W/m2 beyond"
_SMALL = hazard.SMALL_LEVEL, hazard.LONG_SMALL_S, "100 J/m2 to 100 s, 1 W/m2 beyond"
_INFRARED = hazard.INFRARED_LEVEL, hazard.LONG_INFRARED_S, "18000 / time^(3/4) W/m2 to 1000 s, 100 W/m2 beyond"

_ROWS: tuple[Callable[[_Light], list[Exposure]], ...] = (
    _simple(NAMES[0], hazard.actinic_weight, "4.3.1; ICNIRP 2004", _ACTINIC, hazard.actinic_time),
    _simple(NAMES[1], _band(hazard.UVA_NM), "4.3.2", _UVA, hazard.ultraviolet_a_time),
    _simple(NAMES[2], hazard.blue_light_weight, "4.3.4", _SMALL, hazard.blue_light_small_time),
    _blue_radiance,
    _retinal_heat,
    _retinal_infrared,
    _simple(NAMES[5], _band(hazard.INFRARED_EYE_NM), "4.3.7", _INFRARED, hazard.infrared_eye_time),
)
