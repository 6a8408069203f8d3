"""Seeded draws of how far real parts and surroundings stray from the data sheets.

Every *cause* is one independent standard normal variable z. A quantity of one part follows
``g = √ρ z_shared + √(1−ρ) z_own``, so that any two parts of a quantity are correlated by ρ: the LEDs of one delivery,
say. A normal spread is ``σ g``; a uniform one is ``h (2 Φ(g) − 1)``, exactly uniform, correlated by the Gaussian copula
(R. B. Nelsen, An Introduction to Copulas, 2nd ed. 2006, section 2.3).

Each cause has a random stream of its own, named after it: the same seed gives the same part the same luck in every
recipe.
"""

from __future__ import annotations

import zlib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from codesign.problem import Problem
from codesign.problem.choices import JOINT, FilterChoices
from codesign.problem.nudge import NUDGES, nudged
from codesign.problem.tolerances import SPREADS

Array = NDArray[np.float64]

#: A relative spread never takes away more than this; the far tail of a normal one would.
MOST_LOST = 0.99
#: The one quantity that is not a nudge: ambient light switched off. [1]
SWITCH = "ambient light on or off"
_SHARED = {
    "led_flux_percent": "led_flux_shared",
    "led_peak_nm": "led_peak_shared",
    "delivery_percent": "delivery_shared",
    "thermal_resistance_percent": "thermal_resistance_shared",
    "forward_voltage_percent": "forward_voltage_shared",
    "reflectance_percent": "reflectance_shared",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Spread:
    """How one quantity of one part varies.

    Attributes
    ----------
    quantity : str
        Key of `NUDGES`, or `SWITCH`.
    part : str or None
        Part it belongs to, None for the only one or all.
    shape : {"normal", "uniform", "switch"}
    size : float
        Standard deviation, or half width of a uniform spread, in the unit of the quantity; for a switch the
        probability of off.
    middle : float
        Mean change, in the same unit.
    causes : tuple of str
        Names of the shared and the own cause, or of the own alone.
    shared : float
        Correlation ρ with other parts. [1]
    """

    quantity: str
    part: str | None = None
    shape: str = "normal"
    size: float
    middle: float = 0.0
    causes: tuple[str, ...]
    shared: float = 0.0

    @property
    def unit(self) -> str:
        """Unit of the changes, "1" for relative ones."""
        return NUDGES[self.quantity].unit if self.quantity in NUDGES else "1"

    def amounts(self, z: dict[str, Array]) -> Array:
        """Change of each draw, from the standard normal values of the causes."""
        from scipy.special import ndtr

        shares = (np.sqrt(self.shared), np.sqrt(1 - self.shared)) if len(self.causes) == 2 else (1.0,)
        luck = sum(share * z[cause] for share, cause in zip(shares, self.causes, strict=True))
        if self.shape == "switch":
            return np.where(ndtr(luck) < self.size, -1.0, 0.0)
        deviation = luck if self.shape == "normal" else 2 * ndtr(luck) - 1
        found = self.middle + self.size * deviation
        return np.maximum(found, -MOST_LOST) if self.unit == "1" else found


@dataclass(frozen=True, slots=True)
class Draws:
    """Changes of all quantities: (quantity, part, (B,) amounts); those of the same quantity and part combine."""

    entries: tuple[tuple[str, str | None, Array], ...]
    size: int

    def factor(self, quantity: str, part: str | None = None) -> Array:
        """Product of ``1 + amount`` for a part. (B,)"""
        found = np.ones(self.size)
        for name, own, amounts in self.entries:
            if name == quantity and own in (None, part):
                found = found * (1 + amounts)
        return found

    def shift(self, quantity: str, part: str | None = None) -> Array:
        """Sum of the amounts for a part. (B,)"""
        found = np.zeros(self.size)
        for name, own, amounts in self.entries:
            if name == quantity and own in (None, part):
                found = found + amounts
        return found

    def take(self, index: slice | NDArray[np.intp]) -> Draws:
        """Some of the draws."""
        entries = tuple((name, part, amounts[index]) for name, part, amounts in self.entries)
        return Draws(entries, len(np.arange(self.size)[index]))


def spreads(problem: Problem, leds: Sequence[str], filters: Iterable[str]) -> tuple[Spread, ...]:
    """All spreads that concern some LEDs and filters of a problem, as its ``[tolerance]`` section says."""
    parts: dict[str, Sequence[str]] = {
        "led": leds,
        "filter": [name for name in filters if problem_filter_shifts(problem, name)],
        "surface": list(dict.fromkeys(surface.id for surface in problem.surfaces)),
    }
    found = []
    for key, quantity in SPREADS.items():
        names = parts.get(NUDGES[quantity].owner or "", [None])
        found += _of_key(problem, key, names) if _matters(problem, quantity) else []
    return (*found, *_extras(problem, bool(leds)))


def problem_filter_shifts(problem: Problem, name: str) -> bool:
    """Whether a filter has a wavelength that can be off."""
    pieces = [problem.filter(name)] if name != "none" else []
    while pieces:
        piece = pieces.pop()
        pieces += [problem.catalog.part("filter", part) for part in piece.parts or ()]
        if piece.kind not in ("none", "neutral", "stack"):
            return True
    return False


def filters_in(problem: Problem, name: str) -> tuple[str, ...]:
    """The pieces that are off by themselves: the two of a pair, or the filter."""
    bases = [part.id for part in FilterChoices.of(problem.filters).base]
    pieces = name.split(JOINT)
    return tuple(pieces) if all(piece in bases for piece in pieces) else (name,)


def _matters(problem: Problem, quantity: str) -> bool:
    return bool(np.any(problem.ambient > 0)) if quantity == "ambient light" else True


def _of_key(problem: Problem, key: str, names: Sequence[str | None]) -> list[Spread]:
    """Spread of one key of ``[tolerance]`` for each part."""
    tolerance, quantity = problem.spec.tolerance, SPREADS[key]
    size, middle, shape = _size(problem, key)
    if not size > 0:
        return [] if middle == 0 else [_fixed(quantity, middle)]
    shared = getattr(tolerance, _SHARED[key]) if key in _SHARED and len(names) > 1 else 0.0
    common = f"{quantity}, all together"
    found = []
    for name in names:
        own = quantity if name is None else f"{quantity}, {name}"
        causes = (common, own) if 0 < shared < 1 else (common,) if shared == 1 else (own,)
        found.append(
            Spread(quantity=quantity, part=name, shape=shape, size=size, middle=middle, causes=causes, shared=shared)
        )
    return found


def _fixed(quantity: str, middle: float) -> Spread:
    return Spread(quantity=quantity, size=0.0, middle=middle, causes=(quantity,))


def _size(problem: Problem, key: str) -> tuple[float, float, str]:
    """Size, mean and shape of a spread, in the unit of the nudge."""
    tolerance, quantity = problem.spec.tolerance, SPREADS[key]
    span = {"air_k": tolerance.air_c_range, "sensor_k": tolerance.sensor_c_range}.get(key)
    if span is not None:
        now = problem.spec.temperature.air_c if key == "air_k" else problem.spec.temperature.sensor_c
        return (span[1] - span[0]) / 2, (span[0] + span[1]) / 2 - now, "uniform"
    stated = getattr(tolerance, key)
    size = NUDGES[quantity].sigma if stated is None else stated / (100 if key.endswith("_percent") else 1)
    return size, 0.0, "uniform" if key in tolerance.uniform else "normal"


def _extras(problem: Problem, lit: bool) -> list[Spread]:
    """Ageing of all LEDs, and ambient light that may be off."""
    tolerance, found = problem.spec.tolerance, []
    least, most = (loss / 100 for loss in tolerance.led_ageing_percent)
    if lit and most > 0:
        middle, half = -(least + most) / 2, (most - least) / 2
        found.append(
            Spread(quantity="LED flux", shape="uniform", size=half, middle=middle, causes=("LED ageing, all together",))
        )
    if tolerance.ambient_off_probability > 0 and np.any(problem.ambient > 0):
        found.append(Spread(quantity=SWITCH, shape="switch", size=tolerance.ambient_off_probability, causes=(SWITCH,)))
    return found


def cause_names(listed: Sequence[Spread]) -> tuple[str, ...]:
    """Names of all causes, in the order of the spreads."""
    return tuple(dict.fromkeys(cause for spread in listed if spread.size > 0 for cause in spread.causes))


def standard_normal(names: Sequence[str], count: int, seed: int) -> dict[str, Array]:
    """Values of each cause from its own stream. name → (count,)"""
    return {name: np.random.default_rng([seed, zlib.crc32(name.encode())]).standard_normal(count) for name in names}


def draws_from(listed: Sequence[Spread], z: dict[str, Array], count: int) -> Draws:
    """Changes of all quantities from the values of the causes."""
    still = np.zeros(count)
    known = {cause: still for spread in listed if not spread.size > 0 for cause in spread.causes} | z
    return Draws(tuple((spread.quantity, spread.part, spread.amounts(known)) for spread in listed), count)


def scenario(problem: Problem, draws: Draws, index: int) -> Problem:
    """The problem of one draw, by nudging everything in turn."""
    for quantity, part, amounts in draws.entries:
        amount = float(amounts[index])
        if quantity == SWITCH:
            problem = replace(problem, ambient=problem.ambient * (1 + amount)) if amount else problem
        else:
            problem = nudged(problem, quantity, amount, part)
    return problem
