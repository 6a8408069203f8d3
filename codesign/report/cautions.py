"""Warnings that apply to a recipe: data it stands on, light that hurts, flashing, heat, current. Aids only."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from codesign.catalog import Led
from codesign.design import Performance
from codesign.problem import Problem
from codesign.problem.choices import JOINT
from codesign.report.layout import duration, percent
from codesign.spectra import trapezoid_weights
from codesign.study.radiation import screening

#: An LED is named when this share of its light lies in a band. [1]
NOTICEABLE = 0.01
#: Bands of light the eye or skin needs care with. [nm]
BANDS = {
    "ultraviolet (below 400 nm)": (0.0, 400.0),
    "blue light (400-500 nm)": (400.0, 500.0),
    "infrared (above 780 nm)": (780.0, np.inf),
}
ADVICE = {
    "ultraviolet (below 400 nm)": "can harm eyes and skin and ages plastics; shield it",
    "blue light (400-500 nm)": "can harm the retina; do not look into the source",
    "infrared (above 780 nm)": "is hardly seen, so nobody blinks or turns away; mark it as on",
}
#: Flashing in this range can trigger seizures. [Hz]
FLASHING_HZ = (3.0, 60.0)
#: Junctions above this mean boards and heat sinks that are hot to the touch. [deg C]
HOT_C = 55.0
#: Emitters in series above this are no longer extra-low voltage; sources above this current need care. [V], [A]
HIGH_VOLTAGE_V, HIGH_CURRENT_A = 60.0, 1.0

DEFERENCE = (
    "These are reminders, not a safety assessment. Local codes hold; have a licensed professional assess "
    "light, heat and wiring before people work near it."
)


def cautions(problem: Problem, performance: Performance) -> tuple[str, ...]:
    """Return the cautions that apply to a recipe, each one or two sentences; empty when all LEDs are off."""
    if not performance.leds:
        return ()
    found = [text for check in CHECKS for text in check(problem, performance)]
    return (*found, DEFERENCE) if found else ()


def share_in_band(led: Led, lo: float, hi: float) -> float:
    """Return the share of an LED's light between two wavelengths. [1]"""
    low, high = led.support()
    grid = np.linspace(low, high, 400)
    light = led.spectrum(grid) * trapezoid_weights(grid)
    return float(light[(grid >= lo) & (grid < hi)].sum() / light.sum())


def _light(problem: Problem, performance: Performance) -> list[str]:
    found = []
    for name, (lo, hi) in BANDS.items():
        lit = [s.id for s in performance.leds if share_in_band(problem.channel(s.id).led, lo, hi) >= NOTICEABLE]
        if lit:
            found.append(f"{name[0].upper()}{name[1:]} {ADVICE[name]} ({', '.join(lit)}).")
    return found


def _published_limits(problem: Problem, performance: Performance) -> list[str]:
    """Published exposure limits that are reached within 8 h when somebody looks into the emitters from near."""
    found = screening(problem, performance)
    said = [f"of {name} after {duration(seconds)}" for name, seconds in found.reached.items()]
    if not said:
        return []
    return [
        f"Looked into from {found.distance_mm:g} mm, the bare emitters reach the published limit {', '.join(said)} "
        "(a warning aid; 'cnr radiation' has the assumptions)."
    ]


def _flashing(problem: Problem, performance: Performance) -> list[str]:
    rate = problem.spec.timing.frame_rate_hz
    if not problem.strobe or rate is None or not FLASHING_HZ[0] <= rate <= FLASHING_HZ[1]:
        return []
    return [
        f"The light flashes at {rate:g} Hz; flashing at {FLASHING_HZ[0]:g}-{FLASHING_HZ[1]:g} Hz can trigger "
        "seizures and disturb people: enclose it, or flash faster."
    ]


def _heat(problem: Problem, performance: Performance) -> list[str]:
    hottest = max(performance.leds, key=lambda state: state.junction_c)
    if hottest.junction_c < HOT_C:
        return []
    return [
        f"Hot parts: junctions of {hottest.id} reach {hottest.junction_c:.0f} °C; boards and heat sinks near them "
        "can burn skin."
    ]


def _supply(problem: Problem, performance: Performance) -> list[str]:
    amps = max(state.drive_ma for state in performance.leds) * 1e-3
    volts = max(s.emitters * s.electrical_w / (s.drive_ma * 1e-3) for s in performance.leds)
    watts = sum(s.emitters * s.electrical_w for s in performance.leds)
    if amps < HIGH_CURRENT_A and volts <= HIGH_VOLTAGE_V:
        return []
    above = ", above extra-low voltage" if volts > HIGH_VOLTAGE_V else ""
    return [
        f"Supply: up to {amps:.3g} A per channel, {volts:.3g} V when a channel's emitters are in series{above}, "
        f"{watts:.3g} W while on; rate wires, fuses and connectors for it."
    ]


def _filter_open(problem: Problem, performance: Performance) -> list[str]:
    """Light used where the data sheet of a filter says nothing of blocking: it is taken as open there."""
    from codesign.design_spectra import spectra

    said = []
    for name in performance.design.filter.split(JOINT):
        part = problem.catalog.filters.get(name)
        if part is None or (part.blocking_from_nm is None and part.blocking_to_nm is None):
            continue
        found, (low, high) = spectra(problem, performance), part.blocked_nm()
        grid = found.wavelength_nm
        seen = sum(abs(r.weight) * (r.led_e + r.ambient_e)[found.pair[1]] for r in found.readings)
        total = float(found.integral(seen))
        share = float(found.integral(seen * ((grid < low) | (grid > high)))) / total if total > 0 else 0.0
        if share >= NOTICEABLE:
            span = (
                f"to {high:g} nm"
                if low <= 0
                else f"from {low:g} nm"
                if high == np.inf
                else f"for {low:g} to {high:g} nm"
            )
            said.append(
                f"Filter {name}: its blocking is stated {span}. Beyond, it is taken as open, and {percent(share)} of "
                "the electrons come through there: measure its transmittance before you rely on this."
            )
    return said


CHECKS: tuple[Callable[[Problem, Performance], list[str]], ...] = (
    _filter_open, _light, _published_limits, _flashing, _heat, _supply,
)  # fmt: skip
