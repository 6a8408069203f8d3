"""How much of each limit a recipe uses."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from codesign.build import build_limits, free, part_price, units_in_use
from codesign.limits import Setting, junction_limit, sum_limits, sum_weights, time_limits, well_bound
from codesign.physics.optics import depth_of_field
from codesign.problem import Problem

#: A limit counts as met up to this share over its bound: well below any setting step, above round-off.
TOLERANCE = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class LimitUse:
    """How much of a limit is used. ``share`` is 1 at the limit; a ``floor`` is met from above."""

    name: str
    unit: str
    value: float
    bound: float
    share: float
    floor: bool = False

    @property
    def met(self) -> bool:
        """Whether the limit holds (to `TOLERANCE`)."""
        return self.share <= 1 + TOLERANCE

    def shortfall(self) -> str:
        """Say by how much the limit is missed."""
        word = "below" if self.floor else "above"
        missing = abs(self.value - self.bound)
        return (
            f"{self.name} {self.value:.5g} {self.unit} is {missing:.3g} {self.unit} {word} "
            f"the limit {self.bound:.5g} {self.unit}"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class LedState:
    """One lit LED channel: current, electrical and optical power per emitter while on, junction."""

    id: str
    drive_ma: float
    electrical_w: float
    optical_w: float
    junction_c: float
    emitters: int


def _use(name: str, unit: str, value: float, bound: float) -> LimitUse:
    share = value / bound if bound > 0 else (0.0 if value <= 0 else np.inf)
    return LimitUse(name=name, unit=unit, value=float(value), bound=float(bound), share=float(share))


def limit_uses(
    problem: Problem, setting: Setting, f_number: float, t: float, states: Sequence[LedState], readings: Sequence[Any]
) -> list[LimitUse]:
    """Use of every limit at exposure ``t`` [s], in the order of the signal chain.

    ``readings`` are the surfaces read, with ``id`` and ``total_e``.
    """
    found = [_use(f"well, {r.id}", "e-", r.total_e, well_bound(problem, setting)) for r in readings]
    for limit in time_limits(problem, setting):
        value = limit.value(t)
        share = limit.bound / value if limit.floor else value / limit.bound
        found.append(
            LimitUse(
                name=limit.name,
                unit=limit.unit,
                value=value,
                bound=limit.bound,
                share=share,
                floor=limit.floor,
            )
        )
    found += _power_uses(problem, states, t)
    for state in states:
        channel = problem.channel(state.id)
        top_ma = setting.level.current_ma[problem.channel_index[state.id]]
        found.append(_use(f"current, {state.id}", "mA", state.drive_ma, top_ma))
        air, top = problem.spec.temperature.air_c, junction_limit(problem, channel)
        share = (state.junction_c - air) / (top - air) if top > air else np.inf
        found.append(
            LimitUse(name=f"junction, {state.id}", unit="deg C", value=state.junction_c, bound=top, share=share)
        )
    if problem.spec.optics.required_depth_mm is not None:
        found.append(_depth_use(problem, setting, f_number))
    return found


def build_uses(problem: Problem, design: Any) -> list[LimitUse]:
    """Use of the build limits by a design: ``drive_ma``, ``emitters``, ``camera`` and ``filter``."""
    if not problem.spec.build.limited:
        return []
    units = units_in_use(problem, design.drive_ma, design.emitters)
    price = recipe_price(problem, design) if problem.spec.build.price_budget is not None else 0.0
    return [
        _use(limit.name, limit.unit, price if limit.name == "price" else float(limit.cost(units).sum()), limit.bound)
        for limit in build_limits(problem)
    ]


def recipe_price(problem: Problem, design: Any) -> float | None:
    """Price of camera, filters and emitters of a design, None when a price is not known."""
    units = units_in_use(problem, design.drive_ma, design.emitters)
    count = units if free(problem) else units * np.array([channel.emitters for channel in problem.channels])
    prices = [part_price(problem, problem.camera(design.camera)), part_price(problem, problem.filter(design.filter))]
    prices += [
        int(n) * part_price(problem, channel.led) for n, channel in zip(count, problem.channels, strict=True) if n
    ]
    total = float(sum(prices))
    return None if np.isnan(total) else total


def _depth_use(problem: Problem, setting: Setting, f_number: float) -> LimitUse:
    wanted = problem.spec.optics.required_depth_mm
    depth = depth_of_field(f_number, setting.camera.pixel_pitch_um * 1e-6, problem.spec.optics.magnification) * 1e3
    return LimitUse(
        name="depth of field",
        unit="mm",
        value=float(depth),
        bound=wanted,
        share=float(wanted / depth),
        floor=True,
    )


def _power_uses(problem: Problem, states: tuple[LedState, ...], t: float) -> list[LimitUse]:
    duty, found = problem.duty(t), []
    for limit in sum_limits(problem):
        electrical, light = sum_weights(problem, limit.quantity)
        weights = (float(light[problem.channel_index[s.id]]) for s in states)
        value = sum(
            s.emitters * (electrical * s.electrical_w + weight * s.optical_w)
            for s, weight in zip(states, weights, strict=True)
        )
        found.append(_use(limit.name, limit.unit, value * (duty if limit.mean else 1.0), limit.bound))
    return found
