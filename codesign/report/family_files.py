"""Families: what is shown, and the files that are written."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

from codesign.family.batch import OwnRigs
from codesign.report.family_dict import own_rigs_dict
from codesign.report.family_table import recipe_table
from codesign.report.family_text import own_rigs_text
from codesign.report.layout import counted
from codesign.report.machine import as_json
from codesign.report.output import csv_text, write_file
from codesign.report.study_files import check_targets

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.family.shared import SharedFamily

__all__ = ["check_targets", "save", "show"]


def show(found: OwnRigs | SharedFamily, *, json: bool, width: int = 80) -> str:
    """Return a family as text, or as JSON."""
    if isinstance(found, OwnRigs):
        return as_json(own_rigs_dict(found)) if json else own_rigs_text(found, width)
    text, plain_values = _reports(found)
    return as_json(plain_values(found)) if json else text(found, width)


def _reports(found: SharedFamily) -> tuple[Callable[..., str], Callable[..., dict]]:
    """Text and plain values of rigs in common, by their kind."""
    from codesign.report import family_sets, family_shared
    from codesign.study.rig_sets import FilterWheel, RigSet

    if isinstance(found.rig, RigSet):
        return family_sets.rig_set_text, family_sets.rig_set_dict
    if isinstance(found.rig, FilterWheel):
        return family_sets.wheel_text, family_sets.wheel_dict
    return family_shared.shared_text, family_shared.shared_dict


def save(found: OwnRigs | SharedFamily, csv: Path | None, figure: Path | None = None) -> None:
    """Write the table of recipes and the figure where asked for."""
    if csv is not None:
        write_file(csv, csv_text(recipe_table(found.entries)))
    if figure is not None:
        from codesign.report.figures.base import save_figure

        save_figure(_figure(found), figure)


def _figure(found: OwnRigs | SharedFamily) -> Figure:
    from codesign.report.figures.families import family_figure

    if isinstance(found, OwnRigs):
        return family_figure(found.entries, None, found.title)
    return family_figure(found.own.entries, found.common, found.own.title, common=_common_words(found))


def _common_words(found: SharedFamily) -> str:
    """What is in common, in one line."""
    from codesign.study.rig_sets import FilterWheel, RigSet

    rig = found.rig
    if isinstance(rig, RigSet):
        return f"best of {counted(rig.number, 'rig')}"
    if isinstance(rig, FilterWheel):
        return f"{rig.camera}, f/{rig.f_number:g}, {counted(rig.number, 'filter')} on a wheel"
    return f"rig in common: {rig.camera}, filter {rig.filter}, f/{rig.f_number:g}"
