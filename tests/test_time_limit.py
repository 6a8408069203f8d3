"""Stopping early keeps the best so far, with the gap that is proven."""

import itertools

import numpy as np
import pytest
from demo_names import DEMOS

from codesign import load_problem, solve, verify
from codesign.assemble import Assembly
from codesign.certificate_ceiling import shot_noise_ceilings
from codesign.limits import well_bound
from codesign.radiometry import reflectances
from codesign.search.walk import Walk
from codesign.solve_rounds import Clock, search_rounds
from codesign.study.ceiling import contrast_limited_cnr


def test_time_limit_keeps_a_feasible_recipe_and_an_honest_gap(solved):
    full = solved("bruise")
    solution = solve(load_problem("bruise"), time_limit=0.0)
    assert solution.recipe.feasible
    assert solution.alternatives == ()
    assert solution.certificate.bound >= full.certificate.value * (1 - 1e-3)
    assert (solution.status == "stopped") == (solution.certificate.gap > 1e-3)
    verify(solution)


def test_interrupt_keeps_the_best_so_far():
    calls = []

    def progress(value, bound):
        calls.append(value)
        if value > 0:
            raise KeyboardInterrupt

    search = search_rounds(load_problem("bruise"), 1e-3, progress=progress, clock=Clock())
    assert search.stopped
    assert search.walk.found[search.best].value > 0
    assert np.isfinite(search.gap)


def test_interrupt_before_anything_is_known_goes_through():
    def progress(value, bound):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        search_rounds(load_problem("bruise"), 1e-3, progress=progress)


def test_time_that_ends_among_the_closed_forms_leaves_an_honest_bound(monkeypatch, solved):
    """Configurations that there was no time for are bounded by the full well and shot noise."""
    monkeypatch.setattr("codesign.search.closed_form.WORTH_THREADS", 0)
    monkeypatch.setattr("codesign.search.closed_form.FILTERS_TOGETHER", 5)
    full, problem = solved("bruise"), load_problem("bruise")
    solution = solve(problem, time_limit=0.0)
    assert solution.status == "stopped"
    assert solution.recipe.feasible
    assert solution.certificate.bound > 1.5 * full.certificate.bound
    settings = Assembly(problem, np.full(len(problem.channels), 25.0)).settings
    assert solution.certificate.bound == shot_noise_ceilings(problem, settings).max()
    verify(solution)


@pytest.mark.parametrize("most", [1, 4, 9])
def test_bounds_hold_wherever_the_closed_forms_are_left(most, monkeypatch):
    monkeypatch.setattr("codesign.search.closed_form.WORTH_THREADS", 0)
    monkeypatch.setattr("codesign.search.closed_form.FILTERS_TOGETHER", 1)
    problem = load_problem("thin-film")
    assembly = Assembly(problem, np.full(len(problem.channels), 25.0))
    whole = Walk(assembly)
    calls = itertools.count()
    left = Walk(assembly, stop=lambda: next(calls) >= most)
    assert left.skipped.any() and not left.skipped.all()
    assert not whole.skipped.any()
    assert np.array_equal(left.upper[~left.skipped], whole.upper[~left.skipped])
    number = left.best()
    assert not left.skipped[number]
    certain = whole.found[whole.best()].value
    assert left.upper.max() >= certain


@pytest.mark.parametrize("name", DEMOS)
def test_no_recipe_passes_what_full_well_and_shot_noise_allow(name, solved):
    solution = solved(name)
    problem = solution.problem
    settings = Assembly(problem, np.full(len(problem.channels), 25.0)).settings
    bounds = shot_noise_ceilings(problem, settings)
    own = [
        row
        for setting, row in zip(settings, bounds, strict=True)
        if (setting.camera.id, setting.gain.gain_db)
        == (solution.optimum.design.camera, solution.optimum.design.gain_db)
    ]
    sign = 0 if solution.optimum.sign == "brighter" else 1
    assert max(row[sign] for row in own) >= solution.optimum.cnr


def test_ceiling_is_that_of_the_best_single_wavelength():
    problem = load_problem("yellow-stain")
    scene, settings = reflectances(problem), Assembly(problem, np.full(len(problem.channels), 25.0)).settings
    t, b = (scene.mean[i] for i in problem.pairs[0])
    samples = problem.spec.averaging.pixels * problem.spec.averaging.frames
    expected = [
        contrast_limited_cnr(t, b, well_bound(problem, setting), samples=samples)[t < b].max() for setting in settings
    ]
    assert shot_noise_ceilings(problem, settings)[:, 1] == pytest.approx(expected, rel=1e-6)
