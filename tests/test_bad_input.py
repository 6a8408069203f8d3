"""Mistakes people make, through the command line: one line that names file, key and value, and an exit code."""

import pytest
from command_line import PROBLEM, RECIPE, cnr, spoiled

LEDS = 'leds = ["blue-470-a", "red-625-a"]'
HEAD = 'title = "Blue cap among green caps"'


def assert_one_line(outcome, code: int, words: tuple[str, ...]) -> None:
    """The contract of every message."""
    assert outcome.code == code, outcome
    lines = outcome.err.splitlines()
    assert len(lines) == 1, outcome.err
    assert lines[0].startswith("cnr: ")
    assert "Traceback" not in outcome.err + outcome.out
    missing = [word for word in words if word not in lines[0]]
    assert not missing, f"{missing} not in {lines[0]!r}"


PROBLEM_CASES = {
    # what is replaced, by what, words the line must hold
    "wrong unit suffix": (
        "[temperature]",
        "exposure_max_ms = 3\n[temperature]",
        ("timing.exposure_max_ms", "exposure_max_us"),
    ),
    "unknown key": ("max_blur_px", "max_blurr_px", ("motion.max_blurr_px", "max_blur_px")),
    "unknown section": ("[motion]", "[movement]", ("'movement'", "known:")),
    "unknown key of an exception": (
        "[motion]",
        "[lighting.led.blue-470-a]\nemiters = 3\n[motion]",
        ("lighting.led.blue-470-a.emiters", "emitters"),
    ),
    "missing key": ('target = "cap-blue"', "", ("scene.target is missing",)),
    "missing title": (HEAD, "", ("title is missing",)),
    "missing section": ("[temperature]\nair_c = 30\nsensor_c = 45", "", ("temperature is missing",)),
    "percent given as fraction key": (
        "lens_transmittance = 0.9",
        "lens_transmittance = 90",
        ("optics.lens_transmittance is 90", "must be <= 1", "divide percent by 100"),
    ),
    "headroom in percent": ("rig_heat_w = 2", "well_headroom = 90", ("limits.well_headroom is 90", "must be <= 1")),
    "dark share in percent": (
        "rig_heat_w = 2",
        "dark_well_share = 5",
        ("limits.dark_well_share is 5", "divide by 100"),
    ),
    "not a number": ("magnification = 0.1", "magnification = nan", ("optics.magnification is nan", "finite")),
    "infinite": ("distance_mm = 200", "distance_mm = inf", ("lighting.distance_mm is inf", "finite")),
    "negative": ("speed_mm_per_s = 100", "speed_mm_per_s = -100", ("motion.speed_mm_per_s is -100", "must be >= 0")),
    "zero": ("rig_heat_w = 2", "rig_heat_w = 0", ("limits.rig_heat_w is 0", "must be > 0")),
    "text for a number": ("air_c = 30", 'air_c = "warm"', ("temperature.air_c is 'warm'", "must be a number")),
    "true for a number": ("air_c = 30", "air_c = true", ("temperature.air_c is true", "must not be true")),
    "true in a list": ("f_numbers = [4, 8]", "f_numbers = [4, true]", ("optics.f_numbers",)),
    "date for a number": ("air_c = 30", "air_c = 2024-05-01", ("temperature.air_c is 2024-05-01", "number")),
    "table for a number": ("air_c = 30", "air_c = {a = 1}", ("temperature.air_c is {'a': 1}", "number")),
    "part of a piece": (
        "emitters_per_channel = 2",
        "emitters_per_channel = 2.5",
        ("lighting.emitters_per_channel is 2.5", "whole number"),
    ),
    "number for a list": ("f_numbers = [4, 8]", "f_numbers = 4", ("optics.f_numbers is 4", "must be a list")),
    "empty list": ("f_numbers = [4, 8]", "f_numbers = []", ("optics.f_numbers is []", "must not be empty")),
    "f-number out of range": ("f_numbers = [4, 8]", "f_numbers = [0.1]", ("f_numbers holds 0.1", "0.5 to 64")),
    "angle out of range": (
        "distance_mm = 200",
        "distance_mm = 200\nincidence_deg = 95",
        ("lighting.incidence_deg is 95", "must be < 90"),
    ),
    "unknown word": ('mode = "strobe"', 'mode = "strobed"', ("lighting.mode is 'strobed'", "'continuous'")),
    "part list is a number": (LEDS, "leds = 5", ("candidates.leds is 5", "text or a list of text")),
    "table where a list of tables belongs": ("[solver]", '[led]\nid = "mine"\n[solver]', ("led is", "[[led]]")),
    "unknown surface": ('"cap-blue"', '"cap-blu"', ("scene.target is 'cap-blu'", "did you mean 'cap-blue'")),
    "unknown guard": ('"cap-white"', '"cap-wite"', ("scene.guards is 'cap-wite'", "did you mean 'cap-white'")),
    "unknown LED": ('"blue-470-a", ', '"blue-471-a", ', ("candidates.leds", "'blue-471-a'", "blue-470-a")),
    "unknown camera": ('"mono-5mp"', '"mono-9mp"', ("candidates.cameras", "'mono-9mp'", "mono-5mp")),
    "unknown LED with an exception": (
        "[motion]",
        "[lighting.led.blue-471-a]\nemitters = 3\n[motion]",
        ("lighting.led.blue-471-a", "blue-470-a"),
    ),
    "unknown illuminant": ('"D65"', '"D66"', ("scene.ambient[0]", "'D66'", "'D65'")),
    "unknown channel": ("gains_db = [0]", 'channels = ["redd"]', ("candidates.channels", "'redd'", "mono")),
    "unknown gain": ("gains_db = [0]", "gains_db = [3]", ("candidates.gains_db", "3.0")),
    "nothing selected": (LEDS, 'leds = "peak_nm < 100"', ("candidates.leds", "'peak_nm < 100'", "selects none")),
    "empty selection": (LEDS, "leds = []", ("candidates.leds", "[]", "selects none")),
    "no filter left": (
        'filters = "none"',
        "filters = []\nno_filter = false",
        ("candidates.filters is []", "no_filter"),
    ),
    "expression cut short": (LEDS, 'leds = "peak_nm <"', ("candidates.leds", "'peak_nm <'", "cannot be read")),
    "unknown name in an expression": (
        LEDS,
        'leds = "peek_nm < 500"',
        ("candidates.leds", "'peek_nm'", "did you mean 'peak_nm'"),
    ),
    "program code in an expression": (LEDS, "leds = \"__import__('os').getcwd()\"", ("candidates.leds", "__import__")),
    "file instead of parts": (LEDS, 'leds = "leds.csv"', ("candidates.leds is 'leds.csv'", "catalog")),
    "target equals background": (
        'background = "cap-green"',
        'background = "cap-blue"',
        ("scene.target", "scene.background", "'cap-blue'", "two different"),
    ),
    "strobe without frame rate": ("frame_rate_hz = 50", "", ("timing.frame_rate_hz is missing",)),
    "both deliveries": (
        "distance_mm = 200",
        "distance_mm = 200\ndelivery_per_m2 = 5",
        ("distance_mm is 200", "delivery_per_m2 is 5", "one of the two"),
    ),
    "no delivery": ("distance_mm = 200", "", ("distance_mm", "delivery_per_m2", "both missing")),
    "ambient stated twice": (
        "illuminance_lx = 200",
        "illuminance_lx = 200\nirradiance_w_per_m2 = 1",
        ("scene.ambient[0]", "illuminance_lx is 200", "irradiance_w_per_m2 is 1"),
    ),
    "ambient negative": (
        "illuminance_lx = 200",
        "illuminance_lx = -1",
        ("scene.ambient[0].illuminance_lx is -1", "must be >= 0"),
    ),
    "ambient curve missing": (
        'illuminant = "D65"',
        'curve = "sky.csv"',
        ("scene.ambient[0]", "sky.csv", "no such file"),
    ),
    "lens curve without unit": ("lens_transmittance = 0.9", 'lens_curve = "lens.csv"', ("lens_curve", "lens_unit")),
    "lens curve missing": (
        "lens_transmittance = 0.9",
        'lens_curve = "lens.csv"\nlens_unit = "percent"',
        ("optics.lens_curve", "lens.csv", "no such file"),
    ),
    "shortest above longest": (
        "frame_rate_hz = 50",
        "frame_rate_hz = 50\nexposure_min_us = 9\nexposure_max_us = 5",
        ("timing.exposure_min_us is 9", "5"),
    ),
    "grid the wrong way round": (
        "[solver]",
        "[grid]\nfrom_nm = 900\nto_nm = 400\n[solver]",
        ("grid.from_nm is 900", "400"),
    ),
    "grid beyond the surfaces": (
        "[solver]",
        "[grid]\nfrom_nm = 100\n[solver]",
        ("grid.from_nm is 100", "340 to 1750 nm"),
    ),
    "grid too fine": ("[solver]", "[grid]\nstep_nm = 1e-6\n[solver]", ("grid.step_nm is 1e-06", "must be >= 0.05")),
    "depth without magnification": (
        "magnification = 0.1",
        "magnification = 0\nrequired_depth_mm = 5",
        ("required_depth_mm", "magnification"),
    ),
    "gap of nothing": ("alternatives = 0", "gap = 0", ("solver.gap is 0", "must be >= 1e-08")),
    "catalogue missing": (HEAD, HEAD + '\ncatalog = "nowhere"', ("catalog is 'nowhere'", "catalog.toml")),
    "own LED in micrometres": (
        "[solver]",
        '[[led]]\nid = "mine"\nsource = "x"\npeak_um = 0.85\n[solver]',
        ("led 'mine'", "peak_um", "peak_nm"),
    ),
    "own part named like another": (
        "[solver]",
        '[[filter]]\nid = "open"\nsource = "x"\nkind = "none"\n[solver]',
        ("filter 'open'", "taken already", "rename"),
    ),
}
LIMIT_CASES = {
    "exposure wanted above what blur allows": (
        "frame_rate_hz = 50",
        "frame_rate_hz = 50\nexposure_min_us = 5000",
        ("wanted shortest exposure", "5000 us", "motion blur", "345 us"),
    ),
    "frame rate above the shortest exposure": (
        "frame_rate_hz = 50",
        "frame_rate_hz = 1e6",
        ("camera shortest exposure", "frame period"),
    ),
    "dark signal above its share at once": (
        "rig_heat_w = 2",
        "dark_well_share = 1e-12",
        ("camera shortest exposure", "dark signal in the well"),
    ),
    "depth beyond all f-numbers": (
        "lens_transmittance = 0.9",
        "required_depth_mm = 500",
        ("depth of field", "f/8", "optics.required_depth_mm is 500"),
    ),
    "air hotter than the junctions may be": (
        "air_c = 30",
        "air_c = 120",
        ("temperature.air_c is 120", "junction limit"),
    ),
    "steps above every current": ("drive_step_ma = 5", "drive_step_ma = 2000", ("lighting.drive_step_ma 2000",)),
    "heat below one step": ("rig_heat_w = 2", "rig_heat_w = 1e-9", ("lighting.drive_step_ma 5",)),
    "ambient alone saturates": (
        "illuminance_lx = 200",
        "illuminance_lx = 9e9",
        ("ambient light alone fills the well of 'cap-white'", "shortest exposure, 20 us"),
    ),
}


@pytest.mark.parametrize("case", PROBLEM_CASES)
def test_bad_problem_file_gives_one_line(case, tmp_path):
    old, new, words = PROBLEM_CASES[case]
    file = tmp_path / "job.toml"
    file.write_text(spoiled(PROBLEM, old, new), encoding="utf-8")
    assert_one_line(cnr("solve", file), 2, ("job.toml", *words))


@pytest.mark.parametrize("case", LIMIT_CASES)
@pytest.mark.parametrize("flags", [(), ("--json",)], ids=["text", "json"])
def test_impossible_limits_name_those_in_conflict(case, flags, tmp_path):
    old, new, words = LIMIT_CASES[case]
    file = tmp_path / "job.toml"
    file.write_text(spoiled(PROBLEM, old, new), encoding="utf-8")
    outcome = cnr("solve", file, *flags)
    assert_one_line(outcome, 3, ("job.toml", *words))
    assert outcome.out == ""


OWN_SURFACE = """
[[surface]]
id = "mine"
source = "test"
curve = "mine.csv"
unit = "UNIT"
"""

CURVE_CASES = {
    # unit, lines of the curve file, words
    "fraction stated as percent": (
        "percent",
        ("340,0.2", "1750,0.3"),
        ("mine.csv", "percent", "looks like a fraction"),
    ),
    "percent stated as fraction": ("fraction", ("340,20", "1750,30"), ("mine.csv", "looks like percent")),
    "more than a white diffuser": ("percent", ("340,20", "1750,300"), ("mine.csv", "300", "must be <= 150")),
    "negative reflectance": ("percent", ("340,-20", "1750,30"), ("mine.csv", "-20", "must be >= 0")),
    "unsorted wavelengths": ("percent", ("340,20", "900,25", "800,30"), ("mine.csv", "800", "900")),
    "duplicate wavelengths": ("percent", ("340,20", "900,25", "900,30"), ("mine.csv", "900")),
    "not a number": ("percent", ("340,20", "900,nan", "1750,30"), ("mine.csv", "nan")),
    "text": ("percent", ("340,20", "900,dark", "1750,30"), ("mine.csv", "dark")),
    "ragged row": ("percent", ("340,20", "900", "1750,30"), ("mine.csv",)),
    "one row": ("percent", ("340,20",), ("mine.csv",)),
    "micrometres": ("percent", ("0.34,20", "1.75,30"), ("mine.csv", "nm")),
    "no overlap with the background": ("percent", ("1800,20", "2500,30"), ("mine", "1800-2500 nm", "340-1750 nm")),
    "range without the LEDs": ("percent", ("900,20", "1700,30"), ("candidates.leds", "blue-470-a", "900-1700 nm")),
}


@pytest.mark.parametrize("case", CURVE_CASES)
def test_bad_curve_gives_one_line(case, tmp_path):
    unit, rows, words = CURVE_CASES[case]
    file = tmp_path / "job.toml"
    problem = spoiled(PROBLEM, '"cap-blue"', '"mine"') + OWN_SURFACE.replace("UNIT", unit)
    file.write_text(problem, encoding="utf-8")
    (tmp_path / "mine.csv").write_text("\n".join(["wavelength_nm,a", *rows, ""]), encoding="utf-8")
    assert_one_line(cnr("solve", file), 2, ("job.toml", *words))


def test_target_with_the_background_curve_gives_one_line(tmp_path):
    own = OWN_SURFACE.replace("UNIT", "percent")
    problem = spoiled(PROBLEM, '"cap-blue"', '"mine"').replace('"cap-green"', '"twin"')
    file = tmp_path / "job.toml"
    file.write_text(problem + own + own.replace('"mine"', '"twin"'), encoding="utf-8")
    (tmp_path / "mine.csv").write_text("wavelength_nm,a\n340,20\n1750,30\n", encoding="utf-8")
    assert_one_line(cnr("solve", file), 2, ("job.toml", "'mine'", "'twin'", "equals", "no light can show"))


RECIPE_CASES = {
    "unknown camera": ('"mono-5mp"', '"mono-9mp"', ("camera is 'mono-9mp'", "job.toml", "mono-5mp")),
    "camera that is no candidate": ('"mono-5mp"', '"nir-2mp"', ("camera is 'nir-2mp'", "not among the candidates")),
    "unknown channel": ('"mono"', '"red"', ("channel is 'red'", "mono")),
    "unknown gain": ("gain_db = 0", "gain_db = 3", ("gain_db is 3", "0, 6, 12")),
    "unknown filter": ('"none"', '"bp-1"', ("filter is 'bp-1'", "none")),
    "unknown LED": ("blue-470-a =", "blue-471-a =", ("drive_ma.blue-471-a", "blue-470-a")),
    "current above every rating": ("400", "9000", ("drive_ma.blue-470-a is 9000", "0 to ")),
    "negative current": ("400", "-4", ("drive_ma.blue-470-a is -4", "must be >= 0")),
    "negative exposure": ("exposure_us = 300", "exposure_us = -300", ("exposure_us is -300", "must be > 0")),
    "text for a current": ("400", '"much"', ("drive_ma.blue-470-a is 'much'", "number")),
    "true for a current": ("400", "true", ("drive_ma", "true")),
    "not a number": ("f_number = 4", "f_number = nan", ("f_number is nan", "finite")),
    "wrong unit": ("exposure_us = 300", "exposure_ms = 0.3", ("exposure_ms", "exposure_us")),
    "missing key": ("gain_db = 0", "", ("gain_db is missing",)),
    "missing currents": ("[drive_ma]\nblue-470-a = 400", "", ("drive_ma is missing",)),
    "half an emitter": (
        "[drive_ma]",
        "[emitters]\nblue-470-a = 0.5\n[drive_ma]",
        ("emitters.blue-470-a is 0.5", "whole"),
    ),
    "emitters of an unknown LED": (
        "[drive_ma]",
        "[emitters]\nblue-471-a = 1\n[drive_ma]",
        ("emitters.blue-471-a", "blue-470-a"),
    ),
    "not TOML": ("[drive_ma]", "[drive_ma", ("not valid TOML", "line")),
}


@pytest.mark.parametrize("case", RECIPE_CASES)
def test_bad_recipe_gives_one_line(case, tmp_path):
    old, new, words = RECIPE_CASES[case]
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    recipe = tmp_path / "mine.toml"
    recipe.write_text(spoiled(RECIPE, old, new), encoding="utf-8")
    assert_one_line(cnr("check", tmp_path / "job.toml", recipe), 2, ("mine.toml", *words))


@pytest.mark.parametrize("command", ["solve", "check"])
@pytest.mark.parametrize(
    ("content", "words"),
    [
        (None, ("no such file",)),
        ("folder", ("cannot be read", "directory")),
        (b"title = 'caf\xe9'\n", ("not UTF-8", "byte 12")),
        (b"title = \n", ("not valid TOML", "line 1")),
        (b"", ("is missing",)),
    ],
    ids=["missing", "folder", "not UTF-8", "not TOML", "empty"],
)
def test_unreadable_file_gives_one_line(command, content, words, tmp_path):
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    file = tmp_path / "broken.toml"
    if content == "folder":
        file.mkdir()
    elif content is not None:
        file.write_bytes(content)
    arguments = (file,) if command == "solve" else (tmp_path / "job.toml", file)
    assert_one_line(cnr(command, *arguments), 2, ("broken.toml", *words))


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("solve", "yellow-stains"), ("yellow-stains", "did you mean 'yellow-stain'")),
        (("solve", "yellow-stain", "--gap", "nan"), ("gap is nan", "finite")),
        (("solve", "yellow-stain", "--gap", "2"), ("gap is 2", "must be <= 0.5")),
        (("solve", "yellow-stain", "--alternatives", "-1"), ("alternatives is -1", "must be >= 0")),
        (("parts", "leds", "peek_nm < 500"), ("'peek_nm'", "peak_nm")),
        (("parts", "leds", "peak_nm < 5"), ("'peak_nm < 5'", "selects none")),
        (("parts", "leds", "peak_nm < 'a'"), ("peak_nm < 'a'", "compare")),
        (("parts", "--id", "nir-850-z"), ("'nir-850-z'", "did you mean")),
        (("parts", "filters", "--id", "nir-850-a"), ("filter", "'nir-850-a'")),
        (("parts", "--catalog", "nowhere"), ("nowhere", "catalog.toml")),
    ],
)
def test_bad_option_gives_one_line(arguments, words):
    assert_one_line(cnr(*arguments), 2, words)
