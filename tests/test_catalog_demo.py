"""The demo catalogue is complete, invented, plausible and quick to load."""

import re
import time

import numpy as np
import pytest

from codesign.catalog import Camera, Filter, Led, Surface, demo_catalog_path, load_catalog
from codesign.spectra import read_table

GRID = np.arange(340.0, 1751.0, 5.0)
DEMO = load_catalog("demo")
KINDS = ("led", "filter", "camera", "surface")
PARTS = [part for kind in KINDS for part in DEMO.parts(kind).values()]
CURVES = sorted((demo_catalog_path() / "curves").glob("*.csv"))


def named(parts):
    return {"argvalues": list(parts), "ids": lambda part: f"{part.table_name}-{part.id}"}


@pytest.mark.parametrize(("kind", "least"), [("led", 40), ("filter", 40), ("camera", 8), ("surface", 20)])
def test_demo_has_enough_parts(kind, least):
    assert len(DEMO.parts(kind)) >= least


def test_demo_loads_in_a_tenth_of_a_second_without_reading_curves():
    def seconds():
        started = time.perf_counter()
        load_catalog("demo")
        return time.perf_counter() - started

    assert min(seconds() for _ in range(5)) < 0.1


@pytest.mark.parametrize("part", **named(PARTS))
def test_every_part_loads_and_says_it_is_invented(part):
    part.check()
    assert part.invented
    assert "invented" in part.source and part.description.startswith("invented ")


@pytest.mark.parametrize("path", CURVES, ids=lambda path: path.stem)
def test_every_curve_file_says_it_is_invented_and_is_used(path):
    assert path.read_text(encoding="utf-8").startswith("# Invented for demonstration: ")
    steps = np.diff(read_table(path).spectrum.wavelength_nm)
    assert set(steps) <= {5.0, 10.0}
    used = {file for part in PARTS for file in part.curve_files().values()}
    assert f"curves/{path.name}" in used


def test_leds_span_365_to_1650_nm_without_large_gaps():
    peaks = np.sort([led.peak() for led in DEMO.leds.values()])
    assert peaks[0] <= 370 and peaks[-1] >= 1650
    assert np.diff(peaks).max() <= 155


@pytest.mark.parametrize("led", **named(DEMO.leds.values()))
def test_led_figures_are_plausible(led: Led):
    efficiency = led.flux_w() / (led.rated_current_ma * 1e-3 * led.forward_voltage_v)
    assert 0.02 < efficiency < 0.7
    assert 2.5 <= led.thermal_resistance_k_per_w <= 12
    assert -0.011 <= led.flux_temperature_coefficient_per_k < 0
    assert 0 < led.peak_shift_nm_per_k < 0.7
    assert 0 < led.price < 50
    photon_volts = 1239.84 / led.peak()
    assert led.forward_voltage_v > 0.9 * photon_volts, "a diode needs about the photon's voltage"
    assert led.pulse and led.largest_current_ma == led.pulse[0].max_current_ma


def test_led_efficiency_falls_in_the_green_and_in_the_long_infrared():
    def efficiency(name):
        led = DEMO.leds[name]
        return led.flux_w() / (led.rated_current_ma * 1e-3 * led.forward_voltage_v)

    assert efficiency("green-525-a") < 0.6 * efficiency("blue-450-a")
    order = ("nir-850-a", "nir-1020-a", "swir-1100-a", "swir-1650-a")
    assert sorted(order, key=efficiency, reverse=True) == list(order)
    assert efficiency("swir-1650-a") < 0.1 * efficiency("nir-850-a")


def test_most_leds_have_two_or_three_pulse_brackets():
    counts = [len(led.pulse) for led in DEMO.leds.values()]
    assert sum(count >= 2 for count in counts) > len(counts) / 2 and max(counts) == 3


@pytest.mark.parametrize("led", **named(led for led in DEMO.leds.values() if "white" in led.tags))
def test_white_leds_have_a_blue_die_and_a_phosphor(led):
    grid = np.arange(400.0, 781.0, 5.0)
    values = led.spectrum(grid)
    dip = values[(grid > 465) & (grid < 500)].min()
    assert dip < values[(grid > 440) & (grid < 460)].max() / 2
    assert dip < values[grid > 540].max()


@pytest.mark.parametrize("part", **named(DEMO.filters.values()))
def test_filter_transmits_between_nothing_and_everything(part: Filter):
    lo, hi = part.range(DEMO) or (340, 1750)
    grid = GRID[(lo <= GRID) & (hi >= GRID)]
    values = part.transmittance(grid, [0.0, 8.0], [0.6, 0.4], DEMO)
    assert values.shape == grid.shape
    assert (values >= 0).all() and (values <= 1).all()
    assert values.max() > 0.09


def test_filters_are_of_all_kinds_and_some_leak():
    assert {part.kind for part in DEMO.filters.values()} == {
        "curve",
        "bandpass",
        "longpass",
        "shortpass",
        "neutral",
        "glass",
        "stack",
        "none",
    }
    leaky = DEMO.filters["bp-525-20"]
    assert leaky.transmittance([850.0])[0] > 0.5
    assert DEMO.filters["stack-525-nir-cut"].transmittance([850.0], catalog=DEMO)[0] < 1e-3


CHANNELS = [(camera, name) for camera in DEMO.cameras.values() for name in camera.channel_names]


@pytest.mark.parametrize(("camera", "channel"), CHANNELS, ids=lambda value: getattr(value, "id", value))
def test_camera_response_is_plausible(camera: Camera, channel):
    values = camera.quantum_efficiency(channel, GRID)
    assert (values >= 0).all() and 0.3 < values.max() < 0.95
    cutoff = 1700 if camera.id.startswith("ingaas") else 1110
    assert (values[cutoff < GRID] < 0.05).all()


@pytest.mark.parametrize("camera", **named(DEMO.cameras.values()))
def test_camera_figures_agree_with_each_other(camera: Camera):
    top = 2**camera.bits - 1
    for gain in camera.gain_settings():
        full_scale = gain.full_well_e * gain.conversion_gain_dn_per_e
        assert full_scale == pytest.approx(top, rel=0.02)
        assert gain.full_well_e <= camera.full_well_e and gain.read_noise_e <= camera.read_noise_e
    assert 1 <= len(camera.gains) <= 3
    assert 200 < camera.full_well_e / camera.pixel_pitch_um**2 < 4000
    assert 6 <= camera.dark_doubling_k <= 9
    assert camera.dark_current(25 + camera.dark_doubling_k) == pytest.approx(2 * camera.dark_current(25))


def test_cameras_cover_the_promised_kinds():
    models = [
        channel.silicon.pixel for c in DEMO.cameras.values() for channel in c.channels if channel.silicon
    ]
    assert sorted(models) == ["mos", "photodiode"]
    assert any(len(camera.channels) == 3 for camera in DEMO.cameras.values())
    enhanced = DEMO.cameras["nir-2mp"].quantum_efficiency("mono", [940.0])[0]
    assert enhanced > 2 * DEMO.cameras["mono-5mp"].quantum_efficiency("mono", [940.0])[0]
    assert DEMO.cameras["ingaas-vga"].dark_current(25) > 1000 * DEMO.cameras["deep-2mp"].dark_current(25)


@pytest.mark.parametrize("surface", **named(DEMO.surfaces.values()))
def test_surface_reflects_between_nothing_and_everything(surface: Surface):
    samples = surface.samples
    assert surface.range()[0] == 340 and surface.range()[1] >= 1100
    assert (samples.values > 0).all() and (samples.values < 1.05).all()
    spread = samples.values.std(axis=0) / samples.values.mean(axis=0)
    assert np.median(spread) < 0.12, "samples of one surface resemble each other"


def test_most_surfaces_reach_1750_nm():
    assert sum(surface.range()[1] >= 1750 for surface in DEMO.surfaces.values()) >= 20


# target, background, band where the contrast is best and its least size there, band where it is small
PAIRS = [
    ("apple-bruise", "apple-sound", (740, 940), 0.04, (400, 560)),
    ("cloth-stain-yellow", "cloth-white", (405, 450), 0.05, (600, 1000)),
    ("ink-a", "ink-b", (695, 715), 0.08, (400, 600)),
    ("steel-film", "steel-bare", (830, 880), 0.04, (590, 594)),
    ("board-moist", "board-dry", (1430, 1470), 0.09, (950, 1300)),
    ("web-print-pale", "web-paper", (600, 660), 0.04, (850, 1000)),
    ("glue-clear", "card-white", (345, 385), 0.05, (500, 1000)),
]


@pytest.mark.parametrize(
    ("target", "background", "best", "least", "poor"), PAIRS, ids=lambda v: v if isinstance(v, str) else ""
)
def test_demo_pair_differs_little_and_where_it_should(target, background, best, least, poor):
    def contrast(band):
        grid = np.arange(band[0], band[1] + 0.1, 2.0)
        mean = DEMO.surfaces[background].mean(grid)
        return np.abs(DEMO.surfaces[target].mean(grid) / mean - 1)

    assert least < contrast(best).max() < 0.2, "hard to see, but there"
    assert contrast(poor).max() < 0.5 * contrast(best).max()


def test_readme_describes_every_field_and_says_invented():
    text = (demo_catalog_path().parent / "README.md").read_text(encoding="utf-8")
    words = set(re.findall(r"`([a-z0-9_]+)`|\b([a-z]+(?:_[a-z0-9]+)+)\b", text))
    known = {word for pair in words for word in pair}
    for model in (Led, Filter, Camera, Surface):
        assert not model.model_fields.keys() - known
    assert "Every part in `demo/` is invented" in text
