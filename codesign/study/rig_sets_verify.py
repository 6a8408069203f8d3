"""Check the bounds of a set of rigs and of a filter wheel again, from the problems up, without any solver."""

from __future__ import annotations

import numpy as np

from codesign.certificate_shared_sets import EQUAL, most_served, serving_set
from codesign.errors import CertificateError
from codesign.program import Array
from codesign.search.shared_sets import least_number
from codesign.search.shared_space import Rig
from codesign.search.shared_wheel import choices_left
from codesign.study.rig_sets import FilterWheel, RigSet
from codesign.study.shared_rig_verify import Rebuilt, SharedVerdict, require_recipe, single_threaded
from codesign.verify import ROUND_OFF


def verify_rig_set(result: RigSet) -> SharedVerdict:
    """Re-derive that the rigs serve all variants, and that fewer than the bound do not.

    Raises
    ------
    CertificateError
        Naming the first thing that does not hold.
    """
    with single_threaded():
        return _rig_set(result)


def _rig_set(result: RigSet) -> SharedVerdict:
    check = Rebuilt(result.evidence)
    for name in check.names:
        place = result.rig_of.get(name, -1)
        if not 0 <= place < len(result.rigs):
            raise CertificateError(f"certificate: variant {name!r} uses no rig of the set")
        rig = result.rigs[place]
        _require_served(check, result, name, Rig(rig.camera, rig.filter, rig.f_number), rig.leds)
    prices, largest = result.evidence.prices, result.evidence.largest
    if (prices < 0).any() or not np.isfinite(prices).all() or not largest > 0:
        raise CertificateError("certificate: the prices of the variants are not usable; the bound is rejected")
    if least_number(prices, largest) < result.bound:
        raise CertificateError(f"certificate: the prices show {least_number(prices, largest)} rigs, not {result.bound}")
    open_ = _too_dear(check, prices, largest)
    for rig in map(int, open_):
        needs = check.needs(rig, _levels(result))
        if most_served(needs, prices, check.space.room(rig), largest + EQUAL) is not None:
            raise CertificateError(
                f"certificate: the cuts of rig {check.space.rig(rig)} leave sets of LEDs that may serve more"
            )
    return SharedVerdict(rigs=len(check.space), by_cuts=len(open_), cuts=check.cuts, value=float(result.number))


def verify_filter_wheel(result: FilterWheel) -> SharedVerdict:
    """Re-derive that the wheel serves all variants, and that one with fewer filters than the bound does not.

    Raises
    ------
    CertificateError
        Naming the first thing that does not hold.
    """
    with single_threaded():
        return _filter_wheel(result)


def _filter_wheel(result: FilterWheel) -> SharedVerdict:
    check = Rebuilt(result.evidence)
    for name in check.names:
        own = result.filter_of.get(name)
        if own not in result.filters:
            raise CertificateError(f"certificate: variant {name!r} uses no filter of the wheel")
        _require_served(check, result, name, Rig(result.camera, own, result.f_number), result.leds)
    left = 0
    if result.bound > 1:
        levels, room = _levels(result), check.space.room(0)
        for first, wheels in choices_left(check.variants, check.space, levels, check.order(), result.bound - 1):
            left += len(wheels)
            cuts = {int(f): check.needs(first + int(f), levels) for f in np.unique(wheels)}
            for wheel in wheels:
                choices = [[cuts[int(f)][v] for f in wheel] for v in range(len(check.names))]
                if serving_set([[own for own in each if 0 not in own] for each in choices], room) is not None:
                    names = ", ".join(check.space.problem.filters[int(f)].id for f in wheel)
                    raise CertificateError(f"certificate: a wheel of {names} may serve all variants too")
    return SharedVerdict(rigs=len(check.space), by_cuts=left, cuts=check.cuts, value=float(result.number))


def _levels(result: RigSet | FilterWheel) -> Array:
    """Levels at or below which a variant goes unserved. (V,)"""
    return result.evidence.levels * (1 + ROUND_OFF)


def _require_served(check: Rebuilt, result: RigSet | FilterWheel, name: str, rig: Rig, leds: tuple[str, ...]) -> None:
    level = result.evidence.levels[check.names.index(name)]
    check.require_leds(check.space.number(rig), leds)
    require_recipe(check.proof, result.outcomes[name], name, rig, leds, float(level))


def _too_dear(check: Rebuilt, prices: Array, largest: float) -> np.ndarray:
    """Rigs that may serve more than the largest total, as far as the closed form shows."""
    levels = check.proof.levels * (1 + ROUND_OFF)
    total = np.full(len(check.space), float(prices.sum()))
    for place in check.order():
        open_ = total > largest + EQUAL
        check.variants[place].look(open_)
        total -= prices[place] * (open_ & (check.variants[place].upper <= levels[place]))
    return np.flatnonzero(total > largest + EQUAL)
