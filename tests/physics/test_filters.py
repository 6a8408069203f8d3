"""Behaviour of the filter equations."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import filters
from codesign.physics._tables import integrate

AXIS = np.arange(400.0, 1000.5, 0.5)


def half_points(curve: np.ndarray, axis: np.ndarray) -> tuple[float, float]:
    """Wavelengths where the curve crosses half of its peak."""
    above = np.flatnonzero(curve >= 0.5 * curve.max())
    left, right = above[0], above[-1]
    rising = np.interp(0.5 * curve.max(), curve[left - 1 : left + 1], axis[left - 1 : left + 1])
    falling = np.interp(-0.5 * curve.max(), -curve[right : right + 2], axis[right : right + 2])
    return float(rising), float(falling)


@pytest.mark.parametrize("edge_nm", [0.001, 0.5, 3.0, 10.0, 40.0, 200.0])
def test_bandpass_peak_and_half_points_are_exact_for_every_edge(edge_nm):
    nodes = np.array([840.0, 850.0, 860.0])
    values = filters.bandpass(nodes, 850.0, 20.0, edge_nm, 0.9, 300.0)
    assert values == pytest.approx([0.45, 0.9, 0.45], rel=1e-6)


def test_bandpass_edge_climbs_from_ten_to_ninety_percent_over_its_width():
    half_edge = 1.0
    nodes = 800.0 - 50.0 + np.array([-half_edge, half_edge])
    values = filters.bandpass(nodes, 800.0, 100.0, 2.0 * half_edge, 1.0, 300.0)
    assert values == pytest.approx([0.1, 0.9], abs=1e-9)


def test_bandpass_blocks_to_its_density_and_never_overflows():
    with np.errstate(all="raise"):
        values = filters.bandpass(np.array([300.0, 1700.0]), 850.0, 10.0, 0.01, 0.9, 4.0)
    assert values == pytest.approx(1e-4, rel=1e-9)


def test_bandpass_area_is_that_of_a_box_for_steep_edges():
    area = integrate(filters.bandpass(AXIS, 700.0, 50.0, 4.0, 0.9, 9.0), AXIS)
    assert area == pytest.approx(0.9 * 50.0, rel=1e-6)


def test_longpass_and_shortpass_are_mirror_images_with_half_height_at_the_cut():
    longer = filters.longpass(AXIS, 700.0, 15.0, 0.9, 4.0)
    shorter = filters.shortpass(AXIS, 700.0, 15.0, 0.9, 4.0)
    assert longer == pytest.approx(shorter[::-1])
    assert filters.longpass(700.0, 700.0, 15.0, 0.9, 4.0) == pytest.approx(0.5 * (0.9 + 1e-4))
    assert longer[0] == pytest.approx(1e-4) and longer[-1] == pytest.approx(0.9)
    edges = filters.longpass(np.array([692.5, 707.5]), 700.0, 15.0, 1.0, 300.0)
    assert edges == pytest.approx([0.1, 0.9])


def test_cone_of_no_width_is_one_ray_along_the_chief_ray():
    angles, weights = filters.cone_quadrature(0.0, 7.0)
    assert angles.tolist() == [7.0] and weights.tolist() == [1.0]


@pytest.mark.parametrize("half_angle", [0.5, 3.6, 10.3, 20.9])
@pytest.mark.parametrize("chief", [0.0, 4.0, 15.0])
def test_cone_is_small_and_has_the_mean_tilt_of_a_full_integral(half_angle, chief):
    angles, weights = filters.cone_quadrature(half_angle, chief)
    assert len(angles) <= 12
    assert weights.sum() == pytest.approx(1.0, rel=1e-14)
    alpha = np.radians(half_angle)
    # Mean of sin² over a uniform pupil: 1 - cos²θ0 (1 - sin²α/2) - sin²θ0 sin²α/4, by hand.
    c, s, u = np.cos(np.radians(chief)) ** 2, np.sin(np.radians(chief)) ** 2, np.sin(alpha) ** 2
    exact = 1.0 - c * (1.0 - u / 2.0) - s * u / 4.0
    assert weights @ np.sin(np.radians(angles)) ** 2 == pytest.approx(exact, rel=1e-9)


def test_cone_reaches_from_near_to_far_side_of_a_tilted_chief_ray():
    angles, _ = filters.cone_quadrature(5.0, 12.0)
    assert 7.0 < angles[0] < 9.0 and 15.0 < angles[-1] < 17.0


def test_filter_without_effective_index_does_not_shift():
    curve = filters.bandpass(AXIS, 700.0, 20.0, 3.0, 0.9, 4.0)
    angles, weights = filters.cone_quadrature(20.0)
    assert np.array_equal(filters.tilted_transmittance(AXIS, curve, AXIS, angles, weights, None), curve)


def test_normal_incidence_returns_the_curve():
    curve = filters.bandpass(AXIS, 700.0, 20.0, 3.0, 0.9, 4.0)
    straight = filters.tilted_transmittance(AXIS, curve, AXIS, np.zeros(1), np.ones(1), 1.8)
    assert np.array_equal(straight, curve)


def test_single_tilt_moves_the_band_by_the_tilt_law():
    axis = np.arange(500.0, 600.0, 0.02)
    curve = filters.bandpass(axis, 550.0, 10.0, 1.0, 0.9, 6.0)
    tilted = filters.tilted_transmittance(axis, curve, axis, np.array([20.0]), np.ones(1), 1.45)
    left, right = half_points(tilted, axis)
    factor = filters.tilt_factor(20.0, 1.45)
    assert (left, right) == pytest.approx((545.0 * factor, 555.0 * factor), abs=2e-3)


def test_cone_lowers_and_broadens_a_narrow_band_but_passes_about_as_much():
    axis = np.arange(500.0, 600.0, 0.05)
    curve = filters.bandpass(axis, 550.0, 5.0, 1.0, 0.9, 6.0)
    angles, weights = filters.cone_quadrature(20.9)
    cone = filters.tilted_transmittance(axis, curve, axis, angles, weights, 1.7)
    assert cone.max() < 0.8 * curve.max()
    left, right = half_points(cone, axis)
    assert right - left > 5.5
    assert integrate(cone, axis) == pytest.approx(integrate(curve, axis), rel=0.03)


def test_few_nodes_agree_with_a_dense_cone():
    axis = np.arange(800.0, 900.0, 0.1)
    curve = filters.bandpass(axis, 850.0, 10.0, 3.0, 0.9, 4.0)
    half = 10.3  # f/2.8
    angles, weights = filters.cone_quadrature(half)
    few = filters.tilted_transmittance(axis, curve, axis, angles, weights, 1.8)
    sines = np.sqrt((np.arange(2000) + 0.5) / 2000) * np.sin(np.radians(half))
    dense = filters.tilted_transmittance(
        axis, curve, axis, np.degrees(np.arcsin(sines)), np.full(2000, 1 / 2000), 1.8
    )
    assert few == pytest.approx(dense, abs=2e-3)


def test_edge_values_are_held_outside_the_curve():
    curve_nm, curve = np.array([500.0, 600.0]), np.array([0.2, 0.8])
    held = filters.tilted_transmittance(
        curve_nm, curve, np.array([400.0, 700.0]), np.array([5.0]), np.ones(1), 2.0
    )
    assert held.tolist() == [0.2, 0.8]


def test_glass_of_reference_thickness_keeps_its_internal_transmittance():
    internal = np.array([0.2, 0.9])
    assert filters.glass_transmittance(internal, 1.0, 1.0) == pytest.approx(internal)
    assert np.all(filters.glass_transmittance(internal, 1.0, 1.5) < internal)


def test_splitting_glass_changes_nothing_but_its_reflections():
    internal = np.array([0.2, 0.9])
    parts = [filters.glass_transmittance(internal, share, 1.0) for share in (0.3, 0.7)]
    assert filters.stack_transmittance(parts) == pytest.approx(internal)


def test_neutral_densities_add_up_in_a_stack():
    stacked = filters.stack_transmittance([filters.neutral(0.3), filters.neutral(1.2)])
    assert stacked == pytest.approx(float(filters.neutral(1.5)))


def test_empty_stack_is_open():
    assert filters.stack_transmittance([]) == 1.0
