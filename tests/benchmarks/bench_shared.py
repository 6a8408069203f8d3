"""Rigs in common: one for the 24 caps of the demo family, with proof, changes that help, and the check of the proof."""

from __future__ import annotations

from pathlib import Path

from bench_registry import Figure, benchmark, timed

from codesign.family import load_family
from codesign.problem import Problem
from codesign.study.fields import varied
from codesign.study.rig_sets import smallest_filter_wheel, smallest_rig_set
from codesign.study.shared_rig import shared_rig, verify_shared

#: Bars: seconds for 24 variants, gap.
LONGEST_S, LARGEST_GAP = 120, 0.02
#: Few parts, for the smoke test.
FEW = {
    "candidates.cameras": ["mono-5mp"],
    "candidates.filters": ["lp-400"],
    "candidates.leds": ["blue-450-a", "green-525-a", "amber-590-a"],
    "optics.f_numbers": [2.8],
}


def caps(count: int) -> dict[str, Problem]:
    """Problems of the first caps of the demo family by name; fewer than all of them before few parts."""
    family = load_family("caps-24")
    names = family.names[:count]
    found = {name: family.problem(name) for name in names}
    return found if count == len(family.names) else {name: varied(p, FEW) for name, p in found.items()}


@benchmark(
    tiny={"caps_taken": 2, "channels": (1,), "sets": False},
    full={"caps_taken": 24, "channels": (1, 2, 4), "sets": True},
)
def rigs_in_common(folder: Path, *, caps_taken: int, channels: tuple[int, ...], sets: bool) -> list[Figure]:
    """Whole demo catalogue for every number of LED channels; then the smallest set of rigs and filter wheel."""
    family, figures = caps(caps_taken), []
    bar = LONGEST_S if caps_taken == 24 else None
    for most in channels:
        found, seconds = timed(shared_rig, family, max_led_channels=most, own={})
        verdict, checking = timed(verify_shared, found)
        name = f"{caps_taken} caps, {most} LED channel{'s' * (most > 1)}"
        figures += [
            Figure(what=f"{name}, with changes that help", value=seconds, unit="s", at_most=bar),
            Figure(what=f"{name}, gap proven", value=found.gap, unit="1", at_most=LARGEST_GAP),
            Figure(what=f"{name}, worst CNR", value=verdict.value, unit=""),
            Figure(what=f"{name}, check of the proof", value=checking, unit="s"),
        ]
    if sets:
        least = 0.98 * min(outcome.optimum.cnr for outcome in found.outcomes.values())
        for what, search in (("rigs", smallest_rig_set), ("filters of a wheel", smallest_filter_wheel)):
            several, seconds = timed(search, family, max_led_channels=2, required_cnr=least)
            figures += [
                Figure(what=f"{what}, 2 LED channels, CNR {least:.2f}, found", value=several.number, unit=""),
                Figure(what=f"{what}, proven to be needed", value=several.bound, unit=""),
                Figure(what=f"{what}, time", value=seconds, unit="s"),
            ]
    return figures
