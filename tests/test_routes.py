"""Routes to a required CNR: levers, certified ends, best pair, ideal parts, and the photon-noise ceiling."""

import tomllib

import numpy as np
import pytest
from command_line import PROBLEM, spoiled
from small_problems import small_problem

from codesign import build_problem, load_problem
from codesign.errors import ProblemError
from codesign.problem import Problem
from codesign.study.ceiling import ceilings, contrast_limited_cnr
from codesign.study.common import resolve
from codesign.study.ideal import ideal_filters, ideal_led, widened
from codesign.study.levers import LEVERS, applicable, pulled
from codesign.study.routes import Routes, routes

BY_NAME = {lever.name: lever for lever in LEVERS}


def _caps(**changes: str) -> Problem:
    text = PROBLEM
    for old, new in changes.items():
        text = spoiled(text, old, new)
    return build_problem(tomllib.loads(text))


@pytest.fixture(scope="module")
def short() -> Routes:
    """Routes of the cap problem to 1.1 times its optimum."""
    problem = _caps()
    return routes(problem, 1.1 * resolve(problem).cnr)


def test_each_single_route_is_certified_on_both_sides(short: Routes) -> None:
    reached = [route for route in short.singles if route.factor is not None]
    assert len(reached) >= 3
    for route in reached:
        levers = tuple(BY_NAME[name] for name in route.levers)
        enough = resolve(pulled(short.problem, levers, route.factor))
        less = resolve(pulled(short.problem, levers, route.short_factor))
        assert enough.cnr >= short.required_cnr * (1 - 1e-4)
        assert less.bound < short.required_cnr * (1 + 1e-4)
        assert route.short_bound < short.required_cnr <= route.cnr
        room = np.log(route.factor / route.short_factor)
        if BY_NAME[route.levers[0]].whole is None:
            assert room <= max(0.011 * np.log(route.factor), 6e-4)


def test_levers_out_of_reach_state_what_they_bring_at_most(short: Routes) -> None:
    missed = [route for route in short.singles if route.factor is None]
    assert missed
    for route in missed[:4]:
        lever = BY_NAME[route.levers[0]]
        most = resolve(pulled(short.problem, (lever,), lever.most(short.problem)))
        assert most.bound < short.required_cnr
        # Both are proven bounds of the same optimum, to the problem's own gap.
        assert route.short_bound == pytest.approx(max(most.bound, short.start.bound), rel=2e-3)
        assert route.short_bound >= most.cnr * (1 - 1e-6)


def test_the_best_pair_beats_every_other_pair(short: Routes) -> None:
    pair = short.pair
    assert pair is not None and pair.cnr >= short.required_cnr
    levers, _ = applicable(short.problem)
    best_single = min(route.factor for route in short.singles if route.factor is not None)
    assert pair.factor <= best_single * 1.01
    names = [lever.name for lever in levers]
    # By brute force: no pair reaches the CNR at the factor said to be too small.
    for i, first in enumerate(levers):
        for second in levers[i + 1 :]:
            found = resolve(pulled(short.problem, (first, second), short.pair_floor), short.start)
            assert found.cnr < short.required_cnr, (first.name, second.name, names)


def test_whole_numbers_are_the_smallest_that_do(short: Routes) -> None:
    frames = next(route for route in short.singles if route.levers == ("frames averaged",))
    if frames.factor is not None:
        count = round(frames.after["averaging.frames"])
        assert count == round(frames.factor) and round(frames.short_factor) == count - 1


def test_nothing_has_to_change_where_the_cnr_is_met() -> None:
    found = routes(load_problem("yellow-stain"))
    assert found.met and found.pair is None and found.singles == ()
    assert found.ceiling > found.start.bound


def test_levers_at_factor_one_change_nothing_and_more_helps() -> None:
    problem = _caps()
    base = resolve(problem)
    for lever in applicable(problem)[0]:
        same = resolve(lever.change(problem, 1.0), base)
        assert same.cnr == pytest.approx(base.cnr, rel=1e-4), lever.name
        more = resolve(pulled(problem, (lever,), 1.5), base)
        assert more.cnr >= base.cnr * (1 - (2e-3 if not lever.monotone else 1e-4)), lever.name


def test_less_read_noise_does_not_tighten_a_limit_stated_as_its_multiple() -> None:
    problem = load_problem("two-inks")
    changed = BY_NAME["read noise"].change(problem, 2.0)
    for old, new in zip(problem.cameras, changed.cameras, strict=True):
        before = problem.spec.limits.dark_noise_share * old.read_noise_e**2
        assert changed.spec.limits.dark_noise_share * new.read_noise_e**2 == pytest.approx(before)


@pytest.mark.parametrize("wanted", [0.0, -1.0, float("inf"), float("nan")])
def test_a_cnr_that_is_none_gives_one_line(wanted: float) -> None:
    with pytest.raises(ProblemError, match="must be > 0"):
        routes(load_problem("yellow-stain"), wanted)


def test_an_ideal_led_helps_as_its_own_resolve_says() -> None:
    problem = _caps()
    base = resolve(problem)
    found = ideal_led(problem, base)
    assert found.wavelength_nm is not None and found.gain > 0
    assert found.cnr == pytest.approx(max(cnr for _, cnr in found.scan), rel=1e-3)
    assert found.bound >= found.cnr * (1 - 1e-6)
    assert all(cnr >= base.cnr * (1 - 2e-3) for _, cnr in found.scan), "a further LED never hurts"


def test_ideal_filters_never_lose_and_are_certified() -> None:
    problem = _caps()
    base = resolve(problem)
    for part in ideal_filters(problem, base):
        assert part.gain >= 0 and part.bound >= part.cnr * (1 - 1e-6)
        assert part.cnr >= base.cnr


def test_a_wider_grid_changes_no_optimum() -> None:
    problem = _caps(**{'[[scene.ambient]]\nilluminant = "D65"\nilluminance_lx = 200\n': ""})
    wide = widened(problem)
    assert wide.grid[0] < problem.grid[0] and wide.grid[-1] > problem.grid[-1]
    # The far tails of the LEDs, which the narrower grid cuts off, are worth this much.
    assert resolve(wide).cnr == pytest.approx(resolve(problem).cnr, rel=5e-4)


# --- the ceiling -----------------------------------------------------------------------------------------------


def test_ceiling_with_shot_noise_alone_is_the_closed_form(tmp_path) -> None:
    # sqrt(2 N W) (1 - c) / sqrt(1 + c) with c = 0.4/0.5, W = 0.9 * min(10000, (4095 - 10)/0.4) and N = 12
    problem = small_problem(tmp_path, {"averaging.pixels": 4, "averaging.frames": 3, "scene.guards": []})
    well = 0.9 * min(10000, 4085 / 0.4)
    expected = np.sqrt(2 * 12 * well) * (1 - 0.8) / np.sqrt(1 + 0.8)
    assert ceilings(problem)[0].shot_only == pytest.approx(expected, rel=1e-9)


def test_ceiling_with_prnu_and_clutter_is_the_closed_form(tmp_path) -> None:
    problem = small_problem(tmp_path, {"averaging.pixels": 4, "averaging.frames": 3, "scene.guards": []})
    well = 0.9 * min(10000, 4085 / 0.4)
    # Electrons at the full well, term by term: shot, PRNU 1 %, spreads 0.02 and 0.01 of 0.4 and 0.5.
    bright, dark = well, well * 0.8
    variance = (bright + dark) / (2 * 12) + 1e-4 * (bright**2 + dark**2) / (2 * 4)
    variance += ((0.02 / 0.5 * well) ** 2 + (0.01 / 0.5 * well) ** 2) / 2
    found = ceilings(problem)[0]
    assert found.one_wavelength == pytest.approx((bright - dark) / np.sqrt(variance), rel=1e-9)
    # Flat curves: no mixture of wavelengths is better than one.
    assert found.any_light == pytest.approx(found.one_wavelength, rel=1e-4)
    assert found.any_light >= found.one_wavelength * (1 - 1e-9)


def test_ceiling_formula_matches_its_two_simple_cases() -> None:
    contrast = np.array([0.1, 0.5, 0.9])
    shot = contrast_limited_cnr(contrast, 1.0, 1e4, samples=9)
    assert shot == pytest.approx(np.sqrt(2 * 9 * 1e4) * (1 - contrast) / np.sqrt(1 + contrast))
    clutter = contrast_limited_cnr(0.5, 0.6, 1e30, target_spread=0.03, background_spread=0.04)
    assert float(clutter) == pytest.approx(0.1 / np.sqrt((0.03**2 + 0.04**2) / 2))
    assert float(contrast_limited_cnr(0.0, 0.0, 1e4)) == 0.0


@pytest.mark.parametrize("name", ["yellow-stain", "fast-web", "glue-bead", "rust-outdoors"])
def test_no_solution_passes_the_ceiling(name: str, solved) -> None:
    problem = load_problem(name)
    highest = ceilings(problem)
    assert solved(name).certificate.bound <= highest[0].any_light * (1 + 1e-4)
    for ceiling in highest:
        assert ceiling.any_light <= ceiling.shot_only * 1.0001 or ceiling.any_light <= ceiling.one_wavelength * 1.2


def test_random_mixtures_stay_below_the_ceiling() -> None:
    problem = load_problem("bruise")
    ceiling = next(c for c in ceilings(problem) if c.camera == "nir-2mp")
    camera = problem.camera("nir-2mp")
    from codesign.radiometry import reflectances

    scene, rng = reflectances(problem), np.random.default_rng(0)
    target, background = scene.mean[:2]
    averaging, prnu = problem.spec.averaging, camera.prnu_percent / 100
    for _ in range(200):
        light = rng.exponential(size=problem.grid.size) ** rng.integers(1, 12)
        light *= ceiling.well_e / (scene.mean @ light).max()
        n = np.array([target @ light, background @ light])
        spread = sum(float(np.sum((scene.clutter[rows] @ light) ** 2)) for rows in scene.rows_of[:2])
        samples = averaging.pixels * averaging.frames
        variance = (n.sum() / samples + prnu**2 * (n**2).sum() / averaging.pixels + spread) / 2
        assert abs(n[0] - n[1]) / np.sqrt(variance) <= ceiling.any_light * (1 + 1e-9)
