"""Behaviour of the imaging equations."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import optics


def test_image_irradiance_falls_with_the_square_of_the_f_number():
    wide, narrow = optics.image_irradiance(1.0, 1.0, np.array([4.0, 8.0]), 0.2)
    assert wide == pytest.approx(4.0 * narrow)


def test_simple_form_approaches_the_exact_one_for_small_apertures():
    simple, exact = optics.image_irradiance(1.0, 1.0, 50.0), optics.image_irradiance_exact(1.0, 1.0, 50.0)
    assert 1.0 < simple / exact < 1.0002


def test_exact_form_never_exceeds_the_radiance_of_a_full_hemisphere():
    assert optics.image_irradiance_exact(1.0, 1.0, 1e-6) == pytest.approx(np.pi)


def test_pupil_ratio_enters_through_the_magnification_only():
    assert optics.working_f_number(4.0, 0.0, 0.5) == 4.0
    assert optics.working_f_number(4.0, 0.5, 0.5) == 8.0
    assert optics.image_irradiance(1.0, 1.0, 4.0, 0.5, 0.5) == optics.image_irradiance(1.0, 1.0, 8.0)


def test_white_surface_returns_all_light_over_the_hemisphere():
    assert np.pi * optics.radiance_of_diffuse(1.0, 10.0) == pytest.approx(10.0)


def test_cone_narrows_when_focused_close():
    assert optics.cone_half_angle_deg(2.8, 1.0) < optics.cone_half_angle_deg(2.8)
    assert optics.cone_half_angle_deg(2.8, 1.0) == pytest.approx(float(optics.cone_half_angle_deg(5.6)))


def test_exact_depth_exceeds_the_simple_one_and_approaches_it_for_long_lenses():
    near, far = optics.depth_of_field_exact(8.0, 5e-6, 0.1, 1.0)
    assert far - near == pytest.approx(float(optics.depth_of_field(8.0, 5e-6, 0.1)), rel=1e-6)


def test_depth_is_endless_beyond_the_hyperfocal_distance():
    near, far = optics.depth_of_field_exact(8.0, 5e-6, 1e-4, 0.025)
    assert far == np.inf and np.isfinite(near)


def test_blur_limit_is_the_inverse_of_the_blur():
    exposure = optics.blur_limited_exposure(0.5, 2.0, 0.05, 5e-6)
    assert optics.motion_blur_pixels(2.0, exposure, 0.05, 5e-6) == pytest.approx(0.5)


def test_object_at_rest_never_blurs():
    assert optics.blur_limited_exposure(1.0, 0.0, 0.1, 5e-6) == np.inf
    assert optics.blur_limited_exposure(1.0, np.array([0.0, 1.0]), 0.1, 5e-6) == pytest.approx([np.inf, 5e-5])


def test_axis_sees_no_vignetting():
    assert optics.cos4(0.0) == 1.0


def test_airy_disc_grows_with_wavelength_and_f_number():
    assert optics.airy_diameter(1100.0, 4.0) == pytest.approx(float(optics.airy_diameter(550.0, 8.0)))
