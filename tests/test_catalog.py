"""Surfaces and their clutter; the catalogue folder."""

import json

import numpy as np
import pytest
from catalog_files import BASE, LED, SURFACE, write_catalog, write_part

from codesign.catalog import Surface, load_catalog, parse_parts
from codesign.errors import CatalogError, CoverageError


@pytest.fixture
def folder(tmp_path):
    return write_catalog(tmp_path)


# --- surfaces -----------------------------------------------------------------------------------------


@pytest.fixture
def textured(folder):
    rng = np.random.default_rng(11)
    wavelength = np.arange(400, 1001, 20)
    samples = 40 + 5 * rng.standard_normal((6, 1)) + rng.standard_normal((6, wavelength.size))
    header = "wavelength_nm," + ",".join(f"s{i}" for i in range(6))
    rows = [
        f"{w}," + ",".join(f"{v:.6f}" for v in column)
        for w, column in zip(wavelength, samples.T, strict=True)
    ]
    (folder / "curves" / "paper.csv").write_text("\n".join([header, *rows]), encoding="utf-8")
    write_part(folder, "surface", {**SURFACE, "unit": "percent"})
    return load_catalog(folder).surfaces["paper"]


def test_surface_samples_are_fractions(textured):
    assert textured.samples.values.shape == (6, 31)
    assert textured.samples.values.mean() == pytest.approx(0.4, abs=0.06)
    assert textured.range() == (400, 1000)


def test_clutter_factor_reproduces_the_sample_covariance(textured):
    grid = np.arange(400.0, 1001.0, 7.0)
    samples = textured.samples.resample(grid)
    factor = textured.clutter_factor(grid)
    assert len(factor) == 5, "six samples span five directions about their mean"
    np.testing.assert_allclose(factor.T @ factor, np.cov(samples, rowvar=False), atol=1e-12)
    np.testing.assert_allclose(textured.mean(grid), samples.mean(axis=0), rtol=1e-12)


def test_clutter_factor_drops_directions_without_spread(textured):
    twice = textured.replaced(columns=["s0", "s1"])
    assert twice.clutter_factor(np.arange(400.0, 1001.0, 5.0)).shape[0] == 1


def test_single_sample_has_no_clutter(textured):
    single = textured.replaced(columns=["s3"])
    assert single.clutter_factor([500.0, 600.0]).shape == (0, 2)
    assert single.mean([500.0])[0] == pytest.approx(textured.samples.resample([500.0])[3, 0])


def test_identical_samples_have_no_clutter(folder):
    (folder / "curves" / "paper.csv").write_text(
        "wavelength_nm,a,b\n400,0.5,0.5\n900,0.6,0.6\n", encoding="utf-8"
    )
    part = load_catalog(folder).surfaces["paper"]
    assert part.clutter_factor([500.0, 600.0]).shape == (0, 2)


def test_surface_does_not_extrapolate(textured):
    with pytest.raises(CoverageError, match=r"400 to 1000 nm, but 380 to 900 nm"):
        textured.mean([380.0, 900.0])


# --- loading ------------------------------------------------------------------------------------------


def test_csv_rows_and_toml_tables_give_the_same_parts(folder):
    curve = [[100, 0.3, 1.5], [350, 1, 1.65], [1000, 2.6, 1.9]]
    pulse = [{"max_width_us": 100, "max_duty": 0.1, "max_current_ma": 1000}]
    table = {**LED, "flux_curve": curve, "pulse": pulse, "tags": ["nir", "cheap"], "invented": True}
    write_part(folder, "led", table)
    from_toml = load_catalog(folder).leds["nir-850-a"]
    cells = [json.dumps(v) if isinstance(v, list | bool) else str(v) for v in table.values()]
    quoted = ",".join('"' + cell.replace('"', '""') + '"' for cell in cells)
    (folder / "leds.toml").unlink()
    (folder / "leds.csv").write_text(f"# table\n{','.join(table)},price\n{quoted},\n", encoding="utf-8")
    from_csv = load_catalog(folder).leds["nir-850-a"]
    assert from_csv.model_dump() == from_toml.model_dump()


def test_curves_are_read_on_first_use_and_again_when_changed(folder):
    path = folder / "curves" / "paper.csv"
    path.write_text("wavelength_nm,a\n400,broken\n500,1\n", encoding="utf-8")
    part = load_catalog(folder).surfaces["paper"]
    with pytest.raises(CatalogError, match="'broken', must be a number"):
        part.mean([400.0])
    path.write_text("wavelength_nm,a\n400,0.25\n500,0.25\n", encoding="utf-8")
    assert part.mean([400.0]).tolist() == [0.25]


def test_part_lookup_names_the_nearest(folder):
    catalog = load_catalog(folder)
    assert catalog.part("led", "nir-850-a") is catalog.leds["nir-850-a"]
    with pytest.raises(CatalogError, match="no led 'nir-85-a', did you mean 'nir-850-a'"):
        catalog.part("led", "nir-85-a")
    with pytest.raises(CatalogError, match="no parts of kind 'leds', did you mean 'led'"):
        catalog.parts("leds")


def test_inline_parts_join_the_catalogue_but_may_not_replace(folder):
    catalog = load_catalog(folder)
    inline = parse_parts({"surface": [{**SURFACE, "id": "mine"}]}, folder, "problem.toml")
    assert set(catalog.with_parts(inline).surfaces) == {"paper", "mine"}
    assert set(catalog.surfaces) == {"paper"}, "the catalogue itself stays as it was"
    again = parse_parts({"surface": [SURFACE]}, folder, "problem.toml")
    with pytest.raises(
        CatalogError, match=r"problem\.toml: surface 'paper': id is taken already in surfaces\.toml"
    ):
        catalog.with_parts(again)


def test_a_part_built_in_a_program_names_itself_in_messages():
    part = Surface.from_table({**SURFACE, "curve": __file__})
    with pytest.raises(CatalogError, match=r"^surface 'paper': "):
        part.mean([400.0])


def test_all_kinds_are_read_from_one_folder(folder):
    catalog = load_catalog(folder, check=True)
    assert {kind: list(catalog.parts(kind)) for kind in BASE} == {
        "led": ["nir-850-a"],
        "filter": ["bp-850"],
        "camera": ["mono-5mp"],
        "surface": ["paper"],
    }


def test_held_edges_extend_a_surface_by_what_it_states(tmp_path):
    (tmp_path / "s.csv").write_text("wavelength_nm,a,b\n500,0.2,0.3\n600,0.4,0.5\n", encoding="utf-8")
    table = {"id": "s", "source": "test", "curve": "s.csv", "unit": "fraction"}
    plain = Surface.from_table(table, base_dir=tmp_path)
    held = Surface.from_table({**table, "hold_edges_nm": 30}, base_dir=tmp_path)
    assert plain.range() == (500, 600)
    assert held.range() == (470, 630)
    np.testing.assert_allclose(held.mean([475, 550, 625]), [0.25, 0.35, 0.45])
    with pytest.raises(CoverageError):
        plain.mean([475])
