"""A problem with everything looked up: parts, wavelength grid, delivery of each LED, ambient light."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, Catalog, Filter, Led, Surface
from codesign.display import Displayed
from codesign.errors import ProblemError, nearest
from codesign.problem.choices import FilterChoices
from codesign.problem.schema import ProblemSpec

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class LedChannel:
    """All emitters of one LED type in the rig, in series at one current.

    Attributes
    ----------
    led : Led
    emitters : int
    delivery : float
        Irradiance at the object per watt of one emitter, all emitters together. [1/m²]
    specular_weight : float
        Weight of mirror-like reflection. [1]
    driver_max_ma : float
        Driver limit, ``inf`` where none. [mA]
    peak_shift_nm : float
        How far these emitters lie above the stated wavelengths. [nm]
    """

    led: Led
    emitters: int
    delivery: float
    specular_weight: float
    driver_max_ma: float
    peak_shift_nm: float = 0.0

    @property
    def id(self) -> str:
        """Id of the LED."""
        return self.led.id


@dataclass(frozen=True, kw_only=True, eq=False, repr=False)
class Problem(Displayed):
    """What `load_problem` returns; frozen, so a what-if is a new problem.

    Attributes
    ----------
    spec : ProblemSpec
        The file's content.
    where : str
        File named in messages.
    folder : Path
        Folder to which paths in the file are relative.
    catalog : Catalog
        All parts, inline ones included.
    targets, backgrounds : tuple of Surface
        Defect and good surfaces; the worst pair of them counts.
    guards : tuple of Surface
        Further surfaces that must not saturate.
    channels : tuple of LedChannel
    filters : sequence of Filter
        `FilterChoices` when pairs are among them.
    cameras : tuple of Camera
    grid : (n,) array
        [nm]
    ambient : (n,) array
        Spectral irradiance of ambient light at the object. [W m⁻² nm⁻¹]
    lens : (n,) array
        Lens transmittance. [1]
    left_out : tuple of str
        Candidate parts that could not be used, and why.
    """

    spec: ProblemSpec
    where: str
    folder: Path
    catalog: Catalog
    targets: tuple[Surface, ...]
    backgrounds: tuple[Surface, ...]
    guards: tuple[Surface, ...]
    channels: tuple[LedChannel, ...]
    filters: Sequence[Filter]
    cameras: tuple[Camera, ...]
    grid: Array
    ambient: Array
    lens: Array
    left_out: tuple[str, ...] = field(default=())

    @cached_property
    def surfaces(self) -> tuple[Surface, ...]:
        """Targets, backgrounds, then the guards that are neither."""
        own = (*self.targets, *self.backgrounds)
        listed = {surface.id for surface in own}
        return (*own, *(guard for guard in self.guards if guard.id not in listed))

    @cached_property
    def pairs(self) -> tuple[tuple[int, int], ...]:
        """Every (target, background), as positions in ``surfaces``."""
        first = len(self.targets)
        return tuple((i, first + j) for i in range(first) for j in range(len(self.backgrounds)))

    @property
    def target(self) -> Surface:
        """The first target."""
        return self.targets[0]

    @property
    def background(self) -> Surface:
        """The first background."""
        return self.backgrounds[0]

    def role(self, index: int) -> str:
        """Say whether a surface is target, background or guard."""
        first = len(self.targets)
        return "target" if index < first else "background" if index < first + len(self.backgrounds) else "guard"

    @property
    def combined(self) -> bool:
        """Whether a decision rests on several readings combined by weights."""
        return self.spec.detection.combine_channels or self.spec.detection.shots > 1

    @property
    def strobe(self) -> bool:
        """Whether the LEDs are on during the exposure only."""
        return self.spec.lighting.mode == "strobe"

    @cached_property
    def channel_index(self) -> dict[str, int]:
        """Position of each LED among the channels, by id."""
        return {channel.id: index for index, channel in enumerate(self.channels)}

    def channel(self, led: str) -> LedChannel:
        """Return the channel of an LED by id."""
        if led in self.channel_index:
            return self.channels[self.channel_index[led]]
        raise ProblemError(
            f"{self.where}: no LED {led!r} among the candidates; {nearest(led, [c.id for c in self.channels])}"
        )

    def camera(self, name: str) -> Camera:
        """Return a candidate camera by id."""
        return _named(self.cameras, name, "camera", self.where)

    def filter(self, name: str) -> Filter:
        """Return a candidate filter by id; ``none`` is no filter."""
        return _named(self.filters, name, "filter", self.where)

    def duty(self, exposure_s: float) -> float:
        """Share of time the LEDs are on. [1]"""
        return exposure_s * self.spec.timing.frame_rate_hz if self.strobe else 1.0


def _named(parts, name: str, kind: str, where: str):
    found = find_part(parts, name)
    if found is not None:
        return found
    raise ProblemError(f"{where}: no {kind} {name!r} among the candidates; {nearest(name, part_names(parts))}")


def find_part(parts, name: str) -> Any | None:
    """Return the part of that name, or None."""
    if isinstance(parts, FilterChoices):
        return parts.find(name)
    return next((part for part in parts if part.id == name), None)


def part_names(parts) -> list[str]:
    """Return the names there are; of pairs, those of the single filters."""
    return [part.id for part in (parts.base if isinstance(parts, FilterChoices) else parts)]
