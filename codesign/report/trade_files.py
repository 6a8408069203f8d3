"""Trade-off curves: what is shown, and the files that are written."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from codesign.report.machine import as_json
from codesign.report.output import csv_text, write_file
from codesign.report.trade_text import trade_dict, trade_text
from codesign.study.trade import Trade


def show_curves(curves: Sequence[Trade], *, json: bool, width: int = 80) -> str:
    """Return curves of one problem as text, or as JSON."""
    return as_json(trade_dict(curves)) if json else trade_text(curves, width)


def save_curves(curves: Sequence[Trade], csv: Path | None, figure: Path | None) -> None:
    """Write the points of all curves as one table, and all curves as one figure, where asked for."""
    if csv is not None:
        import pandas as pd

        write_file(csv, csv_text(pd.concat([curve.table() for curve in curves], ignore_index=True)))
    if figure is not None:
        from codesign.report.figures.base import save_figure
        from codesign.report.figures.trade import trade_figure

        save_figure(trade_figure(curves), figure)
