"""Rigs in common of a family beside the own rigs of its variants: one for all, a set of few, or a filter wheel."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from string import ascii_uppercase

from codesign.family.batch import Entry, OwnRigs
from codesign.family.load import Family
from codesign.family.outcome import Outcome, outcome_with
from codesign.problem import Problem
from codesign.study.rig_sets import FilterWheel, RigSet, smallest_filter_wheel, smallest_rig_set
from codesign.study.shared_rig import SharedRig, VariantOutcome, shared_rig

Progress = Callable[[float, float], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedFamily:
    """A family on rigs in common.

    Attributes
    ----------
    own : OwnRigs
        Each variant with the rig best for it.
    rig : SharedRig, RigSet or FilterWheel
    entries : tuple of Entry
        Each variant that it was chosen for, with its recipe on it, in the order of the family.
    max_led_channels : int or None
        LED channels that were allowed on a rig; None where the problems say, or any number.
    """

    own: OwnRigs
    rig: SharedRig | RigSet | FilterWheel
    entries: tuple[Entry, ...]
    max_led_channels: int | None

    @property
    def common(self) -> Mapping[str, Outcome]:
        """Outcomes on rigs in common, by variant."""
        return {entry.name: entry.outcome for entry in self.entries}

    def own_entry(self, name: str) -> Entry:
        """The own rig of a variant."""
        return next(entry for entry in self.own.entries if entry.name == name)

    def place_of(self, name: str) -> str:
        """Which rig of a set, or filter of a wheel, a variant uses; empty where there is one rig for all."""
        if isinstance(self.rig, RigSet):
            return rig_letter(self.rig.rig_of[name])
        return self.rig.filter_of[name] if isinstance(self.rig, FilterWheel) else ""

    def leds_of(self, name: str) -> tuple[str, ...]:
        """LED channels of the rig that a variant uses."""
        return self.rig.rigs[self.rig.rig_of[name]].leds if isinstance(self.rig, RigSet) else self.rig.leds


def rig_letter(number: int) -> str:
    """Name of a rig of a set by its position: A to Z, then AA and so on."""
    more, last = divmod(number, len(ascii_uppercase))
    return (rig_letter(more - 1) if more else "") + ascii_uppercase[last]


def shared_family(
    family: Family,
    own: OwnRigs,
    *,
    goal: str | None = None,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    gap: float | None = None,
    time_limit: float | None = None,
    progress: Progress | None = None,
) -> SharedFamily:
    """Find the rig that all variants of a family have in common; options default to the family file.

    Parameters
    ----------
    family : Family
    own : OwnRigs
        Of the same family. Variants without a recipe of their own are left out.
    goal, max_led_channels, required_cnr, gap, time_limit, progress
        As of `codesign.study.shared_rig.shared_rig`.

    Raises
    ------
    CodesignError
        As `shared_rig`.
    """
    wanted = family.spec.shared
    options = {"goal": wanted.goal if goal is None else goal, **({} if gap is None else {"gap": gap})}
    return _found(shared_rig, family, own, max_led_channels, required_cnr, time_limit, progress, options)


def rig_set_family(
    family: Family,
    own: OwnRigs,
    *,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    time_limit: float | None = None,
    progress: Progress | None = None,
) -> SharedFamily:
    """Find the fewest rigs that serve all variants; arguments and errors as of `shared_family`."""
    return _found(smallest_rig_set, family, own, max_led_channels, required_cnr, time_limit, progress, {})


def filter_wheel_family(
    family: Family,
    own: OwnRigs,
    *,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    time_limit: float | None = None,
    progress: Progress | None = None,
) -> SharedFamily:
    """Find the fewest filters with which one rig serves all variants; arguments and errors as of `shared_family`."""
    return _found(smallest_filter_wheel, family, own, max_led_channels, required_cnr, time_limit, progress, {})


def problems_of(family: Family, own: OwnRigs) -> dict[str, Problem]:
    """Problems of the variants that have a recipe of their own, by name."""
    return {entry.name: family.problem(entry.variant) for entry in own.solved}


def _found(find, family, own, max_led_channels, required_cnr, time_limit, progress, options) -> SharedFamily:
    wanted = family.spec.shared
    channels = wanted.max_led_channels if max_led_channels is None else max_led_channels
    rig = find(
        problems_of(family, own),
        max_led_channels=channels,
        required_cnr=wanted.required_cnr if required_cnr is None else required_cnr,
        time_limit=time_limit,
        progress=progress,
        own={entry.name: entry.outcome.best_cnr for entry in own.solved},
        **options,
    )
    entries = tuple(_entry(entry, rig.outcomes[entry.name]) for entry in own.solved if entry.name in rig.outcomes)
    return SharedFamily(own=own, rig=rig, entries=entries, max_led_channels=channels)


def _entry(own: Entry, found: VariantOutcome) -> Entry:
    return Entry(variant=own.variant, outcome=outcome_on(found), required_cnr=found.required_cnr)


def outcome_on(found: VariantOutcome) -> Outcome:
    """Outcome of a variant on a rig in common."""
    if found.recipe is None or found.optimum is None:
        return Outcome(status="impossible", reason="the rig in common shows nothing of it")
    binding = tuple(limit.name for limit in found.optimum.limits if limit.share >= 0.999)
    return outcome_with(found.recipe, best_cnr=float(found.optimum.cnr), bound=None, proven=True, binding=binding)
