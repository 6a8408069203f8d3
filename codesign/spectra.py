"""Curves on a wavelength axis: immutable, coverage-checked, read from plain CSV files.

Nothing is extrapolated silently: a curve that does not reach the wavelengths asked of it raises
:class:`~codesign.errors.CoverageError` with both ranges, unless the caller states what lies outside.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from codesign.errors import CatalogError, CoverageError, ProblemError, nearest

FloatArray = NDArray[np.float64]

WAVELENGTH_COLUMN = "wavelength_nm"
# A curve may end this far [nm] short of the grid: rounding of printed wavelengths, not missing data.
COVERAGE_SLACK_NM = 1e-6
# No optical curve in nanometres lies wholly below this; micrometre axes always do.
MICROMETRE_CEILING = 10.0


@dataclass(frozen=True, slots=True, eq=False)
class Spectrum:
    """One or several curves on a common wavelength axis.

    Parameters
    ----------
    wavelength_nm : (n,) array
        Strictly increasing, at least two points. [nm]
    values : (n,) or (k, n) array
        Finite values, wavelength last; the unit is that of whoever holds the curve.
    label : str
        Where the curve comes from; opens every message about it.

    Raises
    ------
    CatalogError
        When the axis is not strictly increasing, shapes disagree or a value is not finite.
    """

    wavelength_nm: FloatArray
    values: FloatArray
    label: str = "spectrum"

    def __post_init__(self) -> None:
        wavelength = _read_only(self.wavelength_nm)
        values = _read_only(self.values)
        object.__setattr__(self, "wavelength_nm", wavelength)
        object.__setattr__(self, "values", values)
        self._check_axis()
        if values.ndim not in (1, 2) or values.shape[-1] != wavelength.size:
            raise CatalogError(
                f"{self.label}: values have shape {values.shape}, must be ({wavelength.size},) or "
                f"(k, {wavelength.size}): one value per wavelength"
            )
        if not np.isfinite(values).all():
            at = int(np.argwhere(~np.isfinite(values))[0][-1])
            raise CatalogError(f"{self.label}: value at {wavelength[at]:g} nm is not finite; remove the point")

    def _check_axis(self) -> None:
        wavelength = self.wavelength_nm
        if wavelength.ndim != 1 or wavelength.size < 2:
            raise CatalogError(
                f"{self.label}: wavelength axis has shape {wavelength.shape}, must be a row of 2 or more"
            )
        bad = np.flatnonzero(~(np.diff(wavelength) > 0))
        if bad.size:
            i = int(bad[0])
            raise CatalogError(
                f"{self.label}: wavelength {wavelength[i + 1]:g} nm follows {wavelength[i]:g} nm, "
                "must be strictly increasing; sort the points and remove repeats"
            )

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Spectrum):
            return NotImplemented
        return np.array_equal(self.wavelength_nm, other.wavelength_nm) and np.array_equal(self.values, other.values)

    def __hash__(self) -> int:
        return hash((self.wavelength_nm.tobytes(), self.values.tobytes()))

    @property
    def range(self) -> tuple[float, float]:
        """First and last wavelength. [nm]"""
        return float(self.wavelength_nm[0]), float(self.wavelength_nm[-1])

    def covers(self, lo: float, hi: float) -> bool:
        """Whether the curve reaches from ``lo`` to ``hi``. [nm]"""
        first, last = self.range
        return first <= lo + COVERAGE_SLACK_NM and last >= hi - COVERAGE_SLACK_NM

    def resample(self, grid_nm: ArrayLike, outside: str | float = "error") -> FloatArray:
        """Interpolate linearly onto other wavelengths.

        Parameters
        ----------
        grid_nm : (m,) array
            Wavelengths asked for. [nm]
        outside : "error", "zero", "edge" or float
            What lies beyond the ends of the curve: an error, zero, the end value, or the number given.

        Returns
        -------
        (m,) or (k, m) array

        Raises
        ------
        CoverageError
            When ``outside="error"`` and the curve does not cover the grid.
        """
        grid = np.asarray(grid_nm, dtype=np.float64)
        lo, hi = float(grid.min()), float(grid.max())
        if outside == "error" and not self.covers(lo, hi):
            raise CoverageError(
                f"{self.label}: curve runs {self.range[0]:g} to {self.range[1]:g} nm, but "
                f"{lo:g} to {hi:g} nm is needed; supply a wider curve or narrow the wavelength range"
            )
        result = _interpolate(self.wavelength_nm, self.values, grid)
        if outside not in ("error", "edge"):
            fill = 0.0 if outside == "zero" else float(outside)
            beyond = (grid < self.range[0] - COVERAGE_SLACK_NM) | (grid > self.range[1] + COVERAGE_SLACK_NM)
            result[..., beyond] = fill
        return result


@dataclass(frozen=True, slots=True)
class Table:
    """A curve file as read: named columns and the file line of every row, for exact messages."""

    label: str
    names: tuple[str, ...]
    lines: tuple[int, ...] = field(repr=False)
    spectrum: Spectrum = field(repr=False)

    def column(self, name: str) -> Spectrum:
        """Return one column as a single curve."""
        if name not in self.names:
            raise CatalogError(f"{self.label}: no column {name!r}, {nearest(name, self.names)}")
        values = self.spectrum.values[self.names.index(name)]
        return Spectrum(self.spectrum.wavelength_nm, values, self.label)

    def keep(self, names: Sequence[str]) -> Table:
        """Return the table with only the named columns, in that order."""
        picked = np.array([self.column(name).values for name in names])
        spectrum = Spectrum(self.spectrum.wavelength_nm, picked, self.label)
        return Table(self.label, tuple(names), self.lines, spectrum)

    def require(self, allowed: NDArray[np.bool_], advice: str) -> None:
        """Raise an error naming row, column and value of the first entry that is not ``allowed``."""
        bad = np.argwhere(~allowed)
        if bad.size:
            column, row = (int(i) for i in bad[0])
            value = self.spectrum.values[column, row]
            raise CatalogError(f"{self.label}:{self.lines[row]}: {self.names[column]} is {value:g}, {advice}")


def wavelength_grid(lo: float, hi: float, step: float) -> FloatArray:
    """Return equally spaced wavelengths that include both ends, no further apart than ``step``. [nm]"""
    if not (0 < lo < hi and step > 0 and math.isfinite(hi)):
        raise ProblemError(
            f"wavelength grid from {lo:g} to {hi:g} nm in steps of {step:g} nm: must be 0 < from < to and step > 0"
        )
    intervals = max(1, math.ceil((hi - lo) / step - 1e-9))
    return np.linspace(lo, hi, intervals + 1)


def trapezoid_weights(grid_nm: ArrayLike) -> FloatArray:
    """Return weights such that ``values @ weights`` is the trapezoid integral over the grid. [nm]"""
    grid = np.asarray(grid_nm, dtype=np.float64)
    half = np.diff(grid) / 2
    weights = np.zeros_like(grid)
    weights[:-1] += half
    weights[1:] += half
    return weights


def read_table(path: str | Path, columns: Sequence[str] | None = None, *, label: str | None = None) -> Table:
    """Read a curve file: a header ``wavelength_nm,<name>,...``, then numbers; ``#`` lines are comments.

    Parameters
    ----------
    path : path
        UTF-8 text, comma-separated, decimal points.
    columns : sequence of str, optional
        Columns to keep, in this order; all by default.
    label : str, optional
        How messages name the file; its path by default.

    Returns
    -------
    Table
        ``table.spectrum.values`` has shape (n_columns, n_rows).

    Raises
    ------
    CatalogError
        Missing or empty file, wrong header, ragged row, text, NaN, unsorted or repeated wavelengths,
        another separator, or an axis that looks like micrometres; the message has file, row and value.
    """
    path = Path(path)
    label = label or str(path)
    rows = _numbered_rows(path, label)
    header_line, header = rows[0]
    _check_header(label, header_line, header)
    body = rows[1:]
    if len(body) < 2:
        raise CatalogError(f"{label}: {len(body)} data rows, must be at least 2 wavelengths")
    data = np.array([_numbers(label, line, header, cells) for line, cells in body])
    lines = tuple(line for line, _ in body)
    _check_wavelengths(label, lines, data[:, 0])
    names = tuple(header[1:])
    table = Table(label, names, lines, Spectrum(data[:, 0], data[:, 1:].T, label))
    return table if columns is None else table.keep(columns)


def _read_only(values: ArrayLike) -> FloatArray:
    array = np.array(values, dtype=np.float64)
    array.flags.writeable = False
    return array


def _interpolate(x: FloatArray, values: FloatArray, grid: FloatArray) -> FloatArray:
    """Linear interpolation of all rows at once; end values are held outside."""
    at = np.clip(grid, x[0], x[-1])
    left = np.clip(np.searchsorted(x, at, side="right") - 1, 0, x.size - 2)
    share = (at - x[left]) / (x[left + 1] - x[left])
    return values[..., left] * (1.0 - share) + values[..., left + 1] * share


def _numbered_rows(path: Path, label: str) -> list[tuple[int, list[str]]]:
    """Return (file line, cells) of all lines that are neither empty nor comments."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (FileNotFoundError, IsADirectoryError, NotADirectoryError):
        raise CatalogError(f"{label}: no such file; paths are relative to the file that names them") from None
    except UnicodeDecodeError as error:
        raise CatalogError(
            f"{label}: byte {error.start} is not UTF-8 text; save the file as UTF-8 comma-separated text"
        ) from None
    kept = [
        (number, [cell.strip() for cell in next(csv.reader([line]))])
        for number, line in enumerate(text.splitlines(), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not kept:
        raise CatalogError(
            f"{label}: file is empty, must have a header '{WAVELENGTH_COLUMN},<name>' and rows of numbers"
        )
    return kept


def _check_header(label: str, line: int, header: list[str]) -> None:
    where = f"{label}:{line}"
    for mark, word in ((";", "semicolons"), ("\t", "tabs")):
        if mark in header[0]:
            raise CatalogError(
                f"{where}: header {header[0]!r} is separated by {word}; "
                "save with commas between columns and points as decimal marks"
            )
    if header[0] != WAVELENGTH_COLUMN:
        raise CatalogError(f"{where}: first column is {header[0]!r}, must be '{WAVELENGTH_COLUMN}', in nanometres")
    if len(header) < 2 or not all(header):
        raise CatalogError(f"{where}: header {','.join(header)!r} must name at least one value column, none empty")
    repeated = next((name for name in header if header.count(name) > 1), None)
    if repeated:
        raise CatalogError(f"{where}: column {repeated!r} appears twice; give each column its own name")


def _numbers(label: str, line: int, header: list[str], cells: list[str]) -> list[float]:
    where = f"{label}:{line}"
    if len(cells) != len(header):
        advice = "decimal commas? write decimal points" if len(cells) > len(header) else "fill the row"
        raise CatalogError(f"{where}: {len(cells)} cells {','.join(cells)!r}, must be {len(header)}; {advice}")
    return [_number(where, name, cell) for name, cell in zip(header, cells, strict=True)]


def _number(where: str, name: str, cell: str) -> float:
    try:
        value = float(cell)
    except ValueError:
        percent = "state percent in the part's 'unit', not in the cells"
        advice = percent if "%" in cell else "remove the row or fill it"
        raise CatalogError(f"{where}: {name} is {cell!r}, must be a number; {advice}") from None
    if not math.isfinite(value):
        raise CatalogError(f"{where}: {name} is {cell!r}, must be finite; remove the row or measure it again")
    return value


def _check_wavelengths(label: str, lines: tuple[int, ...], wavelength: FloatArray) -> None:
    if wavelength.max() < MICROMETRE_CEILING:
        raise CatalogError(
            f"{label}:{lines[0]}: wavelength_nm runs {wavelength[0]:g} to {wavelength[-1]:g}: "
            "looks like micrometres; multiply by 1000 to give nanometres"
        )
    if not wavelength.min() > 0:
        row = int(np.argmin(wavelength))
        raise CatalogError(f"{label}:{lines[row]}: wavelength_nm is {wavelength[row]:g}, must be > 0; correct the row")
    for i, step in enumerate(np.diff(wavelength)):
        if step > 0:
            continue
        what = "repeats the row before" if step == 0 else f"follows {wavelength[i]:g}"
        raise CatalogError(
            f"{label}:{lines[i + 1]}: wavelength_nm {wavelength[i + 1]:g} {what}, "
            "must be strictly increasing; sort the rows and remove repeats"
        )
