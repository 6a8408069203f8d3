"""What must hold of the best configuration whatever the parts: seeded generated catalogues, solved whole.

Junction temperatures are held fixed where two searches are compared, so that only what the property is about differs.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from parametric_catalog import parametric_catalog, parametric_problem

from codesign import solve
from codesign.assemble import Assembly
from codesign.search.frontier import certify
from codesign.search.walk import Walk

pytestmark = pytest.mark.property

GAP = 1e-4
SEEDS = (1, 2, 3)


@pytest.fixture(scope="module", params=SEEDS)
def catalog(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp("catalog")
    return parametric_catalog(folder, leds=8, filters=10, cameras=3, samples=4, seed=request.param), folder


def searched(problem):
    """The walk and the best CNR at junctions of 40 deg C."""
    walk = Walk(Assembly(problem, np.full(len(problem.channels), 40.0)), GAP)
    best = walk.best()
    return walk, 0.0 if best is None else walk.found[best].value


def best(problem) -> float:
    return searched(problem)[1]


def some(catalog, kind: str, count: int) -> list[str]:
    return list(getattr(catalog, kind))[:count]


@pytest.mark.parametrize("kind", ["leds", "filters", "cameras"])
def test_more_parts_are_never_worse(catalog, kind):
    catalog, folder = catalog
    few = {"no_filter": False, kind: some(catalog, kind, 2)}
    more = {"no_filter": False, kind: some(catalog, kind, 3)}
    values = [best(parametric_problem(catalog, folder, candidates=one)) for one in (few, more, {"no_filter": False})]
    assert values[1] >= values[0] * (1 - GAP) and values[2] >= values[1] * (1 - GAP)


@pytest.mark.parametrize(
    ("section", "key", "loose", "tight"),
    [
        ("limits", "rig_heat_w", 15.0, 4.0),
        ("limits", "supply_w", 20.0, 5.0),
        ("limits", "well_headroom", 0.9, 0.5),
        ("motion", "max_blur_px", 1.0, 0.3),
    ],
)
def test_a_tighter_limit_is_never_better(catalog, section, key, loose, tight):
    catalog, folder = catalog
    base = {"limits": {"rig_heat_w": 15.0}, "motion": {"speed_mm_per_s": 200.0, "max_blur_px": 1.0}}
    wide, narrow = (
        best(parametric_problem(catalog, folder, **{section: {**base[section], key: bound}}))
        for bound in (loose, tight)
    )
    assert narrow <= wide * (1 + GAP)


def test_the_order_of_parts_changes_nothing(catalog):
    catalog, folder = catalog
    turned = replace(
        catalog,
        **{kind: dict(reversed(list(getattr(catalog, kind).items()))) for kind in ("leds", "filters", "cameras")},
    )
    values = [best(parametric_problem(one, folder)) for one in (catalog, turned)]
    assert values[0] == pytest.approx(values[1], rel=GAP)


@pytest.mark.parametrize("kind", ["leds", "filters", "cameras"])
def test_duplicate_parts_change_nothing(catalog, kind):
    """An LED twice has twice the light, so the limit that counts there is the heat of the rig: held small."""
    catalog, folder = catalog
    parts = getattr(catalog, kind)
    twice = {
        **parts,
        **{f"{name}-twin": part.model_copy(update={"id": f"{name}-twin"}) for name, part in parts.items()},
    }
    if kind == "leds":
        single = best(parametric_problem(catalog, folder))
        assert best(parametric_problem(replace(catalog, leds=twice), folder)) >= single * (1 - GAP)
        return
    both = replace(catalog, **{kind: twice})
    values = [best(parametric_problem(one, folder)) for one in (catalog, both)]
    assert values[0] == pytest.approx(values[1], rel=GAP)


def test_swapping_target_and_background_changes_nothing(catalog):
    catalog, folder = catalog
    swapped = {"target": "background", "background": "target"}
    found = [solve(parametric_problem(catalog, folder, **one), gap=GAP) for one in ({}, {"scene": swapped})]
    assert found[0].optimum.cnr == pytest.approx(found[1].optimum.cnr, rel=2 * GAP)


def test_pruned_configurations_never_beat_the_winner(tmp_path):
    """500 configurations that the walk dropped by a bound, drawn at random and worked out one by one."""
    catalog = parametric_catalog(tmp_path, leds=12, filters=120, cameras=4, samples=4, seed=9)
    walk, value = searched(parametric_problem(catalog, tmp_path))
    dropped = np.setdiff1d(np.arange(walk.upper.size), list(walk.found))
    chosen = np.random.default_rng(3).choice(dropped, 500, replace=False)
    for index in chosen:
        found = certify(walk.programs(np.array([index]), coarse=False), 1e-3)
        assert found.value <= walk.upper[index] * (1 + 1e-9)
        assert found.value <= value * (1 + GAP)
