"""Published values: detection theory."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import detection

pytestmark = pytest.mark.published


@pytest.mark.parametrize(
    ("dprime", "expected"),
    [
        (1.0, ".308538"),  # Φ(-d'/2), Green & Swets 1966; rows below the same
        (2.0, ".158655"),  # Green & Swets 1966
        (3.0, ".0668072"),  # Green & Swets 1966
        (4.0, ".0227501"),  # Green & Swets 1966
        (5.0, ".00620967"),  # Green & Swets 1966
        (6.0, ".0013499"),  # Green & Swets 1966
    ],
)
def test_error_rate_at_the_mid_threshold(dprime, expected, printed):
    assert detection.error_rate(dprime) == printed(expected)


@pytest.mark.parametrize(
    ("dprime", "expected"),
    [
        (1.0, ".7602499"),  # Φ(d'/√2), Green & Swets 1966; Barrett & Myers 2004
        (2.0, ".9213504"),  # same
        (3.0, ".9830526"),  # same
        (4.0, ".9976611"),  # same
        (5.0, ".9997965"),  # same
        (6.0, ".9999890"),  # same
    ],
)
def test_area_under_the_roc_curve(dprime, expected, printed):
    assert detection.auc(dprime) == printed(expected)


@pytest.mark.parametrize(
    ("dprime", "expected"),
    [
        (3.0, ".464051"),  # false-alarm rate 1e-3, ROC of Green & Swets 1966
        (4.0, ".818527"),  # same
        (5.0, ".971918"),  # same
        (6.0, ".998192"),  # same
    ],
)
def test_detection_at_a_false_alarm_rate(dprime, expected, printed):
    assert detection.detection_probability(dprime, 1e-3) == printed(expected)


@pytest.mark.parametrize(
    ("false_alarm", "miss", "expected"),
    [
        (1e-6, 1e-3, "7.843657"),  # sum of z scores, Green & Swets 1966
        (1e-4, 1e-4, "7.438033"),  # same
    ],
)
def test_needed_dprime(false_alarm, miss, expected, printed):
    assert detection.required_dprime(false_alarm, miss) == printed(expected)


@pytest.mark.parametrize(
    ("sigma", "expected"),
    [
        (5.0, "1.433"),  # Gaussian tail times 5e6 pixels
        (6.0, ".00493"),  # same
    ],
)
def test_false_alarms_per_image(sigma, expected, printed):
    assert detection.expected_false_alarms(5e6, sigma) == printed(expected)


def test_rose_criterion():
    # Rose 1948, JOSA 38, 196: k² = C² Φ A; contrast .1 reaches k = 5 with 2500 photons on the detail
    assert detection.rose(0.1, 2500.0, 1.0) == pytest.approx(5.0)


def test_independent_bands_add_in_squares():
    assert detection.combined([3.0, 4.0]) == 5.0  # matched filter: 3, 4 -> 5
    assert detection.averaged(0.5, 100) == 5.0  # matched filter: d' √N


def test_hotelling_example(printed):
    # Hotelling 1931, Fisher 1936; own example checked with a generalised eigenvalue: d'² = .8396273
    covariance = np.array([[2.0, 0.5, 0.1], [0.5, 1.0, 0.2], [0.1, 0.2, 0.5]])
    dprime, weights = detection.hotelling([1.0, 0.4, -0.3], covariance)
    assert dprime**2 == printed(".8396273")
    assert weights == pytest.approx(np.array([0.456066, 0.335853, -0.824140]), abs=5.1e-7)


def test_mean_of_variances_is_the_detectability_index(printed):
    # One LED with a_t 800, a_b 1000, dark 50 e-/s, read 5 e-, 9.52381 s: three usages of "CNR" (derived)
    time = 10_000.0 / 1050.0
    noise_t, noise_b = 25.0 + 850.0 * time, 25.0 + 1050.0 * time
    signal = 200.0 * time
    assert signal / np.sqrt(noise_t + noise_b) == printed("14.140324")
    assert signal / np.sqrt((noise_t + noise_b) / 2.0) == printed("19.997438")
    assert signal / np.sqrt(noise_b) == printed("19.023854")
