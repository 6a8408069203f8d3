"""The rig in common of a family beside the own rigs of its variants."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from codesign.family.batch import Entry, OwnRigs
from codesign.family.load import Family
from codesign.family.outcome import Outcome, outcome_with
from codesign.problem import Problem
from codesign.study.shared_rig import SharedRig, VariantOutcome, shared_rig


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedFamily:
    """A family with one rig for all.

    Attributes
    ----------
    own : OwnRigs
        Each variant with the rig best for it.
    rig : SharedRig
    entries : tuple of Entry
        Each variant that the rig was chosen for, with its recipe on it, in the order of the family.
    max_led_channels : int or None
        LED channels that were allowed; None where the problems say, or any number.
    """

    own: OwnRigs
    rig: SharedRig
    entries: tuple[Entry, ...]
    max_led_channels: int | None

    def own_entry(self, name: str) -> Entry:
        """The own rig of a variant."""
        return next(entry for entry in self.own.entries if entry.name == name)


def shared_family(
    family: Family,
    own: OwnRigs,
    *,
    goal: str | None = None,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    gap: float | None = None,
    time_limit: float | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> SharedFamily:
    """Find the rig that all variants of a family have in common; options default to the family file.

    Parameters
    ----------
    family : Family
    own : OwnRigs
        Of the same family. Variants without a recipe of their own are left out.
    goal, max_led_channels, required_cnr, gap, time_limit, progress
        As of `codesign.study.shared_rig.shared_rig`.

    Returns
    -------
    SharedFamily

    Raises
    ------
    CodesignError
        As `shared_rig`.
    """
    wanted = family.spec.shared
    channels = wanted.max_led_channels if max_led_channels is None else max_led_channels
    rig = shared_rig(
        problems_of(family, own),
        max_led_channels=channels,
        goal=wanted.goal if goal is None else goal,
        required_cnr=wanted.required_cnr if required_cnr is None else required_cnr,
        time_limit=time_limit,
        progress=progress,
        own={entry.name: entry.outcome.best_cnr for entry in own.solved},
        **({} if gap is None else {"gap": gap}),
    )
    entries = tuple(_entry(entry, rig.outcomes[entry.name]) for entry in own.solved if entry.name in rig.outcomes)
    return SharedFamily(own=own, rig=rig, entries=entries, max_led_channels=channels)


def problems_of(family: Family, own: OwnRigs) -> dict[str, Problem]:
    """Problems of the variants that have a recipe of their own, by name."""
    return {entry.name: family.problem(entry.variant) for entry in own.solved}


def _entry(own: Entry, found: VariantOutcome) -> Entry:
    return Entry(variant=own.variant, outcome=_outcome(found), required_cnr=found.required_cnr)


def _outcome(found: VariantOutcome) -> Outcome:
    if found.recipe is None or found.optimum is None:
        return Outcome(status="impossible", reason="the rig in common shows nothing of it")
    binding = tuple(limit.name for limit in found.optimum.limits if limit.share >= 0.999)
    return outcome_with(found.recipe, best_cnr=float(found.optimum.cnr), bound=None, proven=True, binding=binding)
