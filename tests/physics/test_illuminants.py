"""Behaviour of the illuminants."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.errors import CoverageError, ProblemError
from codesign.physics import illuminants
from codesign.physics._tables import integrate
from codesign.physics.light import MAX_LUMINOUS_EFFICACY, luminous_efficacy_function

VISIBLE = np.arange(380.0, 781.0)


@pytest.mark.parametrize("name", ["A", "D65", "E", "fluorescent", "planck-5800"])
def test_named_illuminants_are_positive_over_the_visible(name):
    assert np.all(illuminants.named_illuminant(name, VISIBLE) > 0.0)


@pytest.mark.parametrize("name", ["A", "D65", "E", "fluorescent", "planck-3200"])
def test_illuminance_is_met(name):
    spectrum = illuminants.spectral_irradiance(name, VISIBLE, illuminance_lx=750.0)
    seen = MAX_LUMINOUS_EFFICACY * integrate(spectrum * luminous_efficacy_function(VISIBLE), VISIBLE)
    assert seen == pytest.approx(750.0, rel=1e-4)


def test_illuminance_scales_the_infrared_too():
    infrared = np.arange(900.0, 1701.0)
    whole = illuminants.spectral_irradiance("A", np.arange(380.0, 1701.0), illuminance_lx=500.0)
    part = illuminants.spectral_irradiance("A", infrared, illuminance_lx=500.0)
    assert part == pytest.approx(whole[-infrared.size :], rel=1e-12)


def test_irradiance_is_met():
    spectrum = illuminants.spectral_irradiance("D65", VISIBLE, irradiance_w_per_m2=3.0)
    assert integrate(spectrum, VISIBLE) == pytest.approx(3.0)


@pytest.mark.parametrize("given", [{}, {"illuminance_lx": 1.0, "irradiance_w_per_m2": 1.0}])
def test_one_and_only_one_scale_is_needed(given):
    with pytest.raises(ProblemError, match="exactly one"):
        illuminants.spectral_irradiance("E", VISIBLE, **given)


@pytest.mark.parametrize(("name", "advice"), [("D65", "planck-5800"), ("fluorescent", "measured curve")])
def test_tabulated_illuminant_is_not_extrapolated(name, advice):
    axis = np.arange(400.0, 1001.0)
    with pytest.raises(CoverageError, match=f"to 780 nm, but 400 to 1000 nm is asked for; .*{advice}"):
        illuminants.named_illuminant(name, axis)
    dark = illuminants.named_illuminant(name, axis, outside="zero")
    assert np.all(dark[axis > 780.0] == 0.0)


@pytest.mark.parametrize("name", ["D56", "sun", "planck", ""])
def test_unknown_illuminant_is_refused_with_a_hint(name):
    with pytest.raises(ProblemError, match="unknown"):
        illuminants.named_illuminant(name, VISIBLE)


@pytest.mark.parametrize("name", ["planck-", "planck-hot", "planck-0", "planck-nan", "planck--300"])
def test_temperature_must_be_a_number_in_kelvin(name):
    with pytest.raises(ProblemError, match="temperature in kelvin"):
        illuminants.named_illuminant(name, VISIBLE)


def test_black_body_never_overflows():
    with np.errstate(all="raise"):
        assert illuminants.planck_radiance(300.0, 100.0) >= 0.0


def test_hotter_is_brighter_at_every_wavelength():
    axis = np.arange(300.0, 2000.0, 10.0)
    assert np.all(illuminants.planck_exitance(axis, 3000.0) > illuminants.planck_exitance(axis, 2900.0))
