"""Behaviour of the linear camera model."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import sensor


def test_photons_are_linear_in_area_irradiance_and_time():
    one = sensor.mean_photons(1e-11, 2.0, 1e-3, 630.0)
    assert sensor.mean_photons(2e-11, 6.0, 5e-3, 630.0) == pytest.approx(30.0 * one)


def test_ratio_is_zero_without_signal_and_shot_limited_with_much():
    assert sensor.signal_to_noise(0.0, dark_noise_e=3.0) == 0.0
    assert sensor.signal_to_noise(1e8, dark_noise_e=3.0) == pytest.approx(1e4, rel=1e-6)


@pytest.mark.parametrize(
    "worse", [{"dark_noise_e": 4.0}, {"conversion_gain": 0.1}, {"dsnu_e": 2.0}, {"prnu": 0.01}]
)
def test_every_noise_term_lowers_the_ratio(worse):
    base = {"dark_noise_e": 3.0, "conversion_gain": 1.0}
    assert sensor.signal_to_noise(500.0, **(base | worse)) < sensor.signal_to_noise(500.0, **base)


def test_infinite_gain_leaves_out_quantisation():
    assert sensor.quantization_variance_e2(np.inf) == 0.0
    assert sensor.quantization_variance_e2(0.5) == pytest.approx(1.0 / 3.0)


def test_grey_value_variance_is_a_line_of_slope_gain_against_the_mean():
    electrons = np.array([0.0, 1000.0, 5000.0])
    variance = sensor.grey_value_variance(electrons, dark_noise_e=3.0, conversion_gain=0.4)
    assert np.diff(variance) / np.diff(0.4 * electrons) == pytest.approx(0.4)


def test_wanted_ratio_is_met_over_many_decades():
    wanted = np.geomspace(0.01, 1000.0, 26)
    electrons = sensor.electrons_for_signal_to_noise(wanted, dark_noise_e=7.0, conversion_gain=0.3)
    back = sensor.signal_to_noise(electrons, dark_noise_e=7.0, conversion_gain=0.3)
    assert back == pytest.approx(wanted, rel=1e-12)


def test_threshold_is_one_electron_for_a_noiseless_camera():
    assert sensor.sensitivity_threshold_e(dark_noise_e=0.0) == 1.0
    assert sensor.dynamic_range(1000.0, dark_noise_e=0.0) == 1000.0


def test_dark_noise_grows_with_exposure():
    assert sensor.dark_noise_at_exposure(3.0, 8.0, 0.0) == 3.0
    assert sensor.dark_noise_at_exposure(3.0, 8.0, 2.0) == 5.0


def test_dark_current_is_unchanged_at_its_reference():
    assert sensor.dark_current_at(12.0, 25.0, 25.0, 7.0) == 12.0
    assert sensor.dark_current_at(12.0, np.array([18.0, 32.0]), 25.0, 7.0) == pytest.approx([6.0, 24.0])


def test_current_density_becomes_electrons_per_pixel():
    # 1 nA/cm² on (10 µm)²: 1e-15 A over the elementary charge
    assert sensor.dark_current_from_density(1.0, 1e-10) == pytest.approx(1e-15 / 1.602176634e-19, rel=1e-12)


def test_fixed_step_lies_between_the_two_mechanisms():
    diffusion = sensor.thermal_doubling_step(40.0, mechanism="diffusion")
    generation = sensor.thermal_doubling_step(40.0, mechanism="generation")
    assert diffusion < 7.0 < generation


def test_smaller_gap_doubles_more_slowly():
    assert sensor.thermal_doubling_step(25.0, gap_ev=0.75) > sensor.thermal_doubling_step(25.0, gap_ev=1.12)


@pytest.mark.oracle
def test_model_matches_a_photon_simulation():
    rng = np.random.default_rng(1288)
    pixels, mean, read, gain = 400_000, 900.0, 6.0, 0.5
    electrons = rng.poisson(mean, pixels) + rng.normal(0.0, read, pixels)
    grey = np.rint(gain * electrons)
    expected = sensor.grey_value_variance(mean, dark_noise_e=read, conversion_gain=gain)
    assert grey.mean() == pytest.approx(gain * mean, abs=4.0 * np.sqrt(expected / pixels))
    assert grey.var() == pytest.approx(float(expected), rel=4.0 * np.sqrt(2.0 / pixels))
