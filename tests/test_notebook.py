"""Results show themselves in notebooks, compact and readable on light and dark ground, and in one line at a prompt."""

from __future__ import annotations

import importlib
import pickle
import pkgutil
from collections.abc import Callable
from pathlib import Path
from types import SimpleNamespace
from typing import Any
from xml.etree import ElementTree

import pytest
from hostile import MARK, assert_inert, assert_plain, hostile_problem

import codesign
from codesign import least_cost, load_problem, sensitivities, solve
from codesign.display import Displayed
from codesign.family.batch import Entry, OwnRigs
from codesign.family.outcome import Outcome, outcome_of
from codesign.report import notebook_html
from codesign.report.notebook import RENDERERS
from codesign.solve import Solution
from codesign.study.calibrate import calibrate
from codesign.study.fields import Axis
from codesign.study.radiation import screening
from codesign.study.readings import load_readings
from codesign.study.robust import robust
from codesign.study.routes import routes
from codesign.study.tolerance import tolerance
from codesign.study.trade import trade
from codesign.study.vary import vary
from codesign.study.worth import worth

DATA = Path(__file__).parent / "data"


@pytest.fixture(scope="module")
def solution(tmp_path_factory) -> Solution:
    """Of the problem whose every name is hostile."""
    return solve(hostile_problem(tmp_path_factory.mktemp("hostile")), alternatives=0)


def _calibration(_: Solution) -> Any:
    problem = load_problem(DATA / "calibration-problem.toml")
    return calibrate(problem, load_readings(DATA / "calibration-readings.csv", problem))


def _own_rigs(solution: Solution) -> OwnRigs:
    """Two variants, one of which has no recipe; their results as the store gives them back."""
    solved = outcome_of(solution, 1e-3)
    lost = Outcome(status="impossible", reason=f"limits in conflict: {MARK} <b>heat</b>", limits=("rig heat",))
    entries = [
        Entry(variant=SimpleNamespace(name=f"{MARK}-{k}"), outcome=found, required_cnr=99.0)
        for k, found in enumerate((solved, lost))
    ]
    return OwnRigs(title=solution.problem.spec.title, where="family.toml", entries=tuple(entries), run_now=2)


#: Every kind of result, made from a solution.
RESULTS: dict[str, Callable[[Solution], Any]] = {
    "problem": lambda s: s.problem,
    "solution": lambda s: s,
    "performance": lambda s: s.recipe,
    "least cost": lambda s: least_cost(s.problem, "exposure", 3.0),
    "sensitivities": lambda s: sensitivities(s, changes=False),
    "variation": lambda s: vary(s.problem, axes=[Axis(key="temperature.air_c", values=(20.0, 30.0))]),
    "map": lambda s: vary(
        s.problem, {"limits.well_headroom": 0.8},
        [Axis(key="temperature.air_c", values=(20.0, 30.0)), Axis(key="optics.magnification", values=(0.1, 0.2))],
    ),
    "settings": lambda s: vary(s.problem, {"timing.exposure_min_us": 200000.0}),
    "worths": lambda s: worth(s.problem),
    "tolerance": lambda s: tolerance(s.problem, s.recipe.design, draws=120),
    "robust": lambda s: robust(s.problem, scenarios=2, quantile=0.0),
    "routes": lambda s: routes(s.problem, 5.0),
    "calibration": _calibration,
    "trade": lambda s: trade(s.problem, "leds", points=3),
    "own rigs": _own_rigs,
    "screening": lambda s: screening(s.problem, s.recipe),
}  # fmt: skip


@pytest.fixture(scope="module")
def results(solution) -> dict[str, Any]:
    return {name: make(solution) for name, make in RESULTS.items()}


@pytest.mark.parametrize("name", RESULTS)
def test_view_is_whole_compact_and_brings_no_style_sheet(results, name):
    view = results[name]._repr_html_()
    root = ElementTree.fromstring(view)  # every element closed, every attribute quoted
    assert root.tag == "div"
    assert len(view) < 40_000
    tags = {element.tag for element in root.iter()}
    assert not tags & {"style", "script", "link", "iframe", "img"}
    assert not any(element.get("class") or element.get("id") for element in root.iter()), "a notebook has its own"
    assert_inert(view, shown=name not in ("calibration", "performance", "screening"))
    assert_plain(view)


@pytest.mark.parametrize("name", RESULTS)
def test_line_is_one_short_line_that_says_what_it_is(results, name):
    text = repr(results[name])
    assert text.startswith(f"<{type(results[name]).__name__}") and text.endswith(">")
    assert len(text) < 320
    assert_plain(text)
    assert "\n" not in text


def test_solution_says_what_matters(results, solution):
    view = "".join(ElementTree.fromstring(results["solution"]._repr_html_()).itertext())
    assert f"CNR {solution.recipe.cnr:.4g}" in view
    assert f"none above {solution.certificate.bound:.5g} (proven)" in view
    for led in solution.recipe.leds:
        assert f"{led.drive_ma:.10g} mA" in view
    assert "binds" in view and "electrons, target" in view
    assert MARK in view


def test_missed_limits_are_all_shown(solution):
    from dataclasses import replace

    from codesign import evaluate

    bright = replace(solution.recipe.design, exposure_us=90000.0)
    found = evaluate(solution.problem, bright)
    view = "".join(ElementTree.fromstring(found._repr_html_()).itertext())
    assert view.count("NOT met") == len(found.violated) + 1 > 1
    assert f"{len(found.violated)} limits NOT met" in repr(found)


def test_conflicts_and_dark_recipes_are_shown_too(results, solution):
    from codesign import Design, evaluate

    assert "limits cannot be met" in repr(results["settings"])
    dark = Design(
        camera="bench-camera", channel=solution.recipe.design.channel, gain_db=0, filter="none", f_number=4.0,
        exposure_us=100.0,
    )  # fmt: skip
    assert "all off" in evaluate(solution.problem, dark)._repr_html_()


def test_long_tables_are_cut_and_counted():
    text = str(notebook_html.table(("a", "b"), [(k, k) for k in range(100)]))
    assert text.count("<tr") == 1 + notebook_html.ROWS
    assert f"and {100 - notebook_html.ROWS} more" in text


def _luminance(color: str) -> float:
    """Relative luminance, WCAG 2.1."""
    linear = [(c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4)
              for c in (int(color[k : k + 2], 16) / 255 for k in (1, 3, 5))]  # fmt: skip
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("color", [notebook_html.TARGET, notebook_html.BACKGROUND, notebook_html.FILTER])
@pytest.mark.parametrize("ground", ["#ffffff", "#111111"])
def test_colours_stand_out_on_light_and_on_dark(color, ground):
    # WCAG 2.1, 1.4.11: graphical objects need a contrast of 3 : 1
    light, dark = sorted((_luminance(color), _luminance(ground)), reverse=True)
    assert (light + 0.05) / (dark + 0.05) >= 3.0


def _everything() -> None:
    for module in pkgutil.walk_packages(codesign.__path__, "codesign."):
        if not module.name.endswith("__main__"):
            importlib.import_module(module.name)


def test_every_result_has_a_view_and_every_view_a_result():
    _everything()
    own = {f"{kind.__module__}.{kind.__qualname__}" for kind in Displayed.__subclasses__()}
    assert own == set(RENDERERS)


def test_results_stay_frozen_and_slotted(results):
    found = results["performance"]
    assert not hasattr(found, "__dict__")
    with pytest.raises(AttributeError):
        found.cnr = 1.0
    assert pickle.loads(pickle.dumps(found)) == found


def test_half_made_results_still_have_a_line():
    assert "Solution object at" in repr(object.__new__(Solution))
