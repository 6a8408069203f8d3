"""Published values: tilt of interference filters, glass, blocking."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import filters, optics
from codesign.physics._tables import integrate

pytestmark = pytest.mark.published


@pytest.mark.parametrize(
    ("effective_index", "angle_deg", "expected"),
    [
        (1.45, 10.0, "546.042"),  # 550 nm filter, Pidgeon & Smith 1964 JOSA 54, 1459; rows below the same
        (1.45, 15.0, "541.167"),  # Pidgeon & Smith 1964
        (1.45, 20.0, "534.481"),  # Pidgeon & Smith 1964
        (1.45, 30.0, "516.266"),  # Pidgeon & Smith 1964
        (2.0, 10.0, "547.923"),  # Pidgeon & Smith 1964
        (2.0, 15.0, "545.375"),  # Pidgeon & Smith 1964
        (2.0, 20.0, "541.898"),  # Pidgeon & Smith 1964
        (2.0, 30.0, "532.535"),  # Pidgeon & Smith 1964
    ],
)
def test_tilt_law(effective_index, angle_deg, expected, printed):
    assert 550.0 * filters.tilt_factor(angle_deg, effective_index) == printed(expected)


# Half-maximum centres of simulated cavity filters, 2.3/1.46, 550 nm, air to 1.52, mean of s and p, found with
# tmm 0.2.0; the fitted index beside them must reproduce every centre (stated residual .017 nm for A).
ANGLES_DEG = np.arange(0.0, 31.0, 5.0)
CAVITY_A = ([550.017, 549.261, 547.011, 543.314, 538.250, 531.931, 524.499], 1.6613)  # (HL)^3 H 2L H (LH)^3
CAVITY_B = ([550.007, 549.386, 547.540, 544.508, 540.360, 535.192, 529.127], 1.8328)  # (HL)^4 2H (LH)^4


@pytest.mark.parametrize(("centres", "fitted"), [CAVITY_A, CAVITY_B])
def test_tilt_law_follows_a_simulated_cavity(centres, fitted):
    law = centres[0] * filters.tilt_factor(ANGLES_DEG, fitted)
    assert law == pytest.approx(np.array(centres), abs=0.03)


@pytest.mark.parametrize(
    ("order", "spacer", "expected"),
    [
        (1, "low", "1.66581"),  # Pidgeon & Smith 1964: nL sqrt(1/(1 - x + x^2)), x = nL/nH
        (1, "high", "1.83248"),  # Pidgeon & Smith 1964: sqrt(nH nL)
        (2, "low", "1.60238"),  # higher-order formula from memory, confirmed by simulation (fit 1.5975)
    ],
)
def test_cavity_effective_index(order, spacer, expected, printed):
    assert filters.cavity_effective_index(2.3, 1.46, order, spacer) == printed(expected)


@pytest.mark.parametrize(
    ("f_number", "expected"),
    [
        (1.4, "20.92"),  # geometry, asin(1/2N)
        (2.8, "10.29"),  # geometry
        (5.6, "5.12"),  # geometry
    ],
)
def test_cone_of_a_beam(f_number, expected, printed):
    assert optics.cone_half_angle_deg(f_number) == printed(expected)


@pytest.mark.parametrize(
    ("internal", "ratio", "expected"),
    [
        (0.5, 3.0, ".125"),  # 1 mm -> 3 mm, Bouguer-Lambert
        (0.9, 1.5, ".853815"),  # 2 mm -> 3 mm, Bouguer-Lambert
        (0.01, 2.0, "1e-4"),  # 1 mm -> 2 mm, Bouguer-Lambert
    ],
)
def test_absorbing_glass_without_reflection(internal, ratio, expected):
    assert filters.glass_transmittance(internal, ratio, 1.0) == pytest.approx(float(expected), rel=1e-6)


@pytest.mark.parametrize(
    ("n", "expected"),
    [
        (1.5, ".923077"),  # 2n/(n²+1), Fresnel series, e.g. Born & Wolf
        (3.5, ".528302"),  # same
    ],
)
def test_clear_plate(n, expected, printed):
    assert filters.reflection_factor_plate(n) == printed(expected)


def test_leak_of_a_blocked_range_in_flat_light(printed):
    # OD 4 over 600 nm against a band of 20 nm at .9: leak .333 % of the signal, from the definition of OD
    axis = np.arange(400.0, 1000.5, 0.01)
    band = filters.bandpass(axis, 700.0, 20.0, 0.1, 0.9, 4.0)
    leak = 100.0 * filters.neutral(4.0) * 600.0 / (0.9 * 20.0)
    assert leak == printed(".333")
    # The band model adds up to band + leak (the floor under the band itself not counted twice).
    assert integrate(band, axis) == pytest.approx(18.0 * (1.0 + leak / 100.0), rel=2e-4)
