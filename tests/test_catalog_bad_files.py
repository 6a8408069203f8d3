"""Every wrong curve file or folder gives one line: file, row, column, value, what to do."""

import pytest
from catalog_files import CAMERA, LED, SURFACE, message_of, write_catalog, write_part

from codesign.errors import CodesignError

NO_MODEL = {"peak_nm": None, "fwhm_nm": None}


@pytest.fixture
def folder(tmp_path):
    return write_catalog(tmp_path)


def curve(*rows, header="wavelength_nm,value"):
    return "\n".join(["# measured", header, *rows]) + "\n"


# what a surface curve may get wrong: (text, unit, words)
CURVE_CASES = {
    "empty": ("", "fraction", ["file is empty", "must have a header"]),
    "comments only": ("# nothing\n", "fraction", ["file is empty"]),
    "one row": (curve("400,0.5"), "fraction", ["1 data rows", "at least 2"]),
    "no header": ("400,0.5\n500,0.6\n", "fraction", [":1: first column is '400', must be 'wavelength_nm'"]),
    "no value column": (
        curve("400", "500", header="wavelength_nm"),
        "fraction",
        ["at least one value column"],
    ),
    "column twice": (
        curve("400,1,1", "500,1,1", header="wavelength_nm,a,a"),
        "fraction",
        [":2: column 'a' appears twice"],
    ),
    "nan": (
        curve("400,0.5", "500,NaN"),
        "fraction",
        [":4: value is 'NaN', must be finite", "remove the row"],
    ),
    "infinite": (curve("400,inf", "500,0.5"), "fraction", [":3: value is 'inf', must be finite"]),
    "text": (
        curve("400,0.5", "500,n/a"),
        "fraction",
        [":4: value is 'n/a', must be a number", "remove the row"],
    ),
    "empty cell": (curve("400,", "500,0.5"), "fraction", [":3: value is '', must be a number"]),
    "percent signs": (
        curve("400,50%", "500,60%"),
        "fraction",
        [":3: value is '50%'", "'unit', not in the cells"],
    ),
    "negative": (
        curve("400,0.5", "500,-0.02"),
        "fraction",
        [":4: value is -0.02, must be >= 0", "dark reading"],
    ),
    "unsorted": (
        curve("400,0.5", "600,0.5", "500,0.5"),
        "fraction",
        [":5: wavelength_nm 500 follows 600", "strictly increasing", "sort"],
    ),
    "duplicate": (
        curve("400,0.5", "500,0.5", "500,0.6"),
        "fraction",
        [":5: wavelength_nm 500 repeats the row before", "remove repeats"],
    ),
    "ragged": (curve("400,0.5", "500"), "fraction", [":4: 1 cells '500', must be 2"]),
    "decimal commas": (curve("400,0,5", "500,0,6"), "fraction", [":3: 3 cells", "decimal points"]),
    "semicolons": (
        "wavelength_nm;value\n400;0,5\n500;0,6\n",
        "fraction",
        [":1: header 'wavelength_nm;value' is separated by semicolons", "commas between columns"],
    ),
    "tabs": ("wavelength_nm\tvalue\n400\t0.5\n", "fraction", ["separated by tabs"]),
    "micrometres": (
        curve("0.4,0.5", "1.7,0.6"),
        "fraction",
        ["0.4 to 1.7", "micrometres", "multiply by 1000"],
    ),
    "negative wavelength": (
        curve("-400,0.5", "500,0.6"),
        "fraction",
        [":3: wavelength_nm is -400, must be > 0"],
    ),
    "percent as fraction": (
        curve("400,0.5", "500,62"),
        "fraction",
        [":4: value is 62, must be <= 1.5 as a fraction", "looks like percent", 'unit = "percent"'],
    ),
    "fraction as percent": (
        curve("400,0.5", "500,0.6"),
        "percent",
        ["largest value is 0.6 percent", "looks like a fraction", 'unit = "fraction"'],
    ),
    "too bright": (
        curve("400,50", "500,180"),
        "percent",
        [":4: value is 180, must be <= 150 percent", "reference"],
    ),
}


@pytest.mark.parametrize("case", CURVE_CASES)
def test_bad_curve_gives_one_clear_line(folder, case):
    text, unit, words = CURVE_CASES[case]
    (folder / "curves" / "paper.csv").write_text(text, encoding="utf-8")
    write_part(folder, "surface", {**SURFACE, "unit": unit})
    message = message_of(folder)
    assert message.startswith("surfaces.toml: surface 'paper': curves/paper.csv")
    for word in words:
        assert word in message


def test_curve_that_is_no_text_gives_one_clear_line(folder):
    (folder / "curves" / "paper.csv").write_bytes(b"wavelength_nm,v\n400,\xff\n")
    assert "not UTF-8" in message_of(folder)


@pytest.mark.parametrize(
    ("quantity", "unit", "row", "words"),
    [
        ("quantum_efficiency", "fraction", "600,1.2", [":2: value is 1.2, must be <= 1 as a fraction"]),
        ("quantum_efficiency", "fraction", "600,60", [":2: value is 60", "looks like percent"]),
        ("quantum_efficiency", "percent", "600,0.6", ["looks like a fraction"]),
        (
            "responsivity_a_per_w",
            "a_per_w",
            "600,0.6",
            [":2: value is 0.6", "more than one electron per photon"],
        ),
    ],
)
def test_impossible_camera_response_is_refused(folder, quantity, unit, row, words):
    (folder / "curves" / "qe.csv").write_text(f"wavelength_nm,value\n{row}\n900,0.1\n", encoding="utf-8")
    channel = {"name": "mono", "curve": "curves/qe.csv", "quantity": quantity, "unit": unit}
    write_part(folder, "camera", {**CAMERA, "channels": [channel]})
    message = message_of(folder)
    assert message.startswith("cameras.toml: camera 'mono-5mp': curves/qe.csv")
    for word in words:
        assert word in message


def test_curve_file_with_several_columns_needs_a_choice(folder):
    (folder / "curves" / "led.csv").write_text("wavelength_nm,a,b\n400,1,2\n500,1,2\n", encoding="utf-8")
    write_part(folder, "led", {**LED, **NO_MODEL, "curve": "curves/led.csv"})
    message = message_of(folder)
    assert "curves/led.csv has columns a, b" in message and "column = '...'" in message


def test_led_curve_cut_off_inside_its_emission_is_refused(folder):
    (folder / "curves" / "led.csv").write_text("wavelength_nm,a\n400,0\n500,1\n550,0.4\n", encoding="utf-8")
    write_part(folder, "led", {**LED, **NO_MODEL, "curve": "curves/led.csv"})
    message = message_of(folder)
    assert "curves/led.csv: curve is at 0.4 of its peak where it ends at 550 nm" in message
    assert "must be <= 0.1" in message and "whole emission" in message


def test_dark_led_curve_is_refused(folder):
    (folder / "curves" / "led.csv").write_text("wavelength_nm,a\n400,0\n500,0\n", encoding="utf-8")
    write_part(folder, "led", {**LED, **NO_MODEL, "curve": "curves/led.csv"})
    assert "all values are 0" in message_of(folder)


# what a catalogue folder may get wrong: (file, text, words)
FOLDER_CASES = {
    "broken toml": ("leds.toml", "[[led]\n", ["leds.toml: not valid TOML", "line 1"]),
    "wrong table name": (
        "leds.toml",
        "[[leds]]\nid = 'a'\n",
        ["leds.toml: unknown table 'leds'", "did you mean 'led'?"],
    ),
    "one table, not a list": ("leds.toml", "[led]\nid = 'a'\n", ["led must be a list", "[[led]]"]),
    "part without id": ("leds.toml", "[[led]]\nsource = 'a'\n", ["led without id: id is missing"]),
    "no catalogue source": ("catalog.toml", "name = 'x'\n", ["catalog.toml: source is None, must be text"]),
    "unknown csv": ("diodes.csv", "id\n", ["diodes.csv: not a table of parts", "leds.csv", "curves/"]),
    "bad json cell": (
        "filters.csv",
        'id,kind,source,parts\ns,stack,t,"[bp-850]"\n',
        ["filters.csv: filter 's': parts is '[bp-850]', not valid JSON"],
    ),
    "ragged table": (
        "filters.csv",
        "id,kind,source\nx,none\n",
        ["filters.csv: filter 'x': row and header differ"],
    ),
    "column twice": (
        "filters.csv",
        "id,kind,kind\nx,none,none\n",
        ["filters.csv: column 'kind' appears twice"],
    ),
    "text in a table": (
        "filters.csv",
        "id,kind,source,optical_density\nx,neutral,t,dark\n",
        ["filters.csv: filter 'x': optical_density is 'dark', must be a number"],
    ),
    "id used twice": (
        "filters.csv",
        "id,kind,source\nbp-850,none,t\n",
        ["filter 'bp-850'", "filters.csv", "filters.toml", "rename one"],
    ),
}


@pytest.mark.parametrize("case", FOLDER_CASES)
def test_bad_folder_gives_one_clear_line(folder, case):
    name, text, words = FOLDER_CASES[case]
    (folder / name).write_text(text, encoding="utf-8")
    message = message_of(folder)
    for word in words:
        assert word in message


def test_folder_without_catalogue_says_what_to_name(tmp_path):
    message = message_of(tmp_path, CodesignError)
    assert "no catalog.toml" in message and "'demo'" in message
