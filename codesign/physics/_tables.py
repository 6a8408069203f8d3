"""Reading of the published tables shipped in ``codesign/data`` and the integral used on them."""

from __future__ import annotations

from functools import cache
from importlib import resources

import numpy as np
from numpy.typing import ArrayLike, NDArray

from codesign.errors import CoverageError

Array = NDArray[np.float64]


@cache
def shipped_table(name: str) -> Array:
    """Return the columns of ``codesign/data/<name>.csv`` as a read-only array.

    The first rows of each file, marked ``#``, state where its numbers come from.

    Returns
    -------
    (n_columns, n_rows) array
        Row 0 is the wavelength [nm]; the unit of the others is in the column name.
    """
    text = resources.files("codesign").joinpath("data", f"{name}.csv").read_text(encoding="utf-8")
    rows = [line for line in text.splitlines() if line and not line.startswith("#")]
    table = np.array([[float(cell) for cell in row.split(",")] for row in rows[1:]]).T
    table.setflags(write=False)
    return table


def require_range(wavelength_nm: Array, table_nm: Array, what: str, advice: str) -> None:
    """Raise `CoverageError` unless ``table_nm`` covers every wavelength asked for.

    A hair of rounding is allowed so that a grid built by repeated addition still meets the last row.
    """
    low, high = float(np.min(wavelength_nm)), float(np.max(wavelength_nm))
    if low < table_nm[0] - 1e-9 or high > table_nm[-1] + 1e-9:
        raise CoverageError(
            f"{what} is known from {table_nm[0]:g} to {table_nm[-1]:g} nm, "
            f"but {low:g} to {high:g} nm is asked for; {advice}"
        )


def integrate(values: ArrayLike, wavelength_nm: ArrayLike) -> Array:
    """Trapezoid integral over the last axis.

    Parameters
    ----------
    values : (..., n) array
        Spectral quantity. [x/nm]
    wavelength_nm : (n,) array
        Strictly increasing. [nm]

    Returns
    -------
    (...) array
        [x]
    """
    values = np.asarray(values, dtype=float)
    steps = np.diff(np.asarray(wavelength_nm, dtype=float))
    return 0.5 * ((values[..., 1:] + values[..., :-1]) @ steps)
