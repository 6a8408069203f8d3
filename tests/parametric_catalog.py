"""A seeded catalogue of any size, invented, for tests and benchmarks.

Parts follow the spread of data sheets: LED peaks over the range with flux, droop and thermal figures of their
family, band-pass, long-pass and short-pass filters, mono cameras of several pixel sizes.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from codesign.catalog import Catalog, parse_parts
from codesign.problem import Problem, build_problem

SOURCE = "invented by the parametric generator"


def led_tables(rng: np.random.Generator, count: int, low_nm: float, high_nm: float) -> list[dict]:
    """LED tables with peaks spread evenly and a droop curve of three points; all light stays inside the range."""
    tables = []
    for index, peak in enumerate(np.linspace(low_nm + 70, high_nm - 130, count) + rng.uniform(-5, 5, count)):
        current = float(rng.choice([350, 500, 700, 1000]))
        voltage = 1240 / peak + rng.uniform(0.2, 0.6)
        efficiency = rng.uniform(0.15, 0.5)
        tables.append(
            dict(
                id=f"led-{index:03d}", source=SOURCE, invented=True, peak_nm=round(float(peak), 2),
                fwhm_nm=round(float(rng.uniform(12, 22) * (1 + (peak - 400) / 500)), 2),
                radiant_flux_mw=round(efficiency * voltage * current, 3), rated_current_ma=current,
                forward_voltage_v=round(voltage, 4), max_current_ma=1.5 * current,
                flux_curve=[[0.4 * current, 0.46], [current, 1.0], [1.5 * current, 1.36]],
                thermal_resistance_k_per_w=round(float(rng.uniform(3, 10)), 2), max_junction_c=120.0,
                flux_temperature_coefficient_per_k=round(float(-rng.uniform(0.001, 0.005)), 5),
                peak_shift_nm_per_k=round(float(rng.uniform(0.03, 0.25)), 4),
                price=round(float(rng.uniform(1, 12)), 2),
            )
        )  # fmt: skip
    return tables


def filter_tables(rng: np.random.Generator, count: int, low_nm: float, high_nm: float) -> list[dict]:
    """Filter tables: seven in ten band-pass, the rest long-pass and short-pass."""
    tables = []
    for index in range(count):
        common = dict(
            id=f"filter-{index:04d}", source=SOURCE, invented=True, edge_width_nm=round(float(rng.uniform(3, 12)), 2),
            peak_transmittance=round(float(rng.uniform(0.85, 0.97)), 3), blocking_od=round(float(rng.uniform(3, 5)), 2),
            effective_index=round(float(rng.uniform(1.6, 2.1)), 3), price=round(float(rng.uniform(20, 200)), 2),
        )  # fmt: skip
        if index % 10 < 7:
            width = float(rng.uniform(15, 90))
            own = dict(kind="bandpass", center_nm=float(rng.uniform(low_nm + 20, high_nm - 20)), fwhm_nm=width)
        else:
            kind = "longpass" if index % 10 < 9 else "shortpass"
            own = dict(kind=kind, cut_nm=float(rng.uniform(low_nm + 20, high_nm - 20)))
        tables.append({**common, **{k: round(v, 2) if isinstance(v, float) else v for k, v in own.items()}})
    return tables


def camera_tables(rng: np.random.Generator, count: int) -> list[dict]:
    """Mono cameras with the physical silicon model."""
    tables = []
    for index in range(count):
        pitch = float(rng.choice([2.4, 3.45, 4.5, 5.5, 6.5, 9.0]))
        well = round(float(900 * pitch**2 * rng.uniform(0.7, 1.3)))
        tables.append(
            dict(
                id=f"camera-{index:02d}", source=SOURCE, invented=True, pixel_pitch_um=pitch, full_well_e=well, bits=12,
                read_noise_e=round(float(rng.uniform(2, 14)), 2), conversion_gain_dn_per_e=round(4000 / well, 6),
                dark_current_e_per_s=round(float(rng.uniform(1, 60)), 2), dark_reference_c=25.0, dark_doubling_k=7.0,
                dsnu_e=round(float(rng.uniform(0.5, 4)), 2), prnu_percent=round(float(rng.uniform(0.3, 1.2)), 3),
                exposure_min_us=10.0, exposure_max_us=1e6, exposure_step_us=1.0,
                price=round(float(rng.uniform(200, 2000)), 2),
                channels=[
                    dict(
                        name="mono",
                        silicon=dict(
                            pixel="photodiode", dead_layer_um=round(float(rng.uniform(0.02, 0.1)), 3),
                            collection_depth_um=round(float(rng.uniform(3, 12)), 2),
                            coating_index=1.9, coating_thickness_nm=round(float(rng.uniform(50, 90)), 1),
                            fill_factor=round(float(rng.uniform(0.6, 0.95)), 3),
                        ),
                    )
                ],
            )
        )  # fmt: skip
    return tables


def surface_tables(rng: np.random.Generator, folder: Path, low_nm: float, high_nm: float, samples: int) -> list[dict]:
    """Target and background: a smooth curve, and the same with two faint bands; ``samples`` curves each."""
    grid = np.arange(low_nm, high_nm + 1, 5.0)
    base = 0.35 + 0.25 * np.sin(np.linspace(0, 2.2, grid.size) + rng.uniform(0, 1))
    bands = sum(
        depth * np.exp(-(((grid - rng.uniform(low_nm + 60, high_nm - 60)) / width) ** 2))
        for depth, width in ((0.06, 40.0), (-0.04, 70.0))
    )
    tables = []
    for name, mean in (("background", base), ("target", base * (1 - bands))):
        level = 1 + 0.004 * rng.normal(size=(samples, 1)) * (samples > 1)
        slope = 0.003 * rng.normal(size=(samples, 1)) * np.linspace(-1, 1, grid.size) * (samples > 1)
        curves = np.clip(mean * (level + slope), 0.01, 1)
        header = "wavelength_nm," + ",".join(f"s{k}" for k in range(samples))
        rows = "\n".join(",".join(f"{v:.6g}" for v in row) for row in np.column_stack([grid, curves.T]))
        (folder / f"{name}.csv").write_text(f"# {SOURCE}\n{header}\n{rows}\n", encoding="utf-8")
        tables.append(dict(id=name, source=SOURCE, invented=True, curve=f"{name}.csv", unit="fraction"))
    return tables


def parametric_catalog(
    folder: Path,
    *,
    leds: int,
    filters: int,
    cameras: int,
    seed: int = 1,
    samples: int = 1,
    low_nm: float = 380.0,
    high_nm: float = 1000.0,
) -> Catalog:
    """Build the catalogue; curve files go into ``folder``. ``samples`` > 1 gives the surfaces clutter."""
    rng = np.random.default_rng(seed)
    tables = {
        "led": led_tables(rng, leds, low_nm, high_nm),
        "filter": filter_tables(rng, filters, low_nm, high_nm),
        "camera": camera_tables(rng, cameras),
        "surface": surface_tables(rng, folder, low_nm, high_nm, samples),
    }
    return Catalog(name="parametric", source=SOURCE).with_parts(parse_parts(tables, folder, "parametric"))


def parametric_problem(catalog: Catalog, folder: Path, **sections) -> Problem:
    """A steady-light problem over the whole catalogue; ``sections`` replace parts of it."""
    table = {
        "title": "parametric",
        "scene": {"target": "target", "background": "background"},
        "candidates": {"no_filter": False},
        "optics": {"f_numbers": [4.0], "magnification": 0.1},
        "lighting": {"mode": "continuous", "emitters_per_channel": 2, "distance_mm": 300.0, "board_k_per_w": 6.0},
        "motion": {"speed_mm_per_s": 200.0, "max_blur_px": 1.0},
        "temperature": {"air_c": 25.0, "sensor_c": 40.0},
        "limits": {"rig_heat_w": 15.0},
        **sections,
    }
    return build_problem(table, folder=folder, where="parametric", catalog=catalog)
