"""LEDs, filters and cameras as data sheets state them: flux, droop, transmittance, response."""

import numpy as np
import pytest
from catalog_files import CAMERA, CHANNEL, FILTER, LED, write_catalog, write_part

from codesign.catalog import Camera, Filter, Led, load_catalog, parse_parts
from codesign.errors import CatalogError, CoverageError
from codesign.physics import filters as model

GRID = np.arange(300.0, 1201.0, 1.0)


def led(**changes):
    table = {**LED, **changes}
    return Led.from_table({key: value for key, value in table.items() if value is not None})


def optical_filter(**changes):
    table = {**FILTER, **changes}
    return Filter.from_table({key: value for key, value in table.items() if value is not None})


def bare_filter(**fields):
    return Filter.from_table({"id": "f", "source": "test", **fields})


@pytest.fixture
def folder(tmp_path):
    return write_catalog(tmp_path)


# --- LEDs ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "field", [{"radiant_flux_mw": 250}, {"radiant_flux_mw": None, "radiant_flux_w": 0.25}]
)
def test_led_spectrum_integrates_to_its_radiant_flux(field):
    part = led(**field)
    assert part.flux_w() == pytest.approx(0.25)
    assert np.trapezoid(part.spectrum(GRID), GRID) == pytest.approx(0.25, rel=1e-9)


@pytest.mark.published
def test_led_lumens_become_watts():
    # 100 lm of Ohno's LED with peak 525 nm and width parameter 33 nm (FWHM 0.92182 * 33) are 0.200239 W:
    # CIE V(lambda), 683 lm/W; Ohno 2005, Opt. Eng. 44(11) 111302.
    part = led(
        peak_nm=525, fwhm_nm=0.92182 * 33, radiant_flux_mw=None, luminous_flux_lm=100, forward_voltage_v=3
    )
    # The printed value sums V at whole nanometres; between them V is interpolated here: 3e-5.
    assert part.flux_w() == pytest.approx(0.200239, rel=1e-4)


def test_led_cut_by_the_grid_loses_the_light_outside():
    part = led()
    half = np.arange(850.0, 1201.0, 0.5)
    assert np.trapezoid(part.spectrum(half), half) == pytest.approx(part.flux_w() / 2, rel=1e-3)


def test_led_peak_shift_moves_the_spectrum_without_changing_its_flux():
    part = led()
    moved = part.spectrum(GRID, peak_shift_nm=7.0)
    assert GRID[np.argmax(moved)] == 857
    np.testing.assert_allclose(moved, part.spectrum(GRID - 7.0), rtol=1e-12)
    assert np.trapezoid(moved, GRID) == pytest.approx(part.flux_w(), rel=1e-9)


def test_led_support_holds_999_permille_of_the_flux():
    part = led()
    lo, hi = part.support()
    inside = np.linspace(lo, hi, 2001)
    assert np.trapezoid(part.spectrum(inside), inside) == pytest.approx(0.999 * part.flux_w(), rel=1e-5)


def test_led_curve_keeps_its_own_peak_and_flux(folder):
    (folder / "curves" / "led.csv").write_text(
        "wavelength_nm,relative\n400,0\n450,1\n460,0.2\n600,0.4\n700,0\n", encoding="utf-8"
    )
    write_part(folder, "led", {**LED, "peak_nm": None, "fwhm_nm": None, "curve": "curves/led.csv"})
    part = load_catalog(folder).leds["nir-850-a"]
    assert part.peak() == 450
    assert np.trapezoid(part.spectrum(GRID), GRID) == pytest.approx(0.29, rel=1e-9)
    assert part.spectrum([390.0, 710.0]).tolist() == [0, 0]


def test_led_segments_are_the_droop_curve():
    part = led(flux_curve=[[100, 0.3, 1.5], [350, 1, 1.65], [1000, 2.6, 1.9]], max_current_ma=1000)
    widths, flux, power = part.segments(1000)
    assert widths == pytest.approx([0.1, 0.25, 0.65])
    assert widths @ flux == pytest.approx(2.6)
    assert widths[:2] @ flux[:2] == pytest.approx(1.0)
    assert widths @ power == pytest.approx(1.9)
    assert (np.diff(flux) < 0).all() and (np.diff(power) > 0).all()


def test_led_segments_end_at_the_current_asked_for():
    part = led(flux_curve=[[100, 0.3], [350, 1], [1000, 2.6]], max_current_ma=1000)
    widths, flux, _ = part.segments(500)
    assert widths.sum() == pytest.approx(0.5)
    assert widths @ flux == pytest.approx(1 + 150 * 1.6 / 650)
    assert part.segments(350)[0].size == 2
    with pytest.raises(CatalogError, match="current 1200 mA is outside"):
        part.segments(1200)


def test_led_without_droop_curve_is_one_straight_segment():
    widths, flux, power = led().segments(350)
    np.testing.assert_allclose([widths, flux, power], [[0.35], [1 / 0.35], [1.65]], rtol=1e-12)


def test_led_pulse_rating_raises_the_largest_current():
    bracket = {"max_width_us": 100, "max_duty": 0.1, "max_current_ma": 1500}
    part = led(pulse=[bracket])
    assert (part.continuous_current_ma, part.largest_current_ma) == (350, 1500)
    assert part.segments(1500)[0].sum() == pytest.approx(1.5)


def test_replaced_part_is_validated_and_computed_anew():
    part = led()
    assert part.spectrum([850.0])[0] > 0
    moved = part.replaced(peak_nm=940)
    assert (moved.peak(), part.peak()) == (940, 850)
    assert part.model_copy(update={"peak_nm": 660}).support()[1] < 800
    with pytest.raises(CatalogError, match="forward_voltage_v is -1"):
        part.replaced(forward_voltage_v=-1)


def test_parts_are_frozen_and_compare_by_value():
    assert led() == led()
    assert led() != led(price=3)
    with pytest.raises(ValueError, match="frozen"):
        led().price = 3


# --- filters ------------------------------------------------------------------------------------------


def test_filter_at_normal_incidence_is_the_model():
    expected = model.bandpass(GRID, 850, 40, 6, 0.92, 4)
    np.testing.assert_allclose(optical_filter(effective_index=1.8).transmittance(GRID), expected, rtol=1e-12)


def test_interference_filter_shifts_with_tilt_and_absorbing_one_does_not():
    tilted = optical_filter(effective_index=1.8).transmittance(GRID, [20.0], [1.0])
    centre = GRID[tilted > 0.46].mean()
    assert centre == pytest.approx(850 * model.tilt_factor(20.0, 1.8), abs=0.6)
    np.testing.assert_array_equal(
        optical_filter().transmittance(GRID, [20.0], [1.0]), optical_filter().transmittance(GRID)
    )


def test_cone_average_is_the_weighted_sum_of_single_angles():
    part = optical_filter(effective_index=1.7)
    single = [part.transmittance(GRID, [angle], [1.0]) for angle in (0.0, 8.0, 15.0)]
    cone = part.transmittance(GRID, [0.0, 8.0, 15.0], [0.5, 0.3, 0.2])
    np.testing.assert_allclose(cone, np.array([0.5, 0.3, 0.2]) @ np.array(single), rtol=1e-12)


def test_filter_is_open_outside_its_blocked_range():
    part = optical_filter(blocking_from_nm=500, blocking_to_nm=1000)
    values = part.transmittance([450.0, 700.0, 850.0, 1100.0])
    assert values == pytest.approx([0.92, 1e-4, 0.92, 0.92], rel=1e-3)


def test_neutral_and_empty_filters():
    assert bare_filter(kind="neutral", optical_density=2).transmittance(GRID) == pytest.approx(0.01)
    assert (bare_filter(kind="none").transmittance(GRID) == 1).all()


@pytest.mark.published
def test_glass_follows_bouguer_lambert_with_two_faces(folder):
    # Internal 0.5 at 1 mm is 0.125 at 3 mm; two faces of n 1.5 pass 2n/(n2+1) = 0.923077 (Fresnel).
    glass = {
        "id": "bp-850",
        "source": "test",
        "kind": "glass",
        "curve": "curves/filter.csv",
        "unit": "fraction",
    }
    glass |= {"reference_thickness_mm": 1, "thickness_mm": 3, "refractive_index": 1.5}
    write_part(folder, "filter", glass)
    part = load_catalog(folder).filters["bp-850"]
    assert part.transmittance([400.0])[0] == pytest.approx(0.125 * 0.923077, rel=1e-6)
    assert part.range() == (400, 1000)


def test_curve_filter_in_percent_is_covered_and_tilts(folder):
    (folder / "curves" / "filter.csv").write_text("wavelength_nm,t\n400,10\n1000,70\n", encoding="utf-8")
    table = {
        "id": "bp-850",
        "source": "test",
        "kind": "curve",
        "curve": "curves/filter.csv",
        "unit": "percent",
    }
    write_part(folder, "filter", {**table, "effective_index": 2.0})
    part = load_catalog(folder).filters["bp-850"]
    assert part.transmittance([700.0])[0] == pytest.approx(0.4)
    assert part.transmittance([700.0], [10.0], [1.0])[0] > 0.4
    for cone in ((), ([10.0], [1.0])):
        with pytest.raises(CoverageError, match="curve runs 400 to 1000 nm, but 350 to 900 nm"):
            part.transmittance([350.0, 900.0], *cone)


def test_stack_multiplies_its_parts_and_meets_their_ranges(folder):
    rows = [
        {"id": "nd", "source": "t", "kind": "neutral", "optical_density": 1},
        {"id": "glass", "source": "t", "kind": "curve", "curve": "curves/filter.csv", "unit": "fraction"},
        {"id": "pair", "source": "t", "kind": "stack", "parts": ["nd", "glass"]},
        {"id": "triple", "source": "t", "kind": "stack", "parts": ["pair", "nd"]},
    ]
    catalog = load_catalog(folder).with_parts(parse_parts({"filter": rows}, folder, "problem.toml"))
    pair, triple = catalog.filters["pair"], catalog.filters["triple"]
    assert pair.transmittance([600.0], catalog=catalog)[0] == pytest.approx(0.06)
    assert triple.transmittance([600.0], catalog=catalog)[0] == pytest.approx(0.006)
    assert pair.range(catalog) == (400, 1000)
    with pytest.raises(CatalogError, match="pass the catalog"):
        pair.transmittance([600.0])


# --- cameras ------------------------------------------------------------------------------------------


def camera_in(folder, channel=CHANNEL, **changes):
    write_part(folder, "camera", {**CAMERA, "channels": [{**CHANNEL, **channel}], **changes})
    return load_catalog(folder).cameras["mono-5mp"]


def test_camera_curve_must_cover_unless_it_states_zero(folder):
    strict = camera_in(folder)
    assert strict.quantum_efficiency("mono", [500.0])[0] == pytest.approx(0.55)
    assert strict.response_range("mono") == (400, 1000)
    with pytest.raises(CoverageError, match=r"camera 'mono-5mp': curves/qe\.csv"):
        strict.quantum_efficiency("mono", [500.0, 1100.0])
    blind = camera_in(folder, {"outside": "zero"})
    assert blind.quantum_efficiency("mono", [500.0, 1100.0]) == pytest.approx([0.55, 0])
    assert blind.response_range("mono") is None


@pytest.mark.published
def test_camera_responsivity_becomes_quantum_efficiency(folder):
    # An ideal detector has 0.443605 A/W at 550 nm (CODATA hc/e), so 0.26616295 A/W is 0.6.
    text = "wavelength_nm,r\n540,0.26616295\n550,0.26616295\n560,0.26616295\n"
    (folder / "curves" / "qe.csv").write_text(text, encoding="utf-8")
    part = camera_in(folder, {"quantity": "responsivity_a_per_w", "unit": "a_per_w"})
    assert part.quantum_efficiency("mono", [550.0])[0] == pytest.approx(0.6, rel=1e-7)


def test_camera_silicon_model_ends_at_the_band_gap():
    silicon = {"pixel": "photodiode", "dead_layer_um": 0.05, "collection_depth_um": 20}
    part = Camera.from_table({**CAMERA, "channels": [{"name": "mono", "silicon": silicon}]})
    values = part.quantum_efficiency("mono", [550.0, 850.0, 1000.0, 1150.0, 1650.0])
    assert (values[:3] > 0).all() and (np.diff(values[:3]) < 0).all()
    assert values[3:].tolist() == [0, 0]


def test_camera_gains_inherit_what_is_not_stated(folder):
    part = camera_in(folder, gains=[{"gain_db": 0}, {"gain_db": 20, "read_noise_e": 1.5}])
    base, high = part.gain_settings()
    assert (base.conversion_gain_dn_per_e, base.read_noise_e, base.full_well_e) == (0.4, 2.4, 10000)
    assert high.conversion_gain_dn_per_e == pytest.approx(4.0)
    assert (high.read_noise_e, high.full_well_e) == (1.5, 10000)


def test_camera_dark_current_doubles_and_converts_from_area(folder):
    per_pixel = camera_in(folder)
    assert per_pixel.dark_current(32) == pytest.approx(2 * per_pixel.dark_current(25))
    # 1 nA/cm2 over (3.45 um)2 = 1.190e-7 cm2 is 1.190e-16 A, divided by 1.602177e-19 C.
    per_area = per_pixel.replaced(dark_current_e_per_s=None, dark_current_na_per_cm2=1.0)
    assert per_area.dark_current(25) == pytest.approx(1.190250e-16 / 1.602176634e-19, rel=1e-6)


def test_camera_names_its_channels(folder):
    part = camera_in(folder)
    assert part.channel_names == ("mono",)
    with pytest.raises(CatalogError, match="no channel 'moon', did you mean 'mono'"):
        part.quantum_efficiency("moon", [500.0])
