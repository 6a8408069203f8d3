"""Families: what is shown, and the files that are written."""

from __future__ import annotations

from pathlib import Path

from codesign.family.batch import OwnRigs
from codesign.report.family_dict import own_rigs_dict
from codesign.report.family_table import recipe_table
from codesign.report.family_text import own_rigs_text
from codesign.report.machine import as_json
from codesign.report.output import csv_text, write_file
from codesign.report.study_files import check_targets

__all__ = ["check_targets", "save", "show"]


def show(found: OwnRigs, *, json: bool, width: int = 80) -> str:
    """Return a family as text, or as JSON."""
    return as_json(own_rigs_dict(found)) if json else own_rigs_text(found, width)


def save(found: OwnRigs, csv: Path | None, figure: Path | None = None) -> None:
    """Write table and figure where asked for."""
    if csv is not None:
        write_file(csv, csv_text(recipe_table(found.entries)))
    if figure is not None:
        from codesign.report.figures.base import save_figure
        from codesign.report.figures.families import family_figure

        save_figure(family_figure(found.entries, title=found.title), figure)
