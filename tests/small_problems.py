"""A small problem with flat inline parts, whose numbers can be followed by hand; tests change one thing in it."""

import copy
from pathlib import Path
from typing import Any

from codesign import Design, build_problem
from codesign.catalog import Catalog
from codesign.problem import Problem

#: Reflectance samples: mean 0.4 and 0.5, standard deviation (divisor k - 1) 0.02 and 0.01; one sample, no clutter.
SAMPLES = {
    "target": (0.38, 0.40, 0.42),
    "background": (0.49, 0.50, 0.51),
    "twin": (0.49, 0.50, 0.51),
    "bright": (0.9,),
    "dim": (0.1,),
}

QUANTUM_EFFICIENCY = 0.6

CAMERA = {
    "id": "bench-camera",
    "source": "test",
    "pixel_pitch_um": 3.45,
    "full_well_e": 10000,
    "bits": 12,
    "read_noise_e": 3.0,
    "conversion_gain_dn_per_e": 0.4,
    "black_level_dn": 10,
    "dark_current_e_per_s": 100,
    "dark_reference_c": 25,
    "dark_doubling_k": 7,
    "dsnu_e": 2.0,
    "prnu_percent": 1.0,
    "exposure_min_us": 10,
    "exposure_max_us": 100000,
    "exposure_step_us": 1,
    "gains": [{"gain_db": 0}, {"gain_db": 6}],
    "channels": [
        {"name": "mono", "curve": "qe.csv", "quantity": "quantum_efficiency", "unit": "fraction"},
    ],
}

#: 0.1 W at 100 mA and 2 V, straight line to 200 mA.
LED = {
    "id": "red",
    "source": "test",
    "peak_nm": 630,
    "fwhm_nm": 2,
    "radiant_flux_w": 0.1,
    "rated_current_ma": 100,
    "max_current_ma": 200,
    "forward_voltage_v": 2.0,
    "thermal_resistance_k_per_w": 10,
    "max_junction_c": 120,
}
GREEN = {**LED, "id": "green", "peak_nm": 530}

FILTERS = [
    {"id": "clear", "source": "test", "kind": "curve", "curve": "clear.csv", "unit": "percent"},
    {"id": "half", "source": "test", "kind": "neutral", "optical_density": 0.30103},
    {
        "id": "red-pass",
        "source": "test",
        "kind": "bandpass",
        "center_nm": 630,
        "fwhm_nm": 40,
        "edge_width_nm": 5,
        "peak_transmittance": 0.9,
        "blocking_od": 4,
        "effective_index": 1.8,
    },
]

TABLE = {
    "title": "Small problem",
    "scene": {"target": "target", "background": "background", "guards": ["bright"]},
    "candidates": {"leds": ["red", "green"], "filters": ["clear", "half", "red-pass"], "cameras": ["bench-camera"]},
    "optics": {"f_numbers": [4.0, 8.0], "magnification": 0.1, "lens_transmittance": 0.9},
    "lighting": {
        "mode": "continuous",
        "delivery_per_m2": 100.0,  # 10 W/m2 at rated current
        "drive_step_ma": 1.0,
        "board_k_per_w": 30.0,
    },
    "temperature": {"air_c": 25.0, "sensor_c": 25.0},
    "grid": {"step_nm": 0.1, "from_nm": 500.0, "to_nm": 660.0},
}


def write_curves(folder: Path) -> None:
    """Write the flat curves the inline parts refer to."""
    ends = (400, 800)
    for name, samples in SAMPLES.items():
        header = ",".join(["wavelength_nm", *(f"s{k}" for k in range(len(samples)))])
        rows = [",".join([str(nm), *map(str, samples)]) for nm in ends]
        (folder / f"{name}.csv").write_text("\n".join([header, *rows]), encoding="utf-8")
    for name, value in (("qe", QUANTUM_EFFICIENCY), ("clear", 100)):
        rows = "".join(f"{nm},{value}\n" for nm in ends)
        (folder / f"{name}.csv").write_text(f"wavelength_nm,value\n{rows}", encoding="utf-8")


def small_table(changes: dict[str, Any] | None = None) -> dict[str, Any]:
    """Return the table with changes such as ``{"optics.magnification": 0.2, "camera.bits": 8, "red.fwhm_nm": 3}``.

    ``camera``, ``red`` and ``green`` mean the parts; a value of None takes a key out.
    """
    table = copy.deepcopy(TABLE)
    parts = {"camera": copy.deepcopy(CAMERA), "red": copy.deepcopy(LED), "green": copy.deepcopy(GREEN)}
    for path, value in (changes or {}).items():
        *sections, key = path.split(".")
        inside = parts if sections and sections[0] in parts else table
        for section in sections:
            inside = inside.setdefault(section, {})
        if value is None:
            inside.pop(key, None)
        else:
            inside[key] = value
    table["camera"], table["led"] = [parts["camera"]], [parts["red"], parts["green"]]
    table["filter"] = copy.deepcopy(FILTERS)
    specular = table.pop("specular", {})
    table["surface"] = [
        {
            "id": name,
            "source": "test",
            "curve": f"{name}.csv",
            "unit": "fraction",
            "specular_reflectance": specular.get(name, 0.0),
        }
        for name in SAMPLES
    ]
    return table


def small_problem(folder: Path, changes: dict[str, Any] | None = None) -> Problem:
    """Build the small problem, changed as `small_table` says, with its curves in ``folder``."""
    write_curves(folder)
    return build_problem(small_table(changes), folder=folder, catalog=Catalog(name="test", source="test"))


def small_design(**changes: Any) -> Design:
    """Return a recipe for the small problem: red at rated current for 1 ms, no filter, f/4."""
    plain = {
        "camera": "bench-camera",
        "channel": "mono",
        "gain_db": 0.0,
        "filter": "none",
        "f_number": 4.0,
        "exposure_us": 1000.0,
        "drive_ma": {"red": 100.0},
    }
    return Design(**{**plain, **changes})
