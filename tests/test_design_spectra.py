"""Densities by wavelength against the forward model they are the integrands of."""

import numpy as np
import pytest
from demo_names import DEMOS
from small_problems import small_design, small_problem

from codesign import Design, evaluate
from codesign.design import Shot
from codesign.design_spectra import exposures, spectra, worst_pair

RELATIVE = 1e-9


def assert_integrals_agree(problem, performance):
    """Electrons of every surface and reading, the signal and every noise term, all within 1e-9."""
    found = spectra(problem, performance)
    size = len(problem.surfaces)
    for number, reading in enumerate(found.readings):
        own = performance.surfaces[number * size : (number + 1) * size]
        np.testing.assert_allclose(found.integral(reading.led_e), [s.led_e for s in own], rtol=RELATIVE)
        np.testing.assert_allclose(found.integral(reading.ambient_e), [s.ambient_e for s in own], rtol=RELATIVE)
        assert reading.dark_e == pytest.approx(own[0].dark_e, rel=RELATIVE)
    assert found.integral(found.signal_e) == pytest.approx(performance.signal_e, rel=RELATIVE)
    assert set(found.noise) | set(found.steady) == set(performance.noise)
    for name, variances in performance.noise.items():
        density = found.noise.get(name, np.zeros((2, problem.grid.size)))
        total = found.integral(density) + found.steady.get(name, 0.0)
        np.testing.assert_allclose(total, variances, rtol=RELATIVE)
    return found


@pytest.mark.parametrize("name", DEMOS)
def test_densities_integrate_to_the_electrons_and_noise_of_each_demo(solved, name):
    solution = solved(name)
    found = assert_integrals_agree(solution.problem, solution.recipe)
    assert set(found.readings[0].leds) == set(solution.recipe.design.drive_ma)


def test_densities_integrate_with_gloss_emitters_and_ambient(tmp_path):
    changes = {
        "specular": {"target": 0.05},
        "lighting.specular_weight": 0.3,
        "scene.ambient": [{"illuminant": "fluorescent", "illuminance_lx": 2000}],
        "averaging.pixels": 4,
    }
    problem = small_problem(tmp_path, changes)
    assert_integrals_agree(problem, evaluate(problem, small_design(drive_ma={"red": 70.0, "green": 120.0})))


def test_densities_of_several_pairs_are_those_of_the_worst(tmp_path):
    changes = {"scene.target": ["target", "dim"], "scene.background": ["background", "twin"]}
    problem = small_problem(tmp_path, changes)
    performance = evaluate(problem, small_design())
    found = assert_integrals_agree(problem, performance)
    target, background = (problem.surfaces[index].id for index in found.pair)
    least = min(performance.pairs, key=lambda pair: pair.cnr)
    assert (target, background) == (least.target, least.background)


def test_densities_of_combined_channels_integrate_to_the_weighted_sum(tmp_path):
    channels = [
        {"name": name, "curve": "qe.csv", "quantity": "quantum_efficiency", "unit": "fraction", "outside": "zero"}
        for name in ("one", "two")
    ]
    problem = small_problem(tmp_path, {"camera.channels": channels, "detection.combine_channels": True})
    performance = evaluate(problem, small_design(channel="one+two", weights={"one": 1.0, "two": -0.5}))
    found = assert_integrals_agree(problem, performance)
    assert [reading.name for reading in found.readings] == ["one", "two"]


def test_densities_of_shots_have_each_their_own_light(tmp_path):
    changes = {
        "lighting.mode": "strobe",
        "timing.frame_rate_hz": 10.0,
        "detection.shots": 2,
        "lighting.driver_max_ma": 200.0,
    }
    problem = small_problem(tmp_path, changes)
    shots = (Shot(exposure_us=500.0, drive_ma={"red": 100.0}), Shot(exposure_us=900.0, drive_ma={"green": 150.0}))
    design = Design(
        camera="bench-camera", channel="mono", gain_db=0.0, filter="none", f_number=4.0, exposure_us=1400.0,
        shots=shots, weights={"shot 1": 0.8, "shot 2": -0.6},
    )  # fmt: skip
    found = assert_integrals_agree(problem, evaluate(problem, design))
    assert [list(reading.leds) for reading in found.readings] == [["red"], ["green"]]


def test_the_worst_pair_is_the_one_whose_cnr_is_stated(tmp_path):
    """The background lies between both targets: one pair shows the other sign, and no threshold serves both."""
    problem = small_problem(tmp_path, {"scene.target": ["bright", "dim"], "scene.background": ["background"]})
    performance = evaluate(problem, small_design())
    assert performance.cnr == 0.0
    wrong = next(p for p in performance.pairs if (p.signal_e > 0) != (performance.sign == "brighter"))
    assert problem.surfaces[worst_pair(problem, performance)[0]].id == wrong.target


def test_one_reading_has_weight_one(tmp_path):
    problem = small_problem(tmp_path)
    (taken,) = exposures(problem, evaluate(problem, small_design()))
    assert (taken.name, taken.weight, taken.exposure_us) == ("mono", 1.0, 1000.0)
