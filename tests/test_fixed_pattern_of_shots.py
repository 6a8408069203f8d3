"""Shots are taken by the same pixels: their fixed pattern adds up with the weights, unlike that of colour channels."""

import numpy as np
import pytest
from small_problems import small_design, small_problem

from codesign import Design, evaluate
from codesign.assemble import Assembly
from codesign.design import Shot
from codesign.search.combined_walk import CombinedWalk
from codesign.search.readings import shot_points, single

STROBE = {
    "lighting.mode": "strobe",
    "timing.frame_rate_hz": 10.0,
    "lighting.driver_max_ma": 200.0,
    "scene.ambient": [{"illuminant": "E", "illuminance_lx": 300}],
    "camera.prnu_percent": 3.0,
    "camera.dsnu_e": 20.0,
    "averaging.pixels": 4,
}
#: A red and a green shot of different length.
MIXED = (Shot(exposure_us=500.0, drive_ma={"red": 100.0}), Shot(exposure_us=900.0, drive_ma={"green": 150.0}))
JUNCTION = {"red": 40.0, "green": 35.0}


def recipe(shots, **changes) -> Design:
    """A recipe of shots."""
    return small_design(drive_ma={}, exposure_us=sum(s.exposure_us for s in shots), shots=shots, **changes)


def shot_problem(folder, changes=None):
    return small_problem(folder, {**STROBE, "detection.shots": 2, **(changes or {})})


@pytest.mark.published
def test_equal_shots_are_frames_averaged(tmp_path):
    # EMVA 1288: averaging frames lowers temporal noise only, the spatial nonuniformity of the mean image stays. Two
    # equal shots with equal weights are the sum of two frames: 2 x their mean, scaled by the weights 1/sqrt(2).
    shot = Shot(exposure_us=500.0, drive_ma={"red": 100.0})
    two = evaluate(shot_problem(tmp_path), recipe((shot, shot)), junction_c=JUNCTION)
    frames = small_problem(tmp_path, {**STROBE, "averaging.frames": 2})
    mean = evaluate(frames, small_design(exposure_us=500.0), junction_c=JUNCTION)
    assert list(two.weights.values()) == pytest.approx([0.5**0.5] * 2, rel=1e-9)
    assert two.cnr == pytest.approx(mean.cnr, rel=1e-12)
    for name, pair in mean.noise.items():
        assert two.noise[name] == pytest.approx(tuple(2 * value for value in pair), rel=1e-9), name


def test_difference_of_equal_shots_has_temporal_noise_only(tmp_path):
    shot = Shot(exposure_us=500.0, drive_ma={"red": 100.0})
    found = evaluate(shot_problem(tmp_path), recipe((shot, shot), weights={"shot 1": 1.0, "shot 2": -1.0}))
    for name in ("dark fixed pattern", "photo-response fixed pattern", "surface clutter"):
        assert max(found.noise[name]) < 1e-20
    assert min(found.noise["light shot noise"]) > 0 and min(found.noise["read noise"]) > 0


def test_fixed_pattern_of_shots_is_that_of_the_weighted_sum(tmp_path):
    """PRNU acts on the weighted sum of photo-electrons, DSNU on the sum of weights; the pixels average both."""
    found = evaluate(shot_problem(tmp_path), recipe(MIXED, weights={"shot 1": 0.8, "shot 2": -0.6}))
    first, second = found.surfaces[0], found.surfaces[3]
    assert (first.id, second.id) == ("target, shot 1", "target, shot 2")
    photo = 0.8 * (first.led_e + first.ambient_e) - 0.6 * (second.led_e + second.ambient_e)
    assert found.noise["photo-response fixed pattern"][0] == pytest.approx(0.03**2 * photo**2 / 4, rel=1e-9)
    assert found.noise["dark fixed pattern"][0] == pytest.approx(20.0**2 * 0.2**2 / 4, rel=1e-9)


def test_fixed_pattern_of_channels_is_independent(tmp_path):
    """Channels of a colour camera have pixels of their own: squares add up."""
    channels = [
        {"name": name, "curve": "qe.csv", "quantity": "quantum_efficiency", "unit": "fraction"}
        for name in ("one", "two")
    ]
    problem = small_problem(tmp_path, {"camera.channels": channels, "detection.combine_channels": True})
    found = evaluate(problem, small_design(channel="one+two", weights={"one": 0.8, "two": -0.6}))
    photo = found.surfaces[0].led_e + found.surfaces[0].ambient_e
    assert found.noise["photo-response fixed pattern"][0] == pytest.approx(0.01**2 * photo**2, rel=1e-9)
    assert found.noise["dark fixed pattern"][0] == pytest.approx(2.0**2, rel=1e-9)


def walk_of(problem) -> CombinedWalk:
    """The search over all configurations at the junction temperatures assumed here."""
    return CombinedWalk(Assembly(problem, np.array([JUNCTION[channel.id] for channel in problem.channels])), 0.05)


def test_arrays_of_the_search_agree_with_the_forward_model(tmp_path):
    """Difference and covariance of both shots, at any weights, and the program of these weights."""
    problem = shot_problem(tmp_path, {"candidates.filters": "none", "optics.f_numbers": [4.0]})
    walk = walk_of(problem)
    index = next(i for i in range(walk.upper.size) if walk.configuration(i)[0].gain.gain_db == 0.0)
    setting, filter_index = walk.configuration(index)
    one = single(walk.assembly, setting, filter_index)
    exposures = np.array([shot.exposure_us * 1e-6 for shot in MIXED])
    readings = walk.readings(index, exposures)
    point = np.zeros(readings.signal.shape[1])
    point[-1] = readings.limits.time_high[0]
    for shot, own in enumerate(shot_points(one, exposures, np.arange(point.size - 1.0))):
        amps = {led: ma * 1e-3 for led, ma in MIXED[shot].drive_ma.items()}
        for column, place in enumerate(own[:-1].astype(int)):
            led = problem.channels[one.led[column]].id
            taken = min(amps.get(led, 0.0), one.width[column])
            amps[led] = amps.get(led, 0.0) - taken
            point[place] = taken * exposures[shot]
    for weights in ((0.6, 0.8), (0.8, -0.6), (0.99, -0.1)):
        named = {"shot 1": weights[0], "shot 2": weights[1]}
        forward = evaluate(problem, recipe(MIXED, weights=named), junction_c=JUNCTION)
        w = np.array(list(forward.weights.values()))
        delta, covariance = readings.moments(point)
        assert w @ delta == pytest.approx(forward.signal_e, rel=1e-9)
        variance = sum(sum(pair) for pair in forward.noise.values()) / 2
        assert w @ covariance @ w == pytest.approx(variance, rel=1e-9)
        program = readings.weighted(w)
        rows = program.noise_rows[0] @ point
        assert program.floor[0] + program.shot[0] @ point + rows @ rows == pytest.approx(variance, rel=1e-9)
    best = evaluate(problem, recipe(MIXED), junction_c=JUNCTION)
    assert best.cnr == pytest.approx(np.sqrt(delta @ np.linalg.solve(covariance, delta)), rel=1e-9)
