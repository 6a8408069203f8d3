"""Simulated pictures against the mean and variance the forward model predicts."""

import numpy as np
import pytest
from demo_names import DEMOS
from small_problems import small_design, small_problem

from codesign import evaluate
from codesign.design import Shot, setting_of
from codesign.design_simulation import MOST_PIXELS, camera_reading, expected, simulate
from codesign.problem.schema import Averaging

#: Allowed distance in standard errors of the simulation: chance alone exceeds it once in 16,000 comparisons.
STANDARD_ERRORS = 4.0
PIECES = 8_000


def assert_moments_agree(values, mean, variance):
    """Sample mean and variance within four standard errors, that of the variance from the fourth moment."""
    found = values.var(ddof=1)
    fourth = np.mean((values - values.mean()) ** 4)
    assert abs(values.mean() - mean) <= STANDARD_ERRORS * np.sqrt(found / values.size)
    assert abs(found - variance) <= STANDARD_ERRORS * np.sqrt((fourth - found**2) / values.size)


def assert_simulation_agrees(problem, performance, seed, pieces=PIECES):
    want = expected(problem, performance)
    assert abs(want.mean_e[0] - want.mean_e[1]) == pytest.approx(abs(performance.signal_e), rel=1e-9)
    assert abs(performance.signal_e) / want.noise_e == pytest.approx(performance.cnr, rel=1e-9)
    rng = np.random.default_rng(seed)
    for side, share in ((0, 1.0), (1, 0.0)):
        values = simulate(problem, performance, np.full((pieces, 1), share), rng)
        assert_moments_agree(values, want.mean_e[side], want.deviation_e[side] ** 2)


@pytest.mark.parametrize("name", DEMOS)
def test_simulated_decisions_have_the_mean_and_variance_predicted(solved, name):
    solution = solved(name)
    assert_simulation_agrees(solution.problem, solution.recipe, [6, *name.encode()])


def test_simulated_decisions_of_combined_channels_agree(tmp_path):
    channels = [
        {"name": name, "curve": "qe.csv", "quantity": "quantum_efficiency", "unit": "fraction"}
        for name in ("one", "two")
    ]
    problem = small_problem(tmp_path, {"camera.channels": channels, "detection.combine_channels": True})
    performance = evaluate(problem, small_design(channel="one+two", weights={"one": 1.0, "two": -0.4}))
    assert_simulation_agrees(problem, performance, 11)


@pytest.mark.parametrize("weights", [(0.6, 0.8), (0.8, -0.6)])
@pytest.mark.parametrize("pixels", [4, 400])
def test_simulated_decisions_of_shots_share_the_fixed_pattern(tmp_path, weights, pixels):
    """100,000 spots, drawn pixel by pixel or as sums; DSNU and PRNU are large enough to tell."""
    changes = {
        "lighting.mode": "strobe", "timing.frame_rate_hz": 10.0, "lighting.driver_max_ma": 200.0, "detection.shots": 2,
        "camera.dsnu_e": 30.0, "camera.prnu_percent": 3.0, "averaging.pixels": pixels, "scene.guards": [],
        "scene.target": "bright", "scene.background": "dim",
    }  # fmt: skip
    problem = small_problem(tmp_path, changes)
    shots = (Shot(exposure_us=500.0, drive_ma={"red": 100.0}), Shot(exposure_us=900.0, drive_ma={"green": 150.0}))
    named = {"shot 1": weights[0], "shot 2": weights[1]}
    performance = evaluate(problem, small_design(drive_ma={}, exposure_us=1400.0, shots=shots, weights=named))
    pattern = sum(max(performance.noise[name]) for name in ("dark fixed pattern", "photo-response fixed pattern"))
    assert pattern > 0.02 * sum(max(pair) for pair in performance.noise.values())
    assert_simulation_agrees(problem, performance, 13, pieces=100_000)


def test_sums_of_many_pixels_agree_as_single_pixels_do(tmp_path):
    """Beyond so many pixels their sums are drawn; the statistics are the same."""
    problem = small_problem(tmp_path, {"averaging.pixels": 2000, "averaging.frames": 3})
    assert PIECES * 2000 * 3 > MOST_PIXELS
    assert_simulation_agrees(problem, evaluate(problem, small_design()), 12)


def test_a_piece_has_one_reflectance_all_over(tmp_path):
    """Clutter moves all cells of a piece together: their means spread more than chance alone allows."""
    problem = small_problem(tmp_path)
    performance = evaluate(problem, small_design())
    values = simulate(problem, performance, np.zeros((400, 400)), np.random.default_rng(5))
    clutter = performance.noise["surface clutter"][1]
    assert values.mean(axis=1).var(ddof=1) == pytest.approx(clutter, rel=0.3)
    rest = sum(pair[1] for name, pair in performance.noise.items() if name != "surface clutter")
    assert values.var(axis=1, ddof=1).mean() == pytest.approx(rest, rel=0.05)


def test_a_well_that_is_full_reads_no_more(tmp_path):
    problem = small_problem(tmp_path)
    setting = setting_of(problem, small_design())
    rng = np.random.default_rng(1)
    one = camera_reading(setting, Averaging(), np.full(2000, 5e4), 0.0, rng)
    many = camera_reading(setting, Averaging(pixels=10_000), np.full(2000, 5e4), 0.0, rng)
    assert one.mean() == pytest.approx(10_000, rel=1e-3)
    assert many.mean() == pytest.approx(10_000, rel=1e-3)


def test_half_covered_cells_lie_between(tmp_path):
    problem = small_problem(tmp_path)
    performance = evaluate(problem, small_design())
    want = expected(problem, performance)
    values = simulate(problem, performance, np.full((4000, 1), 0.5), np.random.default_rng(3))
    assert values.mean() == pytest.approx(want.middle_e, abs=0.1 * want.noise_e)


def test_the_same_seed_gives_the_same_picture(tmp_path):
    problem = small_problem(tmp_path)
    performance = evaluate(problem, small_design())
    first, second = (simulate(problem, performance, np.zeros((2, 9)), np.random.default_rng(8)) for _ in range(2))
    assert np.array_equal(first, second)
