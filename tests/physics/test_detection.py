"""Behaviour of detection theory."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import detection


def test_no_contrast_is_a_coin_toss():
    assert detection.error_rate(0.0) == 0.5
    assert detection.auc(0.0) == 0.5
    assert detection.detection_probability(0.0, 0.2) == pytest.approx(0.2)


def test_required_dprime_inverts_the_roc():
    dprime = detection.required_dprime(1e-5, 0.01)
    assert detection.detection_probability(dprime, 1e-5) == pytest.approx(0.99, rel=1e-12)


def test_equal_errors_need_the_mid_threshold():
    dprime = detection.required_dprime(1e-3, 1e-3)
    assert detection.error_rate(dprime) == pytest.approx(1e-3)


def test_rose_ratio_grows_with_the_root_of_photons_for_dark_and_bright_details():
    assert detection.rose(-0.1, 1e4, 4.0) == pytest.approx(2.0 * detection.rose(0.1, 1e4, 1.0))


def test_hotelling_of_independent_channels_adds_in_squares():
    dprime, weights = detection.hotelling([3.0, 8.0], np.diag([1.0, 4.0]))
    assert dprime == pytest.approx(float(detection.combined([3.0, 4.0])))
    assert weights == pytest.approx(np.array([3.0, 2.0]) / np.sqrt(13.0))


def test_hotelling_of_no_difference_is_zero():
    dprime, weights = detection.hotelling([0.0, 0.0], np.eye(2))
    assert dprime == 0.0 and weights.tolist() == [0.0, 0.0]


def test_no_other_weighting_beats_hotelling():
    rng = np.random.default_rng(3)
    root = rng.normal(size=(4, 4))
    covariance, delta = root @ root.T + 0.1 * np.eye(4), rng.normal(size=4)
    best, weights = detection.hotelling(delta, covariance)
    assert weights @ delta / np.sqrt(weights @ covariance @ weights) == pytest.approx(best)
    trials = rng.normal(size=(500, 4))
    ratios = trials @ delta / np.sqrt(np.einsum("ij,jk,ik->i", trials, covariance, trials))
    assert ratios.max() <= best


@pytest.mark.oracle
def test_error_rate_matches_counting():
    rng = np.random.default_rng(7)
    background, target = rng.normal(0.0, 1.0, 200_000), rng.normal(2.0, 1.0, 200_000)
    expected = float(detection.error_rate(2.0))
    sigma = np.sqrt(expected * (1.0 - expected) / 200_000)
    assert np.mean(background > 1.0) == pytest.approx(expected, abs=4.0 * sigma)
    assert np.mean(target < 1.0) == pytest.approx(expected, abs=4.0 * sigma)
