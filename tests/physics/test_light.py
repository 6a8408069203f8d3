"""Behaviour of the light equations."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.errors import ProblemError
from codesign.physics import light
from codesign.physics._tables import integrate, require_range, shipped_table


@pytest.mark.parametrize(
    "name",
    [
        "photopic",
        "d65",
        "fl2",
        "silicon",
    ],
)
def test_shipped_tables_are_sorted_finite_and_read_only(name):
    table = shipped_table(name)
    assert np.all(np.isfinite(table)) and np.all(table >= 0.0)
    assert np.all(np.diff(table[0]) > 0.0)
    with pytest.raises(ValueError, match="read-only"):
        table[0, 0] = 1.0


@pytest.mark.parametrize("name", ["photopic", "d65", "fl2", "silicon"])
def test_shipped_tables_state_their_source(name):
    from importlib import resources

    text = resources.files("codesign").joinpath("data", f"{name}.csv").read_text(encoding="utf-8")
    assert "# Source: " in text


def test_range_check_forgives_rounding_only():
    table = np.array([400.0, 700.0])
    require_range(np.array([400.0, 700.0 + 1e-12]), table, "it", "measure it")
    with pytest.raises(
        ValueError, match="known from 400 to 700 nm, but 400 to 701 nm is asked for; measure it"
    ):
        require_range(np.array([400.0, 701.0]), table, "it", "measure it")


def test_integral_is_exact_for_straight_lines_on_uneven_axes():
    axis = np.array([400.0, 403.0, 410.0])
    assert integrate(np.stack([axis, np.ones(3)]), axis) == pytest.approx([4050.0, 10.0])


def test_photon_energy_times_photons_per_joule_is_one():
    axis = np.linspace(300.0, 1700.0, 15)
    assert light.photon_energy(axis) * light.photons_per_joule(axis) == pytest.approx(1.0, rel=1e-15)


def test_led_has_its_stated_peak_and_width():
    spectrum = light.ohno_led(np.array([630.0 - 9.0, 630.0, 630.0 + 9.0]), 630.0, 18.0)
    assert spectrum == pytest.approx([0.5, 1.0, 0.5], abs=1e-14)


def test_led_is_silent_far_away_without_underflow():
    with np.errstate(all="raise"):
        assert light.ohno_led(np.array([365.0, 1650.0]), 940.0, 10.0) == pytest.approx(0.0, abs=1e-300)


def test_eye_sees_nothing_outside_its_table():
    assert np.all(light.luminous_efficacy_function(np.array([300.0, 359.9, 830.1, 1000.0])) == 0.0)


def test_efficacy_does_not_depend_on_the_scale_of_the_spectrum():
    axis = np.arange(360.0, 831.0)
    spectrum = light.ohno_led(axis, 525.0, 30.0)
    both = light.luminous_efficacy(axis, np.stack([spectrum, 7.0 * spectrum]))
    assert both[0] == pytest.approx(both[1], rel=1e-14)


def test_lambertian_emitter_delivers_one_over_pi():
    assert light.delivery_from_beam(60.0, 0.5) == pytest.approx(1.0 / (np.pi * 0.25), rel=1e-14)


def test_beam_falls_to_half_at_its_half_angle_and_holds_one_watt():
    kappa = light.delivery_from_beam(12.0, 1.0)
    power = kappa * 2.0 * np.pi - 1.0
    assert np.cos(np.radians(12.0)) ** power == pytest.approx(0.5, rel=1e-12)
    angle = np.linspace(0.0, np.pi / 2, 200_001)
    flux = integrate(kappa * np.cos(angle) ** power * 2.0 * np.pi * np.sin(angle), angle)
    assert flux == pytest.approx(1.0, rel=1e-8)


def test_narrower_beam_or_shorter_distance_delivers_more():
    assert light.delivery_from_beam(10.0, 0.3) > light.delivery_from_beam(20.0, 0.3)
    assert light.delivery_from_beam(10.0, 0.3) == pytest.approx(4.0 * light.delivery_from_beam(10.0, 0.6))


@pytest.mark.parametrize("angle", [0.0, -5.0, 90.0, float("nan")])
def test_impossible_beam_angle_is_refused(angle):
    with pytest.raises(ProblemError, match="between 0 and 90 deg"):
        light.delivery_from_beam(angle, 0.3)


def test_gap_shift_is_the_slope_of_the_gap_wavelength():
    gaas = (1.519, 5.405e-4, 204.0)
    up, down = (light.HC_EV_NM / light.varshni_gap_ev(t, *gaas) for t in (330.01, 329.99))
    assert light.varshni_peak_shift_nm_per_k(330.0, *gaas) == pytest.approx((up - down) / 0.02, rel=1e-6)


def test_junction_is_at_ambient_when_the_led_is_off():
    assert light.junction_temperature(35.0, 12.0, 2.0, 0.8, 0.0) == 35.0


def test_flux_line_passes_through_one_and_stops_at_zero():
    assert light.flux_at_temperature(25.0, -0.002) == 1.0
    assert light.flux_at_temperature(75.0, -0.002) == pytest.approx(0.9)
    assert light.flux_at_temperature(1000.0, -0.002) == 0.0


def test_exponential_flux_equals_the_line_for_small_rises():
    line = light.flux_at_temperature(26.0, -1.0 / 295.0)
    assert light.flux_at_temperature_exponential(26.0, 295.0) == pytest.approx(line, abs=1e-5)


def test_pulse_rise_lies_between_mean_and_steady_state():
    peak = light.pulse_peak_rise(5.0, 10.0, 2e-3, 0.2e-3, 10e-3)
    assert 5.0 * 10.0 * 0.02 < peak < 50.0
    assert light.pulse_peak_rise(5.0, 10.0, 2e-3, 10e-3, 10e-3) == pytest.approx(50.0)


def test_pulse_rise_equals_the_step_by_step_recursion():
    rise = 0.0
    for _ in range(50):
        rise = rise * np.exp(-0.2 / 2.0) + 50.0 * (1.0 - np.exp(-0.2 / 2.0))
        top = rise
        rise *= np.exp(-9.8 / 2.0)
    assert light.pulse_peak_rise(5.0, 10.0, 2e-3, 0.2e-3, 10e-3) == pytest.approx(top, rel=1e-12)
