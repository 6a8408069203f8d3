"""Nudged problems: one quantity changes as stated, everything else stays."""

import numpy as np
import pytest
from small_problems import QUANTUM_EFFICIENCY, small_design, small_problem

from codesign import evaluate, load_problem
from codesign.catalog import Filter
from codesign.errors import CodesignError
from codesign.problem.choices import FilterChoices
from codesign.problem.nudge import NUDGES, nudged, parts_of
from codesign.radiometry import transmittances

GRID = np.arange(500.0, 660.0, 0.5)


def led_e(problem, surface="background", **design):
    readings = evaluate(problem, small_design(**design)).surfaces
    return next(reading.led_e for reading in readings if reading.id == surface)


@pytest.fixture
def problem(tmp_path):
    ambient = [{"illuminant": "E", "irradiance_w_per_m2": 0.5}]
    return small_problem(tmp_path, {"scene.ambient": ambient, "lighting.specular_weight": 0.0})


@pytest.mark.parametrize("name", NUDGES)
def test_no_amount_is_the_same_problem(problem, name):
    assert nudged(problem, name, 0.0) is problem


@pytest.mark.property
@pytest.mark.parametrize("name", NUDGES)
def test_a_nudge_and_its_inverse_lead_back(problem, name):
    """Through the whole chain, with a filter whose wavelengths matter."""
    parameter = NUDGES[name]
    design = small_design(filter="red-pass")
    there = nudged(problem, name, parameter.sigma)
    back = -parameter.sigma / (1 + parameter.sigma) if parameter.relative else -parameter.sigma
    again = evaluate(nudged(there, name, back), design)
    before, changed = evaluate(problem, design), evaluate(there, design)
    assert again.cnr == pytest.approx(before.cnr, rel=1e-12)
    assert [r.total_e for r in again.surfaces] == pytest.approx([r.total_e for r in before.surfaces], rel=1e-12)
    assert changed != before


@pytest.mark.property
@pytest.mark.parametrize("name", NUDGES)
def test_nudges_compose(problem, name):
    design = small_design(filter="red-pass")
    total = 1.1 * 1.2 - 1 if NUDGES[name].relative else 0.3
    twice = nudged(nudged(problem, name, 0.1), name, 0.2)
    assert evaluate(twice, design).cnr == pytest.approx(evaluate(nudged(problem, name, total), design).cnr, rel=1e-9)


@pytest.mark.parametrize("name", ["quantum efficiency", "LED flux", "lens transmittance", "delivery", "reflectance"])
def test_light_scales_with_each_factor_of_the_chain(problem, name):
    # A cool junction, so that flux does not come back through the temperature.
    assert led_e(nudged(problem, name, 0.07)) == pytest.approx(1.07 * led_e(problem), rel=1e-9)


def test_quantum_efficiency_is_that_of_the_camera(problem):
    camera = nudged(problem, "quantum efficiency", 0.1).cameras[0]
    assert camera.quantum_efficiency("mono", GRID) == pytest.approx(1.1 * QUANTUM_EFFICIENCY)


def test_one_led_alone(problem):
    both = {"red": 100.0, "green": 100.0}
    alone = led_e(problem, drive_ma={"green": 100.0})
    changed = led_e(nudged(problem, "LED flux", 0.5, "green"), drive_ma=both)
    assert changed - led_e(problem, drive_ma=both) == pytest.approx(0.5 * alone, rel=1e-9)
    assert led_e(nudged(problem, "delivery", 0.5, "green")) == led_e(problem)


def test_peak_moves_the_spectrum(problem):
    """Behind the red filter, half open at 610 nm, an LED moved from 630 to 610 nm gives about half."""
    moved = nudged(problem, "LED peak", -20.0)
    inside, edge = led_e(problem, filter="red-pass"), led_e(moved, filter="red-pass")
    # Fewer electrons per watt at the shorter wave, and half the transmittance.
    assert edge / inside == pytest.approx(0.5 * 610 / 630, rel=0.02)


@pytest.mark.parametrize("kind", ["bandpass", "curve", "curve tilted", "glass"])
def test_filter_centre_shifts_the_curve(tmp_path, kind):
    (tmp_path / "ramp.csv").write_text("wavelength_nm,t\n400,0.1\n800,0.9\n", encoding="utf-8")
    common = {"id": "f", "source": "test"}
    curve = {**common, "kind": "curve", "curve": "ramp.csv", "unit": "fraction"}
    table = {
        "bandpass": {**common, "kind": "bandpass", "center_nm": 580, "fwhm_nm": 40, "edge_width_nm": 5}
        | {"peak_transmittance": 0.9, "blocking_od": 4, "effective_index": 1.8},
        "curve": curve,
        "curve tilted": {**curve, "effective_index": 1.8},
        "glass": {**curve, "kind": "glass", "reference_thickness_mm": 1, "thickness_mm": 2, "refractive_index": 1.5},
    }[kind]
    part = Filter.from_table(table, base_dir=tmp_path)
    moved = part.replaced(shift_nm=10.0)
    assert moved.transmittance(GRID + 10.0) == pytest.approx(part.transmittance(GRID), rel=1e-9)
    # At an angle the shifted band moves with the same factor as the band itself.
    factor = np.sqrt(1 - (np.sin(np.radians(20)) / 1.8) ** 2) if "tilt" in kind or kind == "bandpass" else 1.0
    tilted = moved.transmittance(GRID + 10.0 * factor, [20.0], [1.0])
    assert tilted == pytest.approx(part.transmittance(GRID, [20.0], [1.0]), rel=1e-6)


def test_filters_of_pairs_and_stacks_shift_too():
    base = load_problem("fast-web")
    singles = FilterChoices.of(base.filters)
    bands = [i for i, f in enumerate(singles.base) if f.kind in ("bandpass", "longpass", "shortpass")]
    first, second = singles.base[bands[0]], singles.base[bands[-1]]
    one = nudged(base, "filter centre", 3.0, first.id)
    changed = [f.id for f in FilterChoices.of(one.filters).base if f.shift_nm]
    assert changed == [first.id]
    assert one.catalog.filters[first.id].shift_nm == 3.0
    both = nudged(base, "filter centre", 3.0, f"{first.id} + {second.id}")
    assert {f.id for f in FilterChoices.of(both.filters).base if f.shift_nm} == {first.id, second.id}
    table = transmittances(both, base.spec.optics.f_numbers[0])
    assert np.abs(table - transmittances(base, base.spec.optics.f_numbers[0])).max(axis=1)[bands[0]] > 0


def test_camera_values_of_single_gains_change_too(tmp_path):
    gains = [{"gain_db": 0}, {"gain_db": 6, "read_noise_e": 2.0, "full_well_e": 4000, "conversion_gain_dn_per_e": 0.7}]
    problem = small_problem(tmp_path, {"camera.gains": gains})
    for name, field in (
        ("read noise", "read_noise_e"),
        ("full well", "full_well_e"),
        ("conversion gain", "conversion_gain_dn_per_e"),
    ):
        old, new = (p.cameras[0].gain_settings() for p in (problem, nudged(problem, name, 0.2)))
        assert [getattr(g, field) for g in new] == pytest.approx([1.2 * getattr(g, field) for g in old])


def test_temperatures_move_what_they_should(problem):
    design = small_design()
    before = evaluate(problem, design)
    air = evaluate(nudged(problem, "air temperature", 5.0), design)
    assert air.leds[0].junction_c == pytest.approx(before.leds[0].junction_c + 5.0)
    sensor = evaluate(nudged(problem, "sensor temperature", 7.0), design)  # doubles every 7 K
    assert sensor.surfaces[0].dark_e == pytest.approx(2 * before.surfaces[0].dark_e)
    rise = before.leds[0].junction_c - 25.0
    parts = [evaluate(nudged(problem, f"{x}thermal resistance", 0.1), design) for x in ("", "board ")]
    assert sum(p.leds[0].junction_c - before.leds[0].junction_c for p in parts) == pytest.approx(0.1 * rise)


def test_roles_of_surfaces_are_kept_apart(problem):
    for name, changed in (("target reflectance", "target"), ("background reflectance", "background")):
        new = nudged(problem, name, 0.1)
        for surface in ("target", "background", "bright"):
            factor = 1.1 if surface == changed else 1.0
            assert led_e(new, surface) == pytest.approx(factor * led_e(problem, surface), rel=1e-12)
    assert led_e(nudged(problem, "reflectance", 0.1, "bright"), "bright") == pytest.approx(
        1.1 * led_e(problem, "bright")
    )


def test_forward_voltage_scales_power_along_the_droop_curve(tmp_path):
    curve = [[100, 1.0, 2.0], [200, 1.8, 2.2]]
    problem = small_problem(tmp_path, {"red.flux_curve": curve})
    powers = [evaluate(p, small_design(drive_ma={"red": 150.0})).leds[0].electrical_w
              for p in (problem, nudged(problem, "forward voltage", 0.05))]  # fmt: skip
    assert powers[1] == pytest.approx(1.05 * powers[0])


@pytest.mark.parametrize("name", NUDGES)
def test_single_parts_together_are_all_parts(problem, name):
    design = small_design(filter="red-pass", drive_ma={"red": 100.0, "green": 50.0})
    amount, one_by_one = 0.5 * NUDGES[name].sigma, problem
    for part in parts_of(problem, name):
        one_by_one = nudged(one_by_one, name, amount, part)
    if parts_of(problem, name):
        assert evaluate(one_by_one, design).cnr == pytest.approx(
            evaluate(nudged(problem, name, amount), design).cnr, rel=1e-12
        )


@pytest.mark.parametrize(
    ("name", "amount", "part", "words"),
    [
        ("LED fluxx", 0.1, None, "LED flux"),
        ("LED flux", 0.1, "rod", "red"),
        ("filter centre", 0.1, "red-pass + hlf", "half"),
        ("ambient light", 0.1, "red", "leave it out"),
        ("read noise", -1.0, None, "must be > -1"),
        ("read noise", 1e9, None, "read_noise_e"),
        ("air temperature", -400.0, None, "air_c"),
        ("filter tilt", 85.0, None, "field_angle_deg"),
    ],
)
def test_bad_nudges_say_what_is_allowed_in_one_line(problem, name, amount, part, words):
    with pytest.raises(CodesignError, match=words) as caught:
        nudged(problem, name, amount, part)
    assert "\n" not in str(caught.value)


def test_every_parameter_states_its_tolerance_and_where_it_comes_from():
    for name, parameter in NUDGES.items():
        assert parameter.name == name
        assert parameter.sigma > 0
        assert parameter.source
        assert parameter.unit in ("1", "nm", "deg", "K")
