"""How much an LED's light weighs at the eye, for limits on hazard-weighted irradiance.

A limit needs a weight that does not depend on the recipe, so each LED counts at the junction temperature at which its
light weighs most, and rather too much than too little. `codesign.study.radiation` screens a recipe at the temperatures
it reaches.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Led
from codesign.physics import radiation
from codesign.physics.light import delivery_from_beam

Array = NDArray[np.float64]

#: Distance at which lamps other than room lighting are looked at. [m] IEC 62471:2006, 5.2; confidence B.
STANDARD_M = 0.2
#: Points over which an LED's light is integrated, and how far beyond its support, in widths of it.
POINTS, BEYOND = 4001, 1.0
#: Coldest junction looked at, and how many temperatures up to the LED's limit. [deg C]
COLDEST_C, TEMPERATURES = -40.0, 16

#: Weightings by the quantity they make of light.
WEIGHTS: dict[str, Callable[[Array], Array]] = {
    "actinic": radiation.actinic_weight,
    "ultraviolet_a": lambda nm: radiation.in_band(nm, radiation.UVA_NM),
    "blue_light": radiation.blue_light_weight,
    "infrared": lambda nm: radiation.in_band(nm, radiation.INFRARED_EYE_NM),
}


def own_light(led: Led, shift_nm: float) -> tuple[Array, Array]:
    """Wavelengths [nm] and light per watt [1/nm] of an LED, on a grid of its own that holds all of it. (n,), (n,)"""
    low, high = led.support()
    beyond = BEYOND * (high - low)
    nm = np.linspace(max(low - beyond, 1.0), high + beyond, POINTS) + shift_nm
    return nm, led.spectrum(nm, shift_nm) / led.flux_w()


@lru_cache(maxsize=1024)
def eye_weight(led: Led, quantity: str) -> float:
    """Weighted irradiance on the axis of an emitter, `STANDARD_M` away, per watt it emits. [1/m²]

    The largest of all junction temperatures from `COLDEST_C` to the LED's limit; the LED as its data sheet states it.

    Parameters
    ----------
    led : Led
    quantity : str
        One of `WEIGHTS`.

    References
    ----------
    .. [1] Weightings: `codesign.physics.radiation`, each with its source and confidence.
    """
    temperatures = [COLDEST_C, led.max_junction_c]
    if led.peak_shift_nm_per_k:
        temperatures = np.linspace(*temperatures, TEMPERATURES).tolist()
    shares = [_share(led, quantity, led.peak_shift_nm_per_k * (t - led.reference_junction_c)) for t in temperatures]
    return max(shares) * delivery_from_beam(led.beam_half_angle_deg, STANDARD_M)


def _share(led: Led, quantity: str, shift_nm: float) -> float:
    nm, light = own_light(led, shift_nm)
    return float(radiation.weighted(light, WEIGHTS[quantity](nm), nm))
