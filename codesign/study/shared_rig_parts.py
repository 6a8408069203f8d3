"""What the variants of a family have in common: the parts a rig for all of them can be built from."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from codesign.build import free
from codesign.catalog.common import Part
from codesign.errors import InfeasibleError, ProblemError
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.problem.schema import Build


def common_problems(
    variants: Mapping[str, Problem], max_led_channels: int | None = None
) -> tuple[dict[str, Problem], tuple[str, ...]]:
    """The variants with the parts they have in common and the build limits of the rig; and the parts left out.

    Parameters
    ----------
    variants : mapping
        Problem of each variant by name.
    max_led_channels : int, optional
        LED channels at most; what the problems say in ``build.max_led_channels`` by default.

    Raises
    ------
    ProblemError
        One line naming the variant: combined readings, free numbers of emitters, other parts by the same id, other
        build limits, or nothing in common.
    """
    if not variants:
        raise ProblemError("shared rig: there are no variants; a family needs one at least")
    if max_led_channels is not None and not max_led_channels >= 1:
        raise ProblemError(f"shared rig: max_led_channels is {max_led_channels}, must be 1 or more")
    first_name, first = next(iter(variants.items()))
    for name, problem in variants.items():
        _require_usable(name, problem)
        if problem.spec.build != first.spec.build:
            raise ProblemError(f"shared rig: variants {first_name!r} and {name!r} differ in [build]; state it once")
        if problem is not first:
            _require_same_parts((first_name, first), (name, problem))
    problems, left_out = _reduced(variants)
    build = _build(first, max_led_channels, len(next(iter(problems.values())).channels))
    return {name: _with_build(problem, build) for name, problem in problems.items()}, left_out


def _require_usable(name: str, problem: Problem) -> None:
    if problem.combined:
        raise ProblemError(
            f"shared rig: variant {name!r} combines readings (detection.combine_channels or shots); a rig in common "
            "is chosen for single readings only, set detection back"
        )
    if free(problem):
        raise ProblemError(
            f"shared rig: variant {name!r} leaves the number of emitters free; a rig in common needs "
            'build.emitters = "fixed"'
        )


def _require_same_parts(first: tuple[str, Problem], other: tuple[str, Problem]) -> None:
    """The same id must mean the same part, with as many emitters."""
    for kind in ("LED", "filter", "camera"):
        known = {part.id: part for part in _parts(first[1], kind)}
        for part in _parts(other[1], kind):
            if part.id in known and not _same(known[part.id], part):
                raise ProblemError(
                    f"shared rig: variants {first[0]!r} and {other[0]!r} mean different parts by {kind} {part.id!r}; "
                    "use one catalogue"
                )
    emitters = {channel.id: channel.emitters for channel in first[1].channels}
    for channel in other[1].channels:
        if emitters.get(channel.id, channel.emitters) != channel.emitters:
            raise ProblemError(
                f"shared rig: LED {channel.id!r} has {emitters[channel.id]} emitters in variant {first[0]!r} and "
                f"{channel.emitters} in {other[0]!r}; a rig in common has one number"
            )


def _parts(problem: Problem, kind: str) -> Sequence[Part]:
    if kind == "LED":
        return [channel.led for channel in problem.channels]
    return FilterChoices.of(problem.filters).base if kind == "filter" else problem.cameras


def _same(a: Part, b: Part) -> bool:
    """Whether two parts agree in every field and in what their curve files hold."""
    if a is b:
        return True
    if type(a) is not type(b) or a.model_dump() != b.model_dump():
        return False
    curves = ((a.read_curve(file).spectrum, b.read_curve(file).spectrum) for file in a.curve_files().values())
    return all(
        np.array_equal(one.wavelength_nm, two.wavelength_nm) and np.array_equal(one.values, two.values)
        for one, two in curves
    )


def _reduced(variants: Mapping[str, Problem]) -> tuple[dict[str, Problem], tuple[str, ...]]:
    """Every problem with the parts and f-numbers that all have, in the order of the first."""
    problems = list(variants.values())
    ids = {
        "LED": [[channel.id for channel in problem.channels] for problem in problems],
        "filter": [[part.id for part in problem.filters] for problem in problems],
        "camera": [[part.id for part in problem.cameras] for problem in problems],
        "f-number": [[f"{n:g}" for n in problem.spec.optics.f_numbers] for problem in problems],
    }
    kept, left_out = {}, []
    for kind, lists in ids.items():
        shared = set(lists[0]).intersection(*lists[1:])
        kept[kind] = [name for name in lists[0] if name in shared]
        left_out += [f"{kind} {name}" for name in sorted(set().union(*lists) - shared)]
        if not kept[kind]:
            raise InfeasibleError(
                f"shared rig: the variants have no {kind} in common; widen candidates", ["candidates"]
            )
    if all(len(kept[kind]) == len(lists[0]) and lists.count(lists[0]) == len(lists) for kind, lists in ids.items()):
        return dict(variants), ()
    return {name: _only(problem, kept) for name, problem in variants.items()}, tuple(left_out)


def _only(problem: Problem, kept: Mapping[str, Sequence[str]]) -> Problem:
    channels = {channel.id: channel for channel in problem.channels}
    cameras = {camera.id: camera for camera in problem.cameras}
    place = {part.id: index for index, part in enumerate(problem.filters)}
    choices, wanted = FilterChoices.of(problem.filters), [place[name] for name in kept["filter"]]
    filters = FilterChoices(choices.base, choices.members[wanted])
    stops = {f"{n:g}": n for n in problem.spec.optics.f_numbers}
    optics = problem.spec.optics.model_copy(update={"f_numbers": tuple(stops[name] for name in kept["f-number"])})
    return replace(
        problem,
        spec=problem.spec.model_copy(update={"optics": optics}),
        channels=tuple(channels[name] for name in kept["LED"]),
        filters=filters if isinstance(problem.filters, FilterChoices) else tuple(filters),
        cameras=tuple(cameras[name] for name in kept["camera"]),
    )


def _build(first: Problem, max_led_channels: int | None, leds: int) -> Build:
    """Build limits of the rig; a number of channels that excludes nothing is no limit."""
    own = first.spec.build.max_led_channels
    most = own if max_led_channels is None else max_led_channels if own is None else min(own, max_led_channels)
    return first.spec.build.model_copy(update={"max_led_channels": None if most is None or most >= leds else most})


def _with_build(problem: Problem, build: Build) -> Problem:
    return replace(problem, spec=problem.spec.model_copy(update={"build": build}))


def on_rig(problem: Problem, camera: str, filter_name: str, f_number: float, leds: Sequence[str]) -> Problem:
    """The problem of a variant on one rig: this camera, filter, f-number and these LEDs, and nothing else."""
    place = next(index for index, part in enumerate(problem.filters) if part.id == filter_name)
    optics = problem.spec.optics.model_copy(update={"f_numbers": (f_number,)})
    spec = problem.spec.model_copy(update={"optics": optics, "build": Build()})
    return replace(
        problem,
        spec=spec,
        channels=tuple(channel for channel in problem.channels if channel.id in leds),
        filters=problem.filters[place : place + 1],
        cameras=(problem.camera(camera),),
    )
