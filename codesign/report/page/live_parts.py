"""Which parts of a catalogue the live page takes, so that the file can be mailed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, Filter
from codesign.problem import LedChannel, Problem
from codesign.problem.choices import JOINT, FilterChoices
from codesign.radiometry import reflectances

if TYPE_CHECKING:
    from codesign.solve import Solution

Array = NDArray[np.float64]

#: Text the curves of parts and surfaces may take in the page. [characters]
LARGEST = 1_500_000
#: Types of the numbers of curves; the first that fits is taken.
KINDS = ("f8", "f4")
#: LEDs at most: each is a line in a list.
LARGEST_NUMBER_OF_LEDS = 200
#: Characters per byte of base64.
BASE64 = 4 / 3
#: Share of the room that cameras may take where filters want it too.
CAMERA_SHARE = 0.3


@dataclass(frozen=True, slots=True)
class Kept:
    """Parts of the page, and the grid points that any of the cameras sees.

    ``kind`` is the number type of their curves, ``note`` says in words what is left out.
    """

    span: slice
    leds: tuple[LedChannel, ...]
    filters: tuple[Filter, ...]
    cameras: tuple[Camera, ...]
    kind: str = "f8"
    note: str = ""


def kept_parts(solution: Solution) -> Kept | None:
    """Choose the parts; None where too little room is left for those in use.

    All where they fit. Else those of recipe and runners-up, then the best by their proven bounds.
    """
    problem = solution.problem
    span = seen_span(problem)
    everything = Kept(span, problem.channels, FilterChoices.of(problem.filters).base, problem.cameras)
    few = len(problem.channels) <= LARGEST_NUMBER_OF_LEDS
    for kind in KINDS:
        room = LARGEST / BASE64 / int(kind[1]) / (span.stop - span.start) - _surface_rows(problem)
        needed = len(everything.filters) * _filter_rows(problem) + _camera_rows(problem.cameras)
        if few and needed <= room:
            return replace(everything, kind=kind)
    if problem.combined:
        return None
    kept = replace(everything, kind="f4") if needed <= room else _best(solution, everything, room)
    return kept if few or kept is None else _with_fewer_leds(solution, kept)


def seen_span(problem: Problem) -> slice:
    """Return the grid points between the first and the last at which any camera responds: all others count nothing."""
    curves = [
        camera.quantum_efficiency(name, problem.grid) for camera in problem.cameras for name in camera.channel_names
    ]
    seen = np.flatnonzero(np.any(curves, axis=0))
    return slice(int(seen[0]), int(seen[-1]) + 1) if seen.size > 1 else slice(0, problem.grid.size)


def _surface_rows(problem: Problem) -> int:
    """Curves of the surfaces; means are kept in full precision, so they count twice."""
    scene = reflectances(problem)
    return 2 * len(scene.mean) + len(scene.clutter)


def _filter_rows(problem: Problem) -> int:
    optics = problem.spec.optics
    return 1 if optics.filter_position == "front" else len(optics.f_numbers)


def _camera_rows(cameras: Sequence[Camera]) -> int:
    return sum(len(camera.channels) for camera in cameras)


def _designs(solution: Solution) -> list:
    return [solution.recipe.design, solution.optimum.design, *(a.design for a in solution.alternatives)]


def _best(solution: Solution, everything: Kept, room: float) -> Kept | None:
    """Filters and cameras in use, then those of the configurations with the highest bounds, while there is room."""
    designs = _designs(solution)
    used_filters = {name for design in designs for name in design.filter.split(JOINT)}
    used_cameras = {design.camera for design in designs}
    of_filter, of_camera = _bounds(solution)
    chosen: list[Camera] = []
    for camera in _ranked(everything.cameras, used_cameras, of_camera):
        if camera.id in used_cameras or _camera_rows([*chosen, camera]) <= CAMERA_SHARE * room:
            chosen.append(camera)
    count = int((room - _camera_rows(chosen)) / _filter_rows(solution.problem))
    if count < len(used_filters):
        return None
    filters = _in_order(everything.filters, _ranked(everything.filters, used_filters, of_filter)[:count])
    cameras = _in_order(everything.cameras, chosen)
    note = (
        f"So that this file can be mailed, the lists hold {len(filters)} of {len(everything.filters)} filters and "
        f"{len(cameras)} of {len(everything.cameras)} cameras: those of the recipe and the runners-up, then those with "
        "the highest proven bounds."
    )
    return replace(everything, filters=filters, cameras=cameras, kind="f4", note=note)


def _ranked(parts: Sequence, used: set[str], bounds: Array) -> list:
    order = sorted(range(len(parts)), key=lambda k: (parts[k].id not in used, -bounds[k]))
    return [parts[k] for k in order]


def _in_order(parts: Sequence, chosen: Sequence) -> tuple:
    names = {part.id for part in chosen}
    return tuple(part for part in parts if part.id in names)


def _bounds(solution: Solution) -> tuple[Array, Array]:
    """Largest bound of the search's first rung over all configurations with each filter and each camera. (F₀,), (K,)"""
    from codesign.assemble import Assembly
    from codesign.search.walk import Walk

    problem = solution.problem
    junction = np.array([solution.certificate.junction_c[channel.id] for channel in problem.channels])
    walk = Walk(Assembly(problem, junction))
    upper = walk.upper.reshape(len(walk.assembly.settings), -1, 2).max(axis=2)
    choices = FilterChoices.of(problem.filters)
    of_filter = np.zeros(len(choices.base))
    for column in choices.members.T:
        np.maximum.at(of_filter, column[column >= 0], upper.max(axis=0)[column >= 0])
    place = {camera.id: k for k, camera in enumerate(problem.cameras)}
    of_camera = np.zeros(len(problem.cameras))
    for setting, bound in zip(walk.assembly.settings, upper.max(axis=1), strict=True):
        of_camera[place[setting.camera.id]] = max(of_camera[place[setting.camera.id]], bound)
    return of_filter, of_camera


def _with_fewer_leds(solution: Solution, kept: Kept) -> Kept:
    """LEDs in use, then those of most contrast alone behind the recipe's parts."""
    used = {led for design in _designs(solution) for led in design.drive_ma} | set(
        solution.problem.spec.build.must_have
    )
    order = _ranked(kept.leds, used, _alone(solution))
    leds = _in_order(kept.leds, order[: max(LARGEST_NUMBER_OF_LEDS, len(used))])
    note = (
        f"Of {len(kept.leds)} LEDs the list holds {len(leds)}: those of the recipe and the runners-up, then those that "
        "alone give most contrast behind the recipe's filter."
    )
    return replace(kept, leds=leds, note=f"{kept.note} {note}".strip())


def _alone(solution: Solution) -> Array:
    """CNR with each LED alone at its largest current, behind the recipe's parts at its exposure. (L,)"""
    from codesign.design import evaluate

    problem, design = solution.problem, solution.recipe.design
    trials = (replace(design, drive_ma={c.id: c.led.largest_current_ma}, emitters={}) for c in problem.channels)
    return np.array([evaluate(problem, trial).cnr for trial in trials])
