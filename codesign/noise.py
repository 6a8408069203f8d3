"""Every noise term once: how it depends on the electrons, and what averaging does to it.

Each term's variance is ``constant + Σ linear·electrons + (relative·photo-electrons)² + |clutter|²`` in e⁻², after
the linear camera model of EMVA Standard 1288. The forward model evaluates a term at a recipe; the optimiser takes
the same numbers as coefficients.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, GainSetting
from codesign.physics.sensor import quantization_variance_e2
from codesign.problem.schema import Averaging

Array = NDArray[np.float64]

#: What a pixel holds, in the order used by the linear coefficients.
SIGNALS = ("led", "ambient", "dark")


@dataclass(frozen=True, slots=True, kw_only=True)
class Sensor:
    """The noise figures of one camera at one gain; of many pieces of it where the figures are arrays."""

    read_noise_e: float
    conversion_gain_dn_per_e: float
    dsnu_e: float
    prnu: float

    @classmethod
    def of(cls, camera: Camera, gain: GainSetting) -> Sensor:
        """Collect the figures of a camera at a gain."""
        return cls(
            read_noise_e=gain.read_noise_e,
            conversion_gain_dn_per_e=gain.conversion_gain_dn_per_e,
            dsnu_e=camera.dsnu_e,
            prnu=camera.prnu_percent / 100,
        )


def _nothing(sensor: Sensor) -> float:
    return 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class NoiseTerm:
    """One source of noise.

    Attributes
    ----------
    name : str
    averages : {"samples", "pixels", "never"}
        What averaging divides it: pixels and frames, pixels only (fixed pattern), or nothing (the surface itself).
        What is not divided by frames has no ``linear`` part: counting by chance is new in every frame.
    constant : function of Sensor
        Variance without light. [e⁻²]
    linear : (3,) tuple
        Variance per electron of each of `SIGNALS`.
    relative : function of Sensor
        Standard deviation per photo-electron (LED and ambient). [1]
    clutter : bool
        Whether it is the spread of the measured surface samples.
    """

    name: str
    averages: Literal["samples", "pixels", "never"]
    constant: Callable[[Sensor], float] = _nothing
    linear: tuple[float, float, float] = (0.0, 0.0, 0.0)
    relative: Callable[[Sensor], float] = _nothing
    clutter: bool = False

    def divisor(self, averaging: Averaging) -> float:
        """What averaging divides the variance by."""
        return {"samples": averaging.pixels * averaging.frames, "pixels": averaging.pixels, "never": 1}[self.averages]

    def lasting(self, same_pixels: bool) -> bool:
        """Whether several readings of a decision have the noise in common, so that it adds up with their weights.

        The surface lasts in any case. The fixed pattern of EMVA 1288 does not change with time: it lasts where
        the same pixels take all readings (shots), not where each reading has pixels of its own (colour channels).
        """
        return self.clutter or (same_pixels and self.averages == "pixels")

    def amplitudes(self, sensor: Sensor, electrons: Array, clutter: Array, averaging: Averaging) -> Array:
        """Standard deviations of its independent causes: without light, per photo-electron, clutter. (2 + r,) [e⁻]

        Of a lasting term the amplitudes of several readings add up, with their weights, before they are squared.
        """
        parts = (np.sqrt(self.constant(sensor)), self.relative(sensor) * (electrons[0] + electrons[1]))
        return np.array([*parts, *(clutter if self.clutter else ())]) / np.sqrt(self.divisor(averaging))

    def variance(self, sensor: Sensor, electrons: Array, clutter: Array, averaging: Averaging) -> float:
        """Variance at a pixel holding ``electrons`` (3,) of `SIGNALS` and clutter amplitudes (r,). [e⁻²]"""
        by_chance = float(np.dot(self.linear, electrons)) / self.divisor(averaging)
        amplitudes = self.amplitudes(sensor, electrons, clutter, averaging)
        return by_chance + float(amplitudes @ amplitudes)


NOISE_TERMS: tuple[NoiseTerm, ...] = (
    NoiseTerm(name="read noise", averages="samples", constant=lambda s: s.read_noise_e**2),
    NoiseTerm(
        name="quantisation",
        averages="samples",
        constant=lambda s: quantization_variance_e2(s.conversion_gain_dn_per_e),
    ),
    NoiseTerm(name="light shot noise", averages="samples", linear=(1.0, 0.0, 0.0)),
    NoiseTerm(name="ambient shot noise", averages="samples", linear=(0.0, 1.0, 0.0)),
    NoiseTerm(name="dark shot noise", averages="samples", linear=(0.0, 0.0, 1.0)),
    NoiseTerm(name="dark fixed pattern", averages="pixels", constant=lambda s: s.dsnu_e**2),
    NoiseTerm(name="photo-response fixed pattern", averages="pixels", relative=lambda s: s.prnu),
    NoiseTerm(name="surface clutter", averages="never", clutter=True),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class NoiseModel:
    """All terms of one sensor summed by how they grow; what the optimiser needs.

    ``variance = constant + linear·electrons + (relative·photo)² + clutter_share·|clutter|²`` in e⁻².
    """

    constant: float
    linear: Array
    relative: float
    clutter_share: float


def noise_model(sensor: Sensor, averaging: Averaging, terms: tuple[NoiseTerm, ...] = NOISE_TERMS) -> NoiseModel:
    """Sum the terms of a sensor, averaging applied."""
    share = [1.0 / term.divisor(averaging) for term in terms]
    return NoiseModel(
        constant=sum(s * term.constant(sensor) for s, term in zip(share, terms, strict=True)),
        linear=sum((s * np.array(term.linear) for s, term in zip(share, terms, strict=True)), np.zeros(3)),
        relative=np.sqrt(sum(s * term.relative(sensor) ** 2 for s, term in zip(share, terms, strict=True))),
        clutter_share=sum(s for s, term in zip(share, terms, strict=True) if term.clutter),
    )
