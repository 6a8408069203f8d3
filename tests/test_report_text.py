"""The plain-text report: fits the page, says all it must, and survives odd names."""

from dataclasses import replace

import pytest
from command_line import PROBLEM, RECIPE, spoiled
from demo_names import DEMOS

from codesign import Design, evaluate, load_problem, load_recipe, verify
from codesign.report.cautions import DEFERENCE, cautions
from codesign.report.layout import bar, number, percent, table
from codesign.report.output import as_ascii
from codesign.report.text import performance_text, solution_text

QUICK = ("yellow-stain", "two-inks")
SECTIONS = ("WHAT TO SET", "WHAT YOU GET", "WHAT LIMITS IT", "NOISE BUDGET", "HOW SURE IT IS")


@pytest.mark.parametrize("name", DEMOS)
@pytest.mark.parametrize("width", [60, 80, 120])
def test_report_fits_the_page(name, width, solved):
    lines = solution_text(solved(name), width).splitlines()
    assert max(map(len, lines)) <= width
    assert all(line == line.rstrip() for line in lines)


@pytest.mark.parametrize("name", DEMOS)
def test_report_names_every_setting_surface_limit_and_noise_term(name, solved):
    solution = solved(name)
    recipe, text = solution.recipe, solution_text(solution, 120)
    assert all(section in text for section in SECTIONS)
    assert f"{recipe.design.exposure_us:.10g} µs" in text
    for led, ma in recipe.design.drive_ma.items():
        assert led in text
        assert f"{ma:.10g} mA" in text
    used = [limit.name for limit in recipe.limits if limit.share >= 0.01]
    for word in (recipe.design.camera, *(s.id for s in recipe.surfaces), *used):
        assert word in text
    for term, pair in recipe.noise.items():
        assert (term in text) == (sum(pair) > 0)
    assert f"{solution.certificate.configurations} configurations" in text


@pytest.mark.parametrize("name", QUICK)
def test_binding_limits_are_marked(name, solved):
    solution = solved(name)
    marked = [line for line in solution_text(solution).splitlines() if line.startswith(" ► ")]
    for limit in solution.binding:
        assert any(limit in line for line in marked)
    assert len(marked) == len(solution.binding) + (1 if solution.binding else 0)


def test_required_cnr_is_compared(solved):
    solution = solved("yellow-stain")
    assert "required    CNR 4: met" in solution_text(solution)
    spec = solution.problem.spec.model_copy(update={"required_cnr": 100.0})
    harder = replace(solution, problem=replace(solution.problem, spec=spec))
    assert "required    CNR 100: NOT met" in solution_text(harder)


def test_verdict_of_the_checker_is_told(solved):
    solution = solved("yellow-stain")
    assert "verified" in solution_text(solution, verdict=verify(solution))
    assert "verified" not in solution_text(solution)


def test_runners_up_come_best_first(solved):
    solution = solved("two-inks")
    rows = solution_text(solution).split("RUNNERS-UP")[1].split("\n\n")[0].splitlines()[2:]
    values = [float(row.split()[2]) for row in rows]
    assert values == sorted(values, reverse=True)
    assert len(values) == len(solution.alternatives)


@pytest.mark.parametrize("name", DEMOS)
def test_report_has_an_ascii_likeness(name, solved):
    assert "?" not in as_ascii(solution_text(solved(name)))


def test_names_with_control_characters_stay_plain(solved):
    solution = solved("yellow-stain")
    spec = solution.problem.spec.model_copy(update={"title": "a\x1b[2Jb\u202e\nWHAT TO SET"})
    text = solution_text(replace(solution, problem=replace(solution.problem, spec=spec)))
    assert "\x1b" not in text
    assert "\u202e" not in text
    assert text.splitlines()[0] == " title       a [2Jb WHAT TO SET"


def test_left_out_parts_are_listed_in_short(solved):
    solution = solved("yellow-stain")
    problem = replace(solution.problem, left_out=tuple(f"led x{k}: too far" for k in range(20)))
    text = solution_text(replace(solution, problem=problem))
    assert "led x5: too far" in text
    assert "led x6: too far" not in text
    assert "and 14 more" in text


def bench(tmp_path, *changes: tuple[str, str]):
    text = PROBLEM
    for old, new in changes:
        text = spoiled(text, old, new)
    (tmp_path / "job.toml").write_text(text, encoding="utf-8")
    return load_problem(tmp_path / "job.toml")


def test_missed_limits_come_first_with_their_amount(tmp_path):
    problem = bench(tmp_path)
    design = Design(
        camera="mono-5mp", channel="mono", gain_db=0, filter="none", f_number=4, exposure_us=690,
        drive_ma={"blue-470-a": 800},
    )  # fmt: skip
    performance = evaluate(problem, design)
    text = performance_text(problem, performance)
    assert text.index("NOT MET") < text.index("WHAT TO SET")
    assert "motion blur 2 pixel is 1 pixel above the limit 1 pixel" in text
    assert " ! motion blur" in text


def test_met_recipe_says_so(tmp_path):
    problem = bench(tmp_path)
    (tmp_path / "r.toml").write_text(RECIPE, encoding="utf-8")
    assert "all limits  are met" in performance_text(problem, evaluate(problem, load_recipe(tmp_path / "r.toml")))


def dark(problem):
    return evaluate(
        problem, Design(camera="mono-5mp", channel="mono", gain_db=0, filter="none", f_number=4, exposure_us=100)
    )


def test_dark_recipe_is_reported_without_cautions(tmp_path):
    problem = bench(tmp_path)
    text = performance_text(problem, dark(problem))
    assert "LEDs        all off" in text
    assert "CAUTIONS" not in text
    assert cautions(problem, dark(problem)) == ()


@pytest.mark.parametrize(
    ("led", "changes", "expected"),
    [
        ("uv-365-a", (), ("Ultraviolet",)),
        ("blue-470-a", (), ("Blue light",)),
        ("nir-850-a", (), ("Infrared",)),
        ("amber-590-a", (), ()),
        ("white-4000k-a", (), ("Blue light",)),
        ("amber-590-a", (("frame_rate_hz = 50", "frame_rate_hz = 80"),), ()),
    ],
)
def test_cautions_are_those_that_apply(led, changes, expected, tmp_path):
    problem = bench(tmp_path, ('leds = ["blue-470-a", "red-625-a"]', f'leds = ["{led}"]'), *changes)
    design = replace(dark(problem).design, drive_ma={led: 100.0})
    found = cautions(problem, evaluate(problem, design))
    light = [text for text in found if text.startswith(("Ultraviolet", "Blue", "Infrared"))]
    assert len(light) == len(expected)
    assert all(text.startswith(word) for text, word in zip(light, expected, strict=True))
    flashing = any("flashes at 50 Hz" in text for text in found)
    assert flashing == (not changes)
    assert not found or found[-1] == DEFERENCE


def test_hot_junctions_and_high_voltage_are_cautioned(tmp_path):
    changes = (("emitters_per_channel = 2", "emitters_per_channel = 40\nboard_k_per_w = 60"),
               ('mode = "strobe"', 'mode = "continuous"'))  # fmt: skip
    problem = bench(tmp_path, *changes)
    design = replace(dark(problem).design, drive_ma={"blue-470-a": 350.0})
    found = " ".join(cautions(problem, evaluate(problem, design)))
    assert "Hot parts" in found
    assert "above extra-low voltage" in found
    assert "flashes" not in found


@pytest.mark.parametrize(
    ("value", "text"),
    [(0.0, "0"), (12345.678, "12346"), (0.123456, "0.1235"), (float("inf"), "none"), (5.0, "5"), (1e12, "1e+12")],
)
def test_numbers_are_short(value, text):
    assert number(value) == text


@pytest.mark.parametrize(
    ("share", "text"),
    [(0.0, "0.0 %"), (0.5, "50.0 %"), (1e-5, "0.001 %"), (12.0, "1200 %"), (float("inf"), "> 9999 %")],
)
def test_shares_are_percent(share, text):
    assert percent(share) == text


def test_share_below_what_is_shown_is_said_to_be_so():
    assert percent(1e-5, least=0.001) == "< 0.1 %"


def test_bar_is_full_at_the_limit_only():
    assert bar(1.0, 10) == "█" * 10
    assert bar(0.98, 10) == "█" * 9 + "░"
    assert bar(7.0, 4) == "█" * 4
    assert bar(-1.0, 4) == "░" * 4


def test_wide_cell_is_cut():
    lines = table(("a", "b"), [("x" * 200, "5")], 60)
    assert max(map(len, lines)) <= 60
    assert "…" in lines[1]


def test_several_pairs_are_listed_worst_first(tmp_path):
    problem = bench(tmp_path, ('target = "cap-blue"', 'target = ["cap-blue", "cap-black"]'))
    performance = evaluate(problem, replace(dark(problem).design, drive_ma={"blue-470-a": 400.0}))
    text = performance_text(problem, performance)
    first, second = sorted(performance.pairs, key=lambda pair: pair.cnr)
    assert text.index("of the worst pair") < text.index(first.target, text.index("worst pair")) < text.index("required")
    block = text.split("of the worst pair:")[1].split("required")[0].splitlines()
    assert [line.split()[0] for line in block[2:4]] == [first.target, second.target]
