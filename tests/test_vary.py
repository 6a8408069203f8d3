"""What-ifs over fields and axes: every point is what a solve of its own gives, whatever the order."""

import itertools

import numpy as np
import pytest

from codesign import load_problem, solve, verify
from codesign.errors import CatalogError, ProblemError
from codesign.report.vary_figure import variation_figure
from codesign.study.common import known_of, resolve, without_part
from codesign.study.fields import Axis, field_label, parse_axis, parse_setting, varied
from codesign.study.vary import snake, vary


@pytest.fixture(scope="module")
def stain():
    return load_problem("yellow-stain")


@pytest.fixture(scope="module")
def map_of_stain(stain):
    """A small map with changes of filter and LEDs."""
    axes = [Axis("limits.supply_w", (2, 8, 40)), Axis("lighting.distance_mm", (300, 900, 1500))]
    return vary(stain, axes=axes)


def test_each_point_equals_a_cold_solve(stain, map_of_stain):
    for point in map_of_stain.points[::2]:
        cold = solve(varied(stain, dict(zip(("limits.supply_w", "lighting.distance_mm"), point.values, strict=True))))
        assert point.cnr == pytest.approx(cold.optimum.cnr, rel=2e-5)
        assert point.bound <= point.cnr * (1 + 1.001e-3)
        assert (point.camera, point.filter) == (cold.optimum.design.camera, cold.optimum.design.filter)


def test_the_map_has_several_configurations(map_of_stain):
    assert len({point.configuration for point in map_of_stain.points}) >= 2


def test_order_of_the_points_does_not_matter(stain, map_of_stain):
    there = vary(stain, axes=[Axis("lighting.distance_mm", (1500, 900, 300)), Axis("limits.supply_w", (40, 8, 2))])
    other = {point.values[::-1]: point for point in there.points}
    for point in map_of_stain.points:
        assert point.cnr == pytest.approx(other[point.values].cnr, rel=2e-5)
        assert point.filter == other[point.values].filter


@pytest.mark.property
@pytest.mark.parametrize(
    "key, values",
    [
        ("limits.supply_w", (1, 4, 16, 64)),
        ("timing.exposure_max_us", (15000, 20000, 40000)),
        ("limits.well_headroom", (0.2, 0.5, 0.9)),
        ("averaging.frames", (1, 2, 8)),
    ],
)
def test_a_looser_limit_is_never_worse(stain, key, values):
    cnr = [point.cnr for point in vary(stain, axes=[Axis(key, values)]).points]
    assert all(b >= a * (1 - 1e-3) for a, b in itertools.pairwise(cnr))


@pytest.mark.property
def test_removing_an_unused_part_changes_nothing(stain):
    whole = resolve(stain)
    used = whole.optimum.design
    for kind, parts in (("led", stain.channels), ("filter", stain.filters), ("camera", stain.cameras)):
        spare = next((p.id for p in parts if p.id not in (*used.drive_ma, used.filter, used.camera, "none")), None)
        if spare is not None:
            rest = resolve(without_part(stain, kind, spare), whole)
            assert rest.cnr == pytest.approx(whole.cnr, rel=2e-5)
            assert rest.optimum.design.filter == used.filter


def test_a_warm_proof_stands_up_to_the_checker(stain):
    near = resolve(stain)
    for distance in (400, 1200):
        near = resolve(varied(stain, {"lighting.distance_mm": distance}), near)
        verdict = verify(near.solution())
        assert verdict.value == pytest.approx(near.certificate.value)


def test_a_wrong_start_costs_time_only(stain, solved):
    cold = solved("yellow-stain")
    known = known_of(cold)
    wrong = type(known)(**{**{name: getattr(known, name) for name in known.__slots__}, "filter": "none", "sign": 1})
    assert resolve(stain, wrong).cnr == pytest.approx(cold.optimum.cnr, rel=2e-5)
    assert resolve(stain, cold).cnr == pytest.approx(cold.optimum.cnr, rel=2e-5)


def test_a_start_that_promises_too_much_keeps_no_gap_open():
    # With a quarter of the exposure the CNR the start promises is far away: the first slope lights next to nothing.
    caps = load_problem("cap-colour")
    whole = resolve(caps)
    quarter = varied(caps, {"timing.exposure_max_us": whole.optimum.design.exposure_us / 4})
    assert resolve(quarter, whole).certificate.gap <= 1e-3


def test_conflicting_limits_are_a_point_without_result(stain):
    found = vary(stain, axes=[Axis("optics.required_depth_mm", (5, 100000, 5))])
    assert [point.possible for point in found.points] == [True, False, True]
    lost = found.points[1]
    assert lost.limits == ("depth of field",) and "depth of field" in lost.reason
    assert np.isnan(found.table()["cnr"][1]) and found.table()["reason"][1]


def test_fields_of_parts_are_varied(stain):
    found = vary(stain, {"camera.mono-5mp.full_well_e": 40000}, [Axis("camera.mono-5mp.prnu_percent", (0.1, 3))])
    assert found.points[0].cnr > found.points[1].cnr
    assert found.points[0].cnr > found.base.cnr


def test_a_field_takes_the_place_of_those_that_say_the_same(stain):
    led = varied(stain, {"led.violet-405-a.radiant_flux_mw": 500}).channel("violet-405-a").led
    assert led.flux_w() == pytest.approx(0.5)
    lit = varied(stain, {"lighting.delivery_per_m2": 20}).spec.lighting
    assert (lit.distance_mm, lit.delivery_per_m2) == (None, 20)


def test_snake_visits_every_place_once_by_single_steps():
    places = snake([Axis("a", (1, 2, 3)), Axis("b", (1, 2, 3, 4))])
    assert sorted(places) == [(i, j) for i in range(3) for j in range(4)]
    assert all(abs(a[0] - b[0]) + abs(a[1] - b[1]) == 1 for a, b in itertools.pairwise(places))


def test_table_has_a_row_per_point_with_units_in_the_names(map_of_stain):
    table = map_of_stain.table()
    assert len(table) == 9
    assert list(table.columns[:4]) == ["limits.supply_w", "lighting.distance_mm", "cnr", "cnr_bound"]
    assert (table["cnr_bound"] >= table["cnr"]).all()


def test_figures_are_the_same_for_the_same_result(stain, map_of_stain):
    assert variation_figure(map_of_stain, "svg") == variation_figure(map_of_stain, "svg")
    line = vary(stain, axes=[Axis("optics.required_depth_mm", (5, 100000))])
    assert b"limits cannot be met" in variation_figure(line, "svg")


@pytest.mark.parametrize(
    "text, values",
    [
        ("a.b=10:100:10", (10, 20, 30, 40, 50, 60, 70, 80, 90, 100)),
        ("a.b=0:1:3", (0.0, 0.5, 1.0)),
        ("a.b=1:100:3:log", (1, 10, 100)),
        ("a.b=20, 30,40.5", (20, 30, 40.5)),
        ("a.b=mono-5mp,[1,2],'x,y',none,true", ("mono-5mp", [1, 2], "x,y", None, True)),
    ],
)
def test_axes_are_read(text, values):
    assert parse_axis(text).values == values


@pytest.mark.parametrize(
    "text", ["a.b", "a.b=", "=3", "a.b=1:2", "a.b=1:2:x", "a.b=nan:2:3", "a.b=0:1:3:log", "a.b=1:2:1"]
)
def test_bad_axes_are_refused(text):
    with pytest.raises(ProblemError):
        parse_axis(text)


@pytest.mark.parametrize(
    "text, words",
    [
        ("limits.rig_heat=1", "did you mean 'rig_heat_w'?"),
        ("rig_heat_w=1", "did you mean 'limits.rig_heat_w'?"),
        ("limit.rig_heat_w=1", "did you mean 'limits'?"),
        ("limits=1", "name a field"),
        ("limits.well_headroom=2", "limits.well_headroom is 2, must be <= 1"),
        ("optics.f_numbers[7]=4", "there are"),
        ("scene.ambient.illuminance_lx=3", "is a list"),
        ("camera.mono-5m.bits=8", "did you mean 'mono-5mp'?"),
        ("camera.mono-5mp.bit=8", "did you mean 'bits'?"),
        ("camera.mono-5mp.bits=-8", "bits is -8, must be"),
        ("led.violet-405-a.id=x", "id"),
        ("a[x]=3", "is not a field"),
    ],
)
def test_bad_fields_name_what_is_allowed(stain, text, words):
    key, value = parse_setting(text)
    with pytest.raises((ProblemError, CatalogError)) as caught:
        vary(load_problem("bruise") if "ambient" in key else stain, {key: value})
    assert words in str(caught.value)


def test_fields_are_named_with_units():
    assert field_label("temperature.sensor_c") == "sensor [°C]"
    assert field_label("lighting.led.nir-850-a.emitters") == "nir-850-a emitters"
    assert field_label("camera.mono-5mp.gains[0].read_noise_e") == "mono-5mp read noise [e⁻]"


def test_a_section_can_be_taken_away_and_put_back():
    problem = load_problem("bruise")
    still = varied(problem, {"motion": None})
    assert still.spec.motion is None
    moving = varied(still, {"motion.speed_mm_per_s": 100, "motion.max_blur_px": 1})
    assert moving.spec.motion.max_blur_px == 1


def test_results_do_not_depend_on_processes(stain):
    axes = [Axis("averaging.frames", tuple(range(1, 9)))]
    one, two = vary(stain, axes=axes), vary(stain, axes=axes, workers=2)
    assert [(p.cnr, p.drive_ma) for p in one.points] == [(p.cnr, p.drive_ma) for p in two.points]
