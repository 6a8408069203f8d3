"""Rigs in common of small random families against enumerating every rig and every set of LEDs."""

from dataclasses import replace
from functools import cache
from itertools import combinations

import numpy as np
import pytest
from random_families import Table, enumerated, even_catalog, random_family

from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.study.rig_sets import smallest_filter_wheel, smallest_rig_set
from codesign.study.rig_sets_verify import verify_filter_wheel, verify_rig_set
from codesign.study.shared_rig import SharedRig, shared_rig, verify_shared

pytestmark = pytest.mark.oracle

CATALOG = even_catalog()
GAP = 1e-4
#: Twenty families in which every variant can be seen at all, quick to enumerate.
SEEDS = (2, 3, 4, 6, 9, 10, 11, 12, 13, 14, 15, 18, 19, 20, 39, 43, 46, 47, 54, 58)
#: Some that need one, two or three rigs.
SETS = (2, 3, 10, 11, 13, 15, 46, 47, 54, 58)
#: A family in which a variant has no setting at all.
HOPELESS = 7


@cache
def family_of(seed: int) -> tuple[dict[str, Problem], int]:
    rng = np.random.default_rng(500 + seed)
    return random_family(rng, CATALOG), int(rng.integers(1, 3))


@cache
def table_of(seed: int) -> Table:
    return enumerated(*family_of(seed))


def solved(seed: int, **options) -> SharedRig:
    family, most = family_of(seed)
    found = shared_rig(family, max_led_channels=most, own={}, gap=GAP, helps=False, **options)
    assert verify_shared(found).value == pytest.approx(found.value, rel=1e-9)
    assert len(found.leds) <= most
    return found


def between(values: np.ndarray, share: float) -> float:
    """A CNR that some of these reach and some do not, well apart from each of them."""
    ordered = np.unique(np.round(values[values > 0], 9))
    gaps = np.flatnonzero(ordered[1:] > ordered[:-1] * (1 + 1e-3))
    if not gaps.size:
        return float(ordered[0]) * 0.9
    place = gaps[int(share * (gaps.size - 1))]
    return float(ordered[place] + ordered[place + 1]) / 2


@pytest.mark.parametrize("seed", SEEDS)
def test_worst_cnr_is_that_of_the_best_rig_there_is(seed):
    best = table_of(seed).worst()
    found = solved(seed)
    assert best / (1 + GAP) * (1 - 1e-4) <= found.value <= best * (1 + 1e-5)
    assert found.bound >= best * (1 - 1e-6)
    assert found.gap <= GAP


@pytest.mark.parametrize("seed", SEEDS)
def test_most_variants_served_are_those_of_the_best_rig_there_is(seed):
    table = table_of(seed)
    required = between(table.cnr, 0.8)
    most = int((table.cnr >= required).sum(axis=0).max())
    found = solved(seed, goal="count", required_cnr=required)
    assert (found.value, found.bound, found.served) == (most, most, most)


def test_a_variant_without_any_setting_is_named():
    with pytest.raises(InfeasibleError, match=r"variant 'cap-blue on cap-green 0'.*camera shortest exposure"):
        solved(HOPELESS)


@pytest.mark.parametrize("seed", SEEDS)
def test_lowest_price_is_that_of_the_cheapest_rig_there_is(seed):
    table = table_of(seed)
    required = between(table.cnr.min(axis=0).ravel(), 0.7)
    able = (table.cnr >= required).all(axis=0)
    found = solved(seed, goal="cost", required_cnr=required)
    least = float(table.price[able].min())
    assert least * (1 - 1e-9) <= found.value <= least * (1 + GAP)
    assert found.bound <= least * (1 + 1e-9)


def wanting(seed: int) -> tuple[dict[str, Problem], int, np.ndarray]:
    """The family with a CNR required that each variant reaches on some rigs only; and who is served where."""
    family, most = family_of(seed)
    table = table_of(seed)
    levels = [between(own.ravel(), 0.85) for own in table.cnr]
    asking = {
        name: replace(problem, spec=problem.spec.model_copy(update={"required_cnr": level}))
        for (name, problem), level in zip(family.items(), levels, strict=True)
    }
    return asking, most, table.cnr >= np.array(levels)[:, None, None]


def fewest(served: np.ndarray) -> int:
    """Fewest columns that cover all rows, by trying all; ``served`` is (V, N)."""
    columns = np.unique(served, axis=1).T
    for count in range(1, len(served) + 1):
        if any(np.any(some, axis=0).all() for some in combinations(columns, count)):
            return count
    raise AssertionError("some variant is served nowhere")


@pytest.mark.parametrize("seed", SETS)
def test_smallest_set_of_rigs_is_that_of_enumeration(seed):
    family, most, served = wanting(seed)
    least = fewest(served.reshape(len(served), -1))
    found = smallest_rig_set(family, max_led_channels=most)
    assert (found.number, found.bound, found.status) == (least, least, "proven")
    assert all(len(rig.leds) <= most for rig in found.rigs)
    assert sorted(name for rig in found.rigs for name in rig.variants) == sorted(family)
    assert verify_rig_set(found).value == least


@pytest.mark.parametrize("seed", SETS)
def test_smallest_filter_wheel_is_that_of_enumeration(seed):
    family, most, served = wanting(seed)
    table = table_of(seed)
    bodies = [(camera, f_number) for camera, f_number, _ in table.rigs]
    least = []
    for body in dict.fromkeys(bodies):
        behind = served[:, [place for place, own in enumerate(bodies) if own == body]]  # (V, filters, sets)
        for leds in range(len(table.sets)):
            if behind[:, :, leds].any(axis=1).all():
                least.append(fewest(behind[:, :, leds]))
    if not least:
        with pytest.raises(InfeasibleError):
            smallest_filter_wheel(family, max_led_channels=most)
        return
    found = smallest_filter_wheel(family, max_led_channels=most)
    assert (found.number, found.bound, found.status) == (min(least), min(least), "proven")
    assert verify_filter_wheel(found).value == min(least)
