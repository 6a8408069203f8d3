"""Published values: camera equation, fall-off, depth of field, motion blur, diffraction."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import optics, sensor

pytestmark = pytest.mark.published


def test_luminance_of_grey_card(printed):
    # Lambert: 1000 lx on reflectance .18 -> 57.29578 cd/m2
    assert optics.radiance_of_diffuse(0.18, 1000.0) == printed("57.29578")


@pytest.mark.parametrize(
    ("magnification", "expected"),
    [
        (0.0, ".6328125"),  # lx, 1000 lx on reflectance .18, f/8, transmittance .9; Jacobson, Holst
        (0.5, ".28125"),  # same at m = .5
    ],
)
def test_image_illuminance(magnification, expected, printed):
    luminance = optics.radiance_of_diffuse(0.18, 1000.0)
    assert optics.image_irradiance(luminance, 0.9, 8.0, magnification) == printed(expected)


@pytest.mark.parametrize(
    ("f_number", "exact", "simple"),
    [
        (2.8, ".0970826", ".1001783"),  # EMVA 1288 source geometry π/(1+4N²) against π/4N²
        (4.0, ".0483322", ".0490874"),  # same
        (8.0, ".0122241", ".0122718"),  # same
    ],
)
def test_exact_and_simple_camera_equation(f_number, exact, simple, printed):
    assert optics.image_irradiance_exact(1.0, 1.0, f_number) == printed(exact)
    assert optics.image_irradiance(1.0, 1.0, f_number) == printed(simple)


def test_end_to_end_electrons(printed):
    # Camera equation and EMVA 1288 photon count together (derived): E 10 W/m2 at 630 nm, reflectance .5,
    # transmittance .9, f/4, m .1, (3.45 µm)², 1 ms, QE .6
    radiance = optics.radiance_of_diffuse(0.5, 10.0)
    assert radiance == printed("1.591549")
    on_sensor = optics.image_irradiance(radiance, 0.9, 4.0, 0.1)
    assert on_sensor == printed(".0581095")
    photons = sensor.mean_photons(3.45e-6**2, on_sensor, 1e-3, 630.0)
    assert photons == printed("2193.56")
    assert 0.6 * photons == printed("1316.13")
    exact = optics.image_irradiance_exact(radiance, 0.9, 4.0, 0.1)
    assert sensor.mean_photons(3.45e-6**2, exact, 1e-3, 630.0) == printed("2165.59")


@pytest.mark.parametrize(
    ("angle_deg", "expected"),
    [
        (10.0, ".940602"),  # cos⁴, natural vignetting
        (20.0, ".779728"),  # same
        (30.0, ".5625"),  # same
        (45.0, ".25"),  # same
    ],
)
def test_natural_vignetting(angle_deg, expected, printed):
    assert optics.cos4(angle_deg) == printed(expected)


def test_depth_of_field(printed):
    # Thin lens 2Nc(1+m)/m²: f/8, blur 5 µm, m .1 -> 8.800 mm
    assert 1e3 * optics.depth_of_field(8.0, 5e-6, 0.1) == printed("8.800")


def test_depth_of_field_exact(printed):
    # Thin lens f 25 mm focused at 275 mm: near 270.66929, far 279.47154, depth 8.80225 mm
    near, far = optics.depth_of_field_exact(8.0, 5e-6, 0.1, 0.025)
    assert 1e3 * near == printed("270.66929")
    assert 1e3 * far == printed("279.47154")
    assert 1e3 * (far - near) == printed("8.80225")
    # The closed form of the depth is 2Nc(1+m)/(m² - (Nc/f)²).
    closed = 2 * 8.0 * 5e-6 * 1.1 / (0.1**2 - (8.0 * 5e-6 / 0.025) ** 2)
    assert far - near == pytest.approx(closed, rel=1e-12)


def test_motion_blur(printed):
    # Kinematics: 500 mm/s, 100 µs, m .1, 3.45 µm -> 1.449275 pixel; one pixel in 69.0 µs
    assert optics.motion_blur_pixels(0.5, 100e-6, 0.1, 3.45e-6) == printed("1.449275")
    assert 1e6 * optics.blur_limited_exposure(1.0, 0.5, 0.1, 3.45e-6) == printed("69.0")


def test_diffraction_disc(printed):
    assert 1e6 * optics.airy_diameter(550.0, 8.0) == printed("10.736")  # 2.44 λN, Airy 1835
    assert optics.working_f_number(8.0, 0.5) == 12.0  # N(1+m), Jacobson
    ratio = optics.airy_diameter(550.0, 8.0, 0.5) / optics.airy_diameter(550.0, 8.0)
    assert ratio == pytest.approx(np.float64(1.5))
