"""Surfaces: one or many measured reflectance samples of what the camera looks at."""

from __future__ import annotations

from functools import lru_cache
from typing import Any, ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field

from codesign.catalog.common import Part, check_share, percent_factor
from codesign.spectra import Spectrum

FloatArray = NDArray[np.float64]

# Reflectance factors against a white diffuser may exceed 1 (gloss, fluorescence), not by this much.
LARGEST_REFLECTANCE = 1.5
# Singular values below this share of the largest are rounding of the samples, not clutter.
CLUTTER_CUTOFF = 1e-6


class Surface(Part):
    """A surface; its samples differ as real pieces do, and that spread is the clutter."""

    table_name: ClassVar[str] = "surface"

    curve: str = Field(min_length=1, description="CSV with wavelength_nm and one column per measured sample")
    unit: Literal["percent", "fraction"] = Field(description="unit of the curve")
    columns: tuple[str, ...] | None = Field(
        default=None, min_length=1, description="columns that are samples of this surface; all by default"
    )
    specular_reflectance: float = Field(
        default=0.0, ge=0, le=1, description="mirror-like share, 0 to 1; divide percent by 100"
    )
    reflectance_factor: float = Field(
        default=1.0, gt=0, le=10, description="reflectance relative to the stated samples, e.g. of a corrected standard"
    )
    spread_factor: float = Field(
        default=1.0,
        ge=0,
        le=10,
        description="spread of the samples about their mean relative to that measured, e.g. on a finer finish",
    )
    hold_edges_nm: float = Field(
        default=0.0,
        ge=0,
        le=200,
        description="how far beyond its measured ends the reflectance may be taken as constant [nm]",
    )
    tags: tuple[str, ...] = Field(default=(), description="free words for selection")

    @property
    def samples(self) -> Spectrum:
        """All samples as fractions, shape (k, n), with held ends where the surface states them."""
        table = self.read_curve(self.curve)
        if self.columns is not None:
            table = table.keep(self.columns)
        check_share(table, self.unit, top=LARGEST_REFLECTANCE)
        curves = table.spectrum
        factor = percent_factor(self.unit) * self.reflectance_factor
        wavelength, values = curves.wavelength_nm, curves.values * factor
        if self.hold_edges_nm:
            ends = max(wavelength[0] - self.hold_edges_nm, 1.0), wavelength[-1] + self.hold_edges_nm
            wavelength = np.concatenate([ends[:1], wavelength, ends[1:]])
            values = np.concatenate([values[..., :1], values, values[..., -1:]], axis=-1)
        return Spectrum(wavelength, values, table.label)

    def range(self) -> tuple[float, float]:
        """Return the wavelengths covered. [nm]"""
        return self.samples.range

    def mean(self, grid_nm: ArrayLike) -> FloatArray:
        """Return the mean reflectance factor of the samples, shape (n,). [1]"""
        return self.samples.resample(grid_nm).mean(axis=0)

    def clutter_factor(self, grid_nm: ArrayLike) -> FloatArray:
        """Return rows whose product gives the covariance of the samples.

        The covariance of k samples has rank k - 1 at most, so these few rows carry it whole; clutter
        variance through any chain of weights v is ``|rows @ v|**2``.

        Parameters
        ----------
        grid_nm : (n,) array
            [nm]

        Returns
        -------
        (r, n) array
            ``rows.T @ rows`` is the sample covariance with divisor k - 1, times the squared spread factor; r = 0
            for a single sample.
        """
        grid = np.ascontiguousarray(grid_nm, dtype=np.float64)
        rows = _spread_rows(self.samples, grid.tobytes())
        return self.spread_factor * rows if self.spread_factor > 0 else rows[:0]

    def check(self) -> None:
        """Read the samples now."""
        _ = self.samples

    def selectable(self) -> dict[str, Any]:
        """Fields, with the number of samples."""
        return {**super().selectable(), "sample_count": lambda: len(self.samples.values)}


@lru_cache(maxsize=256)
def _spread_rows(samples: Spectrum, grid: bytes) -> FloatArray:
    """Rows of `Surface.clutter_factor` as measured, worked out once for problems that share surfaces and grid."""
    values = samples.resample(np.frombuffer(grid))
    if len(values) < 2:
        return np.zeros((0, values.shape[-1]))
    centred = (values - values.mean(axis=0)) / np.sqrt(len(values) - 1)
    _, singular, rows = np.linalg.svd(centred, full_matrices=False)
    kept = singular > CLUTTER_CUTOFF * max(singular[0], np.finfo(float).tiny)
    found = singular[kept, np.newaxis] * rows[kept]
    found.flags.writeable = False
    return found
