"""The rigs a family can have in common, numbered alike for all its variants."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.assemble import Assembly
from codesign.build import filter_prices, part_price
from codesign.certificate_shared_sets import Room
from codesign.problem import Problem


@dataclass(frozen=True, slots=True)
class Rig:
    """What is set by hand and locked: camera, filter and f-number."""

    camera: str
    filter: str
    f_number: float


@dataclass(frozen=True, slots=True, eq=False)
class RigSpace:
    """Every camera, f-number and filter of a problem, numbered ``(camera · N + f-number) · F + filter``."""

    problem: Problem

    def __len__(self) -> int:
        """Number of rigs."""
        return len(self.problem.cameras) * len(self.problem.spec.optics.f_numbers) * len(self.problem.filters)

    def places(self, number: int) -> tuple[int, int, int]:
        """Positions of camera, f-number and filter."""
        rest, filter_index = divmod(int(number), len(self.problem.filters))
        camera, f_number = divmod(rest, len(self.problem.spec.optics.f_numbers))
        return camera, f_number, filter_index

    def rig(self, number: int) -> Rig:
        """Names of a rig's parts."""
        camera, f_number, filter_index = self.places(number)
        stops = self.problem.spec.optics.f_numbers
        return Rig(self.problem.cameras[camera].id, self.problem.filters[filter_index].id, stops[f_number])

    def number(self, rig: Rig) -> int:
        """Number of a rig by its names."""
        camera = [part.id for part in self.problem.cameras].index(rig.camera)
        f_numbers = self.problem.spec.optics.f_numbers
        filter_index = next(i for i, part in enumerate(self.problem.filters) if part.id == rig.filter)
        return (camera * len(f_numbers) + f_numbers.index(rig.f_number)) * len(self.problem.filters) + filter_index

    def of_configurations(self, assembly: Assembly) -> np.ndarray:
        """Rig of each configuration of a walk over an assembly with the same parts. (N,)"""
        cameras = [part.id for part in self.problem.cameras]
        f_numbers = self.problem.spec.optics.f_numbers
        base = np.array(
            [cameras.index(s.camera.id) * len(f_numbers) + f_numbers.index(s.f_number) for s in assembly.settings]
        )
        filters = len(self.problem.filters)
        return np.repeat((base[:, None] * filters + np.arange(filters)).ravel(), 2)

    def price(self, number: int) -> float:
        """Price of camera and filter, NaN where unknown."""
        camera, _, filter_index = self.places(number)
        return float(filter_prices(self.problem)[filter_index]) + part_price(self.problem, self.problem.cameras[camera])

    def led_prices(self) -> np.ndarray:
        """Price of all emitters of each LED channel, NaN where unknown. (L,)"""
        return np.array([part_price(self.problem, c.led) * c.emitters for c in self.problem.channels])

    def room(self, number: int) -> Room:
        """Sets of LEDs that may be built beside a rig's camera and filter."""
        spent = self.price(number) if self.problem.spec.build.price_budget is not None else 0.0
        return Room.of(self.problem, spent)
