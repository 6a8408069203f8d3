"""The generator behind benchmarks and property tests: usable parts, any size, the same for the same seed."""

import pytest
from parametric_catalog import parametric_catalog, parametric_problem

from codesign.assemble import Assembly


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_every_generated_part_is_usable(tmp_path, seed):
    catalog = parametric_catalog(tmp_path, leds=40, filters=30, cameras=5, seed=seed, samples=3)
    problem = parametric_problem(catalog, tmp_path)
    assert problem.left_out == ()
    assert (len(problem.channels), len(problem.filters)) == (40, 30)
    assert len(Assembly(problem, [25.0] * 40).settings) == 5


def test_the_same_seed_gives_the_same_catalogue(tmp_path):
    sizes = {"leds": 6, "filters": 5, "cameras": 2}
    first, again = (parametric_catalog(tmp_path, **sizes, seed=4) for _ in range(2))
    other = parametric_catalog(tmp_path, **sizes, seed=5)
    assert first.leds == again.leds and first.filters == again.filters and first.cameras == again.cameras
    assert first.leds != other.leds


def test_the_largest_catalogue_is_made_in_seconds(tmp_path):
    catalog = parametric_catalog(tmp_path, leds=300, filters=2000, cameras=30, samples=6)
    assert (len(catalog.leds), len(catalog.filters), len(catalog.cameras)) == (300, 2000, 30)
