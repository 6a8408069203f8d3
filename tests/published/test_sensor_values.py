"""Published values: EMVA Standard 1288 linear model, dark current.

Equation numbers are those of Release 4.0 Linear as quoted in a public walk-through; the standard's own text
was not at hand. "Secondary" marks numbers read from reports that cite it.
"""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import sensor

pytestmark = pytest.mark.published

# Worked camera of the EMVA 1288 reference implementation's analytic data: QE .6, dark noise 3 e-, K .4 DN/e-
NOISE = {"dark_noise_e": 3.0, "conversion_gain": 0.4}
EFFICIENCY = 0.6


def test_pixel_photons(printed):
    # EMVA 1288 mu_p = A E t λ/(hc): 1 W/m2, 630 nm, (3.45 µm)², 1 ms -> 37748.7006
    assert sensor.mean_photons(3.45e-6**2, 1.0, 1e-3, 630.0) == printed("37748.7006")


def test_pixel_photons_in_the_units_of_the_standard(printed):
    # EMVA 1288 linear model: 50.34 photons for 1 µm², 1 ms, 1 µm, 1 µW/cm² (constant from memory, derived)
    photons = sensor.mean_photons(1e-12, 1e-2, 1e-3, 1000.0)
    assert photons == printed("50.34")
    assert photons == printed("50.3411657")


def test_signal_to_noise_of_the_worked_camera(printed):
    ratio = sensor.signal_to_noise(EFFICIENCY * 1000.0, **NOISE)
    assert ratio == printed("24.302837")  # EMVA 1288 eq. 21, 1000 photons
    assert sensor.decibels(ratio) == printed("27.713139")  # same, dB


@pytest.mark.parametrize(
    ("ratio", "expected"),
    [
        (1.0, "3.6258332"),  # eq. 21 solved for the electrons
        (10.0, "108.7544325"),  # same
        (40.0, "1609.4648438"),  # same
    ],
)
def test_electrons_for_a_wanted_ratio(ratio, expected, printed):
    electrons = sensor.electrons_for_signal_to_noise(ratio, **NOISE)
    assert electrons == printed(expected)
    assert sensor.signal_to_noise(electrons, **NOISE) == pytest.approx(ratio, rel=1e-12)


def test_sensitivity_threshold(printed):
    # EMVA 1288 eq. 27: mu_p.min = 6.04305537 photons, where the ratio is 1
    threshold = sensor.sensitivity_threshold_e(**NOISE)
    assert threshold / EFFICIENCY == printed("6.04305537")
    assert sensor.signal_to_noise(threshold, **NOISE) == pytest.approx(1.0, rel=1e-12)


def test_approximate_threshold_lies_close(printed):
    # Approximate form of the reference implementation, sqrt(σ²) + 1/2: 5.97597461 photons
    floor = 3.0**2 + sensor.quantization_variance_e2(0.4)
    assert (np.sqrt(floor) + 0.5) / EFFICIENCY == printed("5.97597461")


def test_saturation_ratio(printed):
    # Reference implementation of EMVA 1288: sqrt(8949.1525) = 94.59996
    assert sensor.saturation_signal_to_noise(8949.1525) == printed("94.59996")


def test_dynamic_range_of_the_worked_camera():
    # Reference implementation of EMVA 1288: 2495.87 with its approximate threshold (5.97597461 photons)
    exact = sensor.dynamic_range(8949.1525, **NOISE)
    assert exact * 6.04305537 / 5.97597461 == pytest.approx(2495.87, abs=0.01)


def test_camera_report(printed):
    # A published camera report, read second hand: 6.6 e-, 32 ke- -> 45.05 dB, 7.119 e-, 12.134 bit
    assert sensor.decibels(sensor.saturation_signal_to_noise(32_000.0)) == printed("45.05")
    assert sensor.sensitivity_threshold_e(dark_noise_e=6.6) == printed("7.119")
    assert np.log2(sensor.dynamic_range(32_000.0, dark_noise_e=6.6)) == printed("12.134")


@pytest.mark.parametrize(
    ("prnu", "expected"),
    [
        (0.005, "89.411"),  # EMVA 1288 eq. 69 with the shot term: σ_d 3, 10 ke-
        (0.01, "70.695"),  # same
    ],
)
def test_total_signal_to_noise(prnu, expected, printed):
    assert sensor.signal_to_noise(10_000.0, dark_noise_e=3.0, prnu=prnu) == printed(expected)


def test_total_ratio_is_limited_by_prnu():
    # EMVA 1288 eq. 69: asymptote 1/PRNU
    assert sensor.signal_to_noise(1e12, dark_noise_e=3.0, prnu=0.01) == pytest.approx(100.0, rel=1e-6)


def test_quantisation_hides_small_dark_noise(printed):
    # EMVA 1288 eqs 53, 54: below .24 DN² (.4899 DN) the dark noise, .3958/K, is not resolvable
    assert np.sqrt(0.24) == printed(".4899")
    hidden = np.sqrt(0.24 - sensor.QUANTIZATION_VARIANCE_DN2)
    assert hidden == printed(".3958")
    gain = 0.1
    assert sensor.grey_value_variance(0.0, dark_noise_e=hidden / gain, conversion_gain=gain) == pytest.approx(
        0.24
    )


@pytest.mark.parametrize(
    ("temperature_c", "expected"),
    [
        (
            22.0,
            15.0,
        ),  # EMVA 1288 sec. 3 form, reference 30 e-/s at 30 °C, 8 K (default of the reference package)
        (30.0, 30.0),  # same
        (38.0, 60.0),  # same
        (46.0, 120.0),  # same
    ],
)
def test_dark_current_doubles(temperature_c, expected):
    assert sensor.dark_current_at(30.0, temperature_c, 30.0, 8.0) == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize(
    ("step_k", "factor"),
    [
        (6.0, "10.079"),  # 25 -> 45 °C; doubling step is trade practice, no standard gives it
        (8.0, "5.657"),  # practice
        (9.0, "4.666"),  # practice
    ],
)
def test_dark_current_from_25_to_45_c(step_k, factor, printed):
    assert sensor.dark_current_at(1.0, 45.0, 25.0, step_k) == printed(factor)


@pytest.mark.parametrize(
    ("start_c", "mechanism", "prefactor", "step_k"),
    [
        (25.0, "generation", False, "9.793"),  # exp(-Eg/2kT), Eg 1.12 eV; Sze, Janesick
        (25.0, "generation", True, "9.134"),  # T^1.5 exp(-Eg/2kT); Janesick
        (60.0, "generation", False, "12.274"),  # same law
        (60.0, "generation", True, "11.354"),  # same law
        (25.0, "diffusion", False, "4.817"),  # exp(-Eg/kT); Sze
        (25.0, "diffusion", True, "4.500"),  # T^3 exp(-Eg/kT); Sze
    ],
)
def test_doubling_step_from_physics(start_c, mechanism, prefactor, step_k, printed):
    assert sensor.thermal_doubling_step(start_c, mechanism=mechanism, prefactor=prefactor) == printed(step_k)
