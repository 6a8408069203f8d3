"""Every wrong part gives one line: where, key, value, what is allowed, what to do."""

import pytest
from catalog_files import BASE, CHANNEL, FILTER, message_of, write_catalog, write_part

from codesign.catalog import load_catalog


@pytest.fixture
def folder(tmp_path):
    return write_catalog(tmp_path)


def test_the_unspoilt_catalogue_loads(folder):
    load_catalog(folder, check=True)


RATED = [350, 1.0]
BRACKET = {"max_width_us": 100, "max_duty": 0.1, "max_current_ma": 1000}
NO_MODEL = {"peak_nm": None, "fwhm_nm": None}

# (kind, changed fields, words the line must hold)
PART_CASES = {
    "negative voltage": ("led", {"forward_voltage_v": -3.1}, ["forward_voltage_v is -3.1, must be > 0"]),
    "nan flux": ("led", {"radiant_flux_mw": float("nan")}, ["radiant_flux_mw is nan, must be finite"]),
    "text for a number": (
        "led",
        {"rated_current_ma": "350 mA"},
        ["rated_current_ma is '350 mA', must be a number", "[mA]"],
    ),
    "unknown key": ("led", {"peak_mn": 850}, ["unknown key 'peak_mn'", "did you mean 'peak_nm'?"]),
    "unknown nested key": (
        "led",
        {"pulse": [{**BRACKET, "max_widht_us": 5}]},
        ["pulse[0].max_widht_us", "did you mean 'max_width_us'?"],
    ),
    "missing field": ("led", {"max_junction_c": None}, ["max_junction_c is missing", "junction limit"]),
    "two fluxes": (
        "led",
        {"radiant_flux_w": 0.29},
        ["radiant_flux_mw 290", "radiant_flux_w 0.29", "exactly one"],
    ),
    "no flux": ("led", {"radiant_flux_mw": None}, ["no flux", "radiant_flux_w, luminous_flux_lm"]),
    "milliwatt stated as watt": (
        "led",
        {"radiant_flux_mw": None, "radiant_flux_w": 290},
        ["radiant_flux_w is 290", "0.578 W", "check the unit"],
    ),
    "lumens of an invisible led": (
        "led",
        {"radiant_flux_mw": None, "luminous_flux_lm": 20},
        ["luminous_flux_lm is 20", "must be below", "radiant_flux_mw"],
    ),
    "lumens without any visible light": (
        "led",
        {"radiant_flux_mw": None, "luminous_flux_lm": 20, "peak_nm": 1650},
        ["luminous_flux_lm is 20", "must be below"],
    ),
    "peak without width": ("led", {"fwhm_nm": None}, ["fwhm_nm is missing", "or a measured curve"]),
    "peak and curve": ("led", {"curve": "curves/led.csv"}, ["curve is 'curves/led.csv'", "not both"]),
    "peak in micrometres": ("led", {"peak_nm": 0.85}, ["peak_nm is 0.85, must be >= 150"]),
    "rising efficiency": (
        "led",
        {"flux_curve": [[175, 0.3], RATED]},
        ["flux_curve[1]", "must be concave", "smooth"],
    ),
    "falling flux": (
        "led",
        {"flux_curve": [RATED, [700, 0.9]]},
        ["flux_curve[1] relative_flux is 0.9, must be above 1", "end the curve"],
    ),
    "unsorted currents": (
        "led",
        {"flux_curve": [RATED, [100, 0.4]]},
        ["flux_curve[1] current is 100 mA, must be above 350", "sort"],
    ),
    "ragged flux curve": ("led", {"flux_curve": [[100, 0.3], [350, 1, 1.6]]}, ["rows have [2, 3] numbers"]),
    "flux curve in percent": (
        "led",
        {"flux_curve": [[100, 30], [350, 100]]},
        ["flux_curve gives 100 at rated_current_ma 350, must be 1", "divide"],
    ),
    "flux curve too short": (
        "led",
        {"flux_curve": [RATED], "pulse": [BRACKET]},
        ["flux_curve ends at 350 mA", "1000 mA", "add a point"],
    ),
    "voltage curve disagrees": (
        "led",
        {"flux_curve": [[100, 0.3, 2.9], [350, 1, 3.0]]},
        ["flux_curve gives 3 V", "forward_voltage_v 1.65"],
    ),
    "power bends down": (
        "led",
        {"flux_curve": [[100, 0.3, 1.9], [350, 1, 1.65], [400, 1.1, 1.3]], "max_current_ma": 400},
        ["voltage_v", "must bend up", "smooth"],
    ),
    "pulse widths unsorted": (
        "led",
        {"pulse": [{**BRACKET, "max_width_us": 500}, BRACKET]},
        ["pulse widths [500.0, 100.0] must be increasing", "sort"],
    ),
    "pulse duty in percent": (
        "led",
        {"pulse": [{**BRACKET, "max_duty": 10}]},
        ["pulse[0].max_duty is 10, must be <= 1"],
    ),
    "pulse below continuous": (
        "led",
        {"pulse": [{**BRACKET, "max_current_ma": 100}]},
        ["pulse[0].max_current_ma is 100, must be >= the continuous 350 mA"],
    ),
    "temperature coefficient in percent": (
        "led",
        {"flux_temperature_coefficient_per_k": -0.35},
        ["flux_temperature_coefficient_per_k is -0.35, must be > -0.03", "divide by 100"],
    ),
    "junction limit below reference": (
        "led",
        {"max_junction_c": 20},
        ["max_junction_c is 20, must be above reference_junction_c 25"],
    ),
    "full beam angle": ("led", {"beam_half_angle_deg": 120}, ["beam_half_angle_deg is 120", "halve it"]),
    "no provenance": ("led", {"source": None}, ["source is missing", "provenance"]),
    "empty provenance": ("surface", {"source": " "}, ["source is '", "must not be empty", "provenance"]),
    "id with capitals": ("led", {"id": "NIR 850"}, ["id is 'NIR 850', is not allowed", "lowercase"]),
    "missing curve file": (
        "led",
        {**NO_MODEL, "curve": "curves/ledd.csv"},
        ["curve is 'curves/ledd.csv', no such file", "relative to"],
    ),
    "transmittance in percent": (
        "filter",
        {"peak_transmittance": 92},
        ["peak_transmittance is 92, must be <= 1", "divide percent by 100"],
    ),
    "unknown filter kind": (
        "filter",
        {"kind": "bandpas"},
        ["kind is 'bandpas', must be 'curve', 'bandpass'"],
    ),
    "field missing for the kind": (
        "filter",
        {"blocking_od": None},
        ["blocking_od is missing; kind 'bandpass' needs"],
    ),
    "field of another kind": (
        "filter",
        {"optical_density": 1},
        ["optical_density is 1.0, not used by kind 'bandpass'", "it takes"],
    ),
    "blocking range reversed": (
        "filter",
        {"blocking_from_nm": 900, "blocking_to_nm": 400},
        ["blocking_from_nm is 900, must be below blocking_to_nm 400"],
    ),
    "edge wider than the band": (
        "filter",
        {"edge_width_nm": 60},
        ["edge_width_nm is 60, must be <= fwhm_nm 40"],
    ),
    "curve filter without unit": (
        "filter",
        {key: None for key in FILTER if key not in ("id", "source")}
        | {"kind": "curve", "curve": "curves/filter.csv"},
        ["unit is missing; kind 'curve' needs curve, unit"],
    ),
    "stack of an unknown filter": (
        "filter",
        {key: None for key in FILTER if key not in ("id", "source")} | {"kind": "stack", "parts": ["bp-851"]},
        ["parts names 'bp-851', no such filter", "did you mean 'bp-850'?"],
    ),
    "stack of itself": (
        "filter",
        {key: None for key in FILTER if key not in ("id", "source")} | {"kind": "stack", "parts": ["bp-850"]},
        ["bp-850 > bp-850", "circle"],
    ),
    "two dark currents": (
        "camera",
        {"dark_current_na_per_cm2": 0.1},
        ["2 dark currents", "must be one", "dark_current_e_per_s"],
    ),
    "gain upside down": (
        "camera",
        {"conversion_gain_dn_per_e": 250, "bits": 12},
        ["conversion_gain_dn_per_e is 250", "take the inverse"],
    ),
    "exposure range reversed": (
        "camera",
        {"exposure_max_us": 10},
        ["exposure_max_us is 10, must be >= exposure_min_us 20"],
    ),
    "half a bit": ("camera", {"bits": 12.5}, ["bits is 12.5, must be a whole number"]),
    "noise above the well": ("camera", {"read_noise_e": 20000}, ["read_noise_e is 20000, must be below"]),
    "black level above the top": ("camera", {"black_level_dn": 5000}, ["black_level_dn is 5000", "4095"]),
    "same gain twice": (
        "camera",
        {"gains": [{"gain_db": 0}, {"gain_db": 0}]},
        ["gain_db 0.0 is given twice", "remove one"],
    ),
    "channel without unit": (
        "camera",
        {"channels": [{"name": "mono", "curve": "curves/qe.csv", "quantity": "quantum_efficiency"}]},
        ["channels[0]", "'mono'", "unit is None", "'percent' or 'fraction'"],
    ),
    "responsivity in percent": (
        "camera",
        {"channels": [{**CHANNEL, "quantity": "responsivity_a_per_w"}]},
        ["channels[0]", "unit is 'fraction', must be 'a_per_w'"],
    ),
    "channel with curve and silicon": (
        "camera",
        {
            "channels": [
                {
                    "name": "m",
                    "curve": "c",
                    "silicon": {"pixel": "mos", "dead_layer_um": 0, "collection_depth_um": 5},
                }
            ]
        },
        ["channels[0]", "either curve or silicon"],
    ),
    "gate on a photodiode": (
        "camera",
        {
            "channels": [
                {
                    "name": "m",
                    "silicon": {
                        "pixel": "photodiode",
                        "dead_layer_um": 0,
                        "collection_depth_um": 5,
                        "gate_layer_um": 0.1,
                    },
                }
            ]
        },
        ["channels[0].silicon", "gate_layer_um is 0.1, must be 0 unless pixel is 'mos'"],
    ),
    "empty curve path": (
        "surface",
        {"curve": ""},
        ["curve is '', must not be empty", "CSV with wavelength_nm"],
    ),
    "unknown unit": ("surface", {"unit": "pct"}, ["unit is 'pct', must be 'percent' or 'fraction'"]),
    "no unit": ("surface", {"unit": None}, ["unit is missing"]),
    "gloss in percent": ("surface", {"specular_reflectance": 4}, ["specular_reflectance is 4, must be <= 1"]),
    "unknown sample column": (
        "surface",
        {"columns": ["valu"]},
        ["no column 'valu'", "did you mean 'value'?"],
    ),
}


@pytest.mark.parametrize("case", PART_CASES)
def test_bad_part_gives_one_clear_line(folder, case):
    kind, changes, words = PART_CASES[case]
    table = {**BASE[kind], **changes}
    write_part(folder, kind, table)
    message = message_of(folder)
    assert message.startswith(f"{kind}s.toml: {kind} {table['id']!r}: ")
    for word in words:
        assert word in message


def test_several_mistakes_are_counted(folder):
    write_part(folder, "led", {**BASE["led"], "forward_voltage_v": -1, "fwhm_nm": 0})
    assert message_of(folder).endswith("(and 1 more)")
