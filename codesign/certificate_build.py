"""Bounds over whole-number choices of LEDs: restricted programs, the branching record, and its checker.

A *box* says how many units of each LED may be in use. The program of a box has the columns its units carry and rows
for the build limits that hold for every whole choice in it (see `codesign.assemble_build`). A tree splits boxes at
one LED at a time, so its leaves cover every choice; the largest of their proven bounds holds for all. No solver is
imported here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.assemble_build import first_shares, shares
from codesign.build import (
    ROUND_OFF,
    Box,
    BuildLimit,
    Units,
    build_limits,
    most_units,
    other_prices,
    root_box,
    tightened,
)
from codesign.catalog import Camera
from codesign.certificate import Proof, bound, check_point
from codesign.certificate_pairs import PairProof, check_pair_point, pair_bound
from codesign.errors import CertificateError
from codesign.problem import Problem
from codesign.program import Array, Program

#: Width of the one column kept where no LED may be in use, as a share of its own: a program needs a column.
NEXT_TO_NOTHING = 1e-9


@dataclass(frozen=True, slots=True)
class BuildSpace:
    """All whole choices of one configuration: units there are, the limits, and what they leave at the outset."""

    units: Units
    limits: tuple[BuildLimit, ...]
    root: Box

    def allows(self, units: Units) -> bool:
        """Whether a choice meets every limit."""
        inside = (units >= self.root.low).all() and (units <= self.root.high).all()
        return bool(inside) and tightened(self.limits, Box(units, units)) is not None


@dataclass(frozen=True, slots=True)
class BuildLeaf:
    """A box bounded by multipliers, of one pair or of all together; None where the limits leave no choice in it."""

    proof: Proof | PairProof | None
    pair: int = 0


@dataclass(frozen=True, slots=True)
class BuildSplit:
    """A box split at one LED: at most ``at`` units, or more."""

    led: int
    at: int
    below: BuildLeaf | BuildSplit
    above: BuildLeaf | BuildSplit


def build_space(problem: Problem, camera: Camera, filter_index: int) -> BuildSpace:
    """Whole choices of LEDs beside one camera and filter."""
    return BuildSpace(
        most_units(problem),
        build_limits(problem, float(other_prices(problem, camera)[filter_index])),
        root_box(problem),
    )


def restricted(program: Program, space: BuildSpace, box: Box) -> tuple[Program, np.ndarray]:
    """Program of a box and the columns kept; ``program`` holds one program (P = 1)."""
    scale = box.high / space.units
    keep = np.flatnonzero(scale[program.led] > 0)
    if not keep.size:
        keep, scale = np.array([0]), np.full(scale.shape, NEXT_TO_NOTHING)
    led = program.led[keep]
    own = [k for k, name in enumerate(program.row_names) if name not in {limit.name for limit in space.limits}]
    columns = np.append(keep, program.segments)
    node = replace(
        program,
        signal=program.signal[:, columns],
        shot=program.shot[:, columns],
        noise_rows=program.noise_rows[:, :, columns],
        rows=program.rows[:, own][:, :, columns],
        bounds=program.bounds[:, own],
        row_names=tuple(program.row_names[k] for k in own),
        width=program.width[keep] * scale[led],
        led=led,
        heat=program.heat[keep],
        heat_cap=program.heat_cap * np.where(scale > 0, scale, 1.0),
    )
    further = [row for limit in space.limits for row in _build_rows(node, limit, box)]
    if not further:
        return node, keep
    names, rows, bounds = zip(*further, strict=True)
    return replace(
        node,
        rows=np.concatenate([node.rows, np.stack(rows)[None]], axis=1),
        bounds=np.concatenate([node.bounds, np.array(bounds)[None]], axis=1),
        row_names=(*node.row_names, *names),
    ), keep


def _build_rows(node: Program, limit: BuildLimit, box: Box) -> list[tuple[str, Array, float]]:
    """Rows (name, entries, bound) one limit implies in a box, without those that cannot bind."""
    low, high = box.low, box.high
    bound_ = limit.bound + ROUND_OFF * abs(limit.bound)
    slope = np.where(low > 0, 0.0, limit.first + limit.each * high)
    room = bound_ - float(limit.cost(low).sum())
    found = []
    if slope[node.led].any() and slope.sum() > room:
        found += _shared_rows(node, limit.name, slope, room)
        least = np.where((low > 0) | (high == 0), 0.0, limit.first + limit.each)
        if least.sum() > room:
            found.append((f"{limit.name}, alone", np.append(least[node.led] * _alone(node), 0.0), room))
    graded = (low > 0) & (low < high) & (limit.each > 0)
    if graded.any():
        slope = slope + np.where(graded, limit.each * high, 0.0)
        room += float(np.sum(limit.each[graded] * low[graded]))
        if slope.sum() > room:
            found += _shared_rows(node, f"{limit.name}, graded", slope, room)
    return found


def _shared_rows(node: Program, name: str, slope: Array, room: float) -> list[tuple[str, Array, float]]:
    """A limit with each LED's use by its share of light, and by its first segment."""
    light = node.rows[0, 0, :-1]
    seen = np.bincount(node.led, light, minlength=slope.size)[node.led] > 0
    entries = [shares(node.led, node.width, np.where(seen, light, 1.0))]
    if (np.diff(node.led) == 0).any():
        entries.append(first_shares(node.led, node.width))
    names = (name, f"{name}, first segments")
    return [(n, np.append(slope[node.led] * entry, -room), 0.0) for n, entry in zip(names, entries, strict=False)]


def _alone(node: Program) -> Array:
    """Entries ``c ≥ 0`` with ``c·q ≤ 1`` for each LED even if it is the only one: by its tightest limit. (n,)"""
    low, high = node.time_low[0], node.time_high[0]
    rows, per_second = node.rows[0][:, :-1], node.rows[0][:, -1]
    left = node.bounds[0] - per_second * np.where(per_second >= 0, low, high)
    usable = left > 0
    entries = [shares(node.led, node.width, np.ones_like(node.width)) / high]
    entries += list(rows[usable] / left[usable, None])
    cap = node.heat_cap[node.led]
    if (np.isfinite(cap) & (cap > 0)).any():
        entries.append(np.where(np.isfinite(cap) & (cap > 0), node.heat / np.maximum(cap, 1e-300), 0.0))
    entries = np.stack(entries)
    leds = node.heat_cap.size
    load = np.stack([np.bincount(node.led, entry * node.width * high, minlength=leds) for entry in entries])
    return entries[np.argmax(load, axis=0)[node.led], np.arange(node.width.size)]


def _leaf_bound(programs: Sequence[Program], leaf: BuildLeaf) -> float:
    if isinstance(leaf.proof, PairProof):
        return pair_bound(programs, leaf.proof)
    return float(bound(programs[leaf.pair], leaf.proof)[0])


def tree_bound(programs: Sequence[Program], space: BuildSpace, tree: BuildLeaf | BuildSplit) -> float:
    """Bound on the CNR over every whole choice that follows from a tree; 0 where there is no choice.

    ``programs`` are those of the pairs of one configuration. Raises CertificateError when a split leaves something
    out or a leaf has no proof.
    """
    largest, waiting = 0.0, [(space.root, tree)]
    while waiting:
        box, node = waiting.pop()
        box = tightened(space.limits, box)
        if box is None:
            continue
        if isinstance(node, BuildSplit):
            if not box.low[node.led] <= node.at < box.high[node.led]:
                raise CertificateError("certificate: a branch splits an LED's units outside their range")
            waiting += zip(box.split(node.led, node.at), (node.below, node.above), strict=True)
        elif node.proof is None:
            raise CertificateError("certificate: a branch is said to be empty but holds a choice of LEDs")
        else:
            largest = max(largest, _leaf_bound([restricted(program, space, box)[0] for program in programs], node))
    return largest


def check_recipe(
    programs: Sequence[Program], y: Array, claimed: float, space: BuildSpace, units: Units | None = None
) -> float:
    """Confirm that a point is feasible for its units, that the limits allow these, and its (worst) CNR; return it.

    Raises CertificateError naming what is off. Without ``units`` there must be no build limit.
    """
    if (units is None) != (not space.limits):
        raise CertificateError("certificate: build limits and units of the LEDs must come together")
    if units is not None:
        if not space.allows(units):
            raise CertificateError("certificate: the LEDs in use exceed a build limit")
        small, keep = zip(*(restricted(program, space, Box(units, units)) for program in programs), strict=True)
        if np.delete(y[:-1], keep[0]).any():
            raise CertificateError("certificate: an LED that is not in use carries current")
        programs, y = small, np.append(y[keep[0]], y[-1])
    if len(programs) == 1:
        return check_point(programs[0], y, claimed)
    return check_pair_point(programs, y, claimed)
