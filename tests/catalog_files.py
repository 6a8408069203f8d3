"""A small good catalogue on disk, for tests that spoil one thing in it."""

import json

import pytest

from codesign.catalog import load_catalog
from codesign.errors import CatalogError

LED = {
    "id": "nir-850-a",
    "source": "test",
    "peak_nm": 850,
    "fwhm_nm": 32,
    "radiant_flux_mw": 290,
    "rated_current_ma": 350,
    "forward_voltage_v": 1.65,
    "thermal_resistance_k_per_w": 6,
    "max_junction_c": 115,
}
FILTER = {
    "id": "bp-850",
    "source": "test",
    "kind": "bandpass",
    "center_nm": 850,
    "fwhm_nm": 40,
    "edge_width_nm": 6,
    "peak_transmittance": 0.92,
    "blocking_od": 4,
}
CHANNEL = {"name": "mono", "curve": "curves/qe.csv", "quantity": "quantum_efficiency", "unit": "fraction"}
CAMERA = {
    "id": "mono-5mp",
    "source": "test",
    "pixel_pitch_um": 3.45,
    "full_well_e": 10000,
    "bits": 12,
    "read_noise_e": 2.4,
    "conversion_gain_dn_per_e": 0.4,
    "dark_current_e_per_s": 3,
    "dark_reference_c": 25,
    "dark_doubling_k": 7,
    "dsnu_e": 1,
    "prnu_percent": 0.5,
    "exposure_min_us": 20,
    "exposure_max_us": 100000,
    "exposure_step_us": 1,
    "channels": [CHANNEL],
}
SURFACE = {"id": "paper", "source": "test", "curve": "curves/paper.csv", "unit": "fraction"}
BASE = {"led": LED, "filter": FILTER, "camera": CAMERA, "surface": SURFACE}
GOOD_CURVE = "wavelength_nm,value\n400,0.5\n600,0.6\n1000,0.4\n"
CURVES = ("qe.csv", "paper.csv", "led.csv", "filter.csv")


def toml_value(value):
    """Return a value as TOML text."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {toml_value(item)}" for key, item in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(toml_value, value)) + "]"
    if not isinstance(value, str):
        return repr(value)
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")  # TOML knows no surrogate pairs


def write_part(root, kind, table):
    """Write the file of one kind with a single part; fields that are None are left out."""
    lines = [
        f"[[{kind}]]",
        *(f"{key} = {toml_value(value)}" for key, value in table.items() if value is not None),
    ]
    (root / f"{kind}s.toml").write_text("\n".join(lines) + "\n", encoding="utf-8")


def write_catalog(root):
    """Write a catalogue with one good part of each kind and its curve files."""
    (root / "catalog.toml").write_text('name = "t"\nsource = "test"\n', encoding="utf-8")
    for kind, table in BASE.items():
        write_part(root, kind, table)
    (root / "curves").mkdir()
    for name in CURVES:
        (root / "curves" / name).write_text(GOOD_CURVE, encoding="utf-8")
    return root


def message_of(root, error=CatalogError):
    """Return the message of loading the folder, after checking that it is one line."""
    with pytest.raises(error) as caught:
        load_catalog(root, check=True)
    message = str(caught.value)
    assert "\n" not in message, "an error is one line"
    assert caught.value.exit_code == 2
    return message
