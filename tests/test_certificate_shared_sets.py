"""Exhaustive branching over sets of LEDs against trying every set."""

from itertools import combinations

import numpy as np
import pytest

from codesign.certificate_shared import bits, mask_of, members
from codesign.certificate_shared_sets import Room, apart, cheapest_set, most_served, serving_set
from codesign.errors import CertificateError

LEDS = 9


def random_cuts(rng: np.random.Generator, count: int) -> list[int]:
    return [bits(rng.random(LEDS) < rng.uniform(0.15, 0.5)) for _ in range(count)]


def room_for(most: int, rng: np.random.Generator | None = None, forced: int = 0) -> Room:
    cost, bound = [(1.0,) * LEDS], [float(most)]
    if rng is not None:  # a price budget besides
        cost.append(tuple(rng.uniform(1, 5, LEDS).tolist()))
        bound.append(float(rng.uniform(4, 12)))
    return Room(cost=tuple(cost), most=tuple(bound), forced=forced, leds=LEDS)


def sets_in(room: Room) -> list[int]:
    every = (bits(np.isin(np.arange(LEDS), own)) for k in range(LEDS + 1) for own in combinations(range(LEDS), k))
    return [chosen for chosen in every if room.allows(chosen)]


def meets(cuts: list[int], chosen: int) -> bool:
    return all(cut & chosen for cut in cuts)


def price_of(price: np.ndarray, chosen: int) -> float:
    return float(price[members(chosen)].sum())


@pytest.mark.parametrize("seed", range(12))
def test_cheapest_set_is_that_of_trying_all(seed):
    rng = np.random.default_rng(seed)
    room = room_for(int(rng.integers(1, 5)), rng, forced=1 << 3 if seed % 3 == 0 else 0)
    cuts, price = random_cuts(rng, int(rng.integers(1, 7))), rng.uniform(0.0, 3.0, LEDS)
    able = [chosen for chosen in sets_in(room) if meets(cuts, chosen)]
    found = cheapest_set(cuts, room, price)
    if not able:
        assert found is None
        return
    least = min(price_of(price, chosen) for chosen in able)
    assert found in able and price_of(price, found) == pytest.approx(least)
    assert cheapest_set(cuts, room, price, below=least) is None
    assert cheapest_set(cuts, room) in able


@pytest.mark.parametrize("seed", range(12))
def test_most_served_is_that_of_trying_all(seed):
    rng = np.random.default_rng(100 + seed)
    room = room_for(int(rng.integers(1, 4)), rng if seed % 2 else None)
    cuts = [random_cuts(rng, int(rng.integers(0, 4))) for _ in range(6)]
    weight = np.where(rng.random(6) < 0.2, 0.0, rng.uniform(0.5, 2.0, 6))

    def total(chosen: int) -> float:
        return float(sum(w for own, w in zip(cuts, weight, strict=True) if meets(own, chosen)))

    best = max(total(chosen) for chosen in sets_in(room))
    value, chosen = most_served(cuts, weight, room)
    assert value == pytest.approx(best) and total(chosen) >= best - 1e-9 and room.allows(chosen)
    assert most_served(cuts, weight, room, above=best) is None


@pytest.mark.parametrize("seed", range(12))
def test_serving_set_exists_just_when_trying_all_finds_one(seed):
    rng = np.random.default_rng(200 + seed)
    room = room_for(int(rng.integers(1, 4)))
    needs = [[random_cuts(rng, int(rng.integers(1, 4))) for _ in range(int(rng.integers(1, 4)))] for _ in range(4)]
    able = [s for s in sets_in(room) if all(any(meets(own, s) for own in choices) for choices in needs)]
    found = serving_set(needs, room)
    assert found in able if able else found is None


def test_nothing_meets_an_empty_cut_or_fits_a_full_room():
    assert cheapest_set([0], room_for(4)) is None
    assert cheapest_set([1], room_for(1, forced=0b110)) is None  # two LEDs forced, room for one
    assert most_served([[0], [1]], [1.0, 1.0], room_for(4)) == (1.0, 1)
    assert serving_set([[]], room_for(4)) is None  # a variant without any choice


def test_cuts_apart_are_counted_and_masks_turn_back():
    assert apart([0b0011, 0b0110, 0b1100]) == 2
    assert bits(mask_of(0b101001, 7)) == 0b101001


def test_too_many_branches_end_in_one_clear_line(monkeypatch):
    monkeypatch.setattr("codesign.certificate_shared_sets.LARGEST_NUMBER_OF_BRANCHES", 1)
    cuts = [bits(np.isin(np.arange(LEDS), own)) for own in ([0, 1], [1, 2], [2, 3])]
    with pytest.raises(CertificateError, match="fewer channels"):
        cheapest_set(cuts, room_for(4))
