"""Which parts the live page takes where a catalogue is too large for a file to be mailed, and its data."""

import json
import math

import numpy as np
import pytest
from live_shell import special, written

from codesign.radiometry import reflectances
from codesign.report.page import live_parts
from codesign.report.page.live import live_fragment
from codesign.report.page.live_parts import kept_parts, seen_span
from codesign.search.walk import Walk


def numbers(value):
    """All numbers in nested data."""
    if isinstance(value, dict | list):
        for inner in value.values() if isinstance(value, dict) else value:
            yield from numbers(inner)
    elif isinstance(value, int | float):
        yield value


def names(parts) -> set[str]:
    return {part.id for part in parts}


def test_data_are_plain_finite_json(solved):
    data = live_fragment(solved("bruise")).data
    assert all(math.isfinite(value) for value in numbers(data))
    assert json.loads(json.dumps(data, allow_nan=False)) == data


def test_small_catalogues_go_in_whole_in_full_precision(solved):
    solution = solved("two-inks")
    kept = kept_parts(solution)
    assert kept.kind == "f8" and kept.note == ""
    assert names(kept.filters) == names(solution.problem.filters)
    assert kept.cameras == solution.problem.cameras and kept.leds == solution.problem.channels


def test_only_wavelengths_that_no_camera_sees_are_left_out(solved):
    problem = solved("bruise").problem
    span = seen_span(problem)
    for camera in problem.cameras:
        for name in camera.channel_names:
            response = camera.quantum_efficiency(name, problem.grid)
            assert not response[: span.start].any() and not response[span.stop :].any()
    assert span.stop - span.start < problem.grid.size


def room_for(problem, filters: float) -> float:
    """Characters that the surfaces, all cameras and some filters take in short numbers."""
    scene, span = reflectances(problem), seen_span(problem)
    rows = 2 * len(scene.mean) + len(scene.clutter) + sum(len(c.channels) for c in problem.cameras) + filters
    return rows * (span.stop - span.start) * 4 * 4 / 3


@pytest.mark.parametrize("share", [0.9, 0.6])
def test_large_catalogue_keeps_parts_in_use_and_the_best_by_bound(solved, monkeypatch, share):
    solution = solved("two-inks")
    problem = solution.problem
    monkeypatch.setattr(live_parts, "LARGEST", room_for(problem, share * len(problem.filters)))
    kept = kept_parts(solution)
    used = {d.filter for d in (solution.recipe.design, *(a.design for a in solution.alternatives))}
    assert used <= names(kept.filters) < names(problem.filters)
    assert solution.recipe.design.camera in names(kept.cameras)
    assert f"{len(kept.filters)} of {len(problem.filters)} filters" in kept.note
    bound = bounds_of_filters(solution)
    left = names(problem.filters) - names(kept.filters)
    assert max(bound[name] for name in left) <= min(bound[name] for name in names(kept.filters) - used)


def bounds_of_filters(solution) -> dict[str, float]:
    """Best closed-form bound of any configuration with each filter."""
    from codesign.assemble import Assembly

    problem = solution.problem
    junction = np.array([solution.certificate.junction_c[c.id] for c in problem.channels])
    walk = Walk(Assembly(problem, junction))
    upper = walk.upper.reshape(-1, len(problem.filters), 2).max(axis=(0, 2))
    return {part.id: value for part, value in zip(problem.filters, upper, strict=True)}


def test_many_leds_are_cut_to_those_in_use_and_those_of_most_contrast(solved, monkeypatch):
    solution = solved("two-inks")
    monkeypatch.setattr(live_parts, "LARGEST_NUMBER_OF_LEDS", 5)
    kept = kept_parts(solution)
    assert len(kept.leds) == max(5, len(solution.recipe.leds))
    assert set(solution.recipe.design.drive_ma) <= names(kept.leds)
    assert f"Of {len(solution.problem.channels)} LEDs the list holds" in kept.note


def test_page_with_fewer_parts_says_so_and_works(browser, solved, monkeypatch, tmp_path):
    solution = solved("bruise")
    monkeypatch.setattr(live_parts, "LARGEST", room_for(solution.problem, 6.5))
    fragment = live_fragment(solution)
    browser.open(written(fragment, tmp_path))
    assert fragment.data["left_out"]
    assert browser.run("return document.getElementById('live-parts-note').textContent") == fragment.data["left_out"]
    assert browser.run("return codesignLive.page.result.cnr") == pytest.approx(solution.recipe.cnr, rel=1e-6)
    assert browser.console() == []


@pytest.mark.parametrize("name", ["single", "combined"])
def test_data_that_cannot_fit_are_left_out_in_words(solved, monkeypatch, name):
    monkeypatch.setattr(live_parts, "LARGEST", 1000)
    fragment = live_fragment(solved("bruise") if name == "single" else special("channels"))
    assert fragment.scripts == () and fragment.data == {}
    assert "left out here" in fragment.html
