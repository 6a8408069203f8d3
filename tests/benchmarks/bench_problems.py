"""Problems the benchmarks share, and the product that any search needs first."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
from parametric_catalog import parametric_catalog, parametric_problem

from codesign.assemble import Assembly
from codesign.limits import Setting
from codesign.problem import Problem
from codesign.program import Program
from codesign.radiometry import channel_irradiance, electrons_per_irradiance, reflectances, transmittances


def catalogue_problem(
    folder: Path, *, leds: int, filters: int, cameras: int, samples: int, f_numbers: int = 1, seed: int = 1, **sections
) -> Problem:
    """A steady-light problem over a generated catalogue; ``samples`` > 1 per surface gives realistic clutter."""
    catalog = parametric_catalog(folder, leds=leds, filters=filters, cameras=cameras, samples=samples, seed=seed)
    chosen = [4.0] if f_numbers == 1 else np.geomspace(2.0, 8.0, f_numbers).round(3).tolist()
    return parametric_problem(catalog, folder, **{"optics": {"f_numbers": chosen, "magnification": 0.1}, **sections})


def warm_assembly(problem: Problem) -> Assembly:
    """Programs at junctions of 40 deg C."""
    return Assembly(problem, np.full(len(problem.channels), 40.0))


def bare_product(problem: Problem) -> Callable[[], None]:
    """The matrix products of a catalogue: transmittances times (LED × quantum efficiency × reflectance), per camera.

    Operands are made beforehand; every sample's clutter row counts, as in the forward model.
    """
    scene = reflectances(problem)
    curves = np.concatenate([scene.mean, scene.clutter])
    light = np.stack([channel_irradiance(problem, channel, 40.0) for channel in problem.channels])
    emitted = (curves[:, None, :] * light).reshape(-1, problem.grid.size)
    f_number = problem.spec.optics.f_numbers[0]
    table = transmittances(problem, f_number)
    weights = [
        electrons_per_irradiance(problem, camera, channel, f_number)
        for camera in problem.cameras
        for channel in camera.channel_names
    ]

    def product() -> None:
        for weight in weights:
            table @ (emitted * weight).T

    return product


def random_configurations(assembly: Assembly, count: int, seed: int) -> list[tuple[Setting, int, int]]:
    """Settings, filters and signs drawn evenly."""
    rng = np.random.default_rng(seed)
    settings, filters = assembly.settings, len(assembly.problem.filters)
    return [
        (settings[rng.integers(len(settings))], int(rng.integers(filters)), int(rng.choice([1, -1])))
        for _ in range(count)
    ]


def one_program(assembly: Assembly, setting: Setting, filter_index: int, sign: int) -> Program:
    """The full program of one signed configuration."""
    from dataclasses import replace

    program = assembly.program(setting, np.array([filter_index]))
    return replace(program, signal=program.signal * sign)
