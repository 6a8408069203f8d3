"""Worth of parts: the CNR lost without each, and gained with others."""

import math
from dataclasses import replace

import pytest

from codesign import load_problem, solve
from codesign.catalog import load_catalog
from codesign.errors import InfeasibleError
from codesign.study.common import without_part
from codesign.study.fields import varied
from codesign.study.stock import extended, restocked
from codesign.study.worth import with_part, worth


@pytest.fixture(scope="module")
def stain():
    return load_problem("yellow-stain")


@pytest.fixture(scope="module")
def worths(stain):
    return worth(stain)


def test_every_part_in_use_has_a_worth(worths, solved):
    design = solved("yellow-stain").optimum.design
    assert {(p.kind, p.id) for p in worths.parts} >= {("camera", design.camera), ("filter", design.filter)}
    assert all(part.change >= 0 for part in worths.parts)
    assert [p.change for p in worths.parts] == sorted((p.change for p in worths.parts), reverse=True)


def test_worth_is_the_difference_of_two_solves(stain, worths):
    part = worths.parts[0]
    rest = solve(without_part(stain, part.kind, part.id), alternatives=0)
    assert part.cnr == pytest.approx(rest.optimum.cnr, rel=2e-5)
    assert part.change == pytest.approx(worths.cnr - rest.optimum.cnr, rel=1e-3)
    assert part.substitute


def test_a_part_without_substitute_is_worth_everything(stain):
    only = varied(stain, {"candidates.cameras": "mono-5mp"})
    camera = next(part for part in worth(only).parts if part.kind == "camera")
    assert camera.change == pytest.approx(solve(only, alternatives=0).optimum.cnr, rel=2e-5)
    assert "no camera is left" in camera.reason
    with pytest.raises(InfeasibleError):
        without_part(only, "camera", "mono-5mp")


def test_additions_that_help_are_found(stain):
    violet = stain.catalog.leds["violet-405-a"]
    poor = varied(stain, {"candidates.leds": ["blue-470-a", "blue-450-a"]})
    strong = violet.replaced(id="violet-x", radiant_flux_w=1.2)
    useless = violet.replaced(id="violet-y", radiant_flux_w=1e-9)
    others = replace(load_catalog("demo"), leds={led.id: led for led in (strong, useless)}, filters={}, cameras={})
    found = worth(poor, others=others)
    assert found.tried == 2
    assert [(part.kind, part.id) for part in found.additions] == [("led", "violet-x")]
    gain = found.additions[0]
    direct = solve(with_part(poor, others, "led", "violet-x"), alternatives=0)
    assert gain.certain and gain.cnr == pytest.approx(direct.optimum.cnr, rel=2e-5)
    table = found.table()
    assert list(table["role"]) == ["in use"] * len(found.parts) + ["to add"]
    assert math.isnan(table["cnr_lost"].iloc[-1])


def test_parts_are_removed_and_added_by_name(stain, tmp_path):
    rest = restocked(stain, removed=[("led", "violet-405-a")])
    assert "violet-405-a" not in [channel.id for channel in rest.channels]
    file = tmp_path / "mine.toml"
    file.write_text(
        '[[led]]\nid = "mine-1"\nsource = "test"\npeak_nm = 410\nfwhm_nm = 15\nradiant_flux_mw = 900\n'
        "rated_current_ma = 350\nforward_voltage_v = 3.3\nthermal_resistance_k_per_w = 5\nmax_junction_c = 120\n",
        encoding="utf-8",
    )
    more = restocked(stain, added=[file])
    assert "mine-1" in [channel.id for channel in more.channels]
    assert len(more.channels) == len(stain.channels) + 1


def test_a_swapped_catalogue_keeps_the_scene(stain, tmp_path):
    (tmp_path / "catalog.toml").write_text('name = "two"\nsource = "test"\n', encoding="utf-8")
    (tmp_path / "parts.toml").write_text(
        '[[led]]\nid = "violet-a"\nsource = "test"\npeak_nm = 410\nfwhm_nm = 15\nradiant_flux_mw = 900\n'
        "rated_current_ma = 350\nforward_voltage_v = 3.3\nthermal_resistance_k_per_w = 5\nmax_junction_c = 120\n"
        '[[camera]]\nid = "plain"\nsource = "test"\npixel_pitch_um = 3.45\nfull_well_e = 10000\nbits = 12\n'
        "read_noise_e = 3\nconversion_gain_dn_per_e = 0.4\ndark_current_e_per_s = 10\ndark_reference_c = 25\n"
        "dark_doubling_k = 7\ndsnu_e = 1\nprnu_percent = 1\nexposure_min_us = 10\nexposure_max_us = 100000\n"
        "exposure_step_us = 1\n"
        '[[camera.channels]]\nname = "mono"\nsilicon = { pixel = "photodiode", dead_layer_um = 0.1, '
        "collection_depth_um = 5 }\n",
        encoding="utf-8",
    )
    open_choice = varied(stain, {"candidates.leds": "all", "candidates.cameras": "all", "candidates.filters": "none"})
    swapped = restocked(open_choice, catalog=tmp_path)
    assert [channel.id for channel in swapped.channels] == ["violet-a"]
    assert [camera.id for camera in swapped.cameras] == ["plain"]
    assert swapped.target.id == stain.target.id


@pytest.mark.parametrize(
    "choice, wanted",
    [
        ("all", "all"),
        ("none", ["x"]),
        ("blue-1", ["blue-1", "x"]),
        (("a",), ["a", "x"]),
        ("price < 4", "(price < 4) or id in ['x']"),
    ],
)
def test_choices_take_further_parts_in(choice, wanted):
    assert extended(choice, ["x"]) == wanted
