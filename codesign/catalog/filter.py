"""Optical filters: measured curves, edge models, glass, neutral density and stacks."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, ClassVar, Literal, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field, model_validator

from codesign.catalog.common import Part, check_share, percent_factor
from codesign.errors import nearest
from codesign.physics import filters as model
from codesign.spectra import Spectrum

if TYPE_CHECKING:
    from codesign.catalog.loader import Catalog

FloatArray = NDArray[np.float64]
Transmittance = Callable[[FloatArray], FloatArray]

FilterKind = Literal["curve", "bandpass", "longpass", "shortpass", "neutral", "glass", "stack", "none"]

_EDGE = frozenset({"edge_width_nm", "peak_transmittance", "blocking_od"})
_BLOCKED_RANGE = frozenset({"blocking_from_nm", "blocking_to_nm"})
_TILT = frozenset({"effective_index", "shift_nm"})
# kind → (fields it needs, fields it may have)
KIND_FIELDS: Mapping[str, tuple[frozenset[str], frozenset[str]]] = {
    "curve": (frozenset({"curve", "unit"}), frozenset({"column"}) | _TILT),
    "bandpass": (frozenset({"center_nm", "fwhm_nm"}) | _EDGE, _BLOCKED_RANGE | _TILT),
    "longpass": (frozenset({"cut_nm"}) | _EDGE, _BLOCKED_RANGE | _TILT),
    "shortpass": (frozenset({"cut_nm"}) | _EDGE, _BLOCKED_RANGE | _TILT),
    "neutral": (frozenset({"optical_density"}), frozenset()),
    "glass": (
        frozenset({"curve", "unit", "reference_thickness_mm", "thickness_mm", "refractive_index"}),
        frozenset({"column", "shift_nm"}),
    ),
    "stack": (frozenset({"parts"}), frozenset()),
    "none": (frozenset(), frozenset()),
}


class Filter(Part):
    """An optical filter in front of the sensor; ``kind`` says which fields describe it.

    Interference types shift to shorter waves with tilt as their effective index says; without one the
    filter is taken as independent of angle, as absorbing and neutral filters nearly are.
    """

    table_name: ClassVar[str] = "filter"

    kind: FilterKind = Field(description="how the filter is described")
    curve: str | None = Field(
        min_length=1,
        default=None,
        description="CSV with wavelength_nm and transmittance (for glass: internal transmittance)",
    )
    column: str | None = Field(default=None, description="column of the curve file, when it has several")
    unit: Literal["percent", "fraction"] | None = Field(default=None, description="unit of the curve")
    center_nm: float | None = Field(default=None, ge=150, le=20000, description="middle of the half-peak points [nm]")
    fwhm_nm: float | None = Field(default=None, gt=0, description="full width at half maximum [nm]")
    cut_nm: float | None = Field(default=None, ge=150, le=20000, description="wavelength of half the peak [nm]")
    edge_width_nm: float | None = Field(default=None, gt=0, description="10 to 90 % width of an edge [nm]")
    peak_transmittance: float | None = Field(
        default=None, gt=0, le=1, description="fraction, 0 to 1; divide percent by 100"
    )
    blocking_od: float | None = Field(default=None, gt=0, le=10, description="optical density out of band")
    blocking_from_nm: float | None = Field(
        default=None, gt=0, description="start of the blocked range; open at its peak below [nm]"
    )
    blocking_to_nm: float | None = Field(
        default=None, gt=0, description="end of the blocked range; open at its peak above [nm]"
    )
    optical_density: float | None = Field(default=None, ge=0, le=10, description="-log10 of transmittance")
    reference_thickness_mm: float | None = Field(default=None, gt=0, description="thickness of the curve [mm]")
    thickness_mm: float | None = Field(default=None, gt=0, description="thickness of this piece [mm]")
    refractive_index: float | None = Field(default=None, ge=1, le=4, description="for the loss at both faces")
    parts: tuple[str, ...] | None = Field(default=None, min_length=1, description="ids of the stacked filters")
    effective_index: float | None = Field(
        default=None,
        ge=1,
        le=5,
        description="effective index of the tilt law; leave out for absorbing filters",
    )
    shift_nm: float | None = Field(
        default=None,
        ge=-100,
        le=100,
        description="how far this piece lies above its stated wavelengths [nm]; the ends of a curve are held",
    )

    @model_validator(mode="after")
    def _check(self) -> Self:
        needed, optional = KIND_FIELDS[self.kind]
        own = type(self).model_fields.keys() - Part.model_fields.keys() - {"kind"}
        given = {name for name in own if getattr(self, name) is not None}
        missing = sorted(needed - given)
        if missing:
            raise ValueError(f"{missing[0]} is missing; kind '{self.kind}' needs {', '.join(sorted(needed))}")
        extra = sorted(given - needed - optional)
        if extra:
            allowed = ", ".join(sorted(needed | optional)) or "no further keys"
            raise ValueError(
                f"{extra[0]} is {getattr(self, extra[0])!r}, not used by kind '{self.kind}'; it takes {allowed}"
            )
        if self.kind == "bandpass" and self.fwhm_nm >= 2 * self.center_nm:
            raise ValueError(f"fwhm_nm is {self.fwhm_nm:g}, must be below twice center_nm {self.center_nm:g}")
        if self.kind == "bandpass" and self.edge_width_nm > self.fwhm_nm:
            raise ValueError(f"edge_width_nm is {self.edge_width_nm:g}, must be <= fwhm_nm {self.fwhm_nm:g}")
        lo, hi = self._blocked_range()
        if lo >= hi:
            raise ValueError(f"blocking_from_nm is {lo:g}, must be below blocking_to_nm {hi:g}")
        return self

    def transmittance(
        self,
        grid_nm: ArrayLike,
        angles_deg: ArrayLike = (0.0,),
        weights: ArrayLike = (1.0,),
        catalog: Catalog | None = None,
    ) -> FloatArray:
        """Return the transmittance averaged over a cone of rays.

        Parameters
        ----------
        grid_nm : (n,) array
            [nm]
        angles_deg, weights : (k,) arrays
            Angles of incidence and their weights, sum 1; normal incidence by default. [deg], [1]
        catalog : Catalog, optional
            Where the parts of a stack are found.

        Returns
        -------
        (n,) array
            Fraction, 0 to 1. [1]

        Raises
        ------
        CoverageError
            When a measured curve does not cover the grid.
        """
        grid = np.asarray(grid_nm, dtype=np.float64)
        angles, weights = np.asarray(angles_deg, dtype=np.float64), np.asarray(weights, dtype=np.float64)
        if self.kind == "stack":
            return model.stack_transmittance(
                [part.transmittance(grid, angles, weights, catalog) for part in self._stacked(catalog)]
            )
        if self.kind == "curve":
            return self._curve_transmittance(grid, angles, weights)
        normal = self._normal_incidence()
        if self.effective_index is None:
            return normal(grid)
        # A ray at an angle meets the filter as a normal ray of longer wavelength does.
        shifted = grid / np.asarray(model.tilt_factor(angles, self.effective_index))[:, np.newaxis]
        return weights @ normal(shifted)

    def range(self, catalog: Catalog | None = None) -> tuple[float, float] | None:
        """Return the wavelengths covered, or None where a formula covers all. [nm]"""
        if self.kind == "stack":
            ranges = [part.range(catalog) for part in self._stacked(catalog)]
            known = [r for r in ranges if r is not None]
            return (max(r[0] for r in known), min(r[1] for r in known)) if known else None
        return self._measured().range if self.curve else None

    def check(self) -> None:
        """Read the curve now."""
        if self.curve:
            self._measured()

    def check_stack(self, filters: Mapping[str, Filter], above: tuple[str, ...] = ()) -> None:
        """Check that all stacked filters exist and that no stack holds itself."""
        if self.id in above:
            raise self.error(f"parts {' > '.join((*above, self.id))} go in a circle; remove one")
        for name in self.parts or ():
            if name not in filters:
                raise self.error(f"parts names {name!r}, no such filter; {nearest(name, filters)}")
            filters[name].check_stack(filters, (*above, self.id))

    def _stacked(self, catalog: Catalog | None) -> list[Filter]:
        if catalog is None:
            raise self.error(f"parts are {', '.join(self.parts or ())}: pass the catalog that holds them")
        return [catalog.part("filter", name) for name in self.parts or ()]

    def _measured(self) -> Spectrum:
        """Curve as fractions, checked against its stated unit."""
        table = self.read_single_curve(self.curve or "", self.column)
        check_share(table, self.unit or "fraction")
        curve = table.column(table.names[0])
        return Spectrum(curve.wavelength_nm, curve.values * percent_factor(self.unit or "fraction"), curve.label)

    def _curve_transmittance(self, grid: FloatArray, angles: FloatArray, weights: FloatArray) -> FloatArray:
        curve = self._measured()
        if self.effective_index is None and not self.shift_nm:
            return curve.resample(grid)
        if not curve.covers(grid.min(), grid.max()):
            curve.resample(grid)  # raises with both ranges
        own_nm = curve.wavelength_nm + (self.shift_nm or 0.0)
        if self.effective_index is None:
            return np.interp(grid, own_nm, curve.values)
        return model.tilted_transmittance(own_nm, curve.values, grid, angles, weights, self.effective_index)

    def blocked_nm(self) -> tuple[float, float]:
        """Return the range for which this piece's blocking is stated; beyond it the filter is taken as open. [nm]"""
        low, high = self._blocked_range()
        shift = self.shift_nm or 0.0
        return low + shift, high + shift

    def _blocked_range(self) -> tuple[float, float]:
        lo = 0.0 if self.blocking_from_nm is None else self.blocking_from_nm
        hi = np.inf if self.blocking_to_nm is None else self.blocking_to_nm
        return lo, hi

    def _normal_incidence(self) -> Transmittance:
        """Return the transmittance at normal incidence as a function of wavelength."""
        stated, shift = self._stated_normal_incidence(), self.shift_nm or 0.0
        return (lambda wavelength: stated(wavelength - shift)) if shift else stated

    def _stated_normal_incidence(self) -> Transmittance:
        if self.kind == "none":
            return np.ones_like
        if self.kind == "neutral":
            return lambda wavelength: np.full(wavelength.shape, float(model.neutral(self.optical_density)))
        if self.kind == "glass":
            return self._glass
        edge = {"edge_width_nm": self.edge_width_nm, "peak": self.peak_transmittance}
        edge["blocking_od"] = self.blocking_od
        if self.kind == "bandpass":
            return self._opened(lambda x: model.bandpass(x, self.center_nm, self.fwhm_nm, **edge))
        formula = model.longpass if self.kind == "longpass" else model.shortpass
        return self._opened(lambda x: formula(x, self.cut_nm, **edge))

    def _glass(self, wavelength: FloatArray) -> FloatArray:
        # A shifted piece is asked for a little outside its curve.
        internal = self._measured().resample(wavelength, outside="edge" if self.shift_nm else "error")
        ratio = self.thickness_mm / self.reference_thickness_mm
        return model.glass_transmittance(internal, ratio, self.refractive_index)

    def _opened(self, blocked: Transmittance) -> Transmittance:
        """Outside its blocked range a filter is taken as open: the safe assumption about leaks."""
        lo, hi = self._blocked_range()

        def transmittance(wavelength: FloatArray) -> FloatArray:
            inside = (wavelength >= lo) & (wavelength <= hi)
            return np.where(inside, blocked(wavelength), self.peak_transmittance)

        return transmittance
