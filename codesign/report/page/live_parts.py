"""Which parts of a catalogue the live page takes, so that the file can be mailed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
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
#: LEDs at most: each is a line in a list.
LARGEST_NUMBER_OF_LEDS = 200
#: Characters per byte of base64.
BASE64 = 4 / 3
#: Share of the room that cameras may take where filters want it too.
CAMERA_SHARE = 0.3


@dataclass(frozen=True, slots=True)
class Kept:
    """Parts of the page, and the grid points that any of the cameras sees.

    ``kind`` is the number type of their curves, ``left_out`` how many of a kind are not in.
    """

    span: slice
    leds: tuple[LedChannel, ...]
    filters: tuple[Filter, ...]
    cameras: tuple[Camera, ...]
    kind: str = "f8"
    left_out: Mapping[str, int] = field(default_factory=dict)


def kept_parts(solution: Solution) -> Kept | None:
    """Choose the parts; None where the surfaces alone take too much room.

    All where they fit. Else those of recipe and runners-up, then the best by their proven bounds.
    """
    problem = solution.problem
    filters, cameras = FilterChoices.of(problem.filters).base, problem.cameras
    leds = _leds(solution)
    span = seen_span(problem)
    everything = Kept(span, leds, filters, cameras, "f8", {"LEDs": len(problem.channels) - len(leds)})
    for kind in ("f8", "f4"):
        room = LARGEST / BASE64 / int(kind[1]) / (span.stop - span.start) - _surface_rows(problem)
        if len(filters) * _filter_rows(problem) + _camera_rows(cameras) <= room:
            return replace(everything, kind=kind)
    return _best(solution, everything, room) if room > 0 else None


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
    """Parts in use, then those of the configurations with the highest bounds, while there is room."""
    designs = _designs(solution)
    used_filters = {name for design in designs for name in design.filter.split(JOINT)}
    used_cameras = {design.camera for design in designs}
    of_filter, of_camera = _bounds(solution)
    cameras = _ranked(everything.cameras, used_cameras, of_camera)
    chosen: list[Camera] = []
    for camera in cameras:
        if camera.id in used_cameras or _camera_rows([*chosen, camera]) <= CAMERA_SHARE * room:
            chosen.append(camera)
    count = int((room - _camera_rows(chosen)) / _filter_rows(solution.problem))
    if count < len(used_filters):
        return None
    filters = _ranked(everything.filters, used_filters, of_filter)[:count]
    left = {
        **everything.left_out,
        "filters": len(everything.filters) - len(filters),
        "cameras": len(everything.cameras) - len(chosen),
    }
    return Kept(
        everything.leds, _in_order(everything.filters, filters), _in_order(everything.cameras, chosen), "f4", left
    )


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


def _leds(solution: Solution) -> tuple[LedChannel, ...]:
    """All, or those in use and those of most contrast alone behind the recipe's parts."""
    problem = solution.problem
    if len(problem.channels) <= LARGEST_NUMBER_OF_LEDS:
        return problem.channels
    used = {led for design in _designs(solution) for led in design.drive_ma} | set(problem.spec.build.must_have)
    order = _ranked(problem.channels, used, _alone(solution))
    return _in_order(problem.channels, order[: max(LARGEST_NUMBER_OF_LEDS, len(used))])


def _alone(solution: Solution) -> Array:
    """CNR with each LED alone at its largest current, behind the recipe's parts at its exposure. (L,)"""
    from codesign.design import evaluate

    problem, design = solution.problem, solution.recipe.design
    trials = (replace(design, drive_ma={c.id: c.led.largest_current_ma}, emitters={}) for c in problem.channels)
    return np.array([evaluate(problem, trial).cnr for trial in trials])
