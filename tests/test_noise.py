"""Noise terms: each by hand, zero when its parameter is zero, and what averaging does to it."""

import math

import numpy as np
import pytest
from small_problems import small_design, small_problem

from codesign import evaluate
from codesign.noise import NOISE_TERMS, Sensor, noise_model
from codesign.problem.schema import Averaging

TERMS = {term.name: term for term in NOISE_TERMS}
SENSOR = Sensor(read_noise_e=3.0, conversion_gain_dn_per_e=0.4, dsnu_e=2.0, prnu=0.01)
#: Electrons of LED, ambient light and dark current.
ELECTRONS = np.array([5000.0, 300.0, 40.0])
CLUTTER = np.array([30.0, 40.0])
ONCE = Averaging()


def variance(name, sensor=SENSOR, electrons=ELECTRONS, clutter=CLUTTER, averaging=ONCE):
    return TERMS[name].variance(sensor, electrons, clutter, averaging)


# --- each term -------------------------------------------------------------------------------------------------


@pytest.mark.published
@pytest.mark.parametrize(
    ("name", "expected"),
    [
        # EMVA 1288, linear model: sigma^2 = sigma_d^2 + sigma_q^2/K^2 + mu_e, with DSNU and PRNU of the spatial part.
        ("read noise", 9.0),
        ("quantisation", 1 / (12 * 0.4**2)),
        ("light shot noise", 5000.0),
        ("ambient shot noise", 300.0),
        ("dark shot noise", 40.0),
        ("dark fixed pattern", 4.0),
        ("photo-response fixed pattern", (0.01 * 5300) ** 2),  # all light, dark current not
        ("surface clutter", 30.0**2 + 40.0**2),
    ],
)
def test_variance_of_each_term_by_hand(name, expected):
    assert variance(name) == pytest.approx(expected, rel=1e-12)


def test_every_term_is_checked_by_hand_above():
    assert len(TERMS) == len(NOISE_TERMS) == 8


@pytest.mark.parametrize(
    ("name", "off"),
    [
        ("read noise", {"sensor": Sensor(read_noise_e=0, conversion_gain_dn_per_e=0.4, dsnu_e=2, prnu=0.01)}),
        ("light shot noise", {"electrons": np.array([0.0, 300.0, 40.0])}),
        ("ambient shot noise", {"electrons": np.array([5000.0, 0.0, 40.0])}),
        ("dark shot noise", {"electrons": np.array([5000.0, 300.0, 0.0])}),
        ("dark fixed pattern", {"sensor": Sensor(read_noise_e=3, conversion_gain_dn_per_e=0.4, dsnu_e=0, prnu=0.01)}),
        ("photo-response fixed pattern", {"electrons": np.array([0.0, 0.0, 40.0])}),
        (
            "photo-response fixed pattern",
            {"sensor": Sensor(read_noise_e=3, conversion_gain_dn_per_e=0.4, dsnu_e=2, prnu=0)},
        ),
        ("surface clutter", {"clutter": np.zeros(0)}),
    ],
)
def test_term_is_zero_when_its_cause_is_absent(name, off):
    assert variance(name, **off) == 0.0


def test_quantisation_vanishes_with_fine_grey_steps():
    fine = Sensor(read_noise_e=3, conversion_gain_dn_per_e=1e6, dsnu_e=2, prnu=0.01)
    assert variance("quantisation", sensor=fine) < 1e-12


# --- averaging -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "by_pixels", "by_frames"),
    [
        ("read noise", True, True),
        ("quantisation", True, True),
        ("light shot noise", True, True),
        ("ambient shot noise", True, True),
        ("dark shot noise", True, True),
        ("dark fixed pattern", True, False),
        ("photo-response fixed pattern", True, False),
        ("surface clutter", False, False),
    ],
)
def test_averaging_divides_what_is_independent_and_nothing_else(name, by_pixels, by_frames):
    once = variance(name)
    assert variance(name, averaging=Averaging(pixels=9)) == pytest.approx(once / (9 if by_pixels else 1))
    assert variance(name, averaging=Averaging(frames=4)) == pytest.approx(once / (4 if by_frames else 1))
    both = (9 if by_pixels else 1) * (4 if by_frames else 1)
    assert variance(name, averaging=Averaging(pixels=9, frames=4)) == pytest.approx(once / both)


@pytest.mark.published
def test_cnr_grows_with_the_root_of_the_pixels_without_clutter(tmp_path):
    # Matched filter: N independent pixels multiply d' by sqrt(N). These two have one sample each, so no clutter.
    even = {"scene.target": "bright", "scene.background": "dim", "scene.guards": []}
    one, nine = (evaluate(small_problem(tmp_path, {**even, "averaging.pixels": n}), small_design()).cnr for n in (1, 9))
    assert nine == pytest.approx(3 * one, rel=1e-12)


@pytest.mark.property
def test_cnr_stops_growing_at_the_clutter(tmp_path):
    """Whatever is averaged, clutter stays: CNR tends to |difference| / rms clutter of the two surfaces."""
    many = evaluate(small_problem(tmp_path, {"averaging.pixels": 10**9}), small_design())
    # Standard deviations 0.02 and 0.01 at a difference of 0.1, all scaled alike by the light.
    assert many.cnr == pytest.approx(0.1 / math.sqrt((0.02**2 + 0.01**2) / 2), rel=1e-4)


# --- the sum ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("same_pixels", [False, True])
def test_what_lasts_between_readings_is_the_surface_and_the_pattern_of_the_same_pixels(same_pixels):
    lasting = {term.name for term in NOISE_TERMS if term.lasting(same_pixels)}
    pattern = {"dark fixed pattern", "photo-response fixed pattern"} if same_pixels else set()
    assert lasting == {"surface clutter"} | pattern


def test_terms_that_last_have_no_part_that_comes_by_chance():
    """The search relies on it, and on all noise proportional to light being fixed pattern."""
    assert all(not any(term.linear) for term in NOISE_TERMS if term.lasting(True))
    assert all(term.averages == "pixels" for term in NOISE_TERMS if term.relative(SENSOR))


@pytest.mark.property
@pytest.mark.parametrize("seed", range(8))
def test_summed_model_equals_the_sum_of_the_terms(seed):
    rng = np.random.default_rng(seed)
    read, gain, dsnu, prnu = rng.uniform(0.01, 10, 4)
    sensor = Sensor(read_noise_e=read, conversion_gain_dn_per_e=gain, dsnu_e=dsnu, prnu=prnu / 100)
    averaging = Averaging(pixels=int(rng.integers(1, 20)), frames=int(rng.integers(1, 9)))
    electrons, clutter = rng.uniform(0, 1e4, 3), rng.normal(0, 100, 5)
    model = noise_model(sensor, averaging)
    photo = electrons[0] + electrons[1]
    summed = (
        model.constant
        + model.linear @ electrons
        + (model.relative * photo) ** 2
        + model.clutter_share * clutter @ clutter
    )
    each = sum(term.variance(sensor, electrons, clutter, averaging) for term in NOISE_TERMS)
    assert summed == pytest.approx(each, rel=1e-12)


@pytest.mark.published
@pytest.mark.parametrize(("prnu", "expected"), [(0.005, 89.411), (0.01, 70.695)])
def test_total_snr_with_spatial_noise_matches_emva(prnu, expected):
    # EMVA 1288, SNR with spatial terms: 10 ke, sigma_d 3 e, no DSNU, no quantisation; PRNU 0.5 % and 1 %.
    sensor = Sensor(read_noise_e=3, conversion_gain_dn_per_e=1e9, dsnu_e=0, prnu=prnu)
    electrons = np.array([1e4, 0.0, 0.0])
    total = sum(term.variance(sensor, electrons, np.zeros(0), ONCE) for term in NOISE_TERMS)
    assert 1e4 / math.sqrt(total) == pytest.approx(expected, abs=6e-4)


@pytest.mark.published
def test_temporal_snr_matches_emva():
    # EMVA 1288, eq. 21: QE 0.6, sigma_d 3 e, K 0.4 DN/e: SNR at 1000 photons 24.302837.
    sensor = Sensor(read_noise_e=3, conversion_gain_dn_per_e=0.4, dsnu_e=0, prnu=0)
    electrons = np.array([600.0, 0.0, 0.0])
    total = sum(term.variance(sensor, electrons, np.zeros(0), ONCE) for term in NOISE_TERMS)
    assert 600 / math.sqrt(total) == pytest.approx(24.302837, abs=1e-6)


def test_each_surface_gets_its_own_noise(tmp_path):
    result = evaluate(small_problem(tmp_path), small_design())
    target, background = (surface.led_e for surface in result.surfaces[:2])
    assert result.noise["light shot noise"] == pytest.approx((target, background))
    assert result.noise["photo-response fixed pattern"] == pytest.approx(
        ((0.01 * target) ** 2, (0.01 * background) ** 2)
    )
    # 0.02 of 0.4 and 0.01 of 0.5 reflectance
    assert result.noise["surface clutter"] == pytest.approx(((target * 0.05) ** 2, (background * 0.02) ** 2))


@pytest.mark.published
def test_pooled_cnr_of_the_one_led_example():
    # One LED, signal rates 800 and 1000 e/s, dark 50 e/s, read noise 5 e, 9.52381 s: pooled d' 19.997438.
    t = 9.523810
    sensor = Sensor(read_noise_e=5, conversion_gain_dn_per_e=1e9, dsnu_e=0, prnu=0)
    spread = [
        sum(term.variance(sensor, np.array([rate * t, 0, 50 * t]), np.zeros(0), ONCE) for term in NOISE_TERMS)
        for rate in (800.0, 1000.0)
    ]
    assert 200 * t / math.sqrt(sum(spread) / 2) == pytest.approx(19.997438, abs=1e-5)
