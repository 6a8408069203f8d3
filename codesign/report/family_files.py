"""Families: what is shown, and the files that are written."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from codesign.family.batch import OwnRigs
from codesign.report.family_dict import own_rigs_dict
from codesign.report.family_table import recipe_table
from codesign.report.family_text import own_rigs_text
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
    from codesign.report.family_shared import shared_dict, shared_text

    return as_json(shared_dict(found)) if json else shared_text(found, width)


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
    rig, shared = found.rig, {entry.name: entry.outcome for entry in found.entries}
    common = f"rig in common: {rig.camera}, filter {rig.filter}, f/{rig.f_number:g}"
    return family_figure(found.own.entries, shared, found.own.title, common=common)
