"""What-ifs and worths of parts: what is shown, and the files that are written."""

from __future__ import annotations

from pathlib import Path

from codesign.errors import CodesignError
from codesign.report.figures.base import figure_format
from codesign.report.machine import as_json
from codesign.report.output import csv_text, write_file
from codesign.report.study_dict import variation_dict, worth_dict
from codesign.report.study_text import variation_text, worth_text
from codesign.report.vary_figure import variation_figure
from codesign.study.vary import Variation
from codesign.study.worth import Worths


def show(found: Variation | Worths, *, json: bool, width: int = 80) -> str:
    """Return a study as text, or as JSON."""
    if isinstance(found, Variation):
        return as_json(variation_dict(found)) if json else variation_text(found, width)
    return as_json(worth_dict(found)) if json else worth_text(found, width)


def check_targets(csv: Path | None, figure: Path | None = None) -> None:
    """Raise CodesignError now when a file could not be written once the work is done."""
    if figure is not None:
        figure_format(figure)
    for path in (csv, figure):
        if path is not None and not path.parent.is_dir():
            raise CodesignError(f"{path}: folder {str(path.parent)!r} does not exist; create it first")
        if path is not None and path.is_dir():
            raise CodesignError(f"{path}: is a folder; name a file in it")


def save(found: Variation | Worths, csv: Path | None, figure: Path | None = None) -> None:
    """Write table and figure where asked for."""
    if csv is not None:
        write_file(csv, csv_text(found.table()))
    if figure is not None:
        write_file(figure, variation_figure(found, figure_format(figure)))
