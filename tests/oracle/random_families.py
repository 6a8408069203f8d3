"""Seeded random families over a handful of demonstration parts, and what every rig gets from them by enumeration."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
from numpy.random import Generator
from random_problems import LEDS, PAIRS, random_table, some

from codesign import build_problem
from codesign.assemble import Assembly
from codesign.catalog import Catalog, load_catalog
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.program import Array
from codesign.search.walk import Walk

#: Gap to which every entry of the table is certified.
GAP = 1e-6


def even_catalog() -> Catalog:
    """The demonstration catalogue with LEDs whose light does not depend on temperature: then no proof does either."""
    found = load_catalog("demo")
    even = {"flux_temperature_coefficient_per_k": 0.0, "peak_shift_nm_per_k": 0.0}
    return replace(found, leds={name: led.replaced(**even) for name, led in found.leds.items()})


def random_family(rng: Generator, catalog: Catalog, variants: int = 3) -> dict[str, Problem]:
    """A few scenes before the same candidates, some nearer or faster than others."""
    table = random_table(rng, filters=2)
    table["candidates"]["leds"] = some(rng, LEDS, 3, 4)
    table["candidates"]["cameras"] = table["candidates"]["cameras"][:1]
    table["candidates"]["gains_db"] = [0]
    family = {}
    for number, place in enumerate(rng.choice(len(PAIRS), variants, replace=False)):
        target, background = PAIRS[place]
        own = {**table, "scene": {**table["scene"], "target": target, "background": background}}
        own["lighting"] = {**table["lighting"], "distance_mm": float(rng.uniform(100.0, 400.0))}
        family[f"{target} on {background} {number}"] = build_problem(own, catalog=catalog)
    return family


@dataclass(frozen=True)
class Table:
    """Best CNR of every variant on every rig with every set of LEDs of one size: ``cnr`` (V, C, S)."""

    rigs: list[tuple[str, float, str]]
    sets: list[tuple[str, ...]]
    cnr: Array
    price: Array

    def worst(self) -> float:
        """Greatest worst CNR."""
        return float(self.cnr.min(axis=0).max())


def enumerated(family: dict[str, Problem], most: int) -> Table:
    """Solve every variant on every rig with every set of at most ``most`` LEDs, each a small problem of its own."""
    first = next(iter(family.values()))
    rigs = list(
        itertools.product([c.id for c in first.cameras], first.spec.optics.f_numbers, [f.id for f in first.filters])
    )
    ids = [channel.id for channel in first.channels]
    sets = [s for size in range(1, min(most, len(ids)) + 1) for s in itertools.combinations(ids, size)]
    cnr = np.stack([np.stack([_best(p, rigs, own) for own in sets], axis=1) for p in family.values()])
    price = np.array([[_price(first, rig, own) for own in sets] for rig in rigs])
    return Table(rigs, sets, cnr, price)


def _best(problem: Problem, rigs: list[tuple[str, float, str]], leds: tuple[str, ...]) -> Array:
    """Best CNR of one variant on each rig with these LEDs alone; 0 where the limits leave nothing. (C,)"""
    small = replace(problem, channels=tuple(channel for channel in problem.channels if channel.id in leds))
    assembly = Assembly(small, np.full(len(small.channels), small.spec.temperature.air_c))
    try:
        walk = Walk(assembly, GAP)
    except InfeasibleError:
        return np.zeros(len(rigs))
    chosen = [walk.configuration(number) for number in range(walk.upper.size)]
    own = [(c.setting.camera.id, c.setting.f_number, small.filters[c.filter].id) for c in chosen]
    best = [walk.best(np.array([each == rig for each in own])) for rig in rigs]
    return np.array([0.0 if number is None else walk.found[number].value for number in best])


def _price(problem: Problem, rig: tuple[str, float, str], leds: tuple[str, ...]) -> float:
    channels = {channel.id: channel for channel in problem.channels}
    own = sum(channels[name].led.price * channels[name].emitters for name in leds)
    return problem.camera(rig[0]).price + (problem.filter(rig[2]).price or 0.0) + own
